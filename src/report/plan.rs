//! The page of a plan: when to observe, how to turn the instrument, what to expect.

use std::fmt::Write as _;

use super::figures::plan as figure;
use super::html::{Column, Table, escape, number, paragraph};
use super::{Rendered, numbers, page};
use crate::result::plan::Plan;

/// Draws the page of a plan and its figure.
pub fn render_plan(plan: &Plan) -> Rendered {
    let plate = figure::plate(plan);
    let title = format!("Plan for the solar limb, {}, {}", plan.site_name, plan.date);
    let mut out = page::head(&title);
    let _ = write!(
        out,
        "<div class=\"page\">\n<header class=\"mast\">\n<h1>{}</h1>\n<p class=\"when\">{}</p>\n\
         </header>\n<main id=\"main\">\n<p class=\"sentence\">{}</p>\n",
        escape(&format!("Plan for the solar limb from {}", plan.site_name)),
        escape(&plan.date),
        number(&plan.summary)
    );
    out.push_str("<div class=\"care\">\n<h2>Safety at the telescope</h2>\n<ul>\n");
    for it in &plan.cautions {
        let _ = writeln!(out, "<li>{}</li>", number(it));
    }
    out.push_str("</ul>\n</div>\n");
    page::notes(&mut out, &plan.warnings, "notes-h");
    out.push_str("<section>\n<h2>The day</h2>\n");
    if let Some(it) = &plate {
        out.push_str(&it.html("plate"));
    }
    out.push_str("</section>\n<section>\n<h2>The window</h2>\n");
    window(&mut out, plan);
    out.push_str("</section>\n<section>\n<h2>How long, and with what</h2>\n");
    goals(&mut out, plan);
    let _ = write!(
        out,
        "</section>\n</main>\n<footer><p>Made by truelimb {} from <code>plan.json</code> (layout \
         {}).</p></footer>\n</div>\n</body>\n</html>\n",
        escape(&plan.program_version),
        plan.schema_version
    );
    Rendered {
        html: out,
        figures: plate
            .iter()
            .map(|it| (it.stem.to_owned(), it.alone(None)))
            .collect(),
    }
}

fn mas(value: Option<f64>) -> String {
    value.map_or(numbers::MISSING.to_owned(), |it| {
        numbers::significant(it, 3)
    })
}

fn window(out: &mut String, plan: &Plan) {
    match &plan.window {
        None => out.push_str(&paragraph(
            "No stretch of the day separates the oblateness from the instrument.",
        )),
        Some(it) => {
            let mut rolls = Table::new(
                "Positions of the instrument",
                &[
                    Column::Text("From, UTC"),
                    Column::Text("To, UTC"),
                    Column::Number("roll_deg"),
                ],
            );
            for roll in &it.rolls {
                rolls.row([
                    roll.from_utc.clone(),
                    roll.to_utc.clone(),
                    numbers::significant(roll.roll_deg, 4),
                ]);
            }
            out.push_str(&rolls.html());
            let mut budget = Table::new(
                "The error of the oblateness to expect",
                &[
                    Column::Text("Line"),
                    Column::Text("Kind"),
                    Column::Number("Sigma, mas"),
                ],
            );
            for line in &it.budget {
                budget.row([
                    line.term.clone(),
                    line.kind.clone(),
                    numbers::significant(line.sigma_mas, 3),
                ]);
            }
            out.push_str(&budget.html());
        }
    }
    let mut choices = Table::new(
        "Turns of the instrument, each number at its best",
        &[
            Column::Number("Turns"),
            Column::Number("Degrees each"),
            Column::Text("Window from, UTC"),
            Column::Number("Condition number"),
            Column::Number("Random, mas"),
            Column::Number("Systematic, mas"),
        ],
    );
    for it in &plan.choices {
        choices.row([
            it.moves.to_string(),
            numbers::significant(it.step_deg, 3),
            it.from_utc.clone(),
            mas(it.condition_number),
            mas(it.sigma_random_mas),
            mas(it.sigma_systematic_mas),
        ]);
    }
    if !choices.is_empty() {
        out.push_str(&choices.html());
    }
}

fn goals(out: &mut String, plan: &Plan) {
    let mut goals = Table::new(
        "Time to a goal, hours like those of the window",
        &[
            Column::Number("Error wanted, mas"),
            Column::Number("Hours"),
            Column::Number("Days"),
            Column::Text("Why it cannot be reached"),
        ],
    );
    for it in &plan.goals {
        goals.row([
            numbers::significant(it.goal_mas, 3),
            mas(it.hours.value),
            mas(it.days),
            it.hours.reason.clone().unwrap_or_default(),
        ]);
    }
    out.push_str(&goals.html());
    if let Some(camera) = &plan.camera {
        out.push_str("<ul>\n");
        for it in &camera.advice {
            let _ = writeln!(out, "<li>{}</li>", number(it));
        }
        out.push_str("</ul>\n");
    }
}
