//! The Sun's disk before the air: limb darkening and the edge of finite thickness.

pub mod darkening;
pub mod edge;
mod neckel_labs_1994;

pub use darkening::{Darkening, DarkeningLaw};
pub use edge::SolarEdge;

/// Why there is no limb darkening or no edge for what was asked.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum DiskError {
    /// The wavelength is outside the law's range.
    #[error(
        "wavelength {found_nm} nm is outside the limb-darkening law; allowed is {lowest_nm} to {highest_nm} nm"
    )]
    WavelengthOutside {
        /// Wavelength found.
        found_nm: f64,
        /// Lowest wavelength of the law.
        lowest_nm: f64,
        /// Highest wavelength of the law.
        highest_nm: f64,
    },
    /// The wavelength lies in a gap of the law.
    #[error(
        "wavelength {found_nm} nm lies where the limb-darkening law is undefined, {gap_from_nm} to {gap_to_nm} nm; allowed is outside this gap"
    )]
    WavelengthInGap {
        /// Wavelength found.
        found_nm: f64,
        /// Lower end of the gap.
        gap_from_nm: f64,
        /// Upper end of the gap.
        gap_to_nm: f64,
    },
    /// The coefficients do not add up to one at disk centre, or rise without bound at the limb.
    #[error(
        "limb-darkening coefficients add up to {sum} and start with A1 = {slope}; allowed is a sum within {tolerance} of 1 and A1 not below 0"
    )]
    Coefficients {
        /// Sum of the coefficients.
        sum: f64,
        /// Coefficient of the first power of mu.
        slope: f64,
        /// Largest distance of the sum from one.
        tolerance: f64,
    },
    /// The disk's radius is not that of the Sun as seen from the Earth.
    #[error(
        "radius of the disk {found_arcsec} arcsec; allowed is {lowest_arcsec} to {highest_arcsec} arcsec"
    )]
    Radius {
        /// Radius found.
        found_arcsec: f64,
        /// Smallest radius allowed.
        lowest_arcsec: f64,
        /// Largest radius allowed.
        highest_arcsec: f64,
    },
    /// The scale of the edge is negative or larger than any photosphere's.
    #[error("scale of the edge {found_arcsec} arcsec; allowed is 0 to {highest_arcsec} arcsec")]
    Scale {
        /// Scale found.
        found_arcsec: f64,
        /// Largest scale allowed.
        highest_arcsec: f64,
    },
}
