//! Source: IERS Bulletin C (leap seconds); ISO 8601 and FITS Standard 4.0 section 9.1.1 (form of the
//! text); the crate `sofars` (a second implementation of the calendar and of the leap-second table).

use truelimb::sky::{FIRST_YEAR, LAST_YEAR, SkyError, Utc};

fn utc(text: &str) -> Utc {
    Utc::parse(text).unwrap_or_else(|error| panic!("{error}"))
}

/// Bulletin C 52: a leap second at the end of 2016; UTC - TAI = -36 s before and -37 s after it.
#[test]
fn leap_second_of_2016() {
    let before = utc("2016-12-31T23:59:59");
    let leap = utc("2016-12-31T23:59:60Z");
    let after = utc("2017-01-01T00:00:00");
    assert!(before < leap && leap < after);
    for (later, earlier, seconds) in [
        (leap, before, 1.0),
        (after, leap, 1.0),
        (after, before, 2.0),
    ] {
        assert!(
            (later.minus(earlier) - seconds).abs() < 1e-9,
            "{later} - {earlier}"
        );
        assert!(
            (earlier.minus(later) + seconds).abs() < 1e-9,
            "{earlier} - {later}"
        );
    }
    assert!((before.tai_minus_utc_s() - 36.0).abs() < 1e-12);
    assert!((after.tai_minus_utc_s() - 37.0).abs() < 1e-12);
    assert_eq!(before.plus_s(1.25).to_iso(), "2016-12-31T23:59:60.250");
    assert_eq!(before.plus_s(2.0).to_iso(), "2017-01-01T00:00:00.000");
    assert_eq!(after.plus_s(-0.5).to_iso(), "2016-12-31T23:59:60.500");
    assert_eq!(after.plus_s(-1.5).to_iso(), "2016-12-31T23:59:59.500");
    // A day and a year across it, both ways.
    assert_eq!(
        utc("2016-12-31T12:00:00").plus_s(86_400.0).to_iso(),
        "2017-01-01T11:59:59.000"
    );
    assert_eq!(
        utc("2017-06-01T00:00:00").plus_s(-31_536_000.0).to_iso(),
        "2016-06-01T00:00:01.000"
    );
}

/// The common case: 2001-09-09T01:46:40 is 10^9 s of POSIX time, which counts no leap seconds; from
/// 1972-01-01 on, 22 had been inserted by then (Bulletin C).
#[test]
fn long_intervals_count_leap_seconds() {
    let elapsed_s = utc("2001-09-09T01:46:40").minus(utc("1972-01-01T00:00:00"));
    assert!(
        (elapsed_s - (1e9 - 63_072_000.0 + 22.0)).abs() < 1e-6,
        "{elapsed_s}"
    );
}

#[test]
fn terrestrial_time() {
    // TT - UTC = 32.184 s + 37 s.
    let (day, part) = utc("2026-06-21T11:22:33.456").tt_jd();
    let seconds = 11.0 * 3600.0 + 22.0 * 60.0 + 33.456 + 69.184;
    assert!((day - 2_461_212.5).abs() < 1e-12 && (part * 86_400.0 - seconds).abs() < 1e-9);
}

#[test]
fn text_goes_round() {
    for text in [
        "1972-01-01T00:00:00.000",
        "1999-12-31T23:59:59.999",
        "2000-02-29T12:34:56.789",
        "2012-06-30T23:59:60.999",
        "2024-02-29T00:00:00.001",
        "2035-12-31T23:59:59.999",
    ] {
        assert_eq!(utc(text).to_iso(), text);
        assert_eq!(utc(&text.replace('T', " ")).to_string(), text);
    }
    assert_eq!(
        utc(" 2020-05-06T07:08:09Z ").to_iso(),
        "2020-05-06T07:08:09.000"
    );
    // Rounding up runs into the next day, and into the leap second where there is one.
    assert_eq!(
        utc("2020-05-06T23:59:59.9996").to_iso(),
        "2020-05-07T00:00:00.000"
    );
    assert_eq!(
        utc("2016-12-31T23:59:59.9996").to_iso(),
        "2016-12-31T23:59:60.000"
    );
    assert_eq!(
        utc("2016-12-31T23:59:60.9996").to_iso(),
        "2017-01-01T00:00:00.000"
    );
}

#[test]
fn microseconds_survive() {
    let start = utc("2023-07-14T09:00:00.000001");
    let later = start.plus_s(12_345.678_901);
    assert!((later.minus(start) - 12_345.678_901).abs() < 1e-9);
    assert!((start.minus(utc("2023-07-14T09:00:00")) - 1e-6).abs() < 1e-9);
}

/// Every month from 1972 to 2035: both parts of the date to the last bit, and TAI - UTC.
#[test]
fn same_as_the_other_implementation() {
    for year in FIRST_YEAR..=LAST_YEAR {
        for month in 1..=12 {
            for (day, second) in [(1, 0.0), (15, 12.5), (28, 59.999)] {
                let text = format!("{year}-{month:02}-{day:02}T23:59:{second:06.3}");
                let expected = sofars::ts::dtf2d("UTC", year, month, day, 23, 59, second).unwrap();
                assert_eq!(utc(&text).quasi_jd(), expected, "{text}");
                let tai_minus_utc_s = sofars::ts::dat(year, month, day, 0.5).unwrap();
                assert!(
                    (utc(&text).tai_minus_utc_s() - tai_minus_utc_s).abs() < 1e-12,
                    "{text}"
                );
            }
        }
    }
}

/// Every day from 1972 to 2035 follows the one before, by the other implementation's calendar.
#[test]
fn every_day_has_its_date() {
    let first = utc("1972-01-01T00:00:00");
    let mut at = first;
    for day in 0..23_376 {
        let (year, month, date, _) =
            sofars::cal::jd2cal(2_400_000.5, 41_317.0 + f64::from(day)).unwrap();
        let text = format!("{year}-{month:02}-{date:02}T12:00:00");
        at = utc(&text);
        assert!(
            (at.quasi_jd().0 - 2_441_317.5 - f64::from(day)).abs() < 1e-9,
            "{text}"
        );
        assert_eq!(at.to_iso(), format!("{text}.000"));
    }
    assert_eq!(at.to_iso(), "2035-12-31T12:00:00.000");
    assert!(first < at);
}

#[test]
fn refusals_say_what_is_wrong() {
    let message = |text: &str| Utc::parse(text).unwrap_err().to_string();
    for text in [
        "",
        "2020-05-06",
        "2020-05-06T07:08",
        "06.05.2020 07:08:09",
        "2020-5-6T07:08:09",
        "2020-05-06T7:08:09",
        "2020-05-06T07:08:09.",
        "2020-05-06T07:08:09.1.2",
        "2020-05-06T07:08:+9",
        "20200506T070809",
        "2020-05-06T07:08:0\u{0669}",
    ] {
        assert!(
            matches!(Utc::parse(text), Err(SkyError::TimeForm { .. })),
            "{text}: {}",
            message(text)
        );
    }
    for suffix in ["+02:00", "-07:00", "+00:00", " CEST", "z"] {
        let text = format!("2020-05-06T07:08:09{suffix}");
        assert!(
            matches!(Utc::parse(&text), Err(SkyError::TimeOffset { .. })),
            "{}",
            message(&text)
        );
        assert!(message(&text).contains(suffix));
    }
    assert!(message("2023-02-29T00:00:00").contains("day 29 is outside 1 to 28"));
    assert!(message("1900-13-01T00:00:00").contains("month 13 is outside 1 to 12"));
    assert!(message("2020-05-06T24:00:00").contains("hour 24 is outside 0 to 23"));
    assert!(message("2020-05-06T23:60:00").contains("minute 60 is outside 0 to 59"));
    assert!(message("2020-05-06T23:59:61").contains("second 61 is outside 0 to 60"));
    // No leap second was inserted on that day, nor in another minute of the right day.
    for text in [
        "2017-12-31T23:59:60",
        "2016-12-31T22:59:60",
        "2016-12-31T23:58:60.5",
    ] {
        assert!(
            matches!(Utc::parse(text), Err(SkyError::NoLeapSecond { .. })),
            "{text}"
        );
    }
    for text in [
        "1971-12-31T23:59:59",
        "2036-01-01T00:00:00",
        "9999-01-01T00:00:00",
    ] {
        assert!(
            matches!(Utc::parse(text), Err(SkyError::DateOutOfRange { .. })),
            "{text}"
        );
        assert!(message(text).contains("1972 to 2035"));
    }
}

#[test]
fn sums_that_leave_the_calendar_stay_harmless() {
    let start = utc("2020-01-01T00:00:00");
    for seconds in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY, 1e300, -1e300] {
        let there = start.plus_s(seconds);
        let error = truelimb::sky::geocentric_sun(there).unwrap_err();
        assert!(
            matches!(error, SkyError::DateOutOfRange { .. }),
            "{seconds}: {error}"
        );
        assert!(!there.to_iso().is_empty());
    }
}
