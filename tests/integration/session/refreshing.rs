//! Cells and their definitions over time, and the displays that follow.

use std::fs;
use std::time::{Duration, SystemTime};

use super::{folder, place, run, session, value};
use rhythmite::session::{Audience, CellReply, Output, Pending, Session};

/// The expressions of the displays that moved.
fn moved(reply: &CellReply) -> Vec<&str> {
    reply.moved.iter().map(|output| output.expression.as_str()).collect()
}

fn refreshed_by(reply: &CellReply) -> Vec<Vec<String>> {
    reply.moved.iter().map(|output| output.refreshed_by.clone()).collect()
}

#[test]
fn a_forward_reference_waits_and_is_refreshed_when_its_name_comes() {
    let mut session = session();
    let early = session.run_cell("early", "b = a + 1\nb\nb * 10");
    assert!(early.problems.is_empty());
    assert_eq!(early.waiting.len(), 1);
    assert!(early.waiting[0].message.contains("`a` is not defined yet"), "{:?}", early.waiting);
    assert_eq!(place(&session, &early.waiting[0]), (1, 5));
    assert!(early.outputs.iter().all(|output| output.result.as_ref().unwrap_err().code == "not-defined"));
    let late = run(&mut session, "late", "a = 1");
    assert_eq!(late.moved.iter().map(value).collect::<Vec<_>>(), [2.0, 20.0]);
    assert_eq!(refreshed_by(&late), [["a"], ["a"]]);
    assert_eq!(late.moved[0].display, early.outputs[0].display, "a display keeps its name");
    assert_eq!(&*late.moved[0].cell, "early");
}

#[test]
fn the_lines_of_a_cell_stand_in_any_order() {
    let reply = run(&mut session(), "script", "c\nf(x) = x * b\nc = f(a)\nb = 3\na = 2");
    assert_eq!(value(&reply.outputs[0]), 6.0);
}

#[test]
fn only_the_displays_that_follow_from_a_change_move() {
    let mut session = session();
    run(&mut session, "a", "a = 1");
    run(&mut session, "b", "b = 2");
    run(&mut session, "shown", "a\nb\na + b\n7");
    assert_eq!(moved(&run(&mut session, "a", "a = 10")), ["a", "a + b"]);
    assert_eq!(moved(&run(&mut session, "b", "b = 20")), ["b", "a + b"]);
    assert!(run(&mut session, "b", "b = 20").moved.is_empty(), "nothing changed");
    assert!(run(&mut session, "b", "# a word\nb  =  (20)  # another").moved.is_empty());
    assert!(run(&mut session, "c", "c = 3\nc").moved.is_empty(), "nothing follows from it");
    assert!(run(&mut session, "a", "a = 1e1").moved.is_empty(), "the same number, written otherwise");
}

#[test]
fn a_refreshed_display_names_what_moved_it_and_nothing_else() {
    let mut session = session();
    run(&mut session, "all", "a = 1\nb = 2\nc = 3\nf(x) = x + 1");
    let first = run(&mut session, "shown", "a * 10\nf(b)\na + b");
    assert!(first.outputs.iter().all(|output| output.refreshed_by.is_empty()));
    let reply = run(&mut session, "all", "a = 5\nb = 2\nc = 4\nf(x) = x + 1");
    assert_eq!(moved(&reply), ["a * 10", "a + b"]);
    assert_eq!(refreshed_by(&reply), [["a"], ["a"]]);
    let reply = run(&mut session, "all", "a = 6\nb = 9\nc = 4\nf(x) = x + 1");
    assert_eq!(refreshed_by(&reply), [vec!["a"], vec!["b"], vec!["a", "b"]]);
    let reply = run(&mut session, "all", "a = 6\nb = 9\nc = 4\nf(x) = x + 2");
    assert_eq!(moved(&reply), ["f(b)"]);
    assert_eq!(reply.moved[0].refreshed_by.len(), 1);
    assert!(reply.moved[0].refreshed_by[0].starts_with('f'), "{:?}", reply.moved[0].refreshed_by);
}

#[test]
fn a_change_far_up_a_chain_is_the_one_that_is_named() {
    let mut session = session();
    run(&mut session, "one", "a = 1");
    run(&mut session, "two", "b = a + 1\nc = b + 1");
    run(&mut session, "shown", "c");
    let reply = run(&mut session, "one", "a = 10");
    assert_eq!(value(&reply.moved[0]), 12.0);
    assert_eq!(refreshed_by(&reply), [["a"]]);
}

#[test]
fn a_setting_that_changes_moves_what_reads_it() {
    let mut session = session();
    run(&mut session, "settings", "clock = 1850..1851 CE by 1 yr");
    run(&mut session, "shown", "constant(1 W/m2)\n2 + 2\n1 ± 0.1");
    let clock = run(&mut session, "settings", "clock = 1850..1852 CE by 1 yr");
    assert_eq!(moved(&clock), ["constant(1 W/m2)"]);
    assert_eq!(refreshed_by(&clock), [["clock"]]);
    let members = run(&mut session, "more", "members = 50");
    assert_eq!(moved(&members), ["1 ± 0.1"]);
    assert_eq!(refreshed_by(&members), [["members"]]);
}

#[test]
fn a_display_that_now_fails_shows_that_and_heals_later() {
    let mut session = session();
    run(&mut session, "home", "x = 2 W/m2");
    run(&mut session, "shown", "x + 1 W/m2");
    let wrong = run(&mut session, "home", "x = 2 degC");
    assert_eq!(wrong.moved[0].result.as_ref().unwrap_err().code, "unit-mismatch");
    assert!(run(&mut session, "other", "y = 1").moved.is_empty(), "an error that stays does not move");
    let gone = run(&mut session, "home", "# nothing left");
    assert_eq!(gone.moved[0].result.as_ref().unwrap_err().code, "not-defined");
    assert_eq!(refreshed_by(&gone), [["x"]]);
    let healed = run(&mut session, "home", "x = 5 W/m2");
    assert_eq!(value(&healed.moved[0]), 6.0);
}

#[test]
fn a_value_that_fails_only_when_computed_heals_too() {
    let mut session = session();
    let data = "x = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)";
    run(&mut session, "data", data);
    let failed = session.run_cell("shown", "x |> within(1852..1853 CE)");
    assert_eq!(failed.outputs[0].result.as_ref().unwrap_err().code, "no-overlap");
    let longer = "x = series([1, 2, 3, 4] ppm, along: 1850..1853 CE by 1 yr)";
    let healed = run(&mut session, "data", longer);
    assert_eq!(healed.moved.len(), 1);
    let broken = run(&mut session, "data", data);
    assert_eq!(broken.moved[0].result.as_ref().unwrap_err().code, "no-overlap");
}

#[test]
fn a_cell_run_again_without_a_name_removes_it() {
    let mut session = session();
    run(&mut session, "home", "x = 1\ny = 2\nf(z) = z");
    run(&mut session, "shown", "x + y");
    let reply = run(&mut session, "home", "y = 2");
    assert_eq!(reply.moved[0].result.as_ref().unwrap_err().code, "not-defined");
    let f = session.run_cell("call", "f(1)");
    assert_eq!(f.outputs[0].result.as_ref().unwrap_err().code, "unknown-function");
}

#[test]
fn a_name_moved_to_another_cell_keeps_its_value_its_draws_and_its_fingerprint() {
    let mut session = session();
    run(&mut session, "one", "x = 1 ± 0.5\ny = 2");
    let before = run(&mut session, "shown", "x + y");
    run(&mut session, "one", "y = 2");
    let back = run(&mut session, "two", "x = 1 ± 0.5");
    assert_eq!(back.moved[0].fingerprint, before.outputs[0].fingerprint);
    assert_eq!(
        format!("{:?}", back.moved[0].result.as_ref().unwrap()),
        format!("{:?}", before.outputs[0].result.as_ref().unwrap())
    );
    assert!(session.contested_names().is_empty());
    // The other way round: first defined there, then taken away here, nothing moves at all.
    let taken = run(&mut session, "three", "x = 1 ± 0.5");
    assert!(taken.moved.is_empty() && !taken.notices.is_empty());
    assert!(run(&mut session, "two", "# x lives elsewhere now").moved.is_empty());
    assert!(session.contested_names().is_empty());
}

#[test]
fn the_second_home_of_a_name_is_in_force_and_both_are_marked() {
    let mut session = session();
    run(&mut session, "one", "x = 1");
    run(&mut session, "shown", "x");
    let two = run(&mut session, "two", "x = 2");
    assert!(two.notices.iter().any(|notice| notice.contains("`x`") && notice.contains("one")), "{two:?}");
    assert_eq!(value(&two.moved[0]), 2.0);
    assert_eq!(session.contested_names(), [("x".to_owned(), "two".to_owned(), vec!["one".to_owned()])]);
    let one = run(&mut session, "one", "x = 1");
    assert_eq!(value(&one.moved[0]), 1.0);
    assert_eq!(session.contested_names(), [("x".to_owned(), "one".to_owned(), vec!["two".to_owned()])]);
    run(&mut session, "two", "y = 1");
    assert!(session.contested_names().is_empty());
    assert_eq!(value(&run(&mut session, "shown", "x").outputs[0]), 1.0);
}

#[test]
fn two_homes_of_a_function_are_marked_too() {
    let mut session = session();
    run(&mut session, "one", "f(x) = x");
    let two = run(&mut session, "two", "f(x) = 2 * x");
    assert!(two.notices.iter().any(|notice| notice.contains("f(") && notice.contains("one")), "{two:?}");
    let names: Vec<String> = session.contested_names().into_iter().map(|(name, ..)| name).collect();
    assert_eq!(names.len(), 1, "{names:?}");
}

#[test]
fn a_cell_with_a_mistake_in_its_text_installs_nothing() {
    let mut session = session();
    run(&mut session, "home", "x = 1\ny = 2");
    run(&mut session, "shown", "x + y");
    for wrong in ["x = 10\ny = = 3", "x = 10\nx = 20", "x = 10\nconstant(z) = z", "x = 10\nf(a, a) = a"] {
        let reply = session.run_cell("home", wrong);
        assert!(!reply.problems.is_empty() && !reply.incomplete, "{wrong}");
        assert!(reply.moved.is_empty() && reply.outputs.is_empty(), "{wrong}");
        assert_eq!(value(&run(&mut session, "again", "x + y").outputs[0]), 3.0, "{wrong}");
    }
    let short = session.run_cell("home", "x = 10\ny = (1 +");
    assert!(short.incomplete);
    assert_eq!(value(&run(&mut session, "again", "x + y").outputs[0]), 3.0);
    let moved = run(&mut session, "home", "x = 5\ny = 2");
    assert_eq!(moved.moved.len(), 2, "the old displays are still followed");
}

#[test]
fn a_mistake_in_a_definition_is_told_without_being_shown() {
    let mut session = session();
    let reply = session.run_cell(
        "script",
        "a = 1 W/m2 + 1 degC\nb = constnt(1)\nc = load(\"nowhere.csv\")\nd = constant(1, 2)\ne = a",
    );
    let codes: Vec<&str> = reply.problems.iter().map(|problem| problem.code).collect();
    assert_eq!(codes, ["unit-mismatch", "unknown-function", "file-missing", "too-many-arguments"]);
}

#[test]
fn definitions_of_a_deleted_cell_stay_and_what_depends_on_them_says_so() {
    let mut session = session();
    run(&mut session, "home", "x = 1\nx * 100");
    run(&mut session, "shown", "y = x + 1\ny\n3");
    session.mark_deleted(&["home"]);
    let again = run(&mut session, "shown", "y = x + 1\ny\n3");
    assert_eq!(value(&again.outputs[0]), 2.0);
    assert!(again.outputs[0].notes.iter().any(|note| note.contains("`x`") && note.contains("deleted")));
    assert!(again.outputs[1].notes.is_empty());
    let back = run(&mut session, "home", "x = 4");
    assert_eq!(moved(&back), ["y"], "the deleted cell's own display is gone");
    assert!(back.moved[0].notes.is_empty(), "{:?}", back.moved[0].notes);
}

#[test]
fn a_function_of_a_deleted_cell_says_so_too() {
    let mut session = session();
    run(&mut session, "home", "f(x) = x + 1");
    session.mark_deleted(&["home"]);
    let shown = run(&mut session, "shown", "f(1)");
    assert!(
        shown.outputs[0].notes.iter().any(|note| note.contains("deleted")),
        "{:?}",
        shown.outputs[0].notes
    );
}

#[test]
fn a_deleted_cell_is_no_rival_any_more() {
    let mut session = session();
    run(&mut session, "one", "x = 1");
    run(&mut session, "two", "x = 2");
    session.mark_deleted(&["one"]);
    assert!(session.contested_names().is_empty(), "{:?}", session.contested_names());
}

/// A folder with one file, and a session in it that shows what the file says.
fn with_file(name: &str, rows: &str) -> (std::path::PathBuf, Session) {
    let folder = folder(name);
    fs::write(folder.join("a.csv"), rows).unwrap();
    let mut session = Session::with_limits(&folder, Some(2), 1 << 20, 1 << 20);
    run(&mut session, "data", "x = load(\"a.csv\", unit: \"ppm\")\ny = 3");
    run(&mut session, "shown", "x * 2\ny");
    (folder, session)
}

const ROWS: &str = "year,value\n1850,1\n1851,2\n1852,3\n";

#[test]
fn a_changed_file_moves_what_depends_on_it() {
    let (folder, mut session) = with_file("changed-file", ROWS);
    assert!(run(&mut session, "other", "z = 1").moved.is_empty());
    let hash = session.inputs()[0].1.clone();
    fs::write(folder.join("a.csv"), "year,value\n1850,10\n1851,20\n1852,30\n").unwrap();
    let reply = run(&mut session, "other", "z = 1");
    assert_eq!(moved(&reply), ["x * 2"]);
    assert_eq!(super::nominal(reply.moved[0].result.as_ref().unwrap()), [20.0, 40.0, 60.0]);
    assert_eq!(refreshed_by(&reply), [["a.csv"]]);
    assert_ne!(session.inputs()[0].1, hash);
    assert!(run(&mut session, "other", "z = 1").moved.is_empty(), "it is told once");
}

#[test]
fn a_file_touched_with_the_same_bytes_moves_nothing() {
    let (folder, mut session) = with_file("touched-file", ROWS);
    let file = fs::File::options().append(true).open(folder.join("a.csv")).unwrap();
    file.set_modified(SystemTime::now() + Duration::from_secs(60)).unwrap();
    let before = session.evaluations();
    assert!(run(&mut session, "other", "z = 1").moved.is_empty());
    assert_eq!(session.evaluations(), before);
}

#[test]
fn a_file_of_the_same_length_is_noticed_by_its_time() {
    let (folder, mut session) = with_file("same-length", ROWS);
    fs::write(folder.join("a.csv"), ROWS.replace(",3", ",9")).unwrap();
    let file = fs::File::options().append(true).open(folder.join("a.csv")).unwrap();
    file.set_modified(SystemTime::now() + Duration::from_secs(60)).unwrap();
    assert_eq!(run(&mut session, "other", "z = 1").moved.len(), 1);
}

#[test]
fn a_file_that_goes_and_comes_back_is_an_error_in_between() {
    let (folder, mut session) = with_file("gone-file", ROWS);
    fs::remove_file(folder.join("a.csv")).unwrap();
    let gone = run(&mut session, "other", "z = 1");
    assert_eq!(gone.moved[0].result.as_ref().unwrap_err().code, "file-missing");
    assert!(run(&mut session, "other", "z = 1").moved.is_empty());
    fs::write(folder.join("a.csv"), ROWS).unwrap();
    let back = run(&mut session, "other", "z = 1");
    assert_eq!(super::nominal(back.moved[0].result.as_ref().unwrap()), [2.0, 4.0, 6.0]);
}

#[test]
fn a_file_that_is_shown_before_it_exists_is_found_later() {
    let folder = folder("later-file");
    let mut session = Session::with_limits(&folder, Some(1), 1 << 20, 1 << 20);
    let early = session.run_cell("shown", "load(\"a.csv\", unit: \"ppm\")");
    assert_eq!(early.outputs[0].result.as_ref().unwrap_err().code, "file-missing");
    fs::write(folder.join("a.csv"), ROWS).unwrap();
    let late = run(&mut session, "other", "z = 1");
    assert_eq!(super::nominal(late.moved[0].result.as_ref().unwrap()), [1.0, 2.0, 3.0]);
}

#[test]
fn texts_that_nothing_points_into_are_forgotten() {
    let mut session = session();
    run(&mut session, "home", "x = 1");
    run(&mut session, "home", "x = 2");
    let kept = (0..100).filter(|id| session.source(rhythmite::base::SourceId(*id)).is_some()).count();
    assert_eq!(kept, 1);
}

#[test]
fn a_setting_that_is_not_read_moves_nothing_and_is_not_named() {
    let mut session = session();
    run(&mut session, "settings", "start = 1850 CE\nclock = start..1853 CE by 1 yr\nseed = 1\nx = 2");
    run(
        &mut session,
        "shown",
        "x ± 0.1\nconstant(1 W/m2) |> mean()\nconstant(1 W/m2) |> on(0..2 ka by 1 kyr)",
    );
    let settings = "start = 1851 CE\nclock = start..1853 CE by 1 yr\nseed = 2\nx = 3";
    let reply = run(&mut session, "settings", settings);
    assert_eq!(moved(&reply), ["constant(1 W/m2) |> mean()", "x ± 0.1"]);
    assert_eq!(refreshed_by(&reply), [vec!["start"], vec!["seed", "x"]]);
}

#[test]
fn moved_displays_come_after_those_of_what_they_follow_from() {
    let mut session = session();
    run(&mut session, "one", "a = 1");
    session.run_cell("late", "c * 100");
    run(&mut session, "two", "b = a + 1\nc = b + 1\nb * 10");
    assert_eq!(moved(&run(&mut session, "one", "a = 5")), ["b * 10", "c * 100"]);
}

/// An audience that lets so many displays of other cells be refreshed.
struct Patience(usize);

impl Audience for Patience {
    fn begun(&mut self, _: &Pending) {}
    fn checked(&mut self, _: &Session, _: &CellReply) {}
    fn shown(&mut self, _: &Session, _: &CellReply, _: &Output) {}
    fn answered(&mut self, _: &Session, _: &CellReply) -> bool {
        self.0 > 0
    }
    fn refreshed(&mut self, _: &Session, _: &CellReply, _: &Output) -> bool {
        self.0 -= 1;
        self.0 > 0
    }
}

fn run_with_patience(session: &mut Session, cell: &str, text: &str, patience: usize) -> CellReply {
    let mut reply = session.install_cell(cell, text);
    session.show_cell(cell, &mut reply, &mut Patience(patience));
    session.settle(&reply);
    reply
}

#[test]
fn what_is_postponed_is_refreshed_with_the_next_cell_and_names_all_that_moved_it() {
    let mut session = session();
    run(&mut session, "home", "a = 1\nb = 2");
    run(&mut session, "shown", "a + b\na * 10\nb * 10");
    let first = run_with_patience(&mut session, "home", "a = 5\nb = 2", 1);
    assert_eq!(moved(&first), ["a + b"]);
    assert_eq!(first.postponed.iter().map(|late| late.expression.as_str()).collect::<Vec<_>>(), ["a * 10"]);
    let second = run_with_patience(&mut session, "home", "a = 5\nb = 3", 0);
    assert!(second.moved.is_empty() && second.postponed.len() == 3);
    let third = run(&mut session, "other", "z = 1");
    assert_eq!(moved(&third), ["a + b", "a * 10", "b * 10"]);
    assert_eq!(refreshed_by(&third), [vec!["b"], vec!["a"], vec!["b"]]);
    assert!(run(&mut session, "other", "z = 1").moved.is_empty());
}

#[test]
fn only_what_names_nothing_and_reads_nothing_is_fixed() {
    let mut session = session();
    run(&mut session, "names", "x = 1\nf(y) = y + 1\nclock = 1850..1851 CE by 1 yr");
    let fixed = |session: &mut Session, text: &str| run(session, "shown", text).outputs[0].fixed;
    for text in ["1 + 1", "[1, 2] degC", "\"hello\"", "1850 CE - 3 yr", "[2 * e for e in [1, 2]]"] {
        assert!(fixed(&mut session, text), "{text}");
    }
    for text in ["x", "f(1)", "1 ± 0.1", "constant(1 W/m2)", "[x * e for e in [1, 2]]", "seed"] {
        assert!(!fixed(&mut session, text), "{text}");
    }
}

#[test]
fn a_peek_shows_a_result_and_leaves_nothing_behind() {
    let mut session = session();
    run(&mut session, "home", "x = 2");
    assert_eq!(value(&session.peek("x * 3").unwrap()), 6.0);
    assert_eq!(session.peek("y").unwrap().result.unwrap_err().code, "not-defined");
    assert_eq!(session.peek("x = 3").unwrap_err().code, "no-expression");
    assert!(session.peek("1 +").is_err() && session.peek("").is_err());
    assert!(run(&mut session, "home", "x = 5").moved.is_empty(), "a peek is no display");
}

#[test]
fn a_wide_smoothing_of_many_members_is_interrupted_at_once() {
    let mut session = session();
    run(&mut session, "a", "clock = 1850..2020 CE by 1 month\nmembers = 20000");
    let cancellation = session.cancellation();
    let interrupter = std::thread::spawn(move || {
        std::thread::sleep(std::time::Duration::from_millis(700));
        cancellation.cancel();
    });
    let began = std::time::Instant::now();
    let reply = session.run_cell("b", "constant(1 ± 0.1 W/m2) |> smooth(30 yr, window: gaussian) |> mean()");
    interrupter.join().unwrap();
    assert_eq!(reply.outputs[0].result.as_ref().unwrap_err().code, "interrupted");
    assert!(began.elapsed() < std::time::Duration::from_secs(20), "{:?}", began.elapsed());
}
