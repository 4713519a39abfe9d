//! Transits of the Sun over a line detector that stands still.
//!
//! Every line is exposed for the whole of its time; the light of a pixel is the blurred limb, without a
//! pixel, meaned over the box of the slit's pixel and of the Sun's way during the line. The turbulence moves
//! the limb from line to line. Tilted layers are left out: over a slit that stands still they do nothing
//! that can be seen.

use ndarray::Array2;
use std::f64::consts::TAU;

use super::draw::{Draw, Stream};
use super::render::Studio;
use super::scenario::{MountKind, SequencePlan};
use super::seeing::{self, Turbulence};
use super::sky_above::{self, Moment};
use super::truth::FrameTruth;
use super::{Scenario, SynthError};
use crate::air::Bending;
use crate::drift::{FixedCamera, Mounting, Seen};
use crate::optics::{Blur, ProfileMaker};
use crate::refraction::Plate;
use crate::scan::{LineSky, Slit, near_limb};
use crate::session::{Projection, ScaleOf};
use crate::sky::{self, Parity, SunTrack, Utc};
use crate::units::{ARCSEC_RAD, DEG_RAD};

/// Directions in which the turbulence is worked out for every line.
const DIRECTIONS: usize = 360;

/// Nodes and weights of the mean over one side of the box, in sides from its middle: Gauss-Legendre of 6.
const NODES: [(f64, f64); 6] = [
    (-0.466_234_757_101_576, 0.085_662_246_189_585),
    (-0.330_604_693_233_132, 0.180_380_786_524_069),
    (-0.119_309_593_041_598, 0.233_956_967_286_346),
    (0.119_309_593_041_598, 0.233_956_967_286_346),
    (0.330_604_693_233_132, 0.180_380_786_524_069),
    (0.466_234_757_101_576, 0.085_662_246_189_585),
];

/// Half width of the limb's profile, arcsec.
const SPAN_ARCSEC: f64 = 24.0;

/// The limb is worked out this far from it, arcsec; beyond it is the disk's or the sky's even light.
const NEAR_ARCSEC: f64 = 18.0;

/// What the transits of a scan share.
#[derive(Clone, Debug)]
pub(super) struct Cast<'a> {
    s: &'a Scenario,
    plan: &'a SequencePlan,
    maker: ProfileMaker,
    track: SunTrack,
    start: Utc,
}

/// The scenario whose turbulence is meaned over a line.
pub(super) fn exposed_as_lines(s: &Scenario, plan: &SequencePlan) -> Scenario {
    Scenario {
        exposure_s: plan.line_s,
        ..s.clone()
    }
}

/// The moments at which a transit needs new screens, the first line's among them.
pub(super) fn stretches(s: &Scenario, plan: &SequencePlan, at: &Moment) -> Vec<Moment> {
    let from_s = at.middle_s - 0.5 * plan.span_s();
    let longest_s = seeing::stretch_s(s);
    let count = (plan.span_s() / longest_s).floor() as usize + 1;
    (0..count)
        .map(|k| Moment {
            middle_s: if k == 0 {
                from_s
            } else {
                from_s + longest_s * k as f64
            },
            ..at.clone()
        })
        .collect()
}

impl<'a> Cast<'a> {
    pub(super) fn new(
        s: &'a Scenario,
        studio: &Studio,
        plan: &'a SequencePlan,
    ) -> Result<Self, SynthError> {
        let start = Utc::parse(&s.start_utc)?;
        let last_s = plan.start_s(plan.frames) + plan.span_s();
        let from = start.plus_s(plan.start_s(0) - 2.0);
        Ok(Self {
            s,
            plan,
            maker: ProfileMaker::new(&studio.optics, SPAN_ARCSEC, 0.02, 0.0)?,
            track: SunTrack::new(from, start.plus_s(last_s + 2.0), &sky_above::place(s), 0.0)?,
            start,
        })
    }

    /// The lines of one transit; `number` counts all frames of the session.
    pub(super) fn transit(
        &self,
        studio: &Studio,
        turbulence: &[Turbulence],
        at: &Moment,
        number: u32,
    ) -> Result<(Array2<u16>, FrameTruth), SynthError> {
        let (s, plan) = (self.s, self.plan);
        let sun = at.geometry.sun;
        let profile =
            sky_above::air_above(s, at.middle_s, sun.azimuth_rad).profile(s.wavelength_nm)?;
        let bending = Bending::new(&profile, sun.zenith_true_rad)?;
        let mounted = (s.camera_angle_deg + plan.roll_deg) * DEG_RAD;
        let up_rad = match s.mount {
            MountKind::Equatorial | MountKind::Coelostat => mounted - sun.parallactic_rad,
            MountKind::Altazimuth | MountKind::Fixed => mounted,
        };
        let camera = FixedCamera {
            plate: Plate {
                projection: Projection::Tan,
                scale_of: ScaleOf::Apparent,
            },
            refractivity: profile.refractivity(),
            parity: Parity::Sky,
            middle_px: (0.0, 0.5 * (s.size_px as f64 - 1.0)),
        };
        let mounting = Mounting {
            scale_arcsec_px: s.scale_arcsec_px,
            up_rad,
            axis: Seen {
                azimuth_rad: sun.azimuth_rad,
                zenith_rad: bending.centre_apparent_rad(),
            },
        };
        let slit = Slit::new(&camera, &mounting, Some(&bending), s.size_px);
        let first_s = at.middle_s - 0.5 * plan.span_s();
        let line_s = |line: usize| first_s + plan.line_s * (line as f64 + 0.5);
        let skies: Vec<LineSky> = (0..plan.lines)
            .map(|line| {
                Ok(LineSky::new(
                    &self.track.at(self.start.plus_s(line_s(line)))?,
                ))
            })
            .collect::<Result<_, SynthError>>()?;
        let orientation = at.geometry.orientation;
        let limb_arcsec = |theta: f64| {
            let position_angle = orientation.position_angle_rad(theta);
            studio.figure.radius_rad(&sun, position_angle) / ARCSEC_RAD
        };
        let mean_arcsec = limb_arcsec(0.25);
        let moved = self.moved(turbulence, at, mean_arcsec, &line_s);
        let r0_m = seeing::frame_r0_m(s, at);
        let blurred = self.maker.profile(
            &Blur {
                r0_m,
                gaussian_sigma_arcsec: 0.0,
            },
            0.0,
        );
        let grid = self.maker.grid();
        let light_at = |x_arcsec: f64| {
            let u = ((x_arcsec - grid.x0_arcsec) / grid.step_arcsec)
                .clamp(0.0, blurred.len() as f64 - 1.001);
            let i = u as usize;
            blurred[i] + (u - i as f64) * (blurred[i + 1] - blurred[i])
        };
        // The box: the slit's pixel along +y, the Sun's way during a line along the motion.
        let rates = sky::rates(self.start.plus_s(at.middle_s), &sky_above::place(s), 0.0)?;
        let motion = orientation.detector_angle_rad(rates.drift_position_angle_rad());
        let way = rates.drift_rad_s() / ARCSEC_RAD * plan.line_s;
        let sides = [
            (0.0, s.scale_arcsec_px),
            (way * motion.cos(), way * motion.sin()),
        ];

        let mut light = Array2::from_elem((plan.lines, s.size_px), 0.0_f64);
        let sky_light = s.aureole_rel;
        light.fill(0.5 * sky_light);
        for it in near_limb(&slit, &skies, &orientation, (0.0, mean_arcsec + 60.0)) {
            let (row, column) = (it.row as usize, it.column as usize);
            let pushed = ring(&moved[row], orientation.position_angle_rad(it.theta_rad));
            let from_limb = it.radius_arcsec - limb_arcsec(it.theta_rad) - pushed;
            let brightness = if from_limb.abs() < NEAR_ARCSEC {
                let (sin, cos) = it.theta_rad.sin_cos();
                let place = (it.radius_arcsec * cos, it.radius_arcsec * sin);
                let mut sum = 0.0;
                for (a, wa) in NODES {
                    for (b, wb) in NODES {
                        let x = place.0 + a * sides[0].0 + b * sides[1].0;
                        let y = place.1 + a * sides[0].1 + b * sides[1].1;
                        let off = x.hypot(y) - it.radius_arcsec;
                        sum += wa * wb * light_at(from_limb + off);
                    }
                }
                sum
            } else if from_limb < 0.0 {
                let share = it.radius_arcsec / mean_arcsec;
                studio.darkening.at((1.0 - share * share).max(0.0).sqrt())
            } else {
                0.0
            };
            let share = it.radius_arcsec / mean_arcsec;
            light[[row, column]] = brightness + sky_light / (1.0 + share * share);
        }
        let mut draw = Draw::new(studio.seed, Stream::Frame(number));
        let counts = studio.detector.exposed_lines(
            plan.lines,
            |line, y| s.peak_e * light[[line, y]].max(0.0),
            &mut draw,
        );
        let middle = (0.0, 0.5 * (s.size_px as f64 - 1.0));
        let directions = directions();
        let still = vec![0.0; directions.len()];
        let truth = FrameTruth::new(at, r0_m, middle, mean_arcsec, &directions, &still);
        Ok((counts, truth))
    }

    /// The limb's displacement line by line, by position angle, arcsec.
    fn moved(
        &self,
        turbulence: &[Turbulence],
        at: &Moment,
        limb_arcsec: f64,
        line_s: &(dyn Fn(usize) -> f64 + Sync),
    ) -> Vec<Vec<f64>> {
        use rayon::prelude::*;
        let directions = directions();
        let longest_s = seeing::stretch_s(self.s);
        let from_s = at.middle_s - 0.5 * self.plan.span_s();
        (0..self.plan.lines)
            .into_par_iter()
            .map(|line| {
                let middle_s = line_s(line);
                let stretch = ((middle_s - from_s) / longest_s) as usize;
                let moment = Moment {
                    middle_s,
                    ..at.clone()
                };
                match turbulence.get(stretch.min(turbulence.len().max(1) - 1)) {
                    Some(it) => it.displacement_arcsec(&moment, limb_arcsec, &directions),
                    None => vec![0.0; directions.len()],
                }
            })
            .collect()
    }
}

/// Sine and cosine of the position angles at which the turbulence is worked out.
fn directions() -> Vec<(f64, f64)> {
    (0..DIRECTIONS)
        .map(|k| (TAU * k as f64 / DIRECTIONS as f64).sin_cos())
        .collect()
}

/// A value round the limb at a position angle.
fn ring(values: &[f64], position_angle_rad: f64) -> f64 {
    let turn = (position_angle_rad / TAU).rem_euclid(1.0) * values.len() as f64;
    let low = (turn as usize).min(values.len() - 1);
    let part = turn - low as f64;
    values[low] + part * (values[(low + 1) % values.len()] - values[low])
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: Gauss-Legendre rules are exact for polynomials to degree 11.
    #[test]
    fn the_nodes_are_those_of_gauss() {
        for power in [0, 2, 4, 10] {
            let sum: f64 = NODES.iter().map(|(x, w)| w * x.powi(power)).sum();
            let exact = 0.5_f64.powi(power) / f64::from(power + 1);
            assert!((sum - exact).abs() < 1e-12, "{power}: {sum} vs {exact}");
        }
    }

    #[test]
    fn a_ring_is_closed() {
        let values = [1.0, 2.0, 3.0, 4.0];
        assert!((ring(&values, -TAU / 8.0) - 2.5).abs() < 1e-12);
        assert!((ring(&values, TAU) - 1.0).abs() < 1e-12);
    }
}
