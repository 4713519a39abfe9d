//! Runs `truelimb seeing` as a person would: on the small session of an independent model, on sessions
//! made by this program, and on sessions that cannot give a shape.

mod program;

use program::{run, shown, text};
use serde_json::Value;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Output;

fn independent() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/session")
}

fn json_of(output: &Output) -> Value {
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    serde_json::from_slice(&output.stdout).unwrap()
}

/// Value and sigma of a quantity that must have been measured.
fn measured(it: &Value) -> (f64, f64) {
    let number = |key: &str| {
        it[key]
            .as_f64()
            .unwrap_or_else(|| panic!("no {key} in {it}"))
    };
    (number("value"), number("sigma"))
}

/// Makes a session by this program's own model.
fn made(folder: &Path, scenario: &str, seed: u32) -> PathBuf {
    let path = folder.join("scenario.toml");
    fs::write(&path, scenario).unwrap();
    let session = folder.join("made");
    let output = run(&[
        "simulate",
        "-o",
        shown(&session),
        shown(&path),
        "--seed",
        &seed.to_string(),
        "-q",
    ]);
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    session.join("session.toml")
}

#[test]
fn the_air_of_the_independent_session() {
    let folder = tempfile::tempdir().unwrap();
    let out = folder.path().join("air");
    let session = independent().join("session.toml");
    let found = json_of(&run(&[
        "seeing",
        shown(&session),
        "-o",
        shown(&out),
        "--json",
        "-q",
    ]));
    let truth: Value =
        serde_json::from_str(&fs::read_to_string(independent().join("truth.json")).unwrap())
            .unwrap();
    let bursts = truth["bursts"].as_array().unwrap();
    let strength: f64 = bursts
        .iter()
        .map(|it| it["r0_500_zenith_m"].as_f64().unwrap().powf(-5.0 / 3.0))
        .sum::<f64>()
        / bursts.len() as f64;
    let true_m = strength.powf(-0.6);
    let (r0_m, sigma_m) = measured(&found["seeing"]["by_motion"]);
    assert!(
        (r0_m - true_m).abs() < 3.0 * sigma_m && sigma_m < 0.3 * r0_m,
        "{r0_m} {sigma_m} {true_m}"
    );
    // Pixels of 5.4 arcsec: the width cannot tell, and says why.
    let blur = &found["seeing"]["by_blur"];
    assert!(
        blur["value"].is_null() && blur["reason"].as_str().unwrap().contains("5.40 arcsec"),
        "{blur}"
    );
    // Six frames a burst: too few for the coherence time, and the reason is there.
    let memory = &found["seeing"]["coherence_time"];
    assert!(
        memory["value"].is_null() && memory["reason"].as_str().unwrap().contains("6 frames"),
        "{memory}"
    );
    assert_eq!(found["sequences"].as_array().unwrap().len(), 4);
    assert!(found.get("shape").is_none(), "no shape is fitted");
    // The floor of m = 2 against the model's own motion, 48 coefficients: 10 percent, and three times
    // what they scatter.
    let floor = found["harmonics"]
        .as_array()
        .unwrap()
        .iter()
        .find(|it| it["m"] == 2)
        .unwrap();
    let frames = truth["frames"].as_array().unwrap();
    let component = |it: &Value, k: usize| it["turb_radial_mas"][k].as_f64().unwrap();
    let square: f64 = frames
        .iter()
        .map(|it| component(it, 1).powi(2) + component(it, 2).powi(2))
        .sum();
    let realised_mas = (square / (2 * frames.len()) as f64).sqrt();
    let predicted_mas = floor["frame_predicted_mas"].as_f64().unwrap();
    let tolerance = 0.10 + 3.0 / (2.0 * 2.0 * frames.len() as f64).sqrt();
    assert!(
        (predicted_mas / realised_mas - 1.0).abs() < tolerance,
        "{predicted_mas} {realised_mas}"
    );
    // The time series has a row a frame.
    let table = fs::read_to_string(out.join("seeing.ecsv")).unwrap();
    let rows = table.lines().filter(|it| !it.starts_with('#')).count();
    assert_eq!(rows, 1 + frames.len(), "{table}");
    let whole: Value =
        serde_json::from_str(&fs::read_to_string(out.join("seeing.json")).unwrap()).unwrap();
    assert_eq!(whole, found);
}

#[test]
fn one_roll_whose_shape_would_be_refused_is_measured() {
    let folder = tempfile::tempdir().unwrap();
    let text_of = fs::read_to_string(independent().join("session.toml")).unwrap();
    let (head, _) = text_of.split_once("[[sequence]]").unwrap();
    let mut session = String::new();
    for line in head.lines() {
        // Files keep their place; the copy lies elsewhere.
        let there = independent();
        let line =
            ["dark.fits", "flat.fits", "weather.csv"]
                .iter()
                .fold(line.to_owned(), |line, name| {
                    line.replace(
                        &format!("\"{name}\""),
                        &format!("\"{}\"", there.join(name).display()),
                    )
                });
        session.push_str(&line);
        session.push('\n');
    }
    let burst = independent().join("burst_000.fits");
    session.push_str("[[sequence]]\nkind = \"burst\"\n");
    session.push_str(&["files = [\"", shown(&burst), "\"]\n"].concat());
    let path = folder.path().join("session.toml");
    fs::write(&path, session).unwrap();
    let output = run(&["seeing", shown(&path)]);
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    let table = text(&output.stdout);
    for word in [
        "r0 motion cm",
        "r0 by motion, 500 nm, zenith:",
        "m = 2: a frame",
        "m = 0: a frame",
    ] {
        assert!(table.contains(word), "\"{word}\" is not in {table}");
    }
    // A line for the burst: number, time, frames.
    let row = table.lines().nth(1).unwrap();
    let cells: Vec<&str> = row.split_whitespace().collect();
    assert_eq!(&cells[..3], ["1", "2026-06-14T07:20:00", "6"], "{row}");
    assert_eq!(
        fs::read_dir(folder.path()).unwrap().count(),
        1,
        "nothing is written without -o"
    );
}

#[test]
fn fast_frames_tell_the_wind() {
    // One layer, 8 m/s, a frame each 10 ms: tau0 = 0.314 r0 / V (Roddier 1981).
    let folder = tempfile::tempdir().unwrap();
    let scenario = "size_px = 400\nscale_arcsec_px = 5.2\naperture_m = 0.10\nexposure_s = 0.001\n\
        r0_flicker_rel = 0.0\n\
        [[layer]]\nheight_m = 300.0\nr0_m = 0.07\nouter_scale_m = 20.0\nwind_m_s = 8.0\n\
        [[sequence]]\nkind = \"burst\"\nframes = 240\nstep_s = 0.01\nat_min = 0.0\nroll_deg = 0.0\n";
    let session = made(folder.path(), scenario, 3);
    let found = json_of(&run(&["seeing", shown(&session), "--json", "-q"]));
    let (tau_s, sigma_s) = measured(&found["seeing"]["coherence_time"]);
    let (los_m, _) = measured(&found["seeing"]["line_of_sight"]);
    // Against the true wind and the r0 that was found; one layer, so that the 30 percent for several
    // speeds are not used up.
    let wanted_s = 0.314 * los_m / 8.0;
    assert!((tau_s / wanted_s - 1.0).abs() < 0.25, "{tau_s} {wanted_s}");
    assert!(
        sigma_s > 0.25 * tau_s && sigma_s < 0.6 * tau_s,
        "{sigma_s} of {tau_s}"
    );
}

#[test]
fn air_slower_than_frozen_flow_is_flagged() {
    // A wind of a tenth of a metre a second: within twenty seconds nothing moves on.
    let folder = tempfile::tempdir().unwrap();
    let scenario = |wind: f64| {
        format!(
            "size_px = 400\nscale_arcsec_px = 5.2\naperture_m = 0.10\n\
            [[layer]]\nheight_m = 800.0\nr0_m = 0.07\nouter_scale_m = 25.0\nwind_m_s = {wind}\n\
            [[sequence]]\nkind = \"burst\"\nframes = 60\nstep_s = 0.5\nat_min = 0.0\nroll_deg = 0.0\n\
            [[sequence]]\nkind = \"burst\"\nframes = 60\nstep_s = 0.5\nat_min = 5.0\nroll_deg = 0.0\n"
        )
    };
    let flagged = |wind: f64| {
        let session = made(folder.path(), &scenario(wind), 4);
        let found = json_of(&run(&["seeing", shown(&session), "--json", "-q"]));
        let codes: Vec<String> = found["warnings"]
            .as_array()
            .unwrap()
            .iter()
            .map(|it| it["code"].as_str().unwrap().to_owned())
            .collect();
        fs::remove_dir_all(folder.path().join("made")).unwrap();
        codes.contains(&"slow-air".to_owned())
    };
    assert!(flagged(0.1));
    assert!(!flagged(12.0));
}

#[test]
fn what_cannot_be_used_ends_with_two_and_one_line() {
    let folder = tempfile::tempdir().unwrap();
    let output = run(&["seeing", shown(&folder.path().join("none.toml"))]);
    assert_eq!(output.status.code(), Some(2));
    assert!(text(&output.stderr).contains("none.toml"));
    assert!(output.stdout.is_empty());
}
