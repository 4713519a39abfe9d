//! Files that stand on each other.

use super::super::{FaultKind, WeatherSource};
use super::{Bench, COMPLETE, only, places};

/// The station's part of the complete session, and the rest.
fn halves() -> (String, String) {
    let at = COMPLETE.find("[calibration]").unwrap();
    (
        COMPLETE[..at].to_owned(),
        format!("base = \"station/station.toml\"\n\n{}", &COMPLETE[at..]),
    )
}

#[test]
fn a_session_overrides_its_base_key_by_key() {
    let bench = Bench::new();
    let (station, rest) = halves();
    let station = station
        + "[weather]\npressure_hpa = 770\ntemperature_c = 5\nrelative_humidity = 0.2\nhumidity_sigma = 0.3\nprofile = \"above.csv\"\n";
    bench.write("station/station.toml", &station);
    bench.write(
        "station/above.csv",
        "height_m,pressure_hpa,temperature_c,relative_humidity\n2000,795,12,0.4\n3000,701,4,0.4\n5000,540,-10,0.3\n9000,308,-40,0.1\n",
    );
    let session = bench
        .read(&(rest + "[camera]\ngain_e_adu = 3.5\n"))
        .unwrap();
    assert_eq!(session.camera.gain_e_adu, 3.5);
    assert_eq!(session.camera.read_noise_e, 8.0);
    assert_eq!(session.site.height_m, 2240.0);
    // The log of the session takes the place of the station's constants; the rest stays.
    assert!(matches!(session.weather.source, WeatherSource::Log(_)));
    assert_eq!(session.weather.humidity_sigma, 0.04);
    // Paths are relative to the file that names them.
    let profile = session.weather.profile.as_ref().unwrap();
    assert_eq!(profile.path, bench.folder.path().join("station/above.csv"));
    assert_eq!(profile.levels.len(), 4);
    let names = [
        "session.toml",
        "station/station.toml",
        "station/above.csv",
        "weather.csv",
    ];
    assert_eq!(
        session.sources,
        names.map(|name| bench.folder.path().join(name))
    );
}

#[test]
fn a_fault_of_the_base_is_shown_in_the_base() {
    let bench = Bench::new();
    let (station, rest) = halves();
    let station = bench.write("station/station.toml", &station.replace("30.94", "95"));
    let fault = only(bench.read(&rest));
    assert_eq!((fault.path, fault.line), (station, 3));
}

#[test]
fn what_the_session_overrides_in_the_base_is_no_fault() {
    let bench = Bench::new();
    let (station, rest) = halves();
    bench.write("station/station.toml", &station.replace("30.94", "95"));
    assert!(
        bench
            .read(&(rest + "[site]\nlatitude_deg = 30.94\n"))
            .is_ok()
    );
}

#[test]
fn a_base_that_is_not_there_is_shown_where_it_is_named() {
    let bench = Bench::new();
    let (_, rest) = halves();
    let fault = only(bench.read(&rest));
    assert_eq!(
        (fault.kind, fault.key.as_str()),
        (FaultKind::Unreadable, "base")
    );
    assert_eq!((fault.line, fault.column), (1, 8));
}

#[test]
fn a_cycle_is_refused() {
    let bench = Bench::new();
    let (station, rest) = halves();
    bench.write(
        "station/station.toml",
        &format!("base = \"../session.toml\"\n{station}"),
    );
    let error = bench.read(&rest).unwrap_err();
    assert_eq!(
        places(&error),
        [(FaultKind::Contradictory, "base", 1)],
        "{error}"
    );
    assert!(error.faults[0].path.ends_with("station/station.toml"));
}

#[test]
fn a_long_chain_ends() {
    let bench = Bench::new();
    for index in 0..40 {
        bench.write(
            &format!("s{index}.toml"),
            &format!("base = \"s{}.toml\"\n", index + 1),
        );
    }
    let error = bench.read("base = \"s0.toml\"\n").unwrap_err();
    assert!(error.faults.iter().any(|it| it.key == "base"), "{error}");
}
