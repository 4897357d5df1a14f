//! Files as they come in real life (`tests/data/rough`, all invented), read through the language: what must come of
//! each is said here, either the numbers with the notes of what was decided, or the error with its place in the file.

mod errors;
mod series;

use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};

use rhythmite::session::{Output, Session};
use rhythmite::value::{Axis, AxisKind, Shown};

/// A file that must load.
struct Loads {
    file: &'static str,
    /// What is said in the call after the name of the file.
    options: &'static str,
    times: Times,
    values: &'static [f64],
    /// The unit of the values.
    unit: &'static str,
    /// What the notes must say, each within one of them.
    notes: &'static [&'static str],
}

/// A file that must be refused.
struct Refused {
    file: &'static str,
    options: &'static str,
    code: &'static str,
    /// What the message must say; with the line and the column where one cell is to blame.
    says: &'static str,
    /// What the help must say; nothing where there is none.
    help: &'static str,
}

/// The axis that must come of a file.
enum Times {
    /// Consecutive whole years from this one on.
    Years(i32),
    /// Consecutive twelfths of a year from this one on: (year, month from 1).
    Months(i32, u8),
    /// Steps by their starts and their ends, within 1e-9 years.
    Steps(&'static [(f64, f64)]),
    /// Instants, within 1e-9 years.
    Instants(&'static [f64]),
}

/// A gap among expected values.
const GAP: f64 = f64::NAN;

fn rough_folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/rough")
}

fn call(file: &str, options: &str) -> String {
    if options.is_empty() { format!("load(\"{file}\")") } else { format!("load(\"{file}\", {options})") }
}

/// The one output of an expression; code, message and help of what was refused.
fn output(folder: PathBuf, expression: &str) -> Result<Output, (String, String, String)> {
    let mut session = Session::new(folder);
    let reply = session.run_cell("rough", expression);
    let failed = reply.outputs.iter().filter_map(|output| output.result.as_ref().err());
    if let Some(problem) = reply.problems.iter().chain(&reply.waiting).chain(failed).next() {
        let help = problem.help.clone().unwrap_or_default();
        return Err((problem.code.to_owned(), problem.message.clone(), help));
    }
    Ok(reply.outputs.into_iter().next().unwrap_or_else(|| panic!("{expression} gave nothing")))
}

fn steps_and_instants(times: &Times, count: usize) -> (AxisKind, Vec<(f64, f64)>) {
    let even = |first: f64, per_year: f64| {
        (0..count).map(move |index| {
            let edge = |index: usize| (first * per_year + index as f64) / per_year;
            (edge(index), edge(index + 1))
        })
    };
    match times {
        Times::Years(first) => (AxisKind::Steps, even(f64::from(*first), 1.0).collect()),
        Times::Months(year, month) => {
            let first = f64::from(*year) + f64::from(month - 1) / 12.0;
            (AxisKind::Steps, even(first, 12.0).collect())
        }
        Times::Steps(steps) => (AxisKind::Steps, steps.to_vec()),
        Times::Instants(times) => (AxisKind::Instants, times.iter().map(|time| (*time, *time)).collect()),
    }
}

/// How an axis differs from what was expected, in words.
fn axis_difference(axis: &Axis, times: &Times, count: usize) -> Option<String> {
    let (kind, expected) = steps_and_instants(times, count);
    let found: Vec<(f64, f64)> = axis.starts().iter().copied().zip(axis.ends().iter().copied()).collect();
    let near = |(left, right): (&(f64, f64), &(f64, f64))| {
        (left.0 - right.0).abs() < 1e-9 && (left.1 - right.1).abs() < 1e-9
    };
    let same = axis.kind == kind && found.len() == expected.len() && found.iter().zip(&expected).all(near);
    (!same).then(|| format!("is {} {found:?}, expected {} {expected:?}", axis.kind.word(), kind.word()))
}

fn complaint(case: &Loads) -> Option<String> {
    let expression = call(case.file, case.options);
    let output = match output(rough_folder(), &expression) {
        Ok(output) => output,
        Err((code, message, _)) => return Some(format!("{expression} is refused ({code}): {message}")),
    };
    let Ok(Shown::Series(series)) = &output.result else { return Some(format!("{expression} is no series")) };
    if let Some(words) = axis_difference(&series.axis, &case.times, case.values.len()) {
        return Some(format!("{expression} {words}"));
    }
    let same = |(found, expected): (&f64, &f64)| {
        (found.is_nan() && expected.is_nan()) || (found - expected).abs() <= 1e-12 * expected.abs()
    };
    if series.nominal.len() != case.values.len() || !series.nominal.iter().zip(case.values).all(same) {
        return Some(format!("{expression} gives {:?}, expected {:?}", series.nominal, case.values));
    }
    let unit = series.measure.unit.to_string();
    if unit != case.unit {
        return Some(format!("{expression} is in {unit}, expected {}", case.unit));
    }
    let said = |words: &&&str| !output.notes.iter().any(|note| note.contains(**words));
    let missing: Vec<&&str> = case.notes.iter().filter(said).collect();
    (!missing.is_empty()).then(|| format!("{expression} does not note {missing:?}, but {:#?}", output.notes))
}

#[test]
fn every_rough_file_that_can_be_read_gives_its_numbers_and_says_how_it_was_read() {
    let complaints: Vec<String> = series::LOADS.iter().filter_map(complaint).collect();
    assert!(complaints.is_empty(), "\n{}", complaints.join("\n\n"));
}

#[test]
fn every_rough_file_that_cannot_be_read_is_refused_at_its_line_and_column() {
    let mut complaints = Vec::new();
    for case in errors::REFUSED {
        let expression = call(case.file, case.options);
        match output(rough_folder(), &expression) {
            Ok(output) => {
                complaints.push(format!("{expression} gives {:?}", output.result.map(|_| "a result")))
            }
            Err((code, message, help)) => {
                let no_help = case.help.is_empty() && !help.is_empty();
                if code != case.code || !message.contains(case.says) || !help.contains(case.help) || no_help {
                    complaints.push(format!(
                        "{expression}\n  is      {code}: {message} ({help})\n  must be {}: {} ({})",
                        case.code, case.says, case.help
                    ));
                }
            }
        }
    }
    assert!(complaints.is_empty(), "\n{}", complaints.join("\n\n"));
}

#[test]
fn every_rough_file_has_its_case_and_there_are_forty_or_more() {
    let in_folder: BTreeSet<String> = fs::read_dir(rough_folder())
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .filter(|name| !name.starts_with('.'))
        .collect();
    let loads = series::LOADS.iter().map(|case| case.file);
    let cases: BTreeSet<String> =
        loads.chain(errors::REFUSED.iter().map(|case| case.file)).map(str::to_owned).collect();
    assert_eq!(in_folder, cases);
    assert!(cases.len() >= 40, "{}", cases.len());
}

#[test]
fn the_files_keep_the_bytes_that_make_them_rough() {
    let bytes = |file: &str| fs::read(rough_folder().join(file)).unwrap();
    assert!(bytes("byte_order_mark.csv").starts_with(b"\xEF\xBB\xBF"));
    assert!(bytes("windows_newlines.csv").windows(2).any(|pair| pair == b"\r\n"));
    let old = bytes("carriage_returns.csv");
    assert!(old.contains(&b'\r') && !old.contains(&b'\n'));
    assert!(String::from_utf8(bytes("latin_1.csv")).is_err());
    assert!(!bytes("no_final_newline.csv").ends_with(b"\n"));
    assert!(bytes("empty.csv").is_empty());
}

#[test]
fn a_member_with_a_gap_keeps_it_out_of_the_mean_of_the_others() {
    let program = "members = 5\nload(\"members_with_gap.csv\", members: \"m*\")";
    let output = output(rough_folder(), program).unwrap();
    let Ok(Shown::Series(series)) = &output.result else { panic!("no series") };
    // m3 is a gap in 1902: the mean of 2, 3, 5 and 6, and the median of those four.
    assert_eq!(series.nominal, [3.0, 4.0, 5.0]);
    let spread = series.spread.as_ref().unwrap();
    assert_eq!(spread.median, [3.0, 4.0, 5.0]);
    assert_eq!(spread.members, 5);
    let noted = |words: &str| output.notes.iter().any(|note| note.contains(words));
    assert!(noted("m3: 1 of 3 values missing") && noted("an ensemble of 5 members"), "{:?}", output.notes);
}

#[test]
fn the_six_real_series_load_without_options() {
    // Counts, first and last values as the files print them; axes as their headers say.
    let real: [(&str, AxisKind, usize, usize, f64, f64, &str); 6] = [
        ("co2_icecore_bereiter2015_805ka.csv", AxisKind::Instants, 634, 0, 202.23, 368.02, "ppm"),
        ("co2_lawdome_20yr_20_2000.csv", AxisKind::Instants, 100, 0, 277.7, 366.8, "ppm"),
        ("co2_mlo_monthly_1958_2020.csv", AxisKind::Steps, 746, 5, 315.7, 416.18, "ppm"),
        ("nino12_sst_monthly_1950_2010.csv", AxisKind::Steps, 732, 0, 23.11, 22.07, "degC"),
        ("sunspot_yearly_v1_1700_2008.csv", AxisKind::Steps, 309, 0, 5.0, 2.9, "spots_v1"),
        ("temp_global_gistemp_annual_vega_1880_2022.csv", AxisKind::Steps, 144, 0, -0.17, 1.17, "degC"),
    ];
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/real");
    let here = fs::read_dir(&folder).unwrap().filter(|entry| {
        entry.as_ref().is_ok_and(|entry| entry.path().extension().is_some_and(|extension| extension == "csv"))
    });
    assert_eq!(here.count(), real.len());
    for (file, kind, count, gaps, first, last, unit) in real {
        let output =
            output(folder.clone(), &call(file, "")).unwrap_or_else(|error| panic!("{file}: {error:?}"));
        let Ok(Shown::Series(series)) = &output.result else { panic!("{file} is no series") };
        assert_eq!((series.axis.kind, series.nominal.len()), (kind, count), "{file}");
        assert_eq!(series.nominal.iter().filter(|value| value.is_nan()).count(), gaps, "{file}");
        assert_eq!((series.nominal[0], series.nominal[count - 1]), (first, last), "{file}");
        assert_eq!(series.measure.unit.to_string(), unit, "{file}");
        assert!(output.notes.iter().any(|note| note.contains("read as")), "{file}: {:?}", output.notes);
    }
}
