//! Every example of every entry runs and gives what it says; every entry is complete.

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

use rhythmite::catalogue::{Room, entries, reference};
use rhythmite::display;
use rhythmite::session::Session;

fn examples_folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/examples")
}

/// The line of the last output, or the code and message of what went wrong.
fn outcome(program: &str) -> Result<String, (String, String)> {
    let mut session = Session::new(examples_folder());
    let reply = session.run_cell("example", program);
    let failed = reply.outputs.iter().filter_map(|output| output.result.as_ref().err());
    if let Some(problem) = reply.problems.iter().chain(&reply.waiting).chain(failed).next() {
        let said = display::diagnostic(problem, &|id| session.source(id), false);
        return Err((problem.code.to_owned(), said));
    }
    Ok(reply.outputs.last().map(|output| display::line(output.result.as_ref().unwrap())).unwrap_or_default())
}

#[test]
fn every_example_gives_what_it_says() {
    let mut complaints = Vec::new();
    for entry in entries() {
        assert!(!entry.shows.is_empty(), "{} shows no example", entry.name);
        for example in entry.shows {
            match outcome(example.program) {
                Ok(line) if line == example.gives => {}
                Ok(line) => {
                    complaints.push(format!("{}\n  says  {}\n  gives {line}", example.program, example.gives))
                }
                Err((code, said)) => complaints.push(format!("{}\n  fails: {code}\n{said}", example.program)),
            }
        }
    }
    assert!(complaints.is_empty(), "\n{}", complaints.join("\n\n"));
}

#[test]
fn every_example_that_must_fail_fails_so() {
    let mut complaints = Vec::new();
    for entry in entries() {
        assert!(!entry.fails.is_empty(), "{} has no example that fails", entry.name);
        for example in entry.fails {
            match outcome(example.program) {
                Err((code, said)) if code == example.code && said.contains(example.says) => {}
                Err((code, said)) => complaints.push(format!(
                    "{}\n  should be {} and say `{}`, is {code}:\n{said}",
                    example.program, example.code, example.says
                )),
                Ok(line) => complaints
                    .push(format!("{}\n  should be {}, gives {line}", example.program, example.code)),
            }
        }
    }
    assert!(complaints.is_empty(), "\n{}", complaints.join("\n\n"));
}

#[test]
fn every_entry_is_complete_and_no_name_stands_twice() {
    let mut names = BTreeSet::new();
    for entry in entries() {
        assert!(names.insert(entry.name), "{} stands twice", entry.name);
        assert!(entry.summary.ends_with('.'), "{}", entry.name);
        assert!(!entry.result.is_empty() && !entry.gaps.is_empty(), "{}", entry.name);
        assert!(entry.revision > 0, "{}", entry.name);
        let formula_without_source = entry.equation.is_some()
            && entry.citations.is_empty()
            && matches!(entry.room, Room::Gases | Room::Response | Room::Inference);
        assert!(!formula_without_source, "{} has an equation and no source", entry.name);
        for parameter in entry.signature.parameters {
            assert!(!parameter.meaning.is_empty(), "{} {}", entry.name, parameter.name);
            let takes_something = !parameter.accepts.is_empty() || !parameter.choices.is_empty();
            assert!(takes_something, "{} {}", entry.name, parameter.name);
        }
    }
}

#[test]
fn the_reference_is_up_to_date() {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("grammar/reference.md");
    let fresh = reference();
    if std::env::var_os("BLESS").is_some() {
        std::fs::write(&path, &fresh).unwrap();
    }
    let committed = std::fs::read_to_string(&path).unwrap_or_default();
    assert!(committed == fresh, "grammar/reference.md is stale: run `BLESS=1 cargo test reference`");
}
