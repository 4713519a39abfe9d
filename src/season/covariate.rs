//! A quantity in time against which a series is held, such as an index of activity.

/// Why a covariate cannot be used.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum CovariateError {
    /// A line that is no pair of numbers.
    #[error(
        "line {line}: found \"{found}\", expected `epoch,value`: a Julian year or a date such as 2026-06-21, and a number"
    )]
    Row {
        /// Line, from 1.
        line: usize,
        /// What stands there.
        found: String,
    },
    /// Epochs that go back.
    #[error("line {line}: epoch {epoch} does not come after {before}; sort the rows by time")]
    Order {
        /// Line, from 1.
        line: usize,
        /// Epoch found.
        epoch: f64,
        /// Epoch before it.
        before: f64,
    },
    /// Too few rows.
    #[error("{rows} rows; a covariate needs at least 2")]
    TooFew {
        /// Rows found.
        rows: usize,
    },
    /// A session outside.
    #[error(
        "the covariate {name} runs from {from:.3} to {to:.3}, a session is at {epoch:.3}; add rows, nothing is extrapolated"
    )]
    Outside {
        /// Its name.
        name: String,
        /// Its first epoch.
        from: f64,
        /// Its last epoch.
        to: f64,
        /// The session's.
        epoch: f64,
    },
}

/// A series of epochs and values.
#[derive(Clone, Debug, PartialEq)]
pub struct Covariate {
    /// Name of the value's column.
    pub name: String,
    rows: Vec<(f64, f64)>,
}

impl Covariate {
    /// Reads the text of a CSV file: a line of names, then `epoch,value`; `#` opens a comment.
    ///
    /// # Errors
    ///
    /// [`CovariateError`] with the line.
    ///
    /// ```
    /// let it = truelimb::season::Covariate::read("epoch,index\n2024.0,10\n2026.0,20\n")?;
    /// assert_eq!(it.at(2025.0)?, 15.0);
    /// # Ok::<(), truelimb::season::CovariateError>(())
    /// ```
    pub fn read(text: &str) -> Result<Self, CovariateError> {
        let mut name = None;
        let mut rows: Vec<(f64, f64)> = Vec::new();
        for (k, line) in text.trim_start_matches('\u{feff}').lines().enumerate() {
            let bare = line.trim();
            if bare.is_empty() || bare.starts_with('#') {
                continue;
            }
            let cells: Vec<&str> = bare.split(',').map(str::trim).collect();
            if name.is_none() {
                name = Some(cells.get(1).copied().unwrap_or("covariate").to_owned());
                if cells.len() == 2 && cells[1].parse::<f64>().is_err() {
                    continue;
                }
            }
            let bad = || CovariateError::Row {
                line: k + 1,
                found: bare.chars().take(60).collect(),
            };
            let [epoch, value] = cells[..] else {
                return Err(bad());
            };
            let epoch = year(epoch).ok_or_else(bad)?;
            let value: f64 = value.parse().map_err(|_| bad())?;
            if !value.is_finite() {
                return Err(bad());
            }
            if let Some(before) = rows.last().map(|it| it.0)
                && epoch <= before
            {
                return Err(CovariateError::Order {
                    line: k + 1,
                    epoch,
                    before,
                });
            }
            rows.push((epoch, value));
        }
        if rows.len() < 2 {
            return Err(CovariateError::TooFew { rows: rows.len() });
        }
        let name = name
            .filter(|it| it.parse::<f64>().is_err() && !it.is_empty())
            .unwrap_or_else(|| "covariate".to_owned());
        Ok(Self { name, rows })
    }

    /// The value at an epoch, linear between rows.
    ///
    /// # Errors
    ///
    /// [`CovariateError::Outside`] before the first row and after the last.
    pub fn at(&self, epoch_year: f64) -> Result<f64, CovariateError> {
        let last = self.rows.len() - 1;
        let (from, to) = (self.rows[0].0, self.rows[last].0);
        if !(from..=to).contains(&epoch_year) {
            return Err(CovariateError::Outside {
                name: self.name.clone(),
                from,
                to,
                epoch: epoch_year,
            });
        }
        let next = self
            .rows
            .partition_point(|it| it.0 <= epoch_year)
            .clamp(1, last);
        let (a, b) = (self.rows[next - 1], self.rows[next]);
        Ok(a.1 + (epoch_year - a.0) / (b.0 - a.0) * (b.1 - a.1))
    }
}

/// A Julian year, or a date as one.
fn year(text: &str) -> Option<f64> {
    if let Ok(it) = text.parse::<f64>() {
        return (1900.0..2200.0).contains(&it).then_some(it);
    }
    // A day stands for its noon.
    let whole = if text.contains(['T', ' ']) {
        text.to_owned()
    } else {
        format!("{text}T12:00:00")
    };
    let (day, fraction) = crate::sky::Utc::parse(&whole).ok()?.tt_jd();
    Some(2000.0 + ((day - 2_451_545.0) + fraction) / 365.25)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn faults_name_their_line() {
        let line = |text: &str| Covariate::read(text).unwrap_err().to_string();
        assert!(line("epoch,x\n2024,1\n2023,2\n").contains("line 3"));
        assert!(line("epoch,x\n2024,1\n2025\n").contains("line 3"));
        assert!(line("epoch,x\n2024,NaN\n2025,1\n").contains("line 2"));
        assert!(line("epoch,x\n2024,1\n").contains("at least 2"));
        let it = Covariate::read("2024,1\n2025,3\n").unwrap();
        assert_eq!(it.name, "covariate");
        assert!(it.at(2026.0).is_err());
    }

    /// Source: J2000.0 is 2000-01-01T12:00:00 TT: definition of the epoch.
    #[test]
    fn a_date_is_a_julian_year() {
        assert!((year("2000-01-01T11:58:55.816").unwrap() - 2000.0).abs() < 1e-9);
        assert!((year("2001-01-01").unwrap() - 2001.0).abs() < 0.003);
    }
}
