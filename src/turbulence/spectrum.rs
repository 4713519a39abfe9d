//! Power spectrum of the phase after von Karman.
//!
//! # Model
//!
//! ```text
//! W(f)  = A0 r0^(-5/3) (f^2 + L0^-2)^(-11/6)
//! A0    = [(24/5) G(6/5)]^(5/6) G(11/6)^2 / (2 pi^(11/3))
//! D(r)  = 2 [(24/5) G(6/5)]^(5/6) (r/r0)^(5/3)               infinite outer scale
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `f` | spatial frequency | cycles/m |
//! | `L0` | outer scale; enters as 1/L0, not 2 pi/L0 | m |
//! | `r0` | Fried's parameter | m |
//! | `G` | gamma function | - |
//!
//! # Valid for
//!
//! Isotropic turbulence, scales well above the inner scale (some mm); no Fresnel factor, which
//! takes less than 0.8 percent from the low harmonics of the limb at a range of 20 km.
//!
//! # Accuracy
//!
//! Exact for the model.
//!
//! # Source
//!
//! D. L. Fried, J. Opt. Soc. Am. 55, 1427 (1965) and 56, 1372 (1966), for `D`; J. Borgnino,
//! Applied Optics 29, 1863 (1990), and R. Conan et al., J. Opt. Soc. Am. A 17, 1807 (2000), for
//! the von Karman form (from memory).

/// `A0`: the constant of the phase spectrum, for frequencies in cycles per metre.
pub const PHASE_PSD_CONSTANT: f64 = 0.022_895_587_108_555_19;

/// Constant of the phase structure function, 6.88.
pub const STRUCTURE_CONSTANT: f64 = 6.883_877_182_293_811;

/// `f^3 W(f)` for `r0 = 1 m`: spectrum of the gradient summed over both axes, times `f`.
pub(super) fn gradient_spectrum(f_per_m: f64, outer_scale_m: f64) -> f64 {
    if outer_scale_m.is_infinite() {
        return PHASE_PSD_CONSTANT / f_per_m.cbrt().powi(2);
    }
    let q = f_per_m * f_per_m + outer_scale_m.powi(-2);
    PHASE_PSD_CONSTANT * f_per_m.powi(3) / (q * q.powf(5.0 / 6.0))
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::PI;

    #[test]
    fn the_constants_are_what_their_gamma_functions_say() {
        let g = (24.0 / 5.0 * libm::tgamma(1.2)).powf(5.0 / 6.0);
        assert!((STRUCTURE_CONSTANT - 2.0 * g).abs() < 1e-13);
        let a0 = g * libm::tgamma(11.0 / 6.0).powi(2) / (2.0 * PI.powf(11.0 / 3.0));
        assert!((PHASE_PSD_CONSTANT - a0).abs() < 1e-15, "{a0}");
    }

    #[test]
    fn a_huge_outer_scale_is_an_infinite_one() {
        let far = gradient_spectrum(0.3, 1e7);
        assert!((far / gradient_spectrum(0.3, f64::INFINITY) - 1.0).abs() < 1e-12);
    }
}
