//! The main job on real records, through the command line: scripts that stand beside their data are run, and what they
//! print as JSON is held against numbers that statsmodels, NumPy and SciPy gave for the same job.

use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

use serde_json::Value;

/// A certified table: the lines that begin with `#` are its header.
struct Certified {
    columns: Vec<String>,
    rows: Vec<Vec<String>>,
}

impl Certified {
    fn read(name: &str) -> Self {
        let text = fs::read_to_string(data_folder("certified").join(name)).unwrap();
        let cells = |line: &str| line.split(',').map(str::to_owned).collect::<Vec<_>>();
        let mut lines = text.lines().filter(|line| !line.starts_with('#') && !line.is_empty());
        Self { columns: cells(lines.next().unwrap()), rows: lines.map(cells).collect() }
    }

    fn text<'row>(&self, row: &'row [String], column: &str) -> &'row str {
        let place = self.columns.iter().position(|name| name == column);
        &row[place.unwrap_or_else(|| panic!("there is no column {column}"))]
    }

    fn number(&self, row: &[String], column: &str) -> f64 {
        self.text(row, column).parse().unwrap()
    }

    fn rows_where(&self, conditions: &[(&str, &str)]) -> Vec<&[String]> {
        let holds =
            |row: &&Vec<String>| conditions.iter().all(|(column, value)| self.text(row, column) == *value);
        self.rows.iter().filter(holds).map(Vec::as_slice).collect()
    }

    fn only_row_where(&self, conditions: &[(&str, &str)]) -> &[String] {
        let rows = self.rows_where(conditions);
        assert_eq!(rows.len(), 1, "{conditions:?}");
        rows[0]
    }
}

fn data_folder(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data").join(name)
}

/// What a script prints, output by output.
fn run(script: &Path) -> Vec<Value> {
    let run = Command::new(env!("CARGO_BIN_EXE_rhythmite"))
        .args(["run", "--format", "json"])
        .arg(script)
        .output()
        .unwrap();
    let printed = String::from_utf8(run.stdout).unwrap();
    assert!(run.status.success(), "{}\n{}", printed, String::from_utf8_lossy(&run.stderr));
    let report: Value = serde_json::from_str(&printed).unwrap();
    report["outputs"].as_array().unwrap().clone()
}

fn output<'outputs>(outputs: &'outputs [Value], expression: &str) -> &'outputs Value {
    let found: Vec<&Value> =
        outputs.iter().filter(|output| output["expression"].as_str() == Some(expression)).collect();
    assert_eq!(found.len(), 1, "outputs of `{expression}`");
    found[0]
}

fn numbers(values: &Value) -> Vec<f64> {
    values.as_array().unwrap().iter().map(|value| value.as_f64().unwrap()).collect()
}

/// The rows of an attribution by driver, and in them the numbers by column.
fn drivers(attribution: &Value) -> BTreeMap<String, BTreeMap<String, f64>> {
    let table = &attribution["table"];
    let columns: Vec<&str> =
        table["columns"].as_array().unwrap().iter().map(|column| column["name"].as_str().unwrap()).collect();
    let mut drivers = BTreeMap::new();
    for row in table["rows"].as_array().unwrap() {
        let cells = columns.iter().zip(row.as_array().unwrap());
        let label = row[0].as_str().unwrap().to_owned();
        let numbers =
            cells.filter_map(|(name, cell)| cell.as_f64().map(|number| ((*name).to_owned(), number)));
        drivers.insert(label, numbers.collect());
    }
    drivers
}

fn assert_near(found: f64, expected: f64, tolerance: f64, what: &str) {
    assert!((found - expected).abs() <= tolerance, "{what}: {found} against {expected} ± {tolerance}");
}

/// A file of the reference prints ten significant digits, so that half a unit of its last digit is at most 5e-10 of the
/// value; as much again is left to the two programs' arithmetic.
const RELATIVE_TO_TEN_DIGITS: f64 = 1e-9;

fn assert_as_printed(found: f64, expected: f64, what: &str) {
    assert_near(found, expected, RELATIVE_TO_TEN_DIGITS * expected.abs(), what);
}

#[test]
fn the_attribution_of_1880_to_2008_on_the_supplied_columns_is_the_one_of_statsmodels() {
    let reference = Certified::read("real_attribution_1880_2008_reference.csv");
    let outputs = run(&data_folder("certified").join("real_attribution.rhy"));
    let models = [
        ("co2+sun 1880-2008", "temperature", "[co2_forcing_supplied, sunspots]"),
        ("sun only 1880-2008", "temperature", "[sunspots]"),
        ("sun only 1880-1960", "early", "[sunspots]"),
        ("co2+sun 1959-2008", "late", "[co2_forcing_supplied, sunspots]"),
    ];
    let labels = [
        ("const", "intercept"),
        ("co2_forcing_W_per_m2", "co2_forcing_supplied"),
        ("sunspot_number", "sunspots"),
    ];
    let mut compared = 0;
    for (model, record, to) in models {
        let simple = output(&outputs, &format!("attribute({record}, to: {to})"));
        let correlated = output(&outputs, &format!("correlated({record}, {to})"));
        let fits = [(simple, "ols", "ols_se"), (correlated, "gls_rho0.55", "gls_rho0.55_se")];
        for row in reference.rows_where(&[("model", model)]) {
            let term = reference.text(row, "term");
            let (_, label) = labels.iter().find(|(name, _)| *name == term).unwrap();
            for (fit, coefficient, standard_error) in fits {
                let what = format!("{model}, {coefficient} of {term}");
                let drivers = drivers(fit);
                let driver = &drivers[*label];
                assert_as_printed(driver["coefficient"], reference.number(row, coefficient), &what);
                assert_as_printed(driver["standard_error"], reference.number(row, standard_error), &what);
                assert_eq!(fit["statistics"]["n"].as_f64(), Some(reference.number(row, "n")), "{what}");
                compared += 1;
            }
            let statistic = |fit: &Value, name: &str| fit["statistics"][name].as_f64().unwrap();
            assert_as_printed(statistic(simple, "r_squared"), reference.number(row, "r2_ols"), model);
            // The file's Durbin–Watson statistic is the one of the ordinary residuals.
            assert_as_printed(
                statistic(simple, "durbin_watson"),
                reference.number(row, "durbin_watson"),
                model,
            );
            assert_as_printed(
                statistic(correlated, "log_likelihood"),
                reference.number(row, "gls_loglik"),
                model,
            );
        }
    }
    assert_eq!(compared, 2 * reference.rows.len(), "every row of the reference, by both methods");
}

#[test]
fn the_certified_regression_holds_through_the_language() {
    let results = Certified::read("regression_results.csv");
    let outputs = run(&data_folder("certified").join("regression.rhy"));
    let generalised = "attribute(response, to: [x1, x2, x3], method: generalised_least_squares, noise: ar1(0.55, per: 1 yr))";
    let fits = [("ols", "attribute(response, to: [x1, x2, x3])"), ("gls_known_rho", generalised)];
    for (method, expression) in fits {
        let fit = output(&outputs, expression);
        let drivers = drivers(fit);
        for (term, label) in [("const", "intercept"), ("x1", "x1"), ("x2", "x2"), ("x3", "x3")] {
            let quantities = [
                ("coef", "coefficient"),
                ("se", "standard_error"),
                ("t", "t"),
                ("ci90_lo", "low"),
                ("ci90_hi", "high"),
            ];
            for (quantity, column) in quantities {
                let row =
                    results.only_row_where(&[("method", method), ("term", term), ("quantity", quantity)]);
                let what = format!("{method}, {quantity} of {term}");
                let tolerance = results.number(row, "tolerance");
                assert_near(drivers[label][column], results.number(row, "value"), tolerance, &what);
            }
        }
    }
    let simple = output(&outputs, fits[0].1);
    for (method, quantity, statistic) in [
        ("ols", "rsquared", "r_squared"),
        ("ols", "loglik_ml", "log_likelihood"),
        ("durbin_watson", "dw_ols_resid", "durbin_watson"),
    ] {
        let row = results.only_row_where(&[("method", method), ("term", ""), ("quantity", quantity)]);
        let (value, tolerance) = (results.number(row, "value"), results.number(row, "tolerance"));
        assert_near(simple["statistics"][statistic].as_f64().unwrap(), value, tolerance, quantity);
    }
}

/// A folder of its own for a test, empty.
fn empty_folder(name: &str) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join(name);
    let _ = fs::remove_dir_all(&folder);
    fs::create_dir_all(&folder).unwrap();
    folder
}

#[test]
fn two_layer_responses_through_the_language_are_the_certified_ones() {
    const TOLERANCE_KELVIN: f64 = 1e-10;
    // The file counts its years from nought; they are moved to where no era is in doubt.
    const FIRST_YEAR: usize = 2000;
    let series = Certified::read("two_layer_series.csv");
    let constants = Certified::read("two_layer_constants.csv");
    let mut compared = 0;
    for constant_row in &constants.rows {
        let set = constants.text(constant_row, "param_set");
        let model = format!(
            "two_layer(heat_capacity: {} W*yr/m2/K, deep_heat_capacity: {} W*yr/m2/K, exchange: {} W/m2/K, \
             feedback: {} W/m2/K, heat_uptake_efficacy: {})",
            constants.text(constant_row, "C"),
            constants.text(constant_row, "C0"),
            constants.text(constant_row, "gamma"),
            constants.text(constant_row, "lambda"),
            constants.text(constant_row, "eps"),
        );
        let scenarios = [
            ("arbitrary_linear", "instants", "T"),
            ("arbitrary_const", "steps", "T_mean_prev_year"),
            ("step_2x", "steps", "T_mean_prev_year"),
        ];
        for (scenario, axis, expected) in scenarios {
            let mut rows = series.rows_where(&[("param_set", set), ("scenario", scenario)]);
            if axis == "steps" {
                // Row k is the step that ends with year k, so that no step belongs to row 0.
                rows.remove(0);
            }
            let folder = empty_folder(&format!("two-layer-{set}-{scenario}"));
            let mut file = String::from("year,forcing (W/m2)\n");
            for (index, row) in rows.iter().enumerate() {
                file += &format!("{},{}\n", FIRST_YEAR + index, series.text(row, "F"));
            }
            fs::write(folder.join("forcing.csv"), file).unwrap();
            let script = folder.join("response.rhy");
            fs::write(&script, format!("respond(load(\"forcing.csv\", as: {axis}), {model})\n")).unwrap();
            let outputs = run(&script);
            let response = &outputs[0];
            assert_eq!(response["time"]["kind"].as_str(), Some(axis), "{scenario}");
            let found = numbers(&response["nominal"]);
            assert_eq!(found.len(), rows.len(), "{scenario}");
            for (index, (found, row)) in found.iter().zip(&rows).enumerate() {
                let what = format!("{set}, {scenario}, row {index}");
                assert_near(*found, series.number(row, expected), TOLERANCE_KELVIN, &what);
                compared += 1;
            }
        }
    }
    assert_eq!(compared, 3 * (161 + 160 + 160));
}

fn real_attribution() -> Vec<Value> {
    run(&data_folder("real").join("attribution_1880_2008.rhy"))
}

/// The reference took the mean of a calendar year's air samples as the value of that year, and joined the ice's value of
/// 1940 to the mean of 1959 by a straight line in years. The script keeps the months: its line runs from the ice's sample
/// in the middle of 1940 to January 1959, which lies a third of a ppm below that year's mean, as the season has it; and
/// a year is the integral over the year, where 1964, of which three months were never measured, is filled by a
/// straight line that the reference's mean of nine months leaves out. Both are right.
#[test]
fn carbon_dioxide_from_two_sources_is_that_of_the_reference_to_a_third_of_a_ppm() {
    let input = Certified::read("real_attribution_1880_2008_input.csv");
    let outputs = real_attribution();
    let forcing = output(&outputs, "carbon");
    assert_eq!(forcing["unit"].as_str(), Some("W/m2"));
    let found = numbers(&forcing["nominal"]);
    assert_eq!(found.len(), input.rows.len());
    for (found, row) in found.iter().zip(&input.rows) {
        let year: u32 = input.text(row, "year").parse().unwrap();
        let tolerance_ppm = match year {
            ..1940 => 0.02,
            1940..1959 => 0.35,
            1964 => 0.15,
            _ => 0.01,
        };
        let found_ppm = 278.0 * (found / 5.35).exp();
        assert_near(found_ppm, input.number(row, "co2_ppm"), tolerance_ppm, &format!("CO2 of {year} in ppm"));
    }
}

/// From the raw sources the regressors differ from the reference's as told above, and by nothing else. A fiftieth of a
/// standard error is far below anything that a reader would conclude from.
#[test]
fn the_attribution_from_raw_sources_is_that_of_the_reference_to_a_fiftieth_of_its_standard_error() {
    let reference = Certified::read("real_attribution_1880_2008_reference.csv");
    let outputs = real_attribution();
    let fits = [
        (output(&outputs, "plain"), "ols", "ols_se"),
        (output(&outputs, "both"), "gls_rho0.55", "gls_rho0.55_se"),
    ];
    let terms = [("const", "intercept"), ("co2_forcing_W_per_m2", "carbon"), ("sunspot_number", "sunspots")];
    for (fit, coefficient, standard_error) in fits {
        assert_eq!(fit["statistics"]["n"].as_u64(), Some(129));
        let drivers = drivers(fit);
        for (term, label) in terms {
            let row = reference.only_row_where(&[("model", "co2+sun 1880-2008"), ("term", term)]);
            let what = format!("{coefficient} of {term}");
            let expected_error = reference.number(row, standard_error);
            let expected = reference.number(row, coefficient);
            assert_near(drivers[label]["coefficient"], expected, expected_error / 50.0, &what);
            assert_near(drivers[label]["standard_error"], expected_error, expected_error / 500.0, &what);
        }
    }
}

/// No carbon dioxide comes in here, so that the raw files must give what the supplied columns give.
#[test]
fn the_sun_alone_from_raw_sources_is_exactly_that_of_the_reference() {
    let reference = Certified::read("real_attribution_1880_2008_reference.csv");
    let outputs = real_attribution();
    let fits = [
        (output(&outputs, "attribute(temperature, to: [sunspots])"), "ols", "ols_se"),
        (output(&outputs, "sun_alone"), "gls_rho0.55", "gls_rho0.55_se"),
    ];
    for (fit, coefficient, standard_error) in fits {
        for (term, label) in [("const", "intercept"), ("sunspot_number", "sunspots")] {
            let row = reference.only_row_where(&[("model", "sun only 1880-2008"), ("term", term)]);
            let found = &drivers(fit)[label];
            assert_as_printed(found["coefficient"], reference.number(row, coefficient), term);
            assert_as_printed(found["standard_error"], reference.number(row, standard_error), term);
        }
    }
}

/// The cycles have not grown since 1970 while it became warmer. What the regression sees is a coefficient of about a
/// seventh of its standard error, on either side of zero, and next to nothing of the half degree of warming. NumPy
/// 2.4.6, with the correlation matrix 0.55^|i-j| inverted as it stands, gives the coefficient and standard error below.
#[test]
fn the_sun_alone_does_not_explain_the_warming_since_1970() {
    let outputs = real_attribution();
    let fit = output(&outputs, "sun_since_1970");
    assert_eq!(fit["statistics"]["n"].as_u64(), Some(39));
    let found = &drivers(fit)["sunspots"];
    assert_near(found["coefficient"], -9.583_492_080_236e-5, 1e-13, "coefficient");
    assert_near(found["standard_error"], 7.184_131_368_063_57e-4, 1e-13, "standard error");
    assert!(found["low"] < 0.0 && 0.0 < found["high"], "{} to {}", found["low"], found["high"]);

    let change = "table(sun_since_1970, change: 1999..2008 CE, from: 1970..1979 CE)";
    let contribution = &drivers(output(&outputs, change))["sunspots"];
    // Observed: 0.526 degC.
    assert!(contribution["contribution_high"] < 0.01, "{}", contribution["contribution_high"]);
}

/// Both together over the whole record: carbon dioxide explains the change, and the Sun's part is not told from nothing.
#[test]
fn carbon_dioxide_explains_the_warming_since_1880() {
    let outputs = real_attribution();
    let table = output(&outputs, "table(both, change: 1979..2008 CE, from: 1880..1909 CE)");
    let drivers = drivers(table);
    let (carbon, sunspots) = (&drivers["carbon"], &drivers["sunspots"]);
    // The record changes by 0.643 degC between the two means.
    assert!(carbon["contribution_low"] > 0.5 && carbon["contribution_high"] < 0.8, "{carbon:?}");
    assert!(carbon["contribution_low"] < 0.643 && 0.643 < carbon["contribution_high"], "{carbon:?}");
    assert!(sunspots["low"] < 0.0 && 0.0 < sunspots["high"], "{sunspots:?}");
    assert!(sunspots["contribution_high"] < 0.05, "{sunspots:?}");
}

/// The demo's data were made by a generator of which this repository holds only what it was set to, at the head of
/// `station.csv`. That the truth lies inside every 5–95 % interval is one draw's luck in part; that it lies within a
/// few standard errors is not.
#[test]
fn the_demo_gives_back_what_its_lake_was_made_of() {
    let truth = [("carbon", 1.25), ("haze", 1.10), ("sunspots", 0.0006), ("ocean", 0.16)];
    let outputs = run(&Path::new(env!("CARGO_MANIFEST_DIR")).join("notebooks-demo/lake.rhy"));
    let result = output(&outputs, "result");
    // 1868 to 2020 without the six lost years.
    assert_eq!(result["statistics"]["n"].as_u64(), Some(147));
    let drivers = drivers(result);
    for (label, made_of) in truth {
        let found = &drivers[label];
        assert!(found["low"] < made_of && made_of < found["high"], "{label}: {found:?}");
        // An interval that held everything would say nothing: none reaches further than its own coefficient.
        assert!(found["high"] - found["low"] < 2.0 * made_of, "{label}: {found:?}");
    }
}
