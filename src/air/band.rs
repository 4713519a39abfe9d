//! A band of wavelengths: where its light makes the limb, and how far the air draws it apart.
//!
//! # Model
//!
//! ```text
//! S(l)  = filter x source at the limb x transmission of the air        counted in photons
//! l_c   = int l S dl / int S dl,    s_l^2 = int (l - l_c)^2 S dl / int S dl
//! n_b   = int (n - 1) S dl / int S dl,    n(l_e) - 1 = n_b             effective wavelength l_e
//! R(l)  = R(l_e) (n(l) - 1) / n_b
//! v     = R(l_e)^2 int [(n - 1)/n_b - 1]^2 S dl / int S dl             variance along the vertical
//! d r   = k v cos^2 theta,   flattening -k v                           in a limb that is blurred
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `l`, `l_c` | wavelength in vacuum, centroid | nm |
//! | `n` | refractive index at the pupil | - |
//! | `R` | refraction | rad |
//! | `k` | shift of the limb by one-axis variance of the blur, negative inward | arcsec^-1 |
//! | `theta` | bearing from the zenith | rad |
//!
//! The limb in a band is the sum of the limbs at its wavelengths, each as bright as the edge of the
//! disk; to first order its place is their mean. Refraction is curved over wavelength, so that the mean
//! belongs to `l_e`, not to `l_c`: 2.4 nm apart for 100 nm at 550 nm. To second order the spread is a
//! blur along the vertical, which moves a limb inward as any blur does.
//!
//! # Valid for
//!
//! Wavelengths of the formula for the refractivity, throughout the band; source and filter smooth
//! between the points given. Refraction in proportion to the refractivity: zenith distances up to 75
//! degrees. Spreads below a third of the width of the blurred limb.
//!
//! # Accuracy
//!
//! Mean, centroid and variance: 1e-6 of themselves for a given spectrum. Spread: a part in a thousand
//! at 70 degrees. The sun as a black body is wrong by 7e-4 per nm of slope, 0.6 nm in the centroid of
//! 100 nm.
//!
//! # Source
//!
//! Moments of a spectrum; Planck's law with the constants of the SI.

use std::num::NonZeroUsize;

use gauss_quad::GaussLegendre;

use super::conditions::within;
use super::error::AirError;
use super::extinction::molecular_transmission;
use super::station::StationAir;
use crate::units::{ARCSEC_RAD, MAS_RAD};

/// Wavelengths that a band may reach, in nm.
const REACH_NM: (f64, f64) = (200.0, 20_000.0);

/// Quadrature over a top hat, and over each straight piece of a curve.
const TOP_HAT_NODES: NonZeroUsize = NonZeroUsize::new(16).unwrap();
const PIECE_NODES: NonZeroUsize = NonZeroUsize::new(4).unwrap();

/// Second radiation constant `h c / k`, in nm K.
const SECOND_RADIATION_NM_K: f64 = 1.438_776_877e7;

/// Temperature of a black body as bright as the Sun, in kelvin.
const SUN_K: f64 = 5777.0;

/// A wavelength and its share of the light.
type Node = (f64, f64);

/// What a filter lets pass.
#[derive(Clone, Debug, PartialEq)]
pub struct Band {
    nodes: Vec<Node>,
    centre_nm: f64,
    half_nm: (f64, f64),
}

/// The light of a band that makes the limb: shares add up to one.
#[derive(Clone, Debug, PartialEq)]
pub struct BandLight {
    nodes: Vec<Node>,
    half_nm: (f64, f64),
    /// Centroid, in nm.
    pub centroid_nm: f64,
    /// Standard deviation of the wavelength, in nm.
    pub rms_width_nm: f64,
}

/// A band in the air of a station.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BandInAir {
    /// Centroid of the light, in nm.
    pub centroid_nm: f64,
    /// Wavelength at which the refractivity is the band's mean, in nm.
    pub effective_nm: f64,
    /// Mean refractivity.
    pub refractivity: f64,
    /// Difference of the refractivities at both half-power wavelengths, over the mean.
    pub spread_rel: f64,
    /// Standard deviation of the refractivity over the mean.
    pub rms_rel: f64,
}

/// How far a band is drawn apart along the vertical.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Smear {
    /// Between the half-power wavelengths, in mas.
    pub spread_mas: f64,
    /// Standard deviation, in mas.
    pub rms_mas: f64,
    /// Variance that it adds to a blur along the vertical, in arcsec^2.
    pub variance_arcsec2: f64,
}

impl Band {
    /// A filter that passes everything between two wavelengths and nothing outside.
    ///
    /// # Errors
    ///
    /// [`AirError::OutOfRange`] for a width that is not positive and ends outside 200..20000 nm.
    pub fn top_hat(centre_nm: f64, width_nm: f64) -> Result<Self, AirError> {
        const SET_BY: &str = "the band";
        within("band centre", centre_nm, REACH_NM, "nm", SET_BY)?;
        let widest_nm = 2.0 * (centre_nm - REACH_NM.0).min(REACH_NM.1 - centre_nm);
        within("band width", width_nm, (1e-6, widest_nm), "nm", SET_BY)?;
        let half_nm = (centre_nm - 0.5 * width_nm, centre_nm + 0.5 * width_nm);
        let nodes = piece(&GaussLegendre::new(TOP_HAT_NODES), half_nm, (1.0, 1.0)).collect();
        Ok(Self {
            nodes,
            centre_nm,
            half_nm,
        })
    }

    /// A measured filter, straight between its points; wavelengths in vacuum, transmission in any unit.
    ///
    /// # Errors
    ///
    /// [`AirError::BandPoints`] when a list is shorter than two or than the other, [`AirError::BandOrder`]
    /// when the wavelengths do not rise, [`AirError::OutOfRange`] for a value that cannot be, and
    /// [`AirError::BandDark`] when nothing passes.
    pub fn curve(wavelengths_nm: &[f64], transmissions: &[f64]) -> Result<Self, AirError> {
        const SET_BY: &str = "the band";
        let (wavelengths, values) = (wavelengths_nm.len(), transmissions.len());
        if wavelengths < 2 || wavelengths != values {
            return Err(AirError::BandPoints {
                wavelengths,
                values,
            });
        }
        for &nm in wavelengths_nm {
            within("wavelength of the filter", nm, REACH_NM, "nm", SET_BY)?;
        }
        for &it in transmissions {
            within("transmission", it, (0.0, 1e6), "(any unit)", SET_BY)?;
        }
        for pair in wavelengths_nm.windows(2) {
            if pair[1] <= pair[0] {
                return Err(AirError::BandOrder {
                    before_nm: pair[0],
                    after_nm: pair[1],
                });
            }
        }
        let rule = GaussLegendre::new(PIECE_NODES);
        let pieces = || wavelengths_nm.windows(2).zip(transmissions.windows(2));
        let nodes: Vec<Node> = pieces()
            .filter(|(_, t)| t[0] > 0.0 || t[1] > 0.0)
            .flat_map(|(l, t)| piece(&rule, (l[0], l[1]), (t[0], t[1])))
            .collect();
        let half = 0.5 * transmissions.iter().copied().fold(0.0, f64::max);
        if half == 0.0 {
            return Err(AirError::BandDark);
        }
        // An end above half power is where the band itself ends.
        let end = |it: Option<(&f64, &f64)>| it.filter(|it| *it.1 >= half).map(|it| *it.0);
        let pairs = || wavelengths_nm.iter().zip(transmissions);
        let crossings: Vec<f64> = end(pairs().next())
            .into_iter()
            .chain(pieces().filter_map(|(l, t)| {
                let crosses = (t[0] < half) != (t[1] < half);
                crosses.then(|| l[0] + (half - t[0]) / (t[1] - t[0]) * (l[1] - l[0]))
            }))
            .chain(end(pairs().next_back()))
            .collect();
        let low_nm = crossings.first().copied().unwrap_or(wavelengths_nm[0]);
        let high_nm = crossings.last().copied().unwrap_or(low_nm);
        Ok(Self {
            nodes,
            centre_nm: 0.5 * (low_nm + high_nm),
            half_nm: (low_nm, high_nm),
        })
    }

    /// Middle of the band: as given for a top hat, between the half-power wavelengths for a curve, in nm.
    pub fn centre_nm(&self) -> f64 {
        self.centre_nm
    }

    /// Outermost wavelengths at which half the greatest transmission passes, in nm.
    pub fn half_power_nm(&self) -> (f64, f64) {
        self.half_nm
    }

    /// The light that makes the limb, for the photons of a source at each wavelength (nm), in any unit.
    ///
    /// # Errors
    ///
    /// [`AirError::SpectrumValue`] where the source is negative or not a number, [`AirError::BandDark`]
    /// when it is dark throughout.
    pub fn light(&self, photons: impl Fn(f64) -> f64) -> Result<BandLight, AirError> {
        let mut nodes = self.nodes.clone();
        for (wavelength_nm, share) in &mut nodes {
            let found = photons(*wavelength_nm);
            if !found.is_finite() || found < 0.0 {
                let wavelength_nm = *wavelength_nm;
                return Err(AirError::SpectrumValue {
                    wavelength_nm,
                    found,
                });
            }
            *share *= found;
        }
        let total: f64 = nodes.iter().map(|it| it.1).sum();
        if total == 0.0 {
            return Err(AirError::BandDark);
        }
        for it in &mut nodes {
            it.1 /= total;
        }
        let (centroid_nm, rms_width_nm) = mean_and_rms(nodes.iter().copied());
        Ok(BandLight {
            nodes,
            half_nm: self.half_nm,
            centroid_nm,
            rms_width_nm,
        })
    }

    /// [`Band::light`] after clear air, its molecules taking the blue away.
    ///
    /// # Errors
    ///
    /// As [`Band::light`].
    pub fn light_through_air(
        &self,
        photons: impl Fn(f64) -> f64,
        pressure_hpa: f64,
        zenith_apparent_rad: f64,
    ) -> Result<BandLight, AirError> {
        self.light(|nm| photons(nm) * molecular_transmission(nm, pressure_hpa, zenith_apparent_rad))
    }
}

/// Nodes over a straight piece of a filter.
fn piece(
    rule: &GaussLegendre,
    (from_nm, to_nm): (f64, f64),
    (from, to): (f64, f64),
) -> impl Iterator<Item = Node> + '_ {
    let half_nm = 0.5 * (to_nm - from_nm);
    rule.as_node_weight_pairs().iter().map(move |&(x, w)| {
        let share = 0.5 * (1.0 + x);
        (
            from_nm + half_nm * (1.0 + x),
            w * half_nm * (from + share * (to - from)),
        )
    })
}

/// Mean and standard deviation of values with shares that add up to one.
fn mean_and_rms(values: impl Iterator<Item = Node> + Clone) -> (f64, f64) {
    let mean: f64 = values.clone().map(|(x, share)| share * x).sum();
    let variance: f64 = values.map(|(x, share)| share * (x - mean).powi(2)).sum();
    (mean, variance.sqrt())
}

impl BandLight {
    /// Mean and spread of the refractivity of a station's air over the band.
    ///
    /// # Errors
    ///
    /// As [`StationAir::refractivity`], at any wavelength of the band; [`AirError::DispersionTurns`]
    /// when the refractivity does not change one way through the band.
    pub fn in_air(&self, air: &StationAir) -> Result<BandInAir, AirError> {
        let mut values = Vec::with_capacity(self.nodes.len());
        for &(nm, share) in &self.nodes {
            values.push((air.refractivity(nm)?, share));
        }
        let (refractivity, rms) = mean_and_rms(values.iter().copied());
        let (low_nm, high_nm) = self.half_nm;
        let spread = air.refractivity(low_nm)? - air.refractivity(high_nm)?;
        Ok(BandInAir {
            centroid_nm: self.centroid_nm,
            effective_nm: self.wavelength_of(refractivity, air)?,
            refractivity,
            spread_rel: spread.abs() / refractivity,
            rms_rel: rms / refractivity,
        })
    }

    /// Wavelength in the band at which the air has a refractivity, in nm.
    fn wavelength_of(&self, refractivity: f64, air: &StationAir) -> Result<f64, AirError> {
        const STEPS: usize = 60;
        let (first, last) = (self.nodes.first(), self.nodes.last());
        let (Some(&(mut low_nm, _)), Some(&(mut high_nm, _))) = (first, last) else {
            return Err(AirError::BandDark);
        };
        let turns = AirError::DispersionTurns { low_nm, high_nm };
        let excess = |nm: f64| Ok::<f64, AirError>(air.refractivity(nm)? - refractivity);
        let falls = excess(low_nm)? > 0.0;
        if falls == (excess(high_nm)? > 0.0) {
            return Err(turns);
        }
        for _ in 0..STEPS {
            let middle_nm = 0.5 * (low_nm + high_nm);
            if (excess(middle_nm)? > 0.0) == falls {
                low_nm = middle_nm;
            } else {
                high_nm = middle_nm;
            }
        }
        Ok(0.5 * (low_nm + high_nm))
    }
}

impl BandInAir {
    /// The smear where the refraction at the effective wavelength is known.
    pub fn smear(&self, refraction_rad: f64) -> Smear {
        let rms_rad = self.rms_rel * refraction_rad.abs();
        Smear {
            spread_mas: self.spread_rel * refraction_rad.abs() / MAS_RAD,
            rms_mas: rms_rad / MAS_RAD,
            variance_arcsec2: (rms_rad / ARCSEC_RAD).powi(2),
        }
    }
}

impl Smear {
    /// Horizontal minus vertical radius that the smear leaves in a limb, in mas, to first order.
    ///
    /// The argument is the shift of the limb's place by the one-axis variance of the blur, negative for
    /// a limb that moves inward; it depends on the definition of the limb and on the width of the blur.
    pub fn flattening_mas(&self, shift_per_variance_per_arcsec: f64) -> f64 {
        -1000.0 * shift_per_variance_per_arcsec * self.variance_arcsec2
    }
}

/// Photons of the disk's centre at a wavelength, as of a black body of 5777 K; any unit.
///
/// The limb is redder: the caller multiplies by the edge's brightness in units of the centre.
pub fn solar_photons(wavelength_nm: f64) -> f64 {
    let exponent = SECOND_RADIATION_NM_K / (wavelength_nm * SUN_K);
    (500.0 / wavelength_nm).powi(4) / exponent.exp_m1()
}
