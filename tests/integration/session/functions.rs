//! Functions of the user's: what is told of their bodies where they are defined, and where they are called.

use super::*;

fn reply(text: &str) -> CellReply {
    session().run_cell("script", text)
}

/// The text under a mark.
fn under(text: &str, span: rhythmite::base::Span) -> &str {
    text.get(span.start..span.end).unwrap()
}

#[test]
fn a_body_is_checked_where_the_function_is_defined() {
    for (text, code, place) in [
        ("f(x) = x |> smoth(5 yr)", "unknown-function", "smoth"),
        ("f(x) = smooth(x, 5 yr, windw: gaussian)", "unknown-argument", "windw"),
        ("f(x) = smooth(x, 5 yr, window: triangle)", "unknown-choice", "triangle"),
        ("f(x) = smooth(x)", "missing-argument", "smooth(x)"),
        ("f(x) = season(x, Decembr..February)", "unknown-choice", "Decembr"),
        ("f(x) = x * 5 wtt", "unknown-unit", "wtt"),
        ("f(x) = x |> anomaly(relative_to: 2015-02-30..2016-01-01)", "no-such-date", "2015-02-30"),
        // What holds no parameter has a unit already.
        ("f(x) = x * (1 W/m2 + 1 degC)", "unit-mismatch", "1 W/m2 + 1 degC"),
        ("f(x) = smooth(x, 5 W/m2)", "wrong-argument", "5 W/m2"),
        ("f(x) = scale(x, \"half\")", "wrong-argument", "\"half\""),
        ("f(x) = x + load(\"nowhere.csv\")", "file-missing", "\"nowhere.csv\""),
        ("f(x) = [a * x + (1 m + 1 s) for a in [1, 2]]", "unit-mismatch", "1 m + 1 s"),
        ("f(x) = x + f(x)", "circle", "f"),
        ("g(y) = y * 2\nf(x) = g(x, x)", "too-many-arguments", "x"),
        ("g(y) = y + 1\nf(x) = x * g(\"a\")", "wrong-argument", "\"a\""),
    ] {
        let reply = reply(text);
        assert!(reply.waiting.is_empty(), "{text}\n{reply:#?}");
        let [problem] = &reply.problems[..] else { panic!("{text}\n{reply:#?}") };
        assert_eq!((problem.code, under(text, problem.primary.span)), (code, place), "{text}\n{problem:#?}");
    }
}

#[test]
fn what_only_a_call_can_tell_is_left_open() {
    for text in [
        "f(x) = x + 1 W/m2",
        "f(x, w) = x |> smooth(w, window: gaussian) |> scale(0.8)",
        "f(x) = [x * a for a in [1, 2]]",
        "f(x) = [a * 2 for a in x]",
        "f(list, by_what) = [[a * b for b in by_what] for a in list]",
        // The clock is the caller's.
        "f(x) = x + constant(1 W/m2)",
        "f(x) = on(x + constant(1 ppm), 3..0 ka by 1 kyr)",
        "f(file) = load(file)",
        "f() = 2 m",
        "g(y) = y + 1 m\nf(x) = g(x) / 2",
        "f(x) = compose(x, haze: constant(1 W/m2)) |> without([haze])",
        "f(x) = x + g\ng = 3 m",
        "f(x) = x + members",
    ] {
        let reply = reply(text);
        assert!(reply.problems.is_empty() && reply.waiting.is_empty(), "{text}\n{reply:#?}");
    }
}

#[test]
fn a_body_waits_for_a_name_that_is_not_defined_yet() {
    let mut session = session();
    let text = "f(x) = x * strength + 1 W/m2";
    let reply = session.run_cell("a", text);
    assert!(reply.problems.is_empty() && reply.installed, "{reply:#?}");
    let [waiting] = &reply.waiting[..] else { panic!("{reply:#?}") };
    assert_eq!((waiting.code, under(text, waiting.primary.span)), ("not-defined", "strength"));
    // It comes in another cell: nothing is left to wait for.
    run(&mut session, "b", "strength = 2\nf(3 W/m2)");
    assert!(
        session.standing(&["a", "b"]).iter().all(|cell| cell.problems.is_empty() && cell.waiting.is_empty())
    );
}

#[test]
fn a_mistake_inside_a_body_shows_the_calls_that_led_there() {
    let text = "inner(y) = y + 1 W/m2\nouter(x) = inner(x) * 2\nouter(3 degC)";
    let reply = reply(text);
    let problem = reply.outputs[0].result.as_ref().unwrap_err();
    assert_eq!(under(text, problem.primary.span), "y + 1 W/m2");
    let marks: Vec<(&str, &str)> =
        problem.secondary.iter().map(|mark| (under(text, mark.span), mark.label.as_str())).collect();
    assert_eq!(marks, [("inner(x)", "called here"), ("outer(3 degC)", "called here")]);
}

#[test]
fn an_argument_that_a_body_cannot_use_shows_what_it_is_used_for() {
    let text = "f(x) = x |> smooth(5 yr)\nf(3 degC)";
    let reply = reply(text);
    let problem = reply.outputs[0].result.as_ref().unwrap_err();
    assert_eq!(under(text, problem.primary.span), "3 degC");
    let marks: Vec<(&str, &str)> =
        problem.secondary.iter().map(|mark| (under(text, mark.span), mark.label.as_str())).collect();
    assert_eq!(marks, [("x |> smooth(5 yr)", "used here")]);
}

#[test]
fn a_mistake_outside_all_functions_shows_no_call() {
    let reply = reply("f(x) = x + 1 m\nf(2 m) + 1 s");
    assert_eq!(reply.outputs[0].result.as_ref().unwrap_err().secondary, []);
}

#[test]
fn a_mistake_is_told_once_however_many_definitions_depend_on_it() {
    for (text, problems, waiting) in [
        ("f(x) = x |> smoth(5 yr)\na = f(1)\nb = f(2)\nc = a + b", 1, 0),
        ("a = 1 m + 1 s\nb = a\nc = a * 2\nd = b + c", 1, 0),
        ("a = nowhere\nb = a\nc = a + b", 0, 1),
        ("f(x) = x + nowhere\na = f(1)\nb = f(a)", 0, 1),
        // Two mistakes are two, though they are alike.
        ("a = 1 m + 1 s\nb = 1 m + 1 s", 2, 0),
    ] {
        let reply = reply(text);
        assert_eq!((reply.problems.len(), reply.waiting.len()), (problems, waiting), "{text}\n{reply:#?}");
    }
}

#[test]
fn a_mistake_stands_in_the_cell_that_made_it_and_in_no_other() {
    let mut session = session();
    session.run_cell("a", "x = 1 m + 1 s\nf(y) = y |> smoth(1)");
    session.run_cell("b", "z = x * 2\nw = f(3)");
    let standing = session.standing(&["a", "b"]);
    assert_eq!((standing[0].problems.len(), standing[1].problems.len()), (2, 0), "{standing:#?}");
}

#[test]
fn bodies_that_double_are_checked_in_no_time() {
    let mut text = "f0(x) = x + x + nowhere\n".to_owned();
    for level in 1..60 {
        text += &format!("f{level}(x) = f{}(x) + f{}(x)\n", level - 1, level - 1);
    }
    let began = std::time::Instant::now();
    let reply = reply(&text);
    assert!(reply.problems.is_empty() && reply.waiting.len() == 1, "{reply:#?}");
    assert!(began.elapsed() < std::time::Duration::from_secs(20));
}
