//! How sharp an edge is in an image, without a template.
//!
//! # Model
//!
//! ```text
//! E = mean over the limb of  integral |grad I|^2 dr
//! ```
//!
//! by central differences over two pixels, between two circles about the limb. An edge twice as wide
//! has half the energy.
//!
//! # Valid for
//!
//! Images whose noise is far below the height of the edge: the squares of the noise are not taken off.
//!
//! # Accuracy
//!
//! A straight edge of Gaussian profile has `h^2 / (2 sqrt(pi) s)`; differences over two pixels cost
//! `1 - (1 px)^2 / (8 s^2)` of it to first order, in mean over the directions of the limb.
//!
//! # Source
//!
//! Gradient energy as a measure of focus: common practice, no source.

use ndarray::ArrayView2;

/// Energy of the edge about a limb of radius `limb_arcsec`, ADU^2/arcsec; none where no pixel within
/// `reach_arcsec` of it has a value.
pub fn edge_energy(
    image: ArrayView2<'_, f64>,
    centre_px: (f64, f64),
    limb_arcsec: f64,
    reach_arcsec: f64,
    scale_arcsec_px: f64,
) -> Option<f64> {
    let (height, width) = image.dim();
    let (low, high) = (
        (limb_arcsec - reach_arcsec) / scale_arcsec_px,
        (limb_arcsec + reach_arcsec) / scale_arcsec_px,
    );
    let (mut sum, mut pixels) = (0.0, 0.0);
    for y in 1..height.saturating_sub(1) {
        let dy = y as f64 - centre_px.1;
        if dy.abs() > high {
            continue;
        }
        let half = (high * high - dy * dy).sqrt();
        let from = (centre_px.0 - half).ceil().max(1.0) as usize;
        let to = ((centre_px.0 + half).floor() as usize).min(width.saturating_sub(2));
        for x in from..=to {
            let dx = x as f64 - centre_px.0;
            if dx * dx + dy * dy < low * low {
                continue;
            }
            let across = 0.5 * (image[[y, x + 1]] - image[[y, x - 1]]);
            let up = 0.5 * (image[[y + 1, x]] - image[[y - 1, x]]);
            let square = across * across + up * up;
            if square.is_finite() {
                sum += square;
                pixels += 1.0;
            }
        }
    }
    // Over a ring of this width the mean square is the integral across it.
    (pixels > 0.0).then(|| sum / pixels * (high - low) / scale_arcsec_px)
}

#[cfg(test)]
mod tests {
    use super::edge_energy;
    use ndarray::Array2;

    /// Source: mathematics: the squared gradient of a Gaussian edge integrates to
    /// `h^2 / (2 sqrt(pi) s)`; a difference over two pixels multiplies its spectrum by
    /// `(sin k / k)^2 = 1 - k^2 / 3 + 2 k^4 / 45`, `k` along either axis, whose mean over the
    /// spectrum and the directions is `1 - 1 / (8 s^2) + 1 / (48 s^4)`.
    #[test]
    fn a_gaussian_edge_has_the_energy_of_its_width() {
        for (sigma_px, scale) in [(2.0, 1.0), (4.0, 0.7)] {
            let image = Array2::from_shape_fn((321, 321), |(y, x)| {
                let r = (x as f64 - 160.2).hypot(y as f64 - 159.7);
                1000.0 * 0.5 * libm::erfc((r - 120.0) / (sigma_px * std::f64::consts::SQRT_2))
            });
            let reach = 6.0 * sigma_px * scale;
            let found =
                edge_energy(image.view(), (160.2, 159.7), 120.0 * scale, reach, scale).unwrap();
            let sigma = sigma_px * scale;
            let exact = 1e6 / (2.0 * std::f64::consts::PI.sqrt() * sigma);
            let s2 = sigma_px * sigma_px;
            let differences = 1.0 - 1.0 / (8.0 * s2) + 1.0 / (48.0 * s2 * s2);
            let off = found / (exact * differences) - 1.0;
            assert!(off.abs() < 0.003, "{sigma_px} px: {off}");
        }
    }
}
