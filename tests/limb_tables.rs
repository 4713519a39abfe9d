//! Limbs without frames: a second fit from `limbs.fits`, and tables of other programs.
//!
//! The session in `tests/data/session` is of an independent forward model; what is compared here is
//! this program with itself, from the frames and without them.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};
use std::sync::OnceLock;
use truelimb::frames::{Card, Column, FitsWriter, TableFile, Values};
use truelimb::pipeline::{self, Error, Options, Outcome, Silent, products};
use truelimb::result::record::{Record, Status};
use truelimb::session::{self, Session};

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/session")
}

const NO_STACK: Options = Options {
    seed: 1,
    stack: false,
};

/// The session reduced from its frames, and the folder with its products.
fn from_frames() -> &'static (Outcome, PathBuf) {
    static ONCE: OnceLock<(Outcome, PathBuf)> = OnceLock::new();
    ONCE.get_or_init(|| {
        let session = session::read(&folder().join("session.toml")).unwrap();
        let outcome = pipeline::reduce(&session, &NO_STACK, &Silent).unwrap();
        let out = Path::new(env!("CARGO_TARGET_TMPDIR")).join("limb-tables");
        products::write(&outcome, &session, &out).unwrap();
        (outcome, out)
    })
}

/// A copy of the session file and the weather without any frame, the file changed by `edit`.
fn without_frames(edit: impl Fn(String) -> String) -> (tempfile::TempDir, Session) {
    let to = tempfile::tempdir().unwrap();
    let text = std::fs::read_to_string(folder().join("session.toml")).unwrap();
    let text = edit(
        text.replace("dark = [\"dark.fits\"]\n", "")
            .replace("flat = [\"flat.fits\"]\n", ""),
    );
    std::fs::write(to.path().join("session.toml"), text).unwrap();
    std::fs::copy(folder().join("weather.csv"), to.path().join("weather.csv")).unwrap();
    let session =
        session::read_without_frames(&to.path().join("session.toml"), &|_, _| None).unwrap();
    (to, session)
}

/// Every number of the shape, for a comparison.
fn numbers(record: &Record) -> Vec<(String, f64)> {
    let mut out = Vec::new();
    for (name, it) in [
        ("oblateness", &record.shape.oblateness),
        ("radius", &record.shape.radius),
        ("p4", &record.shape.p4),
    ] {
        // mas, all of them.
        let unit = if name == "radius" { 1000.0 } else { 1.0 };
        for (part, value) in [
            ("value", it.value),
            ("sigma", it.sigma),
            ("random", it.sigma_random),
            ("systematic", it.sigma_systematic),
        ] {
            out.push((format!("{name} {part}"), unit * value.unwrap()));
        }
    }
    for it in &record.budget {
        out.push((it.term.clone(), it.sigma_mas.unwrap()));
        out.push((format!("{} radius", it.term), it.sigma_radius_mas));
    }
    for it in &record.sequences {
        for h in &it.harmonics {
            out.push((format!("sequence {} m={}", it.sequence, h.m), h.cos_mas));
        }
    }
    out
}

fn same_mas(a: &Record, b: &Record, within: f64) {
    let (a, b) = (numbers(a), numbers(b));
    assert_eq!(a.len(), b.len());
    assert!(a.len() > 30);
    for (a, b) in a.iter().zip(&b) {
        assert_eq!(a.0, b.0);
        assert!((a.1 - b.1).abs() <= within, "{}: {} and {}", a.0, a.1, b.1);
    }
}

#[test]
fn a_second_fit_without_frames_gives_the_same_answer() {
    let (first, out) = from_frames();
    let (_folder, session) = without_frames(|it| it);
    let again = pipeline::refit(&session, &out.join("limbs.fits"), &NO_STACK, &Silent).unwrap();
    same_mas(&first.record, &again.record, 1e-6);
    let (a, b) = (&first.record, &again.record);
    assert_eq!(a.selection.read, b.selection.read);
    // Why a sector was left out is known to the run that saw the pixels; that it was, to both.
    for (a, b) in first.limbs.iter().zip(&again.limbs) {
        for (a, b) in a.frames.iter().zip(&b.frames) {
            assert_eq!(a.usable, b.usable);
        }
    }
    assert!(b.masked.is_empty());
    let told = b.warnings.iter().any(|it| it.code == "limbs-masked");
    assert_eq!(told, !a.masked.is_empty());
    assert_eq!(a.seeing.r0.value.is_some(), b.seeing.r0.value.is_some());
    if let Some((a, b)) = a.seeing.r0.value.zip(b.seeing.r0.value) {
        assert!((a / b - 1.0).abs() < 1e-9, "{a} {b}");
    }
    assert_eq!(first.noise.is_some(), again.noise.is_some());
    assert!(
        b.created_from
            .iter()
            .any(|it| it.path.ends_with("limbs.fits"))
    );
}

#[test]
fn a_barometer_put_right_is_the_same_from_limbs_as_from_frames() {
    let (first, out) = from_frames();
    let weather = std::fs::read_to_string(folder().join("weather.csv")).unwrap();
    // 3 hPa more in every row.
    let mut lines = weather.lines();
    let mut changed = String::new();
    let mut column = None;
    for line in lines.by_ref() {
        let cells: Vec<&str> = line.split(',').collect();
        match column {
            None if line.starts_with('#') => writeln!(changed, "{line}").unwrap(),
            None => {
                column = cells.iter().position(|it| it.trim() == "pressure_hpa");
                writeln!(changed, "{line}").unwrap();
            }
            Some(at) => {
                let mut cells: Vec<String> = cells.iter().map(|it| (*it).to_owned()).collect();
                cells[at] = (cells[at].trim().parse::<f64>().unwrap() + 3.0).to_string();
                writeln!(changed, "{}", cells.join(",")).unwrap();
            }
        }
    }
    let full = tempfile::tempdir().unwrap();
    for it in std::fs::read_dir(folder()).unwrap() {
        let it = it.unwrap();
        std::fs::copy(it.path(), full.path().join(it.file_name())).unwrap();
    }
    std::fs::write(full.path().join("weather.csv"), &changed).unwrap();
    let session = session::read(&full.path().join("session.toml")).unwrap();
    let frames = pipeline::reduce(&session, &NO_STACK, &Silent).unwrap();
    let (to, _) = without_frames(|it| it);
    std::fs::write(to.path().join("weather.csv"), &changed).unwrap();
    let session =
        session::read_without_frames(&to.path().join("session.toml"), &|_, _| None).unwrap();
    let limbs = pipeline::refit(&session, &out.join("limbs.fits"), &NO_STACK, &Silent).unwrap();
    let value = |it: &Outcome| it.record.shape.radius.value.unwrap() * 1000.0;
    // The limb is measured about the predicted one, which moved: what is left is the extraction's own
    // bias along a shift of a few thousandths of a pixel.
    assert!((value(&frames) - value(&limbs)).abs() < 0.02);
    let oblateness = |it: &Outcome| it.record.shape.oblateness.value.unwrap();
    assert!((oblateness(&frames) - oblateness(&limbs)).abs() < 0.02);
    assert!(
        (value(first) - value(&limbs)).abs() > 0.3,
        "3 hPa must show"
    );
}

#[test]
fn a_clock_put_right_moves_the_times() {
    let (first, out) = from_frames();
    let (_folder, session) = without_frames(|it| {
        it.replace(
            "[refractivity]",
            "[time]\nclock_offset_s = 20.0\n\n[refractivity]",
        )
    });
    let again = pipeline::refit(&session, &out.join("limbs.fits"), &NO_STACK, &Silent).unwrap();
    for (a, b) in first.measured.iter().zip(&again.measured) {
        for (a, b) in a.frames.iter().zip(&b.frames) {
            assert!((a.utc.minus(b.utc) - 20.0).abs() < 1e-6);
        }
    }
}

/// The radius goes with the scale: by hand, a thousandth of 959 arcsec.
#[test]
fn a_scale_put_right_is_that_of_the_session_as_it_stands() {
    let (first, out) = from_frames();
    let (_folder, session) = without_frames(|it| {
        it.replace("scale_arcsec_px = 5.3986012", "scale_arcsec_px = 5.4039998")
    });
    let again = pipeline::refit(&session, &out.join("limbs.fits"), &NO_STACK, &Silent).unwrap();
    let radius = |it: &Outcome| it.record.shape.radius.value.unwrap();
    let over = radius(&again) / radius(first);
    assert!((over - 5.4039998 / 5.3986012).abs() < 2e-6, "{over}");
}

#[test]
fn sectors_that_were_left_out_stay_out() {
    let (first, _) = from_frames();
    let session = session::read(&folder().join("session.toml")).unwrap();
    let mut marked = first.clone();
    for it in &mut marked.limbs[1].frames {
        it.usable[10..14].fill(false);
    }
    let out = tempfile::tempdir().unwrap();
    products::write(&marked, &session, out.path()).unwrap();
    let (_folder, session) = without_frames(|it| it);
    let limbs = out.path().join("limbs.fits");
    let again = pipeline::refit(&session, &limbs, &NO_STACK, &Silent).unwrap();
    for (sequence, it) in again.limbs.iter().enumerate() {
        for frame in &it.frames {
            let out = frame.usable[10..14].iter().all(|it| !it);
            assert_eq!(out, sequence == 1);
            assert!(frame.usable[20]);
        }
    }
    let warned = |it: &Outcome| {
        it.record
            .warnings
            .iter()
            .any(|it| it.code == "limbs-masked")
    };
    assert!(warned(&again) && !warned(first));
}

#[test]
fn what_only_frames_can_give_is_refused() {
    let (_, out) = from_frames();
    let limbs = out.join("limbs.fits");
    for (from, to, word) in [
        (
            "[weather]",
            "[limb]\nsectors = 90\n[weather]",
            "limb.sectors",
        ),
        (
            "[weather]",
            "[limb]\nedge_scale_km = 70.0\n[weather]",
            "edge_scale_km",
        ),
        ("aperture_m = 0.15", "aperture_m = 0.2", "aperture_m"),
    ] {
        let (_folder, session) = without_frames(|it| it.replacen(from, to, 1));
        let error = pipeline::refit(&session, &limbs, &NO_STACK, &Silent).unwrap_err();
        assert!(matches!(error, Error::File { .. }), "{error}");
        let text = error.to_string();
        assert!(text.contains(word) && text.contains("limbs.fits"), "{text}");
    }
    let (_folder, session) = without_frames(|it| {
        let at = it.rfind("[[sequence]]").unwrap();
        it[..at].to_owned()
    });
    let text = pipeline::refit(&session, &limbs, &NO_STACK, &Silent)
        .unwrap_err()
        .to_string();
    assert!(text.contains("another session"), "{text}");
    let (_folder, session) =
        without_frames(|it| it.replacen("kind = \"burst\"", "kind = \"limbs\"", 1));
    let text = pipeline::refit(&session, &limbs, &NO_STACK, &Silent)
        .unwrap_err()
        .to_string();
    assert!(text.contains("need no frames"), "{text}");
    let stack = folder().join("flat.fits");
    let text = pipeline::refit(&session, &stack, &NO_STACK, &Silent)
        .unwrap_err()
        .to_string();
    assert!(text.contains("flat.fits"), "{text}");
}

/// A session of nothing but limbs: the same place, weather and filter.
fn limbs_only(to: &Path, files: &[&str]) -> Session {
    let mut text = "[site]\nname = \"Corrie Head\"\nlatitude_deg = 30.94\nlongitude_deg = 57.38\nheight_m = 2240.0\n\n[telescope]\naperture_m = 0.15\nmount = \"equatorial\"\n\n[filter]\ncentre_nm = 550.0\nwidth_nm = 5.0\n\n[camera]\ngain_e_adu = 12.0\nread_noise_e = 8.0\nsaturation_adu = 4095\nscale_sigma_rel = 0.0002\nangle_sigma_deg = 0.03\n\n[weather]\nlog = \"weather.csv\"\npressure_sigma_hpa = 0.5\ntemperature_sigma_c = 0.6\nhumidity_sigma = 0.04\n\n[refractivity]\nlayer_tilt_sigma_arcmin = 2.0\nlayer_tilt_tau_min = 20.0\n"
        .to_owned();
    for it in files {
        write!(
            text,
            "\n[[sequence]]\nkind = \"limbs\"\nfiles = [\"{it}\"]\n"
        )
        .unwrap();
    }
    std::fs::copy(folder().join("weather.csv"), to.join("weather.csv")).unwrap();
    std::fs::write(to.join("session.toml"), text).unwrap();
    session::read(&to.join("session.toml")).unwrap()
}

#[test]
fn limbs_of_this_program_are_a_sequence_of_kind_limbs() {
    let (first, out) = from_frames();
    let to = tempfile::tempdir().unwrap();
    std::fs::copy(out.join("limbs.fits"), to.path().join("limbs.fits")).unwrap();
    let session = limbs_only(to.path(), &["limbs.fits"]);
    let again = pipeline::reduce(&session, &NO_STACK, &Silent).unwrap();
    same_mas(&first.record, &again.record, 1e-6);
}

/// One table a roll, as another program might write it: CSV with radii, CSV with its rows turned, FITS
/// with other units. Half-sector places differ, so that the answer is that of nearly the same points.
#[test]
fn tables_of_other_programs_give_the_shape() {
    let (first, _) = from_frames();
    let to = tempfile::tempdir().unwrap();
    let mut names = Vec::new();
    for (k, m) in first.measured.iter().enumerate() {
        let rows: Vec<[f64; 5]> = m
            .frames
            .iter()
            .flat_map(|frame| {
                let reference = m.frames[0].utc;
                frame
                    .limb
                    .sectors
                    .iter()
                    .enumerate()
                    .filter_map(move |(s, it)| {
                        let theta = frame.limb.angle_rad(s);
                        let position = frame.moment.orientation.position_angle_rad(theta);
                        // A plate of angles: the arcsec of the arc projection are apparent angles.
                        it.radius_arcsec.is_finite().then_some([
                            frame.utc.minus(reference),
                            position.to_degrees(),
                            theta.to_degrees(),
                            it.radius_arcsec,
                            it.sigma_arcsec,
                        ])
                    })
            })
            .collect();
        let start = m.frames[0].utc;
        if k % 2 == 0 {
            let name = format!("limbs_{k}.csv");
            let mut text =
                "# made by hand\ntime_utc,radius_arcsec,sigma_arcsec,position_angle_deg,detector_angle_deg\n"
                    .to_owned();
            for it in &rows {
                let time = start.plus_s(it[0]).to_iso();
                writeln!(text, "{time},{},{},{},{}", it[3], it[4], it[1], it[2]).unwrap();
            }
            std::fs::write(to.path().join(&name), text).unwrap();
            names.push(name);
        } else {
            let name = format!("limbs_{k}.fits");
            let column =
                |k: usize, factor: f64| Values::F64(rows.iter().map(|it| it[k] * factor).collect());
            let columns = [
                Column::new("Time", column(0, 1.0 / 60.0)).unit("min"),
                Column::new("PosAng", column(1, 1f64.to_radians())).unit("rad"),
                Column::new("Theta", column(2, 1.0)).unit("deg"),
                Column::new("Radius", column(3, 1000.0)).unit("mas"),
                Column::new("Sigma", column(4, 1.0)).unit("arcsec"),
            ];
            let mut file = FitsWriter::create(&to.path().join(&name)).unwrap();
            let cards = [Card::text("DATEREF", start.to_iso(), "")];
            file.table("POINTS", &columns, &cards).unwrap();
            file.finish().unwrap();
            names.push(name);
        }
    }
    let names: Vec<&str> = names.iter().map(String::as_str).collect();
    let session = limbs_only(to.path(), &names);
    let again = pipeline::reduce(&session, &NO_STACK, &Silent).unwrap();
    let (a, b) = (&first.record.shape, &again.record.shape);
    assert_eq!(b.oblateness.status, Status::Measured);
    // The same points; the times are rounded to a millisecond, and blemishes are not judged.
    let (x, y) = (a.oblateness.value.unwrap(), b.oblateness.value.unwrap());
    assert!(
        (x - y).abs() < 0.05 * a.oblateness.sigma.unwrap(),
        "{x} {y}"
    );
    // The extraction's own bias is not taken off limbs of another program.
    let (x, y) = (a.radius.value.unwrap(), b.radius.value.unwrap());
    assert!((x - y).abs() < 0.010, "{x} {y}");
    let warned = again
        .record
        .warnings
        .iter()
        .any(|it| it.code == "limbs-elsewhere");
    assert!(warned);
}

#[test]
fn a_table_that_is_none_says_what_it_lacks() {
    let to = tempfile::tempdir().unwrap();
    std::fs::write(
        to.path().join("bad.csv"),
        "time_utc,radius_arcsec,position_angle_deg\n2026-06-21T08:00:00,950.1,12\n",
    )
    .unwrap();
    let session = limbs_only(to.path(), &["bad.csv"]);
    let text = pipeline::reduce(&session, &NO_STACK, &Silent)
        .unwrap_err()
        .to_string();
    assert!(
        text.contains("bad.csv") && text.contains("sigma_arcsec"),
        "{text}"
    );
}

#[test]
fn the_tables_of_limbs_open_by_name() {
    let (first, out) = from_frames();
    let path = out.join("limbs.fits");
    let limbs = TableFile::open(&path, Some("LIMBS")).unwrap();
    let frames: usize = first.measured.iter().map(|it| it.frames.len()).sum();
    assert_eq!(limbs.rows(), 120 * frames);
    assert_eq!(limbs.unit("SEEN").unwrap(), "arcsec");
    assert!(limbs.column("NOTHING").unwrap().is_none());
    assert!(TableFile::open(&path, Some("NOTHING")).is_err());
    assert_eq!(TableFile::open(&path, Some("SEQUENCES")).unwrap().rows(), 4);
}
