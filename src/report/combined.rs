//! The page of a season: one value, the series behind it, and what the sessions share.

use std::fmt::Write as _;

use super::figures::season;
use super::html::{Column, Table, escape, number, paragraph};
use super::{Rendered, numbers, page};
use crate::result::combined::{Combined, CombinedQuantity, SlopeRecord};
use crate::result::record::Quantity;

/// Draws the page of a season and its figures.
pub fn render_combined(combined: &Combined) -> Rendered {
    let plates: Vec<_> = [false, true]
        .into_iter()
        .filter_map(|radius| season::plate(combined, radius))
        .collect();
    let title = format!(
        "Shape of the solar limb over {}",
        numbers::plural(combined.sessions.len(), "session")
    );
    let mut out = page::head(&title);
    let _ = write!(
        out,
        "<div class=\"page\">\n<header class=\"mast\">\n<h1>{}</h1>\n<p class=\"when\">{}</p>\n\
         </header>\n<main id=\"main\">\n<p class=\"sentence\">{}</p>\n",
        escape(&title),
        escape(&span(combined)),
        number(&combined.summary)
    );
    page::notes(&mut out, &combined.warnings, "notes-h");
    for (heading, quantity, stem) in [
        ("Oblateness", &combined.oblateness, "oblateness-series"),
        ("Radius", &combined.radius, "radius-series"),
    ] {
        let _ = write!(out, "<section>\n<h2>{heading}</h2>\n");
        match plates.iter().find(|it| it.stem == stem) {
            Some(it) => out.push_str(&it.html("plate")),
            None => out.push_str(&paragraph("No session measured it.")),
        }
        tables(&mut out, quantity);
        out.push_str("</section>\n");
    }
    laws(&mut out, combined);
    let _ = write!(
        out,
        "</main>\n<footer><p>Made by truelimb {} from <code>combined.json</code> (layout {}). Sigma \
         of a mean is half the width of its 68 percent interval.</p></footer>\n</div>\n</body>\n\
         </html>\n",
        escape(&combined.program_version),
        combined.schema_version
    );
    Rendered {
        html: out,
        figures: plates
            .iter()
            .map(|it| (it.stem.to_owned(), it.alone(None)))
            .collect(),
    }
}

/// First and last day.
fn span(combined: &Combined) -> String {
    let day = |text: &str| text.split('T').next().unwrap_or(text).to_owned();
    let first = combined.sessions.first().map(|it| day(&it.time_utc[0]));
    let last = combined
        .sessions
        .iter()
        .map(|it| day(&it.time_utc[1]))
        .max();
    match (first, last) {
        (Some(first), Some(last)) => format!("{first} to {last}"),
        _ => String::new(),
    }
}

fn value(it: &Quantity) -> String {
    it.value.map_or(numbers::MISSING.to_owned(), |value| {
        numbers::plus_minus(value, it.sigma)
    })
}

fn tables(out: &mut String, quantity: &CombinedQuantity) {
    let sigma = quantity.mean.sigma;
    let unit = &quantity.mean.unit;
    let mut mean = Table::new(
        "The mean, and the same by other methods",
        &[
            Column::Text("How"),
            Column::Number("Value"),
            Column::Text("Unit"),
            Column::Number("Dark uncertainty"),
        ],
    );
    let beside =
        |it: Option<f64>| it.map_or(numbers::MISSING.to_owned(), |it| numbers::beside(it, sigma));
    let dark = quantity.heterogeneity.as_ref().map(|it| it.dark);
    mean.row([
        "Generalised least squares, what is shared kept shared".to_owned(),
        value(&quantity.mean),
        unit.clone(),
        beside(dark),
    ]);
    for (name, part) in [
        ("of its error, own to the sessions", quantity.sigma_own),
        ("of its error, shared by sessions", quantity.sigma_shared),
    ] {
        mean.row([name.to_owned(), beside(part), unit.clone(), String::new()]);
    }
    for it in &quantity.by_method {
        mean.row([
            format!("{}, shared errors left out", it.method),
            numbers::plus_minus(it.value, Some(it.sigma)),
            unit.clone(),
            it.dark.map_or(String::new(), |it| beside(Some(it))),
        ]);
    }
    out.push_str(&mean.html());
    if let Some(it) = &quantity.heterogeneity {
        out.push_str(&paragraph(&format!(
            "The sessions scatter about the mean with chi square {} for {} degrees of freedom, probability {}.",
            numbers::significant(it.q, 4),
            it.degrees,
            it.p.map_or(numbers::MISSING.to_owned(), |p| numbers::significant(p, 2)),
        )));
    }
    let mut shared = Table::new(
        "What the sessions share; more sessions do not lower it",
        &[
            Column::Text("Line of the budgets"),
            Column::Text("Scope"),
            Column::Number("Sessions"),
            Column::Number("In the mean"),
        ],
    );
    for it in &quantity.shared {
        let term = match &it.site_name {
            Some(site) => format!("{}, {site}", it.term),
            None => it.term.clone(),
        };
        shared.row([
            term,
            it.scope.clone(),
            it.sessions.to_string(),
            numbers::significant(it.sigma, 3),
        ]);
    }
    if !shared.is_empty() {
        out.push_str(&shared.html());
    }
    let mut slopes = Table::new(
        "Slopes, and what such a series can show",
        &[
            Column::Text("Against"),
            Column::Number("Slope"),
            Column::Text("Unit"),
            Column::Number("95 percent"),
            Column::Number("Differs from 0 from"),
            Column::Number("Found in 95 percent from"),
            Column::Text("Why there is none"),
        ],
    );
    for it in [Some(&quantity.trend), quantity.covariate.as_ref()]
        .into_iter()
        .flatten()
    {
        slopes.row(slope(it));
    }
    out.push_str(&slopes.html());
}

fn slope(it: &SlopeRecord) -> [String; 7] {
    let sigma = it.slope.sigma;
    let one =
        |it: Option<f64>| it.map_or(numbers::MISSING.to_owned(), |it| numbers::beside(it, sigma));
    [
        it.against.clone(),
        value(&it.slope),
        it.slope.unit.clone(),
        it.interval_95.map_or(numbers::MISSING.to_owned(), |ends| {
            numbers::interval(ends, sigma)
        }),
        one(it.limit_95),
        one(it.found_in_95_percent),
        it.reason.clone().unwrap_or_default(),
    ]
}

fn laws(out: &mut String, combined: &Combined) {
    let mut laws = Table::new(
        "The combined oblateness beyond surface rotation; the middle carries the spread between the laws",
        &[
            Column::Text("Law"),
            Column::Number("Rotation alone, mas"),
            Column::Number("Excess, mas"),
            Column::Number("J2"),
        ],
    );
    for it in &combined.excess_by_law {
        laws.row([
            it.law.clone(),
            numbers::beside(it.rotation_figure_mas, it.excess.sigma),
            value(&it.excess),
            value(&it.j2),
        ]);
    }
    if !laws.is_empty() {
        let _ = write!(
            out,
            "<section>\n<h2>Beyond rotation</h2>\n{}</section>\n",
            laws.html()
        );
    }
}
