//! Where a definition of the limb finds it, relative to the edge before the blur.
//!
//! # Model
//!
//! ```text
//! D(definition, l, w) = place by the definition in the limb at wavelength l, blurred to the width w,
//!                       minus the unblurred inflection
//! ```
//!
//! The limb is that of [`crate::disk`], the profile that of [`crate::optics`]. The blur is taken as a
//! Gaussian above the air, and as the long exposure through turbulent air, `w = 0.98 lambda / r0`,
//! below it. Half-intensity is where the profile falls to half of what it has 10 arcsec inside the
//! edge.
//!
//! # Valid for
//!
//! Continuum of 300..1100 nm, widths of 0.4..10 arcsec, windows of 2..25 arcsec; everything else is an
//! error. One disk of 959.23 arcsec serves for all: over the year the displacement changes by 1 percent
//! at most.
//!
//! # Accuracy
//!
//! 0.1 mas or 0.1 percent for a given limb and blur (`tests/published/footing_limb.rs`). What is not
//! known of limb and blur is in the steps of [`super::carry()`].
//!
//! # Source
//!
//! As in [`crate::optics::definitions`]; the width of a long exposure: Fried 1966, J. Opt. Soc. Am.
//! 56, 1372.

use super::Definition;
use crate::disk::{Darkening, DarkeningLaw, SolarEdge};
use crate::optics::definitions::{fftd_arcsec, inflection_arcsec};
use crate::optics::{Blur, Exposure, LimbOptics, OpticsError, ProfileMaker, Telescope};
use crate::shape::REFERENCE_RADIUS_MAS;
use crate::units::{ARCSEC_RAD, FWHM_PER_SIGMA};
use std::collections::BTreeMap;
use std::collections::btree_map::Entry;

/// Widths of the blur that are allowed, arcsec.
pub const WIDTHS_ARCSEC: (f64, f64) = (0.4, 10.0);

/// Reach of the profiles about the limb and their step, arcsec.
const PROFILE_ARCSEC: (f64, f64) = (38.0, 0.02);

/// Where half-intensity takes its whole, arcsec inside the edge.
const INSIDE_ARCSEC: f64 = 10.0;

/// Width of a long exposure over `lambda / r0`.
const LONG_EXPOSURE: f64 = 0.98;

/// One kilometre on the Sun at 1 AU.
pub const KM_ARCSEC: f64 = 1.378_795e-3;

/// Form of the point-spread function.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Form {
    /// A Gaussian: optics, pixel and jitter above the air.
    Gaussian,
    /// A long exposure through turbulent air, with its wings.
    Air,
}

/// A limb and its blur.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Seen {
    /// Published limb darkening.
    pub law: DarkeningLaw,
    /// Wavelength, nm.
    pub wavelength_nm: f64,
    /// Scale of the tangential optical depth, km.
    pub edge_scale_km: f64,
    /// Form of the blur.
    pub form: Form,
    /// Full width at half maximum of the blur, arcsec.
    pub fwhm_arcsec: f64,
}

/// Finds displacements; keeps the tables of limbs it has met.
#[derive(Debug, Default)]
pub struct Displacements {
    makers: BTreeMap<(bool, u64, u64), ProfileMaker>,
}

impl Displacements {
    /// Place of the limb by a definition minus the unblurred inflection, mas; negative is inward.
    ///
    /// # Errors
    ///
    /// [`OpticsError`] outside the ranges of the module's page.
    pub fn mas(&mut self, definition: Definition, seen: &Seen) -> Result<f64, OpticsError> {
        if definition == Definition::Model {
            return Ok(0.0);
        }
        let (lowest, highest) = WIDTHS_ARCSEC;
        if !(lowest..=highest).contains(&seen.fwhm_arcsec) {
            return Err(OpticsError::OutOfRange {
                quantity: "full width of the blur",
                found: seen.fwhm_arcsec,
                lowest,
                highest,
                unit: "arcsec",
            });
        }
        let maker = self.maker(seen)?;
        let grid = maker.grid();
        let profile = maker.profile(&blur(seen), 0.0);
        let place_arcsec = match definition {
            Definition::Inflection => inflection_arcsec(&profile, &grid)?,
            Definition::Fourier { window_arcsec } => fftd_arcsec(&profile, &grid, window_arcsec)?,
            Definition::HalfIntensity => {
                let at = |x: f64| ((x - grid.x0_arcsec) / grid.step_arcsec).round() as usize;
                let inside = at(-INSIDE_ARCSEC);
                let level = 0.5 * profile[inside];
                let last = profile[inside..]
                    .iter()
                    .position(|it| *it < level)
                    .map_or(profile.len() - 1, |it| inside + it);
                let (above, below) = (profile[last - 1], profile[last]);
                grid.x_arcsec(last - 1) + grid.step_arcsec * (above - level) / (above - below)
            }
            Definition::Model => 0.0,
        };
        Ok(1000.0 * place_arcsec)
    }

    fn maker(&mut self, seen: &Seen) -> Result<&ProfileMaker, OpticsError> {
        let key = (
            seen.law == DarkeningLaw::Neckel2005,
            seen.wavelength_nm.to_bits(),
            seen.edge_scale_km.to_bits(),
        );
        if let Entry::Vacant(free) = self.makers.entry(key) {
            let optics = LimbOptics {
                edge: SolarEdge {
                    radius_arcsec: REFERENCE_RADIUS_MAS / 1000.0,
                    scale_arcsec: seen.edge_scale_km * KM_ARCSEC,
                    darkening: Darkening::new(seen.law, seen.wavelength_nm)?,
                },
                telescope: Telescope {
                    aperture_m: f64::INFINITY,
                    central_obstruction: 0.0,
                },
                wavelength_nm: seen.wavelength_nm,
                exposure: Exposure::Long,
            };
            let (reach, step) = PROFILE_ARCSEC;
            free.insert(ProfileMaker::new(&optics, reach, step, 0.0)?);
        }
        Ok(&self.makers[&key])
    }
}

fn blur(seen: &Seen) -> Blur {
    match seen.form {
        Form::Gaussian => Blur {
            r0_m: f64::INFINITY,
            gaussian_sigma_arcsec: seen.fwhm_arcsec / FWHM_PER_SIGMA,
        },
        Form::Air => Blur {
            r0_m: LONG_EXPOSURE * seen.wavelength_nm * 1e-9 / (seen.fwhm_arcsec * ARCSEC_RAD),
            gaussian_sigma_arcsec: 0.0,
        },
    }
}
