//! Source: `orientation_design.csv`, an independent least-squares design in spherical-triangle
//! geometry: a frame every 10 minutes above 20 degrees of altitude, 10 mas a frame and coefficient,
//! rolls in turn. Its set "sun(c only)+ins+refr" is ours: cosine terms of the Sun, distortion of m = 2
//! and 4, scale of the refractivity.

use super::refraction_tables::table;
use truelimb::shape::{
    AirResponse, COMPONENTS, Known, Observation, RefractivityInput, blocks, fit, judge,
};
use truelimb::units::DEG_RAD;

const SIGMA_MAS: f64 = 10.0;

/// The frames of one day.
fn day(
    lat_rad: f64,
    dec_rad: f64,
    p_rad: f64,
    turning: bool,
    rolls_deg: &[f64],
) -> Vec<Observation> {
    let mut out = Vec::new();
    for step in -60..=60 {
        let hour_rad = f64::from(step) * 2.5 * DEG_RAD;
        let cos_z = lat_rad.sin() * dec_rad.sin() + lat_rad.cos() * dec_rad.cos() * hour_rad.cos();
        if cos_z <= (70.0 * DEG_RAD).cos() {
            continue;
        }
        let zenith_rad = cos_z.acos();
        let parallactic_rad = hour_rad
            .sin()
            .atan2(lat_rad.tan() * dec_rad.cos() - dec_rad.sin() * hour_rad.cos());
        let roll_rad = rolls_deg[out.len() % rolls_deg.len()] * DEG_RAD;
        let north_rad = if turning {
            roll_rad - parallactic_rad
        } else {
            roll_rad
        };
        out.push(Observation {
            // Every frame by itself: a frame has no scatter of its own, its noise is stated.
            sequence: out.len(),
            time_s: 600.0 * out.len() as f64,
            axis_rad: north_rad + p_rad,
            zenith_rad: north_rad + parallactic_rad,
            b0_rad: 0.0,
            weight: 1.0,
            harmonics_mas: [0.0; COMPONENTS],
            noise_mas2: [SIGMA_MAS * SIGMA_MAS; COMPONENTS],
            air: AirResponse {
                cos2_mas: zenith_rad.tan().powi(2),
                sin_zenith: zenith_rad.sin(),
                ..AirResponse::default()
            },
        });
    }
    out
}

/// Nothing is known of the refractivity, everything of the rest.
fn known() -> Known {
    Known {
        refractivity: vec![RefractivityInput {
            term: "pressure",
            sigma_rel: 1e6,
            scope: "session",
            how: String::new(),
        }],
        vertical_sigma_mas: 0.0,
        camera_angle_sigma_rad: 0.0,
        scale_sigma_rel: 0.0,
        clock_sigma_s: 0.0,
        vertical_direction_sigma_arcmin: 0.0,
        tilt_sigma_arcmin: 0.0,
        tilt_tau_s: 1800.0,
        distortion_sigma_mas: None,
        drivers: Vec::new(),
    }
}

#[test]
fn what_is_told_apart_and_how_well() {
    let mut measured = 0;
    let mut open = 0;
    for row in table("orientation_design.csv").rows() {
        if row.text("unknown_set") != "sun(c only)+ins+refr" {
            continue;
        }
        let rolls: Vec<f64> = match row.text("rolls") {
            "none" => vec![0.0],
            "0/90" => vec![0.0, 90.0],
            "0/45/90/135" => vec![0.0, 45.0, 90.0, 135.0],
            "16x22.5" => (0..16).map(|k| 22.5 * f64::from(k)).collect(),
            "32x11.25" => (0..32).map(|k| 11.25 * f64::from(k)).collect(),
            other => panic!("{other}"),
        };
        let at = |name: &str| row.number(name);
        let turning = row.text("mount") == "altaz";
        let frames = day(
            at("lat_deg") * DEG_RAD,
            at("dec_deg") * DEG_RAD,
            at("P_deg") * DEG_RAD,
            turning,
            &rolls,
        );
        let case = ["lat_deg", "dec_deg", "P_deg", "mount", "rolls"]
            .map(|it| row.text(it))
            .join(" ");
        assert_eq!(frames.len(), at("n_frames") as usize, "{case}");
        let (blocks, _) = blocks(&frames);
        let separability = judge(&frames, &blocks, false);
        let (c2, c4) = (
            row.text("sigma_sun_c2_mas(sigma_frame=10)"),
            row.text("sigma_sun_c4_mas(sigma_frame=10)"),
        );
        if c2.is_empty() {
            // No roll leaves everything open, 0/90 the fourth harmonic.
            assert_eq!(
                separability.oblateness,
                row.text("rolls") == "0/90",
                "{case}"
            );
            assert!(!separability.p4, "{case}");
            open += 1;
            continue;
        }
        assert!(separability.oblateness && separability.p4, "{case}");
        let fit = fit(&frames, &blocks, &known(), &separability).unwrap();
        let [_, oblateness, p4] = fit.sigmas_mas(true);
        let refractivity = fit
            .contributions
            .iter()
            .find(|it| it.term == "pressure")
            .unwrap();
        // Equator minus pole is twice the cosine's amplitude; P4 has 35/64 of its own in m = 4.
        let found = [
            0.5 * oblateness.hypot(refractivity.oblateness_mas2.sqrt()),
            35.0 / 64.0 * p4.hypot(refractivity.p4_mas2.sqrt()),
        ];
        for (found, wanted) in found.into_iter().zip([c2, c4]) {
            let wanted: f64 = wanted.parse().unwrap();
            assert!((found - wanted).abs() < 0.006, "{found} {wanted} {case}");
        }
        measured += 1;
    }
    assert_eq!((measured, open), (96, 24));
}
