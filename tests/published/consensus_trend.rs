//! Source: `data/excess_slope_pairs.csv`, regression values of SciPy and of simulations (see its first
//! line); quantiles of Student's t from common tables.

use super::consensus_means::half_digit;
use std::path::Path;
use truelimb::consensus::pairs::{Scatter, matched, paired, unpaired};
use truelimb::consensus::{ConsensusError, Value, student, trend};

/// Rows of one topic: case, quantity, value and half of its last digit.
fn rows(topic: &str) -> Vec<(String, String, f64, f64)> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/excess_slope_pairs.csv");
    std::fs::read_to_string(path)
        .unwrap()
        .lines()
        .filter_map(|line| {
            let cells: Vec<&str> = line.split(',').collect();
            (cells[0] == topic).then(|| {
                let (value, half) = (cells[3].parse().unwrap(), half_digit(cells[3]));
                (cells[1].to_owned(), cells[2].to_owned(), value, half)
            })
        })
        .collect()
}

fn years(n: usize) -> Vec<f64> {
    (0..n).map(|it| it as f64).collect()
}

#[test]
fn slope_that_yearly_seasons_can_show() {
    let table = rows("slope_per_year(yearly seasons; unit s)");
    assert_eq!(table.len(), 35);
    for (case, quantity, value, half) in table {
        let n = case.trim_start_matches("N=").parse().unwrap();
        let it = trend::limits(&years(n), 1.0, 0.0).unwrap();
        let got = match quantity.as_str() {
            "sigma_b_over_s" => it.sigma,
            "limit95_s_known" => it.limit,
            "limit95_s_from_residuals" => it.limit_by_scatter.unwrap(),
            "found_in_95pct_s_known" => it.found,
            "found_in_95pct_s_from_residuals" => it.found_by_scatter.unwrap(),
            other => panic!("{other}"),
        };
        assert!(
            (got - value).abs() <= half * 1.0001,
            "{case} {quantity}: {got} for {value}"
        );
    }
}

#[test]
fn seasons_that_hang_together_show_less() {
    let table = rows("slope_per_year(AR1 seasons)");
    assert_eq!(table.len(), 2);
    let white = trend::limits(&years(11), 1.0, 0.0).unwrap().sigma;
    for (case, _, value, half) in table {
        let rho = case.rsplit('=').next().unwrap().parse().unwrap();
        let got = trend::limits(&years(11), 1.0, rho).unwrap().sigma / white;
        assert!((got - value).abs() <= half, "{case}: {got} for {value}");
    }
}

#[test]
fn the_line_through_four_points() {
    // By hand: times 0..3, values 1, 3, 2, 4, equal weights: slope 0.8, mean 2.5, residual squares 1.8.
    let values = [1.0, 3.0, 2.0, 4.0].map(|it| Value::new(it, 0.5));
    let line = trend::slope(&years(4), &values).unwrap();
    assert!((line.slope - 0.8).abs() < 1e-12 && (line.value - 2.5).abs() < 1e-12);
    assert!((line.time - 1.5).abs() < 1e-12 && (line.q - 1.8 / 0.25).abs() < 1e-12);
    assert!((line.sigma - 0.5 / 5.0_f64.sqrt()).abs() < 1e-12);
    let by_scatter = (1.8_f64 / 2.0 / 5.0).sqrt();
    assert!((line.sigma_by_scatter.unwrap() - by_scatter).abs() < 1e-12);
    assert!(matches!(
        trend::slope(&[1.0; 4], &values),
        Err(ConsensusError::OneEpoch { found: 4 })
    ));
    assert!(trend::limits(&years(4), 0.5, 1.0).is_err());
}

#[test]
fn quantiles_of_common_tables() {
    for (degrees, t) in [(1.0, 12.706), (2.0, 4.303), (5.0, 2.571), (10.0, 2.228)] {
        assert!((student::quantile(0.95, degrees) - t).abs() <= 5e-4);
    }
    assert!((student::quantile(0.95, f64::INFINITY) - 1.960).abs() <= 5e-4);
    assert!((student::share_below(-1.96, f64::INFINITY) - 0.025).abs() < 5e-5);
    // 1.960 + 1.645, the sum of two quantiles of the normal law.
    assert!((student::effect_found(0.95, f64::INFINITY) - 3.605).abs() <= 5e-4);
    // Without an effect a test at 95 percent alarms in 5 percent.
    for degrees in [1.0, 3.0, 30.0] {
        let critical = student::quantile(0.95, degrees);
        assert!((student::power(0.0, critical, degrees) - 0.05).abs() < 1e-9);
    }
}

#[test]
fn pairs_take_out_what_both_share() {
    let scatter = Scatter {
        first: 0.5,
        second: 0.3,
        common: 0.4,
    };
    let table = rows("pairs_example");
    assert_eq!(table.len(), 3);
    for (_, quantity, value, half) in table {
        let got = match quantity.as_str() {
            "u_paired_mas" => scatter.of_pairs(10),
            "u_unpaired_mas" => scatter.of_means(10, 10),
            "ratio" => scatter.gain_of_pairs(),
            other => panic!("{other}"),
        };
        assert!((got - value).abs() <= half, "{quantity}: {got} for {value}");
    }
}

#[test]
fn differences_at_common_epochs() {
    // By hand: 1, 2, 3: mean 2, standard deviation 1, t with two degrees of freedom 4.303.
    let differences = [1.0, 2.0, 3.0].map(|it| Value::new(it, 0.1));
    let it = paired(&differences, 0.0).unwrap();
    assert!((it.difference - 2.0).abs() < 1e-12);
    assert!((it.u_by_scatter.unwrap() - 3.0_f64.sqrt().recip()).abs() < 1e-12);
    assert!((it.interval_95[1] - 2.0 - 4.303 / 3.0_f64.sqrt()).abs() < 5e-4);
    // A systematic common to all does not average.
    let with = paired(&differences, 1.0).unwrap();
    assert!((with.u_by_scatter.unwrap() - (1.0_f64 / 3.0 + 1.0).sqrt()).abs() < 1e-12);
    // Pairs that agree better than they should keep their stated error.
    let close = paired(&[Value::new(1.0, 0.4), Value::new(1.0, 0.3)], 0.0).unwrap();
    assert!((close.interval_95[1] - 1.0 - 1.959964 * 0.25).abs() < 1e-6);
    let first = [1.0, 2.0, 3.0].map(|it| Value::new(it, 0.1));
    let means = unpaired(&first, &[Value::new(1.0, 0.1), Value::new(3.0, 0.1)]).unwrap();
    assert!((means.value).abs() < 1e-12 && (means.u - (4.0_f64 / 3.0).sqrt()).abs() < 1e-12);
}

#[test]
fn each_epoch_goes_into_one_pair() {
    // The nearest first: 10.0 meets 10.2, so that 10.5 is left without.
    assert_eq!(
        matched(&[10.0, 20.0, 30.0], &[10.5, 10.2, 29.0, 50.0], 1.0),
        [(0, 1), (2, 2)]
    );
    assert!(matched(&[], &[1.0], 1.0).is_empty());
}
