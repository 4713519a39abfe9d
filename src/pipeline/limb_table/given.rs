//! The limbs of one sequence that come from a table in place of frames.

use crate::frames::{self, FrameRef};
use crate::limb::{Flag, ObservedLimb, SectorLimb};
use crate::pipeline::measure::{LostFrame, Setup};
use crate::session::Session;
use crate::sky::{Orientation, Utc};
use std::f64::consts::TAU;
use std::path::PathBuf;

/// A point of a limb measured elsewhere.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::pipeline) struct Point {
    /// Detector angle, rad.
    pub(super) theta_rad: f64,
    /// Apparent radius, arcsec.
    pub(super) radius_arcsec: f64,
    /// Standard uncertainty, arcsec.
    pub(super) sigma_arcsec: f64,
    /// Blur, `(lambda / r0)^(5/3)`; 0 where the table has none.
    pub(super) blur: f64,
}

/// What a table has of one frame.
#[derive(Clone, Debug)]
pub(super) enum Content {
    /// The sectors as they were measured by this program.
    Sectors(Vec<SectorLimb>),
    /// Points of any program.
    Points(Vec<Point>),
}

/// One frame of a table.
#[derive(Clone, Debug)]
pub(super) struct GivenFrame {
    pub(super) frame: usize,
    pub(super) utc: Utc,
    pub(super) content: Content,
    /// How the camera hung, where the table says so itself.
    pub(super) orientation: Option<Orientation>,
    /// Sectors that were left out for what the whole sequence shows.
    pub(super) left_out: Vec<bool>,
}

/// The limbs of one sequence.
#[derive(Clone, Debug)]
pub(in crate::pipeline) struct Given {
    /// Where they come from.
    pub(super) path: PathBuf,
    /// Frames with a limb, by number.
    pub(super) frames: Vec<GivenFrame>,
    /// Frames without.
    pub(super) lost: Vec<LostFrame>,
    /// Files that could not be opened.
    pub(super) unreadable: Vec<LostFrame>,
    /// Number of frames, lost ones included.
    pub(super) total: usize,
    /// Mid-exposures of the first and the last of them.
    pub(super) span: (Utc, Utc),
    /// Exposure, s; 0 where it is not known.
    pub(super) exposure_s: f64,
    /// Plate scale of the radii, arcsec a pixel; none where they are angles.
    pub(super) scale_arcsec_px: Option<f64>,
    /// Variance of their noise over its expectation, with its uncertainty.
    pub(in crate::pipeline) noise: Option<(f64, f64)>,
    /// Whether a flat field was divided out.
    pub(in crate::pipeline) has_flat: bool,
    /// Whether another program measured them.
    pub(in crate::pipeline) elsewhere: bool,
}

/// Side of the frames that stand for a table's: nothing is read from them.
const NOMINAL_PX: usize = 64;

/// What became of a frame.
type Outcome = Result<ObservedLimb, (&'static str, String)>;

impl Given {
    /// The list of frames that the table stands for, and their times.
    pub(in crate::pipeline) fn listed(&self) -> (frames::Sequence, Vec<(Utc, Option<f64>)>) {
        let exposure = (self.exposure_s > 0.0).then_some(self.exposure_s);
        let mut times = vec![(self.span.0, exposure); self.total];
        for it in &self.frames {
            times[it.frame].0 = it.utc;
        }
        // Only the ends of the span are asked of a frame that was lost.
        if let Some(first) = times.first_mut() {
            first.0 = self.span.0;
        }
        if let Some(last) = times.last_mut() {
            last.0 = self.span.1;
        }
        let list = frames::Sequence {
            files: vec![self.path.clone()],
            frames: (0..self.total)
                .map(|plane| FrameRef { file: 0, plane })
                .collect(),
            width: NOMINAL_PX,
            height: NOMINAL_PX,
            unreadable: Vec::new(),
        };
        (list, times)
    }

    /// Sectors that were left out, by frame.
    pub(in crate::pipeline) fn mask(&self) -> Vec<Vec<bool>> {
        let mut out = vec![Vec::new(); self.total];
        for it in &self.frames {
            out[it.frame].clone_from(&it.left_out);
        }
        out
    }

    /// Files that could not be opened when the frames were read.
    pub(in crate::pipeline) fn unreadable(&self) -> &[LostFrame] {
        &self.unreadable
    }

    /// How the camera hung at a frame; the first frame's stands for all that have none.
    pub(in crate::pipeline) fn orientation(&self, frame: usize) -> Option<Orientation> {
        let own = self.frames.iter().find(|it| it.frame == frame);
        own.or(self.frames.first())?.orientation
    }

    /// The limbs, or why there is none, in the order of the frames.
    pub(in crate::pipeline) fn limbs(
        &self,
        session: &Session,
        setup: &Setup,
        model_arcsec: &[f64],
    ) -> Vec<Outcome> {
        let no_row = || Err((super::LOST[8], "the table has no row of it".to_owned()));
        let mut out: Vec<Outcome> = (0..self.total).map(|_| no_row()).collect();
        for it in &self.lost {
            out[it.frame] = Err((it.reason, it.detail.clone()));
        }
        for it in &self.frames {
            let sectors = match &it.content {
                Content::Sectors(sectors) => {
                    sectors.iter().map(|it| self.scaled(it, setup)).collect()
                }
                Content::Points(points) => in_sectors(points, setup, model_arcsec),
            };
            let good = sectors.iter().filter(|it| it.flag == Flag::Good).count();
            out[it.frame] = if 2 * good < session.limb.sectors {
                let detail = format!(
                    "{}: only {good} of {} sectors have a point; at least half are needed ([limb] sectors)",
                    self.path.display(),
                    session.limb.sectors
                );
                Err((super::LOST[6], detail))
            } else {
                Ok(ObservedLimb {
                    centre_px: (0.0, 0.0),
                    first_rad: setup.annulus.angle_rad(0),
                    sectors,
                })
            };
        }
        out
    }

    /// A sector by the scale that is now believed.
    fn scaled(&self, it: &SectorLimb, setup: &Setup) -> SectorLimb {
        let over = self
            .scale_arcsec_px
            .map_or(1.0, |it| setup.scale_arcsec_px / it);
        SectorLimb {
            radius_arcsec: it.radius_arcsec * over,
            sigma_arcsec: it.sigma_arcsec * over,
            ..*it
        }
    }
}

/// Points brought to the middles of their sectors along the predicted limb, and averaged there.
fn in_sectors(points: &[Point], setup: &Setup, model_arcsec: &[f64]) -> Vec<SectorLimb> {
    let count = model_arcsec.len();
    let first = setup.annulus.angle_rad(0);
    let mut sums = vec![[0.0; 3]; count];
    for it in points {
        let place = (it.theta_rad - first).rem_euclid(TAU) / TAU * count as f64;
        let sector = place.round() as usize % count;
        // Between two middles the predicted limb is as good as straight.
        let low = place.floor() as usize % count;
        let share = place - place.floor();
        let predicted = model_arcsec[low] * (1.0 - share) + model_arcsec[(low + 1) % count] * share;
        let weight = 1.0 / (it.sigma_arcsec * it.sigma_arcsec);
        let sum = &mut sums[sector];
        sum[0] += weight;
        sum[1] += weight * (it.radius_arcsec - predicted);
        sum[2] += weight * it.blur;
    }
    sums.iter()
        .zip(model_arcsec)
        .map(|(sum, model)| {
            let is_there = sum[0] > 0.0;
            SectorLimb {
                radius_arcsec: if is_there {
                    model + sum[1] / sum[0]
                } else {
                    f64::NAN
                },
                sigma_arcsec: if is_there {
                    sum[0].powf(-0.5)
                } else {
                    f64::NAN
                },
                blur: if is_there { sum[2] / sum[0] } else { 0.0 },
                blur_sigma: 1.0,
                gain_adu: 1.0,
                background_adu: 0.0,
                misfit: 1.0,
                flag: if is_there {
                    Flag::Good
                } else {
                    Flag::Incomplete
                },
            }
        })
        .collect()
}
