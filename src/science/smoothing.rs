//! Smoothing, sums and differences along time. Values stand on cells (starts and ends in years, ascending, without
//! overlap); gaps are NaN.

use rayon::prelude::*;

use crate::base::{Cancellation, Cancelled};

/// What happens where the window reaches past the record.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Ends {
    /// The mean is taken of the part of the window that lies inside.
    Shortened,
    /// There is no value.
    Gap,
}

/// The part of a window that must have values for its mean to be taken.
const LEAST_COVERAGE: f64 = 2.0 / 3.0;

/// A Gaussian window is cut at so many standard deviations.
const GAUSSIAN_REACH: f64 = 4.0;

/// The centred running mean over `width_years`: the mean of the piecewise-constant record over a window about the
/// middle of each cell, so that a cell counts by the part of it inside.
///
/// Of the part of the window inside the record, two thirds must have values. Time grows with the number of cells, not
/// with the width: the sum slides, and starts afresh with every few thousand cells so that rounding does not build up. Blocks
/// know nothing of each other, and give the same bits for any number of threads.
pub fn running_mean(
    starts: &[f64],
    ends: &[f64],
    values: &[f64],
    width_years: f64,
    at_ends: Ends,
    out: &mut [f64],
) {
    let count = values.len().min(out.len());
    let window = Window { starts, ends, values, width_years, at_ends };
    out[..count]
        .par_chunks_mut(BLOCK)
        .enumerate()
        .for_each(|(block, targets)| window.running_means(block * BLOCK, targets));
}

/// So many cells are smoothed with one sum that slides.
const BLOCK: usize = 4096;

/// A window of one width that moves along a record.
struct Window<'record> {
    starts: &'record [f64],
    ends: &'record [f64],
    values: &'record [f64],
    width_years: f64,
    at_ends: Ends,
}

impl Window<'_> {
    /// The means about the cells from `begin` on.
    fn running_means(&self, begin: usize, out: &mut [f64]) {
        let Self { starts, ends, values, width_years, at_ends } = *self;
        let Some((first, last)) = starts.first().zip(ends.last()) else { return };
        let slack = 1e-9 * width_years.max(1.0);
        let half = 0.5 * width_years;
        let middle = |index: usize| 0.5 * (starts[index] + ends[index]);
        // Whole cells inside the window are low..high.
        let mut low = starts.partition_point(|start| *start < middle(begin) - half - slack);
        let mut high = low;
        let mut sums = Sums::default();
        for (index, target) in (begin..).zip(out) {
            let (from, to) = (middle(index) - half, middle(index) + half);
            while high < values.len() && ends[high] <= to + slack {
                sums.add(values[high], ends[high] - starts[high], 1.0);
                high += 1;
            }
            while low < high && starts[low] < from - slack {
                sums.add(values[low], ends[low] - starts[low], -1.0);
                low += 1;
            }
            let mut total = sums;
            if low > 0 && ends[low - 1] > from + slack {
                total.add(values[low - 1], (ends[low - 1] - from).min(width_years), 1.0);
            }
            if high < values.len() && starts[high] < to - slack && high + 1 > low {
                total.add(values[high], to - starts[high].max(from), 1.0);
            }
            let outside = from < first - slack || to > last + slack;
            let inside = to.min(*last) - from.max(*first);
            let covered = total.weight >= LEAST_COVERAGE * inside - slack;
            *target = if (outside && at_ends == Ends::Gap) || !covered || total.weight <= slack {
                f64::NAN
            } else {
                total.sum / total.weight
            };
        }
    }
}

#[derive(Debug, Clone, Copy, Default)]
struct Sums {
    sum: f64,
    weight: f64,
}

impl Sums {
    fn add(&mut self, value: f64, length: f64, sign: f64) {
        if !value.is_nan() {
            self.sum += sign * value * length;
            self.weight += sign * length;
        }
    }
}

/// The mean with Gaussian weights about the middle of each cell, `deviation_years` being one standard deviation; the
/// window is cut at four of them. Weights are taken at the middles of cells and times their lengths.
///
/// Of the weight inside the record, two thirds must have values.
///
/// # Errors
/// [`Cancelled`] when asked to stop: a wide window over a long record takes long.
pub fn gaussian_mean(
    starts: &[f64],
    ends: &[f64],
    values: &[f64],
    deviation_years: f64,
    at_ends: Ends,
    cancellation: &Cancellation,
    out: &mut [f64],
) -> Result<(), Cancelled> {
    let Some((first, last)) = starts.first().zip(ends.last()) else { return Ok(()) };
    let middles: Vec<f64> = starts.iter().zip(ends).map(|(start, end)| 0.5 * (start + end)).collect();
    let reach = GAUSSIAN_REACH * deviation_years;
    let (mut low, mut high) = (0usize, 0usize);
    for (index, target) in out.iter_mut().enumerate().take(values.len()) {
        cancellation.check()?;
        let middle = middles[index];
        while high < values.len() && middles[high] <= middle + reach * (1.0 + 1e-9) {
            high += 1;
        }
        while low < high && middles[low] < middle - reach * (1.0 + 1e-9) {
            low += 1;
        }
        let (mut sum, mut weight, mut inside) = (0.0, 0.0, 0.0);
        for place in low..high {
            let distance = (middles[place] - middle) / deviation_years;
            let share = (-0.5 * distance * distance).exp() * (ends[place] - starts[place]);
            inside += share;
            if !values[place].is_nan() {
                sum += share * values[place];
                weight += share;
            }
        }
        let outside = middle - reach < *first || middle + reach > *last;
        let gap = (outside && at_ends == Ends::Gap) || weight < LEAST_COVERAGE * inside || weight <= 0.0;
        *target = if gap { f64::NAN } else { sum / weight };
    }
    Ok(())
}

/// Intercept (at the mean time) and slope per year of the least-squares line through values at `times`; gaps are left
/// out. None for fewer than two values, or all at one time.
pub fn line(times: &[f64], values: &[f64]) -> Option<(f64, f64, f64)> {
    let known = || times.iter().zip(values).filter(|(_, value)| !value.is_nan());
    let count = known().count() as f64;
    let mean_time = known().map(|(time, _)| time).sum::<f64>() / count;
    let mean = known().map(|(_, value)| value).sum::<f64>() / count;
    let spread: f64 = known().map(|(time, _)| (time - mean_time).powi(2)).sum();
    let common: f64 = known().map(|(time, value)| (time - mean_time) * (value - mean)).sum();
    (count >= 2.0 && spread > 0.0).then(|| (mean_time, mean, common / spread))
}

/// Mean and standard deviation (n − 1) of the values that are no gaps; none for fewer than two.
pub fn mean_and_deviation(values: &[f64]) -> Option<(f64, f64)> {
    let known: Vec<f64> = values.iter().copied().filter(|value| !value.is_nan()).collect();
    if known.len() < 2 {
        return None;
    }
    let mean = crate::science::reduce::mean(&known);
    let squares: Vec<f64> = known.iter().map(|value| (value - mean).powi(2)).collect();
    Some((mean, (crate::science::reduce::sum(&squares) / (known.len() - 1) as f64).sqrt()))
}

/// The running integral of step means: its value at the first start (0) and at every end, in value times years. After
/// a gap, every value is a gap.
pub fn integral_of_steps(lengths_years: &[f64], values: &[f64], out: &mut [f64]) {
    let mut sum = 0.0;
    if let Some(first) = out.first_mut() {
        *first = 0.0;
    }
    for ((target, length), value) in out.iter_mut().skip(1).zip(lengths_years).zip(values) {
        sum += length * value;
        *target = sum;
    }
}

/// The running integral of a line through values at instants (trapezoids), 0 at the first. After a gap, every value is
/// a gap.
pub fn integral_of_instants(times: &[f64], values: &[f64], out: &mut [f64]) {
    let mut sum = 0.0;
    if let Some((target, value)) = out.first_mut().zip(values.first()) {
        *target = 0.0 * value;
        sum = *target;
    }
    for (index, target) in out.iter_mut().enumerate().skip(1) {
        sum += 0.5 * (times[index] - times[index - 1]) * (values[index] + values[index - 1]);
        *target = sum;
    }
}

/// Differences of neighbours over the time between them, per year.
pub fn differences(times: &[f64], values: &[f64], out: &mut [f64]) {
    for (index, target) in out.iter_mut().enumerate() {
        *target = (values[index + 1] - values[index]) / (times[index + 1] - times[index]);
    }
}

/// The monotone cubic through values at ascending times, read at `at` (Fritsch and Butland 1984, SIAM Journal on
/// Scientific and Statistical Computing 5, 300; end slopes by the one-sided three-point formula that keeps the shape):
/// it stays between neighbours. NaN outside, and beside a gap.
pub fn monotone_cubic(times: &[f64], values: &[f64], at: &[f64], out: &mut [f64]) {
    let slopes = monotone_slopes(times, values);
    let mut piece = 0usize;
    for (target, time) in out.iter_mut().zip(at) {
        while piece + 2 < times.len() && times[piece + 1] < *time {
            piece += 1;
        }
        let inside = times.len() >= 2 && *time >= times[0] && *time <= times[times.len() - 1];
        if !inside {
            let only = times.len() == 1 && (*time - times[0]).abs() < 1e-12;
            *target = if only { values[0] } else { f64::NAN };
            continue;
        }
        let step = times[piece + 1] - times[piece];
        let share = (time - times[piece]) / step;
        let rest = 1.0 - share;
        *target = values[piece] * (1.0 + 2.0 * share) * rest * rest
            + values[piece + 1] * (3.0 - 2.0 * share) * share * share
            + step * share * rest * (slopes[piece] * rest - slopes[piece + 1] * share);
    }
}

fn monotone_slopes(times: &[f64], values: &[f64]) -> Vec<f64> {
    let pieces = times.len().saturating_sub(1);
    let step = |piece: usize| times[piece + 1] - times[piece];
    let secant = |piece: usize| (values[piece + 1] - values[piece]) / step(piece);
    let mut slopes = vec![0.0; times.len()];
    if pieces == 1 {
        slopes.fill(secant(0));
        return slopes;
    }
    for (knot, slope) in slopes.iter_mut().enumerate().take(pieces).skip(1) {
        let (before, after) = (secant(knot - 1), secant(knot));
        if before * after > 0.0 {
            let (left, right) = (2.0 * step(knot) + step(knot - 1), step(knot) + 2.0 * step(knot - 1));
            *slope = (left + right) / (left / before + right / after);
        } else if (before * after).is_nan() {
            *slope = f64::NAN;
        }
    }
    if pieces >= 2 {
        slopes[0] = end_slope(step(0), step(1), secant(0), secant(1));
        slopes[pieces] =
            end_slope(step(pieces - 1), step(pieces - 2), secant(pieces - 1), secant(pieces - 2));
    }
    slopes
}

fn end_slope(near_step: f64, far_step: f64, near: f64, far: f64) -> f64 {
    let slope = ((2.0 * near_step + far_step) * near - near_step * far) / (near_step + far_step);
    if slope * near <= 0.0 {
        0.0
    } else if near * far <= 0.0 && slope.abs() > 3.0 * near.abs() {
        3.0 * near
    } else {
        slope
    }
}

/// The straight line between neighbours, read at `at`, which ascends; NaN outside the record.
pub fn linear(times: &[f64], values: &[f64], at: &[f64], out: &mut [f64]) {
    let mut after = 0;
    for (target, time) in out.iter_mut().zip(at) {
        while after < times.len() && times[after] < *time {
            after += 1;
        }
        *target = if after >= times.len() || (after == 0 && times[0] > *time) {
            f64::NAN
        } else if after == 0 || (times[after] - time).abs() <= 0.0 {
            values[after]
        } else {
            let share = (time - times[after - 1]) / (times[after] - times[after - 1]);
            values[after - 1] + share * (values[after] - values[after - 1])
        };
    }
}

/// The mean of what each target cell covers, every source value holding over its own cell; two thirds of a target must
/// be covered. Both rows of cells ascend without overlap.
pub fn overlap_means(
    starts: &[f64],
    ends: &[f64],
    values: &[f64],
    target_starts: &[f64],
    target_ends: &[f64],
    out: &mut [f64],
) {
    let mut first = 0;
    for (target, (from, to)) in out.iter_mut().zip(target_starts.iter().zip(target_ends)) {
        while first < ends.len() && ends[first] <= *from {
            first += 1;
        }
        let mut total = Sums::default();
        let mut place = first;
        while place < starts.len() && starts[place] < *to {
            total.add(values[place], ends[place].min(*to) - starts[place].max(*from), 1.0);
            place += 1;
        }
        *target =
            if total.weight < LEAST_COVERAGE * (to - from) { f64::NAN } else { total.sum / total.weight };
    }
}

/// The value nearest in time to each of `at`, which ascends, the earlier of two as near; NaN outside the record.
pub fn nearest(times: &[f64], values: &[f64], at: &[f64], out: &mut [f64]) {
    let mut after = 0;
    for (target, time) in out.iter_mut().zip(at) {
        while after < times.len() && times[after] < *time {
            after += 1;
        }
        let before = after.saturating_sub(1);
        let inside =
            times.first().is_some_and(|first| first <= time) && times.last().is_some_and(|last| time <= last);
        *target = if !inside {
            f64::NAN
        } else if (time - times[before]).abs() <= (times[after.min(times.len() - 1)] - time).abs() {
            values[before]
        } else {
            values[after]
        };
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn years(count: usize) -> (Vec<f64>, Vec<f64>) {
        ((0..count).map(|year| year as f64).collect(), (1..=count).map(|year| year as f64).collect())
    }

    fn naive_running_mean(values: &[f64], width: usize) -> Vec<f64> {
        let reach = width / 2;
        (0..values.len())
            .map(|index| {
                let window = &values[index.saturating_sub(reach)..(index + reach + 1).min(values.len())];
                let known: Vec<f64> = window.iter().copied().filter(|value| !value.is_nan()).collect();
                if (known.len() as f64) < LEAST_COVERAGE * window.len() as f64 {
                    f64::NAN
                } else {
                    known.iter().sum::<f64>() / known.len() as f64
                }
            })
            .collect()
    }

    #[test]
    fn a_running_mean_of_odd_width_is_the_naive_one() {
        let (starts, ends) = years(10_000);
        let mut values: Vec<f64> = (0..10_000).map(|index| ((index * 7919) % 1000) as f64 / 7.0).collect();
        for gap in [0, 17, 18, 19, 20, 21, 22, 5000, 9999] {
            values[gap] = f64::NAN;
        }
        for width in [1, 3, 11, 101] {
            let mut out = vec![0.0; values.len()];
            running_mean(&starts, &ends, &values, width as f64, Ends::Shortened, &mut out);
            for (index, (found, expected)) in out.iter().zip(naive_running_mean(&values, width)).enumerate() {
                assert!(
                    (found - expected).abs() < 1e-10 || (found.is_nan() && expected.is_nan()),
                    "width {width}, {index}: {found} {expected}"
                );
            }
        }
    }

    #[test]
    fn an_even_width_takes_half_of_the_outer_cells() {
        let (starts, ends) = years(5);
        let mut out = vec![0.0; 5];
        running_mean(&starts, &ends, &[1.0, 2.0, 4.0, 8.0, 16.0], 2.0, Ends::Gap, &mut out);
        assert!(out[0].is_nan() && out[4].is_nan());
        assert!((out[2] - (1.0 + 4.0 + 4.0) / 2.0).abs() < 1e-12, "{out:?}");
    }

    #[test]
    fn a_window_narrower_than_a_cell_changes_nothing() {
        let (starts, ends) = years(4);
        let mut out = vec![0.0; 4];
        running_mean(&starts, &ends, &[1.0, 2.0, 4.0, 8.0], 0.5, Ends::Gap, &mut out);
        assert!(
            out.iter().zip([1.0, 2.0, 4.0, 8.0]).all(|(found, expected)| (found - expected).abs() < 1e-12),
            "{out:?}"
        );
    }

    #[test]
    fn the_rate_of_an_integral_is_the_series() {
        let lengths = [1.0, 0.5, 2.0];
        let values = [3.0, -1.0, 7.0];
        let (mut integral, mut rate) = (vec![0.0; 4], vec![0.0; 3]);
        integral_of_steps(&lengths, &values, &mut integral);
        differences(&[0.0, 1.0, 1.5, 3.5], &integral, &mut rate);
        assert!(
            rate.iter().zip(values).all(|(found, expected)| (found - expected).abs() < 1e-12),
            "{rate:?}"
        );
    }

    #[test]
    fn a_monotone_cubic_never_leaves_its_neighbours() {
        let (times, values) = ([0.0, 1.0, 2.0, 3.0, 4.0], [0.0, 0.0, 1.0, 1.0, 5.0]);
        let at: Vec<f64> = (0..=400).map(|step| f64::from(step) / 100.0).collect();
        let mut out = vec![0.0; at.len()];
        monotone_cubic(&times, &values, &at, &mut out);
        for (time, value) in at.iter().zip(&out) {
            let piece = (time.floor() as usize).min(3);
            let (low, high) = (values[piece].min(values[piece + 1]), values[piece].max(values[piece + 1]));
            assert!(*value >= low - 1e-12 && *value <= high + 1e-12, "{time}: {value}");
        }
        assert!(out.iter().zip(out.iter().skip(1)).all(|(before, after)| *after >= before - 1e-12));
    }
}
