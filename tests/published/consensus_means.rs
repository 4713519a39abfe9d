//! Source: the tables of `data/meta_bcg.csv`, `data/meta_clasp.csv` and `data/meta_worked_examples.csv`,
//! each row with its own: Colditz et al. 1994, JAMA 271, 698 (counts); `DerSimonian` & Kacker 2007,
//! Contemp. Clin. Trials 28, 105, tables 3 and 4; a key comparison of a PCB (from memory); Puliaev et
//! al. 2000, A&AS 143, 265. Rows marked [C] alone are regression values.

use nalgebra::DMatrix;
use std::collections::HashMap;
use std::path::Path;
use truelimb::consensus::correlated::Dark;
use truelimb::consensus::{
    ConsensusError, Method, RandomEffects, Value, correlated, equivalence_of_consistent,
    equivalence_of_inconsistent, leave_one_out, pairwise, random_effects, weighted_mean,
};

fn text(name: &str) -> String {
    let path = Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("tests/data")
        .join(name);
    std::fs::read_to_string(path).unwrap()
}

/// Printed values with half of their last digit, by data set and quantity.
pub(crate) fn printed() -> HashMap<(String, String), (f64, f64)> {
    text("meta_worked_examples.csv")
        .lines()
        .skip(2)
        .filter_map(|line| {
            let mut cells = line.splitn(4, ',');
            let (set, quantity) = (cells.next()?.to_owned(), cells.next()?.to_owned());
            let number = cells.next()?.split([' ', '(']).next()?;
            Some(((set, quantity), (number.parse().ok()?, half_digit(number))))
        })
        .collect()
}

/// Half a unit of the last printed digit.
pub(crate) fn half_digit(number: &str) -> f64 {
    let (mantissa, exponent) = number.split_once('e').unwrap_or((number, "0"));
    let decimals = mantissa.split_once('.').map_or(0, |it| it.1.len()) as i32;
    0.5 * 10f64.powi(exponent.parse::<i32>().unwrap() - decimals)
}

fn values(name: &str) -> Vec<Value> {
    text(name)
        .lines()
        .skip(2)
        .map(|line| {
            let (x, u) = line.split_once(',').unwrap();
            Value::new(x.parse().unwrap(), u.parse().unwrap())
        })
        .collect()
}

/// Thirteen trials: cases and others among the treated, cases and others among the untreated (from
/// memory; the table made from them is the check).
fn thirteen() -> Vec<Value> {
    let counts: [[f64; 4]; 13] = [
        [4.0, 119.0, 11.0, 128.0],
        [6.0, 300.0, 29.0, 274.0],
        [3.0, 228.0, 11.0, 209.0],
        [62.0, 13536.0, 248.0, 12619.0],
        [33.0, 5036.0, 47.0, 5761.0],
        [180.0, 1361.0, 372.0, 1079.0],
        [8.0, 2537.0, 10.0, 619.0],
        [505.0, 87886.0, 499.0, 87892.0],
        [29.0, 7470.0, 45.0, 7232.0],
        [17.0, 1699.0, 65.0, 1600.0],
        [186.0, 50448.0, 141.0, 27197.0],
        [5.0, 2493.0, 3.0, 2338.0],
        [27.0, 16886.0, 29.0, 17825.0],
    ];
    let of_counts: Vec<Value> = counts
        .iter()
        .map(|[a, b, c, d]| {
            let ratio = (a / (a + b)) / (c / (c + d));
            let variance = 1.0 / a - 1.0 / (a + b) + 1.0 / c - 1.0 / (c + d);
            Value::new(ratio.ln(), variance.sqrt())
        })
        .collect();
    for (it, row) in of_counts.iter().zip(values("meta_bcg.csv")) {
        assert!((it.value - row.value).abs() <= 5.1e-9 && (it.u - row.u).abs() <= 5.1e-9);
    }
    of_counts
}

fn list(x: &[f64], u: &[f64]) -> Vec<Value> {
    x.iter().zip(u).map(|(x, u)| Value::new(*x, *u)).collect()
}

/// Six laboratories, one solution of a polychlorinated biphenyl (from memory).
fn pcb28() -> Vec<Value> {
    list(
        &[34.30, 32.90, 34.53, 32.42, 31.90, 35.80],
        &[1.03, 0.69, 0.83, 0.29, 0.40, 0.38],
    )
}

/// Six annual means of one instrument, arcsec: an example of inconsistent data.
fn annual_means() -> Vec<Value> {
    list(
        &[959.25, 959.32, 959.17, 959.07, 958.93, 958.96],
        &[0.03, 0.06, 0.02, 0.02, 0.03, 0.02],
    )
}

/// Holds everything printed for a data set against what comes out; returns how much was compared.
fn compare(set: &str, values: &[Value]) -> usize {
    let mean = weighted_mean(values).unwrap();
    let mut found: HashMap<String, f64> = [
        ("k", values.len() as f64),
        ("weighted_mean", mean.value),
        ("u_int", mean.u_internal),
        ("u_ext", mean.u_external),
        ("Q", mean.q),
        ("p_value", mean.p.unwrap()),
        ("Birge", mean.birge.unwrap()),
        ("I2_percent", 100.0 * mean.unexplained.unwrap()),
        ("I2_percent(from Q)", 100.0 * mean.unexplained.unwrap()),
    ]
    .map(|(name, it)| (name.to_owned(), it))
    .into();
    for (name, method) in [
        ("DL", Method::DerSimonianLaird),
        ("PM", Method::PauleMandel),
        ("REML", Method::RestrictedLikelihood),
    ] {
        let RandomEffects { tau, value, se, .. } = random_effects(values, method).unwrap();
        found.insert(format!("{name}_tau"), tau);
        found.insert(format!("{name}_tau2"), tau * tau);
        found.insert(format!("{name}_mu"), value);
        found.insert(format!("{name}_se"), se);
    }
    let mut compared = 0;
    for ((_, quantity), (value, half)) in printed().iter().filter(|it| it.0.0 == set) {
        if quantity == "ML_tau" {
            continue; // another estimator
        }
        let got = found[quantity];
        assert!(
            (got - value).abs() <= half * 1.0001,
            "{set} {quantity}: {got} for {value}"
        );
        compared += 1;
    }

    compared
}

#[test]
fn thirteen_trials() {
    assert_eq!(compare("BCG13_logRR", &thirteen()), 15);
}

#[test]
fn six_trials_of_1995() {
    assert_eq!(compare("CLASP6_logOR", &values("meta_clasp.csv")), 9);
}

#[test]
fn six_laboratories() {
    assert_eq!(compare("PCB28_6labs", &pcb28()), 13);
}

#[test]
fn six_annual_means_with_errors_six_times_too_small() {
    assert_eq!(compare("Puliaev2000_EW6", &annual_means()), 10);
}

#[test]
fn with_its_own_moments_hartung_and_knapp_add_nothing() {
    // An identity of the Paule-Mandel estimate where it is above zero.
    for set in [values("meta_bcg.csv"), values("meta_clasp.csv"), pcb28()] {
        let it = random_effects(&set, Method::PauleMandel).unwrap();
        assert!((it.se_hartung_knapp.unwrap() / it.se - 1.0).abs() < 1e-10);
    }
    // The interval is that of Student's t with five degrees of freedom, 2.5706 (common tables).
    let it = random_effects(&pcb28(), Method::PauleMandel).unwrap();
    let [low, high] = it.interval_95.unwrap();
    assert!(((high - low) / (2.0 * it.se) - 2.5706).abs() < 1e-4);
}

// Procedure A of Cox 2002 on the six laboratories: printed on the page of the method, a test of the
// arithmetic (the set is inconsistent).
#[test]
fn degrees_of_equivalence_of_six_laboratories() {
    let expected = [
        (1.0004, 2.0269),
        (-0.3996, 1.3301),
        (1.2304, 1.6187),
        (-0.8796, 0.4484),
        (-1.3996, 0.7104),
        (2.5004, 0.6650),
    ];
    let found = equivalence_of_consistent(&pcb28()).unwrap();
    for (it, (d, u)) in found.iter().zip(expected) {
        assert!((it.difference - d).abs() <= 5.1e-5, "{it:?} for {d}");
        assert!((it.expanded - u).abs() <= 5.1e-5, "{it:?} for {u}");
    }
}

#[test]
fn the_variance_of_a_degree_of_equivalence_is_that_of_its_own_weights() {
    // x_i - sum w_j x_j, each x_j with u_j^2 + tau^2, written out.
    let values = pcb28();
    let consensus = random_effects(&values, Method::PauleMandel).unwrap();
    let found = equivalence_of_inconsistent(&values, &consensus).unwrap();
    for (i, it) in found.iter().enumerate() {
        let variance: f64 = values
            .iter()
            .zip(&consensus.weights)
            .enumerate()
            .map(|(j, (v, w))| {
                let factor = if i == j { 1.0 - w } else { -w };
                factor * factor * (v.u * v.u + consensus.tau.powi(2))
            })
            .sum();
        assert!((it.expanded - 2.0 * variance.sqrt()).abs() < 1e-9);
    }
}

#[test]
fn what_two_values_share_leaves_their_difference() {
    let values = [Value::new(8.0, 0.5), Value::new(7.0, 0.5)];
    let u = |shared| {
        let pair = pairwise(&values, |_, _| shared).unwrap()[0].equivalence;
        (pair.difference, 0.5 * pair.expanded)
    };
    assert_eq!(u(0.0), (1.0, 0.5_f64.sqrt()));
    assert!((u(0.24).1 - 0.02_f64.sqrt()).abs() < 1e-12);
}

fn diagonal(set: &[Value]) -> DMatrix<f64> {
    DMatrix::from_fn(set.len(), set.len(), |i, j| {
        if i == j { set[i].u.powi(2) } else { 0.0 }
    })
}

#[test]
fn without_anything_shared_least_squares_is_paule_mandel() {
    for set in [values("meta_bcg.csv"), pcb28(), annual_means()] {
        let plain = random_effects(&set, Method::PauleMandel).unwrap();
        let x: Vec<f64> = set.iter().map(|it| it.value).collect();
        let v = diagonal(&set);
        let fit = correlated::mean(&x, &v).unwrap();
        assert!((fit.tau / plain.tau - 1.0).abs() < 1e-9);
        assert!((fit.values[0] - plain.value).abs() < 1e-9);
        assert!((fit.se(&[1.0]) / plain.se - 1.0).abs() < 1e-9);
        assert!((fit.q - weighted_mean(&set).unwrap().q).abs() < 1e-9 * fit.q);
        let [low, high] = fit.interval_95(&[1.0]);
        let [l, h] = plain.interval_95.unwrap();
        assert!((low - l).abs() < 1e-8 && (high - h).abs() < 1e-8);
    }
}

#[test]
fn by_moments_and_by_distance_too() {
    for set in [thirteen(), pcb28()] {
        let plain = random_effects(&set, Method::DerSimonianLaird).unwrap();
        let x: Vec<f64> = set.iter().map(|it| it.value).collect();
        let v = diagonal(&set);
        let ones = DMatrix::from_element(set.len(), 1, 1.0);
        let fit = correlated::fit(&x, &v, &ones, Dark::DerSimonianLaird).unwrap();
        assert!((fit.tau / plain.tau - 1.0).abs() < 1e-9);
        let found = correlated::equivalence(&fit, &x, &v, &ones).unwrap();
        let expected = equivalence_of_inconsistent(&set, &plain).unwrap();
        for (a, b) in found.iter().zip(&expected) {
            assert!((a.difference - b.difference).abs() < 1e-9);
            assert!((a.expanded - b.expanded).abs() < 1e-9);
        }
    }
}

#[test]
fn an_error_shared_by_all_stays_in_the_mean_whatever_their_number() {
    // Variance of the mean of n equal values with a common part c: u^2 / n + c^2.
    let n = 16;
    let v = DMatrix::from_fn(n, n, |i, j| if i == j { 0.25 + 0.09 } else { 0.09 });
    let fit = correlated::mean(&vec![8.0; n], &v).unwrap();
    assert!((fit.se(&[1.0]).powi(2) - (0.25 / 16.0 + 0.09)).abs() < 1e-12);
    assert_eq!(fit.tau, 0.0);
}

#[test]
fn the_mean_of_what_is_left_without_each_in_turn() {
    let found = leave_one_out(&pcb28(), Method::DerSimonianLaird).unwrap();
    assert_eq!(found.len(), 6);
    let mut rest = pcb28();
    rest.remove(5);
    assert_eq!(
        found[5],
        random_effects(&rest, Method::DerSimonianLaird).unwrap()
    );
    assert!(found[5].value < found[0].value);
}

#[test]
fn what_is_no_measurement_is_refused() {
    assert!(matches!(
        weighted_mean(&[]),
        Err(ConsensusError::TooFew { found: 0, .. })
    ));
    assert!(matches!(
        weighted_mean(&[Value::new(1.0, 0.1), Value::new(2.0, 0.0)]),
        Err(ConsensusError::Uncertainty { place: 2, .. })
    ));
    assert!(matches!(
        random_effects(&[Value::new(f64::NAN, 0.1)], Method::PauleMandel),
        Err(ConsensusError::NotFinite { place: 1, .. })
    ));
    let one = random_effects(&[Value::new(1.0, 0.1)], Method::PauleMandel).unwrap();
    assert_eq!((one.tau, one.value, one.interval_95), (0.0, 1.0, None));
    let singular = DMatrix::from_element(2, 2, 1.0);
    assert!(matches!(
        correlated::mean(&[1.0, 2.0], &singular),
        Err(ConsensusError::Singular { .. })
    ));
}
