//! Method, provenance and safety.

use std::fmt::Write as _;

use crate::report::html::{Column, Table, escape};
use crate::result::record::Record;

/// The method in words, step by step.
const STEPS: [(&str, &str); 8] = [
    (
        "Limb of each frame.",
        "The raw pixels of an annulus are fitted sector by sector with a pixel-integrated model of \
         the edge: published limb darkening [1], an edge of finite thickness, and the blur of \
         telescope, air and guiding. Position, brightness, background and width are free, so that \
         blur in one direction is not taken for shape. No pixel is interpolated.",
    ),
    (
        "Refraction.",
        "Each limb point is carried from apparent to true direction at the frame’s own time, \
         pressure, temperature and humidity. The refractive index follows [2]; the refraction \
         integral is the one of [3] through a layered atmosphere.",
    ),
    (
        "Seeing.",
        "Fried’s parameter [4] comes from the motion of the limb and from its width, each with its \
         own error, with the power laws of turbulence of [5] and a finite outer scale as in [6]. \
         From it follow the turbulence floor and the number of independent frames.",
    ),
    (
        "Selection.",
        "Frames are judged by a measure that the low harmonics of the limb cannot change. All usable \
         frames count, weighted by their seeing, unless keeping fewer lowers the error.",
    ),
    (
        "Shape.",
        "Sun, instrument and air are fitted together over all sequences: the Sun is fixed to its \
         axis, the instrument to the detector, the air to the vertical. The singular values of the \
         design say what can be told apart; what cannot is refused by name.",
    ),
    (
        "Stack.",
        "The same frames are stacked on a grid without refraction, and the limbs of several stacks \
         go through the same fit. The answer is always the frame-by-frame route; choosing the \
         smaller of two errors would spoil the coverage of the intervals.",
    ),
    (
        "Errors.",
        "Random errors come from the data, with the frames’ correlation in time. Systematic errors \
         come from each input’s uncertainty carried through the whole chain, shared inputs kept \
         correlated. They are combined and quoted as in [7].",
    ),
    (
        "Footing.",
        "Radius and shape are those of the unblurred limb’s inflection point at 1 AU, with the tilt \
         B0 of the solar axis taken out. Sigma is half the width of the 68 percent interval.",
    ),
];

/// References in the order of their numbers.
const REFERENCES: [&str; 7] = [
    "H. Neckel, “Analytical reference functions F(λ) for the Sun’s limb darkening and its absolute \
     continuum intensities (λλ 300 to 1100 nm)”, Solar Physics 229, 13 (2005).",
    "P. E. Ciddor, “Refractive index of air: new equations for the visible and near infrared”, \
     Applied Optics 35, 1566 (1996).",
    "L. H. Auer and E. M. Standish, “Astronomical refraction: computational method for all zenith \
     angles”, Astronomical Journal 119, 2472 (2000).",
    "D. L. Fried, “Optical resolution through a randomly inhomogeneous medium for very long and very \
     short exposures”, Journal of the Optical Society of America 56, 1372 (1966).",
    "F. Roddier, “The effects of atmospheric turbulence in optical astronomy”, Progress in Optics 19, \
     281 (1981).",
    "R. Conan et al., “Analytical solution for the covariance and for the decorrelation time of the \
     angle of arrival of a wave front corrugated by atmospheric turbulence”, Journal of the Optical \
     Society of America A 17, 1807 (2000).",
    "“Evaluation of measurement data: Guide to the expression of uncertainty in measurement”, JCGM \
     100 (2008).",
];

/// How the answer was obtained, with references.
pub(super) fn method(out: &mut String) {
    out.push_str("<ol>\n");
    for (name, text) in STEPS {
        let _ = writeln!(
            out,
            "<li><strong>{}</strong> {}</li>",
            escape(name),
            escape(text)
        );
    }
    out.push_str("</ol>\n<h3>References</h3>\n<ol>\n");
    for reference in REFERENCES {
        let _ = writeln!(out, "<li>{}</li>", escape(reference));
    }
    out.push_str("</ol>\n");
}

/// Files, settings, version and seed.
pub(super) fn provenance(out: &mut String, record: &Record) {
    let _ = writeln!(
        out,
        "<p>truelimb {}, seed of everything random {}. The same files, settings and seed give the \
         same result.</p>",
        escape(&record.program_version),
        record.seed
    );
    let mut files = Table::new(
        "Files that the result was made from",
        &[
            Column::Text("File"),
            Column::Number("Bytes"),
            Column::Text("SHA-256"),
        ],
    );
    for file in &record.created_from {
        files.row([
            file.path.clone(),
            file.bytes.to_string(),
            file.sha256.clone(),
        ]);
    }
    if files.is_empty() {
        out.push_str("<p>No source file is recorded.</p>\n");
    } else {
        out.push_str(&files.folded("Source files and checksums"));
    }
    let settings = serde_json::to_string_pretty(&record.settings)
        .unwrap_or_else(|_| record.settings.to_string());
    let _ = write!(
        out,
        "<details class=\"data\"><summary>Settings as resolved</summary>\n<pre \
         tabindex=\"0\">{}</pre></details>\n",
        escape(&settings)
    );
}

/// What must not be forgotten where the light comes in.
pub(super) fn safety(out: &mut String) {
    out.push_str(
        "<div class=\"care\">\n<p>Optics pointed at the Sun can blind and burn within a moment.</p>\n\
         <ul>\n\
         <li>Put a certified filter over the full aperture, before any optics. Larger apertures need \
         a heat-rejecting entrance that was designed for the instrument.</li>\n\
         <li>Never look through an unfiltered finder. Cover every opening that is not in use.</li>\n\
         <li>Never leave the instrument unattended while sunlight can reach it.</li>\n\
         <li>With tracking stopped, for a drift or a scan, the concentrated image walks over stop, \
         tube and baffles: use the filter or a heat-proof stop, and keep hands and cables out of the \
         beam.</li>\n\
         <li>Local codes, the station’s rules and its qualified staff come first.</li>\n\
         </ul>\n</div>\n",
    );
}
