//! The drawing layer: a canvas that collects SVG elements.
//!
//! Colours and line widths are classes of [`theme`], so that one drawing serves light
//! and dark, page and paper.

use std::fmt::Write as _;

use super::html::{escape, number};
use super::theme;

/// Where a text hangs on its point.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Anchor {
    /// The text starts there.
    Start,
    /// The text is centred there.
    Middle,
    /// The text ends there.
    End,
}

/// A drawing in progress. Lengths are pixels at the natural size, y downwards.
#[derive(Clone, Debug)]
pub(crate) struct Canvas {
    /// Prefix of every id inside.
    pub(crate) id: String,
    /// Natural width.
    pub(crate) width_px: f64,
    /// Natural height.
    pub(crate) height_px: f64,
    body: String,
}

/// A coordinate to a tenth of a pixel.
pub(crate) fn coordinate(value_px: f64) -> String {
    let tenths = (value_px * 10.0).round();
    let text = format!("{:.1}", if tenths == 0.0 { 0.0 } else { tenths / 10.0 });
    text.strip_suffix(".0").map_or(text.clone(), str::to_owned)
}

/// A path through points, open.
pub(crate) fn polyline(points: impl IntoIterator<Item = (f64, f64)>) -> String {
    let mut path = String::new();
    for (x_px, y_px) in points {
        path.push(if path.is_empty() { 'M' } else { 'L' });
        let _ = write!(path, "{} {}", coordinate(x_px), coordinate(y_px));
    }
    path
}

/// A path of dots: strokes of no length, which a round cap makes visible.
pub(crate) fn dots(points: impl IntoIterator<Item = (f64, f64)>) -> String {
    let mut path = String::new();
    for (x_px, y_px) in points {
        let _ = write!(path, "M{} {}h.01", coordinate(x_px), coordinate(y_px));
    }
    path
}

/// A path of short upright strokes, the mark of frames that were not kept.
pub(crate) fn strokes(points: impl IntoIterator<Item = (f64, f64)>) -> String {
    let mut path = String::new();
    for (x_px, y_px) in points {
        let _ = write!(path, "M{} {}v6", coordinate(x_px), coordinate(y_px - 3.0));
    }
    path
}

/// The text cut to fit a width, by the mean width of a letter of the figures' type.
pub(crate) fn fitted(text: &str, width_px: f64) -> String {
    const LETTER_PX: f64 = 6.7;
    let most = (width_px / LETTER_PX).max(2.0) as usize;
    if text.chars().count() <= most {
        return text.to_owned();
    }
    text.chars().take(most - 1).chain(['…']).collect()
}

impl Canvas {
    /// An empty canvas.
    pub(crate) fn new(id: &str, width_px: f64, height_px: f64) -> Self {
        Self {
            id: id.to_owned(),
            width_px,
            height_px,
            body: String::new(),
        }
    }

    /// A straight line from `a` to `b`.
    pub(crate) fn line(&mut self, a: (f64, f64), b: (f64, f64), class: &str) {
        let _ = writeln!(
            self.body,
            "<path class=\"{class}\" d=\"M{} {}L{} {}\"/>",
            coordinate(a.0),
            coordinate(a.1),
            coordinate(b.0),
            coordinate(b.1)
        );
    }

    /// A box by its upper left corner and its size.
    pub(crate) fn rect(&mut self, corner: (f64, f64), size: (f64, f64), class: &str) {
        let _ = writeln!(
            self.body,
            "<rect class=\"{class}\" x=\"{}\" y=\"{}\" width=\"{}\" height=\"{}\"/>",
            coordinate(corner.0),
            coordinate(corner.1),
            coordinate(size.0.max(0.0)),
            coordinate(size.1.max(0.0))
        );
    }

    /// A box filled by a pattern of this canvas.
    pub(crate) fn rect_with(&mut self, corner: (f64, f64), size: (f64, f64), pattern: &str) {
        let _ = writeln!(
            self.body,
            "<rect fill=\"url(#{}-{pattern})\" x=\"{}\" y=\"{}\" width=\"{}\" height=\"{}\"/>",
            self.id,
            coordinate(corner.0),
            coordinate(corner.1),
            coordinate(size.0.max(0.0)),
            coordinate(size.1.max(0.0))
        );
    }

    /// Defines the hatching used by [`rect_with`](Self::rect_with).
    pub(crate) fn define_hatch(&mut self, pattern: &str, class: &str) {
        let _ = writeln!(
            self.body,
            "<defs><pattern id=\"{}-{pattern}\" width=\"5\" height=\"5\" \
             patternUnits=\"userSpaceOnUse\" patternTransform=\"rotate(45)\">\
             <path class=\"{class}\" d=\"M1.25 0V5\"/></pattern></defs>",
            self.id
        );
    }

    /// A box with an opacity of its own, for maps.
    pub(crate) fn cell(&mut self, corner: (f64, f64), size: (f64, f64), class: &str, opacity: f64) {
        let _ = writeln!(
            self.body,
            "<rect class=\"{class}\" fill-opacity=\"{opacity:.2}\" x=\"{}\" y=\"{}\" width=\"{}\" \
             height=\"{}\"/>",
            coordinate(corner.0),
            coordinate(corner.1),
            coordinate(size.0),
            coordinate(size.1)
        );
    }

    /// A circle.
    pub(crate) fn circle(&mut self, centre: (f64, f64), radius_px: f64, class: &str) {
        let _ = writeln!(
            self.body,
            "<circle class=\"{class}\" cx=\"{}\" cy=\"{}\" r=\"{}\"/>",
            coordinate(centre.0),
            coordinate(centre.1),
            coordinate(radius_px)
        );
    }

    /// A square marker.
    pub(crate) fn square(&mut self, centre: (f64, f64), half_px: f64, class: &str) {
        self.rect(
            (centre.0 - half_px, centre.1 - half_px),
            (2.0 * half_px, 2.0 * half_px),
            class,
        );
    }

    /// A diamond marker.
    pub(crate) fn diamond(&mut self, centre: (f64, f64), half_px: f64, class: &str) {
        let (x, y) = centre;
        let mut path = polyline([
            (x, y - half_px),
            (x + half_px, y),
            (x, y + half_px),
            (x - half_px, y),
        ]);
        path.push('Z');
        self.path(&path, class);
    }

    /// A path.
    pub(crate) fn path(&mut self, d: &str, class: &str) {
        if !d.is_empty() {
            let _ = writeln!(self.body, "<path class=\"{class}\" d=\"{d}\"/>");
        }
    }

    /// A text; hyphens of negative numbers become minus signs.
    pub(crate) fn text(&mut self, at: (f64, f64), anchor: Anchor, class: &str, text: &str) {
        let anchor = match anchor {
            Anchor::Start => "",
            Anchor::Middle => " text-anchor=\"middle\"",
            Anchor::End => " text-anchor=\"end\"",
        };
        let _ = writeln!(
            self.body,
            "<text class=\"{class}\"{anchor} x=\"{}\" y=\"{}\">{}</text>",
            coordinate(at.0),
            coordinate(at.1),
            number(text)
        );
    }

    /// Ready markup, for what this layer does not know.
    pub(crate) fn raw(&mut self, markup: &str) {
        self.body.push_str(markup);
    }

    /// The drawing inside a page, which supplies the classes.
    pub(crate) fn inline(&self, class: &str, title: &str, desc: &str) -> String {
        let id = &self.id;
        format!(
            "<svg class=\"{class}\" role=\"img\" aria-labelledby=\"{id}-title {id}-desc\" \
             viewBox=\"0 0 {w} {h}\" width=\"{w}\" height=\"{h}\">\n<title \
             id=\"{id}-title\">{}</title>\n<desc id=\"{id}-desc\">{}</desc>\n{}</svg>\n",
            escape(title),
            escape(desc),
            self.body,
            w = coordinate(self.width_px),
            h = coordinate(self.height_px),
        )
    }

    /// The drawing as a file of its own.
    pub(crate) fn alone(&self, title: &str, desc: &str, defs: &str) -> String {
        const MARGIN_PX: f64 = 12.0;
        let id = &self.id;
        format!(
            "<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n<svg xmlns=\"http://www.w3.org/2000/svg\" \
             role=\"img\" aria-labelledby=\"{id}-title {id}-desc\" viewBox=\"-{m} -{m} \
             {w} {h}\" width=\"{w}\" height=\"{h}\">\n<title id=\"{id}-title\">{}</title>\n<desc \
             id=\"{id}-desc\">{}</desc>\n<style>\n{}</style>\n{defs}<rect class=\"paper\" \
             x=\"-{m}\" y=\"-{m}\" width=\"{w}\" height=\"{h}\"/>\n{}</svg>\n",
            escape(title),
            escape(desc),
            theme::figure_sheet(),
            self.body,
            m = coordinate(MARGIN_PX),
            w = coordinate(self.width_px + 2.0 * MARGIN_PX),
            h = coordinate(self.height_px + 2.0 * MARGIN_PX),
        )
    }
}
