//! Sessions with a drift and a scan, made with known truth and reduced as a whole: each sequence has its
//! record, the routes agree, and what is wrong is named.
//!
//! The truth is the scenario's; camera and slit look through the same model of the air as the reduction, so
//! this tests the way of the data, not the air (for that see the independent sessions in the README).

use std::fs;
use std::path::Path;
use std::sync::OnceLock;
use tempfile::TempDir;
use truelimb::pipeline::{self, Error, Options, Outcome, Silent};
use truelimb::{session, synth};

/// A quiet hour: little turbulence, so that few frames say much.
const SCENARIO: &str = r#"
size_px = 460
scale_arcsec_px = 4.6
scale_sigma_rel = 2e-3
angle_sigma_deg = 0.2
pointing_sigma_arcsec = 0.0
layer_tilt_sigma_arcmin = 0.0

[[layer]]
height_m = 20.0
r0_m = 3.0
outer_scale_m = 10.0
wind_m_s = 5.0

[[sequence]]
kind = "burst"
frames = 8
step_s = 0.5
at_min = 0.0
roll_deg = 0.0

[[sequence]]
kind = "drift"
frames = 24
step_s = 0.5
at_min = 2.0
roll_deg = 0.0

[[sequence]]
kind = "scan"
frames = 4
step_s = 160.0
at_min = 4.0
roll_deg = 0.0
lines = 480
line_s = 0.32
"#;

fn folder() -> &'static Path {
    static ONCE: OnceLock<TempDir> = OnceLock::new();
    ONCE.get_or_init(|| {
        let folder = TempDir::new().unwrap();
        let scenario = synth::read_scenario(SCENARIO).unwrap();
        synth::make(&scenario, 3, folder.path(), &|| ()).unwrap();
        folder
    })
    .path()
}

/// Reduces the session with its file changed.
fn reduced(name: &str, change: impl Fn(String) -> String) -> Result<Outcome, Error> {
    let text = fs::read_to_string(folder().join("session.toml")).unwrap();
    let changed = change(text.clone());
    assert!(
        name == "as-made" || changed != text,
        "{name} changes nothing"
    );
    let path = folder().join(format!("{name}.toml"));
    fs::write(&path, changed).unwrap();
    let options = Options {
        stack: false,
        ..Options::default()
    };
    pipeline::reduce(&session::read(&path).unwrap(), &options, &Silent)
}

fn whole() -> &'static Outcome {
    static ONCE: OnceLock<Outcome> = OnceLock::new();
    ONCE.get_or_init(|| reduced("as-made", |it| it).unwrap())
}

/// Why a sequence was set aside.
fn set_aside(outcome: &Outcome, sequence: usize) -> String {
    let it = outcome
        .record
        .sequences
        .iter()
        .find(|it| it.sequence == sequence);
    it.unwrap().set_aside.clone().unwrap_or_default()
}

#[test]
fn a_mixed_session_has_a_record_for_each_sequence() {
    let record = &whole().record;
    let kinds: Vec<&str> = record.sequences.iter().map(|it| it.kind.as_str()).collect();
    assert_eq!(kinds, ["burst", "drift", "scan"]);
    assert!(record.sequences.iter().all(|it| it.set_aside.is_none()));
    assert_eq!((record.drifts.len(), record.scans.len()), (1, 1));
    assert_eq!(record.scans[0].transits.len(), 4);
    let json = serde_json::to_value(record).unwrap();
    assert!(json["camera"]["scale"]["pull"].is_f64());
    let page = truelimb::report::render(record, &whole().traces).unwrap();
    for stem in ["drift", "scan"] {
        assert!(page.figures.iter().any(|it| it.0 == stem), "{stem}");
        assert!(page.html.contains(&format!("id=\"{stem}\"")));
    }
}

/// Nominal scale and angle are 2e-3 and 0.2 deg; the drift must beat both, agree with the truth within four
/// of its own sigma, and be what the frames were reduced with.
#[test]
fn the_drift_replaces_scale_and_angle() {
    let record = &whole().record;
    let camera = record.camera.as_ref().unwrap();
    for (it, truth) in [(&camera.scale, 4.6), (&camera.angle, 3.2)] {
        assert_eq!(it.used, "drift");
        let (value, sigma) = (it.drift.value.unwrap(), it.drift.sigma.unwrap());
        assert!(((value - truth) / sigma).abs() < 4.0, "{value} +- {sigma}");
        assert!(sigma < it.nominal.sigma.unwrap());
    }
    let line = record.budget.iter().find(|it| it.term == "plate scale");
    let line = line.unwrap();
    assert!(line.how.contains("own motion"), "{}", line.how);
    let drift = &camera.scale.drift;
    let expected_mas = 959_830.0 * drift.sigma.unwrap() / drift.value.unwrap();
    assert!((line.sigma_radius_mas / expected_mas - 1.0).abs() < 0.1);
}

#[test]
fn the_routes_agree_with_the_truth_and_each_other() {
    let by_scan = whole().record.by_scan.as_ref().unwrap();
    let (value, sigma) = (by_scan.radius.value.unwrap(), by_scan.radius.sigma.unwrap());
    assert!(((value - 959.83) / sigma).abs() < 4.0, "{value} +- {sigma}");
    assert!(sigma < 0.06, "{sigma}");
    assert!(by_scan.radius_difference_sigma.unwrap().abs() < 4.0);
    let whole: f64 = by_scan
        .budget
        .iter()
        .map(|it| it.sigma_radius_mas.powi(2))
        .sum();
    let parts = by_scan
        .radius
        .sigma_random
        .unwrap()
        .hypot(by_scan.radius.sigma_systematic.unwrap());
    assert!((whole.sqrt() - 1000.0 * parts).abs() < 1e-6 * whole.sqrt());
}

#[test]
fn a_line_time_that_contradicts_the_drift_is_named() {
    let outcome = reduced("line-time", |it| {
        it.replace("line_s = 0.32", "line_s = 0.36")
    });
    let reason = set_aside(&outcome.unwrap(), 2);
    assert!(reason.contains("line_s = 0.36"), "{reason}");
    // To the line or two by which blur and threshold widen the disk.
    let agreeing: f64 = reason
        .split("line_s = ")
        .nth(2)
        .and_then(|it| it.split(' ').next())
        .unwrap()
        .parse()
        .unwrap();
    assert!((agreeing / 0.32 - 1.0).abs() < 0.01, "{agreeing}");
}

#[test]
fn a_followed_sun_is_no_drift() {
    let outcome = reduced("tracked", |it| {
        it.replacen(
            "kind = \"burst\"\nfiles = [\"burst_000.fits\"]",
            "kind = \"drift\"\nfiles = [\"burst_000.fits\"]",
            1,
        )
        .replacen(
            "kind = \"drift\"\nfiles = [\"drift_001.fits\"]",
            "kind = \"burst\"\nfiles = [\"drift_001.fits\"]",
            1,
        )
    });
    let reason = set_aside(&outcome.unwrap(), 0);
    assert!(reason.contains("was tracking on?"), "{reason}");
}

#[test]
fn a_parity_that_the_drift_contradicts_stops_the_run() {
    let error = reduced("parity", |it| {
        it.replace("parity = \"sky\"", "parity = \"mirrored\"")
    })
    .unwrap_err()
    .to_string();
    assert!(error.starts_with("sequence 2, a drift:"), "{error}");
    assert!(error.contains("correct camera.parity"), "{error}");
}

/// A readout given and not given: with rows along the drift it changes little, and the record says how much.
#[test]
fn the_readout_is_in_the_record() {
    let outcome = reduced("readout", |it| {
        it.replace("parity = \"sky\"", "parity = \"sky\"\nreadout_s = 0.05")
    })
    .unwrap();
    let (with, without) = (&outcome.record.drifts[0], &whole().record.drifts[0]);
    assert_eq!((with.readout_s, without.readout_s), (Some(0.05), None));
    let change = with.scale.value.unwrap() / without.scale.value.unwrap() - 1.0;
    let predicted = -50.0 * without.scale_by_readout_per_ms;
    // What the rows' times take out is what the figure says, to the noise's own second order.
    assert!(
        (change - predicted).abs() < 0.05 * predicted.abs() + 1e-9,
        "{change:e} vs {predicted:e}"
    );
}
