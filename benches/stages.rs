//! Time of the stages, each with its answer asserted: reading a frame, its limb, a whole reduction.
//!
//! The figures that matter are ratios within one run: `limb/N` over `read/N` is what the limb of a
//! frame costs beside reading the same frame through the FITS library into floats on one thread.

use criterion::{BenchmarkId, Criterion, criterion_group, criterion_main};
use ndarray::Array2;
use std::f64::consts::TAU;
use std::hint::black_box;
use std::path::{Path, PathBuf};
use truelimb::calibrate::{Calibration, Detector};
use truelimb::disk::{Darkening, DarkeningLaw, SolarEdge};
use truelimb::frames::{CubeShape, FitsWriter, Reader, list};
use truelimb::limb::geometry::Annulus;
use truelimb::limb::template::{EdgeTable, blur_of_width};
use truelimb::limb::{self, Extraction};
use truelimb::optics::{Exposure, LimbOptics, Telescope};
use truelimb::pipeline::{self, Options, Silent};
use truelimb::{session, synth};

const SECTORS: usize = 120;
const RADIUS_ARCSEC: f64 = 955.0;
const LEVEL_ADU: f64 = 3000.0;

/// One camera and a frame of it.
struct Camera {
    size: usize,
    table: EdgeTable,
    annulus: Annulus,
    calibration: Calibration,
    frame: Array2<f32>,
    blur: f64,
    model: Vec<f64>,
    slope: Vec<f64>,
}

impl Camera {
    fn new(size: usize) -> Self {
        let scale = 2100.0 / size as f64;
        let optics = LimbOptics {
            edge: SolarEdge {
                radius_arcsec: RADIUS_ARCSEC,
                scale_arcsec: 0.11,
                darkening: Darkening::new(DarkeningLaw::Neckel2005, 550.0)
                    .expect("a wavelength of the law"),
            },
            telescope: Telescope {
                aperture_m: 0.15,
                central_obstruction: 0.0,
            },
            wavelength_nm: 550.0,
            exposure: Exposure::Short,
        };
        let angles: Vec<f64> = (0..SECTORS)
            .map(|s| TAU * (s as f64 + 0.5) / SECTORS as f64)
            .collect();
        let table = EdgeTable::new(&optics, 0.0, scale, &angles).expect("a template");
        let reach = (RADIUS_ARCSEC - 2.0, RADIUS_ARCSEC + 2.0);
        let annulus = Annulus::new(SECTORS, angles[0], scale, reach, (10.0, 8.0));
        let wide = Annulus::new(
            SECTORS,
            angles[0],
            scale,
            reach,
            (RADIUS_ARCSEC - 5.0, 20.0),
        );
        let model = vec![RADIUS_ARCSEC; SECTORS];
        let slope = vec![0.0; SECTORS];
        let blur = blur_of_width(1.6);
        let centre = (0.5 * size as f64 + 0.3, 0.5 * size as f64 - 0.4);
        let frame = wide.synthetic(centre, (size, size), &model, &slope, |s, x| {
            LEVEL_ADU * table.value(s, blur, x)
        });
        Self {
            size,
            table,
            annulus,
            calibration: Calibration::neutral(size, size),
            frame,
            blur,
            model,
            slope,
        }
    }

    fn limb(&self) -> f64 {
        let start = limb::locate::find(self.frame.view()).expect("a disk");
        let setup = Extraction {
            table: &self.table,
            annulus: &self.annulus,
            calibration: &self.calibration,
            detector: Detector {
                gain_e_adu: 12.0,
                read_noise_e: 8.0,
                saturation_adu: None,
            },
            model_arcsec: &self.model,
            model_slope: &self.slope,
            blur_start: self.blur,
        };
        let limb = limb::extract(self.frame.view(), start, &setup).expect("a limb");
        limb.sectors.iter().map(|it| it.radius_arcsec).sum::<f64>() / SECTORS as f64
    }

    fn write(&self, path: &Path) {
        let planes = 16;
        let plane = self.frame.mapv(|it| it.max(0.0) as u16);
        let shape = CubeShape {
            width: self.size,
            height: self.size,
            planes,
            compressed: false,
        };
        let mut file = FitsWriter::create(path).expect("a file");
        file.begin_u16(None, shape, &[]).expect("a cube");
        for _ in 0..planes {
            file.plane_u16(&plane).expect("a plane");
        }
        file.finish().expect("a whole file");
    }
}

fn read_and_limb(c: &mut Criterion) {
    let folder = tempfile::tempdir().expect("a folder");
    for size in [1024, 2048] {
        let camera = Camera::new(size);
        let path: PathBuf = folder.path().join(format!("{size}.fits"));
        camera.write(&path);
        let files = list(&[path]).expect("a list");
        let mut reader = Reader::new();
        let mut raw = Array2::zeros((0, 0));
        let mut next = 0;
        c.bench_with_input(BenchmarkId::new("read", size), &files, |b, files| {
            b.iter(|| {
                reader
                    .read(files, files.frames[next], &mut raw)
                    .expect("a plane");
                next = (next + 1) % files.frames.len();
                assert!(raw[[size / 2, size / 4]] > 1000.0);
            });
        });
        c.bench_with_input(BenchmarkId::new("limb", size), &camera, |b, camera| {
            b.iter(|| {
                let radius = black_box(camera.limb());
                assert!((radius - RADIUS_ARCSEC).abs() < 1e-3, "{radius}");
            });
        });
    }
}

fn whole_reduction(c: &mut Criterion) {
    let folder = tempfile::tempdir().expect("a folder");
    let mut scenario = synth::Scenario::default();
    for it in &mut scenario.sequences {
        it.frames = 10;
    }
    let made = folder.path().join("session");
    synth::make(&scenario, 1, &made, &|| ()).expect("a session");
    let session = session::read(&made.join("session.toml")).expect("a session file");
    let mut group = c.benchmark_group("reduce");
    group.sample_size(10);
    for (name, stack) in [("with stack", true), ("without stack", false)] {
        group.bench_function(name, |b| {
            b.iter(|| {
                let options = Options { seed: 1, stack };
                let out = pipeline::reduce(&session, &options, &Silent).expect("a result");
                assert_eq!(out.record.selection.read, 10 * scenario.sequences.len());
                assert!(
                    out.record
                        .shape
                        .oblateness
                        .value
                        .is_some_and(|it| it.abs() < 300.0)
                );
            });
        });
    }
    group.finish();
}

criterion_group!(stages, read_and_limb, whole_reduction);
criterion_main!(stages);
