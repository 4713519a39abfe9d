//! Whole sessions against what they must be.

mod limb;

use std::path::Path;

use crate::frames::{HeaderMap, ImageFile, frame_times};
use crate::synth::make::knowledge_errors;
use crate::synth::{Scenario, SynthError, make, read_scenario, sky_above, text};

/// A session of a few small frames.
fn small() -> Scenario {
    let mut s = Scenario {
        size_px: 256,
        scale_arcsec_px: 8.2,
        peak_e: 20000.0,
        hot_pixels: 5,
        ..Scenario::default()
    };
    s.layers.truncate(1);
    s.sequences.truncate(2);
    for it in &mut s.sequences {
        it.frames = 3;
    }
    s
}

fn bytes(folder: &Path, threads: usize, seed: u64) -> Vec<(String, Vec<u8>)> {
    let pool = rayon::ThreadPoolBuilder::new()
        .num_threads(threads)
        .build()
        .unwrap();
    pool.install(|| make(&small(), seed, folder, &|| {}))
        .unwrap();
    let mut all: Vec<(String, Vec<u8>)> = std::fs::read_dir(folder)
        .unwrap()
        .map(|it| {
            let path = it.unwrap().path();
            let name = path.file_name().unwrap().to_string_lossy().into_owned();
            (name, std::fs::read(path).unwrap())
        })
        .collect();
    all.sort();
    all
}

#[test]
fn the_same_bytes_for_any_number_of_threads() {
    let place = tempfile::tempdir().unwrap();
    let [one, three, other] = [(1, 7), (3, 7), (2, 8)].map(|(threads, seed)| {
        bytes(
            &place.path().join(format!("{threads}-{seed}")),
            threads,
            seed,
        )
    });
    let names: Vec<&str> = one.iter().map(|it| it.0.as_str()).collect();
    assert_eq!(
        names,
        [
            "burst_000.fits",
            "burst_001.fits",
            "dark.fits",
            "flat.fits",
            "session.toml",
            "truth.json",
            "weather.csv"
        ]
    );
    assert!(one == three, "threads change the bytes");
    assert!(
        one.iter().zip(&other).all(|(a, b)| a.1 != b.1),
        "the seed changes nothing"
    );
}

#[test]
fn the_session_can_be_read_and_is_as_wrong_as_the_truth_says() {
    let place = tempfile::tempdir().unwrap();
    let s = small();
    let ticks = std::sync::atomic::AtomicUsize::new(0);
    let count = || {
        ticks.fetch_add(1, std::sync::atomic::Ordering::Relaxed);
    };
    let truth = make(&s, 3, place.path(), &count).unwrap();
    assert_eq!(ticks.into_inner(), 6);
    let session = crate::session::read(&place.path().join("session.toml")).unwrap();
    let scale = s.scale_arcsec_px * (1.0 + truth.errors.scale_rel);
    assert!((session.camera.scale_arcsec_px - scale).abs() < 1e-7);
    let angle = session.camera.angle_deg - s.camera_angle_deg;
    assert!((angle - truth.errors.angle_deg).abs() < 1e-5);
    assert!(truth.errors.scale_rel != 0.0 && truth.errors.pressure_hpa != 0.0);
    assert_eq!(session.sequences.len(), 2);
    assert!((session.sequences[1].roll_deg - 45.0).abs() < 1e-12);
    let first = crate::sky::Utc::parse(&truth.sequences[1].frames[2].start_utc).unwrap();
    let air = session.weather.at(first).unwrap().unwrap().0;
    let after_s = first.minus(crate::sky::Utc::parse(&s.start_utc).unwrap());
    let pressure_hpa = sky_above::conditions(&s, after_s).pressure_hpa;
    assert!((air.pressure_hpa - pressure_hpa - truth.errors.pressure_hpa).abs() < 2e-3);
    let mut cube = ImageFile::open(&place.path().join("burst_001.fits")).unwrap();
    let times = frame_times(&mut cube, &HeaderMap::default()).unwrap();
    let start = crate::sky::Utc::parse(&times[2].reference_utc).unwrap();
    assert!((start.plus_s(times[2].offset_s).minus(first)).abs() < 1e-3);
}

#[test]
fn a_folder_of_another_origin_is_left_alone() {
    let place = tempfile::tempdir().unwrap();
    let session = place.path().join("session.toml");
    std::fs::write(&session, "mine").unwrap();
    let refused = make(&small(), 1, place.path(), &|| {}).unwrap_err();
    assert!(matches!(refused, SynthError::NotOurs { .. }));
    assert_eq!(std::fs::read_to_string(&session).unwrap(), "mine");
    assert_eq!(std::fs::read_dir(place.path()).unwrap().count(), 1);
}

#[test]
fn a_shorter_session_leaves_no_cube_of_a_longer_one() {
    let place = tempfile::tempdir().unwrap();
    let folder = place.path().join("new");
    let mut s = small();
    s.size_px = 64;
    let refused = make(&s, 1, &folder, &|| {}).unwrap_err();
    assert!(matches!(refused, SynthError::DiskTooLarge { .. }) && !folder.exists());
    make(&small(), 1, &folder, &|| {}).unwrap();
    s = small();
    s.sequences.truncate(1);
    make(&s, 1, &folder, &|| {}).unwrap();
    assert!(folder.join("burst_000.fits").exists() && !folder.join("burst_001.fits").exists());
}

#[test]
fn scenarios_lie_over_the_demonstration_and_faults_are_named() {
    assert_eq!(read_scenario("").unwrap(), Scenario::default());
    let own = read_scenario("layer = []\n[site]\nname = \"Corrie Head, west\"\n").unwrap();
    assert!(own.layers.is_empty() && own.site.name.ends_with("west"));
    assert!((own.site.height_m - Scenario::default().site.height_m).abs() < 1e-12);
    for (text, word) in [
        ("apperture_m = 1.0", "apperture_m"),
        ("aperture_m = \"wide\"", "f64"),
        (
            "aperture_m = 7.0",
            "aperture_m is 7 m; allowed is 0.03 to 1 m",
        ),
        ("sequence = []", "sequence"),
        ("[[layer]]\nheight_m = 3.0", "r0_m"),
    ] {
        let said = read_scenario(text).unwrap_err().to_string();
        assert!(said.contains(word), "{said}");
    }
}

#[test]
fn the_weather_log_of_the_demonstration_is_what_the_program_writes() {
    let demo = Scenario::default();
    let written = text::weather_csv(&demo, &knowledge_errors(&demo, 1)).unwrap();
    assert_eq!(written, include_str!("../../../demo-data/weather.csv"));
}
