//! How much light the clear air takes away, by wavelength and zenith distance.
//!
//! # Model
//!
//! ```text
//! T(l)   = exp[-tau(l) X P/P0]
//! tau(l) = 0.008569 l^-4 (1 + 0.0113 l^-2 + 0.00013 l^-4)        molecules, P0 = 1013.25 hPa
//! X      = 1 / [cos zeta + 0.50572 (96.07995 - zeta)^-1.6364]    zeta in degrees inside the bracket
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `T` | transmission | - |
//! | `tau` | optical depth towards the zenith | - |
//! | `l` | wavelength | um |
//! | `P` | pressure at the station | hPa |
//! | `X` | air mass, in units of that towards the zenith | - |
//! | `zeta` | apparent zenith distance | rad |
//!
//! # Valid for
//!
//! 200 nm and longer; zenith distances up to 90 degrees. Dust, ozone and the bands of water are left
//! out: who knows them multiplies them into the spectrum of the source.
//!
//! # Accuracy
//!
//! Molecules: 0.5 percent of the optical depth. Dust of 0.1 with an exponent of 1.3 would shift the
//! centroid of a band 100 nm wide at 550 nm and 60 degrees by 0.4 nm.
//!
//! # Source
//!
//! J. E. Hansen and L. D. Travis, Space Science Reviews 16, 527 (1974), from memory; F. Kasten and A. T.
//! Young, Applied Optics 28, 4735 (1989), from memory.

/// Pressure to which the optical depth belongs, in hPa.
const STANDARD_HPA: f64 = 1013.25;

/// Optical depth of the molecules of the air towards the zenith, at a wavelength and a pressure.
pub fn molecular_depth(wavelength_nm: f64, pressure_hpa: f64) -> f64 {
    let per_um2 = (1000.0 / wavelength_nm).powi(2);
    0.008569
        * per_um2
        * per_um2
        * (1.0 + 0.0113 * per_um2 + 0.00013 * per_um2 * per_um2)
        * pressure_hpa
        / STANDARD_HPA
}

/// Air mass at an apparent zenith distance; NaN beyond 90 degrees.
pub fn air_mass(zenith_apparent_rad: f64) -> f64 {
    let zenith_deg = zenith_apparent_rad.to_degrees();
    if !(0.0..=90.0).contains(&zenith_deg) {
        return f64::NAN;
    }
    1.0 / (zenith_apparent_rad.cos() + 0.50572 * (96.07995 - zenith_deg).powf(-1.6364))
}

/// Share of the light that passes clear air without dust.
pub fn molecular_transmission(
    wavelength_nm: f64,
    pressure_hpa: f64,
    zenith_apparent_rad: f64,
) -> f64 {
    (-molecular_depth(wavelength_nm, pressure_hpa) * air_mass(zenith_apparent_rad)).exp()
}
