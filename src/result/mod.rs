//! The records of a result.

pub mod comparison;
pub mod record;
