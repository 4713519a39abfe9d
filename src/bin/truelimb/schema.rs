//! `truelimb schema`: what the two files of the program may hold, for editors and other programs.

use crate::Ending;
use crate::arguments::{Described, Schema};
use crate::commands::{Failure, json, print};
use truelimb::{result, session};

/// `truelimb schema`.
pub(crate) fn schema(it: &Schema) -> Result<Ending, Failure> {
    let schema = match it.which {
        Described::Session => session::schema(),
        Described::Result => result::schema(),
    };
    print(&json(&schema)?);
    Ok(Ending::Done)
}
