//! Linear regression of a record on drivers: ordinary least squares, and generalised least squares for residuals with a
//! known first-order autocorrelation, on even and uneven times.
//!
//! Every fit has an intercept, first among its coefficients; the coefficient of the design's column j is number j + 1.

use crate::science::least_squares::{Dependence, Factorisation};
use crate::science::student;

/// The columns that a response is explained by, without the intercept.
#[derive(Debug, Clone, PartialEq)]
pub struct Design {
    rows: usize,
    columns: Vec<Vec<f64>>,
}

/// Why a regression cannot be made. Columns are counted from zero without the intercept.
#[derive(Debug, Clone, PartialEq)]
pub enum RegressionError {
    /// There are `values` complete rows for `coefficients` coefficients; at least one more than that is needed.
    TooFewValues {
        /// Number of rows.
        values: usize,
        /// Number of coefficients, the intercept included.
        coefficients: usize,
    },
    /// A column, the response or the positions have `found` values where `expected` are needed.
    LengthMismatch {
        /// Length of the first column or of the response.
        expected: usize,
        /// Length that differs.
        found: usize,
    },
    /// The value at `row` is NaN or infinite; of the response when `column` is `None`.
    NotFinite {
        /// The design's column, or the response.
        column: Option<usize>,
        /// Place in it.
        row: usize,
    },
    /// This column has one value throughout, so that it cannot be told from the intercept.
    ConstantColumn(usize),
    /// This column is a combination of those in `with` (and perhaps the intercept).
    CollinearColumns {
        /// The last of the columns.
        column: usize,
        /// The earlier ones that combine to it.
        with: Vec<usize>,
    },
    /// The autocorrelation is this: not between −1 and 1, or below zero while positions fall between whole steps.
    Autocorrelation(f64),
    /// The positions do not ascend, or are not finite, at this row.
    PositionsNotAscending(usize),
    /// The confidence level is this, and not between 0 and 1.
    Level(f64),
}

impl Design {
    /// A design from columns of one length. No column is a design too: the response is explained by its mean.
    ///
    /// # Errors
    /// [`RegressionError::LengthMismatch`], [`RegressionError::NotFinite`] or [`RegressionError::ConstantColumn`].
    pub fn new(columns: &[&[f64]]) -> Result<Self, RegressionError> {
        let rows = columns.first().map_or(0, |column| column.len());
        for (place, column) in columns.iter().enumerate() {
            check_values(column, rows, Some(place))?;
            let (least, greatest) =
                column.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(least, greatest), &value| {
                    (least.min(value), greatest.max(value))
                });
            if rows > 0 && least >= greatest {
                return Err(RegressionError::ConstantColumn(place));
            }
        }
        Ok(Self { rows, columns: columns.iter().map(|column| column.to_vec()).collect() })
    }

    /// The columns with a first one of ones, as many rows as the response.
    fn with_intercept(&self, response: &[f64]) -> Result<Vec<Vec<f64>>, RegressionError> {
        let rows = if self.columns.is_empty() { response.len() } else { self.rows };
        check_values(response, rows, None)?;
        let coefficients = self.columns.len() + 1;
        if rows <= coefficients {
            return Err(RegressionError::TooFewValues { values: rows, coefficients });
        }
        let intercept = std::iter::once(vec![1.0; rows]);
        Ok(intercept.chain(self.columns.iter().cloned()).collect())
    }
}

fn check_values(values: &[f64], expected: usize, column: Option<usize>) -> Result<(), RegressionError> {
    if values.len() != expected {
        return Err(RegressionError::LengthMismatch { expected, found: values.len() });
    }
    match values.iter().position(|value| !value.is_finite()) {
        Some(row) => Err(RegressionError::NotFinite { column, row }),
        None => Ok(()),
    }
}

impl From<Dependence> for RegressionError {
    fn from(Dependence { column, with }: Dependence) -> Self {
        // Column 0 is the intercept, which is never dependent: it comes first.
        let with: Vec<usize> = with.iter().filter(|&&place| place > 0).map(|place| place - 1).collect();
        let column = column.saturating_sub(1);
        if with.is_empty() { Self::ConstantColumn(column) } else { Self::CollinearColumns { column, with } }
    }
}

/// A fitted regression with n values and k coefficients. "Whitened" is after the transformation that makes the
/// residuals independent; for ordinary least squares that is no transformation at all.
#[derive(Debug, Clone, PartialEq)]
pub struct Regression {
    /// Intercept first, then one per column; response units per column unit.
    pub coefficients: Vec<f64>,
    /// Standard errors of the coefficients.
    pub standard_errors: Vec<f64>,
    /// Covariance of the coefficients, row by row.
    pub covariance: Vec<Vec<f64>>,
    /// Coefficient over standard error.
    pub t: Vec<f64>,
    /// Two-sided probability of a |t| this large if the coefficient were zero, by Student's t.
    pub two_sided_p: Vec<f64>,
    /// n − k.
    pub degrees_of_freedom: usize,
    /// Residual variance, whitened sum of squares / (n − k): of the whole noise process, not of its innovations.
    pub scale: f64,
    /// Response minus fit, in the original equation.
    pub residuals: Vec<f64>,
    /// Whitened residuals.
    pub whitened_residuals: Vec<f64>,
    /// Sum of squares of the whitened residuals.
    pub residual_sum_of_squares: f64,
    /// 1 − S/S₀ with S the whitened residual sum of squares and S₀ that of a fit of the intercept alone under the same
    /// noise; for ordinary least squares the usual R².
    pub r_squared: f64,
    /// 1 − Σ e² / Σ (y − ȳ)² of the residuals in the original equation; may be negative for generalised fits.
    pub r_squared_original: f64,
    /// Σ (e_t − e_(t−1))² / Σ e² of the whitened residuals.
    pub durbin_watson: f64,
    /// The same of the residuals of ordinary least squares in the original equation.
    pub durbin_watson_ordinary: f64,
    /// Gaussian log likelihood at its maximum over coefficients and variance:
    /// −n/2 (1 + ln(2π S/n)) − ½ ln det of the noise correlation.
    pub log_likelihood: f64,
    /// −2 ln L + 2k (k coefficients; the variance is not counted, nor the known autocorrelation).
    pub aic: f64,
    /// −2 ln L + k ln n.
    pub bic: f64,
    /// Σ (e_t − ē)(e_(t+1) − ē) / Σ (e − ē)² of neighbouring residuals in the original equation.
    pub residual_autocorrelation: f64,
    /// Largest over smallest singular value of the untransformed columns, intercept included, each scaled to unit length
    /// (Belsley, Kuh and Welsch 1980).
    pub condition_number: f64,
    /// 1 / (1 − R²) of each untransformed column on the others and an intercept (Marquardt 1970, Technometrics 12, 591).
    pub variance_inflation_factors: Vec<f64>,
}

impl Regression {
    /// The confidence interval of each coefficient at `level` (0.9 for 5–95 %), by Student's t.
    ///
    /// # Errors
    /// [`RegressionError::Level`] when `level` is not between 0 and 1.
    pub fn intervals(&self, level: f64) -> Result<Vec<(f64, f64)>, RegressionError> {
        if !(level > 0.0 && level < 1.0) {
            return Err(RegressionError::Level(level));
        }
        let reach = student::quantile(self.degrees_of_freedom as f64, f64::midpoint(1.0, level));
        let interval = |(value, error): (&f64, &f64)| (value - reach * error, value + reach * error);
        Ok(self.coefficients.iter().zip(&self.standard_errors).map(interval).collect())
    }

    /// The value and the standard error of the combination Σ wᵢ βᵢ, the intercept's weight first.
    ///
    /// # Errors
    /// [`RegressionError::LengthMismatch`] when there is not one weight per coefficient.
    pub fn contrast(&self, weights: &[f64]) -> Result<(f64, f64), RegressionError> {
        if weights.len() != self.coefficients.len() {
            let (expected, found) = (self.coefficients.len(), weights.len());
            return Err(RegressionError::LengthMismatch { expected, found });
        }
        let along =
            |row: &Vec<f64>| row.iter().zip(weights).map(|(entry, weight)| entry * weight).sum::<f64>();
        let variance: f64 =
            self.covariance.iter().zip(weights).map(|(row, weight)| weight * along(row)).sum();
        let value = self.coefficients.iter().zip(weights).map(|(value, weight)| value * weight).sum();
        Ok((value, variance.max(0.0).sqrt()))
    }
}

/// Ordinary least squares y = β₀ + Xβ + e with independent residuals of one variance; scale S / (n − k).
///
/// # Errors
/// [`RegressionError`] for too few values, lengths that differ, values that are not finite, and columns that are
/// constant or collinear.
pub fn ordinary_least_squares(response: &[f64], design: &Design) -> Result<Regression, RegressionError> {
    Untransformed::of(response, design)?.fit(&Whitening::none(response.len()))
}

/// Generalised least squares with residuals that follow a first-order autoregression of known `autocorrelation` per
/// record step: neighbours Δ steps apart correlate as ρ^Δ.
///
/// `positions_in_steps` are the times of the values in steps of the record, ascending; `None` stands for 0, 1, 2, ….
/// Each row becomes (y_t − ρ^Δ y_(t−1)) / √(1 − ρ^2Δ) and the first is kept (Prais and Winsten 1954), which is the
/// exact inverse Cholesky factor of the correlation, on uneven times too. The scale is S / (n − k).
///
/// # Errors
/// As [`ordinary_least_squares`]; and for an autocorrelation that is not between −1 and 1 (or negative with positions
/// between whole steps), and for positions that do not ascend.
pub fn generalised_least_squares_ar1_known(
    response: &[f64],
    design: &Design,
    positions_in_steps: Option<&[f64]>,
    autocorrelation: f64,
) -> Result<Regression, RegressionError> {
    let untransformed = Untransformed::of(response, design)?;
    let regular: Vec<f64>;
    let positions = match positions_in_steps {
        Some(positions) => positions,
        None => {
            regular = (0..response.len()).map(|place| place as f64).collect();
            &regular
        }
    };
    untransformed.fit(&Whitening::autoregressive(positions, response.len(), autocorrelation)?)
}

/// The linear map to independent residuals: row t becomes (y_t − link_t y_(t−1)) / spread_t.
struct Whitening {
    links: Vec<f64>,
    spreads: Vec<f64>,
}

impl Whitening {
    fn none(rows: usize) -> Self {
        Self { links: vec![0.0; rows], spreads: vec![1.0; rows] }
    }

    fn autoregressive(positions: &[f64], rows: usize, autocorrelation: f64) -> Result<Self, RegressionError> {
        if positions.len() != rows {
            return Err(RegressionError::LengthMismatch { expected: rows, found: positions.len() });
        }
        let Self { mut links, mut spreads } = Self::none(rows);
        if !(autocorrelation > -1.0 && autocorrelation < 1.0) {
            return Err(RegressionError::Autocorrelation(autocorrelation));
        }
        let mut before = 0.0_f64;
        for row in 1..rows {
            let distance = positions[row] - positions[row - 1];
            if !(distance.is_finite() && distance > 0.0) {
                return Err(RegressionError::PositionsNotAscending(row));
            }
            if row > 1 && distance.to_bits() == before.to_bits() {
                // The powers and logarithms cost more than the rest of the fit together.
                (links[row], spreads[row]) = (links[row - 1], spreads[row - 1]);
                continue;
            }
            before = distance;
            let whole = (distance - distance.round()).abs() <= 1e-6;
            if autocorrelation < 0.0 && !whole {
                return Err(RegressionError::Autocorrelation(autocorrelation));
            }
            let size = autocorrelation.abs().powf(distance);
            let odd = whole && distance.round().rem_euclid(2.0) > 0.5;
            links[row] = if autocorrelation < 0.0 && odd { -size } else { size };
            // 1 − ρ^2Δ without cancellation as ρ^Δ nears one.
            spreads[row] = (-(2.0 * distance * autocorrelation.abs().ln()).exp_m1()).sqrt();
        }
        Ok(Self { links, spreads })
    }

    fn apply(&self, values: &[f64]) -> Vec<f64> {
        (0..values.len())
            .map(|row| {
                let before = if row == 0 { 0.0 } else { self.links[row] * values[row - 1] };
                (values[row] - before) / self.spreads[row]
            })
            .collect()
    }

    /// ln det of the correlation matrix.
    fn log_determinant(&self) -> f64 {
        2.0 * self.spreads.iter().map(|spread| spread.ln()).sum::<f64>()
    }
}

/// What does not depend on the noise: columns, ordinary residuals, diagnostics of collinearity.
struct Untransformed<'response> {
    response: &'response [f64],
    columns: Vec<Vec<f64>>,
    ordinary_residuals: Vec<f64>,
    condition_number: f64,
    variance_inflation_factors: Vec<f64>,
}

impl<'response> Untransformed<'response> {
    fn of(response: &'response [f64], design: &Design) -> Result<Self, RegressionError> {
        let columns = design.with_intercept(response)?;
        let factorisation = Factorisation::of(&columns)?;
        let inverse = factorisation.inverse_of_normal_matrix();
        let variance_inflation_factors = (1..columns.len())
            .map(|place| inverse[place][place] * spread_about_mean(&columns[place]))
            .collect();
        let ordinary_residuals = residuals(response, &columns, &factorisation.solve(response));
        let condition_number = factorisation.condition_number();
        Ok(Self { response, columns, ordinary_residuals, condition_number, variance_inflation_factors })
    }

    fn fit(self, whitening: &Whitening) -> Result<Regression, RegressionError> {
        let whitened: Vec<Vec<f64>> = self.columns.iter().map(|column| whitening.apply(column)).collect();
        let response = whitening.apply(self.response);
        let factorisation = Factorisation::of(&whitened)?;
        let coefficients = factorisation.solve(&response);
        let whitened_residuals = residuals(&response, &whitened, &coefficients);
        let residuals_here = residuals(self.response, &self.columns, &coefficients);

        let (count, terms) = (response.len() as f64, coefficients.len() as f64);
        let degrees_of_freedom = response.len() - coefficients.len();
        let residual_sum_of_squares = sum_of_squares(&whitened_residuals);
        let scale = residual_sum_of_squares / degrees_of_freedom as f64;
        let mut covariance = factorisation.inverse_of_normal_matrix();
        covariance.iter_mut().flatten().for_each(|entry| *entry *= scale);
        let standard_errors: Vec<f64> =
            (0..coefficients.len()).map(|place| covariance[place][place].sqrt()).collect();
        let t: Vec<f64> =
            coefficients.iter().zip(&standard_errors).map(|(value, error)| value / error).collect();
        let two_sided_p = t.iter().map(|&t| student::two_sided_p(degrees_of_freedom as f64, t)).collect();

        let intercept_alone = Factorisation::of(&whitened[..1])?.solve(&response);
        let total = sum_of_squares(&residuals(&response, &whitened[..1], &intercept_alone));
        let log_likelihood = -count / 2.0
            * (1.0 + (2.0 * std::f64::consts::PI * residual_sum_of_squares / count).ln())
            - whitening.log_determinant() / 2.0;
        Ok(Regression {
            standard_errors,
            covariance,
            t,
            two_sided_p,
            degrees_of_freedom,
            scale,
            residual_sum_of_squares,
            r_squared: 1.0 - residual_sum_of_squares / total,
            r_squared_original: 1.0 - sum_of_squares(&residuals_here) / spread_about_mean(self.response),
            durbin_watson: durbin_watson(&whitened_residuals),
            durbin_watson_ordinary: durbin_watson(&self.ordinary_residuals),
            log_likelihood,
            aic: -2.0 * log_likelihood + 2.0 * terms,
            bic: -2.0 * log_likelihood + terms * count.ln(),
            residual_autocorrelation: first_autocorrelation(&residuals_here),
            condition_number: self.condition_number,
            variance_inflation_factors: self.variance_inflation_factors,
            coefficients,
            residuals: residuals_here,
            whitened_residuals,
        })
    }
}

fn residuals(response: &[f64], columns: &[Vec<f64>], coefficients: &[f64]) -> Vec<f64> {
    let mut left = response.to_vec();
    for (column, coefficient) in columns.iter().zip(coefficients) {
        for (value, entry) in left.iter_mut().zip(column) {
            *value -= coefficient * entry;
        }
    }
    left
}

fn sum_of_squares(values: &[f64]) -> f64 {
    values.iter().map(|value| value * value).sum()
}

/// Σ (x − x̄)².
fn spread_about_mean(values: &[f64]) -> f64 {
    let mean = crate::science::reduce::mean(values);
    values.iter().map(|value| (value - mean).powi(2)).sum()
}

/// The Durbin–Watson statistic Σ (e_t − e_(t−1))² / Σ e², near 2 for independent values (Durbin and Watson 1950,
/// Biometrika 37, 409). Neighbours are taken as they stand, whatever lies between them.
#[must_use]
pub fn durbin_watson(residuals: &[f64]) -> f64 {
    let differences: f64 = residuals.windows(2).map(|pair| (pair[1] - pair[0]).powi(2)).sum();
    differences / sum_of_squares(residuals)
}

/// The first-order autocorrelation Σ (e_t − ē)(e_(t+1) − ē) / Σ (e − ē)² of neighbouring values.
#[must_use]
pub fn first_autocorrelation(values: &[f64]) -> f64 {
    let mean = crate::science::reduce::mean(values);
    let products: f64 = values.windows(2).map(|pair| (pair[0] - mean) * (pair[1] - mean)).sum();
    products / spread_about_mean(values)
}

#[cfg(test)]
#[path = "regression_tests.rs"]
mod tests;
