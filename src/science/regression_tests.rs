use super::*;

/// A fixed noise that looks like none of the columns.
fn noise(count: usize) -> Vec<f64> {
    (0..count as u32)
        .map(|place| f64::from(place.wrapping_mul(2_654_435_761) >> 8) / f64::from(1_u32 << 24) - 0.5)
        .collect()
}

fn line(count: usize) -> Vec<f64> {
    (0..count).map(|place| place as f64).collect()
}

fn wave(count: usize) -> Vec<f64> {
    (0..count).map(|place| (place as f64 * 0.7).sin()).collect()
}

fn assert_close(found: f64, expected: f64, tolerance: f64, what: &str) {
    let scale = expected.abs().max(f64::MIN_POSITIVE);
    assert!((found - expected).abs() <= tolerance * scale, "{what}: {found} against {expected}");
}

#[test]
fn columns_of_very_unlike_size_give_the_same_fit() -> Result<(), RegressionError> {
    let (x, z, y) = (line(60), wave(60), noise(60));
    let plain = ordinary_least_squares(&y, &Design::new(&[&x, &z])?)?;
    let large: Vec<f64> = x.iter().map(|value| value * 1e13).collect();
    let small: Vec<f64> = z.iter().map(|value| value * 1e-13).collect();
    let scaled = ordinary_least_squares(&y, &Design::new(&[&large, &small])?)?;
    assert_close(scaled.coefficients[1] * 1e13, plain.coefficients[1], 1e-12, "large");
    assert_close(scaled.coefficients[2] * 1e-13, plain.coefficients[2], 1e-12, "small");
    assert_close(scaled.standard_errors[2] * 1e-13, plain.standard_errors[2], 1e-12, "standard error");
    assert_close(scaled.condition_number, plain.condition_number, 1e-12, "condition");
    assert_close(scaled.log_likelihood, plain.log_likelihood, 1e-12, "log likelihood");
    Ok(())
}

#[test]
fn a_column_far_from_zero_keeps_its_precision() -> Result<(), RegressionError> {
    let (x, y) = (line(60), noise(60));
    let plain = ordinary_least_squares(&y, &Design::new(&[&x])?)?;
    let years: Vec<f64> = x.iter().map(|value| value + 800_000.0).collect();
    let shifted = ordinary_least_squares(&y, &Design::new(&[&years])?)?;
    assert_close(shifted.coefficients[1], plain.coefficients[1], 1e-9, "slope");
    assert_close(shifted.standard_errors[1], plain.standard_errors[1], 1e-9, "standard error");
    Ok(())
}

#[test]
fn no_autocorrelation_is_ordinary_least_squares() -> Result<(), RegressionError> {
    let (x, y) = (line(30), noise(30));
    let design = Design::new(&[&x])?;
    let ordinary = ordinary_least_squares(&y, &design)?;
    assert_eq!(generalised_least_squares_ar1_known(&y, &design, None, 0.0)?, ordinary);
    assert_close(ordinary.r_squared, ordinary.r_squared_original, 1e-12, "r squared");
    Ok(())
}

/// β = (Xᵀ V⁻¹ X)⁻¹ Xᵀ V⁻¹ y with V = ρ^|Δt| in full, one column and an intercept, by Gaussian elimination.
fn by_full_correlation(x: &[f64], y: &[f64], times: &[f64], rho: f64) -> [f64; 4] {
    let count = x.len();
    let mut rows: Vec<Vec<f64>> = (0..count)
        .map(|i| {
            let correlations = times.iter().map(|time| rho.powf((times[i] - time).abs()));
            correlations.chain([1.0, x[i], y[i]]).collect()
        })
        .collect();
    for pivot in 0..count {
        let upper = rows[pivot].clone();
        for row in rows.iter_mut().skip(pivot + 1) {
            let factor = row[pivot] / upper[pivot];
            row.iter_mut().zip(&upper).for_each(|(value, above)| *value -= factor * above);
        }
    }
    let solved = |column: usize| {
        let mut solution = vec![0.0; count];
        for row in (0..count).rev() {
            let known: f64 = (row + 1..count).map(|other| rows[row][other] * solution[other]).sum();
            solution[row] = (rows[row][count + column] - known) / rows[row][row];
        }
        solution
    };
    let (ones, xs, ys) = (solved(0), solved(1), solved(2));
    let product = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
    let (a, b, d) = (ones.iter().sum::<f64>(), product(&ones, x), product(&xs, x));
    let (p, q) = (product(&ones, y), product(&xs, y));
    let determinant = a * d - b * b;
    let (intercept, slope) = ((d * p - b * q) / determinant, (a * q - b * p) / determinant);
    let sum = product(&ys, y) - intercept * p - slope * q;
    let log_determinant: f64 = (0..count).map(|row| rows[row][row].ln()).sum();
    [intercept, slope, (sum / (count as f64 - 2.0) * a / determinant).sqrt(), log_determinant]
}

#[test]
fn uneven_times_are_whitened_exactly() -> Result<(), RegressionError> {
    let times = [0.0, 1.0, 1.5, 4.0, 4.2, 9.0, 10.0, 13.5, 14.0, 15.0];
    let (x, y) = (wave(10), noise(10));
    for rho in [0.01, 0.6, 0.999] {
        let fit = generalised_least_squares_ar1_known(&y, &Design::new(&[&x])?, Some(&times), rho)?;
        let [intercept, slope, error, log_determinant] = by_full_correlation(&x, &y, &times, rho);
        assert_close(fit.coefficients[0], intercept, 1e-9, "intercept");
        assert_close(fit.coefficients[1], slope, 1e-9, "slope");
        assert_close(fit.standard_errors[1], error, 1e-9, "standard error");
        let gaussian = 5.0 * (1.0 + (2.0 * std::f64::consts::PI * fit.residual_sum_of_squares / 10.0).ln());
        assert_close(fit.log_likelihood, -gaussian - log_determinant / 2.0, 1e-9, "log likelihood");
    }
    Ok(())
}

#[test]
fn a_negative_autocorrelation_alternates_over_whole_steps_and_is_refused_between_them()
-> Result<(), RegressionError> {
    let (x, y) = (wave(6), noise(6));
    let design = Design::new(&[&x])?;
    let fit = generalised_least_squares_ar1_known(&y, &design, Some(&[0.0, 1.0, 3.0, 4.0, 5.0, 6.0]), -0.5)?;
    // From step 1 to step 3 the correlation is (−0.5)² = 0.25.
    let expected = (fit.residuals[2] - 0.25 * fit.residuals[1]) / (1.0_f64 - 0.0625).sqrt();
    assert_close(fit.whitened_residuals[2], expected, 1e-12, "two steps");
    let expected = (fit.residuals[1] + 0.5 * fit.residuals[0]) / (1.0_f64 - 0.25).sqrt();
    assert_close(fit.whitened_residuals[1], expected, 1e-12, "one step");
    let between =
        generalised_least_squares_ar1_known(&y, &design, Some(&[0.0, 1.5, 2.0, 3.0, 4.0, 5.0]), -0.5);
    assert_eq!(between, Err(RegressionError::Autocorrelation(-0.5)));
    Ok(())
}

#[test]
fn a_contrast_of_one_coefficient_is_that_coefficient_and_of_two_has_their_covariance()
-> Result<(), RegressionError> {
    let (x, z, y) = (line(40), wave(40), noise(40));
    let fit = ordinary_least_squares(&y, &Design::new(&[&x, &z])?)?;
    let (value, error) = fit.contrast(&[0.0, 1.0, 0.0])?;
    assert_close(value, fit.coefficients[1], 1e-15, "value");
    assert_close(error, fit.standard_errors[1], 1e-14, "error");
    // Regress on x and z − x instead: the coefficient of x is then the sum of both.
    let difference: Vec<f64> = z.iter().zip(&x).map(|(z, x)| z - x).collect();
    let turned = ordinary_least_squares(&y, &Design::new(&[&x, &difference])?)?;
    let (value, error) = fit.contrast(&[0.0, 1.0, 1.0])?;
    assert_close(value, turned.coefficients[1], 1e-11, "sum");
    assert_close(error, turned.standard_errors[1], 1e-11, "error of the sum");
    assert_eq!(fit.contrast(&[1.0]), Err(RegressionError::LengthMismatch { expected: 3, found: 1 }));
    Ok(())
}

#[test]
fn no_column_leaves_the_mean() -> Result<(), RegressionError> {
    let fit = ordinary_least_squares(&[1.0, 2.0, 6.0], &Design::new(&[])?)?;
    assert_close(fit.coefficients[0], 3.0, 1e-14, "mean");
    assert!(fit.r_squared.abs() < 1e-14 && (fit.condition_number - 1.0).abs() < 1e-14);
    Ok(())
}

#[test]
fn the_columns_to_blame_are_named() -> Result<(), RegressionError> {
    let (x, z, y) = (line(30), wave(30), noise(30));
    let combination: Vec<f64> = x.iter().zip(&y).map(|(x, y)| 3.0 * x - 0.1 * y + 7.0).collect();
    let design = Design::new(&[&x, &z, &y, &combination])?;
    let expected = RegressionError::CollinearColumns { column: 3, with: vec![0, 2] };
    assert_eq!(ordinary_least_squares(&z, &design).err(), Some(expected));
    assert_eq!(Design::new(&[&x, &[0.0; 30]]).err(), Some(RegressionError::ConstantColumn(1)));
    assert_eq!(Design::new(&[&[4.2; 30]]).err(), Some(RegressionError::ConstantColumn(0)));
    Ok(())
}

#[test]
fn what_cannot_be_fitted_is_refused() -> Result<(), RegressionError> {
    let (x, mut y) = (line(5), noise(5));
    let design = Design::new(&[&x])?;
    let short = Design::new(&[&x[..2]])?;
    let too_few = RegressionError::TooFewValues { values: 2, coefficients: 2 };
    assert_eq!(ordinary_least_squares(&y[..2], &short).err(), Some(too_few));
    let mismatch = RegressionError::LengthMismatch { expected: 5, found: 2 };
    assert_eq!(ordinary_least_squares(&y[..2], &design).err(), Some(mismatch));
    for rho in [1.0, -1.0, 1.5] {
        let refused = generalised_least_squares_ar1_known(&y, &design, None, rho);
        assert_eq!(refused.err(), Some(RegressionError::Autocorrelation(rho)));
    }
    assert!(generalised_least_squares_ar1_known(&y, &design, None, f64::NAN).is_err());
    let times = [0.0, 1.0, 1.0, 2.0, 3.0];
    let refused = generalised_least_squares_ar1_known(&y, &design, Some(&times), 0.5);
    assert_eq!(refused.err(), Some(RegressionError::PositionsNotAscending(2)));
    assert_eq!(ordinary_least_squares(&y, &design)?.intervals(1.0), Err(RegressionError::Level(1.0)));
    y[3] = f64::NAN;
    assert_eq!(
        ordinary_least_squares(&y, &design).err(),
        Some(RegressionError::NotFinite { column: None, row: 3 })
    );
    assert_eq!(Design::new(&[&x, &y]).err(), Some(RegressionError::NotFinite { column: Some(1), row: 3 }));
    Ok(())
}
