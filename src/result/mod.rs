//! The records of a result.

pub mod air;
pub mod comparison;
pub mod record;
