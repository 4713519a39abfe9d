//! What turbulence makes of the error of the oblateness: its share, its floor, the hours to a goal.

use super::{Parts, lines};
use crate::budget;
use crate::result::record::{HoursTo, Quantity, TurbulenceRecord};

/// The record of turbulence's part in the error.
pub(super) fn record(p: &Parts<'_>) -> TurbulenceRecord {
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
        harmonics: super::seeing::floors(p.seeing),
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
    let floors = p.seeing.floors.as_ref().map_err(Clone::clone)?;
    floors
        .iter()
        .find(|it| it.m == 2)
        .map(|it| it.frame_predicted_mas)
        .ok_or_else(|| "no sequence has enough frames".to_owned())
}
