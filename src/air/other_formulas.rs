//! Published refractivity formulas kept for comparison with Ciddor's.
//!
//! # Model
//!
//! ```text
//! Birch & Downs   1e8 (n_s - 1) = 8342.54 + 2406147/(130 - s2) + 15998/(38.9 - s2)
//!                 n_tp - 1 = P (n_s - 1)/96095.43 [1 + 1e-8 (0.601 - 0.00972 t) P]/(1 + 0.0036610 t)
//!                 n - 1 = n_tp - 1 - p_w (3.7345 - 0.0401 s2) 1e-10
//! Owens           1e8 (n - 1) = [2371.34 + 683939.7/(130 - s2) + 4547.3/(38.9 - s2)] D_s
//!                             + [6487.31 + 58.058 s2 - 0.71150 s2^2 + 0.08851 s2^3] D_w
//! IAG 1999        n - 1 = a p/T - 11.2684e-6 e/T,  a = (287.6155 + 1.62887/l^2 + 0.01360/l^4) 273.15e-6/1013.25
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `s2` | square of the vacuum wavenumber | um^-2 |
//! | `l` | vacuum wavelength | um |
//! | `P`, `p_w` | pressure, vapour pressure | Pa |
//! | `p`, `e` | pressure, vapour pressure | hPa |
//! | `t`, `T` | temperature | C, K |
//! | `D_s`, `D_w` | density factors of dry air and vapour | hPa/K |
//!
//! # Valid for
//!
//! The ranges stand in `refractivity.rs`, which checks them.
//!
//! # Accuracy
//!
//! Birch & Downs within 2e-8 of Ciddor near 20 C; Owens 2.2 percent low in the vapour term; the IAG
//! closed form has no compressibility and is up to 3.4e-4 of itself too large.
//!
//! # Source
//!
//! K. P. Birch and M. J. Downs, Metrologia 30, 155 (1993) and 31, 315 (1994); J. C. Owens, Applied
//! Optics 6, 51 (1967), coefficients partly from memory; IAG resolution 3 (1999), phase form, with
//! the vapour pressure of Gill (1982) and Crane (1976).

use crate::units::CELSIUS_ZERO_K;

/// Coefficient of the vapour pressure in the IAG closed form, in K/hPa.
pub(super) const IAG_VAPOUR_K_PER_HPA: f64 = 11.2684e-6;

fn wavenumber_squared_um2(wavelength_vacuum_nm: f64) -> f64 {
    (1000.0 / wavelength_vacuum_nm).powi(2)
}

/// Refractivity after Birch & Downs (1994); pressures in Pa, temperature in degrees Celsius.
pub fn birch_downs_refractivity(
    pressure_pa: f64,
    temperature_c: f64,
    vapour_pa: f64,
    wavelength_vacuum_nm: f64,
) -> f64 {
    let s2 = wavenumber_squared_um2(wavelength_vacuum_nm);
    let standard = 1e-8 * (8342.54 + 2406147.0 / (130.0 - s2) + 15998.0 / (38.9 - s2));
    let dry = pressure_pa * standard / 96095.43
        * (1.0 + 1e-8 * (0.601 - 0.00972 * temperature_c) * pressure_pa)
        / (1.0 + 0.0036610 * temperature_c);
    dry - vapour_pa * (3.7345 - 0.0401 * s2) * 1e-10
}

/// Refractivity after Owens (1967); pressures in hPa, temperature in degrees Celsius.
pub(super) fn owens_refractivity(
    pressure_hpa: f64,
    temperature_c: f64,
    vapour_hpa: f64,
    wavelength_vacuum_nm: f64,
) -> f64 {
    let s2 = wavenumber_squared_um2(wavelength_vacuum_nm);
    let t = temperature_c + CELSIUS_ZERO_K;
    let (p_s, p_w) = (pressure_hpa - vapour_hpa, vapour_hpa);
    let dry = p_s / t * (1.0 + p_s * (57.90e-8 - 9.3250e-4 / t + 0.25844 / (t * t)));
    let inner = -2.37321e-3 + 2.23366 / t - 710.792 / (t * t) + 7.75141e4 / (t * t * t);
    let vapour = p_w / t * (1.0 + p_w * (1.0 + 3.7e-4 * p_w) * inner);
    let dry_curve = 2371.34 + 683939.7 / (130.0 - s2) + 4547.3 / (38.9 - s2);
    let vapour_curve = 6487.31 + 58.058 * s2 - 0.71150 * s2 * s2 + 0.08851 * s2 * s2 * s2;
    1e-8 * (dry_curve * dry + vapour_curve * vapour)
}

/// Vapour pressure after Gill and Crane; pressure and result in hPa, temperature in degrees Celsius.
pub(super) fn gill_crane_vapour_hpa(
    pressure_hpa: f64,
    temperature_c: f64,
    relative_humidity: f64,
) -> f64 {
    if relative_humidity == 0.0 {
        return 0.0;
    }
    let t = temperature_c;
    let saturation_hpa = 10f64.powf((0.7859 + 0.03477 * t) / (1.0 + 0.00412 * t))
        * (1.0 + pressure_hpa * (4.5e-6 + 6e-10 * t * t));
    relative_humidity * saturation_hpa
        / (1.0 - (1.0 - relative_humidity) * saturation_hpa / pressure_hpa)
}

/// Refractivity after the closed form of IAG (1999); pressures in hPa, temperature in Celsius.
pub(super) fn iag_refractivity(
    pressure_hpa: f64,
    temperature_c: f64,
    vapour_hpa: f64,
    wavelength_vacuum_nm: f64,
) -> f64 {
    let s2 = wavenumber_squared_um2(wavelength_vacuum_nm);
    let a = (287.6155 + 1.62887 * s2 + 0.01360 * s2 * s2) * 273.15e-6 / 1013.25;
    let t = temperature_c + CELSIUS_ZERO_K;
    (a * pressure_hpa - IAG_VAPOUR_K_PER_HPA * vapour_hpa) / t
}
