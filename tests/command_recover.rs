//! `truelimb recover` as a person runs it, and what it stands on.

use std::process::{Command, Output};
use truelimb::pipeline::Silent;
use truelimb::recover::{self, Settings};
use truelimb::session;

const SESSION: &str = "tests/data/session/session.toml";

fn truelimb(arguments: &[&str], temp: &std::path::Path) -> Output {
    Command::new(env!("CARGO_BIN_EXE_truelimb"))
        .args(arguments)
        .env("TMPDIR", temp)
        .output()
        .unwrap()
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

/// The session's own facts come back in the scenario: the file's numbers.
#[test]
fn the_scenario_is_the_session() {
    let session = session::read(SESSION.as_ref()).unwrap();
    let basis = recover::scenario(&session, None, None).unwrap();
    let it = &basis.scenario;
    assert_eq!(it.site.latitude_deg.to_bits(), 30.94_f64.to_bits());
    assert_eq!(it.scale_arcsec_px.to_bits(), 5.3986012_f64.to_bits());
    assert_eq!(it.sequences.len(), 4);
    let rolls: Vec<f64> = it.sequences.iter().map(|it| it.roll_deg).collect();
    assert_eq!(rolls, [0.0, 45.0, 90.0, 135.0]);
    let list =
        truelimb::frames::ImageFile::open("tests/data/session/burst_000.fits".as_ref()).unwrap();
    assert_eq!(it.size_px, list.width());
    assert_eq!(it.sequences[0].frames, list.planes());
    assert_eq!(it.weather.pressure_sigma_hpa.to_bits(), 0.5_f64.to_bits());
    // The disk's brightest pixels are below the converter's range and far above the dark.
    assert!(it.peak_e > 20.0 * it.dark_adu && it.peak_e < 4095.0 * it.gain_e_adu);
    assert!(
        basis
            .notes
            .iter()
            .any(|it| it.contains("no result was given"))
    );
    let few = recover::scenario(&session, None, Some(2)).unwrap();
    assert!(few.scenario.sequences.iter().all(|it| it.frames == 2));
    assert!(few.notes.iter().any(|it| it.contains("shorter sequence")));
}

#[test]
fn the_same_record_for_any_number_of_threads() {
    let session = session::read(SESSION.as_ref()).unwrap();
    let settings = Settings {
        injected_mas: vec![0.0, 400.0],
        sessions: 2,
        seed: 5,
        frames: Some(3),
    };
    let run = |threads: usize| {
        rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .build()
            .unwrap()
            .install(|| recover::recover(&session, None, &settings, &Silent))
            .unwrap()
    };
    let one = run(1);
    assert_eq!(
        serde_json::to_string(&one).unwrap(),
        serde_json::to_string(&run(3)).unwrap()
    );
    assert_eq!(one.trials.len(), 4);
    assert_eq!(one.together.answered, 4, "{:?}", one.trials);
    // 400 mas are some multiples of the error of so few frames: injected is what is recovered.
    for it in &one.trials {
        let (value, sigma) = (it.oblateness.value.unwrap(), it.oblateness.sigma.unwrap());
        assert!((value - it.injected_mas).abs() < 4.5 * sigma, "{it:?}");
        assert!(sigma < 200.0, "{sigma}");
    }
}

#[test]
fn the_command_prints_a_table_and_leaves_nothing_behind() {
    let temp = tempfile::tempdir().unwrap();
    let out = tempfile::tempdir().unwrap();
    let folder = out.path().join("recovery");
    let run = truelimb(
        &[
            "recover",
            SESSION,
            "--injected",
            "0,8",
            "--n",
            "2",
            "--frames",
            "3",
            "-o",
            folder.to_str().unwrap(),
        ],
        temp.path(),
    );
    assert_eq!(run.status.code(), Some(0), "{}", text(&run.stderr));
    let said = text(&run.stdout);
    for word in ["bias", "scatter", "in 68 percent", "8 mas", "note:"] {
        assert!(said.contains(word), "{word}: {said}");
    }
    let json = std::fs::read_to_string(folder.join("recovery.json")).unwrap();
    let json: serde_json::Value = serde_json::from_str(&json).unwrap();
    assert_eq!(json["trials"].as_array().unwrap().len(), 4);
    assert_eq!(json["together"]["oblateness"]["coverage_68"]["of"], 4);
    assert_eq!(std::fs::read_dir(temp.path()).unwrap().count(), 0);
    for (arguments, word) in [
        (vec!["recover", SESSION, "--injected", "NaN"], "--injected"),
        (vec!["recover", "nowhere.toml"], "nowhere.toml"),
        (vec!["recover", SESSION, "--result", "nowhere"], "nowhere"),
    ] {
        let run = truelimb(&arguments, temp.path());
        assert_eq!(run.status.code(), Some(2), "{arguments:?}");
        assert!(text(&run.stderr).contains(word), "{}", text(&run.stderr));
    }
}
