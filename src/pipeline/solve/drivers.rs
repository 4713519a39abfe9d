//! Readings with which the distortion may go, at the times of the frames.

use crate::pipeline::Error;
use crate::pipeline::measure::MeasuredSequence;
use crate::session::Session;
use crate::shape::Driver;

/// Prior standard deviation of what a reading's own standard deviation does to each coefficient, mas: wide
/// beside the distortion of any telescope that is fit for the work.
const WIDE_MAS: f64 = 100.0;

/// The drivers that the session asks for: columns of its [environment], and the drift of its [instrument].
///
/// # Errors
///
/// When the log does not cover a frame.
pub(super) fn drivers(
    session: &Session,
    measured: &[MeasuredSequence],
) -> Result<Vec<Driver>, Error> {
    let start = measured[0].frames[0].utc;
    let times: Vec<_> = measured
        .iter()
        .filter(|it| it.set_aside.is_none())
        .flat_map(|it| &it.frames)
        .map(|it| it.utc)
        .collect();
    let mut out = Vec::new();
    if let Some(log) = &session.environment {
        let mut rows = Vec::new();
        for &time in &times {
            let row = log.at(time).ok_or_else(|| Error::File {
                path: log.path.clone(),
                what: "does not cover the frames",
                reason: format!(
                    "no reading near {time}; complete the log, or take [environment] out of the session"
                ),
            })?;
            rows.push((time.minus(start), row));
        }
        for (k, name) in log.columns.iter().enumerate() {
            let readings = rows.iter().map(|it| (it.0, it.1[k])).collect();
            let (readings, spread) = about_mean(readings);
            if !(spread > 0.0) {
                // It never changed: nothing can go with it.
                continue;
            }
            out.push(Driver {
                name: name.clone(),
                unit: "",
                term: "instrument with readings",
                how: format!(
                    "distortion against {name} of the environment's log, {WIDE_MAS} mas for its standard deviation of {spread:.3} before the fit"
                ),
                sigma_mas: WIDE_MAS / spread,
                readings,
            });
        }
    }
    let seconds: Vec<f64> = times.iter().map(|it| it.minus(start)).collect();
    out.extend(drift(session, &seconds));
    Ok(out)
}

/// The drift of the instrument with time, where the session allows for one.
pub(super) fn drift(session: &Session, seconds: &[f64]) -> Option<Driver> {
    let sigma_mas = session.instrument.drift_sigma_mas_per_hour?;
    let hours = seconds.iter().map(|it| (*it, it / 3600.0)).collect();
    Some(Driver {
        name: "time".to_owned(),
        unit: "h",
        term: "instrument drift",
        how: "instrument.drift_sigma_mas_per_hour".to_owned(),
        sigma_mas,
        readings: about_mean(hours).0,
    })
}

/// Readings in the order of time minus their mean, and their standard deviation.
fn about_mean(mut readings: Vec<(f64, f64)>) -> (Vec<(f64, f64)>, f64) {
    readings.sort_by(|a, b| a.0.total_cmp(&b.0));
    let count = readings.len() as f64;
    let mean = readings.iter().map(|it| it.1).sum::<f64>() / count;
    for it in &mut readings {
        it.1 -= mean;
    }
    let variance = readings.iter().map(|it| it.1 * it.1).sum::<f64>() / count;
    (readings, variance.sqrt())
}
