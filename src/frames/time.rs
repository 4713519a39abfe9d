//! When each plane of a file was exposed.
//!
//! Three forms are read: one image with a date and an exposure; a cube whose third axis is time
//! (CTYPE3 = 'UTC'); a cube with a binary table FRAMES whose column TIME counts from DATEREF. The
//! time scale is UTC; a header that names another is refused, not converted.

use super::error::FitsError;
use super::header;
use super::image::ImageFile;

/// Which keywords say when a frame was taken, in order of preference.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct HeaderMap {
    /// Date and time of a single image.
    pub date: Vec<String>,
    /// Date and time that the third axis or the column TIME of a cube counts from.
    pub cube_reference: Vec<String>,
    /// Exposure of one frame, in seconds.
    pub exposure: Vec<String>,
}

impl Default for HeaderMap {
    fn default() -> Self {
        let own = |names: &[&str]| names.iter().map(|it| (*it).to_owned()).collect();
        Self {
            date: own(&["DATE-BEG", "DATE-OBS"]),
            cube_reference: own(&["DATEREF", "DATE-OBS", "DATE-BEG"]),
            exposure: own(&["XPOSURE", "EXPTIME"]),
        }
    }
}

/// The time of one plane, as the header gives it.
#[derive(Clone, Debug, PartialEq)]
pub struct FrameTime {
    /// Reference, ISO 8601 in UTC without zone: `YYYY-MM-DDThh:mm:ss[.s]`.
    pub reference_utc: String,
    /// The keyword the reference was read from.
    pub reference_key: String,
    /// Start of the exposure, in seconds after the reference.
    pub offset_s: f64,
    /// Exposure in seconds, where the header says it.
    pub exposure_s: Option<f64>,
}

/// The times of all planes of `file`, in order.
///
/// # Errors
///
/// [`FitsError::NoTime`] when the header does not tell, [`FitsError::Keyword`] when what it tells
/// cannot be used.
pub fn frame_times(file: &mut ImageFile, map: &HeaderMap) -> Result<Vec<FrameTime>, FitsError> {
    utc_only(file)?;
    let exposure_s = exposure_s(file, &map.exposure)?;
    if let Some(times) = from_axis(file, map, exposure_s)? {
        return Ok(times);
    }
    if file.planes() == 1
        && let Some((reference_key, reference_utc)) = date(file, &map.date)?
    {
        return Ok(vec![FrameTime {
            reference_utc,
            reference_key,
            offset_s: 0.0,
            exposure_s,
        }]);
    }
    if let Some(times) = from_table(file, map, exposure_s)? {
        return Ok(times);
    }
    Err(no_time(
        file,
        if file.planes() == 1 {
            format!(
                "none of {} is in the header, and there is no table FRAMES",
                map.date.join(", ")
            )
        } else {
            format!(
                "{} planes, but CTYPE3 is not UTC and there is no table FRAMES with a column TIME",
                file.planes()
            )
        },
    ))
}

fn no_time(file: &ImageFile, looked_for: String) -> FitsError {
    FitsError::NoTime {
        path: file.path().to_owned(),
        looked_for,
    }
}

fn keyword(file: &ImageFile, name: &str, found: String, needed: &'static str) -> FitsError {
    FitsError::Keyword {
        path: file.path().to_owned(),
        hdu: file.hdu(),
        name: name.into(),
        found,
        needed,
    }
}

fn utc_only(file: &ImageFile) -> Result<(), FitsError> {
    match file.key_text("TIMESYS")? {
        Some(scale) if !scale.trim().eq_ignore_ascii_case("UTC") => {
            Err(keyword(file, "TIMESYS", scale, "UTC"))
        }
        _ => Ok(()),
    }
}

/// The first of the keywords that is there, as (name, seconds).
fn exposure_s(file: &ImageFile, names: &[String]) -> Result<Option<f64>, FitsError> {
    for name in names {
        if let Some(value) = file.key_f64(name)? {
            if value.is_finite() && value >= 0.0 {
                return Ok(Some(value));
            }
            return Err(keyword(
                file,
                name,
                value.to_string(),
                "an exposure of 0 s or more",
            ));
        }
    }
    Ok(None)
}

/// The first of the keywords that is there, as (name, date and time).
fn date(file: &ImageFile, names: &[String]) -> Result<Option<(String, String)>, FitsError> {
    const NEEDED: &str = "a UTC date and time as YYYY-MM-DDThh:mm:ss[.s]";
    for name in names {
        let Some(written) = file.key_text(name)? else {
            continue;
        };
        // A Z is no part of the FITS form, but it says nothing wrong: the scale is UTC.
        let mut text = written.trim().trim_end_matches('Z').to_owned();
        if !text.contains('T')
            && let Some(clock) = file.key_text("TIME-OBS")?
        {
            text = format!("{text}T{}", clock.trim());
        }
        if !is_date_time(&text) {
            return Err(keyword(file, name, format!("'{written}'"), NEEDED));
        }
        return Ok(Some((name.clone(), text)));
    }
    Ok(None)
}

/// Whether the text is a date and a time of day that exist; 60 s is left for a leap second.
fn is_date_time(text: &str) -> bool {
    let Some((date, clock)) = text.split_once('T') else {
        return false;
    };
    let number = |it: &str, digits: usize| -> Option<u32> {
        let plain = it.len() == digits && it.bytes().all(|b| b.is_ascii_digit());
        if plain { it.parse().ok() } else { None }
    };
    let date: Vec<&str> = date.split('-').collect();
    let clock: Vec<&str> = clock.split(':').collect();
    let ([year, month, day], [hour, minute, second]) = (date.as_slice(), clock.as_slice()) else {
        return false;
    };
    let (whole, fraction) = second.split_once('.').unwrap_or((second, "0"));
    let (Some(year), Some(month), Some(day), Some(hour), Some(minute), Some(whole)) = (
        number(year, 4),
        number(month, 2),
        number(day, 2),
        number(hour, 2),
        number(minute, 2),
        number(whole, 2),
    ) else {
        return false;
    };
    let leap = year.is_multiple_of(4) && (!year.is_multiple_of(100) || year.is_multiple_of(400));
    let days = match month {
        4 | 6 | 9 | 11 => 30,
        2 => 28 + u32::from(leap),
        1..=12 => 31,
        _ => return false,
    };
    (1..=days).contains(&day)
        && hour < 24
        && minute < 60
        && whole <= 60
        && fraction.bytes().all(|it| it.is_ascii_digit())
}

/// `start = reference + CRVAL3 + CDELT3 (plane + 1 - CRPIX3)`, the reference being DATEREF.
fn from_axis(
    file: &ImageFile,
    map: &HeaderMap,
    exposure_s: Option<f64>,
) -> Result<Option<Vec<FrameTime>>, FitsError> {
    let kind = file.key_text("CTYPE3")?.unwrap_or_default();
    if !["UTC", "TIME"]
        .iter()
        .any(|it| kind.trim().eq_ignore_ascii_case(it))
    {
        return Ok(None);
    }
    let unit = file.key_text("CUNIT3")?.unwrap_or_default();
    let Some(factor) = header::seconds_per(&unit) else {
        return Err(keyword(
            file,
            "CUNIT3",
            unit,
            "a unit of time (s, ms, us, min, h or d)",
        ));
    };
    let finite = |name: &str, absent: Option<f64>| -> Result<f64, FitsError> {
        match file.key_f64(name)?.or(absent) {
            Some(value) if value.is_finite() => Ok(value),
            Some(value) => Err(keyword(file, name, value.to_string(), "a finite number")),
            None => Err(keyword(
                file,
                name,
                "missing".to_owned(),
                "the time from plane to plane",
            )),
        }
    };
    let (pixel, value) = (finite("CRPIX3", Some(0.0))?, finite("CRVAL3", Some(0.0))?);
    let step = finite("CDELT3", if file.planes() == 1 { Some(1.0) } else { None })?;
    if file.planes() > 1 && step <= 0.0 {
        return Err(keyword(file, "CDELT3", step.to_string(), "a time above 0"));
    }
    let Some((reference_key, reference_utc)) = date(file, &map.cube_reference)? else {
        let names = map.cube_reference.join(", ");
        return Err(no_time(
            file,
            format!("CTYPE3 is a time, but none of {names} is there"),
        ));
    };
    let times = (0..file.planes()).map(|plane| FrameTime {
        reference_utc: reference_utc.clone(),
        reference_key: reference_key.clone(),
        offset_s: factor * (value + step * (plane as f64 + 1.0 - pixel)),
        exposure_s,
    });
    Ok(Some(times.collect()))
}

fn from_table(
    file: &ImageFile,
    map: &HeaderMap,
    exposure_s: Option<f64>,
) -> Result<Option<Vec<FrameTime>>, FitsError> {
    let Some(table) = file.frames_table()? else {
        return Ok(None);
    };
    if table.time_s.len() != file.planes() {
        let found = format!("{} rows for {} planes", table.time_s.len(), file.planes());
        return Err(keyword(file, "column TIME", found, "one row a plane"));
    }
    let (reference_key, reference_utc) = match table.reference {
        Some(text) if is_date_time(text.trim().trim_end_matches('Z')) => (
            "DATEREF".to_owned(),
            text.trim().trim_end_matches('Z').to_owned(),
        ),
        Some(text) => {
            let needed = "a UTC date and time as YYYY-MM-DDThh:mm:ss[.s]";
            return Err(keyword(file, "DATEREF", format!("'{text}'"), needed));
        }
        None => date(file, &map.cube_reference)?.ok_or_else(|| {
            let names = map.cube_reference.join(", ");
            no_time(
                file,
                format!("there is a table FRAMES, but none of {names}"),
            )
        })?,
    };
    let exposures = table.exposure_s;
    let times = table
        .time_s
        .iter()
        .enumerate()
        .map(|(plane, offset_s)| FrameTime {
            reference_utc: reference_utc.clone(),
            reference_key: reference_key.clone(),
            offset_s: *offset_s,
            exposure_s: exposures.as_ref().map(|it| it[plane]).or(exposure_s),
        });
    Ok(Some(times.collect()))
}

#[cfg(test)]
mod tests {
    use super::is_date_time;

    // FITS Standard 4.0, section 9.1.1: the ISO 8601 forms of date and time.
    #[test]
    fn dates_that_exist_are_taken_and_others_are_not() {
        for good in [
            "2026-06-21T11:22:33",
            "2016-12-31T23:59:60.5",
            "2024-02-29T00:00:00.000",
        ] {
            assert!(is_date_time(good), "{good}");
        }
        for bad in [
            "2026-06-21",
            "21/06/26",
            "2026-02-29T00:00:00",
            "2026-06-21T24:00:00",
            "2026-06-21T11:22:33+02:00",
            "2026-13-01T00:00:00",
            "2026-6-1T0:0:0",
        ] {
            assert!(!is_date_time(bad), "{bad}");
        }
    }
}
