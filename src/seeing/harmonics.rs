//! Power of the limb's radial motion by harmonic.
//!
//! # Model
//!
//! ```text
//! P_m   = 1/2 [ var(a_m) + var(b_m) ] N_eff / (N_eff - 1) / (1 - 1/N)     temporal mean removed
//! dof_m = 2 (N_eff,m - 1) / (1 + q)
//! P_0, dof_0: a_0 alone, half of the freedom
//! q     = [ var_t(Q) - 1/M ] / (1 + 1/M),   Q_t = mean over M harmonics of (a^2 + b^2) / (2 P_m)
//! ```
//!
//! The sequence's mean holds the Sun's and the instrument's shape and is removed. `q` is the
//! relative variance of the turbulence's strength from frame to frame, which widens the
//! distribution of the harmonics.
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `a_m`, `b_m` | cosine and sine coefficients of the radial displacement in one frame | mas |
//! | `N_eff` | effective frames for a variance, from the memory of groups of harmonics | - |
//!
//! # Valid for
//!
//! 6 frames or more in a sequence.
//!
//! # Accuracy
//!
//! Statistical.
//!
//! # Source
//!
//! Chi-square distribution of variances; for the memory see `effective`.

use super::effective::effective_count_of_power;
use super::error::SeeingError;
use ndarray::Array2;

/// Fewest frames of a sequence.
pub const LEAST_FRAMES: usize = 6;

/// One sequence's harmonics of the limb's radial displacement, in the detector's frame.
#[derive(Clone, Copy, Debug)]
pub struct HarmonicSeries<'a> {
    /// Mid-exposure times.
    pub time_s: &'a [f64],
    /// Cosine coefficients, `[frame][m]`, m = 0..=`m_max`.
    pub cos_mas: &'a Array2<f64>,
    /// Sine coefficients, `[frame][m]`; that of m = 0 is never looked at.
    pub sin_mas: &'a Array2<f64>,
    /// Variance of one coefficient from photon and read noise, per m.
    pub noise_variance_mas2: &'a [f64],
    /// Zenith distance.
    pub zenith_rad: f64,
    /// Width of the sectors within which the displacement was averaged.
    pub sector_rad: f64,
    /// Angular radius of the limb.
    pub limb_radius_rad: f64,
    /// Exposure.
    pub exposure_s: f64,
}

/// Power by harmonic of one sequence.
#[derive(Clone, Debug, PartialEq)]
pub struct HarmonicPower {
    /// Variance of one coefficient, noise included, per m.
    pub power_mas2: Vec<f64>,
    /// Degrees of freedom of each.
    pub degrees_of_freedom: Vec<f64>,
    /// Effective number of frames of each.
    pub n_effective: Vec<f64>,
    /// Relative variance of the turbulence's strength from frame to frame.
    pub flicker_variance: f64,
}

/// Groups of harmonics that share one estimate of their memory.
const GROUPS: [(usize, usize); 4] = [(0, 1), (2, 4), (5, 10), (11, usize::MAX)];

/// Power of each harmonic of a sequence about its temporal mean.
///
/// # Errors
///
/// [`SeeingError`] for fewer than 6 frames, harmonics that end before m = 6, or inputs of unlike
/// length.
pub fn harmonic_power(
    sequence: usize,
    series: &HarmonicSeries<'_>,
) -> Result<HarmonicPower, SeeingError> {
    let (frames, orders) = checked_shape(sequence, series)?;
    let columns = |table: &Array2<f64>| -> Vec<Vec<f64>> {
        (0..orders).map(|m| table.column(m).to_vec()).collect()
    };
    let (cosines, sines) = (columns(series.cos_mas), columns(series.sin_mas));
    let mut n_effective = vec![frames as f64; orders];
    for (first, last) in GROUPS {
        let members = first..=last.min(orders - 1);
        let pooled: Vec<&[f64]> = members
            .clone()
            .flat_map(|m| {
                let sine = (m > 0).then(|| sines[m].as_slice());
                std::iter::once(cosines[m].as_slice()).chain(sine)
            })
            .filter(|it| it.iter().any(|value| *value != 0.0))
            .collect();
        if let Some(share) = effective_count_of_power(series.time_s, &pooled) {
            for it in &mut n_effective[members] {
                *it = (share * frames as f64).max(2.0);
            }
        }
    }
    let raw: Vec<f64> = (0..orders)
        .map(|m| match m {
            0 => scatter(&cosines[0]),
            _ => 0.5 * (scatter(&cosines[m]) + scatter(&sines[m])),
        })
        .collect();
    let flicker_variance = flicker(&cosines, &sines, &raw, series.noise_variance_mas2);
    let power_mas2 = raw
        .iter()
        .zip(&n_effective)
        .map(|(p, n)| p * n / (n - 1.0))
        .collect();
    let degrees_of_freedom = n_effective
        .iter()
        .enumerate()
        .map(|(m, n)| {
            let coefficients = if m == 0 { 1.0 } else { 2.0 };
            coefficients * (n - 1.0) / (1.0 + flicker_variance)
        })
        .collect();
    Ok(HarmonicPower {
        power_mas2,
        degrees_of_freedom,
        n_effective,
        flicker_variance,
    })
}

fn checked_shape(
    sequence: usize,
    series: &HarmonicSeries<'_>,
) -> Result<(usize, usize), SeeingError> {
    let (frames, orders) = series.cos_mas.dim();
    if frames < LEAST_FRAMES {
        return Err(SeeingError::TooFewFrames {
            sequence,
            found: frames,
            least: LEAST_FRAMES,
        });
    }
    if orders < 7 {
        let wanted = "at least 6";
        return Err(SeeingError::Harmonics {
            sequence,
            found: orders.saturating_sub(1),
            wanted,
        });
    }
    for (name, found, wanted) in [
        ("times", series.time_s.len(), frames),
        (
            "frames of sine coefficients",
            series.sin_mas.nrows(),
            frames,
        ),
        ("sine coefficients", series.sin_mas.ncols(), orders),
        ("noise variances", series.noise_variance_mas2.len(), orders),
    ] {
        if found != wanted {
            return Err(SeeingError::Length {
                sequence,
                name,
                found,
                wanted,
            });
        }
    }
    Ok((frames, orders))
}

/// Mean square about the mean.
fn scatter(values: &[f64]) -> f64 {
    let count = values.len() as f64;
    let mean = values.iter().sum::<f64>() / count;
    values.iter().map(|it| (it - mean).powi(2)).sum::<f64>() / count
}

/// Relative variance of the strength from frame to frame, from the harmonics m >= 5 that stand
/// clear of the noise; never negative.
fn flicker(cosines: &[Vec<f64>], sines: &[Vec<f64>], raw: &[f64], noise: &[f64]) -> f64 {
    let used: Vec<usize> = (5..raw.len())
        .filter(|&m| raw[m] > 4.0 * noise[m])
        .collect();
    if used.len() < 4 {
        return 0.0;
    }
    let frames = cosines[0].len();
    let mean_of = |values: &[f64]| values.iter().sum::<f64>() / frames as f64;
    let means: Vec<(f64, f64)> = used
        .iter()
        .map(|&m| (mean_of(&cosines[m]), mean_of(&sines[m])))
        .collect();
    let index: Vec<f64> = (0..frames)
        .map(|frame| {
            used.iter()
                .zip(&means)
                .map(|(&m, mean)| {
                    let (a, b) = (cosines[m][frame] - mean.0, sines[m][frame] - mean.1);
                    (a * a + b * b) / (2.0 * raw[m])
                })
                .sum::<f64>()
                / used.len() as f64
        })
        .collect();
    let per_harmonic = 1.0 / used.len() as f64;
    ((scatter(&index) - per_harmonic) / (1.0 + per_harmonic)).max(0.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_mean_radius_has_one_coefficient() {
        // Whatever stands where a sine of m = 0 would be: nothing, as from a projection on harmonics,
        // or anything else.
        let frames = 40;
        let time_s: Vec<f64> = (0..frames).map(|k| k as f64).collect();
        let cos_mas = Array2::from_shape_fn((frames, 8), |(k, m)| {
            if (k * (m + 3) + k / 7) % 2 == 0 {
                10.0
            } else {
                -10.0
            }
        });
        let power = |first: f64| {
            let mut sin_mas = cos_mas.clone();
            sin_mas.column_mut(0).fill(first);
            let series = HarmonicSeries {
                time_s: &time_s,
                cos_mas: &cos_mas,
                sin_mas: &sin_mas,
                noise_variance_mas2: &[0.0; 8],
                zenith_rad: 0.0,
                sector_rad: 0.05,
                limb_radius_rad: 4.65e-3,
                exposure_s: 0.0,
            };
            harmonic_power(0, &series).unwrap()
        };
        let (none, other) = (power(0.0), power(3.0));
        assert_eq!(none.power_mas2, other.power_mas2);
        let n = none.n_effective[0];
        let wanted = scatter(&cos_mas.column(0).to_vec()) * n / (n - 1.0);
        assert!((none.power_mas2[0] / wanted - 1.0).abs() < 1e-12);
        let per_coefficient = none.degrees_of_freedom[0] / (n - 1.0);
        let of_two = none.degrees_of_freedom[2] / (none.n_effective[2] - 1.0);
        assert!((of_two / per_coefficient - 2.0).abs() < 1e-12);
    }
}
