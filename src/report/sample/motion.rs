//! An invented drift and an invented scan.

use super::{Noise, shape};
use crate::result::record::*;

pub(super) fn camera() -> CameraRecord {
    let number = |nominal: (f64, f64), drift: (f64, f64), unit: &str, used: &str| CameraNumber {
        nominal: Quantity::measured(nominal.0, nominal.1, unit),
        drift: Quantity::measured(drift.0, drift.1, unit),
        pull: (drift.0 - nominal.0) / drift.1.hypot(nominal.1),
        used: used.to_owned(),
    };
    CameraRecord {
        scale: number((2.05, 4.1e-4), (2.050_31, 9.4e-5), "arcsec/px", "drift"),
        angle: number((3.2, 0.03), (3.171, 0.0061), "deg", "drift"),
    }
}

pub(super) fn drift(noise: &mut Noise) -> DriftRecord {
    let centres: Vec<DriftPoint> = (0..60)
        .map(|k| DriftPoint {
            along_px: -400.0 + 13.5 * f64::from(k),
            along_mas: 420.0 * noise.normal(),
            across_mas: 380.0 * noise.normal(),
        })
        .collect();
    DriftRecord {
        sequence: 8,
        frames_used: 60,
        frames_at_edge: 4,
        scale: Quantity::measured(2.050_31, 9.4e-5, "arcsec/px"),
        angle: Quantity::measured(3.171, 0.0061, "deg"),
        travel_arcsec: 1633.2,
        velocity_px_s: [6.71, -0.37],
        noise_arcsec: [0.424, 0.387],
        correlated_share: 0.43,
        correlation_time_s: 1.9,
        independent_frames: 41.7,
        readout_s: None,
        scale_by_readout_per_ms: 3.6e-7,
        distortion: (0..8)
            .map(|k| DistortionPoint {
                along_px: -350.0 + 100.0 * f64::from(k),
                frames: 7,
                along_mas: 170.0 * noise.normal(),
                along_sigma_mas: 171.0,
                across_mas: 150.0 * noise.normal(),
                across_sigma_mas: 153.0,
            })
            .collect(),
        centres,
    }
}

pub(super) fn scan(noise: &mut Noise) -> ScanRecord {
    ScanRecord {
        sequence: 9,
        lines: 620,
        slit_px: 1024,
        across_arcsec_s: 13.71,
        oblique_deg: 2.9,
        slit_angle: Quantity::measured(3.18, 0.004, "deg"),
        transits: (0..6)
            .map(|transit| TransitRecord {
                transit,
                time_utc: "2026-06-21T06:02:11.204".to_owned(),
                duration_s: 137.8 + 0.01 * noise.normal(),
                across_slit_arcsec: 959.83 + 0.06 * noise.normal(),
                along_slit_arcsec: 959.91 + 0.09 * noise.normal(),
            })
            .collect(),
        lost: vec!["transit 6: a cloud".to_owned()],
        limb_angle_deg: (0..48).map(|k| 3.75 + 7.5 * f64::from(k)).collect(),
        limb_mas: (0..48).map(|_| 40.0 * noise.normal()).collect(),
        limb_sigma_mas: (0..48).map(|_| 35.0 + 8.0 * noise.uniform()).collect(),
    }
}

pub(super) fn by_scan() -> ByScan {
    ByScan {
        radius: shape(959.846, 0.029, 0.014, "arcsec"),
        oblateness: shape(41.0, 38.0, 79.0, "mas"),
        slit_scale_error: Quantity::measured(-3.1e-5, 8.8e-5, "1"),
        transits: 6,
        scatter_mas: 71.0,
        radius_difference_sigma: Some(-0.62),
        oblateness_difference_sigma: Some(0.37),
        budget: vec![BudgetLine {
            term: "slit scale".to_owned(),
            sigma_mas: Some(78.0),
            sigma_radius_mas: 2.4,
            kind: "systematic".to_owned(),
            scope: "session".to_owned(),
            how: "camera.scale_sigma_rel, or that of a drift".to_owned(),
        }],
        reason: None,
    }
}
