//! The shape of the kept frames, and how it depends on what is kept.

use super::Selected;
use super::slope::{self, FractionFit};
use crate::pipeline::Error;
use crate::pipeline::limb_model::LimbModel;
use crate::result::record::{KeptPoint, KeptSlope};
use crate::select::{self, Candidate};
use crate::shape::{
    self, Block, Bootstrap, Correlation, Fit, Known, NullTerms, Observation, Separability,
    ShapeError,
};

/// The shape of the kept frames and what goes with it.
#[derive(Clone, Debug)]
pub(in crate::pipeline) struct Shape {
    /// The fit.
    pub fit: Fit,
    /// The blocks it was made of.
    pub blocks: Vec<Block>,
    /// What can be told apart.
    pub separability: Separability,
    /// Sine terms about the Sun's axis.
    pub sines: Option<NullTerms>,
    /// Cosine and sine of m = 3 about the Sun's axis.
    pub odd: Option<NullTerms>,
    /// What correlation in time does to the variance of a mean.
    pub correlation: Correlation,
    /// The random error by resampling.
    pub bootstrap: Option<Bootstrap>,
    /// Which of the usable frames were kept.
    pub kept: Vec<bool>,
    /// Kept fraction.
    pub fraction: f64,
    /// Error with all frames over error with the kept ones.
    pub gain: f64,
    /// Random error of the oblateness with all frames and with the kept ones, mas.
    pub sigma_all_and_kept_mas: [f64; 2],
    /// Error with the kept frames at equal weights over the error at their own.
    pub weighting_gain: Option<f64>,
    /// Shape against kept fraction.
    pub curve: Vec<KeptPoint>,
    /// Differences of the oblateness between parts of the session, mas.
    pub parts: PartTests,
    /// The slopes of that curve.
    pub slope: KeptSlope,
    /// The frames that were fitted.
    pub observations: Vec<Observation>,
}

impl Shape {
    /// Whether the random error stays as it is in longer batches, and in whole sequences; none where
    /// there are too few to say.
    pub(in crate::pipeline) fn converged(&self) -> Option<bool> {
        if self.fit.excess > 1.0 {
            return Some(false);
        }
        self.correlation.converged()
    }
}

/// Fractions of the curve of the shape against what is kept.
pub(super) const FRACTIONS: [f64; 6] = [1.0, 0.8, 0.6, 0.4, 0.2, 0.1];

/// A smaller fraction must lower the random error by this to be taken: the errors are estimates.
const MUST_PAY: f64 = 0.85;

/// Fits the shape, to all usable frames unless fewer of them do better.
///
/// # Errors
///
/// When there is nothing to fit.
pub(in crate::pipeline) fn shape(
    selected: &Selected,
    known: &Known,
    model: &LimbModel,
    seed: u64,
) -> Result<Shape, Error> {
    let usable = selected.observations.len();
    let mut best: Option<(f64, f64, Vec<bool>)> = None;
    let mut whole_sigma = f64::NAN;
    let mut curve = Vec::new();
    let mut fits = Vec::new();
    for fraction in FRACTIONS {
        let Ok(it) = fraction_fit(
            &selected.observations,
            &selected.candidates,
            fraction,
            known,
        ) else {
            continue;
        };
        let fit = &it.fit;
        let [radius, oblateness, _] = fit.sigmas_mas(true);
        if fraction >= 1.0 {
            whole_sigma = oblateness;
        }
        curve.push(KeptPoint {
            fraction,
            frames: it.frames.len(),
            oblateness_mas: it.separated.then(|| fit.oblateness_mas()),
            oblateness_sigma_mas: it.separated.then_some(oblateness),
            radius_arcsec: (fit.radius_mas() - model.radius_bias_mas) / 1000.0,
            radius_sigma_mas: radius,
        });
        if best
            .as_ref()
            .is_none_or(|best| it.separated && oblateness < MUST_PAY * best.1)
        {
            let mut kept = vec![false; usable];
            it.frames.iter().for_each(|&k| kept[k] = true);
            best = Some((fraction, oblateness, kept));
        }
        fits.push(it);
    }
    let Some((fraction, sigma, kept)) = best else {
        return Err(ShapeError::TooFew {
            frames: usable,
            sequences: 0,
        }
        .into());
    };
    let observations = picked(&selected.observations, &kept);
    let (fit, blocks, correlation, separability) = fitted(&observations, known)?;
    let sines = shape::sine_terms(&observations, &blocks, known, &separability);
    let odd = shape::odd_terms(&observations, &blocks, known, &separability);
    let bootstrap = shape::bootstrap(&observations, &blocks, &fit, correlation.factor[2], seed);
    let parts = PartTests::of(&observations, known);
    Ok(Shape {
        gain: whole_sigma / sigma,
        sigma_all_and_kept_mas: [whole_sigma, sigma],
        weighting_gain: weighting_gain(&observations, known, sigma),
        slope: slope::slope(&selected.observations, &fits),
        fit,
        blocks,
        separability,
        sines,
        odd,
        correlation,
        bootstrap,
        kept,
        fraction,
        curve,
        parts,
        observations,
    })
}

/// The kept observations.
fn picked(observations: &[Observation], kept: &[bool]) -> Vec<Observation> {
    observations
        .iter()
        .zip(kept)
        .filter(|(_, kept)| **kept)
        .map(|(it, _)| *it)
        .collect()
}

/// A fit, its blocks, what correlation in time does to them, what can be told apart.
type Fitted = (Fit, Vec<Block>, Correlation, Separability);
/// The fit to the sharpest share of the frames.
///
/// # Errors
///
/// When too few are left for a fit.
pub(super) fn fraction_fit(
    observations: &[Observation],
    candidates: &[Candidate],
    fraction: f64,
    known: &Known,
) -> Result<FractionFit, ShapeError> {
    let kept = if fraction < 1.0 {
        select::sharpest(candidates, fraction)
    } else {
        vec![true; observations.len()]
    };
    let some = picked(observations, &kept);
    let (fit, blocks, _, separability) = fitted(&some, known)?;
    Ok(FractionFit {
        fraction,
        frames: (0..kept.len()).filter(|&k| kept[k]).collect(),
        observations: some,
        blocks,
        fit,
        separated: separability.oblateness,
    })
}

/// The error of the oblateness at equal weights over `sigma_mas`, the error at the weights used; none
/// where it is not separated.
fn weighting_gain(observations: &[Observation], known: &Known, sigma_mas: f64) -> Option<f64> {
    let equal: Vec<Observation> = observations
        .iter()
        .map(|it| Observation { weight: 1.0, ..*it })
        .collect();
    let (fit, .., separability) = fitted(&equal, known).ok()?;
    separability
        .oblateness
        .then(|| fit.sigmas_mas(true)[1] / sigma_mas)
}

/// Fits the shape to all of these frames.
fn fitted(observations: &[Observation], known: &Known) -> Result<Fitted, ShapeError> {
    let sequences = {
        let mut it: Vec<usize> = observations.iter().map(|it| it.sequence).collect();
        it.dedup();
        it.len()
    };
    if observations.len() < sequences + 1 {
        return Err(ShapeError::TooFew {
            frames: observations.len(),
            sequences,
        });
    }
    let (blocks, correlation) = shape::blocks(observations);
    let separability = shape::judge(observations, &blocks, known.distortion_sigma_mas.is_some());
    let fit = shape::fit(observations, &blocks, known, &separability)?;
    Ok((fit, blocks, correlation, separability))
}

/// Oblateness of one part of the session minus that of the rest, with its random uncertainty, mas; none
/// where one of them alone does not separate Sun and instrument.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::pipeline) struct PartTests {
    /// Early half of the sequences minus the late half.
    pub halves: Option<(f64, f64)>,
    /// Middle half of the sequences minus the first and last quarters.
    pub inner: Option<(f64, f64)>,
    /// Before the Sun's passage through the meridian minus after it.
    pub meridian: Option<(f64, f64)>,
}

impl PartTests {
    fn of(observations: &[Observation], known: &Known) -> Self {
        let mut sequences: Vec<usize> = observations.iter().map(|it| it.sequence).collect();
        sequences.dedup();
        let n = sequences.len();
        let order = |it: &Observation| {
            sequences
                .iter()
                .position(|s| *s == it.sequence)
                .unwrap_or(0)
        };
        let difference =
            |part: &dyn Fn(&Observation) -> bool| difference(observations, known, part);
        Self {
            halves: difference(&|it| order(it) < n / 2),
            inner: difference(&|it| (n / 4..n - n / 4).contains(&order(it))),
            meridian: difference(&|it| it.air.zenith_rate_arcmin_s < 0.0),
        }
    }
}

/// Oblateness of the frames in a part minus that of the others.
fn difference(
    observations: &[Observation],
    known: &Known,
    part: &dyn Fn(&Observation) -> bool,
) -> Option<(f64, f64)> {
    let (inside, outside): (Vec<Observation>, Vec<Observation>) =
        observations.iter().copied().partition(|it| part(it));
    let answer = |some: &[Observation]| -> Option<Fit> {
        let (fit, .., separability) = fitted(some, known).ok()?;
        separability.oblateness.then_some(fit)
    };
    let (a, b) = (answer(&inside)?, answer(&outside)?);
    let sigma = a.sigmas_mas(true)[1].hypot(b.sigmas_mas(true)[1]);
    Some((a.oblateness_mas() - b.oblateness_mas(), sigma))
}
