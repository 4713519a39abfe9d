//! Source: `tests/data/fits/EXPECT.tsv`: pixel values as astropy 8.0.2 decodes them, for files of the
//! test suites of astropy and rust-fitsio (origin and licence in `MANIFEST.tsv`) and for damaged
//! ones in `broken/`.

use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use ndarray::Array2;
use truelimb::frames::{FitsError, ImageFile};

/// Half a unit in the last place of single precision, relative.
const HALF_DIGIT_REL: f64 = 6e-8;
/// No file here is larger than 130 kB.
const TIME_LIMIT: Duration = Duration::from_secs(5);

fn folder() -> PathBuf {
    PathBuf::from(concat!(env!("CARGO_MANIFEST_DIR"), "/tests/data/fits"))
}

/// One row of the table.
struct Expected {
    file: String,
    hdu: usize,
    axes: Vec<usize>,
    not_finite: usize,
    numbers: Vec<f64>,
}

fn expected() -> Vec<Expected> {
    let text = std::fs::read_to_string(folder().join("EXPECT.tsv")).unwrap();
    let rows: Vec<Expected> = text
        .lines()
        .skip(2)
        .map(|line| {
            let cells: Vec<&str> = line.split('\t').collect();
            Expected {
                file: cells[0].to_owned(),
                hdu: cells[1].parse().unwrap(),
                axes: cells[2].split('x').map(|it| it.parse().unwrap()).collect(),
                not_finite: cells[4].parse().unwrap(),
                numbers: cells[5..].iter().map(|it| it.parse().unwrap()).collect(),
            }
        })
        .collect();
    assert_eq!(rows.len(), 24);
    rows
}

fn all_pixels(file: &mut ImageFile) -> Result<Vec<f64>, FitsError> {
    let mut plane = Array2::zeros((0, 0));
    let mut pixels = Vec::new();
    for index in 0..file.planes() {
        file.read_plane(index, &mut plane)?;
        assert_eq!(plane.dim(), (file.height(), file.width()));
        pixels.extend(plane.iter().map(|it| f64::from(*it)));
    }
    Ok(pixels)
}

#[test]
fn pixels_are_those_of_the_table() {
    for row in expected() {
        let path = folder().join(&row.file);
        let opened = ImageFile::open_hdu(&path, row.hdu);
        let axes = &row.axes;
        if axes.len() < 2 || axes.len() > 3 {
            assert!(
                matches!(opened, Err(FitsError::NoImage { .. })),
                "{}",
                row.file
            );
            continue;
        }
        let mut file = opened.unwrap();
        let shape = (file.width(), file.height(), file.planes());
        assert_eq!(
            shape,
            (axes[0], axes[1], axes.get(2).copied().unwrap_or(1)),
            "{}",
            row.file
        );
        let pixels = all_pixels(&mut file).unwrap();
        let finite: Vec<f64> = pixels.iter().copied().filter(|it| it.is_finite()).collect();
        assert_eq!(pixels.len() - finite.len(), row.not_finite, "{}", row.file);
        let largest = finite.iter().fold(0.0_f64, |all, it| all.max(it.abs()));
        let got = [
            (finite.iter().copied().fold(f64::INFINITY, f64::min), 1.0),
            (
                finite.iter().copied().fold(f64::NEG_INFINITY, f64::max),
                1.0,
            ),
            (finite.iter().sum(), finite.len() as f64),
            (pixels[0], 1.0),
            (pixels[pixels.len() - 1], 1.0),
        ];
        for ((got, terms), expected) in got.into_iter().zip(&row.numbers) {
            let same = if expected.is_finite() {
                (got - expected).abs() <= HALF_DIGIT_REL * largest * terms
            } else {
                got.is_nan()
            };
            assert!(same, "{}: {got} instead of {expected}", row.file);
        }
    }
}

#[test]
fn the_first_image_is_found_behind_an_empty_primary() {
    for (name, hdu) in [
        ("astropy__o4sp040b0_raw.fits", 1),
        ("astropy__m13_hcomp.fits", 1),
    ] {
        assert_eq!(ImageFile::open(&folder().join(name)).unwrap().hdu(), hdu);
    }
}

#[test]
fn a_blank_pixel_is_nan() {
    // astropy's own test of this file: its one pixel equals BLANK.
    let mut file = ImageFile::open(&folder().join("astropy__blank.fits")).unwrap();
    let pixels = all_pixels(&mut file).unwrap();
    assert!(pixels.len() == 1 && pixels[0].is_nan());
}

#[test]
fn what_cannot_be_read_gives_one_clear_error() {
    // File, and words of the error that tell what is wrong.
    let damaged = [
        ("broken/bscale_nan_text.fits", "BSCALE"),
        ("broken/gzip_truncated.fits.gz", "gzip"),
        ("broken/m13_hcomp_truncated_heap.fits", "incomplete"),
        ("broken/m13_rice_truncated_heap.fits", "incomplete"),
        ("broken/naxis1_huge_alloc.fits", "pixels"),
        ("broken/naxis2_missing.fits", "NAXIS2"),
        ("broken/naxis_negative.fits", "NAXIS"),
        ("broken/truncated_in_data.fits", "incomplete"),
        ("astropy__compressed_float_bzero.fits", "one axis"),
        ("astropy__dist.fits", "one axis"),
        ("astropy__table.fits", "is a table"),
        ("astropy__group.fits", "no image"),
        ("astropy__verify.fits", "BITPIX"),
        ("astropy__header_with_time_wcslib71.fits", "no END"),
        ("rustfitsio__hyper.fits", "2 x 3 x 3 x 2"),
        ("MANIFEST.tsv", "not a FITS file"),
        ("no_such_file.fits", "cannot open"),
        ("broken", "not a regular file"),
    ];
    for (name, words) in damaged {
        let path = folder().join(name);
        let result = ImageFile::open(&path).and_then(|mut it| all_pixels(&mut it));
        let text = result.unwrap_err().to_string();
        assert!(text.contains(words), "{name}: {text}");
        assert!(text.starts_with(path.to_str().unwrap()), "{name}: {text}");
        assert!(!text.contains('\n'), "{name}: {text}");
    }
}

#[test]
fn no_file_takes_long_or_panics() {
    let mut count = 0;
    for part in [folder(), folder().join("broken")] {
        for entry in std::fs::read_dir(part).unwrap() {
            let path = entry.unwrap().path();
            let start = Instant::now();
            let result = ImageFile::open(&path).and_then(|mut it| all_pixels(&mut it));
            assert!(start.elapsed() < TIME_LIMIT, "{}", path.display());
            drop(result);
            count += 1;
        }
    }
    assert!(count >= 36, "{count} files");
}

#[test]
fn keywords_are_read_as_written() {
    let file = ImageFile::open(&folder().join("broken/D_exponent_and_fixed.fits")).unwrap();
    // 5.0D-3, and a quote and a slash inside a text (FITS Standard 4.0, sections 4.2.1 and 4.2.4).
    assert_eq!(file.key_f64("EXPTIME").unwrap(), Some(0.005));
    assert_eq!(
        file.key_text("OBSERVER").unwrap().as_deref(),
        Some("O'Brien / it's")
    );
    assert_eq!(file.key_i64("NAXIS1").unwrap(), Some(32));
    assert!(matches!(
        file.key_i64("EXPTIME"),
        Err(FitsError::Keyword { .. })
    ));
    assert!(matches!(
        file.key_f64("OBSERVER"),
        Err(FitsError::Keyword { .. })
    ));
    // Without "= " in columns 9 and 10 there is no value (section 4.1.2.2).
    let file = ImageFile::open(&folder().join("broken/no_value_indicator.fits")).unwrap();
    assert_eq!(file.key_f64("EXPTIME").unwrap(), None);
    assert_eq!(file.key_text("DATE-OBS").unwrap(), None);
}

#[test]
fn lossy_compression_is_named() {
    let lossy = |name: &str| ImageFile::open(&folder().join(name)).unwrap().lossy();
    let quantised = lossy("astropy__compressed_with_nan.fits").unwrap();
    assert!(quantised.contains("SUBTRACTIVE_DITHER_1"), "{quantised}");
    assert_eq!(lossy("astropy__compressed_image.fits"), None);
    assert_eq!(lossy("astropy__m13_hcomp.fits"), None);
    assert_eq!(lossy("astropy__scale.fits"), None);
}

#[test]
fn checksums_are_verified() {
    let verify = |name: &str| {
        ImageFile::open(&folder().join(name))
            .unwrap()
            .verify_checksums()
            .unwrap()
    };
    assert_eq!(verify("astropy__checksum.fits"), (Some(true), Some(true)));
    // Its name says it: the sums of this file are wrong on purpose.
    let (data, hdu) = verify("astropy__checksum_false.fits");
    assert!(data == Some(false) || hdu == Some(false));
    assert_eq!(verify("astropy__scale.fits"), (None, None));
}

#[test]
fn planes_and_rows_outside_are_refused() {
    let path: &Path = &folder().join("rustfitsio__cube.fits");
    let mut file = ImageFile::open(path).unwrap();
    let mut plane = Array2::zeros((0, 0));
    let outside = file.read_plane(2, &mut plane);
    assert!(matches!(
        outside,
        Err(FitsError::OutOfRange {
            found: 2,
            count: 2,
            ..
        })
    ));
    let outside = file.read_rows(0, 1, 4, &mut plane);
    assert!(matches!(
        outside,
        Err(FitsError::OutOfRange {
            found: 4,
            count: 3,
            ..
        })
    ));
    file.read_rows(1, 1, 2, &mut plane).unwrap();
    // The file counts 0, 1, 2, .. in storage order: plane 1, row 1 of 6 columns and 3 rows.
    assert_eq!(
        plane.as_slice().unwrap(),
        [24.0, 25.0, 26.0, 27.0, 28.0, 29.0]
    );
}
