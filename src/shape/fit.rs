//! Generalised least squares with prior knowledge, and where the error comes from.

use super::design::{self, COMPONENTS, Component, about, sun_columns};
use super::driver::{Driver, DriverSlope};
use super::{Block, Observation, REFERENCE_RADIUS_MAS, Separability, ShapeError};
use nalgebra::{DMatrix, DVector};

/// An independent input of the refractivity.
#[derive(Clone, Debug, PartialEq)]
pub struct RefractivityInput {
    /// Name in the budget.
    pub term: &'static str,
    /// Relative standard uncertainty of `n - 1` that it causes.
    pub sigma_rel: f64,
    /// Scope in the budget.
    pub scope: &'static str,
    /// How it was obtained.
    pub how: String,
}

/// What is known before the fit.
#[derive(Clone, Debug, PartialEq)]
pub struct Known {
    /// Inputs of the refractivity; empty above the air.
    pub refractivity: Vec<RefractivityInput>,
    /// Standard uncertainty of a residual fixed to the vertical, mas.
    pub vertical_sigma_mas: f64,
    /// Standard uncertainty of the camera's angle, rad.
    pub camera_angle_sigma_rad: f64,
    /// Relative standard uncertainty of the plate scale.
    pub scale_sigma_rel: f64,
    /// Standard uncertainty of the clock, s.
    pub clock_sigma_s: f64,
    /// Standard uncertainty of the station's vertical against the plumb line, each axis, arcmin.
    pub vertical_direction_sigma_arcmin: f64,
    /// Standard deviation of the air's own zenith, each axis, arcmin.
    pub tilt_sigma_arcmin: f64,
    /// Its correlation time, s.
    pub tilt_tau_s: f64,
    /// Standard uncertainty of each instrument coefficient about zero, mas; none: free.
    pub distortion_sigma_mas: Option<f64>,
    /// Readings with which the distortion goes.
    pub drivers: Vec<Driver>,
}

/// Prior widths for Sun terms that the observation cannot separate: they only keep the radius honest.
const UNSEPARATED_SIGMA_MAS: [f64; 2] = [12.0, 4.0];

/// One line of the error: how much an input adds to the variances.
#[derive(Clone, Debug, PartialEq)]
pub struct Contribution {
    /// Name.
    pub term: String,
    /// Variance of the radius, mas^2.
    pub radius_mas2: f64,
    /// Variance of the oblateness, mas^2.
    pub oblateness_mas2: f64,
    /// Variance of `R c4`, mas^2.
    pub p4_mas2: f64,
    /// Random, or systematic.
    pub random: bool,
    /// Scope.
    pub scope: &'static str,
    /// How it was obtained.
    pub how: String,
}

/// Two terms about the solar axis that are zero for the Sun: value and standard uncertainty, mas.
pub type NullTerms = [(f64, f64); 2];

/// The fitted shape.
#[derive(Clone, Debug, PartialEq)]
pub struct Fit {
    /// Names of the terms, in the order of values and covariance.
    pub terms: Vec<String>,
    /// Units of the terms.
    pub units: Vec<&'static str>,
    /// Fitted values.
    pub values: DVector<f64>,
    /// Their covariance.
    pub covariance: DMatrix<f64>,
    /// Where the variances come from.
    pub contributions: Vec<Contribution>,
    /// Chi square of the blocks' m = 2 and 4 and its degrees of freedom.
    pub chi2: (f64, f64),
    /// Factor on the blocks' variances where they scatter more than their frames say.
    pub excess: f64,
    /// Degrees of freedom behind the random error.
    pub degrees: f64,
    /// Answer of radius, oblateness and `R c4` to each component of each block's mean, in the blocks'
    /// order.
    pub gain: [Vec<Component>; 3],
    /// Whether the distortion was free.
    pub free_instrument: bool,
    /// Slopes against readings.
    pub slopes: Vec<DriverSlope>,
}

/// Index of the radius among the terms.
const RADIUS: usize = 0;
/// Index of the oblateness.
const OBLATENESS: usize = 1;
/// Index of `R c4`.
const P4: usize = 2;
/// Index of the first instrument term.
const INSTRUMENT: usize = 3;
/// Index of the refractivity's scale, behind six instrument terms.
const AIR: usize = INSTRUMENT + 6;

impl Fit {
    /// Radius at 1 AU, mas.
    pub fn radius_mas(&self) -> f64 {
        REFERENCE_RADIUS_MAS + self.values[RADIUS]
    }

    /// Oblateness, mas.
    pub fn oblateness_mas(&self) -> f64 {
        self.values[OBLATENESS]
    }

    /// `R c4`, mas.
    pub fn p4_mas(&self) -> f64 {
        self.values[P4]
    }

    /// Standard uncertainties of radius, oblateness and `R c4`, random and systematic, mas.
    pub fn sigmas_mas(&self, random: bool) -> [f64; 3] {
        let mut sum = [0.0; 3];
        for it in self.contributions.iter().filter(|it| it.random == random) {
            sum[0] += it.radius_mas2;
            sum[1] += it.oblateness_mas2;
            sum[2] += it.p4_mas2;
        }
        sum.map(f64::sqrt)
    }

    /// Cosine and sine of the instrument's distortion for m = 2, 3, 4 and their mean standard
    /// uncertainty, mas as the fit sees them.
    pub fn instrument_mas(&self, m: usize) -> (f64, f64, f64) {
        let i = INSTRUMENT + 2 * (m - 2);
        let sigma = (0.5 * (self.covariance[(i, i)] + self.covariance[(i + 1, i + 1)])).sqrt();
        (self.values[i], self.values[i + 1], sigma)
    }

    /// Relative error of the refractivity, and the vertical's residual in mas, with uncertainties.
    pub fn air(&self) -> [(f64, f64); 2] {
        [AIR, AIR + 1].map(|i| (self.values[i], self.covariance[(i, i)].sqrt()))
    }

    /// Correlation of the oblateness with `R c4`.
    pub fn correlation_oblateness_p4(&self) -> f64 {
        let own = self.covariance[(OBLATENESS, OBLATENESS)] * self.covariance[(P4, P4)];
        self.covariance[(OBLATENESS, P4)] / own.sqrt()
    }

    /// How much one unit of each harmonic of each observation moves radius, oblateness and `R c4`, through
    /// its block's mean.
    pub fn influence(&self, observations: &[Observation], blocks: &[Block]) -> Vec<[Component; 3]> {
        let mut out = vec![[[0.0; COMPONENTS]; 3]; observations.len()];
        for (b, block) in blocks.iter().enumerate() {
            let total: f64 = block.frames.iter().map(|&k| observations[k].weight).sum();
            for &k in &block.frames {
                let share = observations[k].weight / total;
                out[k] = [0, 1, 2].map(|q| self.gain[q][b].map(|it| share * it));
            }
        }
        out
    }

    /// Largest correlation of the oblateness with the instrument's and with the air's terms.
    pub fn correlations(&self) -> (f64, f64) {
        let own = self.covariance[(OBLATENESS, OBLATENESS)].sqrt();
        let largest = |range: std::ops::Range<usize>| {
            range
                .map(|i| {
                    (self.covariance[(OBLATENESS, i)] / (own * self.covariance[(i, i)].sqrt()))
                        .abs()
                })
                .filter(|it| it.is_finite())
                .fold(0.0, |a: f64, b| if b > a { b } else { a })
        };
        // A driver's terms belong to the instrument.
        let (mut instrument, mut air) = (largest(INSTRUMENT..AIR), 0.0);
        for i in AIR..self.values.len() {
            let it = largest(i..i + 1);
            let to = if self.terms[i].starts_with(DRIVER) {
                &mut instrument
            } else {
                &mut air
            };
            *to = if it > *to { it } else { *to };
        }
        (instrument, air)
    }
}

/// One unknown of the fit.
struct Unknown {
    name: String,
    unit: &'static str,
    column: Box<dyn Fn(&Observation) -> Component>,
    /// Prior standard deviation; none for a free unknown.
    prior: Option<f64>,
}

impl Unknown {
    fn new(
        name: &str,
        unit: &'static str,
        prior: Option<f64>,
        column: impl Fn(&Observation) -> Component + 'static,
    ) -> Self {
        Self {
            name: name.to_owned(),
            unit,
            column: Box::new(column),
            prior,
        }
    }
}

/// Fits the shape to blocks of frames.
///
/// # Errors
///
/// [`ShapeError::TooFew`] without a block, [`ShapeError::Singular`] where even the prior knowledge
/// leaves an unknown open.
pub fn fit(
    observations: &[Observation],
    blocks: &[Block],
    known: &Known,
    separability: &Separability,
) -> Result<Fit, ShapeError> {
    if blocks.is_empty() {
        return Err(ShapeError::TooFew {
            frames: observations.len(),
            sequences: 0,
        });
    }
    let unknowns = unknowns(blocks, known, separability);
    let first = solve(observations, blocks, known, &unknowns, 1.0)?;
    let (chi2, dof) = first.chi2;
    let excess = if dof >= 2.0 {
        excess_factor(chi2, dof)
    } else {
        1.0
    };
    if excess > 1.0 {
        return solve(observations, blocks, known, &unknowns, excess);
    }
    Ok(first)
}

/// The m = 2 and m = 4 sine terms of the Sun, fitted beside everything else; none where they are not
/// separated from the instrument.
pub fn sine_terms(
    observations: &[Observation],
    blocks: &[Block],
    known: &Known,
    separability: &Separability,
) -> Option<NullTerms> {
    if !(separability.oblateness && separability.p4) {
        return None;
    }
    let sine = |m: usize| (m, std::f64::consts::FRAC_PI_2 / m as f64);
    null_terms(
        observations,
        blocks,
        known,
        separability,
        [sine(2), sine(4)],
    )
}

/// Largest mean of `e^(3 i alpha)` at which a term of the Sun is told from one of the instrument:
/// beyond it its error is more than five times that of a term standing alone.
const THIRD_TURNED: f64 = 0.98;

/// The m = 3 cosine (north limb against south) and sine (east limb against west) about the solar axis,
/// fitted beside everything else; none where the axis did not turn enough on the detector.
pub fn odd_terms(
    observations: &[Observation],
    blocks: &[Block],
    known: &Known,
    separability: &Separability,
) -> Option<NullTerms> {
    let (mut c, mut s, mut total) = (0.0, 0.0, 0.0);
    for o in observations {
        c += o.weight * (3.0 * o.axis_rad).cos();
        s += o.weight * (3.0 * o.axis_rad).sin();
        total += o.weight;
    }
    if known.distortion_sigma_mas.is_none() && !(c.hypot(s) < THIRD_TURNED * total) {
        return None;
    }
    let quarter = std::f64::consts::FRAC_PI_6;
    null_terms(
        observations,
        blocks,
        known,
        separability,
        [(3, 0.0), (3, quarter)],
    )
}

/// Two terms `cos m (theta - axis - turn)`, each `(m, turn)`, fitted beside everything else.
fn null_terms(
    observations: &[Observation],
    blocks: &[Block],
    known: &Known,
    separability: &Separability,
    terms: [(usize, f64); 2],
) -> Option<NullTerms> {
    let mut unknowns = unknowns(blocks, known, separability);
    let at = unknowns.len();
    for (m, turn) in terms {
        unknowns.push(Unknown::new("null", "mas", None, move |o| {
            about(m, o.axis_rad + turn, 1.0)
        }));
    }
    let it = solve(observations, blocks, known, &unknowns, 1.0).ok()?;
    Some([at, at + 1].map(|i| (it.values[i], it.covariance[(i, i)].sqrt())))
}

/// The unknowns in their fixed order: Sun, instrument, air, station, layers' tilt by sequence.
fn unknowns(blocks: &[Block], known: &Known, separability: &Separability) -> Vec<Unknown> {
    let mut out = vec![Unknown::new("radius", "mas", None, |_| design::radius())];
    let separated = [separability.oblateness, separability.p4];
    for (k, name) in ["oblateness", "p4"].into_iter().enumerate() {
        let prior = (!separated[k]).then_some(UNSEPARATED_SIGMA_MAS[k]);
        out.push(Unknown::new(name, "mas", prior, move |o| {
            sun_columns(o.b0_rad, o.axis_rad)[k + 1]
        }));
    }
    for m in 2..=4_usize {
        let quarter = std::f64::consts::FRAC_PI_2 / m as f64;
        for (part, angle) in [("cos", 0.0), ("sin", quarter)] {
            let name = format!("instrument m={m} {part}");
            out.push(Unknown::new(
                &name,
                "mas",
                known.distortion_sigma_mas,
                move |_| about(m, angle, 1.0),
            ));
        }
    }
    let refractivity: f64 = known
        .refractivity
        .iter()
        .map(|it| it.sigma_rel.powi(2))
        .sum();
    out.push(Unknown::new(
        "refractivity",
        "1",
        Some(refractivity.sqrt()),
        design::refractivity,
    ));
    out.push(Unknown::new(
        "vertical residual",
        "mas",
        Some(known.vertical_sigma_mas),
        design::vertical,
    ));
    out.push(Unknown::new(
        "camera angle",
        "rad",
        Some(known.camera_angle_sigma_rad),
        design::camera_angle,
    ));
    out.push(Unknown::new(
        "plate scale",
        "1",
        Some(known.scale_sigma_rel),
        design::scale,
    ));
    out.push(Unknown::new(
        "clock",
        "s",
        Some(known.clock_sigma_s),
        design::clock,
    ));
    let plumb = Some(known.vertical_direction_sigma_arcmin);
    out.push(Unknown::new(
        "plumb line along",
        "arcmin",
        plumb,
        design::tilt_along,
    ));
    out.push(Unknown::new(
        "plumb line across",
        "arcmin",
        plumb,
        design::tilt_across,
    ));
    for (k, driver) in known.drivers.iter().enumerate() {
        for (m, part) in DRIVEN {
            let column = driver.clone();
            let name = format!("{DRIVER}{k} m={m} {}", ["cos", "sin"][part]);
            out.push(Unknown::new(
                &name,
                "mas/unit",
                Some(driver.sigma_mas),
                move |o| column.column(o, m, part),
            ));
        }
    }
    let mut sequences: Vec<usize> = blocks.iter().map(|it| it.sequence).collect();
    sequences.dedup();
    for s in sequences {
        out.push(Unknown::new(
            "layers along",
            "arcmin",
            Some(known.tilt_sigma_arcmin),
            move |o| only(o, s, design::tilt_along(o)),
        ));
        out.push(Unknown::new(
            "layers across",
            "arcmin",
            Some(known.tilt_sigma_arcmin),
            move |o| only(o, s, design::tilt_across(o)),
        ));
    }
    out
}

/// Opens the names of the unknowns of a driver; its number follows.
const DRIVER: &str = "driver ";

/// Harmonics and parts that a driver moves.
const DRIVEN: [(usize, usize); 6] = [(2, 0), (2, 1), (3, 0), (3, 1), (4, 0), (4, 1)];

/// The slopes among the fitted unknowns.
fn slopes(
    known: &Known,
    unknowns: &[Unknown],
    values: &DVector<f64>,
    covariance: &DMatrix<f64>,
) -> Vec<DriverSlope> {
    let Some(first) = unknowns.iter().position(|it| it.name.starts_with(DRIVER)) else {
        return Vec::new();
    };
    let of = |i: usize| (values[i], covariance[(i, i)].sqrt());
    let mut out = Vec::new();
    for (k, driver) in known.drivers.iter().enumerate() {
        for m in 2..=4 {
            let i = first + 6 * k + 2 * (m - 2);
            out.push(DriverSlope {
                name: driver.name.clone(),
                unit: driver.unit,
                m,
                cos_mas: of(i),
                sin_mas: of(i + 1),
            });
        }
    }
    out
}

/// A column that acts in one sequence alone.
fn only(o: &Observation, sequence: usize, column: Component) -> Component {
    if o.sequence == sequence {
        column
    } else {
        [0.0; COMPONENTS]
    }
}

/// A prior below this is a term that is known: its column is left in with this width.
const TINY: f64 = 1e-12;

fn solve(
    observations: &[Observation],
    blocks: &[Block],
    known: &Known,
    unknowns: &[Unknown],
    excess: f64,
) -> Result<Fit, ShapeError> {
    let n = unknowns.len();
    let rows = blocks.len() * COMPONENTS;
    let mut design = DMatrix::<f64>::zeros(rows, n);
    let mut data = DVector::<f64>::zeros(rows);
    let mut weight = DVector::<f64>::zeros(rows);
    for (b, block) in blocks.iter().enumerate() {
        let total: f64 = block.frames.iter().map(|&k| observations[k].weight).sum();
        for &k in &block.frames {
            let o = &observations[k];
            for (j, unknown) in unknowns.iter().enumerate() {
                for (c, it) in (unknown.column)(o).into_iter().enumerate() {
                    design[(b * COMPONENTS + c, j)] += o.weight / total * it;
                }
            }
        }
        for c in 0..COMPONENTS {
            data[b * COMPONENTS + c] = block.mean_mas[c];
            weight[b * COMPONENTS + c] = 1.0 / (excess * block.variance_mas2[c].max(1e-12));
        }
    }
    let prior = prior_precision(blocks, known, unknowns);
    let weighted = DMatrix::from_fn(rows, n, |r, c| weight[r] * design[(r, c)]);
    let information = design.transpose() * &weighted;
    let total = &information + &prior;
    let scale: Vec<f64> = (0..n).map(|i| total[(i, i)].max(1e-300).sqrt()).collect();
    let scaled = DMatrix::from_fn(n, n, |i, j| total[(i, j)] / (scale[i] * scale[j]));
    let inverse = scaled
        .cholesky()
        .ok_or(ShapeError::Singular {
            unknowns: n,
            blocks: blocks.len(),
        })?
        .inverse();
    let covariance = DMatrix::from_fn(n, n, |i, j| inverse[(i, j)] / (scale[i] * scale[j]));
    let response = &covariance * weighted.transpose();
    let values = &response * &data;
    let gain = [RADIUS, OBLATENESS, P4].map(|i| {
        (0..blocks.len())
            .map(|b| std::array::from_fn(|c| response[(i, b * COMPONENTS + c)]))
            .collect()
    });
    let residual = &data - &design * &values;
    let mut chi2 = (0.0, 0.0);
    for b in 0..blocks.len() {
        for c in [1, 2, 5, 6] {
            let r = b * COMPONENTS + c;
            chi2.0 += weight[r] * residual[r].powi(2);
            chi2.1 += 1.0;
        }
    }
    let influence = &covariance * &information;
    let fitted: f64 = (0..n)
        .filter(|&i| {
            i != RADIUS && unknowns[i].name != "plate scale" && !driven_third(&unknowns[i].name)
        })
        .map(|i| influence[(i, i)])
        .sum();
    // The m = 3 terms take their own components, which are not counted above.
    let free_third = if known.distortion_sigma_mas.is_none() {
        2.0
    } else {
        0.0
    };
    chi2.1 -= fitted - free_third;
    let degrees = blocks.iter().map(|it| it.degrees).sum::<f64>().max(2.0);
    Ok(Fit {
        terms: unknowns.iter().map(|it| it.name.clone()).collect(),
        units: unknowns.iter().map(|it| it.unit).collect(),
        contributions: contributions(&covariance, &information, &prior, known, unknowns),
        slopes: slopes(known, unknowns, &values, &covariance),
        values,
        covariance,
        chi2,
        excess,
        degrees,
        gain,
        free_instrument: known.distortion_sigma_mas.is_none(),
    })
}

/// Whether an unknown is a driver's of m = 3, whose components are not in chi square.
fn driven_third(name: &str) -> bool {
    name.starts_with(DRIVER) && name.contains("m=3")
}

/// Precision of what is known before: independent terms, and the layers' tilt as a first-order
/// process in time.
fn prior_precision(blocks: &[Block], known: &Known, unknowns: &[Unknown]) -> DMatrix<f64> {
    let n = unknowns.len();
    let mut out = DMatrix::<f64>::zeros(n, n);
    for (i, it) in unknowns.iter().enumerate() {
        if let Some(sigma) = it.prior {
            let sigma = if sigma > TINY { sigma } else { TINY };
            out[(i, i)] = 1.0 / (sigma * sigma);
        }
    }
    if known.tilt_sigma_arcmin <= TINY {
        return out;
    }
    let mut times: Vec<(usize, f64)> = Vec::new();
    for it in blocks {
        if times.last().is_none_or(|last| last.0 != it.sequence) {
            times.push((it.sequence, it.time_s));
        }
    }
    let k = times.len();
    let tau = known.tilt_tau_s.max(1.0);
    let covariance = DMatrix::from_fn(k, k, |i, j| {
        let apart = (times[i].1 - times[j].1).abs();
        known.tilt_sigma_arcmin.powi(2) * ((-apart / tau).exp() + if i == j { 1e-9 } else { 0.0 })
    });
    let Some(precision) = covariance.cholesky().map(|it| it.inverse()) else {
        return out;
    };
    let first = unknowns
        .iter()
        .position(|it| it.name == "layers along")
        .unwrap_or(n);
    for i in 0..k {
        for j in 0..k {
            for axis in 0..2 {
                out[(first + 2 * i + axis, first + 2 * j + axis)] = precision[(i, j)];
            }
        }
    }
    out
}

/// Splits the covariance: frames' noise, and every group of prior knowledge.
fn contributions(
    covariance: &DMatrix<f64>,
    information: &DMatrix<f64>,
    prior: &DMatrix<f64>,
    known: &Known,
    unknowns: &[Unknown],
) -> Vec<Contribution> {
    let part = |middle: &DMatrix<f64>| {
        let whole = covariance * middle * covariance;
        [RADIUS, OBLATENESS, P4].map(|i| whole[(i, i)].max(0.0))
    };
    let group = |member: &dyn Fn(&str) -> bool| {
        let mut masked = prior.clone();
        for i in 0..unknowns.len() {
            for j in 0..unknowns.len() {
                if !(member(&unknowns[i].name) && member(&unknowns[j].name)) {
                    masked[(i, j)] = 0.0;
                }
            }
        }
        part(&masked)
    };
    let line =
        |term: &str, v: [f64; 3], random: bool, scope: &'static str, how: &str| Contribution {
            term: term.to_owned(),
            radius_mas2: v[0],
            oblateness_mas2: v[1],
            p4_mas2: v[2],
            random,
            scope,
            how: how.to_owned(),
        };
    let mut out = vec![line(
        "turbulence and photons",
        part(information),
        true,
        "frame",
        "scatter of the frames' harmonics, inflated for correlation in time",
    )];
    let air = group(&|it| it == "refractivity");
    let total: f64 = known
        .refractivity
        .iter()
        .map(|it| it.sigma_rel.powi(2))
        .sum();
    for it in &known.refractivity {
        let share = if total > 0.0 {
            it.sigma_rel.powi(2) / total
        } else {
            0.0
        };
        out.push(line(
            it.term,
            air.map(|v| v * share),
            false,
            it.scope,
            &it.how,
        ));
    }
    for (name, term, scope, how) in [
        (
            "vertical residual",
            "residual along the vertical",
            "session",
            "stated allowance for what is fixed to the vertical",
        ),
        (
            "camera angle",
            "camera angle",
            "session",
            "camera.angle_sigma_deg through the correction for refraction",
        ),
        (
            "plate scale",
            "plate scale",
            "session",
            "camera.scale_sigma_rel",
        ),
        (
            "clock",
            "clock",
            "session",
            "time.clock_sigma_s through the zenith distance",
        ),
    ] {
        out.push(line(term, group(&|it| it == name), false, scope, how));
    }
    out.push(line(
        "direction of the vertical",
        group(&|it| it.starts_with("plumb line")),
        false,
        "session",
        "deflection of the vertical at the station, as far as the session gives it",
    ));
    out.push(line(
        "tilted layers",
        group(&|it| it.starts_with("layers")),
        false,
        "burst",
        "refractivity.layer_tilt_sigma_arcmin, correlated over refractivity.layer_tilt_tau_min",
    ));
    if known.distortion_sigma_mas.is_some() {
        out.push(line(
            "instrument distortion",
            group(&|it| it.starts_with("instrument")),
            false,
            "instrument",
            "instrument.distortion_sigma_mas",
        ));
    }
    for (k, driver) in known.drivers.iter().enumerate() {
        let own = format!("{DRIVER}{k} ");
        out.push(line(
            driver.term,
            group(&|it| it.starts_with(&own)),
            false,
            "session",
            &driver.how,
        ));
    }
    if unknowns[OBLATENESS].prior.is_some() || unknowns[P4].prior.is_some() {
        out.push(line(
            "Sun's terms not separated",
            group(&|it| it == "oblateness" || it == "p4"),
            false,
            "model",
            "zero with 12 mas for the oblateness and 4 mas for P4, where the observation cannot tell them from the instrument",
        ));
    }
    out
}

/// Factor on the variances where the blocks scatter beyond the 99 percent point of chance.
fn excess_factor(chi2: f64, dof: f64) -> f64 {
    use statrs::distribution::{ChiSquared, ContinuousCDF};
    match ChiSquared::new(dof) {
        Ok(it) if chi2 > it.inverse_cdf(0.99) => chi2 / dof,
        _ => 1.0,
    }
}
