//! Every kind of fault, one at a time and all at once.

use super::super::{FaultKind, read};
use super::{Bench, COMPLETE, places};

#[test]
fn a_misspelt_key_names_the_nearest() {
    let fault = Bench::new().only_fault("gain_e_adu = 12.0", "gain_e_adu = 12.0\nread_nose_e = 1");
    assert_eq!(fault.kind, FaultKind::UnknownKey);
    assert_eq!(
        (fault.line, fault.column, fault.key.as_str()),
        (23, 1, "camera.read_nose_e")
    );
    assert_eq!(fault.cure, "did you mean `read_noise_e`?");
}

#[test]
fn a_key_in_the_wrong_table_is_told_its_own() {
    let fault = Bench::new().only_fault("width_nm = 5.0", "width_nm = 5.0\nlapse_k_per_km = 6");
    assert_eq!(fault.cure, "`lapse_k_per_km` belongs in [refractivity]");
}

#[test]
fn an_unknown_table_names_the_nearest() {
    let fault = Bench::new().only_fault("[refractivity]", "[refractivty]");
    assert_eq!(
        (fault.kind, fault.cure.as_str()),
        (FaultKind::UnknownKey, "did you mean `refractivity`?")
    );
}

#[test]
fn a_missing_key_points_at_its_table() {
    let fault = Bench::new().only_fault("height_m = 2240.0\n", "");
    assert_eq!(
        (fault.kind, fault.key.as_str()),
        (FaultKind::MissingKey, "site.height_m")
    );
    assert_eq!((fault.line, fault.column), (1, 2));
    assert!(fault.cure.contains("OBSGEO-H"), "{}", fault.cure);
}

#[test]
fn a_missing_table_names_each_key() {
    let bench = Bench::new();
    let telescope = COMPLETE
        .split("[telescope]")
        .nth(1)
        .unwrap()
        .split("\n\n")
        .next()
        .unwrap();
    let error = bench
        .with(&format!("[telescope]{telescope}"), "")
        .unwrap_err();
    let expected = [
        (FaultKind::MissingKey, "telescope.aperture_m", 0),
        (FaultKind::MissingKey, "telescope.mount", 0),
    ];
    assert_eq!(places(&error), expected);
}

#[test]
fn a_wrong_type_says_what_was_found() {
    let bench = Bench::new();
    let fault = bench.only_fault("latitude_deg = 30.94", "latitude_deg = \"30:56:24\"");
    assert_eq!(fault.kind, FaultKind::WrongType);
    assert_eq!(fault.found, "\"30:56:24\" (text)");
    assert_eq!(fault.cure, "write it as a decimal number: 30.940000");
    let fault = bench.only_fault("12.0", "\"12.0\"");
    assert_eq!(fault.cure, "take off the quotes: 12.0");
    let fault = bench.only_fault("[\"burst_000.fits\"]", "\"burst_000.fits\"");
    assert_eq!(fault.cure, "write files = [\"burst_000.fits\"]");
    let fault = bench.only_fault("mount = \"equatorial\"", "mount = true");
    assert_eq!(fault.kind, FaultKind::WrongType);
    let fault = bench.only_fault("parity = \"sky\"", "parity = 2026-06-21");
    assert_eq!(fault.found, "2026-06-21 (a date)");
}

#[test]
fn a_single_sequence_in_single_brackets_is_told_so() {
    let bench = Bench::new();
    let text = COMPLETE.replace(
        "[[sequence]]\nkind = \"roll\"\nfiles = [\"roll_001.fits\"]\nroll_deg = 45\n",
        "",
    );
    let error = bench
        .read(&text.replace("[[sequence]]", "[sequence]"))
        .unwrap_err();
    assert_eq!(error.faults.len(), 1, "{error}");
    assert_eq!(
        error.faults[0].cure,
        "put the keys under a line [[sequence]]"
    );
}

#[test]
fn out_of_range_says_the_range_with_its_unit() {
    let bench = Bench::new();
    let fault = bench.only_fault("latitude_deg = 30.94", "latitude_deg = 128.3");
    assert_eq!(fault.kind, FaultKind::OutOfRange);
    assert_eq!(
        (fault.found.as_str(), fault.allowed.as_str()),
        ("128.3", "a number from -90 to 90 deg")
    );
    for bad in [
        "nan",
        "inf",
        "-inf",
        "1e400",
        "0",
        "-1",
        "99999999999999999999",
    ] {
        let fault = bench.only_fault("gain_e_adu = 12.0", &format!("gain_e_adu = {bad}"));
        assert_eq!(fault.kind, FaultKind::OutOfRange, "{bad}");
        assert_eq!(fault.found, bad);
    }
    let fault = bench.only_fault("\"equatorial\"", "\"equatoral\"");
    assert_eq!(fault.cure, "did you mean \"equatorial\"?");
    let fault = bench.only_fault(
        "[instrument]",
        "[headers]\ngain_e_adu = \"egain\"\n[instrument]",
    );
    assert_eq!(fault.cure, "write \"EGAIN\"");
    let fault = bench.only_fault("[instrument]", "[limb]\nsectors = 8\n[instrument]");
    assert_eq!(fault.allowed, "a whole number from 16 to 1440");
}

#[test]
fn facts_that_contradict_each_other_are_refused() {
    let bench = Bench::new();
    let contradictory = |from: &str, to: &str| {
        let fault = bench.only_fault(from, to);
        assert_eq!(fault.kind, FaultKind::Contradictory, "{to}");
        fault.key
    };
    let log = "log = \"weather.csv\"";
    assert_eq!(
        contradictory(log, "log = \"weather.csv\"\nnone = true"),
        "weather.log"
    );
    assert_eq!(
        contradictory(log, "log = \"weather.csv\"\ntemperature_c = 9"),
        "weather.temperature_c"
    );
    assert_eq!(
        contradictory("roll_deg = 45", "line_s = 0.1"),
        "sequence[1].line_s"
    );
    bench.write("c.csv", "wavelength_nm,transmission\n540,0\n550,1\n560,0\n");
    let error = bench
        .with("width_nm = 5.0", "width_nm = 5.0\ncurve = \"c.csv\"")
        .unwrap_err();
    assert!(
        error
            .faults
            .iter()
            .all(|it| it.kind == FaultKind::Contradictory),
        "{error}"
    );
    assert_eq!(
        contradictory("layer_tilt_tau_min = 20.0", "formula = \"mathar-2007\""),
        "refractivity.formula"
    );
    assert_eq!(
        contradictory("[\"roll_001.fits\"]", "[\"burst_*.fits\"]"),
        "sequence[1].files"
    );
    let fault = bench.only_fault("[\"burst_000.fits\"]", "[\"[bd]*.fits\"]");
    assert!(
        fault.found.contains("dark.fits, also in calibration.dark"),
        "{}",
        fault.found
    );
}

#[test]
fn limbs_have_no_camera_and_no_roll() {
    let bench = Bench::new();
    let error = bench
        .with("kind = \"roll\"", "kind = \"limbs\"")
        .unwrap_err();
    assert_eq!(
        places(&error),
        [(FaultKind::Contradictory, "sequence[1].roll_deg", 48)]
    );
}

#[test]
fn a_scan_without_line_time_is_refused() {
    let fault = Bench::new().only_fault("kind = \"roll\"", "kind = \"scan\"");
    assert_eq!(
        (fault.kind, fault.key.as_str()),
        (FaultKind::MissingKey, "sequence[1].line_s")
    );
    assert_eq!(fault.line, 45);
}

#[test]
fn weather_is_needed_whole() {
    let bench = Bench::new();
    let fault = bench.only_fault("log = \"weather.csv\"\n", "");
    assert_eq!(
        (fault.kind, fault.key.as_str()),
        (FaultKind::MissingKey, "weather")
    );
    let error = bench
        .with("log = \"weather.csv\"", "pressure_hpa = 778")
        .unwrap_err();
    let keys: Vec<_> = error.faults.iter().map(|it| it.key.as_str()).collect();
    assert_eq!(
        keys,
        ["weather.temperature_c", "weather.relative_humidity"],
        "{error}"
    );
}

#[test]
fn a_pattern_that_fits_nothing_names_pattern_and_folder() {
    let bench = Bench::new();
    let fault = bench.only_fault("burst_000.fits", "brust_*.fits");
    assert_eq!(fault.kind, FaultKind::NoSuchFile);
    let folder = bench.folder.path().display().to_string();
    assert_eq!(
        fault.found,
        format!("\"brust_*.fits\" fits nothing in {folder}")
    );
    let fault = bench.only_fault("burst_000.fits", "burst_00.fits");
    assert_eq!(fault.cure, "did you mean \"burst_000.fits\"?");
    let fault = bench.only_fault("burst_000.fits", "burst_[0.fits");
    assert_eq!(fault.kind, FaultKind::NoSuchFile);
    let fault = bench.only_fault("[\"burst_000.fits\"]", "[]");
    assert_eq!(
        (fault.kind, fault.found.as_str()),
        (FaultKind::OutOfRange, "an empty list")
    );
    let fault = bench.only_fault("\"weather.csv\"", "\"whether.csv\"");
    assert_eq!(
        (fault.kind, fault.key.as_str()),
        (FaultKind::NoSuchFile, "weather.log")
    );
    let fault = bench.only_fault("burst_000.fits", "a\\u0000b.fits");
    assert_eq!(fault.kind, FaultKind::OutOfRange);
}

#[test]
fn syntax_errors_are_all_shown_and_hide_only_what_they_touch() {
    let bench = Bench::new();
    let text = COMPLETE
        .replace("height_m = 2240.0", "height_m = ")
        .replace(
            "read_noise_e = 8.0",
            "read_noise_e = 8.0\nread_noise_e = 9.0",
        )
        .replace("12.0", "-12.0");
    let error = bench.read(&text).unwrap_err();
    let expected = [
        (FaultKind::Syntax, "this line", 5),
        (FaultKind::OutOfRange, "camera.gain_e_adu", 22),
        (FaultKind::Syntax, "this line", 25),
    ];
    assert_eq!(places(&error), expected, "{error}");
}

#[test]
fn all_faults_come_at_once_in_the_order_of_the_file() {
    let bench = Bench::new();
    bench.write("weather.csv", "time_utc,pressure_hpa,temperature_c,relative_humidity\n2026-06-21T09:00:00Z,778.1,9.2,35\n2026-06-21T09:05:00Z,x,9.2,36\n");
    let text = COMPLETE
        .replace("latitude_deg = 30.94", "latitude_deg = 128.3")
        .replace("aperture_m = 0.2\n", "")
        .replace("mount = \"equatorial\"", "mont = \"equatorial\"")
        .replace("12.0", "\"12.0\"")
        .replace("dark.fits", "darc.fits")
        .replace("kind = \"roll\"", "kind = \"rol\"");
    let error = bench.read(&text).unwrap_err();
    let expected = [
        (FaultKind::OutOfRange, "site.latitude_deg", 3),
        (FaultKind::MissingKey, "telescope.aperture_m", 7),
        (FaultKind::MissingKey, "telescope.mount", 7),
        (FaultKind::UnknownKey, "telescope.mont", 9),
        (FaultKind::WrongType, "camera.gain_e_adu", 21),
        (FaultKind::NoSuchFile, "calibration.dark", 27),
        (FaultKind::OutOfRange, "sequence[1].kind", 45),
        (FaultKind::WrongUnit, "relative_humidity", 2),
        (FaultKind::BadRow, "pressure_hpa", 3),
    ];
    assert_eq!(places(&error), expected, "{error}");
}

#[test]
fn a_fault_is_shown_with_its_line_and_a_caret() {
    let bench = Bench::new();
    let error = bench
        .with("latitude_deg = 30.94", "latitude_deg = 128.3")
        .unwrap_err();
    let path = bench.folder.path().join("session.toml");
    let path = path.display();
    let expected = format!(
        "{path}: 1 fault

{path}:3:16: site.latitude_deg is out of range
  3 | latitude_deg = 128.3
    |                ^^^^^
  found    128.3
  allowed  a number from -90 to 90 deg
  cure     `latitude_deg`: Geodetic latitude, north positive."
    );
    assert_eq!(error.to_string(), expected);
}

#[test]
fn a_file_that_is_no_text_is_one_clear_fault() {
    let bench = Bench::new();
    let kind = |path: &std::path::Path| {
        let error = read(path).unwrap_err();
        assert_eq!(error.faults.len(), 1, "{error}");
        error.faults[0].kind
    };
    assert_eq!(
        kind(&bench.folder.path().join("absent.toml")),
        FaultKind::Unreadable
    );
    assert_eq!(kind(bench.folder.path()), FaultKind::Unreadable);
    let binary = bench.folder.path().join("binary.toml");
    std::fs::write(&binary, [0xff, 0xfe, 0]).unwrap();
    assert_eq!(kind(&binary), FaultKind::Unreadable);
    std::fs::write(&binary, vec![b'#'; 5 << 20]).unwrap();
    assert_eq!(kind(&binary), FaultKind::Unreadable);
}

#[test]
fn hostile_text_neither_panics_nor_reaches_the_terminal() {
    let bench = Bench::new();
    for text in [
        "",
        "\n\n",
        "[",
        "a",
        "\u{feff}x = 1",
        "site = 3\nsequence = [1, {kind = 2}]\ncamera = []",
        "x = \"\u{1b}[31mred\"",
        &"[a.".repeat(5000),
        &"x=[".repeat(20_000),
        &format!("x = \"{}\"", "y".repeat(100_000)),
        "[site]\r\nlatitude_deg\t=\t\u{1b}\r\n",
    ] {
        let error = bench.read(text).unwrap_err();
        assert!(!error.faults.is_empty());
        assert!(!error.to_string().contains('\u{1b}'), "{error:?}");
    }
    // Cut anywhere, it is refused or complete, never a panic.
    for end in (0..COMPLETE.len())
        .filter(|at| COMPLETE.is_char_boundary(*at))
        .step_by(7)
    {
        let _ = bench
            .read(&COMPLETE[..end])
            .map_err(|error| error.to_string());
    }
}

#[test]
fn a_file_with_thousands_of_faults_is_answered_in_short() {
    let bench = Bench::new();
    let keys = (0..60_000)
        .map(|index| format!("k{index}=1\n"))
        .collect::<Vec<_>>()
        .concat();
    let error = bench.read(&keys).unwrap_err();
    assert_eq!((error.faults.len(), error.more > 59_000), (100, true));
    assert!(error.to_string().len() < 60_000);
    let names = (0..20_000)
        .map(|index| format!("\"n{index}\","))
        .collect::<Vec<_>>()
        .concat();
    let error = bench
        .with("[\"burst_000.fits\"]", &format!("[{names}]"))
        .unwrap_err();
    assert_eq!(error.faults.len(), 100);
}
