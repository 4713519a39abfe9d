//! Distortions that go with a reading: told apart from the Sun, and paid for in the error.
//!
//! The observations are made here by the formulas of `shape`'s contract; the session is the small one of
//! the independent model.

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use std::fmt::Write as _;
use std::path::Path;
use truelimb::pipeline::{self, Options, Silent};
use truelimb::result::record::Record;
use truelimb::session;
use truelimb::shape::{
    AirResponse, Driver, Fit, Known, Observation, blocks, fit, judge, sun_columns,
};

const OBLATENESS_MAS: f64 = 8.0;
/// Slope of `cos 2 theta` with the reading.
const SLOPE_MAS: f64 = 6.0;

/// A reading that goes up and down over the day, C.
fn tube_c(time_s: f64) -> f64 {
    20.0 + 3.0 * (time_s / 2500.0).sin()
}

/// Eight rolls of 60 frames, the distortion of m = 2 going with the reading.
fn observations() -> Vec<Observation> {
    let mut random = ChaCha8Rng::seed_from_u64(3);
    let mut out = Vec::new();
    for sequence in 0..8 {
        for k in 0..60 {
            let time_s = f64::from(sequence) * 1500.0 + f64::from(k);
            let axis_rad = 0.3 + std::f64::consts::FRAC_PI_4 * f64::from(sequence);
            let b0_rad = 0.05;
            let column = sun_columns(b0_rad, axis_rad)[1];
            let mut harmonics_mas: [f64; 7] = std::array::from_fn(|c| {
                let noise: f64 = StandardNormal.sample(&mut random);
                OBLATENESS_MAS * column[c] + 4.0 * noise
            });
            harmonics_mas[1] += 30.0 + SLOPE_MAS * (tube_c(time_s) - 20.0);
            harmonics_mas[2] -= 12.0;
            out.push(Observation {
                sequence: sequence as usize,
                time_s,
                axis_rad,
                zenith_rad: 1.0 + 1e-4 * time_s,
                b0_rad,
                weight: 1.0,
                harmonics_mas,
                noise_mas2: [1.0; 7],
                air: AirResponse::default(),
            });
        }
    }
    out
}

fn known(drivers: Vec<Driver>) -> Known {
    Known {
        refractivity: Vec::new(),
        vertical_sigma_mas: 0.0,
        camera_angle_sigma_rad: 0.0,
        scale_sigma_rel: 0.0,
        clock_sigma_s: 0.0,
        vertical_direction_sigma_arcmin: 0.0,
        tilt_sigma_arcmin: 0.0,
        tilt_tau_s: 1800.0,
        distortion_sigma_mas: None,
        drivers,
    }
}

fn fitted(observations: &[Observation], known: &Known) -> Fit {
    let (blocks, ..) = blocks(observations);
    let separability = judge(observations, &blocks, false);
    assert!(separability.oblateness);
    fit(observations, &blocks, known, &separability).unwrap()
}

#[test]
fn a_distortion_that_goes_with_a_reading_is_found_and_leaves_the_sun() {
    let observations = observations();
    let mean = observations.iter().map(|it| tube_c(it.time_s)).sum::<f64>() / 480.0;
    let driver = Driver {
        name: "tube".to_owned(),
        unit: "",
        term: "instrument with readings",
        how: String::new(),
        sigma_mas: 100.0,
        readings: observations
            .iter()
            .map(|it| (it.time_s, tube_c(it.time_s) - mean))
            .collect(),
    };
    let without = fitted(&observations, &known(Vec::new()));
    let with = fitted(&observations, &known(vec![driver]));
    let sigma = |it: &Fit| {
        let [random, systematic] = [true, false].map(|kind| it.sigmas_mas(kind)[1]);
        random.hypot(systematic)
    };
    // The blocks scatter far beyond their frames where the reading is left out.
    assert!(without.excess > 3.0, "{}", without.excess);
    assert!(with.excess < 1.5, "{}", with.excess);
    assert!((with.oblateness_mas() - OBLATENESS_MAS).abs() < 3.0 * sigma(&with));
    assert!(sigma(&with) < 1.2, "{}", sigma(&with));
    let slope = &with.slopes[0];
    assert_eq!((slope.m, slope.name.as_str()), (2, "tube"));
    let (value, error) = slope.cos_mas;
    assert!(
        (value - SLOPE_MAS).abs() < 3.5 * error && error < 0.5,
        "{value} {error}"
    );
    assert!(slope.sin_mas.0.abs() < 3.5 * slope.sin_mas.1);
    assert_eq!(with.slopes.len(), 3);
}

fn reduced(change: impl Fn(&Path, String) -> String) -> Result<Record, String> {
    let from = Path::new("tests/data/session");
    let to = tempfile::tempdir().unwrap();
    for it in std::fs::read_dir(from).unwrap() {
        let it = it.unwrap();
        std::fs::copy(it.path(), to.path().join(it.file_name())).unwrap();
    }
    let text = std::fs::read_to_string(from.join("session.toml")).unwrap();
    std::fs::write(to.path().join("session.toml"), change(to.path(), text)).unwrap();
    let session = session::read(&to.path().join("session.toml")).unwrap();
    let options = Options {
        seed: 1,
        stack: false,
    };
    pipeline::reduce(&session, &options, &Silent)
        .map(|it| it.record)
        .map_err(|it| it.to_string())
}

/// A log of the tube that covers the session's weather, or only its start.
fn tube_log(at: &Path, whole: bool) {
    let weather = std::fs::read_to_string(at.join("weather.csv")).unwrap();
    let mut text = "time_utc,tube_c,still\n".to_owned();
    let rows = weather
        .lines()
        .filter(|it| it.starts_with("20"))
        .map(|it| it.split(',').next().unwrap());
    for (k, time) in rows.enumerate() {
        if whole || k < 1 {
            writeln!(text, "{time},{},5", 20.0 + 2.0 * (k as f64 * 1.7).sin()).unwrap();
        }
    }
    std::fs::write(at.join("tube.csv"), text).unwrap();
}

#[test]
fn readings_of_the_session_enter_fit_record_and_budget() {
    let plain = reduced(|_, it| it).unwrap();
    assert!(plain.shape.drivers.is_empty());
    let with = reduced(|at, it| {
        tube_log(at, true);
        format!("{it}\n[environment]\nlog = \"tube.csv\"\n\n[instrument]\ndrift_sigma_mas_per_hour = 40.0\n")
    })
    .unwrap();
    let names: Vec<&str> = with
        .shape
        .drivers
        .iter()
        .map(|it| it.reading.as_str())
        .collect();
    assert_eq!(
        names,
        ["tube_c", "tube_c", "tube_c", "time", "time", "time"]
    );
    assert!(
        with.shape
            .drivers
            .iter()
            .all(|it| it.cos.sigma.unwrap() > 0.0)
    );
    assert_eq!(with.shape.drivers[3].cos.unit, "mas/h");
    assert!(
        with.warnings
            .iter()
            .any(|it| it.code == "environment-constant")
    );
    // A drift along with the rolls can stand for the Sun: the error has grown, and its lines say by what.
    let sigma = |it: &Record| it.shape.oblateness.sigma.unwrap();
    assert!(
        sigma(&with) > 1.02 * sigma(&plain),
        "{} {}",
        sigma(&with),
        sigma(&plain)
    );
    for term in ["instrument with readings", "instrument drift"] {
        let line = with.budget.iter().find(|it| it.term == term).unwrap();
        assert!(line.sigma_mas.unwrap() > 0.0, "{term}");
    }
    let total: f64 = with
        .budget
        .iter()
        .map(|it| it.sigma_mas.unwrap().powi(2))
        .sum();
    let shape = &with.shape.oblateness;
    let stated = shape
        .sigma_random
        .unwrap()
        .hypot(shape.sigma_systematic.unwrap());
    assert!((total.sqrt() / stated - 1.0).abs() < 1e-9);
}

#[test]
fn a_log_that_does_not_cover_the_frames_is_refused() {
    let said = reduced(|at, it| {
        tube_log(at, false);
        format!("{it}\n[environment]\nlog = \"tube.csv\"\n")
    })
    .unwrap_err();
    assert!(
        said.contains("tube.csv") && said.contains("does not cover"),
        "{said}"
    );
}
