//! Source: D. L. Fried, J. Opt. Soc. Am. 56, 1372 (1966), for the scaling of r0; A. Tokovinin,
//! Publ. Astron. Soc. Pacific 114, 1156 (2002), for the outer scale (both from memory); and a table
//! of the width of the seeing disk from the exact transfer function, not made with this program.

use truelimb::seeing::{
    SeeingError, coherence_time_s, effective_count, effective_count_of_power, fwhm_arcsec,
    r0_at_wavelength_m, r0_line_of_sight_m, r0_zenith_m,
};
use truelimb::units::{ARCSEC_RAD, DEG_RAD};

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

#[test]
fn r0_scales_with_wavelength_and_zenith_distance() {
    // (656/500)^(6/5) = 1.385 and cos(60 deg)^(3/5) = 0.6598.
    assert!((r0_at_wavelength_m(0.05, 656.0).unwrap() / 0.05 - 1.385).abs() < 5e-4);
    assert!((r0_line_of_sight_m(0.1, 60.0 * DEG_RAD).unwrap() / 0.1 - 0.6598).abs() < 5e-5);
    assert!((r0_zenith_m(0.06598, 60.0 * DEG_RAD).unwrap() - 0.1).abs() < 1e-5);
    assert!(matches!(
        r0_zenith_m(0.05, 85.0 * DEG_RAD),
        Err(SeeingError::OutOfRange {
            name: "zenith distance",
            ..
        })
    ));
}

#[test]
fn the_width_of_the_seeing_disk() {
    let unit_arcsec = 500e-9 / 0.05 / ARCSEC_RAD;
    let width = fwhm_arcsec(0.05, 500.0, None).unwrap();
    assert!((width / unit_arcsec - 0.9759).abs() < 1e-4, "{width}");
    for line in include_str!("../data/seeing_outer_scale.csv")
        .lines()
        .filter(|line| !line.starts_with('#'))
        .skip(1)
    {
        let it: Vec<f64> = line.split(',').map(|it| it.parse().unwrap()).collect();
        let width = fwhm_arcsec(0.05, 500.0, Some(0.05 * it[0])).unwrap();
        // The published approximation to its own digits, and to the exact width within its error.
        assert!(
            (width / unit_arcsec / 0.97586 - it[3]).abs() < 1e-6,
            "{line}"
        );
        assert!((width / unit_arcsec / it[1] - 1.0).abs() < 0.0135, "{line}");
    }
    assert!(fwhm_arcsec(0.05, 500.0, Some(0.9)).is_err());
    // tau0 = 0.314 r0 / V (Roddier 1981).
    assert!((coherence_time_s(0.05, 10.0).unwrap() - 1.57e-3).abs() < 1e-9);
}

/// First-order autoregression: correlation `rho^k`.
fn remembering(rng: &mut ChaCha8Rng, count: usize, rho: f64) -> Vec<f64> {
    let mut last: f64 = StandardNormal.sample(rng);
    (0..count)
        .map(|_| {
            let fresh: f64 = StandardNormal.sample(rng);
            last = rho * last + (1.0 - rho * rho).sqrt() * fresh;
            last
        })
        .collect()
}

#[test]
fn a_series_with_memory_holds_fewer_independent_frames() {
    // N_eff of the mean is N (1 - rho)/(1 + rho), of the variance N (1 - rho^2)/(1 + rho^2).
    let mut rng = ChaCha8Rng::seed_from_u64(3);
    for rho in [0.0, 0.5, 0.8] {
        let (mut mean, mut power) = (0.0, 0.0);
        let (runs, count) = (40, 2000);
        for _ in 0..runs {
            let time_s: Vec<f64> = (0..count).map(|k| 0.1 * k as f64).collect();
            let values = remembering(&mut rng, count, rho);
            mean += effective_count(&time_s, &values).unwrap().by_sequence / f64::from(runs);
            power += effective_count_of_power(&time_s, &[&values]).unwrap() / f64::from(runs);
        }
        let wanted_mean = count as f64 * (1.0 - rho) / (1.0 + rho);
        let wanted_power = (1.0 - rho * rho) / (1.0 + rho * rho);
        assert!(
            (mean / wanted_mean - 1.0).abs() < 0.1,
            "rho {rho}: {mean} {wanted_mean}"
        );
        assert!(
            (power / wanted_power - 1.0).abs() < 0.05,
            "rho {rho}: {power} {wanted_power}"
        );
    }
}

#[test]
fn a_gap_in_time_is_no_memory() {
    // Two runs with memory, an hour apart and in the wrong order: the index would call the last
    // frame of one and the first of the other neighbours.
    let mut rng = ChaCha8Rng::seed_from_u64(4);
    let (mut whole, mut parted) = (0.0, 0.0);
    for _ in 0..40 {
        let values = remembering(&mut rng, 1200, 0.8);
        let time_s: Vec<f64> = (0..1200).map(|k| f64::from(k) * 0.1).collect();
        whole += effective_count_of_power(&time_s, &[&values]).unwrap() / 40.0;
        let shuffled: Vec<(f64, f64)> = (0..600)
            .map(|k| (3600.0 + time_s[k], values[k]))
            .chain((600..1200).map(|k| (time_s[k], values[k])))
            .collect();
        let (times, values): (Vec<f64>, Vec<f64>) = shuffled.into_iter().unzip();
        parted += effective_count_of_power(&times, &[&values]).unwrap() / 40.0;
    }
    assert!((parted / whole - 1.0).abs() < 0.05, "{parted} {whole}");
    // A drift never forgets: the batch variance keeps rising, or nearly every frame is dependent.
    let time_s: Vec<f64> = (0..400).map(f64::from).collect();
    let drift: Vec<f64> = time_s.iter().map(|t| 0.01 * t).collect();
    assert!(effective_count(&time_s, &drift).unwrap().count < 8.0);
    assert!(effective_count(&time_s[..3], &drift[..3]).is_none());
    assert!(effective_count(&[0.0; 8], &drift[..8]).is_none());
}
