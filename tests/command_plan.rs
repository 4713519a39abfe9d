//! `truelimb plan` as a person runs it, and what it stands on.

use std::path::Path;
use std::process::{Command, Output};
use truelimb::plan::{Request, plan};
use truelimb::result::plan::Plan;
use truelimb::session;
use truelimb::sky::Utc;

/// A station without a sequence: invented.
const STATION: &str = "[site]\nname = \"Corrie Head\"\nlatitude_deg = 30.94\nlongitude_deg = 57.38\nheight_m = 2240.0\n\
     [telescope]\naperture_m = 0.15\nmount = \"equatorial\"\n\
     [filter]\ncentre_nm = 550.0\nwidth_nm = 5.0\n\
     [camera]\nscale_arcsec_px = 2.05\nscale_sigma_rel = 0.0002\nangle_deg = 3.2\nangle_sigma_deg = 0.03\n\
     gain_e_adu = 12.0\nread_noise_e = 8.0\nsaturation_adu = 4095\n\
     [weather]\npressure_hpa = 778.0\ntemperature_c = 9.0\nrelative_humidity = 0.35\n\
     pressure_sigma_hpa = 0.5\ntemperature_sigma_c = 0.6\nhumidity_sigma = 0.04\n";

fn truelimb(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_truelimb"))
        .args(arguments)
        .output()
        .unwrap()
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

fn station(folder: &Path, change: impl Fn(&str) -> String) -> std::path::PathBuf {
    let path = folder.join("station.toml");
    std::fs::write(&path, change(STATION)).unwrap();
    path
}

fn request(date: &str) -> Request {
    Request {
        date: Utc::parse(&format!("{date}T00:00:00")).unwrap(),
        r0_m: Some(0.07),
        hours: None,
        goal_mas: None,
        frames_per_s: None,
    }
}

fn planned(change: impl Fn(&str) -> String, request: &Request) -> Plan {
    let folder = tempfile::tempdir().unwrap();
    let session = session::read_station(&station(folder.path(), change)).unwrap();
    plan(&session, request, Vec::new()).unwrap()
}

/// Source: Astropy 7 (`get_body("sun")` in `AltAz` without pressure, UT1 = UTC) at the middles of quarters,
/// parallactic angles from its altitude and azimuth by spherical trigonometry; degrees.
#[test]
fn the_suns_place_is_that_of_another_library() {
    let found = planned(str::to_owned, &request("2026-06-21"));
    for (begin, zenith, azimuth, parallactic) in [
        ("02:00", 79.1466, 69.0694, -60.826),
        ("05:30", 35.0383, 92.702, -69.0345),
        ("08:00", 7.5765, 171.6866, -7.7682),
        ("12:15", 55.4425, 278.6391, 67.5519),
    ] {
        let row = found
            .quarters
            .iter()
            .find(|it| it.time_utc.contains(&format!("T{begin}")))
            .unwrap();
        assert!(
            (row.zenith_true_deg - zenith).abs() < 5e-4,
            "{begin}: {row:?}"
        );
        // Near the zenith azimuth and parallactic angle are the less certain.
        let loose = 5e-4 / zenith.to_radians().sin();
        assert!(
            (row.azimuth_deg - azimuth).abs() < loose,
            "{begin}: {row:?}"
        );
        assert!(
            (row.parallactic_deg - parallactic).abs() < loose,
            "{begin}: {row:?}"
        );
        assert!(row.zenith_apparent_deg < row.zenith_true_deg);
    }
    // Rows above 75 degrees are listed, without a promise.
    let low = &found.quarters[0];
    assert!(low.zenith_true_deg > 75.0 && low.sigma_mas.is_none() && low.note.is_some());
}

/// Source: two positions 60 degrees apart leave a variance of 4/3 of that of three, for m = 2 and 4 alike
/// (difference of two means against the mean of three phases): mathematics. One position leaves none.
#[test]
fn the_fewest_turns_are_one_by_sixty_degrees() {
    let found = planned(str::to_owned, &request("2026-06-21"));
    let of = |moves: usize| found.choices.iter().find(|it| it.moves == moves).unwrap();
    assert!(!of(0).separated && of(0).sigma_random_mas.is_none());
    assert!((of(1).step_deg - 60.0).abs() < 1e-9 && (of(2).step_deg - 60.0).abs() < 1e-9);
    let ratio = of(1).sigma_random_mas.unwrap() / of(2).sigma_random_mas.unwrap();
    assert!(
        (ratio / (4.0_f64 / 3.0).sqrt() - 1.0).abs() < 0.03,
        "{ratio}"
    );
    let window = found.window.as_ref().unwrap();
    assert_eq!(window.moves, 1);
    assert_eq!(window.rolls.len(), 2);
    assert_eq!(window.rolls[0].to_utc, window.rolls[1].from_utc);
    assert_eq!(window.rolls[1].to_utc, window.time_utc[1]);
    assert!(window.condition_number.is_some());
    // The lines add up to the error.
    let sum: f64 = window.budget.iter().map(|it| it.sigma_mas.powi(2)).sum();
    assert!((sum.sqrt() / window.sigma.sigma.unwrap() - 1.0).abs() < 1e-9);
}

/// Source: the harmonics' variance goes with r0 to the power -5/3, and falls with the number of frames:
/// Kolmogorov's law.
#[test]
fn the_random_error_goes_with_seeing_and_frames() {
    let at = |r0_m: f64, rate: f64| {
        let asked = Request {
            r0_m: Some(r0_m),
            frames_per_s: Some(rate),
            ..request("2026-06-21")
        };
        let dark = |it: &str| it.replace("saturation_adu = 4095\n", "");
        let found = planned(dark, &asked);
        found.window.unwrap().sigma_random_mas
    };
    let ratio = at(0.05, 0.1) / at(0.10, 0.1);
    assert!(
        (ratio / 2.0_f64.powf(5.0 / 6.0) - 1.0).abs() < 0.01,
        "{ratio}"
    );
    let more = at(0.05, 0.1) / at(0.05, 0.4);
    assert!((more / 2.0 - 1.0).abs() < 0.02, "{more}");
    // Beyond independence nothing is gained.
    let none = at(0.05, 100.0) / at(0.05, 1000.0);
    assert!((none - 1.0).abs() < 0.01, "{none}");
}

#[test]
fn an_altazimuth_day_needs_no_turn_and_a_known_instrument_neither() {
    let asked = Request {
        hours: Some(6.0),
        ..request("2026-06-21")
    };
    let altazimuth = planned(|it| it.replace("equatorial", "altazimuth"), &asked);
    assert!(altazimuth.choices[0].separated);
    let known = planned(
        |it| format!("{it}[instrument]\ndistortion_sigma_mas = 0.5\n"),
        &request("2026-06-21"),
    );
    assert!(known.choices[0].separated);
}

#[test]
fn a_goal_below_the_systematics_is_refused_with_the_reason() {
    let asked = Request {
        goal_mas: Some(0.02),
        ..request("2026-12-21")
    };
    let found = planned(str::to_owned, &asked);
    assert_eq!(found.goals.len(), 1);
    assert!(found.goals[0].hours.value.is_none());
    let reason = found.goals[0].hours.reason.as_ref().unwrap();
    assert!(reason.contains("systematics alone"), "{reason}");
    let two = planned(str::to_owned, &request("2026-12-21"));
    let [one, half] = [0, 1].map(|k| &two.goals[k]);
    if let (Some(one), Some(half)) = (one.hours.value, half.hours.value) {
        assert!(half > 4.0 * one);
    }
}

#[test]
fn page_figure_and_json_are_written_and_the_cautions_shown() {
    let folder = tempfile::tempdir().unwrap();
    let path = station(folder.path(), str::to_owned);
    let out = folder.path().join("plan");
    let (path, output) = (path.to_str().unwrap(), out.to_str().unwrap());
    let arguments = ["plan", path, "--date", "2026-06-21", "-o", output];
    let run = truelimb(&arguments);
    assert!(run.status.success(), "{}", text(&run.stderr));
    let shown = text(&run.stdout);
    assert!(shown.contains("blinds and burns") && shown.contains("goal 1 mas"));
    assert!(text(&run.stderr).contains("no r0 was given"));
    let stored = std::fs::read_to_string(out.join("plan.json")).unwrap();
    let page = std::fs::read_to_string(out.join("plan.html")).unwrap();
    assert!(page.contains("full aperture") && !page.contains("<script"));
    assert!(out.join("figures/plan.svg").is_file());
    // The same on stdout, for any number of threads.
    for threads in ["1", "8"] {
        let again = truelimb(&[&arguments[..4], &["--json", "-q", "--threads", threads]].concat());
        assert_eq!(text(&again.stdout), stored);
    }
}

/// A session whose frames are there, and one whose weather is of another day.
#[test]
fn a_session_of_another_day_lends_its_mean_weather() {
    let run = truelimb(&[
        "plan",
        "tests/data/session/session.toml",
        "--date",
        "2027-03-01",
        "--r0-m",
        "0.08",
    ]);
    assert!(run.status.success(), "{}", text(&run.stderr));
    assert!(
        text(&run.stderr).contains("the mean of the"),
        "{}",
        text(&run.stderr)
    );
}

#[test]
fn what_cannot_be_used_is_refused() {
    let folder = tempfile::tempdir().unwrap();
    let path = station(folder.path(), str::to_owned);
    let north = folder.path().join("north.toml");
    std::fs::write(
        &north,
        STATION
            .replace("30.94", "80.0")
            .replace("2240.0", "20.0")
            .replace("778.0", "1013.0"),
    )
    .unwrap();
    let here = path.to_str().unwrap();
    for (arguments, words) in [
        (vec!["plan", here, "--date", "2026-13-01"], "month 13"),
        (vec!["plan", here, "--date", "tomorrow"], "YYYY-MM-DD"),
        (
            vec!["plan", here, "--date", "2026-06-21", "--r0-m", "7"],
            "0.005 to 1 m",
        ),
        (
            vec!["plan", here, "--date", "2026-06-21", "--hours", "0"],
            "0.25 to 16 h",
        ),
        (
            vec!["plan", north.to_str().unwrap(), "--date", "2026-12-21"],
            "choose another date",
        ),
    ] {
        let run = truelimb(&arguments);
        assert_eq!(run.status.code(), Some(2), "{arguments:?}");
        let said = text(&run.stderr);
        assert!(said.contains(words), "{arguments:?}: {said}");
        assert!(run.stdout.is_empty());
    }
}
