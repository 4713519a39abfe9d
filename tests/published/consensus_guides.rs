//! Source: JCGM 100:2008 (GUM), annexes H.1 and H.2; ASTM E691, glucose in serum, material A (from
//! memory). Digits as in `data/meta_worked_examples.csv`.

use super::consensus_means::printed;
use nalgebra::DMatrix;
use truelimb::consensus::between::consistency;
use truelimb::consensus::propagate::{Contribution, combined, covariance};
use truelimb::consensus::student;

// H.1.6: four standard uncertainties of an end gauge, nm, with their degrees of freedom.
#[test]
fn end_gauge_of_the_guide() {
    let contributions = [(25.0, 18.0), (9.7, 25.6), (2.9, 50.0), (16.6, 2.0)]
        .map(|(u, degrees)| Contribution { u, degrees });
    let all = combined(&contributions);
    assert!((all.u - 31.671).abs() <= 5e-4);
    assert!((all.degrees - 16.7646).abs() <= 5e-5);
    // The guide goes down to 16 degrees, k = 2.92 and U = 93 nm from the rounded 32 nm.
    let k = student::quantile(0.99, all.degrees.floor());
    assert!((k - 2.92).abs() <= 5e-3);
    assert!((k * 32.0 - 93.0).abs() <= 0.5);
}

// H.2, table H.2: five simultaneous observations of voltage (V), current (mA) and phase (rad); the
// digits of the observations are from memory, what comes out is the guide's.
#[test]
fn resistance_and_reactance_of_the_guide() {
    let observed = DMatrix::from_row_slice(
        3,
        5,
        &[
            5.007, 4.994, 5.005, 4.990, 4.999, //
            19.663e-3, 19.639e-3, 19.640e-3, 19.685e-3, 19.678e-3, //
            1.0456, 1.0438, 1.0468, 1.0428, 1.0433,
        ],
    );
    let mean = observed.column_mean();
    let centred = DMatrix::from_fn(3, 5, |i, j| observed[(i, j)] - mean[i]);
    let of_means = &centred * centred.transpose() / 20.0;
    let (v, i, phi): (f64, f64, f64) = (mean[0], mean[1], mean[2]);
    let (s, c) = phi.sin_cos();
    let jacobian = DMatrix::from_row_slice(
        3,
        3,
        &[
            c / i,
            -v * c / (i * i),
            -v * s / i, //
            s / i,
            -v * s / (i * i),
            v * c / i, //
            1.0 / i,
            -v / (i * i),
            0.0,
        ],
    );
    let cov = covariance(&jacobian, &of_means).unwrap();
    let u = |k: usize| cov[(k, k)].sqrt();
    // By the guide's second route: the spread of the five results themselves.
    let each = DMatrix::from_fn(3, 5, |k, n| {
        let (z, phi) = (observed[(0, n)] / observed[(1, n)], observed[(2, n)]);
        z * [phi.cos(), phi.sin(), 1.0][k]
    });
    for (k, value, sigma) in [
        (0, 127.732, 0.071),
        (1, 219.847, 0.295),
        (2, 254.260, 0.236),
    ] {
        let got = [v * c / i, v * s / i, v / i][k];
        assert!((got - value).abs() <= 5.1e-4, "{got} for {value}");
        let spread = (each.row(k).variance() / 4.0).sqrt();
        assert!((spread - sigma).abs() <= 5e-4, "{spread} for {sigma}");
        // The first route, without rounding on the way, differs by 0.4 % of itself at most, and for
        // the reactance rounds to 0.296.
        assert!((u(k) / spread - 1.0).abs() < 0.004, "{}", u(k));
        assert!(k == 1 || (u(k) - sigma).abs() <= 5e-4, "{}", u(k));
    }
    for (a, b, r) in [(0, 1, -0.588), (0, 2, -0.485), (1, 2, 0.993)] {
        let got = cov[(a, b)] / (u(a) * u(b));
        assert!((got - r).abs() <= 5e-4, "{got} for {r}");
    }
    assert!(covariance(&jacobian, &DMatrix::zeros(2, 2)).is_err());
}

#[test]
fn glucose_of_eight_laboratories() {
    let laboratories = [
        [41.03, 41.45, 41.37],
        [41.17, 42.00, 41.15],
        [41.01, 40.68, 42.66],
        [39.37, 42.37, 42.63],
        [41.88, 41.19, 41.32],
        [43.28, 40.50, 42.28],
        [41.08, 41.27, 39.02],
        [43.36, 42.65, 41.72],
    ]
    .map(|it| it.to_vec());
    let it = consistency(&laboratories, 0.005).unwrap();
    let table = printed();
    let near = |quantity: &str, got: f64| {
        let (value, half) = table[&("E691_glucose_A".to_owned(), quantity.to_owned())];
        assert!((got - value).abs() <= half, "{quantity}: {got} for {value}");
    };
    near("mean", it.mean);
    near("s_x", it.of_means);
    near("s_r", it.within);
    near("s_R", it.reproducibility);
    near("h_lab7", it.h[6]);
    near("h_lab8", it.h[7]);
    near("k_lab4", it.k[3]);
    let h = [-0.388, -0.129, -0.113, -0.102, -0.091, 0.828, -1.752, 1.746];
    let k = [0.210, 0.456, 0.998, 1.704, 0.345, 1.324, 1.174, 0.774];
    for i in 0..8 {
        assert!((it.h[i] - h[i]).abs() <= 5.1e-4, "h {}", it.h[i]);
        assert!((it.k[i] - k[i]).abs() <= 5.1e-4, "k {}", it.k[i]);
    }
    assert!((it.h_critical - 2.15).abs() <= 5e-3);
    assert!((it.k_critical - 2.06).abs() <= 5e-3);
    assert!(consistency(&laboratories[..2], 0.005).is_err());
}
