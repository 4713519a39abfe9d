//! Files written and read back, in temporary folders.

use std::path::{Path, PathBuf};

use ndarray::{Array2, Array3, array};
use tempfile::TempDir;

use super::*;

const SMALL: CubeShape = CubeShape {
    width: 4,
    height: 3,
    planes: 2,
    compressed: false,
};

fn ramp(plane: u16) -> Array2<u16> {
    Array2::from_shape_fn((3, 4), |(y, x)| plane * 20_000 + (y * 4 + x) as u16)
}

fn write_cube(path: &Path, shape: CubeShape, cards: &[Card]) {
    let mut writer = FitsWriter::create(path).unwrap();
    writer.begin_u16(None, shape, cards).unwrap();
    for plane in 0..shape.planes {
        writer.plane_u16(&ramp(plane as u16)).unwrap();
    }
    writer.finish().unwrap();
}

fn time_axis(ctype: &str) -> Vec<Card> {
    vec![
        Card::text("DATE-OBS", "2026-06-21T08:00:00.000", "UTC"),
        Card::text("CTYPE3", ctype, ""),
        Card::text("CUNIT3", "s", ""),
        Card::real("CRPIX3", 1.0, ""),
        Card::real("CRVAL3", 0.25, ""),
        Card::real("CDELT3", 0.5, ""),
        Card::real("EXPTIME", 0.005, "s"),
    ]
}

#[test]
fn unsigned_cubes_come_back_plain_and_compressed() {
    let folder = TempDir::new().unwrap();
    for compressed in [false, true] {
        let path = folder.path().join("cube.fits");
        write_cube(
            &path,
            CubeShape {
                compressed,
                ..SMALL
            },
            &[],
        );
        let mut file = ImageFile::open(&path).unwrap();
        assert_eq!((file.width(), file.height(), file.planes()), (4, 3, 2));
        assert_eq!(
            (file.bitpix(), file.is_u16(), file.is_compressed()),
            (16, true, compressed)
        );
        assert_eq!(file.lossy(), None);
        assert_eq!(file.verify_checksums().unwrap(), (Some(true), Some(true)));
        let (mut whole, mut real) = (Array2::zeros((0, 0)), Array2::zeros((0, 0)));
        for plane in 0..2 {
            file.read_plane_u16(plane, &mut whole).unwrap();
            file.read_plane(plane, &mut real).unwrap();
            assert_eq!(whole, ramp(plane as u16));
            assert_eq!(real, ramp(plane as u16).mapv(f32::from));
        }
    }
}

#[test]
fn floats_come_back_to_the_last_bit_and_nan_stays() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("stack.fits");
    let pixels = array![[0.1_f32, f32::NAN, -3.0e30], [1.0e-30, 65_536.5, 0.0]];
    let cube = Array3::from_shape_fn((2, 2, 3), |(z, y, x)| (z * 6 + y * 3 + x) as f64 + 0.5);
    let mut writer = FitsWriter::create(&path).unwrap();
    writer.image_f32(None, &pixels, &[]).unwrap();
    // Reversed axes: the order in memory must not matter.
    writer
        .image_f64(Some("VARIANCE"), &cube.t().to_owned().reversed_axes(), &[])
        .unwrap();
    writer.finish().unwrap();

    let mut plane = Array2::zeros((0, 0));
    let mut file = ImageFile::open(&path).unwrap();
    file.read_plane(0, &mut plane).unwrap();
    let same = |a: &f32, b: &f32| a.to_bits() == b.to_bits() || (a.is_nan() && b.is_nan());
    assert!(plane.iter().zip(&pixels).all(|(a, b)| same(a, b)));
    let mut file = ImageFile::open_hdu(&path, 1).unwrap();
    assert_eq!(
        file.key_text("EXTNAME").unwrap().as_deref(),
        Some("VARIANCE")
    );
    file.read_plane(1, &mut plane).unwrap();
    assert_eq!(plane, array![[6.5, 7.5, 8.5], [9.5, 10.5, 11.5]]);
}

#[test]
fn keywords_come_back_whole() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("keys.fits");
    let long = "Corrie Head: it's 30.94 N & 57.38 E; "
        .repeat(8)
        .trim_end()
        .to_owned();
    let cards = [
        Card::text("SITE", long.clone(), "where"),
        Card::real("PI", std::f64::consts::PI, "all digits"),
        Card::real("GONE", f64::NAN, "left out"),
        Card::integer("BIG", i64::MAX, ""),
        Card::real("HALF", 12.75, ""),
        Card::logical("YES", true, ""),
        Card::text("HISTORY", "x".repeat(200), ""),
    ];
    write_cube(&path, SMALL, &cards);
    let file = ImageFile::open(&path).unwrap();
    assert_eq!(file.key_text("SITE").unwrap(), Some(long));
    assert_eq!(file.key_f64("PI").unwrap(), Some(std::f64::consts::PI));
    assert_eq!(file.key_f64("GONE").unwrap(), None);
    assert_eq!(file.key_i64("BIG").unwrap(), Some(i64::MAX));
    assert!(matches!(
        file.key_i64("HALF"),
        Err(FitsError::Keyword { .. })
    ));
    assert_eq!(file.key_text("YES").unwrap().as_deref(), Some("T"));
    assert!(file.key_text("SI*").is_err());
}

#[test]
fn the_same_content_gives_the_same_bytes() {
    let folder = TempDir::new().unwrap();
    let paths = [folder.path().join("a.fits"), folder.path().join("b.fits")];
    for path in &paths {
        write_cube(
            path,
            CubeShape {
                compressed: true,
                ..SMALL
            },
            &time_axis("UTC"),
        );
    }
    assert_eq!(sha256(&paths[0]).unwrap(), sha256(&paths[1]).unwrap());
    let bytes = std::fs::read(&paths[0]).unwrap();
    // The library's own comment would end in the time of day.
    assert!(!bytes.windows(7).any(|it| it == b"updated"));
}

#[test]
fn names_are_taken_literally() {
    let folder = TempDir::new().unwrap();
    let odd = [
        "a[1].fits",
        "!b.fits",
        " c.fits ",
        "-d.fits",
        "e+1",
        "f(x).fits",
        "~g.fits",
        "\u{e9}t\u{e9}.fits",
    ];
    for name in odd {
        let path = folder.path().join(name);
        write_cube(&path, SMALL, &[]);
        assert_eq!(ImageFile::open(&path).unwrap().planes(), 2, "{name}");
    }
    assert_eq!(std::fs::read_dir(folder.path()).unwrap().count(), odd.len());
}

#[test]
fn an_unfinished_file_leaves_what_was_there() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("stack.fits");
    write_cube(&path, SMALL, &[]);
    let before = sha256(&path).unwrap();

    let mut writer = FitsWriter::create(&path).unwrap();
    writer.begin_u16(None, SMALL, &[]).unwrap();
    writer.plane_u16(&ramp(0)).unwrap();
    assert!(matches!(writer.finish(), Err(FitsError::Unwritable { .. })));

    let mut writer = FitsWriter::create(&path).unwrap();
    writer.begin_u16(None, SMALL, &[]).unwrap();
    drop(writer);
    assert_eq!(sha256(&path).unwrap(), before);
    assert_eq!(std::fs::read_dir(folder.path()).unwrap().count(), 1);
    let nowhere = FitsWriter::create(&folder.path().join("no/such/folder.fits"));
    assert!(nowhere.unwrap_err().to_string().contains("cannot create"));
}

#[test]
fn cards_that_break_the_standard_are_refused() {
    let folder = TempDir::new().unwrap();
    let mut writer = FitsWriter::create(&folder.path().join("x.fits")).unwrap();
    let twice = [Card::integer("N", 1, ""), Card::integer("N", 2, "")];
    assert!(writer.begin_u16(None, SMALL, &twice).is_err());
    let mut writer = FitsWriter::create(&folder.path().join("x.fits")).unwrap();
    assert!(
        writer
            .begin_u16(None, SMALL, &[Card::integer("BZERO", 1, "")])
            .is_err()
    );
}

#[test]
fn times_of_a_single_image() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("one.fits");
    let one = CubeShape { planes: 1, ..SMALL };
    let map = HeaderMap::default();
    let cards = [
        Card::text("DATE-OBS", "2026-06-21T08:00:00.5", ""),
        Card::real("EXPTIME", 0.004, "s"),
    ];
    write_cube(&path, one, &cards);
    let times = frame_times(&mut ImageFile::open(&path).unwrap(), &map).unwrap();
    assert_eq!(times.len(), 1);
    assert_eq!(times[0].reference_utc, "2026-06-21T08:00:00.5");
    assert_eq!((times[0].offset_s, times[0].exposure_s), (0.0, Some(0.004)));

    // A station that names its keyword otherwise.
    write_cube(
        &path,
        one,
        &[Card::text("UTSTART", "2026-06-21T08:00:01", "")],
    );
    let mut file = ImageFile::open(&path).unwrap();
    assert!(matches!(
        frame_times(&mut file, &map),
        Err(FitsError::NoTime { .. })
    ));
    let own = HeaderMap {
        date: vec!["UTSTART".to_owned()],
        ..HeaderMap::default()
    };
    assert_eq!(
        frame_times(&mut file, &own).unwrap()[0].reference_key,
        "UTSTART"
    );

    for (name, value) in [("DATE-OBS", "21/06/2026"), ("TIMESYS", "TT")] {
        write_cube(&path, one, &[Card::text(name, value, "")]);
        let error = frame_times(&mut ImageFile::open(&path).unwrap(), &map).unwrap_err();
        assert!(error.to_string().contains(name), "{error}");
    }
}

#[test]
fn times_of_a_cube_with_a_time_axis() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("cube.fits");
    write_cube(&path, SMALL, &time_axis("UTC"));
    let map = HeaderMap::default();
    let times = frame_times(&mut ImageFile::open(&path).unwrap(), &map).unwrap();
    // FITS Standard 4.0, eq. 9: CRVAL3 + CDELT3 (p - CRPIX3), p = 1, 2.
    let offsets: Vec<f64> = times.iter().map(|it| it.offset_s).collect();
    assert_eq!(offsets, [0.25, 0.75]);
    assert_eq!(times[1].reference_utc, "2026-06-21T08:00:00.000");
    assert_eq!(times[1].exposure_s, Some(0.005));

    write_cube(&path, SMALL, &time_axis("WAVE"));
    let error = frame_times(&mut ImageFile::open(&path).unwrap(), &map).unwrap_err();
    assert!(error.to_string().contains("2 planes"), "{error}");
}

#[test]
fn times_of_a_cube_with_a_table() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("cube.fits");
    let write = |time_s: Vec<f64>, unit: &str| {
        let mut writer = FitsWriter::create(&path).unwrap();
        let cards = [
            Card::text("DATEREF", "2026-06-21T08:00:00", ""),
            Card::real("XPOSURE", 0.5, "s"),
        ];
        writer.begin_u16(None, SMALL, &cards).unwrap();
        writer.plane_u16(&ramp(0)).unwrap();
        writer.plane_u16(&ramp(1)).unwrap();
        let columns = [
            Column::new("N", Values::I32(vec![7; time_s.len()])),
            Column::new("TIME", Values::F64(time_s)).unit(unit),
        ];
        writer.table("FRAMES", &columns, &[]).unwrap();
        writer.finish().unwrap();
        ImageFile::open(&path).unwrap()
    };
    let map = HeaderMap::default();
    let mut file = write(vec![0.1, 0.9], "s");
    assert_eq!(file.time_column().unwrap(), Some(vec![0.1, 0.9]));
    let times = frame_times(&mut file, &map).unwrap();
    assert_eq!((times[1].offset_s, times[1].exposure_s), (0.9, Some(0.5)));
    // The image is still the one that is read.
    let mut plane = Array2::zeros((0, 0));
    file.read_plane_u16(1, &mut plane).unwrap();
    assert_eq!(plane, ramp(1));

    assert_eq!(
        write(vec![100.0, 900.0], "ms").time_column().unwrap(),
        Some(vec![0.1, 0.9])
    );
    assert!(frame_times(&mut write(vec![0.1], "s"), &map).is_err());
    assert!(frame_times(&mut write(vec![0.1, f64::NAN], "s"), &map).is_err());
    assert!(frame_times(&mut write(vec![0.1, 0.2], "adu"), &map).is_err());
}

#[test]
fn a_cut_cube_gives_the_planes_it_has() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("cube.fits");
    let shape = CubeShape {
        width: 100,
        height: 50,
        planes: 3,
        compressed: false,
    };
    let pixels = Array2::from_shape_fn((50, 100), |(y, x)| (y * 100 + x) as u16);
    let mut writer = FitsWriter::create(&path).unwrap();
    writer.begin_u16(None, shape, &[]).unwrap();
    for _ in 0..3 {
        writer.plane_u16(&pixels).unwrap();
    }
    writer.finish().unwrap();
    let bytes = std::fs::read(&path).unwrap();
    // A header of one block, then planes of 10000 bytes.
    std::fs::write(&path, &bytes[..2880 + 10_000 + 5001]).unwrap();
    let mut file = ImageFile::open(&path).unwrap();
    assert_eq!((file.planes(), file.planes_present()), (3, 1));
    let mut plane = Array2::zeros((0, 0));
    file.read_plane(0, &mut plane).unwrap();
    assert_eq!(plane, pixels.mapv(f32::from));
    let error = file.read_plane(1, &mut plane).unwrap_err();
    assert!(error.to_string().contains("incomplete"), "{error}");
}

#[test]
fn a_sequence_lists_frames_and_sets_bad_files_aside() {
    let folder = TempDir::new().unwrap();
    let file = |name: &str| folder.path().join(name);
    write_cube(&file("a.fits"), SMALL, &[]);
    std::fs::write(file("b.fits"), "SIMPLE  = T, but nothing more").unwrap();
    write_cube(&file("c.fits"), CubeShape { planes: 1, ..SMALL }, &[]);
    let paths: Vec<PathBuf> = ["a.fits", "b.fits", "c.fits"].map(file).to_vec();
    let sequence = list(&paths).unwrap();
    assert_eq!((sequence.width, sequence.height), (4, 3));
    let frames: Vec<(usize, usize)> = sequence
        .frames
        .iter()
        .map(|it| (it.file, it.plane))
        .collect();
    assert_eq!(frames, [(0, 0), (0, 1), (2, 0)]);
    assert_eq!(sequence.unreadable.len(), 1);
    assert_eq!(sequence.unreadable[0].0, 1);
    let (mut reader, mut plane) = (Reader::new(), Array2::zeros((0, 0)));
    for frame in &sequence.frames {
        reader.read(&sequence, *frame, &mut plane).unwrap();
        assert_eq!(plane, ramp(frame.plane as u16).mapv(f32::from));
    }

    let mut writer = FitsWriter::create(&file("d.fits")).unwrap();
    writer.image_f32(None, &Array2::zeros((5, 5)), &[]).unwrap();
    writer.finish().unwrap();
    let both = [file("a.fits"), file("d.fits")];
    assert!(matches!(
        list(&both),
        Err(FitsError::SizeMismatch {
            width: 5,
            first_width: 4,
            ..
        })
    ));
    assert!(list(&[]).is_err());
}

#[test]
fn the_primary_header_is_inherited() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("x.fits");
    let mut writer = FitsWriter::create(&path).unwrap();
    writer
        .primary_without_data(&[Card::text("OBJECT", "Sun", "")])
        .unwrap();
    writer.begin_u16(None, SMALL, &[]).unwrap();
    writer.plane_u16(&ramp(0)).unwrap();
    writer.plane_u16(&ramp(1)).unwrap();
    writer.finish().unwrap();
    let file = ImageFile::open(&path).unwrap();
    assert_eq!((file.hdu(), file.planes()), (1, 2));
    assert_eq!(file.key_text("OBJECT").unwrap().as_deref(), Some("Sun"));
    assert_eq!(file.key_i64("NAXIS3").unwrap(), Some(2));
}
