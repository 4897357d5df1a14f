//! The science held against values that were computed independently of this program. Each file's header says what it
//! holds, its source and its tolerance.

use rhythmite::science::draws::normal_quantile;
use rhythmite::science::gases::co2_forcing_myhre1998;
use rhythmite::science::regression::{
    Design, Regression, RegressionError, generalised_least_squares_ar1_known, ordinary_least_squares,
};
use rhythmite::science::student;
use rhythmite::science::two_layer::{
    Propagator, State, TwoLayerError, TwoLayerParameters, equilibrium_temperature,
    respond_constant_over_steps, respond_linear_between_instants, temperature_over_steps, time_constants,
};

/// A certified table: the lines that begin with `#` are its header.
struct Certified {
    columns: Vec<&'static str>,
    rows: Vec<Vec<&'static str>>,
}

macro_rules! certified {
    ($name:literal) => {
        Certified::read(include_str!(concat!(env!("CARGO_MANIFEST_DIR"), "/tests/data/certified/", $name)))
    };
}

impl Certified {
    fn read(text: &'static str) -> Self {
        let mut lines = text.lines().filter(|line| !line.starts_with('#') && !line.is_empty());
        let columns = lines.next().map(|line| line.split(',').collect()).unwrap_or_default();
        Self { columns, rows: lines.map(|line| line.split(',').collect()).collect() }
    }

    /// The text in a named column of a row; empty when there is no such column.
    fn text(&self, row: &[&'static str], column: &str) -> &'static str {
        let place = self.columns.iter().position(|name| *name == column);
        place.and_then(|place| row.get(place)).copied().unwrap_or("")
    }

    /// The number there; NaN, which no comparison accepts, when it is none.
    fn number(&self, row: &[&'static str], column: &str) -> f64 {
        self.text(row, column).parse().unwrap_or(f64::NAN)
    }

    fn rows_where(&self, column: &'static str, value: &str) -> Vec<&Vec<&'static str>> {
        self.rows.iter().filter(|row| self.text(row, column) == value).collect()
    }

    fn column(&self, name: &str) -> Vec<f64> {
        self.rows.iter().map(|row| self.number(row, name)).collect()
    }
}

/// Absolute agreement.
fn assert_near(found: f64, expected: f64, tolerance: f64, what: &str) {
    assert!((found - expected).abs() <= tolerance, "{what}: {found} against {expected}");
}

/// Relative agreement.
fn assert_relative(found: f64, expected: f64, tolerance: f64, what: &str) {
    assert_near(found, expected, tolerance * expected.abs(), what);
}

fn parameters(constants: &Certified, row: &[&'static str]) -> TwoLayerParameters {
    TwoLayerParameters {
        heat_capacity: constants.number(row, "C"),
        deep_heat_capacity: constants.number(row, "C0"),
        exchange: constants.number(row, "gamma"),
        feedback: constants.number(row, "lambda"),
        heat_uptake_efficacy: constants.number(row, "eps"),
    }
}

#[test]
fn two_layer_responses_are_the_certified_ones() -> Result<(), TwoLayerError> {
    const TOLERANCE: f64 = 1e-10;
    let constants = certified!("two_layer_constants.csv");
    let series = certified!("two_layer_series.csv");
    let mut cases = 0;
    for constant_row in &constants.rows {
        let parameters = parameters(&constants, constant_row);
        let of_set = series.rows_where("param_set", constants.text(constant_row, "param_set"));
        let scenarios: std::collections::BTreeSet<&str> =
            of_set.iter().map(|row| series.text(row, "scenario")).collect();
        for scenario in scenarios {
            let rows: Vec<_> = of_set.iter().filter(|row| series.text(row, "scenario") == scenario).collect();
            let column = |name| rows.iter().map(|row| series.number(row, name)).collect::<Vec<f64>>();
            let (forcing, times) = (column("F"), column("year"));
            let mode = series.text(rows[0], "forcing_mode");
            let initial = State { temperature: column("T")[0], deep_temperature: column("T0")[0] };
            let propagator = Propagator::new(&parameters, 1.0)?;
            let mut ends = vec![initial];
            let mut means = vec![State::default()];
            match mode {
                "const" | "linear" | "dirac" => {
                    for pair in forcing.windows(2) {
                        let start = if mode == "linear" { pair[0] } else { pair[1] };
                        let (end, mean) = propagator.step_linear(ends[ends.len() - 1], start, pair[1]);
                        ends.push(end);
                        means.push(mean);
                    }
                }
                _ => continue,
            }
            cases += 1;
            for (index, row) in rows.iter().enumerate() {
                let what = format!("{scenario}, {}, year {index}", constants.text(constant_row, "param_set"));
                assert_near(ends[index].temperature, series.number(row, "T"), TOLERANCE, &what);
                assert_near(ends[index].deep_temperature, series.number(row, "T0"), TOLERANCE, &what);
                let imbalance = parameters.imbalance(forcing[index], ends[index]);
                assert_near(imbalance, series.number(row, "N"), TOLERANCE, &what);
                // No scenario has step means in its first row, and the pulse has none.
                if series.text(row, "T_mean_prev_year") != "nan" {
                    assert_near(
                        means[index].temperature,
                        series.number(row, "T_mean_prev_year"),
                        TOLERANCE,
                        &what,
                    );
                    let deep = series.number(row, "T0_mean_prev_year");
                    assert_near(means[index].deep_temperature, deep, TOLERANCE, &what);
                }
            }
            // The functions over whole axes are the same steps.
            if mode == "linear" {
                let response = respond_linear_between_instants(&parameters, &times, &forcing, initial)?;
                for (index, row) in rows.iter().enumerate() {
                    assert_near(response.temperature[index], series.number(row, "T"), TOLERANCE, scenario);
                    assert_near(
                        response.deep_temperature[index],
                        series.number(row, "T0"),
                        TOLERANCE,
                        scenario,
                    );
                    assert_near(response.imbalance[index], series.number(row, "N"), TOLERANCE, scenario);
                }
            }
            if mode == "const" {
                let steps = vec![1.0; rows.len() - 1];
                let response = respond_constant_over_steps(&parameters, &steps, &forcing[1..], initial)?;
                let mut alone = vec![0.0; steps.len()];
                temperature_over_steps(&propagator, &forcing[1..], &mut alone);
                for (index, row) in rows.iter().skip(1).enumerate() {
                    let mean = series.number(row, "T_mean_prev_year");
                    let deep_mean = series.number(row, "T0_mean_prev_year");
                    assert_near(response.temperature[index], mean, TOLERANCE, scenario);
                    assert_near(response.deep_temperature[index], deep_mean, TOLERANCE, scenario);
                    assert_near(alone[index], mean, TOLERANCE, scenario);
                    // The mean imbalance is what the certified heat content gained within the step.
                    let gained =
                        series.number(row, "heat_content") - series.number(rows[index], "heat_content");
                    assert_near(response.imbalance[index], gained, 1e-9, scenario);
                }
            }
        }
    }
    // Three parameter sets; steps, ramps, pulses and the arbitrary series.
    assert_eq!(cases, 21);
    Ok(())
}

#[test]
fn two_layer_constants_are_the_certified_ones() -> Result<(), TwoLayerError> {
    const TOLERANCE: f64 = 1e-11;
    let constants = certified!("two_layer_constants.csv");
    assert_eq!(constants.rows.len(), 3);
    for row in &constants.rows {
        let parameters = parameters(&constants, row);
        let expect = |found: f64, column: &str| {
            assert_relative(found, constants.number(row, column), TOLERANCE, column);
        };
        let doubling = constants.number(row, "F2x");
        expect(equilibrium_temperature(&parameters, doubling).unwrap_or(f64::NAN), "ECS");
        let Some(modes) = time_constants(&parameters) else { panic!("a stable model has time constants") };
        expect(modes.fast_years, "tau_fast");
        expect(modes.slow_years, "tau_slow");
        expect(modes.fast_share, "a_fast");
        expect(modes.slow_share, "a_slow");
        expect(modes.fast_ratio, "phi_fast");
        expect(modes.slow_ratio, "phi_slow");
        // One per cent a year doubles in ln 2 / ln 1.01 years: a single straight step of that length.
        let doubling_years = std::f64::consts::LN_2 / 1.01_f64.ln();
        let (end, _) =
            Propagator::new(&parameters, doubling_years)?.step_linear(State::default(), 0.0, doubling);
        expect(end.temperature, "TCR_at_2x");
    }
    Ok(())
}

/// Holds one number against the row of the file that is about it, to the tolerance that stands there.
fn hold(results: &Certified, key: (&str, &str, &str), found: f64) {
    let (method, term, quantity) = key;
    let rows: Vec<_> = results
        .rows_where("method", method)
        .into_iter()
        .filter(|row| results.text(row, "term") == term && results.text(row, "quantity") == quantity)
        .collect();
    let what = format!("{key:?}");
    assert_eq!(rows.len(), 1, "rows for {what}");
    let (expected, tolerance) = (results.number(rows[0], "value"), results.text(rows[0], "tolerance"));
    match tolerance.strip_suffix(" rel") {
        Some(relative) => assert_relative(found, expected, relative.parse().unwrap_or(0.0), &what),
        None => assert_near(found, expected, tolerance.parse().unwrap_or(0.0), &what),
    }
}

fn hold_coefficients(results: &Certified, method: &str, fit: &Regression) -> Result<(), RegressionError> {
    let (ninety, ninety_five) = (fit.intervals(0.9)?, fit.intervals(0.95)?);
    for (place, term) in ["const", "x1", "x2", "x3"].into_iter().enumerate() {
        hold(results, (method, term, "coef"), fit.coefficients[place]);
        hold(results, (method, term, "se"), fit.standard_errors[place]);
        hold(results, (method, term, "t"), fit.t[place]);
        hold(results, (method, term, "ci90_lo"), ninety[place].0);
        hold(results, (method, term, "ci90_hi"), ninety[place].1);
        hold(results, (method, term, "ci95_lo"), ninety_five[place].0);
        hold(results, (method, term, "ci95_hi"), ninety_five[place].1);
        hold(results, (method, term, "p_two_sided"), fit.two_sided_p[place]);
    }
    Ok(())
}

#[test]
fn regressions_on_the_synthetic_data_are_the_certified_ones() -> Result<(), RegressionError> {
    let input = certified!("regression_input.csv");
    let results = certified!("regression_results.csv");
    let [y, x1, x2, x3] = ["y", "x1", "x2", "x3"].map(|name| input.column(name));
    let design = Design::new(&[&x1, &x2, &x3])?;

    let ordinary = ordinary_least_squares(&y, &design)?;
    hold_coefficients(&results, "ols", &ordinary)?;
    hold(&results, ("ols", "", "rsquared"), ordinary.r_squared);
    hold(&results, ("ols", "", "rsquared"), ordinary.r_squared_original);
    hold(&results, ("ols", "", "sigma2_n_minus_k"), ordinary.scale);
    hold(&results, ("ols", "", "ssr"), ordinary.residual_sum_of_squares);
    hold(&results, ("ols", "", "loglik_ml"), ordinary.log_likelihood);
    hold(&results, ("ols", "", "aic_k4"), ordinary.aic);
    hold(&results, ("ols", "", "bic_k4"), ordinary.bic);
    for (place, term) in ["x1", "x2", "x3"].into_iter().enumerate() {
        hold(&results, ("vif", term, "vif_with_const"), ordinary.variance_inflation_factors[place]);
    }
    hold(
        &results,
        ("condition", "", "cond_columns_unit_length_with_const_belsley"),
        ordinary.condition_number,
    );
    hold(&results, ("durbin_watson", "", "dw_ols_resid"), ordinary.durbin_watson);
    hold(&results, ("resid_acf", "lag1", "r1_biased_mean_removed"), ordinary.residual_autocorrelation);

    let rho = 0.55;
    hold(&results, ("gls_known_rho", "", "rho"), rho);
    let generalised = generalised_least_squares_ar1_known(&y, &design, None, rho)?;
    hold_coefficients(&results, "gls_known_rho", &generalised)?;
    hold(&results, ("gls_known_rho", "", "sigma2_process_gls_scale"), generalised.scale);
    let innovation = generalised.scale * (1.0 - rho * rho);
    hold(&results, ("gls_known_rho", "", "sigma2_innovation_n_minus_k"), innovation);
    hold(&results, ("durbin_watson", "", "dw_ols_resid"), generalised.durbin_watson_ordinary);
    Ok(())
}

#[test]
fn regressions_on_the_real_record_are_the_certified_ones() -> Result<(), RegressionError> {
    // The file prints ten digits.
    const TOLERANCE: f64 = 1e-8;
    let input = certified!("real_attribution_1880_2008_input.csv");
    let reference = certified!("real_attribution_1880_2008_reference.csv");
    let models = [
        ("co2+sun 1880-2008", 1880.0..=2008.0, true),
        ("sun only 1880-2008", 1880.0..=2008.0, false),
        ("sun only 1880-1960", 1880.0..=1960.0, false),
        ("co2+sun 1959-2008", 1959.0..=2008.0, true),
    ];
    for (model, years, with_gases) in models {
        let kept: Vec<bool> = input.column("year").iter().map(|year| years.contains(year)).collect();
        let column = |name: &str| -> Vec<f64> {
            input
                .column(name)
                .into_iter()
                .zip(&kept)
                .filter(|(_, kept)| **kept)
                .map(|(value, _)| value)
                .collect()
        };
        let temperature = column("temperature_anomaly_degC");
        let (gases, spots) = (column("co2_forcing_W_per_m2"), column("sunspot_number"));
        let columns: Vec<&[f64]> = if with_gases { vec![&gases, &spots] } else { vec![&spots] };
        let design = Design::new(&columns)?;
        let ordinary = ordinary_least_squares(&temperature, &design)?;
        let generalised = generalised_least_squares_ar1_known(&temperature, &design, None, 0.55)?;
        let rows = reference.rows_where("model", model);
        assert_eq!(rows.len(), ordinary.coefficients.len(), "{model}");
        for (place, row) in rows.into_iter().enumerate() {
            let expect = |found: f64, column: &str| {
                let what = format!("{model}, {}, {column}", reference.text(row, "term"));
                assert_relative(found, reference.number(row, column), TOLERANCE, &what);
            };
            expect(temperature.len() as f64, "n");
            expect(ordinary.coefficients[place], "ols");
            expect(ordinary.standard_errors[place], "ols_se");
            expect(generalised.coefficients[place], "gls_rho0.55");
            expect(generalised.standard_errors[place], "gls_rho0.55_se");
            expect(ordinary.r_squared, "r2_ols");
            expect(ordinary.durbin_watson, "durbin_watson");
            expect(generalised.durbin_watson_ordinary, "durbin_watson");
            expect(generalised.log_likelihood, "gls_loglik");
        }
    }
    Ok(())
}

#[test]
fn carbon_dioxide_forcings_of_myhre_1998_are_the_certified_ones() {
    let table = certified!("greenhouse_forcing_table.csv");
    assert!(table.rows.len() >= 30);
    for row in &table.rows {
        let (co2, reference) = (table.number(row, "C_ppm"), table.number(row, "C0_ppm"));
        let expected = table.number(row, "myhre_co2");
        assert_relative(
            co2_forcing_myhre1998(co2, reference),
            expected,
            1e-12,
            &format!("{co2} on {reference} ppm"),
        );
    }
}

#[test]
fn normal_and_student_quantiles_are_the_certified_ones() {
    let table = certified!("distribution_quantiles.csv");
    let normal = table.rows_where("distribution", "normal");
    assert!(normal.len() >= 7);
    for row in normal {
        let probability = table.number(row, "p");
        let expected = table.number(row, "quantile_mpmath");
        assert_near(
            normal_quantile(probability),
            expected,
            1e-15 * (1.0 + expected.abs()),
            &format!("p = {probability}"),
        );
    }
    let student_rows = table.rows_where("distribution", "t");
    assert!(student_rows.len() >= 7);
    for row in student_rows {
        let degrees = table.text(row, "parameters").trim_start_matches("df=").parse().unwrap_or(f64::NAN);
        let (probability, expected) = (table.number(row, "p"), table.number(row, "quantile_mpmath"));
        let found = student::quantile(degrees, probability);
        assert_near(
            found,
            expected,
            1e-13 * (1.0 + expected.abs()),
            &format!("df = {degrees}, p = {probability}"),
        );
    }
}
