//! The outcome of the stages put into the records of the result.

use super::correct::CorrectedSequence;
use super::limb_model::LimbModel;
use super::measure::MeasuredSequence;
use super::solve::{SeeingResult, Selected, Shape, frame_r0_m, zenith_factor};
use super::stacking::Stacks;
use super::{Options, SetAside, definitions};
use crate::budget;
use crate::result::record::{
    AirRecord, BudgetLine, ByStack, Covariance, DistortionRecord, FrameTrace, HarmonicRecord,
    HoursTo, LayerRecord, LimbTrace, MaskedArc, NullTest, PowerRecord, Quadrupole, Quantity,
    Record, RefractionRecord, Rejection, SCHEMA_VERSION, SeeingRecord, SelectionRecord, Separation,
    SequenceRecord, ShapeQuantity, ShapeRecord, SourceFile, Status, Traces, TurbulenceRecord,
    WarningRecord,
};
use crate::seeing::LEAST_FRAMES;
use crate::session::Session;
use crate::shape::{Contribution, Fit, Known, REFERENCE_RADIUS_MAS};
use crate::stack::Stack;
use ndarray::Array2;
use statrs::distribution::{ContinuousCDF, StudentsT};
use std::f64::consts::TAU;

/// Everything the record is made from.
pub(super) struct Parts<'a> {
    pub(super) session: &'a Session,
    pub(super) options: &'a Options,
    pub(super) measured: &'a [MeasuredSequence],
    pub(super) limbs: &'a [CorrectedSequence],
    pub(super) set_aside: &'a [SetAside],
    pub(super) seeing: &'a SeeingResult,
    pub(super) selected: &'a Selected,
    pub(super) shape: &'a Shape,
    pub(super) by_stack: &'a Result<Fit, String>,
    pub(super) model: &'a LimbModel,
    pub(super) known: &'a Known,
    pub(super) stacks: &'a Stacks,
    pub(super) sources: Vec<SourceFile>,
}

/// The record and what the figures show beside it.
pub(super) fn record(p: &Parts<'_>) -> (Record, Traces) {
    let first = &p.measured[0];
    let last = &p.measured[p.measured.len() - 1];
    let end = last.frames.last().map_or(last.middle_utc, |it| it.utc);
    let mut record = Record {
        schema_version: SCHEMA_VERSION,
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        site_name: p.session.site.name.clone(),
        time_utc: [first.frames[0].utc.to_iso(), end.to_iso()],
        summary: String::new(),
        created_from: p.sources.clone(),
        settings: crate::session::resolved(p.session),
        seed: p.options.seed,
        shape: shape(p),
        seeing: seeing(p),
        turbulence: turbulence(p),
        refraction: p
            .measured
            .iter()
            .map(|it| refraction(it, p.known))
            .collect(),
        selection: selection(p),
        budget: budget_lines(p),
        sequences: sequences(p),
        masked: p.measured.iter().flat_map(masked).collect(),
        warnings: warnings(p),
    };
    record.summary = crate::report::summary_sentence(&record);
    (record, traces(p))
}

/// All lines of the budget.
fn lines<'a>(p: &'a Parts<'_>, fit: &'a Fit) -> impl Iterator<Item = &'a Contribution> {
    fit.contributions.iter().chain(&p.model.lines)
}

/// Multiple of the standard uncertainty that holds a share of Student's distribution.
fn reach(degrees: f64, share: f64) -> f64 {
    let at = 0.5 + 0.5 * share;
    StudentsT::new(0.0, 1.0, degrees.max(2.0)).map_or(f64::NAN, |it| it.inverse_cdf(at))
}

/// Share of a normal distribution within one standard deviation.
const ONE_SIGMA: f64 = 0.682_689_492;

/// A quantity of the shape with intervals: the random part's degrees of freedom count.
fn quantity(value: f64, random: f64, systematic: f64, degrees: f64, unit: &str) -> ShapeQuantity {
    let total = random.hypot(systematic);
    // Welch-Satterthwaite (GUM G.4.1): the systematic parts are taken as known.
    let effective = if random > 0.0 {
        degrees * (total / random).powi(4)
    } else {
        1e6
    };
    let effective = if effective < 1e6 { effective } else { 1e6 };
    let (one, two) = (reach(effective, ONE_SIGMA), reach(effective, 0.95));
    ShapeQuantity {
        value: Some(value),
        sigma: Some(one * total),
        unit: unit.to_owned(),
        sigma_random: Some(random),
        sigma_systematic: Some(systematic),
        interval_68: Some([value - one * total, value + one * total]),
        interval_95: Some([value - two * total, value + two * total]),
        status: Status::Measured,
        reason: None,
    }
}

fn open(unit: &str, reason: String) -> ShapeQuantity {
    ShapeQuantity {
        value: None,
        sigma: None,
        unit: unit.to_owned(),
        sigma_random: None,
        sigma_systematic: None,
        interval_68: None,
        interval_95: None,
        status: Status::NotSeparated,
        reason: Some(reason),
    }
}

/// Why the Sun's figure is not separated, and the cheapest observation that would separate it.
fn why_not(p: &Parts<'_>, what: &str) -> String {
    let turned = p.shape.separability.turned_deg;
    format!(
        "{what} cannot be told from a distortion of the instrument: the Sun's axis turned by only {turned:.2} degrees on the detector. Turn camera and telescope together about the optical axis between bursts, in four steps of 45 degrees (kind = \"roll\", roll_deg = 0, 45, 90, 135), or state how free of distortion the optics is known to be ([instrument] distortion_sigma_mas)"
    )
}

/// The three quantities of a fit.
fn three(p: &Parts<'_>, fit: &Fit) -> [ShapeQuantity; 3] {
    let random = budget::total(lines(p, fit).filter(|it| it.random));
    let systematic = budget::total(lines(p, fit).filter(|it| !it.random));
    let degrees = fit.degrees;
    let separability = &p.shape.separability;
    let oblateness = if separability.oblateness {
        quantity(
            fit.oblateness_mas(),
            random[1],
            systematic[1],
            degrees,
            "mas",
        )
    } else {
        open("mas", why_not(p, "the oblateness"))
    };
    let p4 = if separability.p4 {
        quantity(fit.p4_mas(), random[2], systematic[2], degrees, "mas")
    } else {
        open("mas", why_not(p, "the next harmonic"))
    };
    let radius = quantity(
        (fit.radius_mas() - p.model.radius_bias_mas) / 1000.0,
        random[0] / 1000.0,
        systematic[0] / 1000.0,
        degrees,
        "arcsec",
    );
    [radius, oblateness, p4]
}

fn shape(p: &Parts<'_>) -> ShapeRecord {
    let fit = &p.shape.fit;
    let [radius, oblateness, p4] = three(p, fit);
    let (with_instrument, with_air) = fit.correlations();
    let separability = &p.shape.separability;
    let [scale, vertical] = fit.air();
    ShapeRecord {
        null_tests: null_tests(p),
        instrument: (2..=4).map(|m| distortion(p, m)).collect(),
        air: AirRecord {
            scale: if p.known.refractivity.is_empty() {
                Quantity::missing("1", "above the air")
            } else {
                Quantity::measured(1.0 + scale.0, scale.1, "1")
            },
            vertical_residual: Quantity::measured(vertical.0, vertical.1, "mas"),
        },
        separation: Separation {
            rank: separability.rank,
            unknowns: separability.unknowns,
            condition_number: separability.condition_number(),
            correlation_sun_instrument: separability.oblateness.then_some(with_instrument),
            correlation_sun_air: separability.oblateness.then_some(with_air),
            singular_values: separability.singular_values.clone(),
        },
        by_stack: by_stack(p, &oblateness),
        covariance: Covariance {
            terms: fit.terms.clone(),
            units: fit.units.iter().map(|it| (*it).to_owned()).collect(),
            matrix: fit
                .covariance
                .row_iter()
                .map(|row| row.iter().copied().collect())
                .collect(),
        },
        definitions: definitions::list(p.measured, &radius, &oblateness, p.model.blur),
        kept_curve: p.shape.curve.clone(),
        quadrupole: quadrupole(&oblateness),
        oblateness,
        radius,
        p4,
    }
}

fn null_tests(p: &Parts<'_>) -> Vec<NullTest> {
    let fit = &p.shape.fit;
    let scale = fit.excess.sqrt();
    let test = |test: &str, found: Option<(f64, f64)>, reason: &str| NullTest {
        test: test.to_owned(),
        value: found.map(|it| it.0),
        sigma: found.map(|it| it.1 * scale),
        unit: "mas".to_owned(),
        reason: found.is_none().then(|| reason.to_owned()),
    };
    let open = "not separated from the instrument";
    vec![
        test(
            "sine of m = 2 about the solar axis",
            p.shape.sines.map(|it| it.second_mas),
            open,
        ),
        test(
            "sine of m = 4 about the solar axis",
            p.shape.sines.map(|it| it.fourth_mas),
            open,
        ),
        test(
            "oblateness of the early half of the sequences minus the late half",
            p.shape.halves,
            "one of the halves alone does not separate Sun and instrument",
        ),
        test(
            "oblateness against kept fraction: sharpest 40 percent minus all",
            kept_slope(p),
            open,
        ),
    ]
}

/// Oblateness of the sharpest 40 percent minus that of all, with the error of a subset against its
/// whole.
fn kept_slope(p: &Parts<'_>) -> Option<(f64, f64)> {
    let at = |fraction: f64| {
        p.shape
            .curve
            .iter()
            .find(|it| (it.fraction - fraction).abs() < 1e-9)
            .and_then(|it| Some((it.oblateness_mas?, it.oblateness_sigma_mas?)))
    };
    let (some, all) = (at(0.4)?, at(1.0)?);
    let variance = some.1 * some.1 - all.1 * all.1;
    (variance > 0.0).then(|| (some.0 - all.0, variance.sqrt()))
}

fn distortion(p: &Parts<'_>, m: usize) -> DistortionRecord {
    let separability = &p.shape.separability;
    let separated = match m {
        2 => separability.oblateness,
        4 => separability.p4,
        _ => true,
    };
    if !separated {
        return DistortionRecord {
            m,
            amplitude_mas: None,
            angle_deg: None,
            sigma_mas: None,
            reason: Some("not separated from the Sun".to_owned()),
        };
    }
    let (c, s, sigma) = p.shape.fit.instrument_mas(m);
    let distance = p.measured[0].middle.sun.distance_au;
    DistortionRecord {
        m,
        amplitude_mas: Some(c.hypot(s) / distance),
        angle_deg: Some(
            (s.atan2(c) / m as f64)
                .to_degrees()
                .rem_euclid(360.0 / m as f64),
        ),
        sigma_mas: Some(sigma / distance),
        reason: None,
    }
}

fn by_stack(p: &Parts<'_>, by_frame: &ShapeQuantity) -> ByStack {
    match p.by_stack {
        Ok(fit) => {
            let [radius, oblateness, p4] = three(p, fit);
            let difference_sigma = match (oblateness.value, by_frame.value, by_frame.sigma) {
                (Some(a), Some(b), Some(sigma)) if sigma > 0.0 => Some((a - b) / sigma),
                _ => None,
            };
            let stacks = p.stacks.count();
            ByStack {
                oblateness,
                radius,
                p4,
                difference_sigma,
                stacks,
                reason: None,
            }
        }
        Err(reason) => {
            let none = |unit: &str| ShapeQuantity {
                reason: None,
                ..open(unit, String::new())
            };
            ByStack {
                oblateness: none("mas"),
                radius: none("arcsec"),
                p4: none("mas"),
                difference_sigma: None,
                stacks: 0,
                reason: Some(reason.clone()),
            }
        }
    }
}

/// Oblateness that surface rotation alone gives: middle and rectangular uncertainty of three
/// published laws (Snodgrass & Ulrich 1990, Snodgrass 1983, Howard & Harvey 1970), mas at 1 AU;
/// regression values from their coefficients, which are from memory.
const ROTATION_FIGURE_MAS: (f64, f64) = (7.886, 0.276);

/// Perihelion advance of the innermost planet by `J2` = 1, arcsec a century.
const PERIHELION_ARCSEC: f64 = 0.012_701 / 1e-7;

fn quadrupole(oblateness: &ShapeQuantity) -> Quadrupole {
    let rotation_figure = Quantity::measured(ROTATION_FIGURE_MAS.0, ROTATION_FIGURE_MAS.1, "mas");
    let (Some(value), Some(sigma)) = (oblateness.value, oblateness.sigma) else {
        let reason = "the oblateness is not separated";
        return Quadrupole {
            j2: Quantity::missing("1", reason),
            perihelion: Quantity::missing("arcsec/century", reason),
            rotation_figure,
        };
    };
    let per_j2 = 1.5 * REFERENCE_RADIUS_MAS;
    let j2 = (value - ROTATION_FIGURE_MAS.0) / per_j2;
    let sigma = sigma.hypot(ROTATION_FIGURE_MAS.1) / per_j2;
    Quadrupole {
        j2: Quantity::measured(j2, sigma, "1"),
        perihelion: Quantity::measured(
            j2 * PERIHELION_ARCSEC,
            sigma * PERIHELION_ARCSEC,
            "arcsec/century",
        ),
        rotation_figure,
    }
}

fn seeing(p: &Parts<'_>) -> SeeingRecord {
    let by_blur = match &p.seeing.blur {
        Ok(it) => Quantity::measured(it.zenith_m, it.sigma_m, "m"),
        Err(reason) => Quantity::missing("m", reason),
    };
    let it = match &p.seeing.motion {
        Ok(it) => it,
        Err(reason) => {
            let none = |unit: &str| Quantity::missing(unit, reason);
            return SeeingRecord {
                r0: none("m"),
                line_of_sight: none("m"),
                by_motion: none("m"),
                by_blur,
                fwhm: none("arcsec"),
                coherence_time: none("s"),
                outer_scale: none("m"),
                height_proxy: none("m"),
                independent_frames: Vec::new(),
                layers: Vec::new(),
            };
        }
    };
    let by_motion = Quantity::measured(it.r0_zenith_500nm_m, it.r0_zenith_sigma_m, "m");
    let relative = it.r0_los_sigma_m / it.r0_los_500nm_m;
    SeeingRecord {
        r0: by_motion.clone(),
        line_of_sight: Quantity::measured(it.r0_los_500nm_m, it.r0_los_sigma_m, "m"),
        by_motion,
        by_blur,
        fwhm: Quantity::measured(it.fwhm_arcsec, it.fwhm_arcsec * relative, "arcsec"),
        coherence_time: coherence_time(p),
        outer_scale: match it.outer_scale_m {
            Some(v) => Quantity::computed(v, "m"),
            None => Quantity::missing("m", &it.outer_scale_reason),
        },
        height_proxy: match it.height_proxy_m {
            Some(v) => Quantity::computed(v, "m"),
            None => Quantity::missing("m", "known to no better than a factor of two"),
        },
        independent_frames: it
            .power
            .iter()
            .map(|it| PowerRecord {
                m: it.m,
                observed_mas2: it.observed_mas2,
                modelled_mas2: it.modelled_mas2,
                noise_mas2: it.noise_mas2,
                independent_frames: it.n_effective,
            })
            .collect(),
        layers: it
            .profile
            .layers
            .iter()
            .map(|it| LayerRecord {
                height_m: it.height_m,
                share: it.share,
            })
            .collect(),
    }
}

/// The coherence time, where the frames follow each other fast enough to see it: the lag at which the
/// correlation of the high harmonics falls to 1/e.
fn coherence_time(p: &Parts<'_>) -> Quantity {
    let mut steps = Vec::new();
    let (mut product, mut square) = (0.0, 0.0);
    for (sequence, corrected) in p.measured.iter().zip(p.limbs) {
        for pair in corrected.frames.windows(2) {
            let [a, b] = [&pair[0], &pair[1]];
            let apart = sequence.frames[b.measured]
                .utc
                .minus(sequence.frames[a.measured].utc);
            steps.push(apart);
            let highest = a.harmonics.cos.len().min(b.harmonics.cos.len());
            for m in 6..highest {
                product += a.harmonics.cos[m] * b.harmonics.cos[m]
                    + a.harmonics.sin[m] * b.harmonics.sin[m];
                square += 0.5
                    * (a.harmonics.cos[m].powi(2)
                        + a.harmonics.sin[m].powi(2)
                        + b.harmonics.cos[m].powi(2)
                        + b.harmonics.sin[m].powi(2));
            }
        }
    }
    steps.sort_by(f64::total_cmp);
    let Some(&step_s) = steps.get(steps.len() / 2) else {
        return Quantity::missing("s", "fewer than two frames");
    };
    let correlation = product / square;
    if correlation < 0.15 {
        return Quantity::missing(
            "s",
            &format!(
                "frames {step_s:.2} s apart have forgotten each other (correlation {correlation:.2})"
            ),
        );
    }
    let tau_s = step_s / (1.0 / correlation).ln();
    Quantity::measured(tau_s, 0.3 * tau_s, "s")
}

fn turbulence(p: &Parts<'_>) -> TurbulenceRecord {
    let fit = &p.shape.fit;
    let random = budget::total(lines(p, fit).filter(|it| it.random))[1];
    let systematic = budget::total(lines(p, fit).filter(|it| !it.random))[1];
    let separated = p.shape.separability.oblateness;
    let reason = "the oblateness is not separated";
    let share = if separated {
        Quantity::computed(
            random * random / (random * random + systematic * systematic),
            "1",
        )
    } else {
        Quantity::missing("1", reason)
    };
    let hours = observed_hours(p);
    let to = |goal_mas: f64| -> Quantity {
        if !separated {
            return Quantity::missing("h", reason);
        }
        if systematic >= goal_mas {
            return Quantity::missing(
                "h",
                &format!("systematics alone are {systematic:.2} mas, above {goal_mas} mas"),
            );
        }
        Quantity::computed(
            hours * random * random / (goal_mas * goal_mas - systematic * systematic),
            "h",
        )
    };
    let predicted = predicted_frame_mas(p);
    let observed = observed_frame_mas(p);
    TurbulenceRecord {
        floor: match predicted {
            Ok(frame) if separated => Quantity::computed(random * frame / observed, "mas"),
            Ok(_) => Quantity::missing("mas", reason),
            Err(ref reason) => Quantity::missing("mas", reason),
        },
        share,
        hours_to: HoursTo {
            one_mas: to(1.0),
            half_mas: to(0.5),
        },
        observed_over_predicted: match predicted {
            Ok(frame) => {
                let n = p.selected.observations.len() as f64;
                Quantity::measured(observed / frame, observed / frame / (2.0 * n).sqrt(), "1")
            }
            Err(reason) => Quantity::missing("1", &reason),
        },
    }
}

/// Time spent in the sequences that were used, hours.
fn observed_hours(p: &Parts<'_>) -> f64 {
    p.measured
        .iter()
        .filter(|it| it.set_aside.is_none())
        .map(|it| {
            let (Some(first), Some(last)) = (it.frames.first(), it.frames.last()) else {
                return 0.0;
            };
            let n = it.frames.len() as f64;
            last.utc.minus(first.utc) * n / (n - 1.0).max(1.0) / 3600.0
        })
        .sum()
}

/// Root mean square of one coefficient of m = 2 in a frame, as observed, mas at 1 AU.
fn observed_frame_mas(p: &Parts<'_>) -> f64 {
    let (mut sum, mut count) = (0.0, 0.0);
    for block in &p.shape.blocks {
        for &k in &block.frames {
            let it = &p.shape.observations[k];
            for c in [1, 2] {
                sum += (it.harmonics_mas[c] - block.mean_mas[c]).powi(2) - it.noise_mas2[c];
            }
        }
        count += 2.0 * (block.frames.len() as f64 - 1.0);
    }
    (sum / count).max(0.0).sqrt()
}

/// The same as predicted from the seeing.
fn predicted_frame_mas(p: &Parts<'_>) -> Result<f64, String> {
    let it = p.seeing.motion.as_ref().map_err(Clone::clone)?;
    let aperture = super::solve::aperture(p.session);
    let (mut sum, mut count) = (0.0, 0.0);
    for (sequence, own) in p
        .measured
        .iter()
        .filter(|it| it.frames.len() >= LEAST_FRAMES)
        .zip(&it.sequences)
    {
        let view = crate::seeing::View {
            zenith_rad: sequence.middle.sun.zenith_true_rad,
            limb_radius_rad: REFERENCE_RADIUS_MAS * crate::units::MAS_RAD
                / sequence.middle.sun.distance_au,
            sector_rad: sequence.setup.annulus.sector_rad(),
            drift_m: 0.0,
        };
        let gradient = crate::turbulence::Tilt::Gradient;
        let variance =
            crate::seeing::floor_variance_mas2(&it.profile, &aperture, gradient, &view, 2)
                .map_err(|it| it.to_string())?[2];
        // The profile is the session's; each sequence has its own strength.
        let zenith_m = own.r0_los_500nm_m * zenith_factor(sequence);
        let strength = (zenith_m / it.r0_zenith_500nm_m).powf(-5.0 / 3.0);
        let n = sequence.frames.len() as f64;
        sum += n * variance * strength * sequence.middle.sun.distance_au.powi(2);
        count += n;
    }
    if count == 0.0 {
        Err("no sequence has enough frames".to_owned())
    } else {
        Ok((sum / count).sqrt())
    }
}

fn refraction(it: &MeasuredSequence, known: &Known) -> RefractionRecord {
    let sun = &it.middle.sun;
    let d = sun.distance_au;
    let apparent = it.middle.map.as_ref().map_or(
        sun.zenith_true_rad,
        crate::air::DiskMap::zenith_apparent_rad,
    );
    let flattening = -2.0 * it.middle_air.cos2_mas / d;
    let relative: f64 = known
        .refractivity
        .iter()
        .map(|it| it.sigma_rel.powi(2))
        .sum();
    let tilt = 2.0 * it.middle_air.cos2_mas_arcmin / d * known.tilt_sigma_arcmin;
    RefractionRecord {
        sequence: it.index,
        zenith_true_deg: sun.zenith_true_rad.to_degrees(),
        zenith_apparent_deg: apparent.to_degrees(),
        refraction_arcsec: (sun.zenith_true_rad - apparent) / crate::units::ARCSEC_RAD,
        radius_change_mas: it.middle_air.mean_mas / d,
        flattening_mas: flattening,
        flattening_sigma_mas: (flattening * relative.sqrt()).hypot(tilt),
        effective_wavelength_nm: it
            .band
            .map_or(it.setup.optics.wavelength_nm, |it| it.effective_nm),
        smear_mas: it.band.map_or(0.0, |band| {
            band.smear(sun.zenith_true_rad - apparent).spread_mas
        }),
        refractivity: it.middle.refractivity,
        pressure_hpa: it.conditions.map_or(0.0, |it| it.pressure_hpa),
        temperature_c: it.conditions.map_or(0.0, |it| it.temperature_c),
        relative_humidity: it.conditions.map_or(0.0, |it| it.relative_humidity),
    }
}

fn selection(p: &Parts<'_>) -> SelectionRecord {
    let read = p
        .measured
        .iter()
        .map(|it| it.frames.len() + it.lost.len())
        .sum();
    let used = p.shape.observations.len();
    let mut rejected: Vec<Rejection> = Vec::new();
    let mut count = |reason: &str, frames: usize| {
        if frames == 0 {
            return;
        }
        match rejected.iter_mut().find(|it| it.reason == reason) {
            Some(it) => it.frames += frames,
            None => rejected.push(Rejection {
                reason: reason.to_owned(),
                frames,
            }),
        }
    };
    for (sequence, corrected) in p.measured.iter().zip(p.limbs) {
        for it in &sequence.lost {
            count(it.reason, 1);
        }
        count("too many gaps in the limb", corrected.gaps.len());
        if sequence.set_aside.is_some() {
            count("sequence set aside", corrected.frames.len());
        }
    }
    count(
        "less sharp than the kept fraction",
        p.selected.observations.len() - used,
    );
    SelectionRecord {
        read,
        usable: p.selected.observations.len(),
        used,
        rejected,
        kept_fraction: p.shape.fraction,
        criterion: "sharpness: mean blur of the limb's sectors; weights by the power of harmonics m >= 5".to_owned(),
        blind_to_shape: "blur holds no positions, and harmonics of m >= 5 are independent of those of the shape (m = 0, 2, 4) in isotropic turbulence".to_owned(),
        gain: p.shape.gain,
    }
}

fn budget_lines(p: &Parts<'_>) -> Vec<BudgetLine> {
    let separated = p.shape.separability.oblateness;
    lines(p, &p.shape.fit)
        .map(|it| BudgetLine {
            term: it.term.clone(),
            sigma_mas: separated.then(|| it.oblateness_mas2.sqrt()),
            sigma_radius_mas: it.radius_mas2.sqrt(),
            kind: if it.random { "random" } else { "systematic" }.to_owned(),
            scope: it.scope.to_owned(),
            how: it.how.clone(),
        })
        .collect()
}

fn sequences(p: &Parts<'_>) -> Vec<SequenceRecord> {
    let mut out: Vec<SequenceRecord> = p
        .measured
        .iter()
        .zip(p.limbs)
        .enumerate()
        .map(|(k, (m, l))| sequence(p, k, m, l))
        .collect();
    for (index, reason) in p.set_aside {
        let it = &p.session.sequences[*index];
        out.push(SequenceRecord {
            sequence: *index,
            kind: super::measure::kind_word(it.kind).to_owned(),
            time_utc: [String::new(), String::new()],
            roll_deg: it.roll_deg,
            frames_read: 0,
            frames_used: 0,
            zenith_true_deg: 0.0,
            parallactic_deg: 0.0,
            axis_deg: 0.0,
            b0_deg: 0.0,
            distance_au: 0.0,
            r0: Quantity::missing("m", reason),
            radius: Quantity::missing("arcsec", reason),
            harmonics: Vec::new(),
            set_aside: Some(reason.clone()),
        });
    }
    out.sort_by_key(|it| it.sequence);
    out
}

fn sequence(
    p: &Parts<'_>,
    position: usize,
    m: &MeasuredSequence,
    l: &CorrectedSequence,
) -> SequenceRecord {
    let sun = &m.middle.sun;
    let n = l.frames.len() as f64;
    let highest = l
        .frames
        .iter()
        .map(|it| it.harmonics.cos.len())
        .min()
        .unwrap_or(0)
        .min(9);
    let mean = |f: &dyn Fn(usize) -> f64| (0..l.frames.len()).map(f).sum::<f64>() / n;
    let stated = |order: usize| -> (f64, f64, f64) {
        let (c, s) = (
            mean(&|k| l.frames[k].harmonics.cos[order]),
            mean(&|k| l.frames[k].harmonics.sin[order]),
        );
        let scatter: f64 = l
            .frames
            .iter()
            .map(|it| (it.harmonics.cos[order] - c).powi(2) + (it.harmonics.sin[order] - s).powi(2))
            .sum();
        let coefficients = if order == 0 { 1.0 } else { 2.0 };
        let factor = p.shape.factor.get(order).copied().unwrap_or(1.0);
        (
            c,
            s,
            (factor * scatter / coefficients / (n - 1.0).max(1.0) / n).sqrt(),
        )
    };
    let (radius, _, radius_sigma) = stated(0);
    let own = match &p.seeing.motion {
        Ok(it) => {
            // The seeing knows only the sequences that are long enough.
            let before = p
                .measured
                .iter()
                .take(position)
                .filter(|it| it.frames.len() >= LEAST_FRAMES)
                .count();
            match it
                .sequences
                .get(before)
                .filter(|_| m.frames.len() >= LEAST_FRAMES)
            {
                Some(it) => {
                    let up = zenith_factor(m);
                    Quantity::measured(it.r0_los_500nm_m * up, it.r0_los_sigma_m * up, "m")
                }
                None => Quantity::missing("m", "too few frames"),
            }
        }
        Err(reason) => Quantity::missing("m", reason),
    };
    let used = p
        .shape
        .observations
        .iter()
        .filter(|it| it.sequence == m.index)
        .count();
    SequenceRecord {
        sequence: m.index,
        kind: super::measure::kind_word(p.session.sequences[m.index].kind).to_owned(),
        time_utc: [
            m.frames[0].utc.to_iso(),
            m.frames[m.frames.len() - 1].utc.to_iso(),
        ],
        roll_deg: p.session.sequences[m.index].roll_deg,
        frames_read: m.frames.len() + m.lost.len(),
        frames_used: used,
        zenith_true_deg: sun.zenith_true_rad.to_degrees(),
        parallactic_deg: sun.parallactic_rad.to_degrees(),
        axis_deg: sun.axis_rad.to_degrees(),
        b0_deg: sun.b0_rad.to_degrees(),
        distance_au: sun.distance_au,
        r0: own,
        radius: Quantity::measured(
            (REFERENCE_RADIUS_MAS + radius - p.model.radius_bias_mas) / 1000.0,
            radius_sigma / 1000.0,
            "arcsec",
        ),
        harmonics: (2..highest)
            .map(|order| {
                let (cos_mas, sin_mas, sigma_mas) = stated(order);
                HarmonicRecord {
                    m: order,
                    cos_mas,
                    sin_mas,
                    sigma_mas,
                }
            })
            .collect(),
        set_aside: m.set_aside.clone(),
    }
}

/// Runs of sectors that were left out of a whole sequence for one reason.
fn masked(m: &MeasuredSequence) -> Vec<MaskedArc> {
    let width = m.setup.annulus.sector_rad();
    let mut out: Vec<MaskedArc> = Vec::new();
    let mut last: Option<usize> = None;
    for (s, blemish) in m.blemishes.iter().enumerate() {
        let Some(blemish) = blemish else { continue };
        let middle = m.setup.annulus.angle_rad(s);
        let to_deg = (middle + 0.5 * width).to_degrees();
        match (out.last_mut(), last) {
            (Some(arc), Some(before)) if before + 1 == s && arc.reason == blemish.words() => {
                arc.to_deg = to_deg;
            }
            _ => out.push(MaskedArc {
                sequence: m.index,
                from_deg: (middle - 0.5 * width).to_degrees(),
                to_deg,
                frames: 1.0,
                reason: blemish.words().to_owned(),
            }),
        }
        last = Some(s);
    }
    out
}

/// Standard uncertainty by the refractivity formula above which its range deserves a word, mas of
/// oblateness and of radius.
const FORMULA_WORD_MAS: [f64; 2] = [0.1, 1.0];

fn formula_weighs(p: &Parts<'_>) -> bool {
    lines(p, &p.shape.fit)
        .filter(|it| it.term == "refractivity formula")
        .any(|it| {
            it.oblateness_mas2.sqrt() > FORMULA_WORD_MAS[0]
                || it.radius_mas2.sqrt() > FORMULA_WORD_MAS[1]
        })
}

/// Zenith distances above these deserve a word.
const CAUTION_DEG: [f64; 2] = [60.0, 70.0];

fn warnings(p: &Parts<'_>) -> Vec<WarningRecord> {
    let mut out: Vec<WarningRecord> = Vec::new();
    let mut say = |code: &str, text: String| {
        let it = WarningRecord {
            code: code.to_owned(),
            text,
        };
        if !out.contains(&it) {
            out.push(it);
        }
    };
    for m in p.measured {
        let zenith = m.middle.sun.zenith_true_rad.to_degrees();
        let name = m.index + 1;
        if let Some(reason) = &m.set_aside {
            say(
                "set-aside",
                format!("sequence {name} does not go to the shape: {reason}"),
            );
        } else if m.middle.map.is_some() && zenith > CAUTION_DEG[1] {
            say(
                "zenith-strong",
                format!(
                    "sequence {name} was observed at {zenith:.1} deg from the zenith; above 70 deg errors of the weather weigh heavily on the shape"
                ),
            );
        } else if m.middle.map.is_some() && zenith > CAUTION_DEG[0] {
            say(
                "zenith-caution",
                format!(
                    "sequence {name} was observed at {zenith:.1} deg from the zenith; below 60 deg refraction is easier to know"
                ),
            );
        }
        if let Some(note) = &m.weather_note {
            say("weather", format!("sequence {name}: {note}"));
        }
        // The air changes little from sequence to sequence: once is enough.
        if let Some(it) = m.conditions.filter(|_| m.index == p.measured[0].index) {
            let formula = p.session.refractivity.formula;
            let nm = m.setup.optics.wavelength_nm;
            for it in crate::air::refractivity_warnings(&it, nm, formula) {
                // Every mountain lies outside the stated range of pressure: the budget has its line, and
                // a word is due where that line weighs.
                let of_pressure = matches!(it, crate::air::AirWarning::Pressure { .. });
                if !of_pressure || formula_weighs(p) {
                    say("refractivity", it.to_string());
                }
            }
        }
        if !m.lost.is_empty() {
            say(
                "frames-lost",
                format!(
                    "sequence {name}: {} frames have no limb; the first: {}",
                    m.lost.len(),
                    m.lost[0].detail
                ),
            );
        }
    }
    for (index, reason) in p.set_aside {
        say(
            "set-aside",
            format!("sequence {} was not reduced: {reason}", index + 1),
        );
    }
    if let crate::session::WeatherSource::Log(log) = &p.session.weather.source {
        for note in log.notes() {
            say("weather", note.to_string());
        }
    }
    if let Ok(it) = &p.seeing.motion {
        for text in &it.warnings {
            say("seeing", text.clone());
        }
    }
    if p.shape.fit.excess > 1.0 {
        say(
            "excess-scatter",
            format!(
                "the sequences scatter {:.2} times more than their frames say; the errors are enlarged by that",
                p.shape.fit.excess.sqrt()
            ),
        );
    }
    if !p.shape.separability.oblateness {
        say("not-separated", why_not(p, "the oblateness"));
    }
    out
}

fn traces(p: &Parts<'_>) -> Traces {
    let mean_radius = p.shape.fit.radius_mas() - REFERENCE_RADIUS_MAS;
    let mut frames = Vec::new();
    for (k, (it, &(position, frame))) in p
        .selected
        .observations
        .iter()
        .zip(&p.selected.origin)
        .enumerate()
    {
        let m = &p.measured[position];
        let measured = &m.frames[p.limbs[position].frames[frame].measured];
        frames.push(FrameTrace {
            sequence: m.index,
            frame: measured.frame,
            time_s: it.time_s,
            kept: p.shape.kept[k],
            weight: it.weight,
            r0_blur_m: frame_r0_m(m, measured.limb.mean_blur()).unwrap_or(f64::NAN),
            radius_mas: it.harmonics_mas[0] - mean_radius,
            cos2_mas: it.harmonics_mas[1],
            sin2_mas: it.harmonics_mas[2],
        });
    }
    let (preview, preview_radius_px) = match &p.stacks.whole {
        Some(it) => preview(it, &p.measured[0]),
        None => (None, 0.0),
    };
    Traces {
        frames,
        limb: limb_trace(p),
        preview,
        preview_radius_px,
    }
}

/// Bins of position angle of the drawn limb.
const LIMB_BINS: usize = 120;

/// Mean limb on the sky with the instrument's distortion taken off, about the fitted circle.
fn limb_trace(p: &Parts<'_>) -> LimbTrace {
    let mut sum = [0.0; LIMB_BINS];
    let mut square = [0.0; LIMB_BINS];
    let mut weight = [0.0; LIMB_BINS];
    let fit = &p.shape.fit;
    let instrument: Vec<(f64, f64)> = (2..=4)
        .map(|m| {
            let (c, s, _) = fit.instrument_mas(m);
            (c, s)
        })
        .collect();
    for (it, &(position, frame)) in p.selected.observations.iter().zip(&p.selected.origin) {
        let m = &p.measured[position];
        let corrected = &p.limbs[position].frames[frame];
        let moment = &m.frames[corrected.measured].moment;
        let (c1, s1) = (corrected.harmonics.cos[1], corrected.harmonics.sin[1]);
        for (s, &radius) in corrected.limb.radius_mas.iter().enumerate() {
            if !corrected.usable[s] || !radius.is_finite() {
                continue;
            }
            let theta = corrected.limb.angles_rad[s];
            let mut value = radius - fit.values[0] - c1 * theta.cos() - s1 * theta.sin();
            for (k, (c, s)) in instrument.iter().enumerate() {
                let phase = (k + 2) as f64 * theta;
                value -= c * phase.cos() + s * phase.sin();
            }
            let turn = moment.orientation.position_angle_rad(theta) / TAU;
            let bin = ((turn * LIMB_BINS as f64) as usize).min(LIMB_BINS - 1);
            sum[bin] += it.weight * value;
            square[bin] += it.weight * value * value;
            weight[bin] += it.weight;
        }
    }
    let sun = &p.measured[p.measured.len() / 2].middle.sun;
    let columns = crate::shape::sun_columns(sun.b0_rad, 0.0);
    let width = 360.0 / LIMB_BINS as f64;
    let mut out = LimbTrace {
        position_angle_deg: Vec::new(),
        residual_mas: Vec::new(),
        sigma_mas: Vec::new(),
        model_mas: Vec::new(),
        axis_deg: sun.axis_rad.to_degrees(),
        zenith_deg: sun.parallactic_rad.to_degrees(),
    };
    for bin in 0..LIMB_BINS {
        if weight[bin] < 2.0 {
            continue;
        }
        let mean = sum[bin] / weight[bin];
        let variance = (square[bin] / weight[bin] - mean * mean).max(0.0);
        let at_deg = (bin as f64 + 0.5) * width;
        let psi = at_deg.to_radians() - sun.axis_rad;
        let (o, q) = (fit.oblateness_mas(), fit.p4_mas());
        let term = |k: usize| o * columns[1][k] + q * columns[2][k];
        out.position_angle_deg.push(at_deg);
        out.residual_mas.push(mean);
        out.sigma_mas.push((variance / (weight[bin] - 1.0)).sqrt());
        out.model_mas
            .push(term(0) + term(1) * (2.0 * psi).cos() + term(5) * (4.0 * psi).cos());
    }
    out
}

/// Largest side of the preview, px.
const PREVIEW_PX: usize = 512;

/// The stack reduced by whole pixels, row 0 the southern edge, disk centre one.
fn preview(stack: &Stack, first: &MeasuredSequence) -> (Option<Array2<f32>>, f64) {
    let n = stack.size();
    let by = n.div_ceil(PREVIEW_PX);
    let side = n / by;
    let centre = stack.image[[n / 2, n / 2]];
    let out = Array2::from_shape_fn((side, side), |(row, column)| {
        let y0 = row * by;
        let x0 = column * by;
        let block = stack.image.slice(ndarray::s![y0..y0 + by, x0..x0 + by]);
        let mean = block.iter().filter(|it| it.is_finite()).sum::<f64>() / (by * by) as f64;
        (mean / centre) as f32
    });
    let radius_arcsec = REFERENCE_RADIUS_MAS / 1000.0 / first.middle.sun.distance_au;
    (Some(out), radius_arcsec / stack.scale_arcsec_px / by as f64)
}
