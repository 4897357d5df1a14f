//! The session's promises: order does not matter, nothing is computed twice, displays refresh, mistakes are told where
//! they stand.

mod functions;
mod graphs;
mod random_variables;
mod refreshing;
mod splices;
mod wordings;

use std::fs;
use std::path::{Path, PathBuf};

use rhythmite::base::{Diagnostic, LineIndex};
use rhythmite::session::{CellReply, Output, Session};
use rhythmite::value::Shown;

/// An empty folder of its own for a test.
fn folder(name: &str) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join(format!("session-{name}"));
    let _ = fs::remove_dir_all(&folder);
    fs::create_dir_all(&folder).unwrap();
    folder
}

/// A session that reads no files, on two threads.
fn session() -> Session {
    Session::with_limits(env!("CARGO_TARGET_TMPDIR"), Some(2), 64 << 20, 1 << 20)
}

/// Run a cell in which nothing may go wrong.
fn run(session: &mut Session, cell: &str, text: &str) -> CellReply {
    let reply = session.run_cell(cell, text);
    let failed: Vec<&Diagnostic> =
        reply.outputs.iter().filter_map(|output| output.result.as_ref().err()).collect();
    assert!(
        reply.problems.is_empty() && reply.waiting.is_empty() && failed.is_empty() && !reply.incomplete,
        "{text}\n{reply:#?}"
    );
    reply
}

/// The results of one script in a session of its own.
fn results(text: &str) -> Vec<Shown> {
    run(&mut session(), "script", text).outputs.into_iter().map(|output| output.result.unwrap()).collect()
}

/// The codes of everything that is wrong with a script.
fn codes(text: &str) -> Vec<&'static str> {
    let reply = session().run_cell("script", text);
    let failed = reply.outputs.iter().filter_map(|output| output.result.as_ref().err());
    reply.problems.iter().chain(&reply.waiting).chain(failed).map(|problem| problem.code).collect()
}

fn nominal(shown: &Shown) -> Vec<f64> {
    match shown {
        Shown::Quantity { nominal, .. } | Shown::Instant { nominal, .. } => vec![*nominal],
        Shown::Series(series) => series.nominal.clone(),
        Shown::Bundle { total, .. } => total.nominal.clone(),
        Shown::List(items) => items.iter().flat_map(|(_, item)| nominal(item)).collect(),
        other => panic!("no numbers in {other:?}"),
    }
}

fn number(shown: &Shown) -> f64 {
    let numbers = nominal(shown);
    assert_eq!(numbers.len(), 1, "{shown:?}");
    numbers[0]
}

fn value(output: &Output) -> f64 {
    number(output.result.as_ref().unwrap())
}

/// Low, median and high, each a number for every column; none where it is certain.
fn spread(shown: &Shown) -> Option<[Vec<f64>; 3]> {
    let spread = match shown {
        Shown::Quantity { spread, .. } | Shown::Instant { spread, .. } => spread.clone(),
        Shown::Series(series) => series.spread.clone(),
        Shown::Bundle { total, .. } => total.spread.clone(),
        other => panic!("no numbers in {other:?}"),
    }?;
    Some([spread.low.clone(), spread.median.clone(), spread.high.clone()])
}

/// Line and column of a diagnostic, from one.
fn place(session: &Session, problem: &Diagnostic) -> (usize, usize) {
    let span = problem.primary.span;
    let source = session.source(span.source).expect("the text of the message is kept");
    let position = LineIndex::new(&source.text).position(span.start);
    (position.line, position.column)
}

#[test]
fn a_setting_takes_only_what_it_can_be() {
    for (wrong, code) in [
        ("members = 0", "setting"),
        ("members = -5", "setting"),
        ("members = 2.5", "setting"),
        ("members = 5 yr", "setting"),
        ("members = \"many\"", "setting"),
        ("members = 1e9", "setting"),
        ("members = 10 ± 1", "setting-uncertain"),
        ("n = 10 ± 1\nmembers = 2 * n", "setting-uncertain"),
        ("seed = -1", "setting"),
        ("seed = 0.5", "setting"),
        ("seed = 1 ± 1", "setting-uncertain"),
        ("clock = 5 yr", "setting"),
        ("clock = 1850..1900 CE", "setting"),
        ("start = 1850 ± 1 CE\nclock = start..1900 CE by 1 yr", "setting-uncertain"),
        ("f(clock) = 1", "setting-name"),
        ("f(x, seed) = 1", "setting-name"),
        ("[members for members in [1, 2]]", "setting-name"),
    ] {
        let codes = codes(wrong);
        assert!(codes.contains(&code), "{wrong}: {codes:?}");
    }
}

#[test]
fn a_setting_may_be_computed_from_other_names_and_read_like_any_name() {
    let shown = results("n = 40\nmembers = n * 50\nseed = n + 2\nmembers + seed\n[members, seed]");
    assert_eq!(number(&shown[0]), 2042.0);
    assert_eq!(nominal(&shown[1]), [2000.0, 42.0]);
    assert_eq!(nominal(&results("[members, seed]")[0]), [1000.0, 1.0]);
}

#[test]
fn the_defaults_of_two_settings_have_two_fingerprints() {
    let reply = run(&mut session(), "script", "members\nseed\nmembers + 0\nseed + 0");
    let prints: Vec<_> = reply.outputs.iter().map(|output| output.fingerprint).collect();
    assert_ne!(prints[0], prints[1]);
    assert_ne!(prints[2], prints[3]);
}

#[test]
fn a_clock_that_cannot_be_used_is_told_whatever_ran_before() {
    let data = "x = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)";
    let mut fresh = session();
    fresh.run_cell("data", data);
    fresh.run_cell("clock", "clock = nowhere");
    let told = fresh.run_cell("shown", "x + x");
    assert_eq!(told.outputs[0].result.as_ref().unwrap_err().code, "not-defined");

    let mut used = session();
    run(&mut used, "data", data);
    run(&mut used, "shown", "x + x");
    let reply = used.run_cell("clock", "clock = nowhere");
    assert_eq!(reply.moved.len(), 1, "the display follows the clock: {reply:#?}");
    let again = used.run_cell("shown", "x + x");
    assert_eq!(again.outputs[0].result.as_ref().unwrap_err().code, "not-defined");
}

#[test]
fn circles_are_told_at_every_definition_in_them() {
    assert_eq!(codes("a = a + 1"), ["circle"]);
    assert_eq!(codes("a = b\nb = a"), ["circle"; 2]);
    assert_eq!(codes("a = b\nb = c * 2\nc = a - 1"), ["circle"; 3]);
    assert_eq!(codes("f(x) = x + a\na = f(1)"), ["circle"]);
    assert_eq!(codes("f(x) = f(x)\na = f(1)"), ["circle"]);
    assert_eq!(codes("f(x) = g(x)\ng(x) = f(x)\na = f(1)"), ["circle"]);
    assert_eq!(codes("a = [e + a for e in [1, 2]]"), ["circle"]);
    assert_eq!(codes("seed = members\nmembers = seed"), ["circle"; 2]);
}

#[test]
fn a_circle_names_the_way_round() {
    let reply = session().run_cell("script", "a = b\nb = c\nc = a");
    assert!(reply.problems[0].message.contains("a → b → c → a"), "{}", reply.problems[0].message);
    assert!(reply.problems[1].message.contains("b → c → a → b"), "{}", reply.problems[1].message);
}

#[test]
fn a_circle_can_be_broken_in_another_cell_and_heals_what_hangs_on_it() {
    let mut session = session();
    session.run_cell("one", "a = b + 1");
    let two = session.run_cell("two", "b = a + 1");
    assert_eq!(two.problems[0].code, "circle");
    let shown = session.run_cell("shown", "a");
    assert_eq!(shown.outputs[0].result.as_ref().unwrap_err().code, "circle");
    let healed = run(&mut session, "two", "b = 5");
    assert_eq!(healed.moved.iter().map(value).collect::<Vec<_>>(), [6.0]);
}

#[test]
fn a_name_and_a_function_of_the_same_name_are_two_things() {
    assert_eq!(number(&results("trend = trend(3)\ntrend(x) = 2 * x\ntrend")[0]), 6.0);
}

#[test]
fn free_names_in_a_function_mean_the_definitions_in_force() {
    let shown = results("y = 10\nf(x) = x + y\n[f(y) for y in [1, 2]]\ng(y) = f(y)\ng(5)");
    assert_eq!(nominal(&shown[0]), [11.0, 12.0]);
    assert_eq!(number(&shown[1]), 15.0);
}

#[test]
fn loops_nest_and_an_inner_name_hides_an_outer_one() {
    let shown = results(
        "[[i * j for j in [1, 2]] for i in [10, 20]]\n[[i for i in [i, i + 1]] for i in [10, 20]]\n\
         list = [1, 2, 3]\n[[e + d for d in list] for e in list]",
    );
    assert_eq!(nominal(&shown[0]), [10.0, 20.0, 20.0, 40.0]);
    assert_eq!(nominal(&shown[1]), [10.0, 11.0, 20.0, 21.0]);
    assert_eq!(nominal(&shown[2]), [2.0, 3.0, 4.0, 3.0, 4.0, 5.0, 4.0, 5.0, 6.0]);
}

#[test]
fn a_lag_inside_on_moves_the_data_before_they_are_averaged() {
    let shown = results(
        "x = series([1, 2, 3, 4, 5, 6, 7, 8, 9, 10] ppm, along: 1850..1859 CE by 1 yr)\n\
         x |> lag(1 yr) |> on(1852..1855 CE by 2 yr)\nx |> on(1852..1855 CE by 2 yr) |> lag(1 yr)",
    );
    assert_eq!(nominal(&shown[0]), [2.5, 4.5]);
    let Shown::Series(after) = &shown[1] else { panic!("{:?}", shown[1]) };
    assert_eq!(after.nominal, [3.5, 5.5]);
    assert_eq!(after.axis.starts(), [1853.0, 1855.0]);
}

#[test]
fn what_was_put_on_another_clock_meets_no_other_axis() {
    let data = "x = series([1, 2, 3, 4] ppm, along: 1850..1853 CE by 1 yr)\nclock = 1850..1853 CE by 1 yr\n";
    assert_eq!(codes(&format!("{data}(x |> on(1850..1853 CE by 2 yr)) + x")), ["two-axes"]);
    assert_eq!(codes(&format!("{data}x - (x |> on(1850..1853 CE by 2 yr))")), ["two-axes"]);
    let halves = "half = x |> on(1850..1853 CE by 2 yr)\nhalf + half";
    assert_eq!(nominal(&results(&format!("{data}{halves}"))[0]), [3.0, 7.0]);
    assert_eq!(
        codes(&format!("{data}half = x |> on(1850..1853 CE by 2 yr)\nhalf + constant(1 ppm)")),
        ["two-axes"]
    );
}

#[test]
fn a_fault_is_placed_where_each_failing_expression_stands() {
    let mut session = session();
    let text = "x = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)\n\
                x |> within(1900..1950 CE)\n\
                # again, further to the right\n\
                [2, x |> within(1900..1950 CE)]\n";
    let reply = session.run_cell("script", text);
    let problems: Vec<&Diagnostic> =
        reply.outputs.iter().map(|output| output.result.as_ref().unwrap_err()).collect();
    assert_eq!(problems[0].message, problems[1].message);
    assert_eq!(place(&session, problems[0]), (2, 13));
    assert_eq!(place(&session, problems[1]), (4, 17));
    let other = session.run_cell("other", "\n\n   x |> within(1900..1950 CE)");
    let problem = other.outputs[0].result.as_ref().unwrap_err();
    assert_eq!(place(&session, problem), (3, 16));
    assert_eq!(session.source(problem.primary.span.source).unwrap().name, "other");
}

#[test]
fn a_fault_names_the_series_of_its_own_place() {
    let text = "one = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)\n\
                two = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)\n\
                one |> within(1900..1950 CE)\ntwo |> within(1900..1950 CE)";
    let reply = session().run_cell("script", text);
    for (output, name) in reply.outputs.iter().zip(["`one`", "`two`"]) {
        let message = &output.result.as_ref().unwrap_err().message;
        assert!(message.contains(name), "{name}: {message}");
    }
}

#[test]
fn a_note_names_the_series_of_its_own_place() {
    let text = "clock = 1850..1851 CE by 1 yr\n\
                one = series([1, 2, 3] ppm, along: 1850..1852 CE by 1 yr)\n\
                two = series([1, 2, 3] ppm, along: 1850..1852 CE by 1 yr)\none + one\ntwo + two";
    let reply = run(&mut session(), "script", text);
    for (output, name) in reply.outputs.iter().zip(["one:", "two:"]) {
        assert!(output.notes.iter().any(|note| note.contains(name)), "{name} {:?}", output.notes);
    }
}

#[test]
fn a_fault_in_a_definition_is_placed_there_for_everything_that_uses_it() {
    let mut session = session();
    let text = "x = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)\ny = x |> within(1900..1950 CE)";
    session.run_cell("home", text);
    let reply = session.run_cell("uses", "y\n2 * y\n[y, y]");
    for output in &reply.outputs {
        let problem = output.result.as_ref().unwrap_err();
        assert_eq!(problem.code, "no-overlap");
        assert_eq!(place(&session, problem), (2, 17));
        assert_eq!(session.source(problem.primary.span.source).unwrap().name, "home");
    }
}
