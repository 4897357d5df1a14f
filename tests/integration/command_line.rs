//! The command line from outside: exit codes, text and JSON, files it must refuse, programs that would explode.

mod caps;
mod json;
mod scripts;
mod written;

use std::fs;
use std::io::Read;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use serde_json::Value as Json;

/// What a run of the program gave.
#[derive(Debug)]
struct Run {
    code: Option<i32>,
    out: String,
    err: String,
}

/// Run a command to its end; one that takes a minute hangs.
fn finish(command: &mut Command) -> Run {
    let mut child =
        command.stdin(Stdio::null()).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
    let mut out = child.stdout.take().unwrap();
    let mut err = child.stderr.take().unwrap();
    let collect = |stream: &mut dyn Read| {
        let mut bytes = Vec::new();
        stream.read_to_end(&mut bytes).unwrap();
        String::from_utf8(bytes).unwrap()
    };
    let out = std::thread::spawn(move || collect(&mut out));
    let err = std::thread::spawn(move || collect(&mut err));
    let began = Instant::now();
    let status = loop {
        if let Some(status) = child.try_wait().unwrap() {
            break status;
        }
        if began.elapsed() > Duration::from_secs(60) {
            let _ = child.kill();
            let _ = child.wait();
            panic!("{command:?} hangs");
        }
        std::thread::sleep(Duration::from_millis(5));
    };
    Run { code: status.code(), out: out.join().unwrap(), err: err.join().unwrap() }
}

fn program() -> Command {
    Command::new(env!("CARGO_BIN_EXE_rhythmite"))
}

fn rhythmite(arguments: &[&str]) -> Run {
    finish(program().args(arguments))
}

/// An empty folder of its own for a test.
fn folder(name: &str) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join(format!("command-{name}"));
    let _ = fs::remove_dir_all(&folder);
    fs::create_dir_all(&folder).unwrap();
    folder
}

/// Write a script into a folder of its own and run it there, with further arguments.
fn script(name: &str, text: &str, arguments: &[&str]) -> Run {
    let folder = folder(name);
    fs::write(folder.join("script.rhy"), text).unwrap();
    finish(program().current_dir(folder).args(["run", "script.rhy"]).args(arguments))
}

/// The JSON of a script and the exit code.
fn json(name: &str, text: &str) -> (Json, Option<i32>) {
    let run = script(name, text, &["--format", "json"]);
    let parsed = serde_json::from_str(&run.out).unwrap_or_else(|error| panic!("{error}\n{run:?}"));
    (parsed, run.code)
}

#[test]
fn a_script_whose_results_are_all_there_ends_with_zero() {
    let run = script("good", "x = 1 W/m2\nx + 500 mW/m2\n", &[]);
    assert_eq!(run.code, Some(0));
    assert!(run.out.starts_with("x + 500 mW/m2\n  1.5 W/m2\n"), "{}", run.out);
    assert_eq!(run.err, "");
}

#[test]
fn anything_wrong_in_the_program_ends_with_one_and_is_told_on_standard_output() {
    for (number, (wrong, says)) in [
        ("1 W/m2 + 1 degC\n", "unit-mismatch"),
        ("x = (1 + \n", "error["),
        ("x = = 1\n", "error[syntax]"),
        ("y = nowhere + 1\n", "not-defined"),
        ("a = a\n", "circle"),
        ("load(\"none.csv\")\n", "file-missing"),
        ("members = 0\n", "setting"),
        ("series([1, 2] ppm, along: 1850..1851 CE by 1 yr) |> within(1900..1950 CE)\n", "no-overlap"),
    ]
    .into_iter()
    .enumerate()
    {
        let run = script(&format!("wrong-{number}"), wrong, &[]);
        assert_eq!(run.code, Some(1), "{wrong}");
        assert!(run.out.contains(says) && run.err.is_empty(), "{wrong}\n{run:?}");
    }
}

#[test]
fn what_is_right_beside_a_mistake_is_still_shown() {
    let run = script("partly", "1 + 1\n1 W/m2 + 1 degC\n2 + 2\n", &[]);
    assert_eq!(run.code, Some(1));
    assert!(run.out.contains("1 + 1\n  2\n") && run.out.contains("2 + 2\n  4\n"), "{}", run.out);
}

#[test]
fn a_wrong_call_ends_with_two_and_is_told_on_standard_error() {
    let folder = folder("calls");
    fs::write(folder.join("good.rhy"), "1\n").unwrap();
    fs::write(folder.join("book.ipynb"), "{}\n").unwrap();
    for arguments in [
        &["run"][..],
        &["run", "nowhere.rhy"],
        &["run", "."],
        &["run", "good.rhy", "--format", "yaml"],
        &["run", "good.rhy", "--threads", "-1"],
        &["run", "good.rhy", "--out", "no/such/folder/out.txt"],
        &["run", "book.ipynb"],
        &["walk", "good.rhy"],
        &["explain"],
        &["explain", "nothing_of_the_kind"],
        &[],
    ] {
        let run = finish(program().current_dir(&folder).args(arguments));
        assert_eq!(run.code, Some(2), "{arguments:?} {run:?}");
        assert!(run.out.is_empty() && !run.err.is_empty(), "{arguments:?} {run:?}");
    }
}

#[test]
fn help_and_version_end_with_zero() {
    for arguments in [&["--help"][..], &["--version"], &["run", "--help"], &["explain", "--help"]] {
        let run = rhythmite(arguments);
        assert_eq!(run.code, Some(0));
        assert!(!run.out.is_empty());
    }
}

#[test]
fn every_entry_is_explained_with_its_parameters_and_examples() {
    for entry in rhythmite::catalogue::entries() {
        let run = rhythmite(&["explain", entry.name]);
        assert_eq!(run.code, Some(0), "{}", entry.name);
        assert!(run.out.contains(entry.summary), "{}\n{}", entry.name, run.out);
        for parameter in entry.signature.parameters {
            assert!(run.out.contains(parameter.name), "{} {}\n{}", entry.name, parameter.name, run.out);
        }
        let first = entry.shows[0].program.lines().next_back().unwrap();
        assert!(run.out.contains(first), "{}\n{}", entry.name, run.out);
        assert!(!run.out.contains('\x1b'), "{}", entry.name);
    }
}

#[test]
fn a_name_that_is_nearly_right_is_offered_the_right_one() {
    let run = rhythmite(&["explain", "atribute"]);
    assert_eq!(run.code, Some(2));
    assert!(run.err.contains("did you mean `attribute`?"), "{}", run.err);
    let far = rhythmite(&["explain", "zzzzzzzz"]);
    assert!(far.err.contains("compose") && far.err.contains("two_layer"), "{}", far.err);
}

#[test]
fn results_are_written_to_a_file_instead_where_one_is_named() {
    let folder = folder("out");
    fs::write(folder.join("s.rhy"), "1 + 1\n").unwrap();
    let printed = finish(program().current_dir(&folder).args(["run", "s.rhy"]));
    let written = finish(program().current_dir(&folder).args(["run", "s.rhy", "--out", "o.txt"]));
    assert_eq!((written.code, written.out.as_str()), (Some(0), ""));
    assert_eq!(fs::read_to_string(folder.join("o.txt")).unwrap(), printed.out);
}

#[test]
fn nothing_is_coloured_where_nobody_looks() {
    let text = "1 ± 0.1\n1 W/m2 + 1 degC\n";
    let folder = folder("colour");
    fs::write(folder.join("s.rhy"), text).unwrap();
    let plain = finish(program().current_dir(&folder).args(["run", "s.rhy"]));
    for (key, value) in [("NO_COLOR", "1"), ("CLICOLOR_FORCE", "1"), ("TERM", "xterm-256color")] {
        let run = finish(program().current_dir(&folder).args(["run", "s.rhy"]).env(key, value));
        assert_eq!(run.out, plain.out);
    }
    assert!(!plain.out.contains('\x1b') && !plain.err.contains('\x1b'));
}

#[test]
fn a_reader_that_goes_early_is_no_mistake() {
    let folder = folder("head");
    let text: String = (0..20_000).map(|number| format!("{number} + 1\n")).collect();
    fs::write(folder.join("s.rhy"), text).unwrap();
    let mut child = program()
        .current_dir(&folder)
        .args(["run", "s.rhy"])
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    let mut first = [0; 10];
    let mut out = child.stdout.take().unwrap();
    out.read_exact(&mut first).unwrap();
    drop(out);
    let run = child.wait_with_output().unwrap();
    assert_eq!(run.status.code(), Some(0));
    assert_eq!(String::from_utf8_lossy(&run.stderr), "");
}

#[test]
fn any_number_of_threads_gives_the_same_bytes() {
    let text = "clock = 1850..1899 CE by 1 yr\nmembers = 5000\n\
        sun = constant(0.2 ± 0.1 W/m2) + series([0, 1, 0, -1, 0] W/m2, at: [1840 CE, 1860 CE, 1870 CE, 1880 CE, 1910 CE])\n\
        haze = constant(-0.5 ± 0.2 W/m2) |> scale(1 ± 0.35) |> lag(18 month)\nramp = series([0, 1 ± 0.1, 4] W/m2, at: [1849 CE, 1870 CE, 1901 CE])\n\
        all = compose(sun, haze, ramp)\nmodel = two_layer(feedback: 1.3 ± 0.2 W/m2/K)\n\
        warming = respond(all, model) |> anomaly(relative_to: 1850..1860 CE)\nwarming\nall\nmodel\n\
        record = respond(compose(sun: sun |> lag(1 yr), ramp), two_layer()) + (0.1 degC) * sun / (1 W/m2)\nrecord |> lag(7 month)\n\
        attribute(record, to: [sun, ramp])\nattribute(record, to: compose(sun, ramp), response: two_layer(), method: generalised_least_squares, noise: ar1(0.4, per: 1 yr))\n\
        table(warming)\nwarming |> on(1850..1899 CE by 5 yr)\n[respond(all, two_layer(feedback: e)) for e in [1.0, 1.5] W/m2/K]\n";
    let folder = folder("threads");
    fs::write(folder.join("s.rhy"), text).unwrap();
    let run = |threads: &str| {
        finish(program().current_dir(&folder).args([
            "run",
            "s.rhy",
            "--format",
            "json",
            "--threads",
            threads,
        ]))
    };
    let one = run("1");
    assert_eq!(one.code, Some(0), "{}", one.out);
    for threads in ["2", "3", "7"] {
        assert!(run(threads).out == one.out, "{threads} threads give other bytes");
    }
    assert!(one.out.matches("\"high\"").count() >= 8, "the script is about members");
}

#[test]
fn figures_are_written_into_a_folder_under_safe_names() {
    let folder = folder("figures");
    let text = "clock = 1850..1900 CE by 1 yr\nwave = sinusoid(11 yr, 1 ± 0.1 W/m2, crest: 1850 CE)\nwave\n2 W/m2\nmean(wave)\ncompose(wave)\n";
    fs::write(folder.join("script.rhy"), text).unwrap();
    let run = finish(program().current_dir(&folder).args(["run", "script.rhy", "--figures", "plots/new"]));
    assert_eq!(run.code, Some(0), "{run:?}");
    let mut names: Vec<String> = fs::read_dir(folder.join("plots/new"))
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .collect();
    names.sort();
    assert_eq!(names, ["01-wave.svg", "02-compose-wave.svg"]);
    assert!(run.err.contains("wrote plots/new/01-wave.svg\n"), "{run:?}");
    let svg = fs::read_to_string(folder.join("plots/new/01-wave.svg")).unwrap();
    let document = roxmltree::Document::parse(&svg).unwrap();
    assert!(document.descendants().any(|node| node.text() == Some("forcing (W m⁻²)")), "{svg}");
}

#[test]
fn a_folder_that_cannot_be_made_is_said_and_the_results_are_printed_all_the_same() {
    let run = script(
        "no-figures",
        "clock = 1850..1900 CE by 1 yr\nconstant(1 K)\n",
        &["--figures", "script.rhy/plots"],
    );
    assert_eq!(run.code, Some(2), "{run:?}");
    assert!(run.err.contains("figures cannot be written into script.rhy/plots"), "{run:?}");
    assert!(run.out.contains("51 steps"), "{run:?}");
}
