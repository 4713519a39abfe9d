//! Dark and flat from their files.

use std::path::{Path, PathBuf};

use ndarray::{Array2, ArrayView2, Axis, Zip, s};

use super::average::{Average, quantile};
use super::judge::{ROUNDING_SIGMA_ADU, mark_hot, set_flat};
use super::{CalibrateError, Calibration, Limits};
use crate::frames::ImageFile;

/// Files kept open at once.
const MAX_OPEN: usize = 64;
/// Rows averaged at once.
const BAND_ROWS: usize = 32;

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
    let dark = average("dark", dark_files, width, height)?;
    let flat = average("flat", flat_files, width, height)?;
    let listed = match bad_pixels {
        Some(path) => Some(read_listed(path, width, height)?),
        None => None,
    };
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
    let dark = average_rows("dark", dark_files, width)?;
    let flat = average_rows("flat", flat_files, width)?;
    build(dark, flat, None, (width, 1), saturation_adu, limits)
}

/// A mean with its scatter.
pub(super) struct Master {
    pub(super) mean: Array2<f32>,
    pub(super) scatter: Option<Array2<f32>>,
    pub(super) planes: usize,
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
    pub(super) fn sigma(&self) -> Option<f64> {
        let scatter = quantile(self.scatter.as_ref()?, 0.5)?;
        Some(scatter.max(ROUNDING_SIGMA_ADU) / (self.planes as f64).sqrt())
    }
}

/// Averages all planes of all files; `None` without files.
///
/// The sums of a few rows stay in the processor's cache while all planes pass, so the image is
/// done band by band, unless that would unpack tiles or open files again and again.
fn average(
    what: &'static str,
    files: &[PathBuf],
    width: usize,
    height: usize,
) -> Result<Option<Master>, CalibrateError> {
    let wrap = |source| CalibrateError::File { what, source };
    let is_few = files.len() <= MAX_OPEN;
    let mut kept = Vec::new();
    let mut band = if is_few {
        BAND_ROWS.min(height)
    } else {
        height
    };
    for path in files {
        let file = open(what, path, width, Some(height))?;
        if file.is_compressed() {
            band = height;
        }
        if is_few {
            kept.push(file);
        }
    }
    let mut master: Option<Master> = None;
    let mut rows = Array2::zeros((0, 0));
    for start in (0..height).step_by(band) {
        let end = height.min(start + band);
        let mut sums = None;
        for (index, path) in files.iter().enumerate() {
            let mut again = None;
            let file = match kept.get_mut(index) {
                Some(file) => file,
                None => again.insert(open(what, path, width, Some(height))?),
            };
            for plane in 0..file.planes() {
                file.read_rows(plane, start, end, &mut rows).map_err(wrap)?;
                include(&mut sums, &rows.view());
            }
        }
        let Some(part) = sums.map(|it| Master::of(&it)) else {
            continue;
        };
        if band == height {
            return Ok(Some(part));
        }
        let whole = master.get_or_insert_with(|| Master {
            mean: Array2::zeros((height, width)),
            scatter: part
                .scatter
                .as_ref()
                .map(|_| Array2::zeros((height, width))),
            planes: part.planes,
        });
        whole.mean.slice_mut(s![start..end, ..]).assign(&part.mean);
        if let (Some(whole), Some(part)) = (&mut whole.scatter, &part.scatter) {
            whole.slice_mut(s![start..end, ..]).assign(part);
        }
    }
    Ok(master)
}

/// Averages all rows of all planes of all files to one line; `None` without files.
fn average_rows(
    what: &'static str,
    files: &[PathBuf],
    width: usize,
) -> Result<Option<Master>, CalibrateError> {
    let wrap = |source| CalibrateError::File { what, source };
    let mut sums = None;
    let mut plane = Array2::zeros((0, 0));
    for path in files {
        let mut file = open(what, path, width, None)?;
        for index in 0..file.planes() {
            file.read_plane(index, &mut plane).map_err(wrap)?;
            for row in plane.axis_chunks_iter(Axis(0), 1) {
                include(&mut sums, &row);
            }
        }
    }
    Ok(sums.map(|it| Master::of(&it)))
}

fn include(sums: &mut Option<Average>, plane: &ArrayView2<'_, f32>) {
    match sums {
        Some(sums) => sums.add(plane),
        None => *sums = Some(Average::begin(plane)),
    }
}

/// Opens a calibration file and checks its size; any height serves a line detector.
fn open(
    what: &'static str,
    path: &Path,
    width: usize,
    height: Option<usize>,
) -> Result<ImageFile, CalibrateError> {
    let file = ImageFile::open(path).map_err(|source| CalibrateError::File { what, source })?;
    if file.width() == width && height.is_none_or(|it| it == file.height()) {
        return Ok(file);
    }
    Err(CalibrateError::ImageSize {
        path: path.to_owned(),
        what,
        found_width: file.width(),
        found_height: file.height(),
        width,
        height: height.unwrap_or(1),
    })
}

fn read_listed(path: &Path, width: usize, height: usize) -> Result<Array2<bool>, CalibrateError> {
    const WHAT: &str = "bad pixels";
    let mut file = open(WHAT, path, width, Some(height))?;
    let wrap = |source| CalibrateError::File { what: WHAT, source };
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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::calibrate::{BadCounts, apply};
    use crate::frames::{CubeShape, FitsWriter};
    use tempfile::TempDir;

    /// Three bands of rows, the last one short.
    const SIZE: (usize, usize) = (40, 72);

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
                plane.slice_mut(s![16..32, ..16]).fill(150); // a corner without light
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
        let error = load(&[path], &[], None, (41, 72), None, &Limits::default()).unwrap_err();
        let text = error.to_string();
        assert!(
            text.contains("40 x 72 pixels, the frames 41 x 72"),
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

    #[test]
    fn bands_of_rows_give_what_whole_planes_give() {
        let folder = TempDir::new().unwrap();
        let (plain, packed) = (folder.path().join("a.fits"), folder.path().join("b.fits"));
        write(&plain, &(0..5).map(flat_plane).collect::<Vec<_>>());
        // Compressed files are not read in bands.
        let shape = CubeShape {
            width: SIZE.0,
            height: SIZE.1,
            planes: 5,
            compressed: true,
        };
        let mut writer = FitsWriter::create(&packed).unwrap();
        writer.begin_u16(None, shape, &[]).unwrap();
        for index in 0..5 {
            writer.plane_u16(&flat_plane(index)).unwrap();
        }
        writer.finish().unwrap();
        let read = |path: PathBuf| load(&[], &[path], None, SIZE, None, &Limits::default());
        assert_eq!(read(plain).unwrap(), read(packed).unwrap());
    }
}
