//! The figures: each drawn for a wide and for a narrow screen from the same numbers.

mod answer;
mod budget;
mod correlation;
pub(crate) mod forest;
mod drift;
mod frames;
mod harmonics;
mod kept;
mod nulls;
pub(crate) mod plan;
mod power;
mod refraction;
mod ring;
mod ring_marks;
mod scan;
mod seeing;
mod separation;
pub(crate) mod season;

use super::html::escape;
use super::preview::Preview;
use super::svg::Canvas;
use crate::result::record::{Record, Traces};

/// A figure with its words and the numbers behind it.
#[derive(Clone, Debug)]
pub(crate) struct Plate {
    /// Stem of the file, and anchor on the page.
    pub(crate) stem: &'static str,
    /// What it shows, short.
    pub(crate) title: String,
    /// What it says, in words.
    pub(crate) finding: String,
    /// How to read it.
    pub(crate) reading: String,
    /// The drawing for wide screens and paper.
    wide: Canvas,
    /// The drawing for narrow screens.
    narrow: Canvas,
    /// The numbers, as ready HTML.
    pub(crate) table: String,
}

/// What a drawing has to know of its place.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Room<'a> {
    /// Prefix of the ids.
    id: &'a str,
    /// Width to fill.
    width_px: f64,
    /// Whether the screen is a narrow one.
    narrow: bool,
}

/// Words of a figure.
struct Words {
    title: &'static str,
    finding: String,
    reading: String,
    table: String,
}

/// Class of the figures on the first screen.
pub(crate) const FIRST: &str = "lead";

/// Natural width of a figure on wide screens.
const WIDE_PX: f64 = 720.0;

/// Natural width of a figure on narrow screens.
const NARROW_PX: f64 = 328.0;

/// Draws a figure twice. `None` where there is nothing to draw.
fn plate(
    stem: &'static str,
    wide_px: f64,
    words: Words,
    draw: impl Fn(Room) -> Option<Canvas>,
) -> Option<Plate> {
    let narrow_id = format!("{stem}-n");
    let wide = draw(Room {
        id: stem,
        width_px: wide_px,
        narrow: false,
    })?;
    let narrow = draw(Room {
        id: &narrow_id,
        width_px: NARROW_PX,
        narrow: true,
    })?;
    Some(Plate {
        stem,
        title: words.title.to_owned(),
        finding: words.finding,
        reading: words.reading,
        wide,
        narrow,
        table: words.table,
    })
}

/// All figures that the record has numbers for, in the order of the page.
pub(crate) fn all(record: &Record, traces: &Traces, preview: Option<&Preview>) -> Vec<Plate> {
    [
        ring::plate(record, traces, preview),
        answer::plate(record),
        seeing::plate(record, traces),
        power::plate(record),
        frames::plate(record, traces),
        harmonics::plate(record),
        budget::plate(record),
        refraction::plate(record),
        kept::plate(record),
        nulls::plate(record),
        separation::plate(record),
        correlation::plate(record),
        drift::plate(record),
        scan::plate(record),
    ]
    .into_iter()
    .flatten()
    .collect()
}

impl Plate {
    /// The figure in the page, with its caption and its numbers.
    pub(crate) fn html(&self, class: &str) -> String {
        let desc = format!("{} {}", self.finding, self.reading);
        let reading = format!("<p>{}</p>", super::html::number(&self.reading));
        // The first screen is for the answer: how to read it waits behind a line.
        let (beside, below) = if class == FIRST {
            let folded = "<details class=\"data small\"><summary>How to read it</summary>";
            (
                String::new(),
                format!(
                    "<div class=\"folds\">{folded}{reading}</details>\n{}</div>",
                    self.table
                ),
            )
        } else {
            (reading, self.table.clone())
        };
        format!(
            "<figure class=\"{class}\" id=\"{stem}\" \
             aria-labelledby=\"{stem}-caption\">\n<div>{}{}</div>\n<figcaption \
             id=\"{stem}-caption\"><strong>{}</strong><p>{}</p>{beside}</figcaption>\n</figure>\n{below}",
            self.wide.inline("wide", &self.title, &desc),
            self.narrow.inline("narrow", &self.title, &desc),
            escape(&self.title),
            super::html::number(&self.finding),
            stem = self.stem,
        )
    }

    /// The figure as a file of its own.
    pub(crate) fn alone(&self, preview: Option<&Preview>) -> String {
        let desc = format!("{} {}", self.finding, self.reading);
        let defs = if self.stem == ring::STEM {
            preview.map(Preview::definition).unwrap_or_default()
        } else {
            String::new()
        };
        self.wide.alone(&self.title, &desc, &defs)
    }
}
