//! What the program found, in the form in which it is written to files.

pub mod air;
pub mod comparison;
pub mod combined;
pub mod record;
pub mod plan;
pub mod recovery;
mod schema;

pub use schema::schema;
