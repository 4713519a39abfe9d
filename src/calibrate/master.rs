//! Dark and flat from their files, and which pixels are bad.

use std::path::{Path, PathBuf};

use ndarray::{Array2, Zip};

use super::average::{Average, quantile};
use super::{BadCounts, CalibrateError, Calibration, Limits};
use crate::frames::ImageFile;

/// Standard deviations per median absolute deviation, of a Gaussian.
const SIGMA_PER_MAD: f64 = 1.4826;
/// Scatter that rounding to whole ADU leaves at least, `1 / sqrt(12)`.
const ROUNDING_SIGMA_ADU: f64 = 0.288_675;
/// Side of the square of pixels that tells dead from unlit.
const BLOCK_PX: usize = 16;
/// The flat's bright part is judged by this quantile.
const BRIGHT_QUANTILE: f64 = 0.95;

/// Reads dark, flat and bad pixels for frames of `width` x `height`.
///
/// Each file may be an image or a cube; all planes of all files are averaged. Without darks the
/// dark is 0, without flats the flat is 1. In `bad_pixels`, a FITS image, bad is what is not 0.
///
/// # Errors
///
/// [`CalibrateError`] when a file cannot be read or has another size, or the flat shows no light.
pub fn load(
    dark_files: &[PathBuf],
    flat_files: &[PathBuf],
    bad_pixels: Option<&Path>,
    (width, height): (usize, usize),
    saturation_adu: Option<f64>,
    limits: &Limits,
) -> Result<Calibration, CalibrateError> {
    let dark = average("dark", dark_files, (width, Some(height)))?;
    let listed = bad_pixels
        .map(|it| read_listed(it, width, height))
        .transpose()?;
    // The sums of the dark go before those of the flat come: they are the largest things here.
    let dark = dark.map(|it| Master::of(&it));
    let flat = average("flat", flat_files, (width, Some(height)))?.map(|it| Master::of(&it));
    build(dark, flat, listed, (width, height), saturation_adu, limits)
}

/// Reads dark and flat of a line detector of `width` pixels: the rows of their images are averaged
/// to one line, whatever their number.
///
/// # Errors
///
/// As [`load`].
pub fn load_lines(
    dark_files: &[PathBuf],
    flat_files: &[PathBuf],
    width: usize,
    saturation_adu: Option<f64>,
    limits: &Limits,
) -> Result<Calibration, CalibrateError> {
    let dark = average("dark", dark_files, (width, None))?.map(|it| Master::of(&it));
    let flat = average("flat", flat_files, (width, None))?.map(|it| Master::of(&it));
    build(dark, flat, None, (width, 1), saturation_adu, limits)
}

/// A mean with its scatter.
struct Master {
    mean: Array2<f32>,
    scatter: Option<Array2<f32>>,
    planes: usize,
}

impl Master {
    fn of(it: &Average) -> Self {
        Self {
            mean: it.mean(),
            scatter: it.scatter(),
            planes: it.planes(),
        }
    }

    /// Median standard error of the mean.
    fn sigma(&self) -> Option<f64> {
        let scatter = quantile(self.scatter.as_ref()?, 0.5)?;
        Some(scatter.max(ROUNDING_SIGMA_ADU) / (self.planes as f64).sqrt())
    }
}

/// Averages all planes, or all rows where no height is given.
fn average(
    what: &'static str,
    files: &[PathBuf],
    (width, height): (usize, Option<usize>),
) -> Result<Option<Average>, CalibrateError> {
    let mut sums: Option<Average> = None;
    let mut plane = Array2::zeros((0, 0));
    for path in files {
        let wrap = |source| CalibrateError::File { what, source };
        let mut file = ImageFile::open(path).map_err(wrap)?;
        let found_height = file.height();
        if file.width() != width || height.is_some_and(|it| it != found_height) {
            return Err(CalibrateError::ImageSize {
                path: path.clone(),
                what,
                found_width: file.width(),
                found_height,
                width,
                height: height.unwrap_or(1),
            });
        }
        for index in 0..file.planes() {
            file.read_plane(index, &mut plane).map_err(wrap)?;
            let rows_at_once = height.unwrap_or(1);
            for part in plane.axis_chunks_iter(ndarray::Axis(0), rows_at_once) {
                match &mut sums {
                    Some(sums) => sums.add(&part),
                    None => sums = Some(Average::begin(&part)),
                }
            }
        }
    }
    Ok(sums)
}

fn read_listed(path: &Path, width: usize, height: usize) -> Result<Array2<bool>, CalibrateError> {
    const WHAT: &str = "bad pixels";
    let wrap = |source| CalibrateError::File { what: WHAT, source };
    let mut file = ImageFile::open(path).map_err(wrap)?;
    if (file.width(), file.height()) != (width, height) {
        return Err(CalibrateError::ImageSize {
            path: path.to_owned(),
            what: WHAT,
            found_width: file.width(),
            found_height: file.height(),
            width,
            height,
        });
    }
    let mut map = Array2::zeros((0, 0));
    file.read_plane(0, &mut map).map_err(wrap)?;
    Ok(map.mapv(|it| it != 0.0))
}

fn build(
    dark: Option<Master>,
    flat: Option<Master>,
    listed: Option<Array2<bool>>,
    (width, height): (usize, usize),
    saturation_adu: Option<f64>,
    limits: &Limits,
) -> Result<Calibration, CalibrateError> {
    let mut it = Calibration::neutral(width, height);
    if let Some(listed) = listed {
        it.counts.listed = listed.iter().filter(|it| **it).count();
        it.bad = listed;
    }
    if let Some(dark) = dark {
        mark_hot(&mut it, &dark, saturation_adu, limits);
        it.dark_sigma_adu = dark.sigma();
        it.dark = dark.mean;
    }
    if let Some(flat) = flat {
        set_flat(&mut it, &flat, saturation_adu, limits)?;
    }
    Zip::from(&mut it.flat_inverse)
        .and(&it.bad)
        .for_each(|inverse, bad| {
            if *bad {
                *inverse = f32::NAN;
            }
        });
    Ok(it)
}

fn mark(bad: &mut bool, count: &mut usize) {
    if !*bad {
        *bad = true;
        *count += 1;
    }
}

/// Hot: far above the median of the dark, and noisy or short of range. Where neither scatter nor
/// saturation is known, far above is enough.
fn mark_hot(it: &mut Calibration, dark: &Master, saturation_adu: Option<f64>, limits: &Limits) {
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
fn set_flat(
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
            quantile(light.slice(ndarray::s![y..y_end, x..x_end]), 0.5).unwrap_or(0.0)
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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::calibrate::apply;
    use crate::frames::{CubeShape, FitsWriter};
    use tempfile::TempDir;

    const SIZE: (usize, usize) = (40, 32);

    fn write(path: &Path, planes: &[Array2<u16>]) -> PathBuf {
        let (height, width) = planes[0].dim();
        let shape = CubeShape {
            width,
            height,
            planes: planes.len(),
            compressed: false,
        };
        let mut writer = FitsWriter::create(path).unwrap();
        writer.begin_u16(None, shape, &[]).unwrap();
        for plane in planes {
            writer.plane_u16(plane).unwrap();
        }
        writer.finish().unwrap();
        path.to_owned()
    }

    /// 100 ADU of bias with a ripple of 1 ADU that changes from plane to plane.
    fn dark_plane(index: usize) -> Array2<u16> {
        Array2::from_shape_fn((SIZE.1, SIZE.0), |(y, x)| {
            100 + ((x + y + index) % 3) as u16
        })
    }

    /// Falls from 1 in the middle column to 0.8 at the edges.
    fn vignette(x: usize) -> f64 {
        1.0 - 0.2 * ((x as f64 - 19.5) / 19.5).powi(2)
    }

    fn flat_plane(index: usize) -> Array2<u16> {
        let mut plane = dark_plane(index);
        for ((_, x), it) in plane.indexed_iter_mut() {
            *it += (10_000.0 * vignette(x)).round() as u16;
        }
        plane
    }

    #[test]
    fn an_even_scene_comes_out_even() {
        let folder = TempDir::new().unwrap();
        let planes = |of: fn(usize) -> Array2<u16>| (0..6).map(of).collect::<Vec<_>>();
        let dark = write(&folder.path().join("dark.fits"), &planes(dark_plane));
        let flat = write(&folder.path().join("flat.fits"), &planes(flat_plane));
        let it = load(
            &[dark],
            &[flat],
            None,
            SIZE,
            Some(60_000.0),
            &Limits::default(),
        )
        .unwrap();
        assert_eq!(it.counts().total(), 0);
        let flat = it.flat_inverse().mapv(|it| 1.0 / it);
        assert!((quantile(&flat, 0.5).unwrap() - 1.0).abs() < 1e-6);

        let raw = Array2::from_shape_fn((SIZE.1, SIZE.0), |(_, x)| {
            (101.0 + 5000.0 * vignette(x)) as f32
        });
        let mut out = Array2::zeros((0, 0));
        apply(&raw, &it, None, &mut out).unwrap();
        let first = out[[0, 0]];
        // The flat is rounded to whole ADU in 10000.
        assert!(out.iter().all(|it| (it / first - 1.0).abs() < 1.5e-4));
        assert_eq!(
            out[[3, 7]].to_bits(),
            it.pixel_adu(raw[[3, 7]], 3, 7).to_bits()
        );
    }

    #[test]
    fn each_kind_of_bad_pixel_is_found() {
        let folder = TempDir::new().unwrap();
        let darks: Vec<_> = (0..6)
            .map(|index| {
                let mut plane = dark_plane(index);
                plane[[5, 5]] += 300; // warm and quiet: the dark cures it
                plane[[5, 9]] += 300 + 40 * (index % 2) as u16; // hot and noisy
                plane[[6, 9]] += 2500; // hot, and most of the range gone
                plane
            })
            .collect();
        let flats: Vec<_> = (0..6)
            .map(|index| {
                let mut plane = flat_plane(index);
                plane[[5, 5]] += 300;
                plane[[20, 20]] = 1000; // dead among lit neighbours
                plane.slice_mut(ndarray::s![16.., ..16]).fill(150); // a corner without light
                plane
            })
            .collect();
        let dark = write(&folder.path().join("dark.fits"), &darks);
        let flat = write(&folder.path().join("flat.fits"), &flats);
        let mut map = Array2::<u8>::zeros((SIZE.1, SIZE.0));
        map[[0, 1]] = 1;
        let list = folder.path().join("bad.fits");
        let mut writer = FitsWriter::create(&list).unwrap();
        writer.image_u8(None, &map, &[]).unwrap();
        writer.finish().unwrap();

        let limits = Limits {
            hot_range_fraction: 0.5,
            ..Limits::default()
        };
        let it = load(&[dark], &[flat], Some(&list), SIZE, Some(14_000.0), &limits).unwrap();
        assert!(!it.bad()[[5, 5]] && it.bad()[[5, 9]] && it.bad()[[20, 20]] && it.bad()[[0, 1]]);
        let expected = BadCounts {
            listed: 1,
            undefined: 0,
            hot: 1,
            dead: 1,
            unlit: 16 * 16,
        };
        assert_eq!(it.counts(), expected);
        assert!(it.pixel_adu(500.0, 20, 20).is_nan());

        let dark = folder.path().join("dark.fits");
        let it = load(&[dark], &[], None, SIZE, Some(4095.0), &Limits::default()).unwrap();
        assert_eq!(
            it.counts(),
            BadCounts {
                hot: 2,
                ..BadCounts::default()
            }
        );
    }

    #[test]
    fn a_dark_flat_is_refused() {
        let folder = TempDir::new().unwrap();
        let planes: Vec<_> = (0..4).map(dark_plane).collect();
        let path = write(&folder.path().join("dark.fits"), &planes);
        let both = [path];
        let error = load(&both, &both, None, SIZE, None, &Limits::default()).unwrap_err();
        assert!(matches!(error, CalibrateError::NoLight { .. }));
    }

    #[test]
    fn another_size_is_refused_and_missing_files_are_named() {
        let folder = TempDir::new().unwrap();
        let path = write(&folder.path().join("dark.fits"), &[dark_plane(0)]);
        let error = load(&[path], &[], None, (41, 32), None, &Limits::default()).unwrap_err();
        let text = error.to_string();
        assert!(
            text.contains("40 x 32 pixels, the frames 41 x 32"),
            "{text}"
        );
        let missing = [folder.path().join("none.fits")];
        let error = load(&missing, &[], None, SIZE, None, &Limits::default()).unwrap_err();
        assert!(error.to_string().contains("none.fits"));
    }

    #[test]
    fn a_line_detector_gets_one_line() {
        let folder = TempDir::new().unwrap();
        let dark = write(&folder.path().join("dark.fits"), &[dark_plane(0)]);
        let flat = write(&folder.path().join("flat.fits"), &[flat_plane(0)]);
        let it = load_lines(&[dark], &[flat], SIZE.0, None, &Limits::default()).unwrap();
        assert!(it.is_line());
        let raw =
            Array2::from_shape_fn((7, SIZE.0), |(_, x)| (101.0 + 5000.0 * vignette(x)) as f32);
        let mut out = Array2::zeros((0, 0));
        apply(&raw, &it, None, &mut out).unwrap();
        assert!(out.iter().all(|it| (it / out[[0, 0]] - 1.0).abs() < 1.5e-4));
    }
}
