//! Weather logs, soundings, curves and readings beside them.
//!
//! Standard pressures: U.S. Standard Atmosphere, 1976, from memory: 1013.25 hPa at sea level,
//! 772.1 hPa near 2240 m between 795.0 hPa (2000 m) and 701.2 hPa (3000 m).

use std::path::PathBuf;

use super::super::{
    Environment, Fault, FaultKind, FilterCurve, Sounding, WeatherColumns, WeatherError, WeatherLog,
    WeatherNote,
};
use super::{Bench, LOG};
use crate::sky::Utc;

const HEAD: &str = "time_utc,pressure_hpa,temperature_c,relative_humidity\n";

fn utc(text: &str) -> Utc {
    Utc::parse(&format!("2026-06-21T{text}")).unwrap()
}

fn log_of(bench: &Bench, text: &str) -> Result<WeatherLog, Vec<Fault>> {
    let path: PathBuf = bench.write("log.csv", text);
    WeatherLog::read(&path, &WeatherColumns::default(), Some(2240.0))
}

/// Rows five minutes apart with the same readings.
fn constant(pressure: &str, temperature: &str, humidity: &str) -> String {
    let row = |minute: usize| {
        format!("2026-06-21T09:{minute:02}:00Z,{pressure},{temperature},{humidity}\n")
    };
    HEAD.to_owned() + &[0, 5, 10].map(row).concat()
}

#[test]
fn readings_are_linear_between_rows() {
    let log = log_of(&Bench::new(), LOG).unwrap();
    let at = log.at(utc("09:02:30")).unwrap();
    assert!((at.air.pressure_hpa - 778.05).abs() < 1e-9);
    assert!((at.air.temperature_c - 9.3).abs() < 1e-9);
    assert!((at.air.relative_humidity - 0.345).abs() < 1e-9);
    assert_eq!(at.note, None);
    assert_eq!(log.at(utc("09:25:00")).unwrap().air.temperature_c, 10.2);
    assert_eq!(log.covers(), (utc("09:00:00"), utc("09:25:00")));
}

#[test]
fn columns_may_stand_in_any_order_with_others_and_comments() {
    let text = "\u{feff}# station 4\r\n\r\nwind, relative_humidity ,time_utc,\"temperature_c\",pressure_hpa\r\n# new battery\r\n3,0.30,2026-06-21 09:00:00,\"9.0\",778\r\n\r\n,0.32,2026-06-21T09:10:00+00:00,9.5,778.2\r\n";
    let log = log_of(&Bench::new(), text).unwrap();
    assert_eq!(log.rows(), 2);
    assert!((log.at(utc("09:05:00")).unwrap().air.relative_humidity - 0.31).abs() < 1e-12);
}

#[test]
fn columns_may_have_other_names() {
    let bench = Bench::new();
    let path = bench.write("log.csv", "utc,p,t,rh\n2026-06-21T09:00:00Z,778,9,0.3\n");
    let names = ["utc", "p", "t", "rh"].map(str::to_owned);
    let [time_utc, pressure_hpa, temperature_c, relative_humidity] = names;
    let columns = WeatherColumns {
        time_utc,
        pressure_hpa,
        temperature_c,
        relative_humidity,
    };
    assert!(WeatherLog::read(&path, &columns, Some(2240.0)).is_ok());
    let faults = WeatherLog::read(&path, &WeatherColumns::default(), None).unwrap_err();
    assert_eq!(faults.len(), 4);
    assert!(
        faults
            .iter()
            .all(|it| it.kind == FaultKind::MissingKey && it.line == 1)
    );
    bench.write(
        "weather.csv",
        "utc,pressure_hpa,temperature_c,relative_humidity\n2026-06-21T09:00:00Z,778,9,0.3\n",
    );
    let named = "[weather]\ncolumns = { time_utc = \"utc\" }\n";
    assert!(bench.with("[weather]\n", named).is_ok());
}

#[test]
fn each_bad_row_is_named() {
    let text = HEAD.to_owned()
        + "2026-06-21T09:00:00Z,778,9,0.3\n2026-06-21T09:05:00Z,,9,0.3\nyesterday,778,9,0.3\n2026-06-21T09:15:00Z,778\n2026-06-21T09:20:00Z,778,nan,0.3\n2026-06-21T09:25:00Z,778,99,0.3\n2026-06-21T09:24:00Z,778,9,0.3\n";
    let faults = log_of(&Bench::new(), &text).unwrap_err();
    let mut lines: Vec<_> = faults.iter().map(|it| (it.line, it.key.as_str())).collect();
    lines.sort_unstable();
    let expected = [
        (3, "pressure_hpa"),
        (4, "time_utc"),
        (5, "temperature_c"),
        (6, "temperature_c"),
        (7, "temperature_c"),
        (8, "time_utc"),
    ];
    assert_eq!(lines, expected);
    assert!(faults.iter().all(|it| it.kind == FaultKind::BadRow));
}

#[test]
fn a_thousand_bad_rows_are_counted() {
    let text = HEAD.to_owned() + &"2026-06-21T09:00:00Z,x,9,0.3\n".repeat(1000);
    let faults = log_of(&Bench::new(), &text).unwrap_err();
    assert_eq!(faults.len(), 21);
    assert_eq!(faults[20].found, "980 more bad rows");
}

#[test]
fn equal_times_are_refused() {
    let text = HEAD.to_owned() + &"2026-06-21T09:00:00Z,778,9,0.3\n".repeat(2);
    let faults = log_of(&Bench::new(), &text).unwrap_err();
    assert_eq!(
        (faults.len(), faults[0].line, faults[0].key.as_str()),
        (1, 3, "time_utc")
    );
}

#[test]
fn a_log_without_rows_is_refused() {
    for text in ["", "# nothing\n", HEAD] {
        assert_eq!(
            log_of(&Bench::new(), text).unwrap_err().len(),
            1,
            "{text:?}"
        );
    }
}

#[test]
fn wrong_units_are_recognised() {
    let bench = Bench::new();
    let wrong = |pressure: &str, temperature: &str, humidity: &str| {
        let faults = log_of(&bench, &constant(pressure, temperature, humidity)).unwrap_err();
        assert_eq!(faults.len(), 1, "{faults:?}");
        assert_eq!((faults[0].kind, faults[0].line), (FaultKind::WrongUnit, 2));
        (faults[0].found.clone(), faults[0].cure.clone())
    };
    assert!(wrong("77800", "9", "0.3").0.ends_with("looks like Pa"));
    assert!(wrong("77.8", "9", "0.3").0.ends_with("looks like kPa"));
    // 778 hPa are 583.5 mmHg and 22.97 inHg.
    assert!(wrong("583.5", "9", "0.3").0.ends_with("looks like mmHg"));
    assert!(wrong("22.97", "9", "0.3").0.ends_with("looks like inHg"));
    assert!(
        wrong("778", "282.15", "0.3")
            .0
            .ends_with("looks like kelvin")
    );
    assert!(wrong("778", "9", "35").0.ends_with("looks like percent"));
    let (found, cure) = wrong("1016", "9", "0.3");
    assert!(found.ends_with("looks reduced to sea level"), "{found}");
    assert!(cure.ends_with("likely near 774 hPa"), "{cure}");
}

#[test]
fn a_pressure_eight_percent_above_the_standard_is_the_limit() {
    // 772.1 hPa at 2240 m, so the limit is near 833.9 hPa.
    let bench = Bench::new();
    assert!(log_of(&bench, &constant("832", "9", "0.3")).is_ok());
    assert!(log_of(&bench, &constant("836", "9", "0.3")).is_err());
}

#[test]
fn a_constant_reduced_to_sea_level_is_refused_in_the_session() {
    let constants = "pressure_hpa = 1016\ntemperature_c = 9\nrelative_humidity = 0.3";
    let fault = Bench::new().only_fault("log = \"weather.csv\"", constants);
    assert_eq!(
        (fault.kind, fault.key.as_str()),
        (FaultKind::WrongUnit, "weather.pressure_hpa")
    );
}

#[test]
fn a_humidity_just_over_one_is_taken_as_one_and_noted() {
    let bench = Bench::new();
    let log = log_of(&bench, &constant("778", "9", "1.02")).unwrap();
    assert_eq!(log.at(utc("09:01:00")).unwrap().air.relative_humidity, 1.0);
    assert!(matches!(
        log.notes(),
        [WeatherNote::HumidityAtLimit { rows: 3, .. }]
    ));
    assert!(log_of(&bench, &constant("778", "9", "1.2")).is_err());
}

#[test]
fn gaps_and_ends_are_noted_then_refused() {
    let rows = ["08:00", "08:15", "08:50", "10:10"]
        .map(|time| format!("2026-06-21T{time}:00Z,778,9,0.3\n"))
        .concat();
    let log = log_of(&Bench::new(), &(HEAD.to_owned() + &rows)).unwrap();
    assert_eq!(log.at(utc("08:10:00")).unwrap().note, None);
    let gap = log.at(utc("08:30:00")).unwrap().note.unwrap();
    assert!(matches!(&gap, WeatherNote::Gap { gap_min, .. } if (gap_min - 35.0).abs() < 1e-9));
    assert_eq!(log.at(utc("08:31:00")).unwrap().note.unwrap(), gap);
    assert!(matches!(
        log.at(utc("09:00:00")),
        Err(WeatherError::InGap { .. })
    ));
    assert_eq!(log.at(utc("08:50:00")).unwrap().note, None);
    assert!(matches!(
        log.at(utc("07:50:00")).unwrap().note,
        Some(WeatherNote::Outside { nearest, .. }) if nearest == "2026-06-21T08:00:00Z"
    ));
    assert!(log.at(utc("10:20:00")).is_ok());
    let error = log.at(utc("10:21:00")).unwrap_err();
    let text = error.to_string();
    assert!(
        text.contains("asked for 2026-06-21T10:21:00.000, which is 11.0 min outside"),
        "{text}"
    );
    assert!(
        text.contains("2026-06-21T08:00:00Z to 2026-06-21T10:10:00Z"),
        "{text}"
    );
    assert!(matches!(
        log.at(utc("07:49:00")),
        Err(WeatherError::NotCovered { .. })
    ));
}

#[test]
fn a_sounding_rises() {
    let bench = Bench::new();
    let head = "height_m,pressure_hpa,temperature_c,relative_humidity\n";
    let read = |rows: &str| Sounding::read(&bench.write("s.csv", &(head.to_owned() + rows)));
    let good = "2000,795,12,0.4\n3000,701,4,0.4\n5000,540,-10,0.3\n9000,308,-40,0.1\n";
    assert_eq!(read(good).unwrap().levels[2].temperature_c, -10.0);
    let faults = read(&good.replace("5000,540", "2500,540")).unwrap_err();
    assert_eq!((faults.len(), faults[0].line), (1, 4));
    let faults = read(&good.replace("0.4", "40")).unwrap_err();
    assert_eq!((faults[0].kind, faults[0].line), (FaultKind::WrongUnit, 2));
    assert!(read("2000,795,12,0.4\n3000,701,4,0.4\n").is_err());
}

#[test]
fn a_curve_must_close() {
    let bench = Bench::new();
    let head = "wavelength_nm,transmission\n";
    let read = |rows: &str| FilterCurve::read(&bench.write("f.csv", &(head.to_owned() + rows)));
    // A triangle: centroid at the mean of its corners, width half its base.
    let curve = read("540,0\n546,1\n558,0\n").unwrap();
    assert!((curve.centre_nm() - 548.0).abs() < 1e-9);
    assert!((curve.width_nm() - 9.0).abs() < 1e-9);
    assert!(read("540,0.8\n546,1\n558,0\n").is_err());
    assert!(read("540,0\n546,0\n558,0\n").is_err());
    assert!(read("540,0\n530,1\n558,0\n").is_err());
}

#[test]
fn other_readings_follow_in_time() {
    let bench = Bench::new();
    bench.write(
        "tube.csv",
        "time_utc,tube_c,solar_w_m2\n2026-06-21T09:00:00Z,20,800\n2026-06-21T09:10:00Z,22,820\n",
    );
    let both = "[environment]\nlog = \"tube.csv\"\n\n[instrument]";
    let session = bench.with("[instrument]", both).unwrap();
    let environment: Environment = session.environment.unwrap();
    assert_eq!(environment.columns, ["tube_c", "solar_w_m2"]);
    assert_eq!(environment.at(utc("09:05:00")).unwrap(), [21.0, 810.0]);
    assert_eq!(environment.at(utc("09:15:00")).unwrap(), [22.0, 820.0]);
    assert_eq!(environment.at(utc("09:21:00")), None);
    let one = "[environment]\nlog = \"tube.csv\"\ncolumns = [\"tube\"]\n\n[instrument]";
    let fault = bench.only_fault("[instrument]", one);
    assert!(fault.cure.contains("tube_c"), "{}", fault.cure);
}

#[test]
fn a_mask_image_needs_its_place_and_a_limit() {
    let bench = Bench::new();
    bench.write("picture.fits", "");
    let whole = "[mask]\nimage = \"picture.fits\"\ncentre_x_px = 511.5\ncentre_y_px = 500\nradius_px = 440\nangle_deg = 12\nbrighter_than = 1.4\n\n[instrument]";
    let mask = bench.with("[instrument]", whole).unwrap().mask.unwrap();
    assert!(mask.image.ends_with("picture.fits"));
    assert_eq!(
        (mask.centre_px, mask.radius_px, mask.angle_deg),
        ((511.5, 500.0), 440.0, 12.0)
    );
    assert_eq!((mask.brighter_than, mask.darker_than), (Some(1.4), None));
    let without = |line: &str| bench.only_fault("[instrument]", &whole.replace(line, ""));
    let fault = without("brighter_than = 1.4\n");
    assert!(fault.cure.contains("darker_than"), "{}", fault.cure);
    let fault = without("radius_px = 440\n");
    assert_eq!(fault.key, "mask.radius_px");
    let absent = whole.replace("picture", "nothing");
    let fault = bench.only_fault("[instrument]", &absent);
    assert_eq!(fault.key, "mask.image");
    let low = whole.replace("brighter_than = 1.4", "brighter_than = 0.9");
    let fault = bench.only_fault("[instrument]", &low);
    assert_eq!(fault.key, "mask.brighter_than");
}
