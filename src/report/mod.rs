//! The report: one page that an observer reads in a minute and a reviewer in an hour.
//!
//! [`render`] turns a [`Record`] and its [`Traces`] into one HTML text that opens offline, with no
//! script and no outside file, and into the same figures as stand-alone SVG. It reads no file, no
//! clock and no environment: the same input gives the same bytes. Numbers are printed to two
//! significant digits of their standard uncertainty. Text that came from a file is escaped.
//!
//! The page shows what was measured and no more: a missing value appears with its reason.

mod axis;
mod combined;
mod comparison;
mod figures;
mod html;
mod keys;
mod numbers;
mod page;
mod plan;
mod preview;
#[cfg(test)]
mod sample;
mod sections;
mod summary;
mod svg;
#[cfg(test)]
mod tests;
mod theme;
mod timeline;

use crate::result::record::{Record, Traces};

pub use combined::render_combined;
pub use comparison::{
    ComparisonSection, render_comparison, section_of_comparison, sentences_of_comparison,
};
pub use plan::render_plan;
pub use summary::summary_sentence;

/// Why no report could be drawn.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum ReportError {
    /// The columns of the mean limb do not belong together.
    #[error(
        "the mean limb has {angles} position angles but {found} values of {column}; they must be \
         equally many"
    )]
    LimbColumns {
        /// Which column.
        column: &'static str,
        /// Position angles.
        angles: usize,
        /// Values in the column.
        found: usize,
    },
    /// The preview has no disk.
    #[error(
        "the preview's disk has a radius of {found_px} px; it must be positive and at most \
         {allowed_px} px"
    )]
    PreviewRadius {
        /// Radius found.
        found_px: f64,
        /// Largest radius that makes sense for the picture.
        allowed_px: f64,
    },
    /// The preview could not be written as a PNG.
    #[error("the preview picture could not be encoded as PNG")]
    Preview {
        /// What the encoder said.
        #[from]
        source: png::EncodingError,
    },
}

/// The finished report.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Rendered {
    /// The page, complete in itself.
    pub html: String,
    /// File stem and text of each figure as a stand-alone SVG, in the order of the page.
    pub figures: Vec<(String, String)>,
}

/// Draws the report.
///
/// # Errors
///
/// [`ReportError::LimbColumns`] when the columns of the mean limb differ in length,
/// [`ReportError::PreviewRadius`] when the preview has no usable disk, and
/// [`ReportError::Preview`] when it cannot be encoded.
pub fn render(record: &Record, traces: &Traces) -> Result<Rendered, ReportError> {
    check_limb(traces)?;
    let preview = preview::encode(traces)?;
    let plates = figures::all(record, traces, preview.as_ref());
    let html = page::document(record, traces, &plates, preview.as_ref());
    let figures = plates
        .iter()
        .map(|plate| (plate.stem.to_owned(), plate.alone(preview.as_ref())))
        .collect();
    Ok(Rendered { html, figures })
}

/// Refuses a mean limb whose columns differ in length.
fn check_limb(traces: &Traces) -> Result<(), ReportError> {
    let limb = &traces.limb;
    let angles = limb.position_angle_deg.len();
    let columns = [
        ("residual_mas", limb.residual_mas.len()),
        ("sigma_mas", limb.sigma_mas.len()),
        ("model_mas", limb.model_mas.len()),
    ];
    for (column, found) in columns {
        if found != angles {
            return Err(ReportError::LimbColumns {
                column,
                angles,
                found,
            });
        }
    }
    Ok(())
}
