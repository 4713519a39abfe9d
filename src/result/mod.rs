//! The records of a result.

pub mod record;
mod schema;

pub use schema::schema;
