//! Reduces the small session of an independent forward model and compares with its truth.
//!
//! `tests/data/session/ORIGIN.md` says how the session was made. Few frames were taken, so the
//! tolerances are in units of the stated errors.

use serde_json::Value;
use std::path::{Path, PathBuf};
use std::sync::OnceLock;
use truelimb::frames::ImageFile;
use truelimb::pipeline::{self, Options, Outcome, Silent};
use truelimb::result::record::{Record, ShapeQuantity, Status};
use truelimb::session::{self, Session};

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/session")
}

fn session() -> Session {
    session::read(&folder().join("session.toml")).unwrap()
}

/// Reduced by a pool of its own.
fn reduced(threads: usize) -> Outcome {
    rayon::ThreadPoolBuilder::new()
        .num_threads(threads)
        .build()
        .unwrap()
        .install(|| pipeline::reduce(&session(), &Options::default(), &Silent))
        .unwrap()
}

fn outcome() -> &'static Outcome {
    static ONCE: OnceLock<Outcome> = OnceLock::new();
    ONCE.get_or_init(|| reduced(1))
}

fn truth() -> Value {
    let text = std::fs::read_to_string(folder().join("truth.json")).unwrap();
    serde_json::from_str(&text).unwrap()
}

/// Value and sigma of what must have been measured.
fn measured(it: &ShapeQuantity) -> (f64, f64) {
    assert_eq!(it.status, Status::Measured, "{:?}", it.reason);
    (it.value.unwrap(), it.sigma.unwrap())
}

#[test]
fn the_shape_is_the_models_within_four_sigma() {
    let shape = &outcome().record.shape;
    let truth = truth();
    let of = |key: &str| truth["shape"][key].as_f64().unwrap();
    let radius = of("R_au_as") + truth["limb_inflection_offset_as"].as_f64().unwrap();
    for (name, quantity, truth, largest_sigma) in [
        ("oblateness, mas", &shape.oblateness, of("dr_mas"), 120.0),
        ("radius, arcsec", &shape.radius, radius, 0.4),
        ("P4, mas", &shape.p4, of("c4_mas"), 120.0),
    ] {
        let (value, sigma) = measured(quantity);
        assert!(
            (value - truth).abs() < 4.0 * sigma,
            "{name}: {value} +- {sigma}, truth {truth}"
        );
        // An error bar wide enough for anything would pass the line above.
        assert!(
            sigma > 0.0 && sigma < largest_sigma,
            "{name}: sigma {sigma}"
        );
    }
}

#[test]
fn the_radius_stands_closer_once_the_plate_scale_is_known() {
    // The session's scale is wrong by what its sigma allows; with the true one, the air, the blur
    // and the edge are left, some tens of mas with so few frames.
    let truth = truth();
    let written: toml::Table = std::fs::read_to_string(folder().join("session.toml"))
        .unwrap()
        .parse()
        .unwrap();
    let nominal = written["camera"]["scale_arcsec_px"].as_float().unwrap();
    let radius = outcome().record.shape.radius.value.unwrap();
    let rescaled = radius * truth["scale_true"].as_f64().unwrap() / nominal;
    let off_mas = 1e3 * (rescaled - truth["shape"]["R_au_as"].as_f64().unwrap());
    assert!(off_mas.abs() < 4.0 * 35.0, "{off_mas} mas");
}

#[test]
fn frieds_parameter_is_the_models_or_has_a_reason() {
    let r0 = &outcome().record.seeing.r0;
    let truth = truth();
    let bursts = truth["bursts"].as_array().unwrap();
    let mean = bursts
        .iter()
        .map(|it| it["r0_500_zenith_m"].as_f64().unwrap())
        .sum::<f64>()
        / bursts.len() as f64;
    match r0.value {
        Some(value) => assert!(
            (value / mean - 1.0).abs() < 0.35,
            "{value} m, truth {mean} m"
        ),
        None => assert!(r0.reason.as_ref().is_some_and(|it| it.len() > 10)),
    }
}

#[test]
fn intervals_lie_about_the_value_and_inside_each_other() {
    let shape = &outcome().record.shape;
    for it in [&shape.oblateness, &shape.radius, &shape.p4] {
        let (value, sigma) = measured(it);
        let ([a, b], [c, d]) = (it.interval_68.unwrap(), it.interval_95.unwrap());
        assert!(c < a && a < value && value < b && b < d, "{it:?}");
        assert!(((b - a) / 2.0 / sigma - 1.0).abs() < 1e-9, "{it:?}");
    }
}

#[test]
fn the_budget_adds_up() {
    let record = &outcome().record;
    let total = |it: &ShapeQuantity| it.sigma_random.unwrap().hypot(it.sigma_systematic.unwrap());
    let sum = |f: &dyn Fn(&truelimb::result::record::BudgetLine) -> f64| {
        record
            .budget
            .iter()
            .map(|it| f(it).powi(2))
            .sum::<f64>()
            .sqrt()
    };
    let oblateness = sum(&|it| it.sigma_mas.unwrap());
    let radius = sum(&|it| it.sigma_radius_mas);
    let rel = |a: f64, b: f64| (a / b - 1.0).abs();
    assert!(
        rel(oblateness, total(&record.shape.oblateness)) < 0.01,
        "lines {oblateness} mas, total {} mas",
        total(&record.shape.oblateness)
    );
    assert!(
        rel(radius, 1e3 * total(&record.shape.radius)) < 0.01,
        "lines {radius} mas, total {} mas",
        1e3 * total(&record.shape.radius)
    );
    for it in &record.budget {
        assert!(
            ["random", "systematic"].contains(&it.kind.as_str()),
            "{it:?}"
        );
        assert!(it.sigma_radius_mas >= 0.0 && !it.how.is_empty(), "{it:?}");
    }
}

#[test]
fn every_frame_is_accounted_for() {
    let record = &outcome().record;
    let selection = &record.selection;
    assert_eq!(selection.read, truth()["frames"].as_array().unwrap().len());
    let rejected: usize = selection.rejected.iter().map(|it| it.frames).sum();
    assert_eq!(selection.read, selection.usable + rejected);
    assert!(selection.used <= selection.usable && selection.used > 0);
    assert_eq!(
        record
            .sequences
            .iter()
            .map(|it| it.frames_read)
            .sum::<usize>(),
        selection.read
    );
}

#[test]
fn one_thread_and_eight_give_the_same_bytes() {
    let text = |it: &Record| serde_json::to_string(it).unwrap();
    let eight = reduced(8);
    assert_eq!(text(&outcome().record), text(&eight.record));
    let (one, eight) = (outcome().stack.as_ref(), eight.stack.as_ref());
    let (one, eight) = (one.unwrap(), eight.unwrap());
    let bits = |it: &ndarray::Array2<f64>| it.iter().map(|x| x.to_bits()).collect::<Vec<_>>();
    assert!(bits(&one.image) == bits(&eight.image), "the stacks differ");
}

#[test]
fn products_are_written_and_read_again() {
    let folder = tempfile::tempdir().unwrap();
    let out = folder.path().join("out");
    pipeline::products::write(outcome(), &session(), &out).unwrap();

    let text = std::fs::read_to_string(out.join("result.json")).unwrap();
    let again: Record = serde_json::from_str(&text).unwrap();
    let expected = serde_json::to_string_pretty(&outcome().record).unwrap() + "\n";
    assert!(text == expected, "result.json is not the record");
    // The reader of numbers may differ from the writer in the last bit.
    let radius = |it: &Record| it.shape.radius.value.unwrap();
    assert!((radius(&again) - radius(&outcome().record)).abs() < 1e-9);
    assert_eq!(again.created_from, outcome().record.created_from);
    assert_eq!(again.warnings, outcome().record.warnings);

    let mut stack = ImageFile::open(&out.join("stack.fits")).unwrap();
    let mut image = ndarray::Array2::zeros((0, 0));
    stack.read_plane(0, &mut image).unwrap();
    assert_eq!(stack.verify_checksums().unwrap(), (Some(true), Some(true)));
    let brightest = image
        .iter()
        .copied()
        .filter(|it| it.is_finite())
        .fold(0f32, f32::max);
    assert!(brightest > 500.0, "{brightest}");

    let html = std::fs::read_to_string(out.join("report.html")).unwrap();
    assert!(html.contains("Corrie Head"));
    for it in ["http://", "https://"] {
        let outside = html
            .match_indices(it)
            .filter(|(at, _)| !html[*at..].starts_with("http://www.w3.org/"))
            .count();
        assert_eq!(outside, 0, "the report reaches out of its file: {it}");
    }
    for name in ["limbs.fits", "seeing.ecsv", "budget.ecsv"] {
        assert!(out.join(name).metadata().unwrap().len() > 500, "{name}");
    }
    assert!(std::fs::read_dir(out.join("figures")).unwrap().count() >= 3);
}
