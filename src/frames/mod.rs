//! Files of frames: what is in them, their times, their pixels; and the tables and images that
//! leave the program.
//!
//! | file | what |
//! |------|------|
//! | `source`, `survey`, `tiles` | open a path, and nothing but a sound FITS file |
//! | `image`, `keywords` | one image or cube, read plane by plane, and its header |
//! | `time` | when each plane was exposed |
//! | `sequence` | many files as one list of frames |
//! | `table` | a binary table, column by column |
//! | `write`, `card`, `column` | FITS files, whole or not at all |
//! | `ecsv` | small tables as text |
//! | `raw` | the one file that calls the FITS library |
//!
//! Nothing here keeps more than one plane in memory. File names are taken literally: brackets,
//! blanks, signs and letters of any alphabet mean nothing to this module.

mod card;
mod column;
mod digest;
mod ecsv;
mod error;
mod header;
mod image;
mod keywords;
#[expect(
    unsafe_code,
    reason = "calls the C library; every call checks its status"
)]
mod raw;
mod sequence;
mod source;
mod survey;
mod table;
mod tiles;
#[cfg(test)]
mod tests;
mod time;
mod write;

pub use card::{Card, Value};
pub use column::{Column, Values};
pub use digest::{sha256, sha256_of};
pub use ecsv::{ecsv_text, write_ecsv};
pub use error::FitsError;
pub use image::ImageFile;
pub use sequence::{FrameRef, Reader, Sequence, list};
pub use table::TableFile;
pub use time::{FrameTime, HeaderMap, frame_times};
pub use write::{CubeShape, FitsWriter, write_whole};
