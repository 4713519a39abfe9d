//! The Sun's place at thousands of times, interpolated.
//!
//! # Model
//!
//! Sidereal time, right ascension, declination, distance, radial velocity and the three angles of the
//! axis are computed every 600 s and interpolated by the cubic through the four nearest nodes; zenith
//! distance, azimuth and parallactic angle then follow exactly.
//!
//! ```text
//! error < (9/384) h^4 max |f''''|        f'''' of the diurnal parallax: 8.8 arcsec (7.3e-5 / s)^4
//! ```
//!
//! # Valid for
//!
//! Between the track's two ends; another time is an error. UT1 - UTC is that of the first time; where
//! the track runs over a leap second it jumps with UTC, as UT1 itself does not.
//!
//! # Accuracy
//!
//! 1e-6 arcsec and 1e-11 au against [`sun()`](super::sun()), and equal to it at the nodes to rounding. Checked
//! in `tests/published/sky_track.rs`.
//!
//! # Source
//!
//! Abramowitz & Stegun (1964), 25.2.13 (formula) and 25.2.14 (remainder).

use super::sun::{Apparent, apparent, on_the_ground, ut1_minus_tai_s};
use super::{Place, SkyError, SunPlace, Utc};
use crate::units::wrapped_rad;

/// Distance of the nodes, s.
const STEP_S: f64 = 600.0;

/// The Sun's path over a place between two times.
#[derive(Clone, Debug)]
pub struct SunTrack {
    first: Utc,
    last: Utc,
    place: Place,
    /// The first node lies one step before `first`; two steps follow `last`.
    nodes: Vec<Apparent>,
}

impl SunTrack {
    /// Prepares the track from `first` to `last`: about 0.1 ms for each ten minutes of it.
    ///
    /// # Errors
    ///
    /// Those of [`sun()`](super::sun()), and [`SkyError::TrackReversed`].
    pub fn new(
        first: Utc,
        last: Utc,
        place: &Place,
        ut1_minus_utc_s: f64,
    ) -> Result<Self, SkyError> {
        let ut1_minus_tai_s = ut1_minus_tai_s(first, ut1_minus_utc_s)?;
        last.require_known_leap_seconds()?;
        place.require_possible()?;
        if last < first {
            return Err(SkyError::TrackReversed {
                first: first.to_iso(),
                last: last.to_iso(),
            });
        }
        let steps = (last.minus(first) / STEP_S).floor() as usize;
        let mut nodes: Vec<Apparent> = Vec::with_capacity(steps + 4);
        for node in 0..steps + 4 {
            let at = first.plus_s(STEP_S * (node as f64 - 1.0));
            let mut seen = apparent(at, Some(place), ut1_minus_tai_s)?;
            if let Some(before) = nodes.last() {
                seen = unwrapped(seen, before);
            }
            nodes.push(seen);
        }
        Ok(Self {
            first,
            last,
            place: *place,
            nodes,
        })
    }

    /// The Sun at a time within the track.
    ///
    /// # Errors
    ///
    /// [`SkyError::OutsideTrack`].
    pub fn at(&self, time: Utc) -> Result<SunPlace, SkyError> {
        let steps = time.minus(self.first) / STEP_S;
        let four = self
            .nodes
            .get(steps.floor() as usize..)
            .and_then(|it| it.first_chunk::<4>());
        match four {
            Some(four) if self.first <= time && time <= self.last => Ok(on_the_ground(
                &between(four, steps - steps.floor()),
                &self.place,
            )),
            _ => Err(SkyError::OutsideTrack {
                time: time.to_iso(),
                first: self.first.to_iso(),
                last: self.last.to_iso(),
            }),
        }
    }
}

/// The angles that run round, continued from the node before.
fn unwrapped(seen: Apparent, before: &Apparent) -> Apparent {
    let near = |angle_rad: f64, at_rad: f64| at_rad + wrapped_rad(angle_rad - at_rad);
    Apparent {
        sidereal_rad: near(seen.sidereal_rad, before.sidereal_rad),
        right_ascension_rad: near(seen.right_ascension_rad, before.right_ascension_rad),
        l0_rad: near(seen.l0_rad, before.l0_rad),
        ..seen
    }
}

/// The cubic through four nodes, `part` of a step behind the second.
fn between(nodes: &[Apparent; 4], part: f64) -> Apparent {
    let (p, q) = (part, 1.0 - part);
    // Abramowitz & Stegun 25.2.13
    let weights = [
        -p * q * (1.0 + q) / 6.0,
        q * (1.0 + p) * (1.0 + q) / 2.0,
        p * (1.0 + p) * (1.0 + q) / 2.0,
        -p * q * (1.0 + p) / 6.0,
    ];
    // Differences from the second node are summed, so that a node is returned to the last bit.
    let at = |value: fn(&Apparent) -> f64| {
        let base = value(&nodes[1]);
        let sum: f64 = nodes
            .iter()
            .zip(weights)
            .map(|(it, weight)| weight * (value(it) - base))
            .sum();
        base + sum
    };
    Apparent {
        sidereal_rad: at(|it| it.sidereal_rad),
        right_ascension_rad: at(|it| it.right_ascension_rad),
        declination_rad: at(|it| it.declination_rad),
        axis_rad: at(|it| it.axis_rad),
        b0_rad: at(|it| it.b0_rad),
        l0_rad: at(|it| it.l0_rad),
        distance_au: at(|it| it.distance_au),
        radial_velocity_m_s: at(|it| it.radial_velocity_m_s),
    }
}
