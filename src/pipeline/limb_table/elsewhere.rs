//! Sequences of kind "limbs": tables of any program, and `limbs.fits` of this one.

use super::given::{Content, Given, GivenFrame, Point};
use super::read::{Saved, hung};
use crate::frames::{FitsError, TableFile};
use crate::limb::template::blur_of_width;
use crate::pipeline::Error;
use crate::session::{
    LIMB_COLUMNS, LimbSheet, Projection, ScaleOf, Sequence, SessionError, read_limb_sheet,
};
use crate::sky::{Orientation, Parity, Utc};
use std::f64::consts::FRAC_PI_2;
use std::path::{Path, PathBuf};

/// The tables of a sequence of kind "limbs", each group of limbs (a file, or a sequence in a
/// `limbs.fits`) as a sequence of its own: what is fixed to the detector turns between them.
///
/// # Errors
///
/// When a file is no such table.
pub(in crate::pipeline) fn of_files(sequence: &Sequence) -> Result<Vec<(Sequence, Given)>, Error> {
    let mut out = Vec::new();
    for path in &sequence.files {
        let is_fits = path.extension().is_some_and(|it| {
            let it = it.to_string_lossy().to_lowercase();
            it == "fits" || it == "fit" || it == "gz"
        });
        let one = |given: Given, scale: f64, projection, scale_of| {
            let mut own = sequence.clone();
            own.files = vec![path.clone()];
            own.camera.scale_arcsec_px = scale;
            own.camera.projection = projection;
            own.camera.scale_of = scale_of;
            (own, given)
        };
        if is_fits && is_ours(path)? {
            for (_, it) in Saved::read(path)?.sequences {
                out.push(one(
                    it.given,
                    it.scale_arcsec_px,
                    it.projection,
                    it.scale_of,
                ));
            }
            continue;
        }
        let sheet = if is_fits {
            fits_sheet(path)?
        } else {
            read_limb_sheet(path).map_err(|faults| {
                Error::Session(SessionError {
                    path: path.clone(),
                    faults,
                    more: 0,
                })
            })?
        };
        let given = given(path, &sheet)?;
        out.push(one(given, 1.0, Projection::Arc, ScaleOf::Apparent));
    }
    Ok(out)
}

/// Whether a FITS file is a `limbs.fits` of this program.
fn is_ours(path: &Path) -> Result<bool, Error> {
    match TableFile::open(path, Some("LIMBS")) {
        Ok(it) => Ok(it.text("TL_STAMP")?.is_some()),
        Err(FitsError::Damaged { .. }) => Ok(false),
        Err(it) => Err(it.into()),
    }
}

/// Names of the columns in a FITS table, in the order of [`LIMB_COLUMNS`].
const FITS_COLUMNS: [&str; 6] = ["POSANG", "RADIUS", "DIAMETER", "SIGMA", "THETA", "BLUR"];

/// The first binary table of a FITS file: TIME after DATEREF, and the rest with their units.
fn fits_sheet(path: &Path) -> Result<LimbSheet, Error> {
    let table = TableFile::open(path, None)?;
    let damaged = |found: String| {
        Error::Fits(FitsError::Damaged {
            path: path.to_owned(),
            found,
        })
    };
    let Some(reference) = table.text("DATEREF")? else {
        return Err(damaged(
            "the table has no keyword DATEREF, from which its column TIME counts".to_owned(),
        ));
    };
    let reference = Utc::parse(&reference)?;
    let unit_of = |name: &str, units: &[(&str, f64)]| -> Result<f64, Error> {
        let unit = table.unit(name)?;
        units
            .iter()
            .find(|it| it.0 == unit.trim())
            .map(|it| it.1)
            .ok_or_else(|| {
                let allowed: Vec<&str> = units.iter().map(|it| it.0).collect();
                damaged(format!(
                    "column {name} has the unit \"{unit}\"; allowed are {}",
                    allowed.join(", ")
                ))
            })
    };
    let factor = unit_of(
        "TIME",
        &[("s", 1.0), ("min", 60.0), ("h", 3600.0), ("d", 86400.0)],
    )?;
    let time_s = table.needed("TIME")?;
    let mut columns: [Option<Vec<f64>>; 6] = Default::default();
    for (to, name) in columns.iter_mut().zip(FITS_COLUMNS) {
        let Some(values) = table.column(name)? else {
            continue;
        };
        let degrees = [
            ("deg", 1.0),
            ("rad", 180.0 / std::f64::consts::PI),
            ("arcmin", 1.0 / 60.0),
        ];
        let arcsec = [
            ("arcsec", 1.0),
            ("arcmin", 60.0),
            ("mas", 1e-3),
            ("deg", 3600.0),
        ];
        let factor = match name {
            "POSANG" | "THETA" => unit_of(name, &degrees)?,
            _ => unit_of(name, &arcsec)?,
        };
        if let Some(row) = values.iter().position(|it| !it.is_finite()) {
            return Err(damaged(format!(
                "column {name} row {} is no number",
                row + 1
            )));
        }
        *to = Some(values.iter().map(|it| it * factor).collect());
    }
    let radii = usize::from(columns[1].is_some()) + usize::from(columns[2].is_some());
    if columns[0].is_none() || radii != 1 || columns[3].is_none() {
        return Err(damaged(
            "a table of limbs has the columns TIME, POSANG, RADIUS or DIAMETER (one of them), SIGMA, and if they are known THETA and BLUR"
                .to_owned(),
        ));
    }
    if let Some(row) = time_s.iter().position(|it| !it.is_finite()) {
        return Err(damaged(format!("column TIME row {} is no number", row + 1)));
    }
    Ok(LimbSheet {
        times: time_s
            .iter()
            .map(|it| reference.plus_s(it * factor))
            .collect(),
        columns,
    })
}

/// Rows of one time as one frame.
fn given(path: &Path, sheet: &LimbSheet) -> Result<Given, Error> {
    let refused = |reason: String| Error::File {
        path: path.to_owned(),
        what: "is no table of limbs",
        reason,
    };
    let [position, radius, diameter, sigma, theta, blur] = &sheet.columns;
    let (Some(position), Some(sigma)) = (position, sigma) else {
        return Err(refused(format!("it needs {}", LIMB_COLUMNS.join(", "))));
    };
    let radius_at = |row: usize| match (radius, diameter) {
        (Some(it), _) => it[row],
        (None, Some(it)) => 0.5 * it[row],
        (None, None) => f64::NAN,
    };
    // Both ends of a diameter share its error, so each counts for half.
    let halved = if diameter.is_some() {
        0.5_f64.sqrt()
    } else {
        1.0
    };
    let rows: Vec<usize> = (0..sheet.times.len()).collect();
    let mut frames: Vec<GivenFrame> = Vec::new();
    for run in rows.chunk_by(|&a, &b| sheet.times[a] == sheet.times[b]) {
        let utc = sheet.times[run[0]];
        if let Some(last) = frames.last()
            && utc.minus(last.utc) <= 0.0
        {
            return Err(refused(format!(
                "{utc} comes after {}; sort the rows by time, all points of one limb together",
                last.utc
            )));
        }
        let orientation = theta.as_ref().map_or(
            Orientation {
                y_position_angle_rad: FRAC_PI_2,
                parity: Parity::Sky,
            },
            |it| hung(run, it, position),
        );
        let mut points = Vec::new();
        for &row in run {
            if !(sigma[row] > 0.0 && radius_at(row) > 0.0) {
                return Err(refused(format!(
                    "row {} has radius {} and sigma {}; both are positive",
                    row + 1,
                    radius_at(row),
                    sigma[row]
                )));
            }
            let point = |position_deg: f64| Point {
                theta_rad: orientation.detector_angle_rad(position_deg.to_radians()),
                radius_arcsec: radius_at(row),
                sigma_arcsec: halved * sigma[row],
                blur: blur.as_ref().map_or(0.0, |it| blur_of_width(it[row])),
            };
            points.push(point(position[row]));
            if diameter.is_some() {
                // A diameter says the same of both ends: even harmonics alone.
                points.push(point(position[row] + 180.0));
            }
        }
        frames.push(GivenFrame {
            frame: frames.len(),
            utc,
            content: Content::Points(points),
            orientation: Some(orientation),
            left_out: Vec::new(),
        });
    }
    let (Some(first), Some(last)) = (frames.first(), frames.last()) else {
        return Err(refused("it has no row".to_owned()));
    };
    Ok(Given {
        path: PathBuf::from(path),
        span: (first.utc, last.utc),
        total: frames.len(),
        frames,
        lost: Vec::new(),
        unreadable: Vec::new(),
        exposure_s: 0.0,
        scale_arcsec_px: None,
        noise: None,
        has_flat: true,
        elsewhere: true,
    })
}
