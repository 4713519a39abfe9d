//! How much higher the limb lies at one wavelength than at another.
//!
//! # Model
//!
//! ```text
//! h(l) = H ln k(l) + constant
//! k(l) = l^3 (1/l - 1/l0)^(3/2) [1 - exp(-hc / (l k T))] sum_{n=1..6} C_n (1/l - 1/l0)^((n-1)/2)
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `l` | wavelength | um |
//! | `l0` | threshold of the negative hydrogen ion, 1.6419 | um |
//! | `H` | scale of the tangential optical depth | km |
//! | `k` | bound-free absorption of the negative hydrogen ion, any unit | - |
//! | `T` | 5000, the upper photosphere | K |
//!
//! The limb is where the tangential optical depth is one: where the air of the Sun is more opaque, it
//! lies farther out, by `H` for each factor e. This difference is not applied to any value: it is
//! carried as a standard uncertainty of its full size.
//!
//! # Valid for
//!
//! The continuum, 300..1100 nm. A line whose core is in the filter has its limb much higher.
//!
//! # Accuracy
//!
//! The opacity is that of one ion; free-free absorption and metals below 400 nm are left out. No
//! measured radius is good enough to check it: hence an uncertainty and no correction.
//!
//! # Source
//!
//! John 1988, Astron. Astrophys. 193, 189: form and coefficients, from memory; the maximum near 850
//! nm and the threshold are the check.

/// Threshold of the ion, um.
const THRESHOLD_UM: f64 = 1.6419;

/// Coefficients of the series.
const SERIES: [f64; 6] = [152.519, 49.534, -118.858, 92.536, -34.194, 4.982];

/// `h c / (k T)` at 5000 K, um: 14388 um K over the temperature.
const STIMULATED_UM: f64 = 14_388.0 / 5000.0;

/// Absorption at a wavelength, in 1e-18 square centimetres; zero beyond the threshold.
pub fn opacity(wavelength_nm: f64) -> f64 {
    let l = wavelength_nm / 1000.0;
    let x = 1.0 / l - 1.0 / THRESHOLD_UM;
    if !(x > 0.0) {
        return 0.0;
    }
    let root = x.sqrt();
    let sum = SERIES.iter().rev().fold(0.0, |sum, c| sum * root + c);
    l.powi(3) * x.powf(1.5) * sum * -(-STIMULATED_UM / l).exp_m1()
}

/// Height of the limb at one wavelength above that at another, in units of the scale `H`.
pub fn difference(wavelength_nm: f64, above_nm: f64) -> f64 {
    (opacity(wavelength_nm) / opacity(above_nm)).ln()
}

#[cfg(test)]
#[expect(clippy::float_cmp, reason = "exact by construction")]
mod tests {
    use super::*;

    // Source: common textbooks of stellar atmospheres: greatest near 850 nm, about 4e-17 cm^2, and
    // less by a third near 500 nm; the threshold at 0.754 eV.
    #[test]
    fn the_ion_absorbs_most_near_850_nm() {
        let peak = (400..1600)
            .map(f64::from)
            .max_by(|a, b| opacity(*a).total_cmp(&opacity(*b)))
            .unwrap();
        assert!((820.0..880.0).contains(&peak), "{peak}");
        assert!((35.0..42.0).contains(&opacity(peak)), "{}", opacity(peak));
        assert!((0.65..0.8).contains(&(opacity(500.0) / opacity(peak))));
        assert_eq!(opacity(1650.0), 0.0);
        assert_eq!(difference(550.0, 550.0), 0.0);
        assert!(difference(850.0, 430.0) > 0.3);
    }
}
