//! What is known of daytime turbulence before looking at the limb.
//!
//! # Model
//!
//! Five layers stand for the profile. Each has a height and a strength whose logarithms are
//! normally distributed; the total strength is free.
//!
//! ```text
//! C_n^2 ~ h^(-1.05) from 4 m to 3.5 km, a tenth of all turbulence above
//! layer            heights it stands for     ln h: median, sigma      share   sigma of ln
//! ground                 4 ..    15 m             8 m, 0.4             0.20      0.7
//! surface               15 ..    60 m            30 m, 0.4             0.20      0.7
//! boundary              60 ..   600 m           190 m, 0.65            0.30      0.7
//! inversion            600 ..  3500 m          1450 m, 0.5             0.20      0.7
//! free air            3500 .. 15000 m          7200 m, 0.4             0.10      0.7
//! ```
//!
//! The median height is the middle of the range and sigma that of a uniform law in `ln h`. The
//! exponent is the middle between -4/3 of free convection and -0.82 found by a tower. The outer
//! scale has a broad law about 20 m, including none.
//!
//! A prior is needed: a layer whose ring is much smaller than the aperture moves the harmonics by
//! `C_n^2 h^2` alone, so that its strength cannot be told from its height.
//!
//! # Valid for
//!
//! Daytime, telescopes a few metres above the ground. Turbulence within 4 m of the telescope moves
//! only m = 1 and is not seen at all.
//!
//! # Accuracy
//!
//! The width of the prior is in the error of r0; `tests/published/motion_sessions.rs` measures what
//! is left.
//!
//! # Source
//!
//! J. C. Wyngaard, Y. Izumi and S. A. Collins, J. Opt. Soc. Am. 61, 1646 (1971), for -4/3 (from
//! memory); tower: Gu et al., arXiv:2410.21347 (2024), abstract; outer scales
//! of 10 to 30 m: J. M. Beckers and Z. Liu, Bull. Am. Astron. Soc. 34, 56.03 (2002), abstract.
//! Widths: our judgement.

use nalgebra::{DMatrix, DVector};

/// What is assumed of one layer.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LayerPrior {
    /// Median height above the telescope.
    pub height_m: f64,
    /// Standard deviation of the natural logarithm of the height.
    pub height_sigma_ln: f64,
    /// Median share of the turbulence; shares need not sum to one.
    pub share: f64,
    /// Standard deviation of the natural logarithm of the share.
    pub share_sigma_ln: f64,
}

/// What is assumed of the profile.
#[derive(Clone, Debug, PartialEq)]
pub struct ProfilePrior {
    /// The layers, lowest first.
    pub layers: Vec<LayerPrior>,
    /// Outer scales considered, with their weights.
    pub outer_scales_m: Vec<(f64, f64)>,
    /// Change of the turbulence's strength from sequence to sequence: standard deviation of its
    /// natural logarithm.
    pub sequence_sigma_ln: f64,
}

impl Default for ProfilePrior {
    fn default() -> Self {
        let layer = |height_m, height_sigma_ln, share, share_sigma_ln| LayerPrior {
            height_m,
            height_sigma_ln,
            share,
            share_sigma_ln,
        };
        Self {
            layers: vec![
                layer(8.0, 0.4, 0.20, 0.7),
                layer(30.0, 0.4, 0.20, 0.7),
                layer(190.0, 0.65, 0.30, 0.7),
                layer(1450.0, 0.5, 0.20, 0.7),
                layer(7200.0, 0.4, 0.10, 0.7),
            ],
            outer_scales_m: vec![
                (5.0, 0.05),
                (8.0, 0.10),
                (12.0, 0.15),
                (16.0, 0.14),
                (20.0, 0.13),
                (25.0, 0.12),
                (32.0, 0.11),
                (50.0, 0.10),
                (100.0, 0.06),
                (f64::INFINITY, 0.04),
            ],
            sequence_sigma_ln: 0.3,
        }
    }
}

impl ProfilePrior {
    /// Adds to the gradient and the lower triangle of the curvature of the posterior at these
    /// parameters (`ln J_i`, `ln h_i`, further noise, `ln s_k`); returns the logarithm of the prior
    /// without that of the noise.
    pub(super) fn add_to(
        &self,
        at: &DVector<f64>,
        gradient: &mut DVector<f64>,
        curvature: &mut DMatrix<f64>,
    ) -> f64 {
        let layers = self.layers.len();
        let mut sum = 0.0;
        let mut normal = |j: usize, mean: f64, sigma: f64| {
            let (weight, off) = (sigma.powi(-2), at[j] - mean);
            sum -= 0.5 * weight * off * off;
            gradient[j] -= weight * off;
            curvature[(j, j)] += weight;
        };
        for (i, layer) in self.layers.iter().enumerate() {
            normal(layers + i, layer.height_m.ln(), layer.height_sigma_ln);
        }
        for k in 2 * layers + 1..at.len() {
            normal(k, 0.0, self.sequence_sigma_ln);
        }
        // Strengths: normal about the shares, with the common scale integrated out:
        // precision W - W 1 1' W / (1' W 1).
        let weights: Vec<f64> = self
            .layers
            .iter()
            .map(|it| it.share_sigma_ln.powi(-2))
            .collect();
        let total: f64 = weights.iter().sum();
        let off: Vec<f64> = self
            .layers
            .iter()
            .enumerate()
            .map(|(i, it)| at[i] - it.share.ln())
            .collect();
        let common = weights.iter().zip(&off).map(|(w, d)| w * d).sum::<f64>() / total;
        for i in 0..layers {
            sum -= 0.5 * weights[i] * off[i] * (off[i] - common);
            gradient[i] -= weights[i] * (off[i] - common);
            for j in 0..=i {
                curvature[(i, j)] -= weights[i] * weights[j] / total;
            }
            curvature[(i, i)] += weights[i];
        }
        sum
    }
}
