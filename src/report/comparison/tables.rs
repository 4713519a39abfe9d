//! The tables of a comparison.

use crate::report::html::{Column, Table, paragraph};
use crate::report::numbers;
use crate::result::comparison::{
    Comparison, ConsensusRecord, DifferenceRecord, PairsRecord, QuantityComparison, ReverseRecord,
};

/// Everything of one quantity below the figure.
pub(super) fn quantity(out: &mut String, comparison: &Comparison, of: &QuantityComparison) {
    out.push_str(&values(comparison, of).html());
    out.push_str(&steps(comparison, of).folded("Every step of every value"));
    out.push_str("<h3>Means</h3>\n");
    out.push_str(&means(of).html());
    out.push_str("<h3>Ground against space</h3>\n");
    let mut rows: Vec<&DifferenceRecord> = vec![&of.ground_minus_space];
    rows.extend(of.this_result.iter().map(|it| &it.against_space));
    out.push_str(&differences(&rows).html());
    if let Some(it) = &of.this_result {
        reverse(out, &it.reverse);
    }
    out.push_str("<h3>Common epochs</h3>\n");
    pairs(out, comparison, &of.pairs);
    out.push_str("<h3>Who is off, and who decides</h3>\n");
    out.push_str(&equivalence(comparison, of).html());
    out.push_str(&pairwise(comparison, of).folded("All differences of two values"));
    out.push_str(&without(comparison, of).folded("The mean without each value"));
}

fn optional(value: Option<f64>, digits: u8) -> String {
    value.map_or(numbers::MISSING.to_owned(), |it| {
        numbers::significant(it, digits)
    })
}

fn values(comparison: &Comparison, of: &QuantityComparison) -> Table {
    let mut table = Table::new(
        "As published and on the common footing",
        &[
            Column::Text("Value"),
            Column::Text("Platform"),
            Column::Text("Epoch"),
            Column::Number("Wavelength, nm"),
            Column::Number("As published"),
            Column::Text("Of"),
            Column::Text("Definition"),
            Column::Number("Blur, arcsec"),
            Column::Number("On the common footing"),
            Column::Number("Footing’s part of it, mas"),
            Column::Text("Group"),
            Column::Text("Note"),
        ],
    );
    for &place in &of.places {
        let it = &comparison.values[place];
        let published = &it.published;
        let stated = published.sigma_random.hypot(published.sigma_systematic);
        let per_mas = if it.common.unit == "arcsec" {
            1000.0
        } else {
            1.0
        };
        table.row([
            it.label.clone(),
            it.platform.clone(),
            it.epoch.clone(),
            numbers::significant(it.wavelength_nm, 5),
            numbers::with_unit(
                &numbers::plus_minus(published.value, Some(stated)),
                &published.unit,
            ),
            published.of.clone(),
            published.definition.clone(),
            published
                .blur_fwhm_arcsec
                .map_or(String::new(), |it| numbers::significant(it, 3)),
            numbers::with_unit(
                &numbers::plus_minus(it.common.value, Some(it.common.sigma)),
                &it.common.unit,
            ),
            numbers::sigma(it.common.sigma_footing * per_mas),
            it.group.clone().unwrap_or_default(),
            it.note.clone(),
        ]);
    }
    table
}

fn steps(comparison: &Comparison, of: &QuantityComparison) -> Table {
    let mut table = Table::new(
        "Steps to the common footing",
        &[
            Column::Text("Value"),
            Column::Text("Step"),
            Column::Number("Change, mas"),
            Column::Number("Its uncertainty, mas"),
            Column::Number("After it"),
            Column::Text("How"),
        ],
    );
    for &place in &of.places {
        let it = &comparison.values[place];
        for step in &it.steps {
            let per = if it.common.unit == "arcsec" {
                1000.0
            } else {
                1.0
            };
            table.row([
                it.label.clone(),
                step.step.clone(),
                numbers::fixed(step.change_mas, 2),
                numbers::fixed(step.sigma_mas, 2),
                numbers::fixed(step.after, if per > 1.0 { 5 } else { 3 }),
                step.how.clone(),
            ]);
        }
    }
    table
}

fn means(of: &QuantityComparison) -> Table {
    let mut table = Table::new(
        "Means of all values and of each platform",
        &[
            Column::Text("Mean"),
            Column::Number("Values"),
            Column::Number("Mean and standard error"),
            Column::Number("95 percent"),
            Column::Number("Error by scatter, mas"),
            Column::Number("Dark uncertainty, mas"),
            Column::Number("Birge ratio"),
            Column::Number("Chi square"),
            Column::Number("p"),
        ],
    );
    let mut row = |name: String, it: &ConsensusRecord| {
        table.row([
            name,
            it.values.to_string(),
            numbers::quantity(&it.mean).unwrap_or_default(),
            it.interval_95.map_or(String::new(), |interval| {
                numbers::interval(interval, it.mean.sigma)
            }),
            optional(it.sigma_by_scatter_mas, 2),
            it.dark_mas
                .map_or(String::new(), |it| numbers::significant(it, 2)),
            optional(it.birge, 3),
            it.q.map_or(numbers::MISSING.to_owned(), |q| {
                format!("{} / {}", numbers::significant(q, 3), it.degrees)
            }),
            optional(it.p, 2),
        ]);
    };
    for it in &of.consensus {
        row(format!("all: {}", it.method), it);
    }
    for it in &of.platforms {
        row(it.platform.clone(), &it.consensus);
    }
    table
}

fn differences(rows: &[&DifferenceRecord]) -> Table {
    let mut table = Table::new(
        "Differences",
        &[
            Column::Text("Difference"),
            Column::Number("Value"),
            Column::Number("95 percent, mas"),
            Column::Number("Smallest that could be shown at 95 percent, mas"),
            Column::Number("Shown in 95 of 100, mas"),
            Column::Text("Why there is no value"),
        ],
    );
    for it in rows {
        table.row([
            it.what.clone(),
            numbers::quantity(&it.difference).unwrap_or(numbers::MISSING.to_owned()),
            it.interval_95_mas.map_or(String::new(), |interval| {
                numbers::interval(interval, it.difference.sigma)
            }),
            optional(it.smallest_shown_mas, 2),
            optional(it.found_in_95_mas, 2),
            it.difference.reason.clone().unwrap_or_default(),
        ]);
    }
    table
}

fn reverse(out: &mut String, it: &ReverseRecord) {
    out.push_str("<h3>Had space been the truth</h3>\n");
    out.push_str(&paragraph(&format!(
        "With {} as the truth ({}), this session, with the frames it kept and the seeing it had, would have reported {}; it reported {}, with {} percent of the distribution below it.",
        it.truth,
        numbers::quantity(&it.reference).unwrap_or_default(),
        numbers::quantity(&it.predicted).unwrap_or_default(),
        numbers::with_unit(&numbers::beside(it.reported, it.predicted.sigma), &it.predicted.unit),
        numbers::percent(it.share_below)
    )));
    let mut forms = Table::new(
        "What each form of the answer would have been",
        &[
            Column::Text("Form"),
            Column::Number("Would have reported"),
            Column::Number("Reported"),
            Column::Text("Unit"),
            Column::Number("Below it, percent"),
        ],
    );
    for form in &it.forms {
        forms.row([
            form.form.clone(),
            numbers::plus_minus(form.predicted, Some(form.sigma)),
            numbers::beside(form.reported, Some(form.sigma)),
            form.unit.clone(),
            numbers::percent(form.share_below),
        ]);
    }
    if !forms.is_empty() {
        out.push_str(&forms.html());
    }
    let mut quantiles = Table::new(
        "Quantiles of what would have been reported",
        &[
            Column::Number("Share below, percent"),
            Column::Number("Value"),
        ],
    );
    for [share, value] in &it.quantiles {
        quantiles.row([
            numbers::significant(100.0 * share, 3),
            numbers::with_unit(
                &numbers::beside(*value, it.predicted.sigma),
                &it.predicted.unit,
            ),
        ]);
    }
    out.push_str(&quantiles.folded("Quantiles of the distribution"));
    let mut causes = Table::new(
        "What the distribution is made of",
        &[
            Column::Text("Cause"),
            Column::Number("Standard deviation, mas"),
            Column::Number("Share of the variance, percent"),
        ],
    );
    for cause in &it.causes {
        causes.row([
            cause.cause.clone(),
            numbers::sigma(cause.sigma_mas),
            numbers::percent(cause.share),
        ]);
    }
    out.push_str(&causes.folded("What the distribution is made of"));
}

fn pairs(out: &mut String, comparison: &Comparison, of: &PairsRecord) {
    let label = |place: usize| comparison.values[place].label.clone();
    let left_out = of
        .left_out
        .iter()
        .map(|&it| label(it))
        .collect::<Vec<_>>()
        .join(", ");
    let left_out = if left_out.is_empty() {
        "none".to_owned()
    } else {
        left_out
    };
    if of.pairs.is_empty() {
        let reason = of.by_scatter.reason.as_deref().unwrap_or_default();
        out.push_str(&paragraph(&format!("No pairs: {reason}.")));
        return;
    }
    out.push_str(&paragraph(&format!(
        "Window {} days, {}. Ground minus space by plain mean {}; by weights {}; drift of the difference {}. Without a partner: {left_out}; their means differ by {}.",
        numbers::significant(of.window_days, 4),
        numbers::plural(of.pairs.len(), "pair"),
        numbers::quantity(&of.by_scatter).unwrap_or_default(),
        of.mean
            .as_ref()
            .and_then(|it| numbers::quantity(&it.mean))
            .unwrap_or_default(),
        numbers::quantity(&of.drift).unwrap_or_else(|| format!(
            "not known ({})",
            of.drift.reason.as_deref().unwrap_or_default()
        )),
        numbers::quantity(&of.unpaired).unwrap_or_else(|| format!(
            "an unknown amount ({})",
            of.unpaired.reason.as_deref().unwrap_or_default()
        )),
    )));
    let mut table = Table::new(
        "Pairs of a common epoch",
        &[
            Column::Text("Ground"),
            Column::Text("Space"),
            Column::Number("Apart, days"),
            Column::Number("Ground minus space, mas"),
        ],
    );
    for it in &of.pairs {
        table.row([
            label(it.ground),
            label(it.space),
            numbers::fixed(it.days, 2),
            numbers::plus_minus(it.difference_mas, Some(it.sigma_mas)),
        ]);
    }
    out.push_str(&table.html());
}

fn equivalence(comparison: &Comparison, of: &QuantityComparison) -> Table {
    let mut table = Table::new(
        "Degrees of equivalence: value minus the mean of all, with two standard uncertainties",
        &[
            Column::Text("Value"),
            Column::Number("Difference, mas"),
            Column::Number("Expanded uncertainty, mas"),
            Column::Number("Ratio"),
            Column::Text("Compatible"),
            Column::Number("Weight, percent"),
        ],
    );
    let weights = of.consensus.last().map(|it| it.weights.clone());
    for (place, it) in of.equivalence.iter().enumerate() {
        let weight = weights.as_ref().and_then(|it| it.get(place)).copied();
        table.row([
            comparison.values[it.place].label.clone(),
            numbers::beside(it.difference_mas, Some(0.5 * it.expanded_mas)),
            numbers::sigma(it.expanded_mas),
            it.normalised
                .map_or(numbers::MISSING.to_owned(), |it| numbers::fixed(it, 2)),
            match it.normalised {
                Some(it) if it.abs() <= 1.0 => "yes".to_owned(),
                Some(_) => "no".to_owned(),
                None => numbers::MISSING.to_owned(),
            },
            weight.map_or(numbers::MISSING.to_owned(), |it| {
                numbers::fixed(100.0 * it, 1)
            }),
        ]);
    }
    table
}

fn pairwise(comparison: &Comparison, of: &QuantityComparison) -> Table {
    let mut table = Table::new(
        "Differences of two values",
        &[
            Column::Text("First"),
            Column::Text("Second"),
            Column::Number("First minus second, mas"),
            Column::Number("Correlation"),
            Column::Number("Over two sigma"),
        ],
    );
    for it in &of.pairwise {
        table.row([
            comparison.values[it.first].label.clone(),
            comparison.values[it.second].label.clone(),
            numbers::plus_minus(it.difference_mas, Some(it.sigma_mas)),
            numbers::fixed(it.correlation, 2),
            numbers::fixed(it.normalised, 2),
        ]);
    }
    table
}

fn without(comparison: &Comparison, of: &QuantityComparison) -> Table {
    let mut table = Table::new(
        "The mean without each value in turn",
        &[
            Column::Text("Without"),
            Column::Number("Mean"),
            Column::Number("Change, mas"),
            Column::Number("Dark uncertainty, mas"),
        ],
    );
    for it in &of.without {
        table.row([
            comparison.values[it.place].label.clone(),
            numbers::quantity(&it.mean).unwrap_or_default(),
            numbers::significant(it.change_mas, 2),
            numbers::significant(it.dark_mas, 2),
        ]);
    }
    table
}

/// The files that went in.
pub(super) fn provenance(out: &mut String, comparison: &Comparison) {
    let mut table = Table::new(
        "Files",
        &[
            Column::Text("File"),
            Column::Number("Bytes"),
            Column::Text("SHA-256"),
        ],
    );
    for it in &comparison.created_from {
        table.row([it.path.clone(), it.bytes.to_string(), it.sha256.clone()]);
    }
    out.push_str(&table.folded("Files that went in"));
}
