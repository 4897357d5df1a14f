//! Reductions of many values to few, in an order that is always the same, so that equal input gives equal bits.

/// The sum of the values that are not NaN, with Neumaier's compensation, from first to last; 0 when there are none.
///
/// Source: Neumaier (1974), Zeitschrift für Angewandte Mathematik und Mechanik 54, 39.
#[must_use]
pub fn sum(values: &[f64]) -> f64 {
    sum_and_count(values).0
}

/// The mean of the values that are not NaN (compensated, in fixed order); NaN when there are none.
#[must_use]
pub fn mean(values: &[f64]) -> f64 {
    let (sum, count) = sum_and_count(values);
    if count == 0 { f64::NAN } else { sum / count as f64 }
}

fn sum_and_count(values: &[f64]) -> (f64, usize) {
    let mut sum = 0.0_f64;
    let mut lost = 0.0;
    let mut count = 0;
    for &value in values {
        if value.is_nan() {
            continue;
        }
        let next = sum + value;
        lost += if sum.abs() >= value.abs() { (sum - next) + value } else { (value - next) + sum };
        sum = next;
        count += 1;
    }
    // Once the sum is infinite the compensation is NaN and says nothing.
    (if sum.is_finite() { sum + lost } else { sum }, count)
}

/// The quantile at `probability` of the values that are not NaN.
///
/// With the n values in order x₀ ≤ … ≤ xₙ₋₁ it is found at h = (n − 1) p, between x at ⌊h⌋ and the next by linear
/// interpolation (definition 7 of Hyndman and Fan 1996, The American Statistician 50, 361). NaN when there are no
/// values, or when `probability` is NaN or outside [0, 1].
#[must_use]
pub fn quantile(values: &[f64], probability: f64) -> f64 {
    let mut result = [f64::NAN];
    quantiles(values, &[probability], &mut Vec::new(), &mut result);
    result[0]
}

/// The median of the values that are not NaN: [`quantile`] at one half.
#[must_use]
pub fn median(values: &[f64]) -> f64 {
    quantile(values, 0.5)
}

/// [`quantile`] at each of `probabilities`, written into `out` one by one; fastest when they ascend.
///
/// `workspace` is overwritten; keeping it between calls saves an allocation per call.
pub fn quantiles(values: &[f64], probabilities: &[f64], workspace: &mut Vec<f64>, out: &mut [f64]) {
    workspace.clear();
    workspace.extend(values.iter().copied().filter(|value| !value.is_nan()));
    // Everything before this index is in its final place or below it.
    let mut settled = 0;
    for (result, &probability) in out.iter_mut().zip(probabilities) {
        if workspace.is_empty() || !(0.0..=1.0).contains(&probability) {
            *result = f64::NAN;
            continue;
        }
        let place = (workspace.len() - 1) as f64 * probability;
        let below = (place.floor() as usize).min(workspace.len() - 1);
        let fraction = place - below as f64;
        let from = if below >= settled { settled } else { 0 };
        let (_, &mut low, above) = workspace[from..].select_nth_unstable_by(below - from, f64::total_cmp);
        settled = below;
        let high = above.iter().copied().min_by(f64::total_cmp).unwrap_or(low);
        *result = interpolate(low, high, fraction);
    }
}

/// low + (high − low) · fraction, taken from the nearer end, and exact when the ends are equal.
fn interpolate(low: f64, high: f64, fraction: f64) -> f64 {
    if fraction <= 0.0 {
        low
    } else if fraction < 0.5 {
        low + (high - low) * fraction
    } else {
        high - (high - low) * (1.0 - fraction)
    }
}

/// The median difference of neighbouring times, in their unit; `None` for fewer than two times.
#[must_use]
pub fn median_spacing(times: &[f64]) -> Option<f64> {
    let spacings: Vec<f64> = times.windows(2).map(|pair| pair[1] - pair[0]).collect();
    (!spacings.is_empty()).then(|| median(&spacings))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn close(a: f64, b: f64) -> bool {
        (a - b).abs() < 1e-14
    }

    #[test]
    fn a_small_value_between_two_large_ones_is_not_lost() {
        assert!(close(sum(&[1e100, 1.0, -1e100]), 1.0));
        assert!(close(mean(&[1e16, 1.0, f64::NAN, -1e16, 1.0]), 0.5));
    }

    #[test]
    fn quantiles_are_those_of_linear_interpolation() {
        // numpy.quantile([15, 20, 35, 40, 50], [0.05, 0.3, 0.5, 0.4, 1]) by hand: h = 4p.
        let values = [40.0, 15.0, f64::NAN, 50.0, 35.0, 20.0];
        let mut out = [0.0; 5];
        quantiles(&values, &[0.05, 0.3, 0.5, 0.4, 1.0], &mut Vec::new(), &mut out);
        for (found, expected) in out.iter().zip([16.0, 23.0, 35.0, 29.0, 50.0]) {
            assert!(close(*found, expected), "{found} {expected}");
        }
        assert!(close(quantile(&values, 0.0), 15.0));
    }

    #[test]
    fn quantiles_agree_with_a_full_sort_for_any_order_of_probabilities() {
        let values: Vec<f64> =
            (0..997_u32).map(|number| f64::from(number.wrapping_mul(7919) % 1013)).collect();
        let mut sorted = values.clone();
        sorted.sort_by(f64::total_cmp);
        let probabilities = [0.9, 0.05, 0.5, 0.95, 0.051, 0.051, 1.0, 0.0];
        let mut out = [0.0; 8];
        quantiles(&values, &probabilities, &mut Vec::new(), &mut out);
        for (&probability, &found) in probabilities.iter().zip(&out) {
            let place = 996.0 * probability;
            let (low, high) = (sorted[place.floor() as usize], sorted[place.ceil() as usize]);
            assert!((found - (low + (high - low) * place.fract())).abs() < 1e-9, "{probability}");
        }
    }

    #[test]
    fn no_values_have_no_mean_and_no_quantile() {
        assert!(mean(&[]).is_nan() && mean(&[f64::NAN]).is_nan() && median(&[]).is_nan());
        assert!(quantile(&[1.0], 1.5).is_nan() && quantile(&[1.0], f64::NAN).is_nan());
        assert!(close(median(&[3.0]), 3.0));
    }

    #[test]
    fn the_median_spacing_ignores_one_long_gap() {
        assert_eq!(median_spacing(&[0.0, 1.0, 2.0, 30.0]), Some(1.0));
        assert_eq!(median_spacing(&[0.0]), None);
    }
}
