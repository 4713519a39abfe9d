//! The records of a result.

pub mod record;
