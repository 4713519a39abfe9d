//! Runs the built command as a person would: what it prints, what it writes, how it ends.
//!
//! Images are painted here, pixel by pixel, from a limb-darkened disk with a sharp edge, so that
//! the truth is the painter's and not the program's.

mod program;

use ndarray::Array2;
use program::{run, shown, text};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use serde_json::Value;
use std::f64::consts::TAU;
use std::fs;
use std::path::{Path, PathBuf};
use truelimb::disk::{Darkening, DarkeningLaw};
use truelimb::frames::{Card, Column, CubeShape, FitsWriter, ImageFile, Values};

/// A disk to be painted, pixels.
#[derive(Clone, Copy)]
struct Painted {
    width: usize,
    height: usize,
    x_px: f64,
    y_px: f64,
    radius_px: f64,
}

/// Off centre, on a field that is not square, with a radius of no round number.
const DISK: Painted = Painted {
    width: 300,
    height: 276,
    x_px: 141.37,
    y_px: 138.82,
    radius_px: 113.26,
};

/// Share of the full scale that the disk's centre holds: hot pixels apart, nothing saturates.
const LEVEL: f64 = 0.8;

/// Steps of a pixel, each way, over which it is averaged.
const STEPS: usize = 8;

impl Painted {
    /// Brightness at a point: the darkening of the handbooks, a spot near the limb, a faint ring
    /// outside.
    fn brightness(self, law: &Darkening, x: f64, y: f64) -> f64 {
        let (dx, dy) = (x - self.x_px, y - self.y_px);
        let r = dx.hypot(dy) / self.radius_px;
        if r >= 1.0 {
            let ring = (r - 1.14) * self.radius_px / 2.0;
            return 0.002 + 0.006 * (-0.5 * ring * ring).exp();
        }
        let spot_angle: f64 = 0.9;
        let spot = (dx - 0.96 * self.radius_px * spot_angle.cos())
            .hypot(dy - 0.96 * self.radius_px * spot_angle.sin());
        law.at((1.0 - r * r).sqrt()) * (1.0 - 0.4 * (-0.5 * spot * spot / 6.0).exp())
    }

    /// The image, with `full_scale` for 1 and noise of half a percent of the disk's centre.
    fn image(self, full_scale: f64) -> Array2<f64> {
        let mut random = ChaCha8Rng::seed_from_u64(20);
        let law = Darkening::new(DarkeningLaw::Neckel2005, 550.0).unwrap();
        let n = STEPS as f64;
        Array2::from_shape_fn((self.height, self.width), |(j, i)| {
            let mut sum = 0.0;
            for b in 0..STEPS {
                for a in 0..STEPS {
                    let x = i as f64 + (a as f64 + 0.5) / n - 0.5;
                    let y = j as f64 + (b as f64 + 0.5) / n - 0.5;
                    sum += self.brightness(&law, x, y);
                }
            }
            let level = LEVEL * sum / (n * n);
            let (u, v): (f64, f64) = (random.random(), random.random());
            let normal = (-2.0 * (1.0 - u).ln()).sqrt() * (TAU * v).cos();
            let noise = 0.005 * (level / LEVEL).sqrt() * normal;
            full_scale * (0.02 + level + noise)
        })
    }

    fn write_u16(self, path: &Path) {
        let image = self.image(4000.0).mapv(|it| it.round().max(0.0) as u16);
        let shape = CubeShape {
            width: self.width,
            height: self.height,
            planes: 1,
            compressed: false,
        };
        let mut file = FitsWriter::create(path).unwrap();
        file.begin_u16(None, shape, &[]).unwrap();
        file.plane_u16(&image).unwrap();
        file.finish().unwrap();
    }
}

fn folder() -> tempfile::TempDir {
    tempfile::tempdir().unwrap()
}

/// The answer as JSON, of a run that must succeed.
fn json(arguments: &[&str]) -> Value {
    let output = run(arguments);
    assert_eq!(
        output.status.code(),
        Some(0),
        "{arguments:?}: {}",
        text(&output.stderr)
    );
    serde_json::from_slice(&output.stdout).unwrap()
}

fn number(value: &Value, key: &str) -> f64 {
    value[key]
        .as_f64()
        .unwrap_or_else(|| panic!("no {key} in {value}"))
}

/// Runs what must fail: status 2, nothing on stdout, one short message on stderr that holds every
/// one of `words`.
fn assert_refused(arguments: &[&str], words: &[&str]) -> String {
    let output = run(arguments);
    let message = text(&output.stderr);
    assert_eq!(output.status.code(), Some(2), "{arguments:?}: {message}");
    assert_eq!(text(&output.stdout), "", "{arguments:?}");
    assert!(!message.contains("panicked"), "{message}");
    for word in words {
        assert!(message.contains(word), "\"{word}\" is not in: {message}");
    }
    message
}

/// As [`assert_refused`], in a single line.
fn assert_refused_in_a_line(arguments: &[&str], words: &[&str]) {
    let message = assert_refused(arguments, words);
    assert_eq!(message.trim_end().lines().count(), 1, "{message}");
}

fn assert_no_product(output: &Path) {
    let left: Vec<_> = match fs::read_dir(output) {
        Ok(entries) => entries.map(|it| it.unwrap().path()).collect(),
        Err(_) => Vec::new(),
    };
    assert!(left.is_empty(), "left behind: {left:?}");
}

// ---- limb ------------------------------------------------------------------------------------

/// Every image gives the painter's disk: within 4 sigma, or 0.01 pixels, which the older darkening
/// law and the edge without any blur are worth.
fn assert_limb(path: &Path, disk: Painted) -> Value {
    let found = json(&["limb", shown(path), "--json"]);
    let centre = [
        found["centre_px"][0].as_f64().unwrap(),
        found["centre_px"][1].as_f64().unwrap(),
    ];
    let near = |value: f64, truth: f64, sigma: f64, what: &str| {
        let most = 4.0 * sigma + 0.01;
        assert!(
            (value - truth).abs() < most,
            "{}: {what} {value:.4}, painted {truth:.4}, allowed {most:.4}",
            path.display()
        );
    };
    let centre_sigma = number(&found, "centre_sigma_px");
    let radius_sigma = number(&found, "radius_sigma_px");
    assert!(centre_sigma > 0.0 && centre_sigma < 0.02, "{centre_sigma}");
    assert!(radius_sigma > 0.0 && radius_sigma < 0.02, "{radius_sigma}");
    near(centre[0], disk.x_px, centre_sigma, "x");
    near(centre[1], disk.y_px, centre_sigma, "y");
    near(
        number(&found, "radius_px"),
        disk.radius_px,
        radius_sigma,
        "radius",
    );
    let sigma = number(&found, "harmonic_sigma_px");
    for key in [
        "cos2_px", "sin2_px", "cos3_px", "sin3_px", "cos4_px", "sin4_px",
    ] {
        near(number(&found, key), 0.0, sigma, key);
    }
    found
}

#[test]
fn limb_of_a_16_bit_image() {
    let folder = folder();
    let path = folder.path().join("sun 16.fits");
    DISK.write_u16(&path);
    let found = assert_limb(&path, DISK);
    let used = found["sectors_used"].as_u64().unwrap();
    let rejected = found["sectors_rejected"].as_u64().unwrap();
    assert!(used > 10 * rejected, "{used} used, {rejected} left out");
}

#[test]
fn limb_of_an_8_bit_image() {
    let folder = folder();
    let path = folder.path().join("sun.fits");
    let image = DISK
        .image(255.0)
        .mapv(|it| it.round().clamp(0.0, 255.0) as u8);
    let mut file = FitsWriter::create(&path).unwrap();
    file.image_u8(None, &image, &[]).unwrap();
    file.finish().unwrap();
    assert_limb(&path, DISK);
}

#[test]
fn limb_of_a_float_image_without_values_beyond_the_limb() {
    let folder = folder();
    let path = folder.path().join("sun.fits");
    let mut image = DISK.image(1.0).mapv(|it| it as f32);
    for ((j, i), pixel) in image.indexed_iter_mut() {
        let r = (i as f64 - DISK.x_px).hypot(j as f64 - DISK.y_px);
        if r > DISK.radius_px + 9.0 {
            *pixel = f32::NAN;
        }
    }
    let mut file = FitsWriter::create(&path).unwrap();
    file.image_f32(None, &image, &[]).unwrap();
    file.finish().unwrap();
    assert_limb(&path, DISK);
}

#[test]
fn limb_of_a_plane_of_a_cube_and_by_every_definition() {
    let folder = folder();
    let path = folder.path().join("cube.fits");
    let image = DISK.image(1.0).mapv(|it| it as f32);
    let cube = ndarray::stack![ndarray::Axis(0), Array2::zeros(image.dim()), image];
    let mut file = FitsWriter::create(&path).unwrap();
    file.image_f32(None, &cube, &[]).unwrap();
    file.finish().unwrap();
    for definition in ["template", "inflection", "fourier:20"] {
        let arguments = [
            "limb",
            shown(&path),
            "--plane",
            "1",
            "--definition",
            definition,
            "--json",
        ];
        let found = json(&arguments);
        let off = (number(&found, "radius_px") - DISK.radius_px).abs();
        assert!(off < 0.3, "{definition}: {off} px");
        assert!(!found["definition"].as_str().unwrap().is_empty());
    }
    assert_refused_in_a_line(&["limb", shown(&path), "--plane", "2"], &["cube.fits", "2"]);
    assert_refused_in_a_line(
        &["limb", shown(&path), "--definition", "fourier:200"],
        &["fourier:200", "2 to 25 arcsec"],
    );
}

#[test]
fn limb_refuses_what_holds_no_limb() {
    let folder = folder();
    let at = |name: &str| folder.path().join(name);

    assert_refused_in_a_line(&["limb", shown(&at("none.fits"))], &["none.fits"]);

    DISK.write_u16(&at("whole.fits"));
    let bytes = fs::read(at("whole.fits")).unwrap();
    fs::write(at("short.fits"), &bytes[..bytes.len() / 2]).unwrap();
    assert_refused_in_a_line(&["limb", shown(&at("short.fits"))], &["short.fits"]);

    fs::write(at("notes.fits"), "Clear sky, light wind from the west.\n").unwrap();
    assert_refused_in_a_line(&["limb", shown(&at("notes.fits"))], &["notes.fits", "FITS"]);

    let mut table = FitsWriter::create(&at("table.fits")).unwrap();
    let columns = [Column::new("radius", Values::F64(vec![1.0, 2.0]))];
    table.table("LIMBS", &columns, &[]).unwrap();
    table.finish().unwrap();
    assert_refused_in_a_line(
        &["limb", shown(&at("table.fits"))],
        &["table.fits", "image"],
    );

    let mut random = ChaCha8Rng::seed_from_u64(3);
    let mut noise = || 100.0 + 5.0 * random.random::<f32>();
    let dark = Array2::from_shape_simple_fn((200, 220), &mut noise);
    let mut file = FitsWriter::create(&at("dark.fits")).unwrap();
    file.image_f32(None, &dark, &[]).unwrap();
    file.finish().unwrap();
    assert_refused_in_a_line(&["limb", shown(&at("dark.fits"))], &["dark.fits", "disk"]);

    let cut = Painted {
        x_px: -30.0,
        ..DISK
    };
    cut.write_u16(&at("cut.fits"));
    assert_refused_in_a_line(&["limb", shown(&at("cut.fits"))], &["cut.fits"]);
}

/// The image with everything to the left of a column dark, as behind a dome.
fn occulted(disk: Painted, left_of: usize, path: &Path) {
    let mut image = disk.image(4000.0).mapv(|it| it.round().max(0.0) as u16);
    image.slice_mut(ndarray::s![.., ..left_of]).fill(80);
    let shape = CubeShape {
        width: disk.width,
        height: disk.height,
        planes: 1,
        compressed: false,
    };
    let mut file = FitsWriter::create(path).unwrap();
    file.begin_u16(None, shape, &[]).unwrap();
    file.plane_u16(&image).unwrap();
    file.finish().unwrap();
}

#[test]
fn limb_of_a_disk_that_is_cut_or_occulted_in_part_is_right_or_refused() {
    let folder = folder();
    let mut answered = Vec::new();
    // Share of the limb that is there, by the painter's geometry.
    let there = |left_px: f64| {
        let at = (DISK.x_px - left_px) / DISK.radius_px;
        1.0 - at.clamp(-1.0, 1.0).acos() / (0.5 * TAU)
    };
    for gone_px in [10.0, 45.0, 90.0, 130.0, 180.0] {
        let path = folder.path().join("occulted.fits");
        let left = DISK.x_px - DISK.radius_px + gone_px;
        occulted(DISK, left.round() as usize, &path);
        let cut = Painted {
            x_px: DISK.x_px - left,
            ..DISK
        };
        let outside = folder.path().join("cut.fits");
        cut.write_u16(&outside);
        for (path, disk) in [(path, DISK), (outside, cut)] {
            let output = run(&["limb", shown(&path), "--json"]);
            if output.status.code() == Some(0) {
                assert_limb(&path, disk);
                answered.push(there(left));
            } else {
                assert_refused_in_a_line(
                    &["limb", shown(&path)],
                    &[path.file_name().unwrap().to_str().unwrap()],
                );
                assert!(
                    there(left) < 0.8,
                    "refused with {:.2} of the limb there: {}",
                    there(left),
                    text(&output.stderr)
                );
            }
        }
    }
    println!("answered with these shares of the limb: {answered:.2?}");
    assert!(answered.len() >= 2, "{answered:?}");
    assert!(answered.iter().all(|it| *it > 0.45), "{answered:?}");
}

// ---- reduce ----------------------------------------------------------------------------------

/// A copy of the small session, with its `session.toml` changed.
struct Copied {
    folder: tempfile::TempDir,
}

impl Copied {
    fn new(change: impl Fn(&str) -> String) -> Self {
        let from = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/session");
        let it = Self { folder: folder() };
        for entry in fs::read_dir(from).unwrap() {
            let path = entry.unwrap().path();
            fs::copy(&path, it.path(path.file_name().unwrap().to_str().unwrap())).unwrap();
        }
        it.edit("session.toml", change);
        it
    }

    fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    fn edit(&self, name: &str, change: impl Fn(&str) -> String) {
        let text = fs::read_to_string(self.path(name)).unwrap();
        let changed = change(&text);
        fs::write(self.path(name), changed).unwrap();
    }

    /// Reduces what must be refused, and leaves no product.
    fn assert_refused(&self, words: &[&str]) -> String {
        let output = self.path("out");
        let session = self.path("session.toml");
        let message = assert_refused(
            &["reduce", shown(&session), "-o", shown(&output), "-q"],
            words,
        );
        assert_no_product(&output);
        message
    }
}

fn replaced(text: &str, from: &str, to: &str) -> String {
    assert!(text.contains(from), "\"{from}\" is not in the session");
    text.replace(from, to)
}

#[test]
fn one_roll_alone_is_reduced_and_its_oblateness_refused() {
    // Sun and instrument turn together: status 3, a reason and a way out, and the radius all the
    // same.
    let copy = Copied::new(|text| {
        let end = text.match_indices("[[sequence]]").nth(1).unwrap().0;
        text[..end].to_owned()
    });
    let output = copy.path("out");
    let session = copy.path("session.toml");
    let ran = run(&[
        "reduce",
        shown(&session),
        "-o",
        shown(&output),
        "--json",
        "-q",
    ]);
    assert_eq!(ran.status.code(), Some(3), "{}", text(&ran.stderr));
    let printed: Value = serde_json::from_slice(&ran.stdout).unwrap();
    let written: Value =
        serde_json::from_slice(&fs::read(output.join("result.json")).unwrap()).unwrap();
    assert_eq!(printed, written);
    let oblateness = &printed["shape"]["oblateness"];
    assert_eq!(oblateness["status"], "not_separated");
    assert!(oblateness["value"].is_null() && oblateness["interval_68"].is_null());
    assert!(oblateness["reason"].as_str().unwrap().contains("roll"));
    assert_eq!(printed["shape"]["radius"]["status"], "measured");
    assert!(number(&printed["shape"]["radius"], "value") > 900.0);
}

#[test]
fn a_missing_session_or_file_is_named() {
    let copy = Copied::new(|text| replaced(text, "roll_002.fits", "roll_020.fits"));
    let message = copy.assert_refused(&["session.toml", "sequence", "files", "roll_020.fits"]);
    assert!(message.contains("cure"), "{message}");
    let none = copy.path("tonight.toml");
    let output = copy.path("out");
    assert_refused(
        &["reduce", shown(&none), "-o", shown(&output)],
        &["tonight.toml"],
    );
    assert_no_product(&output);
}

#[test]
fn a_weather_log_of_another_hour_is_refused() {
    let copy = Copied::new(ToOwned::to_owned);
    copy.edit("weather.csv", |text| {
        let moved = text.replace("T07:", "T01:").replace("T08:", "T02:");
        assert_ne!(moved, text);
        moved
    });
    copy.assert_refused(&["weather.csv", "2026-06-14T0"]);
}

#[test]
fn frames_of_the_night_are_refused() {
    let copy =
        Copied::new(|text| replaced(text, "longitude_deg = 57.38", "longitude_deg = -122.62"));
    copy.assert_refused(&["horizon", "2026-06-14T07:2"]);
}

#[test]
fn frames_without_a_sun_are_refused() {
    // The darks stand where the frames should: the same camera, no disk. They carry no time, and
    // so the one frame that is left is taken from a cube of the session with its pixels blanked.
    let copy = Copied::new(|text| {
        let end = text.match_indices("[[sequence]]").nth(1).unwrap().0;
        replaced(&text[..end], "burst_000.fits", "blank.fits")
    });
    let mut random = ChaCha8Rng::seed_from_u64(5);
    let shape = CubeShape {
        width: 384,
        height: 384,
        planes: 1,
        compressed: false,
    };
    let cards = [
        Card::text("DATE-OBS", "2026-06-14T07:20:00.000", ""),
        Card::real("EXPTIME", 0.002, ""),
    ];
    let mut file = FitsWriter::create(&copy.path("blank.fits")).unwrap();
    file.begin_u16(None, shape, &cards).unwrap();
    file.plane_u16(&Array2::from_shape_simple_fn((384, 384), || {
        random.random_range(98..104)
    }))
    .unwrap();
    file.finish().unwrap();
    copy.assert_refused(&["sequence 1", "disk"]);
}

/// Every cube of the small session with everything to the left of a column dark.
fn occulted_session(left_of: usize) -> Copied {
    let copy = Copied::new(ToOwned::to_owned);
    for (name, date) in [
        ("burst_000.fits", "2026-06-14T07:20:00.000"),
        ("roll_001.fits", "2026-06-14T07:32:00.000"),
        ("roll_002.fits", "2026-06-14T07:44:00.000"),
        ("roll_003.fits", "2026-06-14T07:56:00.000"),
    ] {
        let mut planes = Vec::new();
        {
            let mut file = ImageFile::open(&copy.path(name)).unwrap();
            for plane in 0..file.planes() {
                let mut image = Array2::zeros((0, 0));
                file.read_plane(plane, &mut image).unwrap();
                let mut image = image.mapv(|it: f32| it.round() as u16);
                image.slice_mut(ndarray::s![.., ..left_of]).fill(100);
                planes.push(image);
            }
        }
        let shape = CubeShape {
            width: 384,
            height: 384,
            planes: planes.len(),
            compressed: false,
        };
        let cards = [
            Card::text("DATE-OBS", date, ""),
            Card::text("DATEREF", date, ""),
            Card::real("EXPTIME", 0.002, ""),
            Card::text("CTYPE3", "UTC", ""),
            Card::text("CUNIT3", "s", ""),
            Card::real("CRPIX3", 1.0, ""),
            Card::real("CRVAL3", 0.0, ""),
            Card::real("CDELT3", 0.8, ""),
        ];
        let mut file = FitsWriter::create(&copy.path(name)).unwrap();
        file.begin_u16(None, shape, &cards).unwrap();
        for it in &planes {
            file.plane_u16(it).unwrap();
        }
        file.finish().unwrap();
    }
    copy
}

#[test]
fn a_disk_occulted_in_part_is_reduced_with_honest_errors_or_refused() {
    // Columns behind the dome: 14, 23 and 37 percent of the limb.
    let mut answered = Vec::new();
    for left_of in [30, 60, 120] {
        let copy = occulted_session(left_of);
        let (session, output) = (copy.path("session.toml"), copy.path("out"));
        let arguments = ["reduce", shown(&session), "-o", shown(&output), "-q"];
        let ran = run(&arguments);
        if ran.status.code() == Some(2) {
            println!("{left_of} columns: {}", text(&ran.stderr));
            assert_refused(&arguments, &["sequence"]);
            assert_no_product(&output);
            continue;
        }
        assert!(matches!(ran.status.code(), Some(0 | 3)), "{ran:?}");
        answered.push(left_of);
        let found: Value =
            serde_json::from_slice(&fs::read(output.join("result.json")).unwrap()).unwrap();
        let truth: Value =
            serde_json::from_str(&fs::read_to_string(copy.path("truth.json")).unwrap()).unwrap();
        let of = |key: &str| number(&truth["shape"], key);
        let radius = of("R_au_as") + number(&truth, "limb_inflection_offset_as");
        for (key, truth) in [("radius", radius), ("oblateness", of("dr_mas"))] {
            let it = &found["shape"][key];
            if it["value"].is_null() {
                continue;
            }
            let off = (number(it, "value") - truth) / number(it, "sigma");
            println!("{left_of} columns: {key} {off:.2} sigma off: {it}");
            assert!(off.abs() < 4.0, "{key} is {off} sigma off: {it}");
        }
        let left_out: f64 = found["masked"]
            .as_array()
            .unwrap()
            .iter()
            .filter(|it| it["sequence"] == 0)
            .map(|it| number(it, "to_deg") - number(it, "from_deg"))
            .sum();
        println!("{left_of} columns: {left_out} degrees left out");
        assert!(left_out > 40.0, "{left_out} degrees left out");
    }
    assert!(answered.starts_with(&[30, 60]), "answered: {answered:?}");

    // More than half of it.
    occulted_session(250).assert_refused(&["sequence"]);
}

#[test]
fn a_mask_image_leaves_its_arcs_out_and_a_wrong_one_is_refused() {
    let keys = |radius_px: f64| {
        format!(
            "[mask]\nimage = \"picture.fits\"\ncentre_x_px = 150\ncentre_y_px = 150\nradius_px = {radius_px}\nbrighter_than = 1.3\n\n[[sequence]]\nkind = \"burst\""
        )
    };
    let with = |radius_px: f64| {
        let copy =
            Copied::new(|text| replaced(text, "[[sequence]]\nkind = \"burst\"", &keys(radius_px)));
        // Solar north up, east to the left; bright from 60 to 70 degrees of position angle.
        let picture = Array2::from_shape_fn((301, 301), |(y, x)| {
            let (dx, dy) = (x as f64 - 150.0, y as f64 - 150.0);
            let bright = (150.0..160.0).contains(&dy.atan2(dx).to_degrees());
            if bright { 2.0_f32 } else { 1.0 }
        });
        let mut file = FitsWriter::create(&copy.path("picture.fits")).unwrap();
        file.image_f32(None, &picture, &[]).unwrap();
        file.finish().unwrap();
        copy
    };
    let copy = with(120.0);
    let (session, output) = (copy.path("session.toml"), copy.path("out"));
    let found = json(&[
        "reduce",
        shown(&session),
        "-o",
        shown(&output),
        "--json",
        "-q",
    ]);
    let arcs = found["shape"]["masking"]["arcs"].as_array().unwrap();
    let arc = arcs.iter().find(|it| it["kind"] == "image").unwrap();
    assert_eq!(arc["stays_on"], "sun");
    assert!((number(arc, "from_deg") - 60.0).abs() < 1.1, "{arc}");
    assert!((number(arc, "to_deg") - 70.0).abs() < 1.1, "{arc}");
    for sequence in 0..4 {
        let covered = found["masked"]
            .as_array()
            .unwrap()
            .iter()
            .filter(|it| it["sequence"] == sequence && it["reason"] == "covered by the mask image")
            .map(|it| number(it, "to_deg") - number(it, "from_deg"))
            .sum::<f64>();
        assert!(
            (9.0..16.0).contains(&covered),
            "{covered} degrees in sequence {sequence}"
        );
    }
    with(160.0).assert_refused(&["picture.fits", "mask.radius_px", "301 x 301"]);
}

#[test]
fn a_truncated_file_of_frames_is_named() {
    let copy = Copied::new(ToOwned::to_owned);
    let path = copy.path("burst_000.fits");
    let bytes = fs::read(&path).unwrap();
    // What is left ends inside the header of the image.
    fs::write(&path, &bytes[..4000]).unwrap();
    let output = copy.path("out");
    let session = copy.path("session.toml");
    let ran = run(&["reduce", shown(&session), "-o", shown(&output), "-q"]);
    // Good sequences are left: the result stands, and says what it lacks.
    let message = text(&ran.stderr);
    assert!(!message.contains("panicked"), "{message}");
    match ran.status.code() {
        Some(0 | 3) => {
            let result = fs::read_to_string(output.join("result.json")).unwrap();
            assert!(
                result.contains("burst_000.fits"),
                "the lost file is not named"
            );
        }
        Some(2) => {
            assert!(message.contains("burst_000.fits"), "{message}");
            assert_no_product(&output);
        }
        other => panic!("{other:?}: {message}"),
    }
}

#[test]
fn five_faults_are_told_at_once() {
    let copy = Copied::new(|text| {
        let text = replaced(text, "latitude_deg = 30.94", "latitude_deg = 130.94");
        let text = replaced(&text, "mount = \"equatorial\"", "mount = \"equatorail\"");
        let text = replaced(&text, "gain_e_adu = 12.0", "gain_e_adu = \"twelve\"");
        let text = replaced(&text, "centre_nm = 550.0\n", "");
        replaced(&text, "read_noise_e = 8.0", "read_nois_e = 8.0")
    });
    let message = copy.assert_refused(&[
        "session.toml",
        "site.latitude_deg",
        "130.94",
        "telescope.mount",
        "equatorial",
        "camera.gain_e_adu",
        "filter.centre_nm",
        "read_nois_e",
        "read_noise_e",
    ]);
    assert!(message.matches("cure").count() >= 5, "{message}");
}

// ---- refraction, schema, help ----------------------------------------------------------------

const STATION: [&str; 13] = [
    "refraction",
    "--latitude-deg",
    "30.94",
    "--height-m",
    "2240",
    "--pressure-hpa",
    "778",
    "--temperature-c",
    "9",
    "--humidity",
    "0.35",
    "--wavelength-nm",
    "550",
];

#[test]
fn refraction_prints_the_agreed_names() {
    let mut arguments = STATION.to_vec();
    arguments.extend(["--zenith-deg", "30,60", "--json"]);
    let table = json(&arguments);
    let rows = table.as_array().unwrap();
    assert_eq!(rows.len(), 2);
    let keys = |it: &Value| -> Vec<String> { it.as_object().unwrap().keys().cloned().collect() };
    for row in rows {
        assert_eq!(
            keys(row),
            [
                "zenith_apparent_deg",
                "zenith_true_deg",
                "wavelength_nm",
                "refractivity",
                "refraction_arcsec",
                "dr_dz",
                "radius_change_mas",
                "flattening_mas",
                "p4_mas",
                "m3_mas",
                "dispersion_mas_per_nm",
                "sensitivity",
                "warnings",
            ]
        );
        assert_eq!(
            keys(&row["sensitivity"]),
            [
                "pressure_hpa",
                "temperature_c",
                "humidity",
                "wavelength_nm",
                "zenith_arcmin",
                "vertical_arcmin",
            ]
        );
        // Refraction lifts, so the true zenith distance is the larger, and flattens upright.
        let refraction_deg = number(row, "refraction_arcsec") / 3600.0;
        let difference = number(row, "zenith_true_deg") - number(row, "zenith_apparent_deg");
        assert!((difference - refraction_deg).abs() < 1e-9);
        assert!(number(row, "flattening_mas") > 0.0);
    }
    // First order, R = (n - 1) tan z: a textbook formula, good to a part in a thousand at 30 deg.
    let plane = number(&rows[0], "refractivity") * 30f64.to_radians().tan() * 206_264.806;
    assert!((number(&rows[0], "refraction_arcsec") / plane - 1.0).abs() < 2e-3);
}

#[test]
fn refraction_of_a_band_says_where_its_light_is() {
    let mut arguments = STATION.to_vec();
    arguments.extend(["--zenith-deg", "60,72", "--width-nm", "100", "--json"]);
    let table = json(&arguments);
    let rows = table.as_array().unwrap();
    let of = |row: usize, name: &str| number(&rows[row], name);
    for row in 0..2 {
        assert!((of(row, "wavelength_nm") - 550.0).abs() < 1e-9);
        // Steeper in the blue: the mean of the refraction lies on the blue side of the light's.
        let blueward = of(row, "centroid_wavelength_nm") - of(row, "effective_wavelength_nm");
        assert!((1.5..3.0).contains(&blueward), "{blueward}");
        // A flat band's spread is root 12 of its standard deviation.
        let ratio = of(row, "smear_mas") / of(row, "smear_rms_mas");
        assert!((3.3..3.7).contains(&ratio), "{ratio}");
        assert!(of(row, "smear_flattening_mas") > 0.0);
    }
    // More air reddens the light.
    assert!(of(1, "centroid_wavelength_nm") > of(0, "centroid_wavelength_nm"));
    let warnings = |row: usize| rows[row]["warnings"].to_string();
    assert!(!warnings(0).contains("above"), "{}", warnings(0));
    assert!(warnings(1).contains("above 70"), "{}", warnings(1));
}

#[test]
fn refraction_names_the_argument_that_cannot_be() {
    let changed = |index: usize, value: &'static str| {
        let mut arguments = STATION.to_vec();
        arguments[index] = value;
        arguments.extend(["--zenith-deg", "45"]);
        arguments
    };
    assert_refused_in_a_line(&changed(10, "45"), &["--humidity", "fraction", "percent"]);
    assert_refused_in_a_line(&changed(6, "1013"), &["--pressure-hpa", "sea level"]);
    assert_refused_in_a_line(&changed(8, "-300"), &["--temperature-c", "absolute zero"]);
    assert_refused_in_a_line(&changed(12, "50"), &["--wavelength-nm", "50 nm", "300"]);
    assert_refused_in_a_line(
        &changed(12, "20000"),
        &["--wavelength-nm", "20000 nm", "2500"],
    );
    assert_refused_in_a_line(&changed(4, "46000"), &["--height-m", "45000 m"]);
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-data/sounding.csv");
    let sounding = path.to_str().unwrap();
    let mut arguments = changed(4, "2000");
    arguments[6] = "800";
    arguments.extend(["--profile", sounding]);
    assert_refused_in_a_line(&arguments, &["--profile", "2210 m", "2000 m"]);
}

#[test]
fn refraction_refuses_what_the_model_does_not_reach() {
    let mut arguments = STATION.to_vec();
    arguments.extend(["--zenith-deg", "95"]);
    assert_refused_in_a_line(&arguments, &["zenith", "95"]);
    let mut arguments = STATION.to_vec();
    arguments[12] = "5";
    arguments.extend(["--zenith-deg", "30"]);
    assert_refused_in_a_line(&arguments, &["wavelength", "nm"]);
}

#[test]
fn the_schema_knows_every_key_of_the_small_session() {
    let schema = json(&["schema"]);
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/session/session.toml");
    let session: toml::Table = fs::read_to_string(path).unwrap().parse().unwrap();
    let properties = &schema["properties"];
    for (section, value) in &session {
        assert!(properties[section].is_object(), "{section}");
        for key in value.as_table().into_iter().flat_map(toml::Table::keys) {
            assert!(
                properties[section]["properties"][key].is_object(),
                "{section}.{key}"
            );
        }
    }
}

#[test]
fn every_command_explains_itself_with_an_example() {
    for command in ["demo", "reduce", "simulate", "limb", "refraction"] {
        let output = run(&[command, "--help"]);
        assert_eq!(output.status.code(), Some(0));
        let help = text(&output.stdout);
        assert!(
            help.contains(&format!("Example: truelimb {command}")),
            "{help}"
        );
    }
    assert_eq!(run(&["reduse"]).status.code(), Some(2));
}
