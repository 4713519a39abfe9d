//! Refractive index of moist air in the optical and near infrared, after Ciddor.
//!
//! # Model
//!
//! The phase index `n` of air that holds a mole fraction `x_w` of water vapour is built from two
//! dispersion curves, each scaled by its density:
//!
//! ```text
//! n - 1 = (rho_a / rho_axs) (n_axs - 1)  +  (rho_w / rho_ws) (n_ws - 1)
//!
//! 1e8 (n_as - 1) = k1 / (k0 - s^2) + k3 / (k2 - s^2)       dry air, 15 C, 101325 Pa, 450 ppm
//! n_axs - 1      = (n_as - 1) (1 + 0.534e-6 (x_c - 450))   other CO2
//! 1e8 (n_ws - 1) = 1.022 (w0 + w1 s^2 + w2 s^4 + w3 s^6)   vapour, 20 C, 1333 Pa
//! rho = P M / (Z R T)                                      with the compressibility Z (CIPM 81/91)
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `s` | vacuum wavenumber | um^-1 |
//! | `x_c`, `x_w` | mole fraction of CO2 (ppm), of water vapour | - |
//! | `P`, `T` | pressure, temperature | Pa, K |
//! | `rho_a`, `rho_w` | density of the dry part, of the vapour | kg m^-3 |
//!
//! # Valid for
//!
//! Stated by the author: 0.3..1.69 um, -40..100 C, 80..120 kPa, any humidity. A telescope above
//! some 2000 m is below that pressure: a warning. Up to 2.5 um other formulas agree to 1e-7: a
//! warning. Outside 0.3..2.5 um: an error.
//!
//! # Accuracy
//!
//! Stated by the author: 2e-8 to 5e-8 in `n`; 5e-8 is 0.01 arcsec of refraction at 45 degrees.
//! Checked in `tests/published/ciddor_1996.rs`.
//!
//! # Source
//!
//! P. E. Ciddor, "Refractive index of air: new equations for the visible and near infrared",
//! Applied Optics 35, 1566-1573 (1996), doi:10.1364/AO.35.001566.

use crate::units::CELSIUS_ZERO_K;

/// Molar gas constant of the paper, in J/(mol K); it cancels in the ratios of densities.
const GAS_CONSTANT: f64 = 8.314510;

/// Molar mass of water, in kg/mol.
const WATER_KG_PER_MOL: f64 = 0.018015;

/// Compressibility of moist air: pressure in Pa, temperature in degrees Celsius.
pub fn compressibility(pressure_pa: f64, temperature_c: f64, vapour_mole_fraction: f64) -> f64 {
    let (t, x) = (temperature_c, vapour_mole_fraction);
    let ratio = pressure_pa / (t + CELSIUS_ZERO_K);
    let first = 1.58123e-6 - 2.9331e-8 * t
        + 1.1043e-10 * t * t
        + (5.707e-6 - 2.051e-8 * t) * x
        + (1.9898e-4 - 2.376e-6 * t) * x * x;
    1.0 - ratio * first + ratio * ratio * (1.83e-11 - 0.765e-8 * x * x)
}

/// Refractivity `n - 1` from the quantities of the paper, without any check of their range.
///
/// Pressure in Pa, temperature in degrees Celsius, CO2 in ppm, vacuum wavelength in nm.
pub fn ciddor_refractivity(
    pressure_pa: f64,
    temperature_c: f64,
    vapour_mole_fraction: f64,
    co2_ppm: f64,
    wavelength_vacuum_nm: f64,
) -> f64 {
    let x_w = vapour_mole_fraction;
    let s2 = (1000.0 / wavelength_vacuum_nm).powi(2);
    let dry_450 = 1e-8 * (5792105.0 / (238.0185 - s2) + 167917.0 / (57.362 - s2)); // eq. 1
    let dry = dry_450 * (1.0 + 0.534e-6 * (co2_ppm - 450.0)); // eq. 2
    let vapour =
        1e-8 * 1.022 * (295.235 + 2.6422 * s2 - 0.032380 * s2 * s2 + 0.004028 * s2 * s2 * s2); // eq. 3

    let dry_kg_per_mol = 1e-3 * (28.9635 + 12.011e-6 * (co2_ppm - 400.0));
    let density = |pressure_pa: f64, temperature_c: f64, x_w: f64, kg_per_mol: f64| {
        let z = compressibility(pressure_pa, temperature_c, x_w);
        pressure_pa * kg_per_mol / (z * GAS_CONSTANT * (temperature_c + CELSIUS_ZERO_K)) // eq. 4
    };
    let dry_share = (1.0 - x_w) * density(pressure_pa, temperature_c, x_w, dry_kg_per_mol)
        / density(101325.0, 15.0, 0.0, dry_kg_per_mol);
    let vapour_share = x_w * density(pressure_pa, temperature_c, x_w, WATER_KG_PER_MOL)
        / density(1333.0, 20.0, 1.0, WATER_KG_PER_MOL);
    dry_share * dry + vapour_share * vapour // eq. 5
}
