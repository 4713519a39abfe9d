//! Sessions that are right.

use super::super::{
    Kind, Moment, Projection, ScaleOf, WeatherSource, read, read_station, read_with_headers,
    resolved, schema,
};
use super::{Bench, COMPLETE};
use crate::air::RefractivityFormula;
use crate::sky::{Mount, Parity};

#[test]
fn a_complete_session_is_read_as_written() {
    let bench = Bench::new();
    let session = bench.read(COMPLETE).unwrap();
    assert_eq!(session.site.name, "Corrie Head");
    assert_eq!(session.site.longitude_deg, 57.38);
    assert_eq!(session.site.deflection_east_arcsec, 0.0);
    assert_eq!(session.telescope.mount, Mount::Equatorial);
    assert_eq!(session.camera.scale_arcsec_px, 4.1001234);
    assert_eq!(session.camera.projection, Projection::Arc);
    assert_eq!(session.camera.parity, Parity::Sky);
    assert_eq!(session.camera.scale_of, ScaleOf::Apparent);
    assert_eq!(session.camera.saturation_adu, Some(4095.0));
    assert_eq!(session.camera.readout_s, None);
    assert_eq!(session.instrument.distortion_sigma_mas, Some(0.5));
    assert_eq!(session.refractivity.layer_tilt_sigma_arcmin, 2.0);
    assert_eq!(session.refractivity.layer_tilt_tau_min, 20.0);
    assert_eq!(
        session.refractivity.formula,
        RefractivityFormula::Ciddor1996
    );
    assert_eq!(session.time.date_obs, Moment::Start);
    assert_eq!(session.limb.sectors, 120);
    assert_eq!(session.sequences.len(), 2);
    let roll = &session.sequences[1];
    assert_eq!(
        (roll.kind, roll.roll_deg, roll.line_s),
        (Kind::Roll, 45.0, None)
    );
    assert_eq!(roll.files, [bench.folder.path().join("roll_001.fits")]);
    assert_eq!(roll.calibration, session.calibration);
    assert_eq!(roll.camera, session.camera);
    let WeatherSource::Log(log) = &session.weather.source else {
        panic!("no log")
    };
    assert_eq!(log.rows(), 4);
    let expected = ["session.toml", "weather.csv"].map(|name| bench.folder.path().join(name));
    assert_eq!(session.sources, expected);
}

#[test]
fn defaults_are_named() {
    let bench = Bench::new();
    let session = bench.with("read_noise_e = 8.0\n", "").unwrap();
    assert_eq!(session.camera.read_noise_e, 10.0);
    assert!(session.assumed.iter().any(|it| it == "camera.read_noise_e"));
    assert!(
        !session
            .assumed
            .iter()
            .any(|it| it == "camera.scale_sigma_rel")
    );
}

#[test]
fn resolved_settings_read_back_to_the_same_session() {
    let bench = Bench::new();
    let session = bench.read(COMPLETE).unwrap();
    let mut settings = resolved(&session);
    assert_eq!(settings["limb"]["edge_scale_km"], 80.0);
    assert_eq!(settings["sequence"][1]["files"][0], "roll_001.fits");
    let object = settings.as_object_mut().unwrap();
    object.remove("assumed");
    object.remove("from_headers");
    let written = toml::to_string(&without_nulls(&settings)).unwrap();
    let again = bench.read(&written).unwrap();
    assert_eq!(resolved(&again)["camera"], resolved(&session)["camera"]);
    assert_eq!(again.sequences, session.sequences);
    assert_eq!(again.weather, session.weather);
    assert_eq!(again.assumed, Vec::<String>::new());
}

fn without_nulls(value: &serde_json::Value) -> toml::Value {
    use serde_json::Value;
    match value {
        Value::Object(map) => toml::Value::Table(
            map.iter()
                .filter(|(_, value)| !value.is_null())
                .map(|(key, value)| (key.clone(), without_nulls(value)))
                .collect(),
        ),
        Value::Array(items) => toml::Value::Array(items.iter().map(without_nulls).collect()),
        Value::String(text) => toml::Value::String(text.clone()),
        Value::Bool(flag) => toml::Value::Boolean(*flag),
        Value::Number(number) => match number.as_i64() {
            Some(whole) => toml::Value::Integer(whole),
            None => toml::Value::Float(number.as_f64().unwrap()),
        },
        Value::Null => unreachable!("filtered above"),
    }
}

#[test]
fn a_sequence_may_have_a_camera_filter_dark_and_flat_of_its_own() {
    let bench = Bench::new();
    bench.write("dark_2.fits", "");
    bench.write(
        "curve.csv",
        "wavelength_nm,transmission\n640,0\n655,0.5\n660,1\n665,0.5\n680,0\n",
    );
    let own = "roll_deg = 45\ndark = [\"dark_2.fits\"]\nflat = []\n\n[sequence.camera]\ngain_e_adu = 3\n\n[sequence.filter]\ncurve = \"curve.csv\"\n";
    let session = bench.with("roll_deg = 45\n", own).unwrap();
    let [first, second] = session.sequences.as_slice() else {
        panic!("two sequences")
    };
    assert_eq!(
        (first.camera.gain_e_adu, second.camera.gain_e_adu),
        (12.0, 3.0)
    );
    assert_eq!(second.camera.scale_arcsec_px, first.camera.scale_arcsec_px);
    assert_eq!(
        second.calibration.dark,
        [bench.folder.path().join("dark_2.fits")]
    );
    assert!(second.calibration.flat.is_empty());
    assert_eq!(first.filter.centre_nm, 550.0);
    // The curve is symmetric about 660 nm and crosses half its maximum at 655 and 665 nm.
    assert!((second.filter.centre_nm - 660.0).abs() < 1e-9);
    assert!((second.filter.width_nm - 10.0).abs() < 1e-9);
}

#[test]
fn sequences_may_share_nothing() {
    let bench = Bench::new();
    let camera = COMPLETE
        .split("[camera]")
        .nth(1)
        .unwrap()
        .split("\n\n")
        .next()
        .unwrap();
    let text = COMPLETE
        .replace(&format!("[camera]{camera}"), "")
        .replace(
            "files = [\"burst_000.fits\"]\n",
            &format!("files = [\"burst_000.fits\"]\n[sequence.camera]{camera}\n"),
        )
        .replace(
            "roll_deg = 45\n",
            &format!("roll_deg = 45\n[sequence.camera]{camera}\n"),
        );
    let session = bench.read(&text).unwrap();
    assert_eq!(session.camera, session.sequences[0].camera);
}

#[test]
fn a_scan_needs_its_line_time() {
    let bench = Bench::new();
    let scan = "kind = \"scan\"\nfiles = [\"roll_001.fits\"]\nline_s = 0.1333\n";
    let text = COMPLETE.replace(
        "kind = \"roll\"\nfiles = [\"roll_001.fits\"]\nroll_deg = 45\n",
        scan,
    );
    let session = bench.read(&text).unwrap();
    assert_eq!(session.sequences[1].kind, Kind::Scan);
    assert_eq!(session.sequences[1].line_s, Some(0.1333));
}

#[test]
fn limbs_measured_elsewhere_need_no_camera() {
    let bench = Bench::new();
    bench.write("visual.csv", "time_utc,diameter_arcsec\n");
    let text = "[site]\nlatitude_deg = 30.94\nlongitude_deg = 57.38\nheight_m = 2240\n[filter]\ncentre_nm = 550\nwidth_nm = 80\n[weather]\npressure_hpa = 778\ntemperature_c = 9\nrelative_humidity = 0.35\n[[sequence]]\nkind = \"limbs\"\nfiles = [\"visual.csv\"]\n";
    let session = bench.read(text).unwrap();
    assert!(!session.has_frames());
    assert!(resolved(&session)["camera"].is_null());
    assert!(
        matches!(session.weather.source, WeatherSource::Constant(air) if air.pressure_hpa == 778.0)
    );
}

#[test]
fn above_the_air_there_is_no_weather() {
    let bench = Bench::new();
    let weather = "log = \"weather.csv\"\npressure_sigma_hpa = 0.5\ntemperature_sigma_c = 0.6\nhumidity_sigma = 0.04\n";
    let text = COMPLETE
        .replace(weather, "none = true\n")
        .replace("2240.0", "600000.0");
    let session = bench.read(&text).unwrap();
    assert_eq!(session.weather.source, WeatherSource::None);
}

#[test]
fn patterns_are_relative_sorted_and_each_file_counts_once() {
    let bench = Bench::new();
    for name in [
        "night/b_2.fits",
        "night/b_10.fits",
        "night/b_1.fits",
        "night/c.fits",
    ] {
        bench.write(name, "");
    }
    let session = bench
        .with(
            "[\"burst_000.fits\"]",
            "[\"night/c.fits\", \"night/b_*.fits\", \"night/b_1.fits\"]",
        )
        .unwrap();
    let names: Vec<_> = session.sequences[0]
        .files
        .iter()
        .map(|it| it.file_name().unwrap().to_str().unwrap())
        .collect();
    assert_eq!(names, ["b_1.fits", "b_10.fits", "b_2.fits", "c.fits"]);
}

#[test]
fn brackets_of_a_name_that_is_there_are_letters() {
    let bench = Bench::new();
    bench.write("disk[1].fits", "");
    bench.write("disk1.fits", "");
    let session = bench.with("burst_000.fits", "disk[1].fits").unwrap();
    assert_eq!(
        session.sequences[0].files,
        [bench.folder.path().join("disk[1].fits")]
    );
}

#[test]
fn a_folder_with_brackets_holds_patterns() {
    let bench = Bench::new();
    let folder = bench.folder.path().join("run [a]");
    std::fs::create_dir_all(&folder).unwrap();
    for name in [
        "dark.fits",
        "flat.fits",
        "burst_000.fits",
        "roll_001.fits",
        "weather.csv",
    ] {
        std::fs::copy(bench.folder.path().join(name), folder.join(name)).unwrap();
    }
    let path = folder.join("session.toml");
    std::fs::write(&path, COMPLETE.replace("burst_000.fits", "burst_*.fits")).unwrap();
    assert_eq!(
        read(&path).unwrap().sequences[0].files,
        [folder.join("burst_000.fits")]
    );
}

#[test]
fn the_header_answers_for_what_the_file_leaves_out() {
    let bench = Bench::new();
    let text = COMPLETE
        .replace("latitude_deg = 30.94\n", "")
        .replace("gain_e_adu = 12.0\n", "")
        .replace(
            "[instrument]",
            "[headers]\ngain_e_adu = \"EGAIN\"\n\n[instrument]",
        );
    let path = bench.write("session.toml", &text);
    let header = |frame: &std::path::Path, keyword: &str| match keyword {
        "OBSGEO-B" => Some(30.94),
        "EGAIN" if frame.ends_with("roll_001.fits") => Some(4.0),
        "EGAIN" => Some(12.0),
        _ => None,
    };
    let session = read_with_headers(&path, &header).unwrap();
    assert_eq!(session.site.latitude_deg, 30.94);
    let gains: Vec<f64> = session
        .sequences
        .iter()
        .map(|it| it.camera.gain_e_adu)
        .collect();
    assert_eq!(gains, [12.0, 4.0]);
    assert_eq!(
        session.from_headers,
        ["camera.gain_e_adu", "site.latitude_deg"]
    );
    let error = read_with_headers(&path, &|_, keyword| {
        (keyword == "OBSGEO-B").then_some(130.94)
    });
    let error = error.unwrap_err();
    assert_eq!(error.faults.len(), 2, "{error}");
    assert!(error.to_string().contains("OBSGEO-B = 130.94"), "{error}");
}

#[test]
fn a_plan_needs_no_frames() {
    let bench = Bench::new();
    let path = bench.write("session.toml", &COMPLETE.replace("burst_000", "not_yet_*"));
    assert!(read(&path).is_err());
    assert!(read_station(&path).unwrap().sequences[0].files.is_empty());
    let station = COMPLETE.split("[[sequence]]").next().unwrap();
    let path = bench.write("station.toml", station);
    assert!(read(&path).is_err());
    assert!(read_station(&path).unwrap().has_frames());
}

#[test]
fn the_words_of_the_air_are_those_of_its_formulas() {
    let names = RefractivityFormula::ALL.map(RefractivityFormula::name);
    assert_eq!(super::super::tables::FORMULAS, names);
    let names = crate::air::VapourConvention::ALL.map(crate::air::VapourConvention::name);
    assert_eq!(super::super::tables::VAPOURS, names);
}

#[test]
fn the_schema_knows_every_key_of_a_complete_session() {
    let schema = schema();
    assert_eq!(
        schema["$schema"],
        "https://json-schema.org/draft/2020-12/schema"
    );
    let camera = &schema["properties"]["camera"]["properties"];
    assert_eq!(camera["gain_e_adu"]["exclusiveMinimum"], 0.0);
    assert_eq!(camera["projection"]["default"], "tan");
    let sequence = &schema["properties"]["sequence"]["items"];
    assert_eq!(sequence["additionalProperties"], false);
    assert_eq!(sequence["properties"]["camera"]["properties"], *camera);
    let session: toml::Value = toml::from_str(COMPLETE).unwrap();
    for (table, keys) in session.as_table().unwrap() {
        let known = &schema["properties"][table];
        for key in keys.as_table().into_iter().flat_map(|it| it.keys()) {
            assert!(known["properties"].get(key).is_some(), "{table}.{key}");
        }
    }
}
