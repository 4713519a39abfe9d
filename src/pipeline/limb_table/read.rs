//! `limbs.fits` read back.

use super::LOST;
use super::given::{Content, Given, GivenFrame};
use crate::frames::{FitsError, TableFile};
use crate::limb::{Flag, SectorLimb};
use crate::pipeline::Error;
use crate::pipeline::measure::LostFrame;
use crate::session::{Moment, Projection, ScaleOf, Session};
use crate::sky::{Orientation, Parity, Utc};
use std::collections::BTreeMap;
use std::f64::consts::FRAC_PI_2;
use std::path::{Path, PathBuf};

/// One sequence as it was saved.
#[derive(Clone, Debug)]
pub(super) struct SavedSequence {
    pub(super) given: Given,
    pub(super) scale_arcsec_px: f64,
    pub(super) wavelength_nm: f64,
    pub(super) projection: Projection,
    pub(super) scale_of: ScaleOf,
}

/// A whole `limbs.fits`.
#[derive(Clone, Debug)]
pub(in crate::pipeline) struct Saved {
    path: PathBuf,
    clock_offset_s: f64,
    stamp: Moment,
    made_with: [(&'static str, f64); 3],
    pub(super) sequences: BTreeMap<usize, SavedSequence>,
}

impl Saved {
    /// Reads the file.
    ///
    /// # Errors
    ///
    /// When it is no table of limbs with all that a second fit needs.
    pub(in crate::pipeline) fn read(path: &Path) -> Result<Self, Error> {
        let table = TableFile::open(path, Some("LIMBS"))?;
        let damaged = |found: String| {
            Error::Fits(FitsError::Damaged {
                path: path.to_owned(),
                found,
            })
        };
        let real = |name: &'static str| -> Result<(&'static str, f64), Error> {
            table.real(name)?.map(|it| (name, it)).ok_or_else(|| {
                damaged(format!(
                    "LIMBS has no keyword {name}: it was written by a version that does not save all a second fit needs; reduce from the frames"
                ))
            })
        };
        let clock_offset_s = real("TL_CLOCK")?.1;
        let made_with = [real("TL_EDGE")?, real("TL_APER")?, real("TL_OBSTR")?];
        let stamp = match table.text("TL_STAMP")?.as_deref() {
            Some("start") => Moment::Start,
            Some("middle") => Moment::Middle,
            Some("end") => Moment::End,
            other => return Err(damaged(format!("TL_STAMP is {other:?}"))),
        };
        let Some(reference) = table.text("DATEREF")? else {
            return Err(damaged("LIMBS has no DATEREF".to_owned()));
        };
        let reference = Utc::parse(&reference)?;
        let noise = table.real("TL_NOISE")?.zip(table.real("TL_NOISU")?);
        let mut sequences = sequences(path, reference, noise)?;
        lost(path, &mut sequences)?;
        fill(&table, reference, &mut sequences, &damaged)?;
        Ok(Self {
            path: path.to_owned(),
            clock_offset_s,
            stamp,
            made_with,
            sequences,
        })
    }

    /// The limbs of a sequence of the session, their times by the session's clock and stamps; none
    /// where the file has none.
    ///
    /// # Errors
    ///
    /// Where the session wants a limb that only frames can give.
    pub(in crate::pipeline) fn given(
        &self,
        index: usize,
        session: &Session,
    ) -> Result<Option<Given>, Error> {
        let Some(saved) = self.sequences.get(&index) else {
            return Ok(None);
        };
        let centre_nm = session.sequences[index].filter.centre_nm;
        let telescope = &session.telescope;
        let wanted = [
            session.limb.edge_scale_km,
            telescope.aperture_m,
            telescope.central_obstruction,
            centre_nm,
        ];
        let names = [
            "limb.edge_scale_km",
            "telescope.aperture_m",
            "telescope.central_obstruction",
            "filter.centre_nm",
        ];
        let made = self.made_with.iter().map(|it| it.1);
        for ((name, wanted), made) in names
            .iter()
            .zip(wanted)
            .zip(made.chain([saved.wavelength_nm]))
        {
            if (wanted - made).abs() > 1e-9 * (1.0 + made.abs()) {
                return Err(self.needs_frames(&format!("{name} = {wanted}"), &format!("{made}")));
            }
        }
        let mut given = saved.given.clone();
        for it in &given.frames {
            let Content::Sectors(sectors) = &it.content else {
                continue;
            };
            if sectors.len() != session.limb.sectors {
                return Err(self.needs_frames(
                    &format!("limb.sectors = {}", session.limb.sectors),
                    &format!("{} sectors", sectors.len()),
                ));
            }
        }
        let to_middle = |it: Moment| match it {
            Moment::Start => 0.5 * given.exposure_s,
            Moment::Middle => 0.0,
            Moment::End => -0.5 * given.exposure_s,
        };
        let shift_s = to_middle(session.time.date_obs)
            - to_middle(self.stamp)
            - (session.time.clock_offset_s - self.clock_offset_s);
        if shift_s != 0.0 {
            for it in &mut given.frames {
                it.utc = it.utc.plus_s(shift_s);
            }
            given.span = (given.span.0.plus_s(shift_s), given.span.1.plus_s(shift_s));
        }
        // The camera hangs as the session says.
        for it in &mut given.frames {
            it.orientation = None;
        }
        Ok(Some(given))
    }

    fn needs_frames(&self, wanted: &str, made: &str) -> Error {
        Error::File {
            path: self.path.clone(),
            what: "cannot stand for the frames",
            reason: format!(
                "the session says {wanted}, the limbs were measured with {made}; reduce from the frames, or put the session back"
            ),
        }
    }

    /// Sequences of the file that the session does not have.
    pub(in crate::pipeline) fn beyond(&self, count: usize) -> Option<usize> {
        self.sequences.keys().copied().find(|it| *it >= count)
    }
}

/// The table SEQUENCES.
fn sequences(
    path: &Path,
    reference: Utc,
    noise: Option<(f64, f64)>,
) -> Result<BTreeMap<usize, SavedSequence>, Error> {
    let table = TableFile::open(path, Some("SEQUENCES"))?;
    let [index, frames, start, stop, exposure] =
        ["SEQUENCE", "FRAMES", "START", "STOP", "XPOSURE"].map(|it| table.needed(it));
    let flat = table.needed("FLAT")?;
    let [scale, wavelength, tan, sky] =
        ["SCALE", "WAVELEN", "TAN", "SKYSCALE"].map(|it| table.needed(it));
    let (index, frames, start, stop, exposure) = (index?, frames?, start?, stop?, exposure?);
    let (scale, wavelength, tan, sky) = (scale?, wavelength?, tan?, sky?);
    Ok((0..table.rows())
        .map(|k| {
            let saved = SavedSequence {
                given: Given {
                    path: path.to_owned(),
                    frames: Vec::new(),
                    lost: Vec::new(),
                    unreadable: Vec::new(),
                    total: frames[k] as usize,
                    span: (reference.plus_s(start[k]), reference.plus_s(stop[k])),
                    exposure_s: exposure[k],
                    scale_arcsec_px: Some(scale[k]),
                    noise,
                    has_flat: flat[k] > 0.5,
                    elsewhere: false,
                },
                scale_arcsec_px: scale[k],
                wavelength_nm: wavelength[k],
                projection: if tan[k] > 0.5 {
                    Projection::Tan
                } else {
                    Projection::Arc
                },
                scale_of: if sky[k] > 0.5 {
                    ScaleOf::Sky
                } else {
                    ScaleOf::Apparent
                },
            };
            (index[k] as usize, saved)
        })
        .collect())
}

/// The table LOST, where there is one.
fn lost(path: &Path, sequences: &mut BTreeMap<usize, SavedSequence>) -> Result<(), Error> {
    let Ok(table) = TableFile::open(path, Some("LOST")) else {
        return Ok(());
    };
    let (index, frame) = (table.needed("SEQUENCE")?, table.needed("FRAME")?);
    let reason = table.needed("REASON")?;
    for k in 0..table.rows() {
        let Some(it) = sequences.get_mut(&(index[k] as usize)) else {
            continue;
        };
        let reason = LOST[(reason[k] as usize).min(LOST.len() - 1)];
        let lost = LostFrame {
            frame: frame[k].max(0.0) as usize,
            reason,
            detail: format!("{reason} when the frames were read"),
        };
        if frame[k] < 0.0 {
            it.given.unreadable.push(lost);
        } else if lost.frame < it.given.total {
            it.given.lost.push(lost);
        }
    }
    Ok(())
}

/// The rows of LIMBS, frame by frame.
fn fill(
    table: &TableFile,
    reference: Utc,
    sequences: &mut BTreeMap<usize, SavedSequence>,
    damaged: &dyn Fn(String) -> Error,
) -> Result<(), Error> {
    let columns = [
        "SEQUENCE", "FRAME", "TIME", "THETA", "POSANG", "SEEN", "SEENSIG", "BLURJ", "BLURJSIG",
        "GAIN", "MISFIT", "OWNFLAG", "FLAG",
    ];
    let mut read = Vec::new();
    for it in columns {
        read.push(table.needed(it)?);
    }
    let rows: Vec<usize> = (0..table.rows()).collect();
    let frame_of = |row: usize| (read[0][row] as usize, read[1][row] as usize);
    for run in rows.chunk_by(|&a, &b| frame_of(a) == frame_of(b)) {
        let at = run[0];
        let (index, frame) = frame_of(at);
        let Some(it) = sequences.get_mut(&index) else {
            return Err(damaged(format!("SEQUENCES has no row of sequence {index}")));
        };
        if frame >= it.given.total || !read[2][at].is_finite() {
            return Err(damaged(format!(
                "LIMBS row {}: frame {frame} at {} s, of {} frames",
                at + 1,
                read[2][at],
                it.given.total
            )));
        }
        let sectors = run
            .iter()
            .map(|&row| SectorLimb {
                radius_arcsec: read[5][row],
                sigma_arcsec: read[6][row],
                blur: read[7][row],
                blur_sigma: read[8][row],
                gain_adu: read[9][row],
                background_adu: 0.0,
                misfit: read[10][row],
                flag: flag(read[11][row]),
            })
            .collect();
        it.given.frames.push(GivenFrame {
            frame,
            utc: reference.plus_s(read[2][at]),
            content: Content::Sectors(sectors),
            orientation: Some(hung(run, &read[3], &read[4])),
            left_out: run
                .iter()
                .map(|&row| read[11][row] < 0.5 && read[12][row] > 0.5)
                .collect(),
        });
    }
    Ok(())
}

fn flag(code: f64) -> Flag {
    match code as u8 {
        0 => Flag::Good,
        1 => Flag::Incomplete,
        2 => Flag::Misfit,
        _ => Flag::Masked,
    }
}

/// How the camera hung, from detector and position angles of one frame, degrees.
pub(super) fn hung(rows: &[usize], theta_deg: &[f64], position_deg: &[f64]) -> Orientation {
    let first = rows[0];
    let next = rows.get(1).copied().unwrap_or(first);
    let turned =
        (theta_deg[next] - theta_deg[first]) * wrapped(position_deg[next] - position_deg[first]);
    let (theta, position) = (
        theta_deg[first].to_radians(),
        position_deg[first].to_radians(),
    );
    if turned >= 0.0 {
        Orientation {
            y_position_angle_rad: position + FRAC_PI_2 - theta,
            parity: Parity::Sky,
        }
    } else {
        Orientation {
            y_position_angle_rad: position - FRAC_PI_2 + theta,
            parity: Parity::Mirrored,
        }
    }
}

fn wrapped(deg: f64) -> f64 {
    (deg + 180.0).rem_euclid(360.0) - 180.0
}
