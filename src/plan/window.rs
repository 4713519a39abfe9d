//! The best stretch of the day, and the fewest turns of the instrument that tell it from the Sun.

use super::PlanError;
use super::expected::{Expected, Stretch, fitted, observation};
use super::quarters::{QUARTER_S, Quarter, STRETCHES};
use crate::pipeline::ahead::{self, Ahead};
use crate::result::plan::{PlannedLine, PlannedRoll, PlannedWindow, RollChoice};
use crate::result::record::Quantity;
use crate::session::Session;
use crate::shape::Observation;
use crate::sky::Utc;
use rayon::prelude::*;

/// Positions that are compared: how many, and degrees from one to the next.
const POSITIONS: [(usize, f64); 11] = [
    (1, 0.0),
    (2, 30.0),
    (2, 45.0),
    (2, 60.0),
    (2, 75.0),
    (2, 90.0),
    (3, 45.0),
    (3, 60.0),
    (4, 30.0),
    (4, 45.0),
    (6, 30.0),
];

/// Fewer turns are taken as long as the error stays within this factor of the least of all choices.
const WORTH_A_TURN: f64 = 1.25;

/// A stretch of the day with positions of the instrument, and the error to expect.
#[derive(Clone, Debug)]
pub(super) struct Candidate {
    /// First quarter.
    first: usize,
    positions: (usize, f64),
    expected: Expected,
    frames: f64,
}

/// What was found: the choice, and every number of positions at its best.
pub(super) struct Found {
    pub(super) window: Option<PlannedWindow>,
    pub(super) choices: Vec<RollChoice>,
    /// Which quarters the window has.
    pub(super) quarters: std::ops::Range<usize>,
}

/// The best window of so many quarters among those in which the shape can be measured.
pub(super) fn best(
    session: &Session,
    quarters: &[Quarter],
    length: usize,
    frames_per_s: Option<f64>,
) -> Result<Found, PlanError> {
    let firsts: Vec<usize> = (0..quarters.len().saturating_sub(length - 1))
        .filter(|&first| {
            let window = &quarters[first..first + length];
            let together = window
                .windows(2)
                .all(|it| (it[1].start.minus(it[0].start) - QUARTER_S).abs() < 1.0);
            together && window.iter().all(|it| it.noise.is_some())
        })
        .collect();
    let mut bests = Vec::new();
    for positions in POSITIONS {
        // A position needs a stretch of its own.
        if positions.0 > STRETCHES * length {
            continue;
        }
        let tried: Vec<Result<Candidate, PlanError>> = firsts
            .par_iter()
            .map(|&first| candidate(session, quarters, first, length, positions, frames_per_s))
            .collect();
        let tried = tried.into_iter().collect::<Result<Vec<_>, _>>()?;
        let better = |a: &Candidate, b: &Candidate| key(a).total_cmp(&key(b));
        bests.extend(tried.into_iter().min_by(better));
    }
    // Of each number of positions the step that tells Sun and instrument apart best.
    let mut each: Vec<Candidate> = Vec::new();
    for it in bests {
        match each.last_mut() {
            Some(last) if last.positions.0 == it.positions.0 => {
                if by_condition(&it, last).is_lt() {
                    *last = it;
                }
            }
            _ => each.push(it),
        }
    }
    let least = each
        .iter()
        .map(key)
        .fold(f64::INFINITY, |a, b| if b < a { b } else { a });
    let chosen = each
        .iter()
        .find(|it| key(it).is_finite() && key(it) <= WORTH_A_TURN * least);
    Ok(Found {
        quarters: chosen.map_or(0..0, |it| it.first..it.first + length),
        window: chosen.map(|it| record(quarters, it, length)),
        choices: each.iter().map(|it| choice(quarters, it)).collect(),
    })
}

/// Factor on the error where the next harmonic is not separated: any schedule that separates both is
/// taken before one that leaves it open.
const FOURTH_OPEN: f64 = 100.0;

/// What is to be small: the whole error, without end where the oblateness is not separated.
fn key(it: &Candidate) -> f64 {
    let separability = &it.expected.separability;
    match (separability.oblateness, separability.p4) {
        (true, true) => it.expected.oblateness_mas(),
        (true, false) => FOURTH_OPEN * it.expected.oblateness_mas(),
        _ => f64::INFINITY,
    }
}

/// Which of two steps tells Sun and instrument apart better, the error where neither does.
fn by_condition(a: &Candidate, b: &Candidate) -> std::cmp::Ordering {
    let condition = |it: &Candidate| {
        let it = &it.expected.separability;
        it.sun_condition_number.unwrap_or(f64::INFINITY)
    };
    condition(a)
        .total_cmp(&condition(b))
        .then(key(a).total_cmp(&key(b)))
}

/// Position of a stretch: each position has an equal share of the window, one after the other.
fn position(stretch: usize, stretches: usize, positions: usize) -> usize {
    stretch * positions / stretches
}

fn candidate(
    session: &Session,
    quarters: &[Quarter],
    first: usize,
    length: usize,
    positions: (usize, f64),
    frames_per_s: Option<f64>,
) -> Result<Candidate, PlanError> {
    let window = &quarters[first..first + length];
    let start = window[0].start;
    let stretches = STRETCHES * length;
    let mut observations: Vec<Observation> = Vec::with_capacity(stretches);
    let mut moments: Vec<&Ahead> = Vec::with_capacity(stretches);
    let mut sequence = 0;
    let mut last = None;
    let mut all = 0.0;
    for (q, quarter) in window.iter().enumerate() {
        let (Some(noise), Some(rate)) = (quarter.noise, quarter.frames_per_s(frames_per_s)) else {
            continue;
        };
        for (k, moment) in quarter.moments.iter().enumerate() {
            let place = position(q * STRETCHES + k, stretches, positions.0);
            // A new quarter or a new position is a sequence of its own, as the layers' tilt goes on.
            if last.is_some_and(|it| it != (q, place)) {
                sequence += 1;
            }
            last = Some((q, place));
            let frames = rate * QUARTER_S / STRETCHES as f64;
            all += frames;
            let at = Stretch {
                sequence,
                time_s: moment.utc.minus(start),
                frames,
                step_s: 1.0 / rate,
                roll_deg: place as f64 * positions.1,
            };
            observations.push(observation(session, moment, &noise, &at));
            moments.push(moment);
        }
    }
    let known = ahead::known(session, &moments, start);
    Ok(Candidate {
        first,
        positions,
        expected: fitted(&observations, &known)?,
        frames: all,
    })
}

fn choice(quarters: &[Quarter], it: &Candidate) -> RollChoice {
    let separated = it.expected.separability.oblateness;
    RollChoice {
        moves: it.positions.0 - 1,
        step_deg: it.positions.1,
        from_utc: quarters[it.first].start.to_iso(),
        separated,
        condition_number: it.expected.separability.sun_condition_number,
        sigma_random_mas: separated.then_some(it.expected.random_mas[1]),
        sigma_systematic_mas: separated.then_some(it.expected.systematic_mas[1]),
    }
}

fn record(quarters: &[Quarter], it: &Candidate, length: usize) -> PlannedWindow {
    let window = &quarters[it.first..it.first + length];
    let start = window[0].start;
    let end = start.plus_s(QUARTER_S * length as f64);
    let zeniths = window.iter().map(Quarter::zenith_deg);
    let (mut low, mut high) = (f64::NEG_INFINITY, f64::INFINITY);
    for z in zeniths {
        low = if z > low { z } else { low };
        high = if z < high { z } else { high };
    }
    let expected = &it.expected;
    let both = |k: usize| expected.random_mas[k].hypot(expected.systematic_mas[k]);
    let seconds = QUARTER_S * length as f64;
    let mut sigma = Quantity::missing("mas", "the oblateness itself is what is to be measured");
    sigma.sigma = Some(both(1));
    PlannedWindow {
        time_utc: [start.to_iso(), end.to_iso()],
        hours: seconds / 3600.0,
        zenith_true_deg: [low, high],
        sigma,
        sigma_random_mas: expected.random_mas[1],
        sigma_systematic_mas: expected.systematic_mas[1],
        sigma_radius_mas: both(0),
        sigma_p4_mas: both(2),
        rolls: rolls(start, STRETCHES * length, it.positions),
        moves: it.positions.0 - 1,
        condition_number: expected.separability.sun_condition_number,
        frames_per_s: it.frames / seconds,
        frames: it.frames,
        budget: expected
            .contributions
            .iter()
            .map(|it| PlannedLine {
                term: it.term.clone(),
                sigma_mas: it.oblateness_mas2.sqrt(),
                kind: if it.random { "random" } else { "systematic" }.to_owned(),
            })
            .collect(),
    }
}

/// From when to when the instrument stands at each position.
fn rolls(start: Utc, stretches: usize, positions: (usize, f64)) -> Vec<PlannedRoll> {
    let step_s = QUARTER_S / STRETCHES as f64;
    (0..positions.0)
        .map(|p| {
            let inside = |k: &usize| position(*k, stretches, positions.0) == p;
            let first = (0..stretches).find(inside).unwrap_or(0);
            let count = (0..stretches).filter(inside).count();
            let at = |k: usize| start.plus_s(k as f64 * step_s).to_iso();
            PlannedRoll {
                from_utc: at(first),
                to_utc: at(first + count),
                roll_deg: p as f64 * positions.1,
            }
        })
        .collect()
}
