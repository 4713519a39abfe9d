//! The mean of many planes, one at a time: memory does not grow with their number.

use ndarray::{Array2, ArrayView2, Zip};

/// Planes from which the extremes of each pixel are left out.
const TRIM_FROM: usize = 4;

/// Running sums over planes.
#[derive(Debug)]
pub(super) struct Average {
    planes: usize,
    /// The first plane: sums of differences from it keep their digits.
    first: Array2<f32>,
    sum: Array2<f32>,
    squares: Array2<f32>,
    low: Array2<f32>,
    high: Array2<f32>,
}

impl Average {
    /// Sums that begin with `plane`.
    pub(super) fn begin(plane: &ArrayView2<'_, f32>) -> Self {
        let (first, size) = (plane.to_owned(), plane.dim());
        let (low, high) = (Array2::zeros(size), Array2::zeros(size));
        let zeros = Array2::zeros(size);
        Self {
            planes: 1,
            first,
            sum: zeros.clone(),
            squares: zeros,
            low,
            high,
        }
    }

    /// Adds a plane of the same size.
    pub(super) fn add(&mut self, plane: &ArrayView2<'_, f32>) {
        self.planes += 1;
        Zip::from(&mut self.sum)
            .and(&mut self.squares)
            .and(&mut self.low)
            .and(&mut self.high)
            .and(plane)
            .and(&self.first)
            .for_each(|sum, squares, low, high, value, first| {
                let change = value - first;
                *sum += change;
                *squares += change * change;
                *low = low.min(change);
                *high = high.max(change);
            });
    }

    /// Number of planes.
    pub(super) fn planes(&self) -> usize {
        self.planes
    }

    /// The mean of each pixel, without its lowest and highest value from four planes on.
    pub(super) fn mean(&self) -> Array2<f32> {
        let (trimmed, count) = if self.planes >= TRIM_FROM {
            (1.0, self.planes as f32 - 2.0)
        } else {
            (0.0, self.planes as f32)
        };
        Zip::from(&self.first)
            .and(&self.sum)
            .and(&self.low)
            .and(&self.high)
            .map_collect(|first, sum, low, high| first + (sum - trimmed * (low + high)) / count)
    }

    /// The scatter of each pixel from plane to plane; `None` for one plane.
    pub(super) fn scatter(&self) -> Option<Array2<f32>> {
        if self.planes < 2 {
            return None;
        }
        let count = self.planes as f32;
        let scatter = |sum: &f32, squares: &f32| {
            ((squares - sum * sum / count).max(0.0) / (count - 1.0)).sqrt()
        };
        Some(Zip::from(&self.sum).and(&self.squares).map_collect(scatter))
    }
}

/// The value below which the fraction `quantile` of the finite values lies; `None` if none is.
pub(super) fn quantile<'a>(
    values: impl IntoIterator<Item = &'a f32>,
    quantile: f64,
) -> Option<f64> {
    let mut finite: Vec<f32> = values
        .into_iter()
        .copied()
        .filter(|it| it.is_finite())
        .collect();
    if finite.is_empty() {
        return None;
    }
    let rank = (quantile * (finite.len() - 1) as f64).round() as usize;
    Some(f64::from(
        *finite.select_nth_unstable_by(rank, f32::total_cmp).1,
    ))
}

#[cfg(test)]
mod tests {
    use super::*;
    use ndarray::array;

    #[test]
    fn mean_and_scatter_by_hand() {
        let mut it = Average::begin(&array![[1.0, 10.0]].view());
        it.add(&array![[2.0, 10.0]].view());
        it.add(&array![[6.0, 10.0]].view());
        assert_eq!(it.mean(), array![[3.0, 10.0]]);
        // Deviations -2, -1, 3: variance 14 / 2.
        let scatter = it.scatter().unwrap();
        assert!((scatter[[0, 0]] - 7.0_f32.sqrt()).abs() < 1e-6 && scatter[[0, 1]] == 0.0);
    }

    #[test]
    fn a_particle_in_one_of_four_planes_leaves_no_mark() {
        let mut it = Average::begin(&array![[100.0]].view());
        for value in [102.0, 5000.0, 101.0] {
            it.add(&array![[value]].view());
        }
        // Without 100 and 5000.
        assert_eq!(it.mean(), array![[101.5]]);
    }

    #[test]
    fn quantiles_of_a_known_row() {
        let row = [5.0, 1.0, f32::NAN, 4.0, 2.0, 3.0];
        assert_eq!(quantile(&row, 0.5), Some(3.0));
        assert_eq!(quantile(&row, 1.0), Some(5.0));
        assert_eq!(quantile(&[f32::NAN], 0.5), None);
    }
}
