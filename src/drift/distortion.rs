//! Where the disk stood against an even scale, by part of its way.

use super::linear::Solved;
use super::noise::Correlation;

/// Parts into which the way is cut for the map of the distortion.
pub const DISTORTION_BINS: usize = 8;

/// Centres that a part of the way needs for the map of the distortion.
const BIN_FRAMES: usize = 4;

/// A part of the way: how far the disk was from where an even scale puts it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct DistortionBin {
    /// Distance along the way from the detector's middle, px.
    pub along_px: f64,
    /// Centres in it.
    pub frames: usize,
    /// Mean residual along the way, mas.
    pub along_mas: f64,
    /// Mean residual across it (to the left of the motion on the detector), mas.
    pub across_mas: f64,
    /// Standard uncertainty of the two, mas: the noise of that many centres, correlated as it is.
    pub sigma_mas: (f64, f64),
}

/// Means of the residuals over equal parts of the way, with the variance of means of correlated noise.
pub(super) fn distortion(
    residuals: &[(f64, f64, f64)],
    times_s: &[f64],
    solved: &Solved,
) -> Vec<DistortionBin> {
    let ends = residuals
        .iter()
        .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), it| {
            (
                if it.0 < low { it.0 } else { low },
                if it.0 > high { it.0 } else { high },
            )
        });
    let width = (ends.1 - ends.0) / DISTORTION_BINS as f64;
    if !(width > 0.0) || residuals.len() < BIN_FRAMES * DISTORTION_BINS {
        return Vec::new();
    }
    let mut members: Vec<Vec<usize>> = vec![Vec::new(); DISTORTION_BINS];
    for (k, it) in residuals.iter().enumerate() {
        let bin = ((it.0 - ends.0) / width) as usize;
        members[bin.min(DISTORTION_BINS - 1)].push(k);
    }
    let Correlation { share, tau_s } = solved.correlation;
    members
        .iter()
        .filter(|it| it.len() >= BIN_FRAMES)
        .map(|it| {
            let n = it.len() as f64;
            let mean = |f: &dyn Fn(usize) -> f64| it.iter().map(|&k| f(k)).sum::<f64>() / n;
            let mut inflation = 0.0;
            for &i in it {
                for &j in it {
                    inflation += if i == j {
                        1.0
                    } else {
                        share * (-(times_s[i] - times_s[j]).abs() / tau_s).exp()
                    };
                }
            }
            let sigma = |variance: f64| 1000.0 * (variance * inflation).sqrt() / n;
            DistortionBin {
                along_px: mean(&|k| residuals[k].0),
                frames: it.len(),
                along_mas: mean(&|k| residuals[k].1),
                across_mas: mean(&|k| residuals[k].2),
                sigma_mas: (
                    sigma(solved.noise_arcsec2[0]),
                    sigma(solved.noise_arcsec2[1]),
                ),
            }
        })
        .collect()
}
