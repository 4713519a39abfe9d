//! What belongs to a camera and filter: the template's optics, the annulus, the calibration.

use crate::calibrate::{self, Calibration, Detector};
use crate::disk::{Darkening, SolarEdge};
use crate::frames;
use crate::limb::blemish;
use crate::limb::geometry::Annulus;
use crate::limb::template::EdgeTable;
use crate::optics::limb_profile::LimbOptics;
use crate::optics::{Exposure, Telescope};
use crate::pipeline::Error;
use crate::refraction::{Moment, Plate};
use crate::session::{Sequence, Session};
use crate::units::ARCSEC_RAD;
use std::path::PathBuf;
use std::sync::Arc;

/// What belongs to a camera and filter: made once, shared by the sequences that use them.
#[derive(Clone, Debug)]
pub struct Setup {
    /// Tables of the blurred limb.
    pub table: EdgeTable,
    /// Pixels of the annulus.
    pub annulus: Annulus,
    /// Dark, flat, bad pixels.
    pub calibration: Calibration,
    /// Median of the dark, ADU.
    pub dark_adu: f64,
    /// Gain, read noise, saturation.
    pub detector: Detector,
    /// The plate.
    pub plate: Plate,
    /// Plate scale, arcsec a pixel.
    pub scale_arcsec_px: f64,
    /// Optics of the template.
    pub optics: LimbOptics,
    /// Limb inside and outside the annulus, arcsec.
    pub window_arcsec: (f64, f64),
    /// What it was made for.
    key: SetupKey,
}

/// Darks, flats, width, height and the bits of the numbers that set one setup apart.
type SetupKey = (Vec<PathBuf>, Vec<PathBuf>, usize, usize, [u64; 4]);

/// The shared setup of this camera, filter and calibration; made when it is not there yet.
pub(super) fn setup(
    session: &Session,
    sequence: &Sequence,
    list: &frames::Sequence,
    middle: &Moment,
    shared: &mut Vec<Arc<Setup>>,
) -> Result<Arc<Setup>, Error> {
    let camera = &sequence.camera;
    let (width, height) = (list.width, list.height);
    let key: SetupKey = (
        sequence.calibration.dark.clone(),
        sequence.calibration.flat.clone(),
        width,
        height,
        [
            camera.scale_arcsec_px.to_bits(),
            sequence.filter.centre_nm.to_bits(),
            camera.gain_e_adu.to_bits(),
            u64::from(camera.projection == crate::session::Projection::Tan),
        ],
    );
    if let Some(it) = shared.iter().find(|it| it.key == key) {
        return Ok(Arc::clone(it));
    }
    let calibration = calibrate::load(
        &sequence.calibration.dark,
        &sequence.calibration.flat,
        camera.bad_pixels.as_deref(),
        (width, height),
        camera.saturation_adu,
        &calibrate::Limits::default(),
    )?;
    let dark_adu = blemish::median(calibration.dark_adu().iter().map(|&it| f64::from(it)));
    let detector = Detector {
        gain_e_adu: camera.gain_e_adu,
        read_noise_e: camera.read_noise_e,
        saturation_adu: camera.saturation_adu,
    }
    .checked()?;
    let plate = Plate {
        projection: camera.projection,
        scale_of: camera.scale_of,
    };
    let scale = camera.scale_arcsec_px;
    let optics = limb_optics(session, sequence, middle, session.limb.edge_scale_km)?;
    let sectors = session.limb.sectors;
    let angles: Vec<f64> = (0..sectors).map(|s| sector_angle_rad(s, sectors)).collect();
    let window_arcsec = (
        session
            .limb
            .window_inside_arcsec
            .unwrap_or_else(|| larger(10.0, 3.5 * scale)),
        session
            .limb
            .window_outside_arcsec
            .unwrap_or_else(|| larger(8.0, 3.0 * scale)),
    );
    let table = EdgeTable::new(&optics, 0.0, scale, &angles)?;
    let radii: Vec<f64> = angles
        .iter()
        .map(|&it| middle.predicted_arcsec(plate, it))
        .collect();
    let mean = radii.iter().sum::<f64>() / radii.len() as f64;
    // Room for the day's change of refraction and of the apparent radius.
    let reach = 0.002 * mean + 2.0;
    let annulus = Annulus::new(
        sectors,
        angles[0],
        scale,
        (mean - reach, mean + reach),
        window_arcsec,
    );
    let it = Arc::new(Setup {
        table,
        annulus,
        calibration,
        dark_adu,
        detector,
        plate,
        scale_arcsec_px: scale,
        optics,
        window_arcsec,
        key,
    });
    shared.push(Arc::clone(&it));
    Ok(it)
}

/// The larger of two; the second when one is no number.
pub(super) fn larger(a: f64, b: f64) -> f64 {
    if a > b { a } else { b }
}

/// Detector angle of a sector's middle: half a sector off the axes, so that the pixel grid's symmetry
/// folds them onto few classes.
fn sector_angle_rad(sector: usize, sectors: usize) -> f64 {
    std::f64::consts::TAU * (sector as f64 + 0.5) / sectors as f64
}

/// The optics of the template for a given thickness of the Sun's edge.
pub(in crate::pipeline) fn limb_optics(
    session: &Session,
    sequence: &Sequence,
    middle: &Moment,
    edge_scale_km: f64,
) -> Result<LimbOptics, Error> {
    let distance = middle.sun.distance_au;
    let radius_arcsec = crate::shape::reference_radius_rad(distance) / ARCSEC_RAD;
    let km_arcsec = 1000.0 / (crate::constants::ASTRONOMICAL_UNIT.value * distance) / ARCSEC_RAD;
    Ok(LimbOptics {
        edge: SolarEdge {
            radius_arcsec,
            scale_arcsec: edge_scale_km * km_arcsec,
            darkening: Darkening::new(
                crate::disk::DarkeningLaw::Neckel2005,
                sequence.filter.centre_nm,
            )?,
        },
        telescope: Telescope {
            aperture_m: session.telescope.aperture_m,
            central_obstruction: session.telescope.central_obstruction,
        },
        wavelength_nm: sequence.filter.centre_nm,
        exposure: Exposure::Short,
    })
}

/// Predicted radius by sector and its slope by angle, arcsec.
pub(in crate::pipeline) fn predicted(setup: &Setup, moment: &Moment) -> (Vec<f64>, Vec<f64>) {
    let count = setup.annulus.sectors();
    let step = 0.25 * setup.annulus.sector_rad();
    let at = |theta: f64| moment.predicted_arcsec(setup.plate, theta);
    (0..count)
        .map(|s| {
            let theta = setup.annulus.angle_rad(s);
            (
                at(theta),
                (at(theta + step) - at(theta - step)) / (2.0 * step),
            )
        })
        .unzip()
}
