//! Time of the stages, each with its answer asserted: reading a frame, its limb, its sharpness, adding
//! it to the stack, a whole reduction.
//!
//! The figures that matter are ratios within one run: `limb/N` over `read/N` is what the limb of a
//! frame costs beside reading the same frame through the FITS library into floats on one thread, and
//! `frame/stack/N` what adding it to the stack costs on all threads.

use criterion::{BenchmarkId, Criterion, criterion_group, criterion_main};
use ndarray::Array2;
use std::f64::consts::TAU;
use std::hint::black_box;
use std::path::{Path, PathBuf};
use truelimb::air::{Conditions, Site, StationAir};
use truelimb::calibrate::{Calibration, Detector};
use truelimb::disk::{Darkening, DarkeningLaw, SolarEdge};
use truelimb::frames::{CubeShape, FitsWriter, Reader, list};
use truelimb::limb::geometry::Annulus;
use truelimb::limb::template::{EdgeTable, blur_of_width};
use truelimb::limb::{self, Extraction};
use truelimb::optics::{Exposure, LimbOptics, Telescope};
use truelimb::pipeline::{self, Options, Silent};
use truelimb::refraction::{Air, Moment, Plate};
use truelimb::session::{Projection, ScaleOf};
use truelimb::sky::{Orientation, Parity, SunPlace};
use truelimb::stack::{Placed, Stack, edge_energy};
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
    centre_px: (f64, f64),
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
            centre_px: centre,
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

/// A moment 40 degrees from the zenith of a mountain station.
fn moment() -> Moment {
    let site = Site {
        latitude_rad: 0.54,
        height_m: 2240.0,
    };
    let conditions = Conditions {
        pressure_hpa: 778.0,
        temperature_c: 9.0,
        relative_humidity: 0.35,
        co2_ppm: 420.0,
    };
    let zenith_true_rad = 40_f64.to_radians();
    let air =
        Air::over(&StationAir::new(site, conditions, 3.0), 550.0).expect("the air of a station");
    Moment {
        sun: SunPlace {
            zenith_true_rad,
            azimuth_rad: 3.0,
            hour_angle_rad: -0.4,
            right_ascension_rad: 1.0,
            declination_rad: 0.3,
            parallactic_rad: -0.9,
            axis_rad: 0.2,
            b0_rad: 0.1,
            l0_rad: 1.0,
            distance_au: 1.0045,
            radial_velocity_m_s: 0.0,
        },
        orientation: Orientation {
            y_position_angle_rad: 0.35,
            parity: Parity::Sky,
        },
        map: air.map(zenith_true_rad).expect("a Sun above the horizon"),
        refractivity: air.refractivity,
    }
}

fn sharpness_and_stack(c: &mut Criterion) {
    let moment = moment();
    let mut group = c.benchmark_group("frame");
    group.sample_size(20);
    for size in [1024, 2048] {
        let camera = Camera::new(size);
        let scale = 2100.0 / size as f64;
        let placed = Placed {
            moment: &moment,
            plate: Plate {
                projection: Projection::Arc,
                scale_of: ScaleOf::Apparent,
            },
            scale_arcsec_px: scale,
            flat_inverse: camera.calibration.flat_inverse(),
            detector: Detector {
                gain_e_adu: 12.0,
                read_noise_e: 8.0,
                saturation_adu: None,
            },
        };
        let mut stack = Stack::new(RADIUS_ARCSEC, scale);
        group.bench_function(BenchmarkId::new("stack", size), |b| {
            b.iter(|| stack.add(camera.frame.view(), camera.centre_px, 1.0, &placed));
        });
        let frames = stack.frames as f64;
        let means = stack.into_means();
        let middle = means.size() / 2;
        // The brightness of the surface is that of the frame at the same distance from the centre.
        let (x, y) = camera.centre_px;
        let right = (x + (middle / 2) as f64).round() as usize;
        let seen = f64::from(camera.frame[[y.round() as usize, right]]);
        let at = means.image[[middle, middle + middle / 2]] / seen;
        assert!((at - 1.0).abs() < 0.01, "{at}");
        assert!((means.weight[[middle, middle]] - frames).abs() < 1e-6 * frames);
        let centre = (means.centre_px(), means.centre_px());
        group.bench_function(BenchmarkId::new("sharpness", size), |b| {
            b.iter(|| {
                let energy = edge_energy(means.image.view(), centre, RADIUS_ARCSEC, 6.0, scale)
                    .expect("an edge");
                // An edge some arcsec wide: its energy is the inverse of some arcsec.
                assert!((0.02..0.5).contains(&(energy / LEVEL_ADU.powi(2))));
            });
        });
    }
    group.finish();
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

criterion_group!(stages, read_and_limb, sharpness_and_stack, whole_reduction);
criterion_main!(stages);
