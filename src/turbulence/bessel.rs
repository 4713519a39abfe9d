//! Rows of Bessel functions over the order, by recurrence.
//!
//! # Model
//!
//! ```text
//! J_(m+1) = (2 m / x) J_m - J_(m-1)        upward for m < x, downward (Miller) for m > x
//! J'_m    = (J_(m-1) - J_(m+1)) / 2
//! 1       = J_0 + 2 sum J_2k               normalises the downward recurrence
//! mean of J'_m^2 over a cycle = (J'_m^2 + Y'_m^2) / 2
//! ```
//!
//! # Valid for
//!
//! Orders to 200, any `x >= 0`; the means only where the functions oscillate, `x` above the order.
//!
//! # Accuracy
//!
//! 1e-12 of the largest member of a row; relative 1e-10 for the small ones of high order.
//!
//! # Source
//!
//! M. Abramowitz and I. A. Stegun, Handbook of Mathematical Functions (1964), 9.1.27, 9.1.46, 9.12.

/// The weight of each harmonic of a ring: `J_1^2` for m = 0 and `J'_m^2` above.
#[derive(Debug)]
pub(super) struct RingWeights {
    j: Vec<f64>,
    y: Vec<f64>,
}

impl RingWeights {
    pub(super) fn new(m_max: usize) -> Self {
        let orders = m_max.max(1) + 2;
        Self {
            j: vec![0.0; orders],
            y: vec![0.0; orders],
        }
    }

    /// Adds `share` times the weights at `x` to `into[0..=m_max]`.
    pub(super) fn add_exact(&mut self, x: f64, share: f64, into: &mut [f64]) {
        fill_j(x, &mut self.j);
        into[0] += share * self.j[1].powi(2);
        for (to, j) in into[1..].iter_mut().zip(self.j.windows(3)) {
            *to += share * (0.5 * (j[0] - j[2])).powi(2);
        }
    }

    /// Adds `share` times the weights averaged over a cycle about `x`, which must exceed the
    /// orders.
    pub(super) fn add_mean(&mut self, x: f64, share: f64, into: &mut [f64]) {
        fill_upward(x, libm::j0(x), libm::j1(x), &mut self.j);
        fill_upward(x, libm::y0(x), libm::y1(x), &mut self.y);
        into[0] += share * 0.5 * (self.j[1].powi(2) + self.y[1].powi(2));
        for ((to, j), y) in into[1..]
            .iter_mut()
            .zip(self.j.windows(3))
            .zip(self.y.windows(3))
        {
            let (dj, dy) = (0.5 * (j[0] - j[2]), 0.5 * (y[0] - y[2]));
            *to += share * 0.5 * (dj * dj + dy * dy);
        }
    }
}

/// Adds the weights averaged over a cycle to `into`, for `x` above six times the highest order.
pub(super) fn add_mean_far(x: f64, into: &mut [f64]) {
    let q = 0.25 / (x * x);
    let leading = 1.0 / (std::f64::consts::PI * x);
    // Half of J_1^2 + Y_1^2 (Abramowitz and Stegun 9.2.28).
    into[0] += leading * (1.0 + 1.5 * q);
    for (m, to) in into.iter_mut().enumerate().skip(1) {
        let mu = (4 * m * m) as f64;
        // Half of J'_m^2 + Y'_m^2 (9.2.30).
        *to += leading * (1.0 - 0.5 * (mu - 3.0) * q - 0.125 * (mu - 1.0) * (mu - 45.0) * q * q);
    }
}

/// `J_0..` at `x`, as many as `row` holds.
pub(super) fn fill_j(x: f64, row: &mut [f64]) {
    let top = row.len() as f64;
    if x < 1.0 {
        fill_by_series(x, row);
    } else if x > top {
        fill_upward(x, libm::j0(x), libm::j1(x), row);
    } else {
        fill_downward(x, row);
    }
}

fn fill_upward(x: f64, zeroth: f64, first: f64, row: &mut [f64]) {
    row[0] = zeroth;
    row[1] = first;
    for m in 1..row.len() - 1 {
        row[m + 1] = 2.0 * m as f64 / x * row[m] - row[m - 1];
    }
}

/// Ascending series; eight terms are exact for `x < 1`. Members below 1e-60 are set to zero.
fn fill_by_series(x: f64, row: &mut [f64]) {
    let quarter = -0.25 * x * x;
    let mut leading = 1.0;
    for (m, out) in row.iter_mut().enumerate() {
        if m > 0 {
            leading *= 0.5 * x / m as f64;
        }
        if leading < 1e-60 {
            *out = 0.0;
            continue;
        }
        let (mut term, mut sum) = (1.0, 1.0);
        for k in 1..=8 {
            term *= quarter / (k * (m + k)) as f64;
            sum += term;
            if term.abs() < 1e-17 {
                break;
            }
        }
        *out = leading * sum;
    }
}

/// Miller's algorithm: down from well above both `x` and the highest order wanted.
fn fill_downward(x: f64, row: &mut [f64]) {
    let start = row.len() + 20 + (3.0 * x.sqrt()) as usize;
    let (mut above, mut here, mut even_sum) = (0.0, 1e-280, 0.0);
    for m in (0..=start).rev() {
        if m < row.len() {
            row[m] = here;
        }
        if m % 2 == 0 {
            even_sum += if m == 0 { here } else { 2.0 * here };
        }
        let below = 2.0 * m as f64 / x * here - above;
        (above, here) = (here, below);
        if here.abs() > 1e200 {
            // Rescaled long before the end of the range; what is already tiny stays in proportion.
            let filled = m.min(row.len());
            for it in &mut row[filled..] {
                *it *= 1e-250;
            }
            above *= 1e-250;
            here *= 1e-250;
            even_sum *= 1e-250;
        }
    }
    for it in row {
        *it /= even_sum;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rows_agree_with_the_library_one_order_at_a_time() {
        for x in [1e-4, 0.3, 0.999, 1.0, 3.7, 20.0, 33.9, 34.1, 90.0, 400.0] {
            let mut row = [0.0; 34];
            fill_j(x, &mut row);
            for (m, found) in (0_i32..).zip(&row) {
                let wanted = libm::jn(m, x);
                assert!(
                    (found - wanted).abs() < 1e-13 + 1e-9 * wanted.abs(),
                    "J_{m}({x})"
                );
            }
        }
    }

    #[test]
    fn high_orders_at_small_argument_keep_their_relative_value() {
        let mut row = [0.0; 203];
        fill_j(1.5, &mut row);
        // The ascending series, term by term (Abramowitz and Stegun 9.1.10).
        let (q, leading) = (
            0.5625_f64,
            (100.0 * 0.75_f64.ln() - libm::lgamma(101.0)).exp(),
        );
        let wanted = leading
            * (1.0 - q / 101.0 + q * q / (2.0 * 101.0 * 102.0)
                - q.powi(3) / (6.0 * 101.0 * 102.0 * 103.0));
        assert!(
            (row[100] / wanted - 1.0).abs() < 1e-9,
            "{} {wanted}",
            row[100]
        );
    }

    #[test]
    fn far_means_continue_the_near_ones() {
        let mut weights = RingWeights::new(30);
        let (mut near, mut far) = ([0.0; 31], [0.0; 31]);
        weights.add_mean(187.5, 1.0, &mut near);
        add_mean_far(187.5, &mut far);
        for (m, (a, b)) in near.iter().zip(far).enumerate() {
            assert!((b / a - 1.0).abs() < 3e-6, "m = {m}: {a} {b}");
        }
    }

    #[test]
    fn a_mean_is_the_average_over_many_cycles() {
        // Twenty cycles under a window of the form cos^2, so that no part of a cycle counts double.
        let mut weights = RingWeights::new(5);
        let (mut mean, mut exact) = ([0.0; 6], [0.0; 6]);
        weights.add_mean(2000.0, 1.0, &mut mean);
        let count = 4000;
        for k in 0..count {
            let u = (f64::from(k) + 0.5) / f64::from(count) - 0.5;
            let window = 2.0 * (std::f64::consts::PI * u).cos().powi(2) / f64::from(count);
            weights.add_exact(2000.0 + 20.0 * std::f64::consts::PI * u, window, &mut exact);
        }
        for (a, b) in mean.iter().zip(exact) {
            assert!((a / b - 1.0).abs() < 1e-4, "{a} {b}");
        }
    }
}
