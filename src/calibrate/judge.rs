//! Which pixels dark and flat condemn, and the scale of the flat.

use ndarray::{Array2, Zip, s};

use super::average::quantile;
use super::master::Master;
use super::{BadCounts, CalibrateError, Calibration, Limits};

/// Standard deviations per median absolute deviation, of a Gaussian.
const SIGMA_PER_MAD: f64 = 1.4826;
/// Scatter that rounding to whole ADU leaves at least, `1 / sqrt(12)`.
pub(super) const ROUNDING_SIGMA_ADU: f64 = 0.288_675;
/// Side of the square of pixels that tells dead from unlit.
const BLOCK_PX: usize = 16;
/// The flat's bright part is judged by this quantile.
const BRIGHT_QUANTILE: f64 = 0.95;

fn mark(bad: &mut bool, count: &mut usize) {
    if !*bad {
        *bad = true;
        *count += 1;
    }
}

/// Hot: far above the median of the dark, and noisy or short of range. Where neither scatter nor
/// saturation is known, far above is enough.
pub(super) fn mark_hot(
    it: &mut Calibration,
    dark: &Master,
    saturation_adu: Option<f64>,
    limits: &Limits,
) {
    let BadCounts { undefined, hot, .. } = &mut it.counts;
    let Some(median) = quantile(&dark.mean, 0.5) else {
        it.bad.iter_mut().for_each(|bad| mark(bad, undefined));
        return;
    };
    let deviations = dark.mean.mapv(|it| (f64::from(it) - median).abs() as f32);
    let mad = quantile(&deviations, 0.5).unwrap_or(0.0);
    let far = limits.hot_sigma * (SIGMA_PER_MAD * mad).max(ROUNDING_SIGMA_ADU);
    let range = saturation_adu.map(|it| limits.hot_range_fraction * (it - median));
    // The scatter of two values says little.
    let scatter = dark.scatter.as_ref().filter(|_| dark.planes > 2);
    let usual = scatter
        .and_then(|it| quantile(it, 0.5))
        .unwrap_or(0.0)
        .max(ROUNDING_SIGMA_ADU);
    for ((at, bad), value) in it.bad.indexed_iter_mut().zip(&dark.mean) {
        let above = f64::from(*value) - median;
        if !above.is_finite() {
            mark(bad, undefined);
        } else if above > far {
            let is_noisy = scatter.map(|it| f64::from(it[at]) > limits.hot_scatter_ratio * usual);
            let is_short = range.map(|it| above > it);
            let is_unknown = is_noisy.is_none() && is_short.is_none();
            if is_unknown || is_noisy == Some(true) || is_short == Some(true) {
                mark(bad, hot);
            }
        }
    }
}

/// Scales the flat to median 1 over its lit part and marks the pixels it condemns.
pub(super) fn set_flat(
    it: &mut Calibration,
    flat: &Master,
    saturation_adu: Option<f64>,
    limits: &Limits,
) -> Result<(), CalibrateError> {
    let limit = saturation_adu.map_or(f32::INFINITY, |it| it as f32);
    let light = Zip::from(&flat.mean)
        .and(&it.dark)
        .map_collect(|flat, dark| {
            if *flat >= limit {
                f32::NAN
            } else {
                flat - dark
            }
        });
    let bright = quantile(&light, BRIGHT_QUANTILE).unwrap_or(0.0);
    let lit_from = (limits.dead_fraction * bright) as f32;
    let level = quantile(light.iter().filter(|it| **it > lit_from), 0.5).unwrap_or(bright);
    if level.is_nan() || level <= ROUNDING_SIGMA_ADU {
        return Err(CalibrateError::NoLight { level_adu: level });
    }
    let dead_below = limits.dead_fraction * level;
    let (height, width) = light.dim();
    let blocks = Array2::from_shape_fn(
        (height.div_ceil(BLOCK_PX), width.div_ceil(BLOCK_PX)),
        |(row, column)| {
            let (y, x) = (row * BLOCK_PX, column * BLOCK_PX);
            let (y_end, x_end) = (height.min(y + BLOCK_PX), width.min(x + BLOCK_PX));
            quantile(light.slice(s![y..y_end, x..x_end]), 0.5).unwrap_or(0.0)
        },
    );
    let BadCounts {
        undefined,
        dead,
        unlit,
        ..
    } = &mut it.counts;
    for (((y, x), bad), value) in it.bad.indexed_iter_mut().zip(&light) {
        let value = f64::from(*value);
        if !value.is_finite() {
            mark(bad, undefined);
        } else if value < dead_below {
            let is_lit = blocks[[y / BLOCK_PX, x / BLOCK_PX]] >= dead_below;
            mark(bad, if is_lit { &mut *dead } else { &mut *unlit });
        }
    }
    it.flat_sigma_rel = flat.sigma().map(|it| it / level);
    it.flat_inverse = light.mapv(|it| (level / f64::from(it)) as f32);
    Ok(())
}
