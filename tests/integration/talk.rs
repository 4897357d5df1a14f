//! The terminal session with its lines piped in.

use std::fs;
use std::io::Write;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};

fn folder(name: &str) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join(format!("talk-{name}"));
    let _ = fs::remove_dir_all(&folder);
    fs::create_dir_all(&folder).unwrap();
    folder
}

/// Pipe bytes into a session in `folder`.
fn pipe(folder: &Path, bytes: &[u8]) -> Output {
    let mut child = Command::new(env!("CARGO_BIN_EXE_rhythmite"))
        .args(["talk", "--threads", "2"])
        .arg(folder)
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    child.stdin.take().unwrap().write_all(bytes).unwrap();
    child.wait_with_output().unwrap()
}

/// The exit code and what is printed.
fn talk(name: &str, lines: &str) -> (Option<i32>, String) {
    let output = pipe(&folder(name), lines.as_bytes());
    assert!(output.stderr.is_empty(), "{output:?}");
    (output.status.code(), String::from_utf8(output.stdout).unwrap())
}

#[test]
fn lines_are_run_and_their_results_printed() {
    let (code, out) = talk("plain", "x = 1 W/m2\nx + 500 mW/m2\n\n# a comment\n2 + 2");
    assert_eq!(code, Some(0), "{out}");
    assert_eq!(out, "x + 500 mW/m2\n  1.5 W/m2\n\n2 + 2\n  4\n\n");
}

#[test]
fn a_line_that_is_incomplete_goes_on_and_so_does_one_before_a_pipe() {
    let lines = "x = [1,\n  2,\n  3] m\nseries(x, along: 1900..1902 CE by 1 yr)\n\n  # why\n  |> scale(\n  2)\n  |> maximum()\n";
    let (code, out) = talk("more", lines);
    assert_eq!(code, Some(0), "{out}");
    assert!(out.ends_with("  6 m\n\n") && !out.contains("3 steps"), "{out}");
}

#[test]
fn comments_belong_to_the_line_after_them() {
    let folder = folder("comments");
    pipe(&folder, b"# of x\nx = 1\n\n# of y\ny = 2\ny = 3\n:save s.rhy\n");
    assert_eq!(fs::read_to_string(folder.join("s.rhy")).unwrap(), "# of x\nx = 1\ny = 3\n");
}

#[test]
fn what_fails_is_told_with_its_place_and_ends_with_one() {
    for (name, lines, says) in [
        ("unit", "1 + 1\n1 W/m2 + 1 degC\n2 + 2\n", " --> input 2:1:1"),
        ("comment", "# why\n1 W/m2 + 1 degC\n", " --> input 1:2:1"),
        ("syntax", "x = = 1\n", "error[syntax]"),
        ("open", "scale(2,\n", "never closed"),
        ("broken", "1 +\n2\n", "error[syntax]"),
        ("word", ":nonsense\n", "`:help` lists the words"),
        ("unknown", ":explain smoth\n", "did you mean `smooth`?"),
        ("never", "y = x + 1\n", "`x` is not defined yet"),
    ] {
        let (code, out) = talk(name, lines);
        assert_eq!(code, Some(1), "{lines}{out}");
        assert!(out.contains(says), "{lines}{out}");
    }
    let (_, out) = talk("after", "1 W/m2 + 1 degC\n2 + 2\n");
    assert!(out.contains("2 + 2\n  4\n"), "{out}");
}

#[test]
fn a_name_may_be_used_before_it_is_defined() {
    let (code, out) = talk("forward", "y = x + 1\nx = 2\ny\n");
    assert_eq!(code, Some(0), "{out}");
    assert!(out.contains("`x` is not defined yet") && out.ends_with("y\n  3\n\n"), "{out}");
}

#[test]
fn a_result_that_moves_is_told_with_what_moved_it() {
    let (code, out) = talk("moved", "x = 2 m\nx * 3\nx * 3\nx = 5 m\n");
    assert_eq!(code, Some(0), "{out}");
    assert!(out.contains("x * 3, shown in input 3, refreshed by x:\n  15 m\n"), "{out}");
    // The same expression, shown twice, is told once.
    assert_eq!(out.matches("refreshed by x").count(), 1, "{out}");
}

#[test]
fn the_words_of_the_session_answer() {
    let lines = ":help\n:names\nx = 2 ± 0.5 degC\ntwice(a) = a * 2\n:names\n:explain x\n:explain smooth\n:explain W/m2\n:explain ±\n:end\n1 + \n";
    let (code, out) = talk("words", lines);
    assert_eq!(code, Some(0), "{out}");
    for says in [
        ":save FILE",
        "nothing is defined yet",
        "  x         input 1  a quantity in degC\n",
        "  twice(a)  input 2  a function\n",
        "  home         input 1\n",
        "smooth(series, width, window: running_mean, ends: shortened)",
        "watt",
    ] {
        assert!(out.contains(says), "lacks {says}\n{out}");
    }
}

#[test]
fn a_saved_session_runs_again_and_gives_the_same() {
    let folder = folder("save");
    let lines = "# first try\nx = 2 m\nx = 3 m\ntwice(a) = a * 2\nwrong = x + 1 degC\n1 degC + x\ntwice(x) # shown\n[x,\n x * 5]\nx |> twice()\n:save deep.rhy\n:save deep.rhy\n";
    let output = pipe(&folder, lines.as_bytes());
    let out = String::from_utf8(output.stdout).unwrap();
    assert!(out.contains("deep.rhy: 5 statements; 3 that failed or were replaced are left out\n"), "{out}");
    let script = fs::read_to_string(folder.join("deep.rhy")).unwrap();
    assert_eq!(script, "x = 3 m\ntwice(a) = a * 2\ntwice(x) # shown\n[x,\n x * 5]\nx |> twice()\n");
    let run = Command::new(env!("CARGO_BIN_EXE_rhythmite"))
        .args(["run", "deep.rhy"])
        .current_dir(&folder)
        .output()
        .unwrap();
    assert_eq!(run.status.code(), Some(0));
    let printed = String::from_utf8(run.stdout).unwrap();
    assert!(printed.contains("twice(x)\n  6 m\n") && printed.contains("15 m"), "{printed}");
}

#[test]
fn saving_touches_no_file_that_was_there_and_none_outside() {
    let folder = folder("guard");
    fs::write(folder.join("mine.csv"), "precious").unwrap();
    let (code, out) = {
        let output =
            pipe(&folder, b"x = 1\n:save mine.csv\n:save ../escaped.rhy\n:save no/such/folder.rhy\n:save\n");
        (output.status.code(), String::from_utf8(output.stdout).unwrap())
    };
    assert_eq!(code, Some(1));
    assert_eq!(fs::read_to_string(folder.join("mine.csv")).unwrap(), "precious");
    assert!(!folder.parent().unwrap().join("escaped.rhy").exists());
    for says in ["there is a \"mine.csv\" already", "lies outside", "cannot be written", "say where"] {
        assert!(out.contains(says), "lacks {says}\n{out}");
    }
}

#[test]
fn bytes_that_are_no_text_are_told_and_left_out() {
    let output = pipe(&folder("bytes"), b"1 + 1\n\xff\xfe\n2 + 2\n");
    let out = String::from_utf8(output.stdout).unwrap();
    assert_eq!(output.status.code(), Some(1));
    assert!(out.contains("line 2 is not UTF-8") && out.contains("2 + 2\n  4\n"), "{out}");
}

#[test]
fn a_folder_that_does_not_exist_ends_with_two() {
    let output = pipe(&folder("missing").join("nowhere"), b"");
    assert_eq!(output.status.code(), Some(2));
    assert!(!output.stderr.is_empty());
}
