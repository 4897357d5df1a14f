use std::sync::Arc;

use super::axis::{Axis, Span};
use super::table::{Cell, Column, Table};
use super::unit::Unit;

/// How much each driver explains of a record, by regression, with what is needed to judge it.
#[derive(Clone, Debug)]
pub struct Attribution {
    /// The method in words.
    pub method: String,
    /// The noise model in words.
    pub noise: String,
    /// The unit of the record.
    pub unit: Unit,
    /// The intercept.
    pub intercept: Coefficient,
    /// One entry for each regressor.
    pub drivers: Vec<Coefficient>,
    /// Covariances of the coefficients, intercept first, row after row; in the units of the coefficients.
    pub covariance: Vec<f64>,
    /// The 0.95 quantile of Student's t for the degrees of freedom left: half-width of the 5–95 % interval.
    pub t_quantile: f64,
    /// Numbers about the fit as a whole.
    pub statistics: FitStatistics,
    /// The times at which the record and every driver have a value.
    pub axis: Arc<Axis>,
    /// The record there.
    pub observed: Vec<f64>,
    /// The fit there.
    pub fitted: Vec<f64>,
    /// The windows of the contributions, later first, if they were asked for.
    pub windows: Option<(Span, Span)>,
    /// The observed change between the windows.
    pub observed_change: Option<f64>,
    /// What all drivers together explain of it, with its standard error.
    pub explained: Option<(f64, f64)>,
}

/// One regressor's estimate.
#[derive(Clone, Debug)]
pub struct Coefficient {
    /// Its label.
    pub label: Arc<str>,
    /// Its unit: the record's over the regressor's.
    pub unit: Unit,
    /// The estimate.
    pub value: f64,
    /// Its standard error.
    pub standard_error: f64,
    /// Estimate over standard error.
    pub t: f64,
    /// The lower end of the 5–95 % interval.
    pub low: f64,
    /// The upper end of the 5–95 % interval.
    pub high: f64,
    /// Variance inflation: how much the other regressors widen its interval.
    pub variance_inflation: Option<f64>,
    /// The regressor at the times of the fit.
    pub regressor: Vec<f64>,
    /// What it contributes to the change between the windows, in the record's unit, with its standard error.
    pub contribution: Option<(f64, f64)>,
}

/// Numbers about a fit as a whole.
#[derive(Clone, Debug)]
pub struct FitStatistics {
    /// Values of the record used.
    pub count: usize,
    /// Share of the record's variance that the fit explains.
    pub r_squared: f64,
    /// Durbin–Watson statistic of the residuals that the method assumes to be independent.
    pub durbin_watson: f64,
    /// Autocorrelation of the noise over one step of the record, as assumed; none for white noise.
    pub rho: Option<f64>,
    /// First autocorrelation of the plain residuals.
    pub residual_autocorrelation: f64,
    /// Gaussian log-likelihood.
    pub log_likelihood: f64,
    /// Akaike's information criterion.
    pub akaike: f64,
    /// Condition number of the columns at unit length, intercept included.
    pub condition_number: f64,
}

impl Attribution {
    /// The table of an attribution, as it is shown and as JSON gives it.
    pub fn table(&self) -> Table {
        let attribution = self;
        let columns = vec![
            Column::plain("driver"),
            Column::plain("coefficient"),
            Column::plain("standard_error"),
            Column::plain("t"),
            Column::plain("low"),
            Column::plain("high"),
            Column::in_unit("contribution", &attribution.unit),
            Column::in_unit("contribution_low", &attribution.unit),
            Column::in_unit("contribution_high", &attribution.unit),
            Column::plain("unit"),
        ];
        let row = |entry: &Coefficient| {
            let (contribution, error) = entry.contribution.unwrap_or((f64::NAN, f64::NAN));
            let reach = attribution.t_quantile * error;
            vec![
                Cell::Text(entry.label.clone()),
                Cell::to_uncertainty(entry.value, entry.standard_error),
                Cell::to_uncertainty(entry.standard_error, entry.standard_error),
                Cell::to_uncertainty(entry.t, 0.1),
                Cell::to_uncertainty(entry.low, entry.standard_error),
                Cell::to_uncertainty(entry.high, entry.standard_error),
                Cell::to_uncertainty(contribution, error),
                Cell::to_uncertainty(contribution - reach, error),
                Cell::to_uncertainty(contribution + reach, error),
                Cell::Text(Arc::from(entry.unit.to_string())),
            ]
        };
        let rows = attribution.drivers.iter().chain([&attribution.intercept]).map(row).collect();
        let mut notes = vec![format!(
            "{}, noise {}; low and high are the 5–95 % interval by Student's t",
            attribution.method, attribution.noise
        )];
        if let (Some((later, earlier)), Some(change)) = (&attribution.windows, attribution.observed_change) {
            let (explained, error) = attribution.explained.unwrap_or((f64::NAN, f64::NAN));
            let reach = attribution.t_quantile * error;
            notes.push(format!(
                "contribution: to the change from {earlier} to {later}; observed {change:.3} {unit}, explained {explained:.3} [{:.3}, {:.3}], unexplained {:.3}",
                explained - reach,
                explained + reach,
                change - explained,
                unit = attribution.unit
            ));
        }
        Table { title: "attribution".to_owned(), columns, rows, notes }
    }

    /// How many numbers it holds.
    pub fn numbers(&self) -> usize {
        self.axis.len() * (4 + self.drivers.len()) + self.covariance.len() + 64
    }
}

/// The line beneath every attribution.
pub const CAUTION: &str = "a regression shows what goes together, under its assumptions; for assessed findings see the assessment reports";
