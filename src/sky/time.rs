//! Coordinated universal time, exact across leap seconds.
//!
//! # Model
//!
//! A [`Utc`] is the quasi Julian date of the SOFA collection: the first part is the JD of the day's
//! 0h, the second the fraction of *that* day, which has 86401 s when it ends in a leap second.
//!
//! ```text
//! TAI = UTC + dAT(day)          dAT: whole seconds, from the table below
//! TT  = TAI + 32.184 s
//! UT1 = UTC + (UT1 - UTC)
//! ```
//!
//! Differences and sums go through TAI, so that a second is an SI second everywhere.
//!
//! # Valid for
//!
//! 1972-01-01 (before it UTC did not tick SI seconds) to the end of 2035 (until which leap seconds
//! may be ordered: 27th CGPM, Resolution 4). The last leap second known here is that of 2016-12-31.
//! Dates outside are refused by [`Utc::parse`] and by [`sun()`](super::sun()).
//!
//! # Accuracy
//!
//! Differences 1e-10 s. Checked in `tests/published/time_scales.rs`.
//!
//! # Source
//!
//! IERS Bulletin C (dates of the leap seconds); ISO 8601 and FITS Standard 4.0 section 9.1.1 (form
//! of the text); SOFA Time Scale and Calendar Tools (quasi-JD).

use super::SkyError;
use super::calendar::{calendar, days_in_month, mjd_of};
use std::fmt;

/// First year for which times are accepted.
pub const FIRST_YEAR: i32 = 1972;

/// Last year for which times are accepted.
pub const LAST_YEAR: i32 = 2035;

/// TT - TAI, s (IAU 1991 Resolution A4).
const TT_MINUS_TAI_S: f64 = 32.184;

/// Seconds of a day without a leap second.
const DAY_S: f64 = 86_400.0;

/// JD of modified Julian date 0.
const MJD_ZERO_JD: f64 = 2_400_000.5;

/// TAI - UTC from 0h UTC of each MJD on, s: IERS Bulletin C.
const TAI_MINUS_UTC_S: [(f64, f64); 28] = [
    (41317.0, 10.0), // 1972-01-01
    (41499.0, 11.0), // 1972-07-01
    (41683.0, 12.0), // 1973-01-01
    (42048.0, 13.0), // 1974-01-01
    (42413.0, 14.0), // 1975-01-01
    (42778.0, 15.0), // 1976-01-01
    (43144.0, 16.0), // 1977-01-01
    (43509.0, 17.0), // 1978-01-01
    (43874.0, 18.0), // 1979-01-01
    (44239.0, 19.0), // 1980-01-01
    (44786.0, 20.0), // 1981-07-01
    (45151.0, 21.0), // 1982-07-01
    (45516.0, 22.0), // 1983-07-01
    (46247.0, 23.0), // 1985-07-01
    (47161.0, 24.0), // 1988-01-01
    (47892.0, 25.0), // 1990-01-01
    (48257.0, 26.0), // 1991-01-01
    (48804.0, 27.0), // 1992-07-01
    (49169.0, 28.0), // 1993-07-01
    (49534.0, 29.0), // 1994-07-01
    (50083.0, 30.0), // 1996-01-01
    (50630.0, 31.0), // 1997-07-01
    (51179.0, 32.0), // 1999-01-01
    (53736.0, 33.0), // 2006-01-01
    (54832.0, 34.0), // 2009-01-01
    (56109.0, 35.0), // 2012-07-01
    (57204.0, 36.0), // 2015-07-01
    (57754.0, 37.0), // 2017-01-01
];

/// A moment of coordinated universal time, as a quasi Julian date.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct Utc {
    /// JD of the day's 0h.
    jd1: f64,
    /// Fraction of the day, which may have 86401 s.
    jd2: f64,
}

impl Utc {
    /// Reads `YYYY-MM-DDThh:mm:ss[.fff][Z]`; a blank may stand for the `T`, and the seconds may be
    /// 60 where a leap second was inserted.
    ///
    /// # Errors
    ///
    /// A [`SkyError`] that says which part of the text is wrong, and what is allowed there.
    pub fn parse(text: &str) -> Result<Self, SkyError> {
        let form = || SkyError::TimeForm {
            text: text.to_owned(),
        };
        let (date, time) = text.trim().split_once(['T', ' ']).ok_or_else(form)?;
        let digits_end = time.find(|c: char| !(c.is_ascii_digit() || c == ':' || c == '.'));
        let (clock, suffix) = time.split_at(digits_end.unwrap_or(time.len()));
        let [year, month, day] = fields(date, '-').ok_or_else(form)?;
        let [hour, minute, second] = fields(clock, ':').ok_or_else(form)?;
        let (second, fraction) = second.split_once('.').unwrap_or((second, "0"));
        let year = digits(year, 4).ok_or_else(form)?;
        let month = digits(month, 2).ok_or_else(form)?;
        let day = digits(day, 2).ok_or_else(form)?;
        let hour = digits(hour, 2).ok_or_else(form)?;
        let minute = digits(minute, 2).ok_or_else(form)?;
        let second = digits(second, 2).ok_or_else(form)?;
        if fraction.is_empty() || fraction.contains('.') {
            return Err(form());
        }
        if !matches!(suffix, "" | "Z") {
            let (text, suffix) = (text.to_owned(), suffix.to_owned());
            return Err(SkyError::TimeOffset { text, suffix });
        }
        let fraction_s: f64 = format!("0.{fraction}").parse().map_err(|_| form())?;

        let field = |field, found, lowest, highest| {
            if (lowest..=highest).contains(&found) {
                return Ok(());
            }
            Err(SkyError::TimeField {
                text: text.to_owned(),
                field,
                found,
                lowest,
                highest,
            })
        };
        field("month", month, 1, 12)?;
        field("day", day, 1, days_in_month(year, month))?;
        field("hour", hour, 0, 23)?;
        field("minute", minute, 0, 59)?;
        field("second", second, 0, 60)?;

        let mjd = mjd_of(i64::from(year), i64::from(month), i64::from(day));
        let at = Self {
            jd1: MJD_ZERO_JD + mjd,
            jd2: 0.0,
        };
        at.require_known_leap_seconds()?;
        let whole_s = f64::from(60 * (60 * hour + minute) + second);
        let in_last_minute = hour == 23 && minute == 59;
        if second == 60 && !(in_last_minute && whole_s < day_length_s(mjd)) {
            return Err(SkyError::NoLeapSecond {
                text: text.to_owned(),
            });
        }
        Ok(Self {
            jd2: (whole_s + fraction_s) / day_length_s(mjd),
            ..at
        })
    }

    /// The two parts of the quasi Julian date: JD of the day's 0h, and the fraction of that day.
    pub fn quasi_jd(self) -> (f64, f64) {
        (self.jd1, self.jd2)
    }

    /// TAI - UTC on that day, s.
    pub fn tai_minus_utc_s(self) -> f64 {
        tai_minus_utc_s(self.mjd_day())
    }

    /// Julian date of terrestrial time, in two parts.
    pub fn tt_jd(self) -> (f64, f64) {
        self.jd_of_tai_plus(TT_MINUS_TAI_S)
    }

    /// The moment `seconds` SI seconds later, leap seconds counted.
    #[must_use]
    pub fn plus_s(self, seconds: f64) -> Self {
        let day = self.mjd_day();
        let second = self.second_of_day() + seconds;
        let days = (second / DAY_S).floor();
        // The leap seconds between the two midnights are part of the elapsed time.
        let leap_s = tai_minus_utc_s(day + days) - tai_minus_utc_s(day);
        let (mut day, mut second) = (day + days, second - days * DAY_S - leap_s);
        if second < 0.0 {
            day -= 1.0;
            second += day_length_s(day);
        } else if second >= day_length_s(day) {
            second -= day_length_s(day);
            day += 1.0;
        }
        Self {
            jd1: MJD_ZERO_JD + day,
            jd2: second / day_length_s(day),
        }
    }

    /// SI seconds elapsed from `other` to this moment, leap seconds counted.
    pub fn minus(self, other: Self) -> f64 {
        let days = self.mjd_day() - other.mjd_day();
        let leap_s = self.tai_minus_utc_s() - other.tai_minus_utc_s();
        days * DAY_S + (leap_s + (self.second_of_day() - other.second_of_day()))
    }

    /// `YYYY-MM-DDThh:mm:ss.fff`, rounded to the millisecond, without `Z` as the FITS standard has it.
    pub fn to_iso(self) -> String {
        let mut day = self.mjd_day();
        let mut millisecond = (self.second_of_day() * 1000.0).round();
        if millisecond >= day_length_s(day) * 1000.0 {
            day += 1.0;
            millisecond = 0.0;
        }
        let (year, month, day) = calendar(day);
        let millisecond = millisecond as u64;
        // The leap second belongs to the last minute of the day.
        let minutes = (millisecond / 60_000).min(24 * 60 - 1);
        let rest = millisecond - minutes * 60_000;
        let (hour, minute) = (minutes / 60, minutes % 60);
        let (second, fraction) = (rest / 1000, rest % 1000);
        format!("{year:04}-{month:02}-{day:02}T{hour:02}:{minute:02}:{second:02}.{fraction:03}")
    }

    /// Julian date, in two parts, of the time scale that runs `offset_s` ahead of TAI.
    pub(super) fn jd_of_tai_plus(self, offset_s: f64) -> (f64, f64) {
        (
            self.jd1,
            (self.second_of_day() + self.tai_minus_utc_s() + offset_s) / DAY_S,
        )
    }

    /// Refuses dates whose leap seconds are not known.
    pub(super) fn require_known_leap_seconds(self) -> Result<(), SkyError> {
        let (year, _, _) = calendar(self.mjd_day());
        let known = i64::from(FIRST_YEAR)..=i64::from(LAST_YEAR);
        if known.contains(&year) && self.jd2.is_finite() {
            return Ok(());
        }
        Err(self.date_out_of_range())
    }

    /// The error that names this date and the years allowed.
    pub(super) fn date_out_of_range(self) -> SkyError {
        let (year, month, day) = calendar(self.mjd_day());
        let date = format!("{year:04}-{month:02}-{day:02}");
        SkyError::DateOutOfRange {
            date,
            first: FIRST_YEAR,
            last: LAST_YEAR,
        }
    }

    fn mjd_day(self) -> f64 {
        self.jd1 - MJD_ZERO_JD
    }

    fn second_of_day(self) -> f64 {
        self.jd2 * day_length_s(self.mjd_day())
    }
}

impl fmt::Display for Utc {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str(&self.to_iso())
    }
}

/// Exactly three parts between two separators.
fn fields(text: &str, separator: char) -> Option<[&str; 3]> {
    let mut parts = text.split(separator);
    let found = [parts.next()?, parts.next()?, parts.next()?];
    parts.next().is_none().then_some(found)
}

/// A number of exactly `count` digits.
fn digits(text: &str, count: usize) -> Option<u32> {
    let plain = text.len() == count && text.bytes().all(|it| it.is_ascii_digit());
    if plain { text.parse().ok() } else { None }
}

/// TAI - UTC on a day, s; before 1972 that of 1972.
fn tai_minus_utc_s(mjd: f64) -> f64 {
    let later = TAI_MINUS_UTC_S.partition_point(|&(from, _)| from <= mjd);
    TAI_MINUS_UTC_S[later.saturating_sub(1)].1
}

/// Seconds of the UTC day that begins at `mjd`.
fn day_length_s(mjd: f64) -> f64 {
    DAY_S + tai_minus_utc_s(mjd + 1.0) - tai_minus_utc_s(mjd)
}
