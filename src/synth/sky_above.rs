//! Sun, camera and air at every frame, as they truly are.
//!
//! # Model
//!
//! ```text
//! p(t) = p_0 + p' t,  T(t) = T_0 + T' t                     the air at the station
//! x(t + dt) = k x(t) + sqrt(1 - k^2) sigma n,  k = exp(-dt / tau)
//! ```
//!
//! The second line, with `n` a normal number, drives the air's own zenith (two axes: towards the
//! Sun's vertical and across it) and the logarithm of r0.
//!
//! # Valid for
//!
//! The Sun's disk above the horizon.
//!
//! # Accuracy
//!
//! That of [`crate::sky`] and [`crate::air`]; the bending is tabulated anew for every frame.
//!
//! # Source
//!
//! First-order autoregressive process: common practice, no source.

use super::draw::{Draw, Stream};
use super::figure::Geometry;
use super::scenario::MountKind;
use super::{Scenario, SequenceKind, SynthError};
use crate::air::{self, Bending, Conditions, DiskMap, Profile, StationAir};
use crate::drift::{FixedCamera, Mounting, Seen};
use crate::refraction::Plate;
use crate::session::{Projection, ScaleOf};
use crate::sky::{self, Mount, Orientation, Parity, Place, SunPlace, SunTrack, Utc};
use crate::units::{ARCMIN_RAD, DEG_RAD};

/// Carbon dioxide, as a session file assumes it.
const CO2_PPM: f64 = 420.0;
/// Room about the track, s.
const MARGIN_S: f64 = 2.0;

/// A frame to be made.
#[derive(Clone, Debug)]
pub(super) struct Moment {
    /// Index of its sequence.
    pub(super) sequence: usize,
    /// Start of the exposure.
    pub(super) start: Utc,
    /// Middle of the exposure after the session's start.
    pub(super) middle_s: f64,
    pub(super) geometry: Geometry,
    /// The air's own zenith: displaced along the vertical and across it.
    pub(super) tilt_arcmin: (f64, f64),
    /// r0 over its mean.
    pub(super) r0_factor: f64,
    /// Where a telescope that stands still has the Sun, from the detector's middle, px; zero while
    /// tracking.
    pub(super) drift_px: (f64, f64),
}

/// The place of the scenario's telescope.
pub(super) fn place(s: &Scenario) -> Place {
    Place {
        latitude_rad: s.site.latitude_deg * DEG_RAD,
        longitude_rad: s.site.longitude_deg * DEG_RAD,
        height_m: s.site.height_m,
        ..Place::default()
    }
}

/// The true air at the station.
pub(super) fn conditions(s: &Scenario, after_s: f64) -> Conditions {
    let hours = after_s / 3600.0;
    Conditions {
        pressure_hpa: s.weather.pressure_hpa + s.weather.pressure_rate_hpa_h * hours,
        temperature_c: s.weather.temperature_c + s.weather.temperature_rate_c_h * hours,
        relative_humidity: s.weather.relative_humidity,
        co2_ppm: CO2_PPM,
    }
}

/// Every frame's moment, in order.
pub(super) fn moments(s: &Scenario, seed: u64) -> Result<Vec<Moment>, SynthError> {
    let start = Utc::parse(&s.start_utc)?;
    let last_s = s
        .sequences
        .last()
        .map_or(0.0, |it| it.start_s(it.frames) + it.span_s());
    let place = place(s);
    let (from, to) = (start.plus_s(-MARGIN_S), start.plus_s(last_s + MARGIN_S));
    let track = SunTrack::new(from, to, &place, 0.0)?;
    let mut wander = Wander::new(s, seed);
    let mut moments = Vec::new();
    for (sequence, plan) in s.sequences.iter().enumerate() {
        let mut standing = None;
        if plan.kind == SequenceKind::Drift {
            let after_s = 0.5 * (plan.start_s(0) + plan.start_s(plan.frames));
            standing = Some(Standing::new(s, plan.roll_deg, &track, start, after_s)?);
        }
        for frame in 0..plan.frames {
            let start_s = plan.start_s(frame);
            let exposure_s = match plan.kind {
                SequenceKind::Scan => plan.span_s(),
                _ => s.exposure_s,
            };
            let middle_s = start_s + 0.5 * exposure_s;
            let at = start.plus_s(middle_s);
            let sun = track.at(at)?;
            sky::require_above_horizon(at, &sun)?;
            wander.to(middle_s);
            let mut orientation = sky::orientation(
                mount(s.mount),
                s.camera_angle_deg * DEG_RAD,
                plan.roll_deg * DEG_RAD,
                Parity::Sky,
                &sun,
            );
            let station = air_above(s, middle_s, sun.azimuth_rad);
            let profile = station.profile(s.wavelength_nm)?;
            let (along, across) = (wander.along.value, wander.across.value);
            let zenith_rad = sun.zenith_true_rad + along * ARCMIN_RAD;
            let turn_rad = across * ARCMIN_RAD / sun.zenith_true_rad.sin();
            let map = DiskMap::new(Bending::new(&profile, zenith_rad)?, zenith_rad);
            let mut drift_px = (0.0, 0.0);
            if let Some(standing) = &standing {
                (drift_px, orientation) = standing.at(&sun, &profile)?;
            }
            moments.push(Moment {
                sequence,
                drift_px,
                start: start.plus_s(start_s),
                middle_s,
                geometry: Geometry {
                    sun,
                    orientation,
                    map,
                    zenith_angle_rad: sun.parallactic_rad + turn_rad,
                },
                tilt_arcmin: (along, across),
                r0_factor: wander.log_r0.value.exp(),
            });
        }
    }
    Ok(moments)
}

/// A telescope that stands still.
#[derive(Clone, Copy, Debug)]
struct Standing {
    camera: FixedCamera,
    mounting: Mounting,
}

impl Standing {
    /// Where the Sun is at a time, the camera as it is mounted.
    fn new(
        s: &Scenario,
        roll_deg: f64,
        track: &SunTrack,
        start: Utc,
        after_s: f64,
    ) -> Result<Self, SynthError> {
        let sun = track.at(start.plus_s(after_s))?;
        let profile = air_above(s, after_s, sun.azimuth_rad).profile(s.wavelength_nm)?;
        let up_rad = (s.camera_angle_deg + roll_deg) * DEG_RAD
            - match s.mount {
                MountKind::Equatorial | MountKind::Coelostat => sun.parallactic_rad,
                MountKind::Altazimuth | MountKind::Fixed => 0.0,
            };
        Ok(Self {
            camera: FixedCamera {
                plate: Plate {
                    projection: Projection::Tan,
                    scale_of: ScaleOf::Apparent,
                },
                refractivity: profile.refractivity(),
                parity: Parity::Sky,
                middle_px: (0.0, 0.0),
            },
            mounting: Mounting {
                scale_arcsec_px: s.scale_arcsec_px,
                up_rad,
                axis: seen(&sun, &profile)?,
            },
        })
    }

    /// Where it has the Sun, px from the detector's middle, and how the camera hangs about it.
    fn at(
        &self,
        sun: &SunPlace,
        profile: &Profile,
    ) -> Result<((f64, f64), Orientation), SynthError> {
        let here = seen(sun, profile)?;
        let place = self.camera.place_px(&self.mounting, &here);
        // The direction of the zenith on the detector where the Sun is: a step of it up.
        let step = here.offset(1e-6, 0.0);
        let above = self.camera.place_px(&self.mounting, &step);
        let zenith = (above.1 - place.1).atan2(above.0 - place.0);
        // theta = 90 deg + bearing - up, so up = 90 deg - theta of the zenith.
        let up_rad = std::f64::consts::FRAC_PI_2 - zenith;
        let orientation = Orientation {
            y_position_angle_rad: up_rad + sun.parallactic_rad,
            parity: Parity::Sky,
        };
        Ok((place, orientation))
    }
}

/// The Sun's apparent direction.
fn seen(sun: &SunPlace, profile: &Profile) -> Result<Seen, SynthError> {
    Ok(Seen {
        azimuth_rad: sun.azimuth_rad,
        zenith_rad: Bending::new(profile, sun.zenith_true_rad)?.centre_apparent_rad(),
    })
}

/// The true air above the station, towards an azimuth.
pub(super) fn air_above(s: &Scenario, after_s: f64, azimuth_rad: f64) -> StationAir {
    let place = place(s);
    let site = air::Site {
        latitude_rad: place.latitude_rad,
        height_m: place.height_m,
    };
    StationAir::new(site, conditions(s, after_s), azimuth_rad)
}

pub(super) fn mount(kind: MountKind) -> Mount {
    match kind {
        MountKind::Equatorial => Mount::Equatorial,
        MountKind::Coelostat => Mount::Coelostat,
        MountKind::Altazimuth => Mount::Altazimuth,
        MountKind::Fixed => Mount::Fixed,
    }
}

/// A slow process.
#[derive(Clone, Copy, Debug)]
struct Slow {
    value: f64,
    sigma: f64,
    tau_s: f64,
}

impl Slow {
    fn new(sigma: f64, tau_s: f64, draw: &mut Draw) -> Self {
        Self {
            value: sigma * draw.normal(),
            sigma,
            tau_s,
        }
    }

    fn step(&mut self, by_s: f64, draw: &mut Draw) {
        let keep = (-by_s / self.tau_s).exp();
        let fresh = (1.0 - keep * keep).max(0.0).sqrt();
        self.value = keep * self.value + fresh * self.sigma * draw.normal();
    }
}

/// The slow processes of a session.
#[derive(Clone, Debug)]
struct Wander {
    draw: Draw,
    at_s: f64,
    along: Slow,
    across: Slow,
    log_r0: Slow,
}

impl Wander {
    fn new(s: &Scenario, seed: u64) -> Self {
        let mut draw = Draw::new(seed, Stream::Slow);
        let (tilt, tau_s) = (s.layer_tilt_sigma_arcmin, 60.0 * s.layer_tilt_tau_min);
        Self {
            at_s: 0.0,
            along: Slow::new(tilt, tau_s, &mut draw),
            across: Slow::new(tilt, tau_s, &mut draw),
            log_r0: Slow::new(s.r0_flicker_rel, s.r0_flicker_tau_s, &mut draw),
            draw,
        }
    }

    fn to(&mut self, at_s: f64) {
        let by_s = at_s - self.at_s;
        self.along.step(by_s, &mut self.draw);
        self.across.step(by_s, &mut self.draw);
        self.log_r0.step(by_s, &mut self.draw);
        self.at_s = at_s;
    }
}
