//! Definitions from outside: they win over those of the program, and say so.

use rhythmite::session::{OUTSIDE, Session};
use serde_json::json;

use super::{Ran, format, outputs, plain, run, run_notebook};

fn script(name: &str, text: &str, arguments: &[&str]) -> Ran {
    run(&format!("define-{name}"), "s.rhy", text.as_bytes(), arguments)
}

#[test]
fn a_definition_from_outside_gives_what_the_edited_script_gives() {
    let text = "members = 1000\nseed = 4\nx = 2 ± 1 m\nx * 3\n";
    let edited =
        script("edited", &text.replace("1000", "300").replace("2 ± 1", "7 ± 2"), &["--format", "json"]);
    let given =
        script("given", text, &["--format", "json", "--define", "members = 300", "--define", "x = 7 ± 2 m"]);
    assert_eq!((edited.code, given.code), (Some(0), Some(0)));
    let (edited, given) = (edited.json(), given.json());
    let outputs = given["outputs"].as_array().unwrap();
    let notices: Vec<&str> = outputs.iter().filter_map(|output| output["text"].as_str()).collect();
    assert_eq!(notices.len(), 2);
    assert!(
        notices[0].starts_with("`members = 300` comes from --define")
            && notices[1].starts_with("`x = 7 ± 2 m`")
    );
    assert_eq!(outputs[2], edited["outputs"][0], "fingerprint, draws and all");
    assert_ne!(script("plain", text, &["--format", "json"]).json()["outputs"][0], edited["outputs"][0]);
}

#[test]
fn it_wins_over_every_cell_that_defines_the_name_and_the_cells_say_so() {
    let cells = ["x = 1\nx", "y = x + 1\ny", "x = 3"];
    let ran = run_notebook("define-cells", &cells, &["--format", "ipynb", "--define", "x = 10"]);
    assert_eq!((ran.code, ran.err.as_str()), (Some(0), ""));
    format::check(&ran.json());
    let outputs = outputs(&ran.json());
    for cell in [0, 2] {
        assert!(plain(&outputs[cell][0]).starts_with("`x = 10` comes from --define; "), "{outputs:?}");
        assert_eq!(outputs[cell][0]["metadata"], json!({"rhythmite": {"kind": "notice"}}));
    }
    assert!(plain(&outputs[0][1]).starts_with("10\n") && plain(&outputs[1][0]).starts_with("11\n"));
    assert!(!ran.out.contains("refreshed"), "nothing moved after it was shown");
}

#[test]
fn it_may_use_names_and_functions_that_cells_define_later() {
    let cells = ["total = 1 m\ntotal", "#!prose", "twice(a) = a * 2\nlength = 4 m"];
    let ran = run_notebook("define-later", &cells, &["--define", "total = twice(length)"]);
    assert_eq!(ran.code, Some(0), "{}", ran.out);
    assert!(ran.out.contains("total\n  8 m\n"), "{}", ran.out);
}

#[test]
fn a_function_of_the_program_can_be_given_from_outside() {
    let text = "damped(x) = x * 0.8\ndamped(10 m)\n";
    let ran = script("function", text, &["--define", "damped(x) = x * 0.5"]);
    assert_eq!(ran.code, Some(0), "{}", ran.out);
    assert!(
        ran.out.contains("`damped(x) = x * 0.5` comes from --define") && ran.out.contains("\n  5 m\n"),
        "{}",
        ran.out
    );
}

#[test]
fn a_name_that_nothing_else_defines_is_allowed_and_noted_with_a_near_one() {
    let text = "members = 50\nspan = 2 m\nspan * extra\n";
    let ran =
        script("new", text, &["--define", "extra = 3", "--define", "spam = 5 m", "--define", "seed = 8"]);
    assert_eq!(ran.code, Some(0), "{}", ran.out);
    assert!(
        ran.out.contains("`extra = 3` comes from --define alone: nothing else defines `extra`\n"),
        "{}",
        ran.out
    );
    assert!(ran.out.contains("nothing else defines `spam`; did you mean `span`?"), "{}", ran.out);
    assert!(ran.out.contains("nothing else defines `seed`\n"), "{}", ran.out);
    assert!(ran.out.contains("span * extra\n  6 m\n"), "{}", ran.out);
    let quiet = run_notebook("define-new", &["1"], &["--format", "ipynb", "--define", "extra = 3"]);
    assert!(quiet.err.contains("nothing else defines `extra`") && !quiet.out.contains("extra"), "{quiet:?}");
}

#[test]
fn what_is_no_definition_is_a_wrong_call() {
    for (number, (given, says)) in [
        (&["x = = 1"][..], "--> --define:1:5"),
        (&["500"], "this defines no name"),
        (&[""], "this defines no name"),
        (&["# words"], "this defines no name"),
        (&["x = 1", "x = 2"], "`x` is given twice"),
        (&["x = (1"], "--> --define:1:"),
        (&["load(x) = x"], "`load` is a function of the language already"),
    ]
    .into_iter()
    .enumerate()
    {
        let arguments: Vec<&str> = given.iter().flat_map(|given| ["--define", given]).collect();
        let ran = script(&format!("wrong-{number}"), "x = 5\nx\n", &arguments);
        assert_eq!((ran.code, ran.out.as_str()), (Some(2), ""), "{given:?} {ran:?}");
        assert!(ran.err.contains(says), "{given:?} {}", ran.err);
    }
}

#[test]
fn a_definition_that_cannot_stand_is_a_mistake_of_the_program() {
    for (number, (given, says)) in [
        ("members = 0", "`members` is 0"),
        ("x = 1 m + 1 s", "different things"),
        ("x = nowhere", "not defined"),
        ("x = x + 1", "defined by itself"),
        ("x = nothing_of_the_kind(1)", "nothing_of_the_kind"),
    ]
    .into_iter()
    .enumerate()
    {
        let text = "members = 10\nx = 5\n1 + 1\n";
        let ran = script(&format!("stands-{number}"), text, &["--define", given]);
        assert_eq!((ran.code, ran.err.as_str()), (Some(1), ""), "{given} {ran:?}");
        assert!(ran.out.contains(says) && ran.out.contains("--> --define:1:"), "{given} {}", ran.out);
        assert!(ran.out.contains("1 + 1\n  2\n"), "{given} {}", ran.out);
        let json = script(&format!("stands-{number}"), text, &["--define", given, "--format", "json"]).json();
        assert_eq!(json["outputs"][0]["error"]["cell"], json!(null));
    }
}

#[test]
fn several_definitions_may_stand_in_one_argument() {
    let ran = script("several", "a = 1\nb = 2\na + b\n", &["--define", "a = 10\nb = 20"]);
    assert!(ran.out.contains("a + b\n  30\n"), "{}", ran.out);
}

#[test]
fn a_session_keeps_what_came_from_outside_when_cells_are_run_again() {
    let mut session = Session::new(env!("CARGO_TARGET_TMPDIR"));
    session.name_cell(OUTSIDE, "the caller");
    session.define_from_outside(&["x = 10".to_owned()]).unwrap();
    assert_eq!(session.unmet_from_outside().len(), 1);
    let first = session.run_cell("one", "x = 1\nx");
    let again = session.run_cell("one", "x");
    assert_eq!(first.outputs[0].fingerprint, again.outputs[0].fingerprint);
    assert!(first.notices[0].contains("the caller") && again.notices.is_empty());
    assert!(session.unmet_from_outside().is_empty());
    assert!(session.contested_names().is_empty());
}

#[test]
fn a_session_says_what_stands_wrong_now_and_not_what_did() {
    let mut session = Session::new(env!("CARGO_TARGET_TMPDIR"));
    let waiting = session.run_cell("one", "y = x + 1 m");
    assert!(waiting.installed && waiting.waiting.len() == 1);
    assert_eq!(session.standing(&["one"])[0].waiting, waiting.waiting);
    assert!(!session.run_cell("two", "x = =").installed);
    session.run_cell("two", "x = 2 s");
    let standing = session.standing(&["one", "two"]);
    assert_eq!(standing[0].problems[0].code, "unit-mismatch");
    assert!(standing[0].waiting.is_empty() && standing[1].problems.is_empty());
    session.run_cell("two", "x = 2 m");
    assert!(session.standing(&["one"])[0].problems.is_empty());
}
