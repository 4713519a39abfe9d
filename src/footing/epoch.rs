//! The epoch of a published value: a day, a time, a month, a decimal year, or from one to another.

use crate::sky::calendar::{days_in_month, mjd_of};

/// Years that are allowed: telescopes first showed the Sun's disk in 1610.
pub const YEARS: (i64, i64) = (1610, 2100);

/// When a value was measured.
#[derive(Clone, Debug, PartialEq)]
pub struct Epoch {
    /// As written.
    pub text: String,
    /// First day, MJD.
    pub from_mjd: f64,
    /// Last day, MJD; the same for a moment.
    pub to_mjd: f64,
}

impl Epoch {
    /// What [`parse`](Self::parse) takes.
    pub const ALLOWED: &str = "YYYY-MM-DD, with Thh:mm:ss or not, YYYY-MM, a decimal year such as 2011.5, or two of them with / between; years 1610 to 2100";

    /// Reads an epoch. A month and a year without a fraction stand for all of their days.
    pub fn parse(text: &str) -> Option<Self> {
        let (first, last) = match text.split_once('/') {
            Some((first, last)) => (span(first.trim())?, span(last.trim())?),
            None => (span(text)?, span(text)?),
        };
        (first.0 <= last.0 && first.1 <= last.1).then(|| Self {
            text: text.to_owned(),
            from_mjd: first.0,
            to_mjd: last.1,
        })
    }

    /// The middle, MJD.
    pub fn middle_mjd(&self) -> f64 {
        0.5 * (self.from_mjd + self.to_mjd)
    }

    /// The middle as a decimal year, for an axis.
    pub fn year(&self) -> f64 {
        2000.0 + (self.middle_mjd() - 51_544.5) / 365.25
    }
}

fn digits(text: &str, count: usize) -> Option<i64> {
    let all = text.len() == count && text.bytes().all(|it| it.is_ascii_digit());
    all.then(|| text.parse().ok()).flatten()
}

/// First and last moment of one epoch.
fn span(text: &str) -> Option<(f64, f64)> {
    let (date, time) = text
        .split_once(['T', ' '])
        .map_or((text, None), |(date, time)| (date, Some(time)));
    let mut parts = date.split('-');
    let (year, month, day) = (parts.next()?, parts.next(), parts.next());
    if parts.next().is_some() || time.is_some() && day.is_none() {
        return None;
    }
    let in_range = |year: i64| (YEARS.0..=YEARS.1).contains(&year);
    let Some(month) = month else {
        return decimal_year(year, in_range);
    };
    let year = digits(year, 4).filter(|it| in_range(*it))?;
    let month = digits(month, 2).filter(|it| (1..=12).contains(it))?;
    let days = i64::from(days_in_month(year as u32, month as u32));
    match day {
        None => Some((mjd_of(year, month, 1), mjd_of(year, month, 1) + days as f64)),
        Some(day) => {
            let day = digits(day, 2).filter(|it| (1..=days).contains(it))?;
            let start = mjd_of(year, month, day);
            match time {
                None => Some((start, start + 1.0)),
                Some(time) => {
                    let moment = start + clock(time)?;
                    Some((moment, moment))
                }
            }
        }
    }
}

fn decimal_year(text: &str, in_range: impl Fn(i64) -> bool) -> Option<(f64, f64)> {
    let whole = digits(text.split('.').next()?, 4).filter(|it| in_range(*it))?;
    let (start, end) = (mjd_of(whole, 1, 1), mjd_of(whole + 1, 1, 1));
    if !text.contains('.') {
        return Some((start, end));
    }
    let fraction = text.parse::<f64>().ok()? - whole as f64;
    let moment = start + fraction * (end - start);
    Some((moment, moment))
}

/// Share of a day.
fn clock(text: &str) -> Option<f64> {
    let mut parts = text.trim_end_matches('Z').split(':');
    let hour = digits(parts.next()?, 2).filter(|it| *it < 24)?;
    let minute = digits(parts.next()?, 2).filter(|it| *it < 60)?;
    let second = match parts.next() {
        None => 0.0,
        Some(it) => it
            .parse::<f64>()
            .ok()
            .filter(|it| (0.0..61.0).contains(it))?,
    };
    parts.next().is_none().then_some(())?;
    Some((hour as f64 * 3600.0 + minute as f64 * 60.0 + second) / 86_400.0)
}

#[cfg(test)]
#[expect(clippy::float_cmp, reason = "exact by construction")]
mod tests {
    use super::*;

    // Source: MJD 51544.5 is 2000-01-01T12:00 (IAU); MJD 40587 is 1970-01-01 (POSIX epoch).
    #[test]
    fn every_form_of_an_epoch() {
        let middle = |text: &str| Epoch::parse(text).unwrap().middle_mjd();
        assert_eq!(middle("2000-01-01"), 51_544.5);
        assert_eq!(middle("2000-01-01T12:00:00Z"), 51_544.5);
        assert_eq!(middle("1970-01-01T00:00"), 40_587.0);
        assert_eq!(middle("2000-02"), 51_544.0 + 31.0 + 14.5);
        assert_eq!(middle("2000.5"), 51_544.0 + 183.0);
        assert_eq!(middle("2000"), 51_544.0 + 183.0);
        assert_eq!(middle("2000-01-01/2000-01-03"), 51_545.5);
        assert!((Epoch::parse("2000-01-01T12:00:00").unwrap().year() - 2000.0).abs() < 1e-12);
        for text in [
            "",
            "soon",
            "2000-13",
            "2000-02-30",
            "1500-01-01",
            "2000-1-1",
            "2000-01-02/2000-01-01",
            "2000-01-01T25:00",
            "2000-01T12:00",
            "20000.5",
            "2000-01-01-01",
        ] {
            assert_eq!(Epoch::parse(text), None, "{text}");
        }
    }
}
