//! The record of the shape: radius, oblateness and the next harmonic by frames and by stacks, with
//! null tests, the instrument's distortion and the quadrupole moment.

use super::{Parts, interior, lines, quantity};
use crate::budget;
use crate::pipeline::{definitions, masking};
use crate::result::record::{
    AirRecord, BatchRecord, BootstrapRecord, ByStack, Covariance, DistortionRecord, DriverRecord,
    FactorRecord, NullTest, Quantity, RandomErrorRecord, Separation, ShapeQuantity, ShapeRecord,
};
use crate::shape::{DriverSlope, Fit};

/// The record of the shape.
pub(super) fn record(p: &Parts<'_>) -> ShapeRecord {
    let fit = &p.shape.fit;
    let [radius, oblateness, p4] = three(p, fit, p.model.radius_bias_mas);
    let (with_instrument, with_air) = fit.correlations();
    let separability = &p.shape.separability;
    let [scale, vertical] = fit.air();
    ShapeRecord {
        null_tests: null_tests(p),
        instrument: (2..=4).map(|m| distortion(p, m)).collect(),
        drivers: fit.slopes.iter().map(driver).collect(),
        air: AirRecord {
            scale: if p.known.refractivity.is_empty() {
                Quantity::missing("1", "above the air")
            } else {
                Quantity::measured(1.0 + scale.0, scale.1, "1")
            },
            vertical_residual: Quantity::measured(vertical.0, vertical.1, "mas"),
        },
        separation: Separation {
            rank: separability.rank,
            unknowns: separability.unknowns,
            condition_number: separability.condition_number(),
            correlation_sun_instrument: separability.oblateness.then_some(with_instrument),
            correlation_sun_air: separability.oblateness.then_some(with_air),
            singular_values: separability.singular_values.clone(),
        },
        by_stack: by_stack(p, &oblateness),
        covariance: Covariance {
            terms: fit.terms.clone(),
            units: fit.units.iter().map(|it| (*it).to_owned()).collect(),
            matrix: fit
                .covariance
                .row_iter()
                .map(|row| row.iter().copied().collect())
                .collect(),
        },
        definitions: definitions::list(p.measured, &radius, &oblateness, p.model.blur),
        kept_curve: p.shape.curve.clone(),
        random_error: random_error(p),
        kept_slope: p.shape.slope.clone(),
        quadrupole: interior::record(p, &oblateness, &p4),
        masking: Some(p.masking.clone()),
        axis_blur: masking::axis_blurs(p.measured),
        oblateness,
        radius,
        p4,
    }
}

/// The three quantities of a fit whose radius the extraction has moved by `bias_mas`.
fn three(p: &Parts<'_>, fit: &Fit, bias_mas: f64) -> [ShapeQuantity; 3] {
    let random = budget::total(lines(p, fit).filter(|it| it.random));
    let systematic = budget::total(lines(p, fit).filter(|it| !it.random));
    let degrees = fit.degrees;
    let separability = &p.shape.separability;
    let oblateness = if separability.oblateness {
        quantity(
            fit.oblateness_mas(),
            random[1],
            systematic[1],
            degrees,
            "mas",
        )
    } else {
        ShapeQuantity::not_separated("mas", &why_not(p, "the oblateness"))
    };
    let p4 = if separability.p4 {
        quantity(fit.p4_mas(), random[2], systematic[2], degrees, "mas")
    } else {
        ShapeQuantity::not_separated("mas", &why_not(p, "the next harmonic"))
    };
    let radius = quantity(
        (fit.radius_mas() - bias_mas) / 1000.0,
        random[0] / 1000.0,
        systematic[0] / 1000.0,
        degrees,
        "arcsec",
    );
    [radius, oblateness, p4]
}

/// Why the Sun's figure is not separated, and the cheapest observation that would separate it.
pub(super) fn why_not(p: &Parts<'_>, what: &str) -> String {
    let turned = p.shape.separability.turned_deg;
    format!(
        "{what} cannot be told from a distortion of the instrument: the Sun's axis turned by only {turned:.2} degrees on the detector. Turn camera and telescope together about the optical axis between bursts, in four steps of 45 degrees (kind = \"roll\", roll_deg = 0, 45, 90, 135), or state how free of distortion the optics is known to be ([instrument] distortion_sigma_mas)"
    )
}

/// How the random error was judged.
fn random_error(p: &Parts<'_>) -> RandomErrorRecord {
    let correlation = &p.shape.correlation;
    let separability = &p.shape.separability;
    RandomErrorRecord {
        correlation_factor: [0, 2, 3, 4]
            .map(|m| FactorRecord {
                m,
                factor: correlation.factor[m],
            })
            .to_vec(),
        excess: p.shape.fit.excess,
        degrees_of_freedom: p.shape.fit.degrees,
        batches: correlation
            .growth
            .iter()
            .map(|it| BatchRecord {
                length_s: it.length_s,
                factor: it.factor,
                degrees_of_freedom: it.degrees,
            })
            .collect(),
        converged: p.shape.converged(),
        bootstrap: p.shape.bootstrap.map(|it| BootstrapRecord {
            sigma_radius_mas: it.sigma_mas[0],
            sigma_oblateness_mas: separability.oblateness.then_some(it.sigma_mas[1]),
            sigma_p4_mas: separability.p4.then_some(it.sigma_mas[2]),
            run_frames: it.run_frames,
            runs: it.runs,
            resamples: it.resamples,
            seed: p.options.seed,
        }),
    }
}

/// Quantities that are zero when all is well.
fn null_tests(p: &Parts<'_>) -> Vec<NullTest> {
    let fit = &p.shape.fit;
    let scale = fit.excess.sqrt();
    let test = |test: &str, found: Option<(f64, f64)>, reason: &str| NullTest {
        test: test.to_owned(),
        value: found.map(|it| it.0),
        sigma: found.map(|it| it.1 * scale),
        unit: "mas".to_owned(),
        reason: found.is_none().then(|| reason.to_owned()),
    };
    let open = "not separated from the instrument";
    let apart = "one of the parts alone does not separate Sun and instrument";
    vec![
        test(
            "sine of m = 2 about the solar axis",
            p.shape.sines.map(|it| it[0]),
            open,
        ),
        test(
            "sine of m = 4 about the solar axis",
            p.shape.sines.map(|it| it[1]),
            open,
        ),
        test(
            "cosine of m = 3 about the solar axis (north limb against south)",
            p.shape.odd.map(|it| it[0]),
            open,
        ),
        test(
            "sine of m = 3 about the solar axis (east limb against west)",
            p.shape.odd.map(|it| it[1]),
            open,
        ),
        test(
            "oblateness of the early half of the sequences minus the late half",
            p.shape.parts.halves,
            apart,
        ),
        test(
            "oblateness of the middle half of the sequences minus first and last quarter",
            p.shape.parts.inner,
            apart,
        ),
        test(
            "oblateness before the Sun's passage through the meridian minus after it",
            p.shape.parts.meridian,
            apart,
        ),
        test(
            "oblateness against kept fraction: sharpest 40 percent minus all",
            kept_slope(p),
            open,
        ),
    ]
}

/// Oblateness of the sharpest 40 percent minus that of all, with the error of a subset against its
/// whole.
fn kept_slope(p: &Parts<'_>) -> Option<(f64, f64)> {
    let at = |fraction: f64| {
        p.shape
            .curve
            .iter()
            .find(|it| (it.fraction - fraction).abs() < 1e-9)
            .and_then(|it| Some((it.oblateness_mas?, it.oblateness_sigma_mas?)))
    };
    let (some, all) = (at(0.4)?, at(1.0)?);
    let variance = some.1 * some.1 - all.1 * all.1;
    (variance > 0.0).then(|| (some.0 - all.0, variance.sqrt()))
}

/// One harmonic of the instrument's distortion.
fn distortion(p: &Parts<'_>, m: usize) -> DistortionRecord {
    let separability = &p.shape.separability;
    let separated = match m {
        2 => separability.oblateness,
        4 => separability.p4,
        _ => true,
    };
    if !separated {
        return DistortionRecord {
            m,
            amplitude_mas: None,
            angle_deg: None,
            sigma_mas: None,
            reason: Some("not separated from the Sun".to_owned()),
        };
    }
    let (c, s, sigma) = p.shape.fit.instrument_mas(m);
    let distance = p.measured[0].middle.sun.distance_au;
    DistortionRecord {
        m,
        amplitude_mas: Some(c.hypot(s) / distance),
        angle_deg: Some(
            (s.atan2(c) / m as f64)
                .to_degrees()
                .rem_euclid(360.0 / m as f64),
        ),
        sigma_mas: Some(sigma / distance),
        reason: None,
    }
}

/// How one harmonic of the distortion goes with a reading.
fn driver(it: &DriverSlope) -> DriverRecord {
    let unit = if it.unit.is_empty() {
        "mas/unit".to_owned()
    } else {
        format!("mas/{}", it.unit)
    };
    DriverRecord {
        reading: it.name.clone(),
        m: it.m,
        cos: Quantity::measured(it.cos_mas.0, it.cos_mas.1, &unit),
        sin: Quantity::measured(it.sin_mas.0, it.sin_mas.1, &unit),
    }
}

/// The shape from stacks, beside that from single frames.
fn by_stack(p: &Parts<'_>, by_frame: &ShapeQuantity) -> ByStack {
    match p.by_stack {
        Ok((fit, blocks)) => {
            // The twins show what extraction leaves on their limbs as well: it is off already.
            let [radius, oblateness, p4] = three(p, fit, 0.0);
            let difference_sigma = match (oblateness.value, by_frame.value, by_frame.sigma) {
                (Some(a), Some(b), Some(sigma)) if sigma > 0.0 => Some((a - b) / sigma),
                _ => None,
            };
            let stacks = p.stacks.count();
            ByStack {
                oblateness,
                radius,
                p4,
                difference_sigma,
                stacks,
                removed_mas: p.stacks.removed_mas(fit, blocks),
                sharpness: p.stacks.sharpness.clone(),
                reason: None,
            }
        }
        Err(reason) => {
            let none = |unit: &str| ShapeQuantity {
                reason: None,
                ..ShapeQuantity::not_separated(unit, "")
            };
            ByStack {
                oblateness: none("mas"),
                radius: none("arcsec"),
                p4: none("mas"),
                difference_sigma: None,
                stacks: 0,
                removed_mas: None,
                sharpness: p.stacks.sharpness.clone(),
                reason: Some(reason.clone()),
            }
        }
    }
}
