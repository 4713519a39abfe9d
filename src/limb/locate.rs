//! Where the disk is: a circle through the crossings of its edge along rows and columns.
//!
//! Rows and columns on a coarse comb are walked from both ends to the level at which the sky becomes
//! the disk; crossings that touch the field's border do not count; the circle is fitted robustly, so
//! that spots, particle hits and a clipped side do not move it. Good to a few tenths of a pixel,
//! which is where [`super::extract`] starts.

use super::LimbError;
use ndarray::ArrayView2;

/// A disk on the detector.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Disk {
    /// Centre, 0-based pixel centres.
    pub x_px: f64,
    /// Centre, 0-based pixel centres.
    pub y_px: f64,
    /// Radius.
    pub radius_px: f64,
    /// Level of the disk's centre, roughly.
    pub level_adu: f64,
    /// Level of the sky.
    pub sky_adu: f64,
}

/// Share of the way from sky to disk at which the edge is crossed: about the limb's own brightness
/// at the inflection point.
const EDGE_SHARE: f64 = 0.2;

/// Rows and columns walked.
const COMB: usize = 64;

/// Pixels in a row that must stand above the level, so that a particle hit is no edge.
const RUN: usize = 3;

/// Finds the disk.
///
/// # Errors
///
/// [`LimbError::NoDisk`] where bright and dark do not differ by ten times the scatter expected of
/// them, [`LimbError::TooFewCrossings`] where no circle can be fitted.
pub fn find(image: ArrayView2<'_, f32>) -> Result<Disk, LimbError> {
    let (height, width) = image.dim();
    let (sky, level) = levels(image)?;
    let threshold = sky + EDGE_SHARE * (level - sky);
    let mut points = Vec::new();
    for k in 0..COMB.min(height) {
        let y = (2 * k + 1) * height / (2 * COMB.min(height));
        let line = image.row(y);
        if let Some(x) = first_above(width, |i| f64::from(line[i]), threshold) {
            points.push((x, y as f64));
        }
        if let Some(x) = first_above(width, |i| f64::from(line[width - 1 - i]), threshold) {
            points.push(((width - 1) as f64 - x, y as f64));
        }
    }
    for k in 0..COMB.min(width) {
        let x = (2 * k + 1) * width / (2 * COMB.min(width));
        let line = image.column(x);
        if let Some(y) = first_above(height, |i| f64::from(line[i]), threshold) {
            points.push((x as f64, y));
        }
        if let Some(y) = first_above(height, |i| f64::from(line[height - 1 - i]), threshold) {
            points.push((x as f64, (height - 1) as f64 - y));
        }
    }
    let (x_px, y_px, radius_px) = circle(&points, width.max(height) as f64)?;
    Ok(Disk {
        x_px,
        y_px,
        radius_px,
        level_adu: level,
        sky_adu: sky,
    })
}

/// Sky and disk-centre levels from percentiles of a coarse sample.
pub(crate) fn levels(image: ArrayView2<'_, f32>) -> Result<(f64, f64), LimbError> {
    let (height, width) = image.dim();
    let step = ((height * width) as f64 / 20_000.0).sqrt().ceil().max(1.0) as usize;
    let mut sample: Vec<f64> = image
        .slice(ndarray::s![..;step, ..;step])
        .iter()
        .map(|&it| f64::from(it))
        .collect();
    // What is blanked beyond the limb counts as the darkest that is left.
    let darkest = sample
        .iter()
        .copied()
        .filter(|it| it.is_finite())
        .fold(f64::INFINITY, |a, b| if b < a { b } else { a });
    for it in sample.iter_mut().filter(|it| !it.is_finite()) {
        *it = darkest;
    }
    sample.sort_by(f64::total_cmp);
    let at = |share: f64| {
        sample
            .get((share * (sample.len() as f64 - 1.0)) as usize)
            .copied()
    };
    let (Some(dark), Some(bright)) = (at(0.03), at(0.97)) else {
        return Err(LimbError::NoDisk {
            bright_adu: f64::NAN,
            dark_adu: f64::NAN,
            needed_adu: 0.0,
        });
    };
    // Two populations: their split is where the variance between them is largest, and each must be
    // much narrower than their distance.
    let (sky, disk, spread) = split(&sample);
    let needed = (8.0 * spread).max(1e-9 * bright.abs().max(dark.abs()));
    if sample.len() < 64 || !(disk - sky > needed) {
        return Err(LimbError::NoDisk {
            bright_adu: bright,
            dark_adu: dark,
            needed_adu: needed,
        });
    }
    Ok((sky, bright))
}

/// Medians of the two populations of a sorted sample that differ most, and the scatter of the darker.
fn split(sorted: &[f64]) -> (f64, f64, f64) {
    let n = sorted.len();
    let total: f64 = sorted.iter().sum();
    let mut best = (f64::NEG_INFINITY, n / 2);
    let mut below = 0.0;
    for k in 1..n {
        below += sorted[k - 1];
        let (a, b) = (k as f64, (n - k) as f64);
        let between = a * b * (below / a - (total - below) / b).powi(2);
        if between > best.0 {
            best = (between, k);
        }
    }
    let k = best.1.clamp(1, n - 1);
    let (dark, bright) = (&sorted[..k], &sorted[k..]);
    let median = dark[dark.len() / 2];
    let quarter = dark[dark.len() / 4];
    (
        median,
        bright[bright.len() / 2],
        (median - quarter) / 0.6745,
    )
}

/// Position, from the line's start, where it first rises through the level and stays, interpolated
/// between pixels. A line that starts above the level, or meets pixels without a value there, has
/// no crossing.
fn first_above(length: usize, value: impl Fn(usize) -> f64, level: f64) -> Option<f64> {
    let mut i = 0;
    while i < length && !value(i).is_finite() {
        i += 1;
    }
    if i >= length || value(i) >= level {
        return None;
    }
    let mut k = i + 1;
    while k + RUN <= length {
        if (k..k + RUN).all(|j| value(j) >= level) {
            let (a, b) = (value(k - 1), value(k));
            let share = if a.is_finite() && b > a {
                (level - a) / (b - a)
            } else {
                0.5
            };
            return Some((k - 1) as f64 + share.clamp(0.0, 1.0));
        }
        k += 1;
    }
    None
}

/// Robust circle through points: algebraic fit, repeated with the far points left out.
fn circle(points: &[(f64, f64)], size_px: f64) -> Result<(f64, f64, f64), LimbError> {
    const NEEDED: usize = 24;
    let mut kept: Vec<(f64, f64)> = points.to_vec();
    let mut found = consensus(points, size_px);
    for round in 0..12 {
        if let Some((x, y, r)) = found {
            let limit = if round < 2 {
                0.02 * r + 2.0
            } else {
                0.003 * r + 1.0
            };
            kept = points
                .iter()
                .copied()
                .filter(|p| ((p.0 - x).hypot(p.1 - y) - r).abs() < limit)
                .collect();
        }
        if kept.len() < NEEDED {
            return Err(LimbError::TooFewCrossings {
                found: kept.len(),
                needed: NEEDED,
            });
        }
        found = algebraic(&kept);
    }
    // A chord's worth of points fits any circle: they must surround the centre.
    match found {
        Some((x, y, r)) if r > 8.0 && r < 4.0 * size_px && surrounded(&kept, x, y) => Ok((x, y, r)),
        _ => Err(LimbError::TooFewCrossings {
            found: kept.len(),
            needed: NEEDED,
        }),
    }
}

/// The circle through three of the points that most of the others lie on.
fn consensus(points: &[(f64, f64)], size_px: f64) -> Option<(f64, f64, f64)> {
    let n = points.len();
    if n < 12 {
        return None;
    }
    let mut best: Option<(usize, (f64, f64, f64))> = None;
    // A fixed sequence of well-spread triples: the same answer every time.
    let mut state = 0x2545_f491_u64;
    let mut pick = || {
        state = state
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        (state >> 33) as usize % n
    };
    for _ in 0..200 {
        let triple = [points[pick()], points[pick()], points[pick()]];
        let Some(it) = algebraic(&triple) else {
            continue;
        };
        if !(it.2 > 8.0 && it.2 < size_px) {
            continue;
        }
        let near = points
            .iter()
            .filter(|p| ((p.0 - it.0).hypot(p.1 - it.1) - it.2).abs() < 0.01 * it.2 + 1.0)
            .count();
        if best.is_none_or(|b| near > b.0) {
            best = Some((near, it));
        }
    }
    best.map(|it| it.1)
}

/// Whether at least five of eight directions from the centre hold a point.
fn surrounded(points: &[(f64, f64)], x: f64, y: f64) -> bool {
    let mut seen = [false; 8];
    for p in points {
        let turn = (p.1 - y).atan2(p.0 - x) / std::f64::consts::TAU + 0.5;
        seen[((turn * 8.0) as usize).min(7)] = true;
    }
    seen.iter().filter(|it| **it).count() >= 5
}

/// Least-squares circle `x^2 + y^2 = 2 a x + 2 b y + c`.
fn algebraic(points: &[(f64, f64)]) -> Option<(f64, f64, f64)> {
    let n = points.len() as f64;
    let (mx, my) = points
        .iter()
        .fold((0.0, 0.0), |s, p| (s.0 + p.0 / n, s.1 + p.1 / n));
    let (mut uu, mut uv, mut vv, mut ru, mut rv) = (0.0, 0.0, 0.0, 0.0, 0.0);
    let mut rr = 0.0;
    for p in points {
        let (u, v) = (p.0 - mx, p.1 - my);
        let q = u * u + v * v;
        uu += u * u;
        uv += u * v;
        vv += v * v;
        ru += q * u;
        rv += q * v;
        rr += q / n;
    }
    let det = uu * vv - uv * uv;
    if !(det > 1e-9 * (uu + vv).powi(2)) {
        return None;
    }
    let a = 0.5 * (ru * vv - rv * uv) / det;
    let b = 0.5 * (rv * uu - ru * uv) / det;
    let r = (a * a + b * b + rr).sqrt();
    Some((mx + a, my + b, r))
}

#[cfg(test)]
mod tests {
    use super::*;
    use ndarray::Array2;

    fn disk(n: usize, x: f64, y: f64, r: f64) -> Array2<f32> {
        Array2::from_shape_fn((n, n), |(j, i)| {
            let d = (i as f64 - x).hypot(j as f64 - y);
            let edge = (r - d + 0.5).clamp(0.0, 1.0);
            (100.0 + 1000.0 * edge * (0.4 + 0.6 * (1.0 - (d / r).powi(2)).max(0.0).sqrt())) as f32
        })
    }

    #[test]
    fn an_off_centre_disk_is_found() {
        let it = find(disk(256, 150.3, 110.7, 80.0).view()).expect("a disk");
        assert!(
            (it.x_px - 150.3).abs() < 0.2 && (it.y_px - 110.7).abs() < 0.2,
            "{it:?}"
        );
        assert!((it.radius_px - 80.0).abs() < 1.0, "{it:?}");
    }

    #[test]
    fn a_disk_cut_by_the_field_is_found_by_its_rest() {
        let it = find(disk(256, 60.0, 128.0, 80.0).view()).expect("a disk");
        assert!(
            (it.x_px - 60.0).abs() < 0.4 && (it.radius_px - 80.0).abs() < 1.0,
            "{it:?}"
        );
    }

    #[test]
    fn a_hit_and_a_spot_do_not_move_it() {
        let mut image = disk(256, 128.0, 128.0, 90.0);
        image[[20, 20]] = 60_000.0;
        image.slice_mut(ndarray::s![60..90, 60..90]).fill(150.0);
        let it = find(image.view()).expect("a disk");
        assert!(
            (it.x_px - 128.0).abs() < 0.3 && (it.y_px - 128.0).abs() < 0.3,
            "{it:?}"
        );
    }

    #[test]
    fn an_empty_or_noisy_frame_is_no_disk() {
        assert!(matches!(
            find(Array2::from_elem((64, 64), 100.0).view()),
            Err(LimbError::NoDisk { .. })
        ));
        let mut state = 1_u32;
        let noise = Array2::from_shape_simple_fn((128, 128), || {
            state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
            (state >> 8) as f32 / 65536.0
        });
        assert!(find(noise.view()).is_err());
    }
}
