//! The weather log: readings of the station, checked, and the air at any time between them.
//!
//! A log is refused where its numbers are in another unit or its pressure is reduced to sea level:
//! each would bend the limb by more than what is to be measured.

use std::path::{Path, PathBuf};

use super::fault::Fault;
use super::guards::{self, HUMIDITY_SLACK};
use super::sheet::{self, Wanted};
use crate::sky::Utc;

/// Beyond the first and the last row the log still serves for so long, in minutes.
pub const EXTRAPOLATION_MIN: f64 = 10.0;
/// A gap longer than this is noted, in minutes.
pub const NOTED_GAP_MIN: f64 = 20.0;
/// A gap longer than this is not bridged, in minutes.
pub const LONGEST_GAP_MIN: f64 = 60.0;

/// The air at the station at one time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SurfaceAir {
    /// Pressure at the station, not reduced to sea level.
    pub pressure_hpa: f64,
    /// Temperature of the free air.
    pub temperature_c: f64,
    /// Relative humidity, 0 to 1.
    pub relative_humidity: f64,
}

/// The air at one time and what is to be said about it.
#[derive(Clone, Debug, PartialEq)]
pub struct WeatherAt {
    /// The air.
    pub air: SurfaceAir,
    /// Where the log had to be stretched.
    pub note: Option<WeatherNote>,
}

/// Something about a log that a reader must know. Equal notes of many frames are one.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum WeatherNote {
    /// The time lies in a gap.
    #[error("{}: no reading for {gap_min:.0} min between {from} and {to}; interpolated", path.display())]
    Gap {
        /// The log.
        path: PathBuf,
        /// Length of the gap.
        gap_min: f64,
        /// Last reading before it.
        from: String,
        /// First reading after it.
        to: String,
    },
    /// The time lies before the first or after the last reading.
    #[error("{}: frames up to {EXTRAPOLATION_MIN} min outside the log; the reading of {nearest} holds for them", path.display())]
    Outside {
        /// The log.
        path: PathBuf,
        /// The reading that is used.
        nearest: String,
    },
    /// Humidities just outside 0 to 1.
    #[error("{}: {rows} relative humidities outside 0 to 1, by {HUMIDITY_SLACK} at most; taken as the limit", path.display())]
    HumidityAtLimit {
        /// The log.
        path: PathBuf,
        /// How many.
        rows: usize,
    },
}

/// Why the log gives no air for a time.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum WeatherError {
    /// The time is too far outside.
    #[error(
        "{}: asked for {asked}, which is {outside_min:.1} min outside {first} to {last}; at most {EXTRAPOLATION_MIN} min are allowed: add readings to the log, or give constants in [weather]",
        path.display()
    )]
    NotCovered {
        /// The log.
        path: PathBuf,
        /// The time.
        asked: Utc,
        /// How far outside.
        outside_min: f64,
        /// First reading.
        first: String,
        /// Last reading.
        last: String,
    },
    /// The time is in a gap that is too long.
    #[error(
        "{}: asked for {asked}, in a gap of {gap_min:.0} min from {from} to {to}; at most {LONGEST_GAP_MIN} min are bridged: add readings to the log",
        path.display()
    )]
    InGap {
        /// The log.
        path: PathBuf,
        /// The time.
        asked: Utc,
        /// Length of the gap.
        gap_min: f64,
        /// Last reading before it.
        from: String,
        /// First reading after it.
        to: String,
    },
}

/// Names of the columns of a log.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct WeatherColumns {
    /// Time, UTC.
    pub time_utc: String,
    /// Pressure, hPa.
    pub pressure_hpa: String,
    /// Temperature, C.
    pub temperature_c: String,
    /// Relative humidity, as a fraction.
    pub relative_humidity: String,
}

impl Default for WeatherColumns {
    fn default() -> Self {
        Self {
            time_utc: "time_utc".to_owned(),
            pressure_hpa: "pressure_hpa".to_owned(),
            temperature_c: "temperature_c".to_owned(),
            relative_humidity: "relative_humidity".to_owned(),
        }
    }
}

/// A checked log; one row at least, times increasing.
#[derive(Clone, Debug, PartialEq)]
pub struct WeatherLog {
    path: PathBuf,
    columns: WeatherColumns,
    start: Utc,
    seconds: Vec<f64>,
    stamps: Vec<String>,
    air: Vec<SurfaceAir>,
    notes: Vec<WeatherNote>,
}

impl WeatherLog {
    /// Reads and checks a log of a station at a height; none where the height is not known.
    ///
    /// # Errors
    ///
    /// Every fault of the file.
    pub fn read(
        path: &Path,
        columns: &WeatherColumns,
        height_m: Option<f64>,
    ) -> Result<Self, Vec<Fault>> {
        let wanted = |column: &str, field| Wanted {
            column: column.to_owned(),
            field,
        };
        let (sheet, mut faults) = sheet::read(
            path,
            Some(&columns.time_utc),
            &[
                wanted(&columns.pressure_hpa, "pressure_hpa"),
                wanted(&columns.temperature_c, "temperature_c"),
                wanted(&columns.relative_humidity, "relative_humidity"),
            ],
        );
        let Some(sheet) = sheet else {
            return Err(faults);
        };
        guards::check(&sheet, height_m, &mut faults);
        sheet.check_times(&mut faults);
        let Some(&start) = sheet.times.first() else {
            return Err(faults);
        };
        if !faults.is_empty() {
            return Err(faults);
        }
        let slack = sheet.columns[2]
            .iter()
            .filter(|it| !(0.0..=1.0).contains(*it))
            .count();
        let mut notes = Vec::new();
        if slack > 0 {
            notes.push(WeatherNote::HumidityAtLimit {
                path: path.to_owned(),
                rows: slack,
            });
        }
        let air = (0..sheet.len()).map(|row| SurfaceAir {
            pressure_hpa: sheet.columns[0][row],
            temperature_c: sheet.columns[1][row],
            relative_humidity: sheet.columns[2][row].clamp(0.0, 1.0),
        });
        Ok(Self {
            path: path.to_owned(),
            columns: columns.clone(),
            start,
            seconds: sheet.times.iter().map(|time| time.minus(start)).collect(),
            air: air.collect(),
            stamps: sheet.stamps,
            notes,
        })
    }

    /// The file.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// Names of the columns that were read.
    pub fn columns(&self) -> &WeatherColumns {
        &self.columns
    }

    /// What is to be said about the log as a whole.
    pub fn notes(&self) -> &[WeatherNote] {
        &self.notes
    }

    /// Times of the first and the last reading.
    pub fn covers(&self) -> (Utc, Utc) {
        (
            self.start,
            self.start
                .plus_s(self.seconds.last().copied().unwrap_or(0.0)),
        )
    }

    /// How many readings there are.
    pub fn rows(&self) -> usize {
        self.air.len()
    }

    /// The mean of all readings, for a plan.
    pub fn mean(&self) -> SurfaceAir {
        let count = self.air.len() as f64;
        let mean = |of: fn(&SurfaceAir) -> f64| self.air.iter().map(of).sum::<f64>() / count;
        SurfaceAir {
            pressure_hpa: mean(|it| it.pressure_hpa),
            temperature_c: mean(|it| it.temperature_c),
            relative_humidity: mean(|it| it.relative_humidity),
        }
    }

    /// The air at a time, linear between readings; outside, by [`EXTRAPOLATION_MIN`] at most, the
    /// nearest reading.
    ///
    /// # Errors
    ///
    /// [`WeatherError`] where the log does not cover the time.
    pub fn at(&self, time: Utc) -> Result<WeatherAt, WeatherError> {
        let asked_s = time.minus(self.start);
        let after = self.seconds.partition_point(|&it| it < asked_s);
        if self.seconds.get(after) == Some(&asked_s) {
            return Ok(WeatherAt {
                air: self.air[after],
                note: None,
            });
        }
        if after == 0 || after == self.seconds.len() {
            return self.outside(time, asked_s, after.saturating_sub(1));
        }
        let (from_s, to_s) = (self.seconds[after - 1], self.seconds[after]);
        let gap_min = (to_s - from_s) / 60.0;
        let path = self.path.clone();
        let (from, to) = (self.stamps[after - 1].clone(), self.stamps[after].clone());
        if gap_min > LONGEST_GAP_MIN {
            return Err(WeatherError::InGap {
                path,
                asked: time,
                gap_min,
                from,
                to,
            });
        }
        let note = (gap_min > NOTED_GAP_MIN).then_some(WeatherNote::Gap {
            path,
            gap_min,
            from,
            to,
        });
        let share = (asked_s - from_s) / (to_s - from_s);
        let (a, b) = (&self.air[after - 1], &self.air[after]);
        let between = |a: f64, b: f64| a + share * (b - a);
        let air = SurfaceAir {
            pressure_hpa: between(a.pressure_hpa, b.pressure_hpa),
            temperature_c: between(a.temperature_c, b.temperature_c),
            relative_humidity: between(a.relative_humidity, b.relative_humidity),
        };
        Ok(WeatherAt { air, note })
    }

    fn outside(&self, time: Utc, asked_s: f64, nearest: usize) -> Result<WeatherAt, WeatherError> {
        let outside_min = (asked_s - self.seconds[nearest]).abs() / 60.0;
        // Written so that a time that is no number is refused too.
        if outside_min <= EXTRAPOLATION_MIN {
            let nearest_stamp = self.stamps[nearest].clone();
            let note = WeatherNote::Outside {
                path: self.path.clone(),
                nearest: nearest_stamp,
            };
            return Ok(WeatherAt {
                air: self.air[nearest],
                note: Some(note),
            });
        }
        Err(WeatherError::NotCovered {
            path: self.path.clone(),
            asked: time,
            outside_min,
            first: self.stamps[0].clone(),
            last: self.stamps[self.stamps.len() - 1].clone(),
        })
    }
}
