//! Many sessions into one value: shared errors stay shared, disagreement is found, slopes have limits.
//!
//! One small session is reduced; its record is the form into which the numbers of each check are put.

use std::fmt::Write as _;
use std::sync::OnceLock;
use truelimb::pipeline::{self, Options, Silent};
use truelimb::result::record::{BudgetLine, Record, Status};
use truelimb::season::{Covariate, SeasonError, Settings, combine};
use truelimb::session;
use truelimb::sky::Utc;

fn form() -> &'static Record {
    static ONCE: OnceLock<Record> = OnceLock::new();
    ONCE.get_or_init(|| {
        let session = session::read("tests/data/session/session.toml".as_ref()).unwrap();
        let options = Options {
            seed: 1,
            stack: false,
        };
        pipeline::reduce(&session, &options, &Silent)
            .unwrap()
            .record
    })
}

fn line(term: &str, scope: &str, sigma_mas: f64, sigma_radius_mas: f64) -> BudgetLine {
    BudgetLine {
        term: term.to_owned(),
        sigma_mas: Some(sigma_mas),
        sigma_radius_mas,
        kind: "systematic".to_owned(),
        scope: scope.to_owned(),
        how: String::new(),
    }
}

/// The record of the k-th session, a Julian year after the one before.
fn session_at(
    k: usize,
    oblateness: (f64, f64),
    radius: (f64, f64),
    budget: Vec<BudgetLine>,
) -> Record {
    let mut it = form().clone();
    let start = Utc::parse("2020-03-01T09:00:00").unwrap();
    let from = start.plus_s(365.25 * 86400.0 * k as f64);
    it.time_utc = [from.to_iso(), from.plus_s(3600.0).to_iso()];
    it.created_from[0].sha256 = format!("{k:064x}");
    let of = |to: &mut truelimb::result::record::ShapeQuantity, it: (f64, f64)| {
        to.value = Some(it.0);
        to.sigma = Some(it.1);
        to.status = Status::Measured;
    };
    of(&mut it.shape.oblateness, oblateness);
    of(&mut it.shape.radius, radius);
    it.budget = budget;
    it
}

fn close(found: f64, expected: f64, within: f64) {
    assert!(
        (found - expected).abs() <= within,
        "{found} where {expected} is expected"
    );
}

/// Source: numpy 2, `numpy.linalg.inv` of the covariance, for these numbers.
#[test]
fn the_mean_is_that_of_generalised_least_squares() {
    let x = [7.1, 9.0, 8.2, 6.8];
    let own: [f64; 4] = [1.2, 0.9, 2.0, 1.5];
    let formula = [0.5, 0.8, 0.4, 0.6];
    let optics = [0.0, 0.7, 0.9, 0.0];
    let records: Vec<Record> = (0..4)
        .map(|k| {
            let sigma = (own[k] * own[k] + formula[k] * formula[k] + optics[k] * optics[k]).sqrt();
            let budget = vec![
                line("turbulence", "frame", own[k], 1.0),
                line("formula", "model", formula[k], 0.0),
                line("optics", "instrument", optics[k], 0.0),
            ];
            session_at(k, (x[k], sigma), (959.8, 0.1), budget)
        })
        .collect();
    let it = combine(&records, &Settings::default()).unwrap().oblateness;
    close(it.mean.value.unwrap(), GLS.0, 1e-9);
    let (own, shared) = (it.sigma_own.unwrap(), it.sigma_shared.unwrap());
    close(own.hypot(shared), GLS.1, 1e-9);
    close(shared, GLS.2, 1e-9);
    close(it.heterogeneity.unwrap().q, GLS.3, 1e-9);
    for (k, weight) in GLS.4.into_iter().enumerate() {
        close(it.series[k].weight.unwrap(), weight, 1e-8);
    }
    let names: Vec<&str> = it.shared.iter().map(|it| it.term.as_str()).collect();
    assert_eq!(names, ["formula", "optics"]);
}

/// Mean, standard error, what of it is shared, chi square, weights.
const GLS: (f64, f64, f64, f64, [f64; 4]) = (
    7.639942648591,
    0.937568037515,
    0.652587431071,
    1.842056415824,
    [0.4047235458, 0.2636330368, 0.0989520741, 0.2326913432],
);

/// By hand: equal sessions of 3 own and 4 shared: `sqrt(9 / n + 16)`, whatever n.
#[test]
fn what_is_shared_does_not_average_down() {
    for n in [2, 4, 16] {
        let records: Vec<Record> = (0..n)
            .map(|k| {
                let budget = vec![line("edge", "model", 4.0, 4.0)];
                session_at(k, (8.0, 5.0), (959.8, 0.005), budget)
            })
            .collect();
        let it = combine(&records, &Settings::default()).unwrap();
        for (q, unit) in [(&it.oblateness, 1.0), (&it.radius, 1e-3)] {
            close(q.sigma_shared.unwrap(), 4.0 * unit, 1e-12);
            close(q.sigma_own.unwrap(), unit * 3.0 / (n as f64).sqrt(), 1e-12);
        }
    }
}

#[test]
fn optics_are_shared_within_a_station_and_a_declared_line_everywhere() {
    let records: Vec<Record> = (0..4)
        .map(|k| {
            let budget = vec![
                line("optics", "instrument", 4.0, 0.0),
                line("plate scale", "session", 2.0, 0.0),
            ];
            let mut it = session_at(k, (8.0, 5.0), (959.8, 0.1), budget);
            it.site_name = ["Corrie Head", "Strand Point"][k / 2].to_owned();
            it
        })
        .collect();
    let by_station = combine(&records, &Settings::default()).unwrap().oblateness;
    // By hand: two stations, 4 in each, half weight each: 4 / sqrt 2.
    close(by_station.sigma_shared.unwrap(), 8.0_f64.sqrt(), 1e-12);
    assert_eq!(by_station.shared.len(), 2);
    let settings = Settings {
        common: vec!["plate scale".to_owned()],
        covariate: None,
    };
    let declared = combine(&records, &settings).unwrap().oblateness;
    close(
        declared.sigma_shared.unwrap(),
        (8.0_f64 + 4.0).sqrt(),
        1e-12,
    );
    let settings = Settings {
        common: vec!["plate scal".to_owned()],
        covariate: None,
    };
    let error = combine(&records, &settings).unwrap_err();
    assert!(matches!(&error, SeasonError::NoLine { lines, .. } if lines.contains("plate scale")));
}

/// Source: six east/west annual means of Puliaev et al. 2000, A&AS 143, 265; statistics as on the
/// project's physics page, section 8.3, to its digits.
#[test]
fn inconsistent_sessions_get_a_dark_uncertainty() {
    let x = [959.25, 959.32, 959.17, 959.07, 958.93, 958.96];
    let u = [0.03, 0.06, 0.02, 0.02, 0.03, 0.02];
    let records: Vec<Record> = (0..6)
        .map(|k| session_at(k, (8.0, 1.0), (x[k], u[k]), Vec::new()))
        .collect();
    let combined = combine(&records, &Settings::default()).unwrap();
    let it = &combined.radius;
    let by = |name: &str| it.by_method.iter().find(|it| it.method == name).unwrap();
    close(it.by_method[0].value, 959.0789, 5e-5);
    close(it.by_method[0].sigma, 0.0100, 5e-5);
    close(it.by_method[1].sigma, 0.051, 5e-4);
    let found = it.heterogeneity.as_ref().unwrap();
    close(found.birge.unwrap(), 5.09, 0.005);
    close(found.dark, 0.1519, 5e-5);
    close(it.mean.value.unwrap(), 959.1127, 5e-5);
    close(it.sigma_own.unwrap(), 0.0634, 5e-5);
    let dl = it
        .by_method
        .iter()
        .find(|it| (it.value - 959.1111).abs() < 5e-5)
        .unwrap();
    close(dl.sigma, 0.0530, 5e-5);
    assert!(by(&dl.method).dark.unwrap() > 0.0);
    assert!(
        combined
            .warnings
            .iter()
            .any(|it| it.code == "heterogeneous")
    );
    // The same numbers fall by 0.3 in five years: a slope that the scatter about it allows.
    assert!(it.trend.slope.value.unwrap() < 0.0);
}

/// The values of a row of the table of slopes.
fn printed(case: &str, quantity: &str) -> f64 {
    let text = std::fs::read_to_string("tests/data/excess_slope_pairs.csv").unwrap();
    let row = text
        .lines()
        .find(|it| {
            it.starts_with(&format!(
                "slope_per_year(yearly seasons; unit s),{case},{quantity},"
            ))
        })
        .unwrap();
    row.split(',').nth(3).unwrap().parse().unwrap()
}

/// Source: `excess_slope_pairs.csv` of the project's reference (formulas of section 8.4): yearly
/// sessions of unit error.
#[test]
fn the_slope_that_so_many_seasons_can_show() {
    for n in [4, 5, 8, 11] {
        let records: Vec<Record> = (0..n)
            .map(|k| {
                // On a line, so that the scatter adds nothing.
                session_at(k, (8.0 + 0.3 * k as f64, 1.0), (959.8, 0.1), Vec::new())
            })
            .collect();
        let it = combine(&records, &Settings::default())
            .unwrap()
            .oblateness
            .trend;
        let case = format!("N={n}");
        close(it.slope.value.unwrap(), 0.3, 1e-6);
        close(
            it.limit_95.unwrap(),
            printed(&case, "limit95_s_from_residuals"),
            6e-5,
        );
        close(
            it.found_in_95_percent.unwrap(),
            printed(&case, "found_in_95pct_s_from_residuals"),
            6e-5,
        );
    }
}

#[test]
fn a_shared_offset_is_no_part_of_a_slope_and_a_covariate_is_found() {
    let index = |year: f64| 100.0 + 50.0 * (year - 2022.0).sin();
    let mut text = "epoch,activity\n".to_owned();
    for k in 0..400 {
        let year = 2019.0 + f64::from(k) * 0.03;
        writeln!(text, "{year},{}", index(year)).unwrap();
    }
    let covariate = Covariate::read(&text).unwrap();
    let records: Vec<Record> = (0..9)
        .map(|k| {
            let year = 2020.0 + 60.0 / 365.25 + k as f64;
            let budget = vec![line("edge", "model", 4.0, 4.0)];
            session_at(k, (8.0 + 0.02 * index(year), 5.0), (959.8, 0.1), budget)
        })
        .collect();
    let settings = Settings {
        common: Vec::new(),
        covariate: Some(covariate.clone()),
    };
    let it = combine(&records, &settings).unwrap().oblateness;
    let slope = it.covariate.unwrap();
    assert_eq!(slope.slope.unit, "mas/activity");
    close(slope.slope.value.unwrap(), 0.02, 2e-4);
    // By hand: own error 3 alone, and t of 7 degrees of freedom at 68 percent.
    let sxx: f64 = {
        let at: Vec<f64> = (0..9)
            .map(|k| index(2020.0 + 60.0 / 365.25 + f64::from(k)))
            .collect();
        let mean = at.iter().sum::<f64>() / 9.0;
        at.iter().map(|it| (it - mean).powi(2)).sum()
    };
    close(slope.slope.sigma.unwrap() * sxx.sqrt(), 3.0 * 1.0767, 0.02);
    let late = session_at(15, (8.0, 5.0), (959.8, 0.1), Vec::new());
    let error = combine(&[records[0].clone(), late], &settings).unwrap_err();
    assert!(
        error.to_string().contains("nothing is extrapolated"),
        "{error}"
    );
}

#[test]
fn the_order_of_the_sessions_does_not_matter() {
    let records: Vec<Record> = (0..5)
        .map(|k| {
            let budget = vec![line("edge", "model", 1.0 + k as f64, 2.0)];
            session_at(k, (8.0 + k as f64, 7.0), (959.8, 0.1), budget)
        })
        .collect();
    let text = |records: &[Record]| {
        serde_json::to_string(&combine(records, &Settings::default()).unwrap()).unwrap()
    };
    let first = text(&records);
    let mut other = records;
    other.reverse();
    other.swap(0, 3);
    assert_eq!(first, text(&other));
}

#[test]
fn a_session_given_twice_and_one_alone_are_refused() {
    let one = session_at(0, (8.0, 1.0), (959.8, 0.1), Vec::new());
    let error = combine(&[one.clone(), one.clone()], &Settings::default()).unwrap_err();
    assert!(matches!(error, SeasonError::Twice { .. }), "{error}");
    let error = combine(std::slice::from_ref(&one), &Settings::default()).unwrap_err();
    assert!(matches!(error, SeasonError::TooFew { found: 1 }), "{error}");
}

#[test]
fn a_session_that_separates_nothing_keeps_its_radius() {
    let mut records: Vec<Record> = (0..3)
        .map(|k| session_at(k, (8.0, 1.0), (959.8, 0.1), Vec::new()))
        .collect();
    records[1].shape.oblateness.value = None;
    records[1].shape.oblateness.sigma = None;
    records[1].shape.oblateness.status = Status::NotSeparated;
    let it = combine(&records, &Settings::default()).unwrap();
    assert_eq!(it.oblateness.sessions_used, 2);
    assert_eq!(it.radius.sessions_used, 3);
    assert!(it.oblateness.series[1].weight.is_none());
    assert!(it.warnings.iter().any(|it| it.code == "not-separated"));
}
