//! Filter and exposure for the window, and what must be heeded at the telescope.

use super::air::{self, FrameNoise, Seeing};
use super::expected::sequence;
use super::{PlanError, SMEAR_LIMIT_MAS};
use crate::disk::{Darkening, DarkeningLaw, SolarEdge};
use crate::optics::definitions::inflection_arcsec;
use crate::optics::limb_profile::{LimbOptics, ProfileMaker};
use crate::optics::{Blur, Exposure, OpticsError, Telescope};
use crate::pipeline::ahead::Ahead;
use crate::result::plan::PlannedCamera;
use crate::session::Session;
use crate::shape;
use crate::units::{ARCSEC_RAD, FWHM_PER_SIGMA};

/// What must be heeded wherever optics point at the Sun.
pub const CAUTIONS: [&str; 5] = [
    "Sunlight through optics blinds and burns within a moment.",
    "A certified filter over the full aperture stands before any optics; larger apertures need a heat-rejecting entrance that was designed for the instrument.",
    "Never look through an unfiltered finder, cover every opening that is not in use, never leave the instrument unattended while sunlight can reach it.",
    "With tracking stopped, for a drift or a scan, the concentrated image walks over stop, tube and baffles: use the filter or a heat-proof stop, and keep hands and cables out of the beam. Before a turn of the instrument, cover the aperture.",
    "Local codes, the station's rules and its qualified staff come first.",
];

/// Filter and exposure at the moment of the window when the Sun stands lowest.
pub(super) fn camera(
    session: &Session,
    seeing: &Seeing,
    lowest: &Ahead,
    noise: &FrameNoise,
) -> Result<PlannedCamera, PlanError> {
    let filter = sequence(session).filter;
    let zenith_rad = lowest.sun.zenith_true_rad;
    let variance = lowest
        .band
        .as_ref()
        .map_or(0.0, |it| air::smear_arcsec2(it, lowest));
    let fwhm_arcsec = air::blur_fwhm_arcsec(session, seeing, zenith_rad)?;
    let smear_mas = smear_flattening_mas(lowest, filter.centre_nm, fwhm_arcsec, variance)?;
    // The smear's variance, and with it the flattening, goes with the square of the width.
    let widest_nm = filter.width_nm * (SMEAR_LIMIT_MAS / smear_mas).sqrt();
    let longest_exposure_s = air::coherence_s(session, seeing, zenith_rad)?;
    let peak_adu = session
        .camera
        .saturation_adu
        .map(|it| air::PEAK_SHARE.map(|share| share * it));
    let photon_share =
        peak_adu.map(|_| noise.photons_mas2 / (noise.photons_mas2 + noise.turbulence_mas2[2]));
    let mut advice = vec![format!(
        "filter at {:.0} nm: up to {widest_nm:.0} nm wide, dispersion flattens the limb by less than {SMEAR_LIMIT_MAS} mas at {:.0} deg from the zenith; the session's {:.1} nm leave {smear_mas:.4} mas. A narrower one gains nothing against the air but needs a longer exposure",
        filter.centre_nm,
        zenith_rad.to_degrees(),
        filter.width_nm
    )];
    advice.push(format!(
        "exposure: {:.1} ms or shorter freezes the image and keeps its width a measure of the seeing; longer ones blur the limb without lowering the floor",
        1000.0 * longest_exposure_s
    ));
    advice.push(match (peak_adu, photon_share) {
        (Some([least, most]), Some(share)) => format!(
            "light: brightest pixels of the disk at {least:.0} to {most:.0} ADU, none saturated; photons are then {:.2} percent of the variance of a frame",
            100.0 * share
        ),
        _ => "light: brightest pixels of the disk at 60 to 80 percent of the saturation, which the session does not give (camera.saturation_adu)".to_owned(),
    });
    Ok(PlannedCamera {
        centre_nm: filter.centre_nm,
        width_nm: filter.width_nm,
        smear_flattening_mas: smear_mas,
        widest_nm,
        smear_limit_mas: SMEAR_LIMIT_MAS,
        longest_exposure_s,
        exposure_s: air::EXPOSURE_S,
        peak_adu,
        photon_share,
        advice,
    })
}

/// Horizontal minus vertical radius of a round limb's inflection when its blur is the larger along the
/// vertical by a variance.
fn smear_flattening_mas(
    moment: &Ahead,
    wavelength_nm: f64,
    fwhm_arcsec: f64,
    variance_arcsec2: f64,
) -> Result<f64, PlanError> {
    const STEPS_PER_SIGMA: f64 = 40.0;
    let told = |it: crate::disk::DiskError| PlanError::from(crate::pipeline::Error::from(it));
    let optic = |it: OpticsError| PlanError::from(crate::pipeline::Error::from(it));
    let sigma_arcsec = fwhm_arcsec / FWHM_PER_SIGMA;
    // The smear is far smaller than the blur: a larger one, taken back in proportion, keeps the digits.
    let tried_arcsec2 = 0.01 * sigma_arcsec * sigma_arcsec;
    let larger_arcsec = (sigma_arcsec * sigma_arcsec + tried_arcsec2).sqrt();
    let optics = LimbOptics {
        edge: SolarEdge {
            radius_arcsec: shape::reference_radius_rad(moment.sun.distance_au) / ARCSEC_RAD,
            scale_arcsec: 0.0,
            darkening: Darkening::new(DarkeningLaw::Neckel2005, wavelength_nm).map_err(told)?,
        },
        telescope: Telescope {
            aperture_m: f64::INFINITY,
            central_obstruction: 0.0,
        },
        wavelength_nm,
        exposure: Exposure::Long,
    };
    let span_arcsec = 4.0 * larger_arcsec + 1.0;
    let maker = ProfileMaker::new(&optics, span_arcsec, sigma_arcsec / STEPS_PER_SIGMA, 0.0)
        .map_err(optic)?;
    let place = |gaussian_sigma_arcsec: f64| -> Result<f64, OpticsError> {
        let blur = Blur {
            r0_m: f64::INFINITY,
            gaussian_sigma_arcsec,
        };
        inflection_arcsec(&maker.profile(&blur, 0.0), &maker.grid())
    };
    let shift_arcsec = place(sigma_arcsec).map_err(optic)? - place(larger_arcsec).map_err(optic)?;
    Ok(1000.0 * shift_arcsec * variance_arcsec2 / tried_arcsec2)
}
