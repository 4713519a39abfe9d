//! Tables of the shape: parts told apart, routes side by side, definitions, consequences.

use super::{QUANTITY, cells};
use crate::report::html::{Column, Table, paragraph};
use crate::report::numbers;
use crate::result::record::{Quadrupole, Quantity, Record, ShapeQuantity};

/// A number that may be missing, to a number of significant digits.
fn known(value: Option<f64>, digits: u8) -> String {
    value.map_or(numbers::MISSING.to_owned(), |value| {
        numbers::significant(value, digits)
    })
}

/// Instrument, air and separation.
pub(super) fn parts(out: &mut String, record: &Record) {
    let shape = &record.shape;
    let mut instrument = Table::new(
        "Distortion fixed to the detector, A cos m(θ − φ), apparent minus true",
        &[
            Column::Text("m"),
            Column::Number("Amplitude, mas"),
            Column::Number("Angle, deg"),
            Column::Text("Why there is no value"),
        ],
    );
    for it in &shape.instrument {
        let amplitude = it
            .amplitude_mas
            .map_or(numbers::MISSING.to_owned(), |value| {
                numbers::plus_minus(value, it.sigma_mas)
            });
        let reason = it.reason.clone().unwrap_or_default();
        instrument.row([it.m.to_string(), amplitude, known(it.angle_deg, 4), reason]);
    }
    if !instrument.is_empty() {
        out.push_str(&instrument.html());
    }
    let mut drivers = Table::new(
        "How the distortion goes with readings, for one unit of each",
        &[
            Column::Text("Reading"),
            Column::Number("m"),
            Column::Number("cos"),
            Column::Number("sin"),
            Column::Text("Unit"),
        ],
    );
    for it in &shape.drivers {
        let [cos, sin] = [&it.cos, &it.sin].map(|it| cells("", it)[1].clone());
        drivers.row([
            it.reading.clone(),
            it.m.to_string(),
            cos,
            sin,
            it.cos.unit.clone(),
        ]);
    }
    if !drivers.is_empty() {
        out.push_str(&drivers.html());
    }
    let mut air = Table::new(
        "The air’s terms, and how far the Sun leans on others",
        &QUANTITY,
    );
    air.row(cells(
        "Scale of refractivity, 1 as computed",
        &shape.air.scale,
    ));
    air.row(cells(
        "Residual fixed to the vertical",
        &shape.air.vertical_residual,
    ));
    let separation = &shape.separation;
    for (name, value) in [
        (
            "Largest correlation with an instrument term",
            separation.correlation_sun_instrument,
        ),
        (
            "Largest correlation with an air term",
            separation.correlation_sun_air,
        ),
        (
            "Condition number of the scaled design",
            separation.condition_number,
        ),
    ] {
        let value = known(value, 4);
        air.row([name.to_owned(), value, String::new(), String::new()]);
    }
    out.push_str(&air.html());
}

/// A row of the table of routes.
fn route(name: &str, quantity: &ShapeQuantity) -> [String; 8] {
    let sigma = quantity.sigma;
    let value = quantity.value.map_or(numbers::MISSING.to_owned(), |value| {
        numbers::plus_minus(value, sigma)
    });
    let part = |part: Option<f64>| {
        part.map_or(numbers::MISSING.to_owned(), |part| {
            numbers::beside(part, sigma)
        })
    };
    let ends = |ends: Option<[f64; 2]>| {
        ends.map_or(numbers::MISSING.to_owned(), |ends| {
            numbers::interval(ends, sigma)
        })
    };
    [
        name.to_owned(),
        value,
        quantity.unit.clone(),
        part(quantity.sigma_random),
        part(quantity.sigma_systematic),
        ends(quantity.interval_68),
        ends(quantity.interval_95),
        quantity.reason.clone().unwrap_or_default(),
    ]
}

/// Routes, definitions and what follows from the oblateness.
pub(super) fn definitions(out: &mut String, record: &Record) {
    let shape = &record.shape;
    let stack = &shape.by_stack;
    let mut routes = Table::new(
        "The shape by both routes; the frame-by-frame route is the answer, the stack its check",
        &[
            Column::Text("Quantity and route"),
            Column::Number("Value"),
            Column::Text("Unit"),
            Column::Number("Random"),
            Column::Number("Systematic"),
            Column::Number("68 percent"),
            Column::Number("95 percent"),
            Column::Text("Why there is no value"),
        ],
    );
    for (name, by_frame, by_stack) in [
        ("Oblateness", &shape.oblateness, &stack.oblateness),
        ("Radius at 1 AU", &shape.radius, &stack.radius),
        ("P4 term, R c4", &shape.p4, &stack.p4),
    ] {
        routes.row(route(&format!("{name}, frames"), by_frame));
        routes.row(route(
            &format!("{name}, {}", numbers::plural(stack.stacks, "stack")),
            by_stack,
        ));
    }
    out.push_str(&routes.html());
    let agreement = match (stack.difference_sigma, &stack.reason) {
        (Some(difference), _) => format!(
            "The two routes to the oblateness differ by {} times the error of their difference.",
            numbers::significant(difference, 2)
        ),
        (None, Some(reason)) => format!("The routes cannot be compared: {reason}"),
        (None, None) => "The routes cannot be compared.".to_owned(),
    };
    out.push_str(&paragraph(&agreement));
    if let Some(it) = &stack.sharpness {
        out.push_str(&paragraph(&format!(
            "The stacks are sharper than the plain mean of the frames as they came: {} times the \
             energy of the edge, where the limbs of the single frames predict {} times.",
            numbers::significant(it.gain, 3),
            numbers::significant(it.gain_predicted, 3)
        )));
    }
    if let Some([radius, oblateness]) = stack.removed_mas {
        out.push_str(&paragraph(&format!(
            "Resampling and the blur of the frames' residual motion, predicted by noise-free twins of \
             the frames and taken off: {} mas in the radius and {} mas in the oblateness.",
            numbers::significant(radius, 2),
            numbers::significant(oblateness, 2)
        )));
    }
    let mut table = Table::new(
        "Definitions of the limb side by side",
        &[
            Column::Text("Definition"),
            Column::Number("Radius at 1 AU, arcsec"),
            Column::Number("Minus the unblurred inflection, mas"),
            Column::Number("Oblateness, mas"),
            Column::Text("How it was obtained"),
        ],
    );
    for it in &shape.definitions {
        let radius = it
            .radius_arcsec
            .map_or(numbers::MISSING.to_owned(), |value| {
                shape.radius.sigma.map_or_else(
                    || numbers::fixed(value, 3),
                    |sigma| numbers::beside(value, Some(sigma)),
                )
            });
        let oblateness = it
            .oblateness_mas
            .map_or(numbers::MISSING.to_owned(), |value| {
                numbers::beside(value, shape.oblateness.sigma)
            });
        let displacement = known(it.displacement_mas, 3);
        table.row([
            it.definition.clone(),
            radius,
            displacement,
            oblateness,
            it.how.clone(),
        ]);
    }
    if !table.is_empty() {
        out.push_str(&table.html());
    }
    gravity(out, &shape.quadrupole);
}

/// What the oblateness says of the gravity field.
fn gravity(out: &mut String, quadrupole: &Quadrupole) {
    let mut table = Table::new("What the oblateness says of the gravity field", &QUANTITY);
    let figure = format!(
        "Oblateness of surface rotation alone, law: {}",
        quadrupole.rotation_law
    );
    let rows: [(&str, &Quantity); 7] = [
        (&figure, &quadrupole.rotation_figure),
        ("Oblateness beyond it", &quadrupole.excess),
        ("J2, with J4 = 0", &quadrupole.j2),
        ("J2, with J4 free", &quadrupole.j2_beside_j4),
        ("J4", &quadrupole.j4),
        (
            "Added to the perihelion advance of the innermost planet",
            &quadrupole.perihelion,
        ),
        (
            "Its advance by general relativity",
            &quadrupole.perihelion_by_relativity,
        ),
    ];
    for (name, quantity) in rows {
        table.row(cells(name, quantity));
    }
    out.push_str(&table.html());
    let mut laws = Table::new(
        "The same by each rotation law, without the spread between them",
        &[
            Column::Text("Law"),
            Column::Number("Rotation alone, mas"),
            Column::Number("Excess, mas"),
            Column::Number("J2"),
            Column::Number("J4"),
        ],
    );
    for it in &quadrupole.by_law {
        let [excess, j2, j4] = [&it.excess, &it.j2, &it.j4].map(|it| cells("", it)[1].clone());
        let figure = numbers::beside(it.rotation_figure_mas, it.excess.sigma);
        laws.row([it.law.clone(), figure, excess, j2, j4]);
    }
    if !laws.is_empty() {
        out.push_str(&laws.html());
    }
    if let Some(it) = &quadrupole.note {
        out.push_str(&paragraph(it));
    }
}
