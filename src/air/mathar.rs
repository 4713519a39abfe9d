//! Refractive index of moist air from 1.3 to 2.5 um, after Mathar.
//!
//! # Model
//!
//! ```text
//! n - 1 = sum_i c_i (s - 1e4/2.25)^i,   i = 0..5
//! c_i = c_ref + c_T T' + c_TT T'^2 + c_H H' + c_HH H'^2 + c_p p' + c_pp p'^2
//!     + c_TH T' H' + c_Tp T' p' + c_Hp H' p'                                          (eq. 7)
//! T' = 1/T - 1/290.65,  H' = H - 10,  p' = P - 75000
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `s` | vacuum wavenumber | cm^-1 |
//! | `T` | temperature | K |
//! | `H` | relative humidity | percent |
//! | `P` | pressure | Pa |
//!
//! # Valid for
//!
//! 1300..2500 nm, 10..25 C, 500..1023 hPa, humidity 0.05..0.60, CO2 fixed at 370 ppm. Outside the
//! expansion is off by up to 33e-8: refused.
//!
//! # Accuracy
//!
//! Within 17e-8 of Ciddor's formula, which lacks the water bands.
//!
//! # Source
//!
//! R. J. Mathar, "Refractive index of humid air in the infrared: model fits", Journal of Optics A 9,
//! 470 (2007), arXiv:physics/0610256, table 1.

use crate::units::CELSIUS_ZERO_K;

/// Table 1, one row per order `i`: ref, T, TT, H, HH, p, pp, TH, Tp, Hp.
const TABLE_1: [[f64; 10]; 6] = [
    [
        0.200192e-3,
        0.588625e-1,
        -3.01513,
        -0.103945e-7,
        0.573256e-12,
        0.267085e-8,
        0.609186e-17,
        0.497859e-4,
        0.779176e-6,
        -0.206567e-15,
    ],
    [
        0.113474e-9,
        -0.385766e-7,
        0.406167e-3,
        0.136858e-11,
        0.186367e-16,
        0.135941e-14,
        0.519024e-23,
        -0.661752e-8,
        0.396499e-12,
        0.106141e-20,
    ],
    [
        -0.424595e-14,
        0.888019e-10,
        -0.514544e-6,
        -0.171039e-14,
        -0.228150e-19,
        0.135295e-18,
        -0.419477e-27,
        0.832034e-11,
        0.395114e-16,
        -0.149982e-23,
    ],
    [
        0.100957e-16,
        -0.567650e-13,
        0.343161e-9,
        0.112908e-17,
        0.150947e-22,
        0.818218e-23,
        0.434120e-30,
        -0.551793e-14,
        0.233587e-20,
        0.984046e-27,
    ],
    [
        -0.293315e-20,
        0.166615e-16,
        -0.101189e-12,
        -0.329925e-21,
        -0.441214e-26,
        -0.222957e-26,
        -0.122445e-33,
        0.161899e-17,
        -0.636441e-24,
        -0.288266e-30,
    ],
    [
        0.307228e-24,
        -0.174845e-20,
        0.106749e-16,
        0.344747e-25,
        0.461209e-30,
        0.249964e-30,
        0.134816e-37,
        -0.169901e-21,
        0.716868e-28,
        0.299105e-34,
    ],
];

/// Refractivity after Mathar (2007), unchecked: Pa, degrees Celsius, humidity 0 to 1, nm.
pub(super) fn mathar_refractivity(
    pressure_pa: f64,
    temperature_c: f64,
    relative_humidity: f64,
    wavelength_vacuum_nm: f64,
) -> f64 {
    let t = 1.0 / (temperature_c + CELSIUS_ZERO_K) - 1.0 / 290.65;
    let h = 100.0 * relative_humidity - 10.0;
    let p = pressure_pa - 75000.0;
    let terms = [1.0, t, t * t, h, h * h, p, p * p, t * h, t * p, h * p];
    let s = 1e7 / wavelength_vacuum_nm - 1e4 / 2.25;
    TABLE_1.iter().rev().fold(0.0, |sum, row| {
        sum * s
            + row
                .iter()
                .zip(&terms)
                .map(|(c, term)| c * term)
                .sum::<f64>()
    })
}
