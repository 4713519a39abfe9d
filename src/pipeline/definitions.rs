//! Radius and oblateness by other definitions of the limb, so that published values can be met.
//!
//! The template gives the unblurred limb; where the blurred limb has its inflection point, or where
//! its finite Fourier transform crosses zero, follows from the same template at the blur that was
//! measured, around the limb for the oblateness.

use super::measure::MeasuredSequence;
use crate::limb::Flag;
use crate::limb::template::width_of_blur_arcsec;
use crate::optics::definitions::{fftd_arcsec, half_intensity_arcsec, inflection_arcsec};
use crate::optics::limb_profile::{Blur, ProfileMaker};
use crate::result::record::{DefinitionRecord, ShapeQuantity};
use crate::units::ARCSEC_RAD;

/// Windows of the finite Fourier transform, arcsec.
const WINDOWS_ARCSEC: [f64; 2] = [10.0, 20.0];

/// Distance and step of the profiles, arcsec.
const PROFILE_ARCSEC: (f64, f64) = (30.0, 0.02);

/// Every definition at the session's mean blur.
pub(super) fn list(
    measured: &[MeasuredSequence],
    radius: &ShapeQuantity,
    oblateness: &ShapeQuantity,
    blur: f64,
) -> Vec<DefinitionRecord> {
    let mut out = vec![DefinitionRecord {
        definition: "template: inflection of the unblurred limb".to_owned(),
        radius_arcsec: radius.value,
        displacement_mas: Some(0.0),
        oblateness_mas: oblateness.value,
        how: "fit of the blurred, pixel-integrated limb to raw pixels".to_owned(),
    }];
    let Some(first) = measured.first() else {
        return out;
    };
    let distance = first.middle.sun.distance_au;
    let anisotropy = blur_cos2(measured);
    let mut push = |definition: String, at: &dyn Fn(f64) -> Option<f64>| {
        let here = at(blur);
        let step = 0.05 * blur + 0.01;
        let slope = at(blur + step).zip(here).map(|(a, b)| (a - b) / step);
        out.push(DefinitionRecord {
            definition,
            radius_arcsec: radius.value.zip(here).map(|(r, d)| r + d * distance),
            displacement_mas: here.map(|it| 1000.0 * it * distance),
            // Equatorial minus polar radius is -2 times the coefficient of cos 2 about the pole.
            oblateness_mas: oblateness
                .value
                .zip(slope)
                .map(|(o, k)| o - 2.0 * 1000.0 * k * anisotropy * distance),
            how: format!(
                "from the template at the measured blur {:.2} arcsec, and its change around the limb",
                width_of_blur_arcsec(blur)
            ),
        });
    };
    let optics = first.setup.optics;
    let pixel = first.setup.scale_arcsec_px;
    let Ok(maker) = ProfileMaker::new(&optics, PROFILE_ARCSEC.0, PROFILE_ARCSEC.1, pixel) else {
        return out;
    };
    let grid = maker.grid();
    let profile = |blur: f64| {
        let width_rad = width_of_blur_arcsec(blur) * ARCSEC_RAD;
        let r0_m = if width_rad > 0.0 {
            optics.wavelength_nm * 1e-9 / width_rad
        } else {
            f64::INFINITY
        };
        maker.profile(
            &Blur {
                r0_m,
                gaussian_sigma_arcsec: 0.0,
            },
            0.0,
        )
    };
    push("inflection of the blurred limb".to_owned(), &|blur| {
        inflection_arcsec(&profile(blur), &grid).ok()
    });
    push(
        "half-intensity: half of the brightness at 10 arcsec inside".to_owned(),
        &|blur| half_intensity_arcsec(&profile(blur), &grid).ok(),
    );
    for window in WINDOWS_ARCSEC {
        push(
            format!("finite Fourier transform, window {window} arcsec"),
            &|blur| fftd_arcsec(&profile(blur), &grid, window).ok(),
        );
    }
    out
}

/// Coefficient of `cos 2` about the solar axis in the mean blur around the limb.
fn blur_cos2(measured: &[MeasuredSequence]) -> f64 {
    let (mut sum, mut weight) = (0.0, 0.0);
    for sequence in measured.iter().filter(|it| it.set_aside.is_none()) {
        for frame in &sequence.frames {
            let (axis, _) = frame.moment.axis_and_zenith_rad();
            for (s, it) in frame
                .limb
                .sectors
                .iter()
                .enumerate()
                .filter(|it| it.1.flag == Flag::Good)
            {
                let c = (2.0 * (frame.limb.angle_rad(s) - axis)).cos();
                sum += it.blur * c;
                weight += c * c;
            }
        }
    }
    sum / weight
}
