//! What must hold for every series, through the language: means are kept by resampling, lags are shifts, a rate undoes
//! a sum, units and eras come back from wherever they went. Seeds are drawn anew by each run; a failure prints its case.

use std::fmt::Write;
use std::path::{Path, PathBuf};

use proptest::prelude::*;
use proptest::test_runner::{Config, TestCaseError, TestRunner};

use rhythmite::session::Session;
use rhythmite::value::{Era, Shown, ShownSeries, UNITS};

fn holds<S: Strategy>(
    cases: u32,
    strategy: &S,
    property: impl Fn(S::Value) -> Result<(), TestCaseError>,
) -> Result<(), String> {
    let mut runner = TestRunner::new(Config { cases, failure_persistence: None, ..Config::default() });
    runner.run(strategy, property).map_err(|error| error.to_string())
}

/// What a program shows, expression by expression.
fn shown_in(folder: &Path, program: &str) -> Result<Vec<Shown>, TestCaseError> {
    let reply = Session::new(folder).run_cell("program", program);
    let problems: Vec<String> =
        reply.problems.iter().chain(&reply.waiting).map(|problem| problem.message.clone()).collect();
    if !problems.is_empty() {
        return Err(TestCaseError::fail(format!("{program}\n{problems:?}")));
    }
    let results = reply.outputs.into_iter().map(|output| output.result);
    results
        .collect::<Result<_, _>>()
        .map_err(|problem| TestCaseError::fail(format!("{program}\n{}", problem.message)))
}

fn shown(program: &str) -> Result<Vec<Shown>, TestCaseError> {
    shown_in(Path::new(env!("CARGO_TARGET_TMPDIR")), program)
}

fn series(shown: &Shown) -> Result<&ShownSeries, TestCaseError> {
    match shown {
        Shown::Series(series) => Ok(series),
        other => Err(TestCaseError::fail(format!("{} is no series", other.kind()))),
    }
}

fn number(shown: &Shown) -> Result<f64, TestCaseError> {
    match shown {
        Shown::Quantity { nominal, .. } | Shown::Instant { nominal, .. } => Ok(*nominal),
        other => Err(TestCaseError::fail(format!("{} is no number", other.kind()))),
    }
}

fn close(found: f64, expected: f64, tolerance: f64) -> Result<(), TestCaseError> {
    let apart = (found - expected).abs();
    prop_assert!(apart <= tolerance, "{found} is {apart:e} from {expected}, more than {tolerance:e}");
    Ok(())
}

/// A list literal that is read back to the same bits.
fn list(values: &[f64]) -> String {
    let words: Vec<String> = values.iter().map(|value| format!("{value:?}")).collect();
    format!("[{}]", words.join(", "))
}

fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}

/// Years divided into `per_year` steps each, and the number of years of a coarser clock's step.
fn blocks() -> impl Strategy<Value = (usize, usize, Vec<f64>)> {
    (prop_oneof![Just(1usize), Just(4), Just(12)], 1usize..6, 1usize..7).prop_flat_map(
        |(per_year, years, count)| {
            let values = proptest::collection::vec(-100.0..100.0, per_year * years * count);
            (Just(per_year), Just(years), values)
        },
    )
}

#[test]
fn coarsening_even_steps_keeps_the_mean() -> Result<(), String> {
    holds(64, &blocks(), |(per_year, years, values)| {
        let last = 1900 + values.len() / per_year - 1;
        let program = format!(
            "x = series({} mm, along: 1900..{last} CE by {} month)\nx |> on(1900..{last} CE by {years} yr)",
            list(&values),
            12 / per_year
        );
        let shown = shown(&program)?;
        let coarse = series(&shown[0])?;
        prop_assert_eq!(coarse.nominal.len(), values.len() / per_year / years);
        close(mean(&coarse.nominal), mean(&values), 1e-9)
    })
}

fn own_folder(name: &str) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join(name);
    std::fs::create_dir_all(&folder).unwrap();
    folder
}

#[test]
fn coarsening_uneven_layers_keeps_the_mean_over_time() -> Result<(), String> {
    let folder = own_folder("uneven_layers");
    // Layers of 20 to 400 years, the last one cut at a whole number of thousand years.
    let layers = proptest::collection::vec((20u32..400, -50.0..50.0f64), 20..80);
    holds(48, &layers, |layers| {
        let mut text = "age_top (yr),age_bottom (yr),dust (mm)\n".to_owned();
        let (mut top, mut weighted) = (0u32, 0.0);
        let whole = layers.iter().map(|layer| layer.0).sum::<u32>() / 1000 * 1000;
        for (thickness, value) in &layers {
            let bottom = (top + thickness).min(whole);
            if bottom > top {
                let _ = writeln!(text, "{top},{bottom},{value:?}");
                weighted += f64::from(bottom - top) * value;
            }
            top = bottom;
        }
        prop_assume!(whole >= 1000);
        std::fs::write(folder.join("layers.csv"), text).unwrap();
        let program = format!(
            "load(\"layers.csv\") |> on(steps({}..0 ka by 1 kyr), method: mean)\nload(\"layers.csv\") |> on(steps({}..0 ka by 1 kyr))",
            whole / 1000,
            whole / 1000
        );
        for shown in &shown_in(&folder, &program)? {
            let coarse = series(shown)?;
            prop_assert_eq!(coarse.nominal.len(), (whole / 1000) as usize);
            close(mean(&coarse.nominal), weighted / f64::from(whole), 1e-9)?;
        }
        Ok(())
    })
}

#[test]
fn a_lag_of_whole_steps_is_a_shift() -> Result<(), String> {
    let strategy = (proptest::collection::vec(-10.0..10.0f64, 12..60), 0usize..6, 0usize..6);
    holds(64, &strategy, |(values, later, begin)| {
        let last = 1900 + values.len() - 1;
        let x = format!("x = series({} mm, along: 1900..{last} CE by 1 yr)\n", list(&values));
        let free = shown(&format!("{x}x |> lag({later} yr)\nx |> lag(-{later} yr)"))?;
        for (moved, by) in free.iter().zip([later as f64, -(later as f64)]) {
            let moved = series(moved)?;
            prop_assert_eq!(&moved.nominal, &values);
            close(moved.axis.starts()[0], 1900.0 + by, 1e-9)?;
        }
        // Under a clock the record before its start is used.
        let first = 1900 + begin;
        let clocked = shown(&format!("{x}clock = {first}..{last} CE by 1 yr\n(x + x) |> lag({later} yr)"))?;
        let moved = series(&clocked[0])?;
        for (index, found) in moved.nominal.iter().enumerate() {
            match (index + begin).checked_sub(later) {
                Some(before) => close(*found, 2.0 * values[before], 1e-9)?,
                None => prop_assert!(found.is_nan(), "{} where nothing is known", found),
            }
        }
        Ok(())
    })
}

/// The mean of sin(2πt/`period`) over `from..to`.
fn sine_mean(period: f64, from: f64, to: f64) -> f64 {
    let turn = std::f64::consts::TAU / period;
    ((turn * from).cos() - (turn * to).cos()) / (turn * (to - from))
}

#[test]
fn a_lag_by_a_fraction_converges_on_the_signal_as_steps_are_halved() -> Result<(), String> {
    let strategy = (7.0..30.0f64, 0.05..0.95f64);
    holds(24, &strategy, |(period, years)| {
        // The largest error of the lagged record of a sine, given as means over steps of `months`.
        let largest_error = |months: usize| -> Result<f64, TestCaseError> {
            let step = months as f64 / 12.0;
            let count = 40 * 12 / months;
            let means: Vec<f64> = (0..count)
                .map(|index| sine_mean(period, index as f64 * step, (index + 1) as f64 * step))
                .collect();
            let program = format!(
                "clock = 1905..1935 CE by {months} month\nx = series({} mm, along: 1900..1939 CE by {months} month)\n(x + 0 * x) |> lag({years:?} yr)",
                list(&means)
            );
            let shown = shown(&program)?;
            let lagged = series(&shown[0])?;
            let bounds = lagged.axis.starts().iter().zip(lagged.axis.ends());
            let errors = lagged.nominal.iter().zip(bounds).map(|(found, (start, end))| {
                (found - sine_mean(period, start - 1900.0 - years, end - 1900.0 - years)).abs()
            });
            Ok(errors.fold(0.0, f64::max))
        };
        let (coarse, fine) = (largest_error(12)?, largest_error(1)?);
        // A twelfth of the step: at least a sixth of the error (linear in the step), whatever part of a step the lag is.
        let half_turn_of_a_month = std::f64::consts::TAU / period / 12.0;
        prop_assert!(fine <= 0.5 * half_turn_of_a_month, "{} of a month's change", fine);
        prop_assert!(fine <= coarse / 6.0 || fine <= 1e-3, "{} with months, {} with years", fine, coarse);
        Ok(())
    })
}

#[test]
fn a_lagged_formula_is_exact_for_any_fraction_of_a_step() -> Result<(), String> {
    let strategy = (5.0..40.0f64, -8.0..8.0f64);
    holds(32, &strategy, |(period, years)| {
        let program = format!(
            "clock = 1900..1949 CE by 1 yr\nsinusoid({period:?} yr, 2 mm, 1900 CE) |> lag({years:?} yr)"
        );
        let shown = shown(&program)?;
        let lagged = series(&shown[0])?;
        for (found, start) in lagged.nominal.iter().zip(lagged.axis.starts()) {
            // The crest is a quarter of a period after the sine's own beginning.
            let from = start - 1900.0 - years + period / 4.0;
            close(*found, 2.0 * sine_mean(period, from, from + 1.0), 1e-9)?;
        }
        Ok(())
    })
}

#[test]
fn the_rate_of_a_cumulated_series_is_the_series() -> Result<(), String> {
    holds(64, &blocks(), |(per_year, _, values)| {
        let last = 1900 + values.len() / per_year - 1;
        let program = format!(
            "x = series({} W/m2, along: 1900..{last} CE by {} month)\nrate(cumulate(x))\nx",
            list(&values),
            12 / per_year
        );
        let shown = shown(&program)?;
        let (back, given) = (series(&shown[0])?, series(&shown[1])?);
        prop_assert_eq!(back.measure.unit.to_string(), "W/m2");
        prop_assert_eq!(back.axis.kind, given.axis.kind);
        prop_assert_eq!(back.nominal.len(), given.nominal.len());
        for (back, given) in back.axis.starts().iter().zip(given.axis.starts()) {
            close(*back, *given, 1e-9)?;
        }
        for (back, given) in back.nominal.iter().zip(&given.nominal) {
            // A month near 1900 is known to 3e-12 of itself; sums of 360 values of up to 100 add to it.
            close(*back, *given, 1e-8)?;
        }
        Ok(())
    })
}

/// Every unit with every prefix it takes.
fn written_units() -> Vec<(String, &'static str)> {
    UNITS
        .iter()
        .flat_map(|unit| {
            let prefixes =
                unit.prefixes.chars().map(move |prefix| (format!("{prefix}{}", unit.symbol), unit.symbol));
            std::iter::once((unit.symbol.to_owned(), unit.symbol)).chain(prefixes)
        })
        .collect()
}

#[test]
fn a_quantity_comes_back_from_every_unit_of_its_dimension() -> Result<(), String> {
    let written = written_units();
    let dimension = |symbol: &str| UNITS.iter().find(|unit| unit.symbol == symbol).map(|unit| unit.dimension);
    let pairs: Vec<(String, String)> = written
        .iter()
        .flat_map(|(from, from_base)| {
            let same = written.iter().filter(|(_, to_base)| dimension(to_base) == dimension(from_base));
            same.map(|(to, _)| (from.clone(), to.clone())).collect::<Vec<_>>()
        })
        .collect();
    assert!(pairs.len() > 1000, "{}", pairs.len());
    let strategy = (proptest::sample::select(pairs), -1e6..1e6f64);
    holds(256, &strategy, |((from, to), value)| {
        let shown = shown(&format!("({value:?} {from}) in {to} in {from}\n{value:?} {from}"))?;
        // Two factors, each rounded once.
        close(number(&shown[0])?, value, 4.0 * f64::EPSILON * value.abs())?;
        close(number(&shown[1])?, value, 0.0)
    })
}

#[test]
fn an_instant_comes_back_from_every_era_and_from_its_own_text() -> Result<(), String> {
    let strategy = (-800_000i32..2100, proptest::sample::select(Era::ALL.to_vec()));
    holds(256, &strategy, |(year, era)| {
        // Written in its own calendar era, which has no year zero.
        let written = if year >= 1 { format!("{year} CE") } else { format!("{} BCE", 1 - year) };
        let other = era.format(f64::from(year));
        let program = format!(
            "{written}\n({written}) in {}\n({written}) in {} in CE\n{other}",
            era.symbol(),
            era.symbol()
        );
        let shown = shown(&program)?;
        for instant in &shown {
            // An age is written with six decimals: a thousandth of a year for ka, a year for Ma.
            close(number(instant)?, f64::from(year), if era == Era::Ma { 0.5 } else { 5e-4 })?;
        }
        close(number(&shown[2])?, f64::from(year), 0.0)
    })
}
