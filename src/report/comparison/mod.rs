//! The page of a comparison, and the same as a section of a session's report.

mod tables;

use std::fmt::Write as _;

use super::figures::{Plate, forest};
use super::html::{escape, number, paragraph};
use super::{Rendered, numbers, page};
use crate::result::comparison::{Comparison, DifferenceRecord, QuantityComparison};

/// A comparison as a section of another page.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ComparisonSection {
    /// The section's content, without heading.
    pub html: String,
    /// File stem and text of its figure as a stand-alone SVG; none without values.
    pub figure: Option<(String, String)>,
}

/// Draws the page of a comparison: complete in itself, no script, no outside file.
pub fn render_comparison(comparison: &Comparison) -> Rendered {
    let plate = forest::plate(comparison);
    let mut out = page::head("Ground and space on one footing");
    out.push_str(
        "<div class=\"page\">\n<header class=\"mast\">\n<h1>Ground and space on one footing</h1>\n",
    );
    let footing = &comparison.footing;
    let blur = footing.blur_fwhm_arcsec.map_or(String::new(), |it| {
        format!(", blurred to {} arcsec", numbers::significant(it, 3))
    });
    let _ = write!(
        out,
        "<p class=\"when\">{}</p>\n</header>\n<main id=\"main\">\n",
        escape(&format!(
            "1 AU, B0 = 0, {}, {} nm{blur}",
            footing.definition,
            numbers::significant(footing.wavelength_nm, 4)
        ))
    );
    for it in sentences_of_comparison(comparison) {
        let _ = writeln!(out, "<p class=\"sentence\">{}</p>", number(&it));
    }
    content(&mut out, comparison, plate.as_ref());
    let _ = write!(
        out,
        "</main>\n<footer><p>Made by truelimb {} from <code>comparison.json</code> (layout {}). An \
         uncertainty after ± is one standard uncertainty.</p></footer>\n</div>\n</body>\n</html>\n",
        escape(&comparison.program_version),
        comparison.schema_version
    );
    Rendered {
        html: out,
        figures: figure(plate.as_ref()).into_iter().collect(),
    }
}

/// The same content for a section of a session's report.
pub fn section_of_comparison(comparison: &Comparison) -> ComparisonSection {
    let plate = forest::plate(comparison);
    let mut html = String::new();
    content(&mut html, comparison, plate.as_ref());
    ComparisonSection {
        html,
        figure: figure(plate.as_ref()),
    }
}

fn figure(plate: Option<&Plate>) -> Option<(String, String)> {
    plate.map(|it| (it.stem.to_owned(), it.alone(None)))
}

fn content(out: &mut String, comparison: &Comparison, plate: Option<&Plate>) {
    page::notes(out, &comparison.warnings, "comparison-notes-h");
    if let Some(plate) = plate {
        out.push_str(&plate.html("plate"));
    }
    for it in &comparison.quantities {
        let _ = write!(
            out,
            "<section id=\"comparison-{0}\" aria-labelledby=\"comparison-{0}-h\">\n<h2 \
             id=\"comparison-{0}-h\">{1}</h2>\n",
            escape(&it.quantity),
            if it.quantity == "radius" {
                "Radius"
            } else {
                "Oblateness"
            }
        );
        tables::quantity(out, comparison, it);
        out.push_str("</section>\n");
    }
    out.push_str(
        "<section id=\"comparison-method\" aria-labelledby=\"comparison-method-h\">\n<h2 \
         id=\"comparison-method-h\">How it was compared</h2>\n",
    );
    for it in METHOD {
        out.push_str(&paragraph(it));
    }
    tables::provenance(out, comparison);
    out.push_str("</section>\n");
}

const METHOD: [&str; 5] = [
    "Every value is carried to the same footing step by step; a step's uncertainty is its own, and the total of a value adds what steps share with their sign, so that it may be smaller than the steps suggest.",
    "Two values of one group share the smaller of their systematic errors; all values share the limb darkening, the thickness of the Sun's edge and the height of the limb by wavelength. Means, differences and degrees of equivalence are by generalised least squares with these covariances.",
    "Dark uncertainty is the standard deviation, common to all values of a mean, that their stated uncertainties leave unexplained. What all values share cannot be seen in their scatter and is in the error of the mean.",
    "The limb's height by wavelength is not corrected: the full size of the shift expected from the opacity is carried as uncertainty.",
    "The strongest footing is the same extraction on both sides: images from space, reduced with [weather] none = true, go through the same fit and come here as a second result.",
];

/// What the comparison says, a sentence a quantity.
pub fn sentences_of_comparison(comparison: &Comparison) -> Vec<String> {
    comparison.quantities.iter().map(sentence).collect()
}

fn sentence(of: &QuantityComparison) -> String {
    let name = if of.quantity == "radius" {
        "Radius"
    } else {
        "Oblateness"
    };
    if let Some(it) = &of.this_result {
        let share = numbers::percent(it.reverse.as_far);
        return format!(
            "{name}: {}; had space been the truth, {share} percent of such sessions would have reported as far from it.",
            difference(&it.against_space)
        );
    }
    if of.ground_minus_space.difference.value.is_some() {
        return format!("{name}: {}.", difference(&of.ground_minus_space));
    }
    let reason = of.ground_minus_space.difference.reason.as_deref();
    format!(
        "{name}: {} on one footing; ground and space are not compared, because {}.",
        numbers::plural(of.places.len(), "value"),
        reason.unwrap_or("there is no difference")
    )
}

/// A difference in words, with its interval.
fn difference(it: &DifferenceRecord) -> String {
    let value = numbers::quantity(&it.difference).unwrap_or_else(|| "not known".to_owned());
    let interval = it.interval_95_mas.map_or(String::new(), |interval| {
        format!(
            " (95 %: {})",
            numbers::interval(interval, it.difference.sigma)
        )
    });
    format!("{} is {value}{interval}", it.what)
}
