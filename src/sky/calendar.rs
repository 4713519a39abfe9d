//! Days of the Gregorian calendar.
//!
//! # Model
//!
//! ```text
//! day of the March year = floor((153 m + 2) / 5) + day - 1        m months since March
//! MJD = 146097 era + 365 y + floor(y / 4) - floor(y / 100) + day of the March year - 678881
//! ```
//!
//! `era`: whole 400 years since 0000-03-01; `y`: years since then, 0 to 399.
//!
//! # Valid for
//!
//! Any date, the Gregorian calendar carried back.
//!
//! # Accuracy
//!
//! Exact. Checked day by day through [`super::Utc`] in `tests/published/time_scales.rs`.
//!
//! # Source
//!
//! The Gregorian rule of leap years; MJD 51544 = 2000-01-01 (IAU).

/// Days of a month.
pub(crate) fn days_in_month(year: u32, month: u32) -> u32 {
    match month {
        2 if year.is_multiple_of(4) && (!year.is_multiple_of(100) || year.is_multiple_of(400)) => {
            29
        }
        2 => 28,
        4 | 6 | 9 | 11 => 30,
        _ => 31,
    }
}

/// Days of 400 Gregorian years.
const ERA_DAYS: i64 = 146_097;

/// MJD of 0000-03-01 in the Gregorian calendar: years are counted from March, so that the leap day
/// comes last.
const MARCH_ZERO_MJD: i64 = -678_881;

/// MJD of a Gregorian date.
pub(crate) fn mjd_of(year: i64, month: i64, day: i64) -> f64 {
    let march_year = if month > 2 { year } else { year - 1 };
    let (era, year_of_era) = (march_year.div_euclid(400), march_year.rem_euclid(400));
    let day_of_year = (153 * ((month + 9) % 12) + 2) / 5 + day - 1;
    let day_of_era = 365 * year_of_era + year_of_era / 4 - year_of_era / 100 + day_of_year;
    (era * ERA_DAYS + day_of_era + MARCH_ZERO_MJD) as f64
}

/// Gregorian date of an MJD.
pub(super) fn calendar(mjd: f64) -> (i64, i64, i64) {
    // Far beyond any calendar in use, so that the sums below cannot overflow.
    let limit = 1e9;
    let days = mjd.clamp(-limit, limit) as i64 - MARCH_ZERO_MJD;
    let (era, day_of_era) = (days.div_euclid(ERA_DAYS), days.rem_euclid(ERA_DAYS));
    let leap_days = day_of_era / 1460 - day_of_era / 36_524 + day_of_era / (ERA_DAYS - 1);
    let year_of_era = (day_of_era - leap_days) / 365;
    let day_of_year = day_of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
    let march_month = (5 * day_of_year + 2) / 153;
    let day = day_of_year - (153 * march_month + 2) / 5 + 1;
    let month = if march_month < 10 {
        march_month + 3
    } else {
        march_month - 9
    };
    let year = era * 400 + year_of_era + i64::from(month <= 2);
    (year, month, day)
}
