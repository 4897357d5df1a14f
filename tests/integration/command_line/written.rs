//! What `--out` and `--figures` write, and what they must never write over.

use super::*;

const SERIES: &str = "x = load(\"data.csv\")\nx\n";
const DATA: &str = "year,x (m)\n2001,1\n2002,2\n2003,3\n";

/// A folder with a program, its data and an older result.
fn prepared(name: &str, program: &str) -> PathBuf {
    let folder = folder(&format!("written-{name}"));
    fs::write(folder.join("s.rhy"), program).unwrap();
    fs::write(folder.join("data.csv"), DATA).unwrap();
    fs::write(folder.join("old.txt"), "old").unwrap();
    folder
}

fn run_in(folder: &Path, arguments: &[&str]) -> Run {
    finish(program().current_dir(folder).args(arguments))
}

fn names(folder: &Path) -> Vec<String> {
    let mut names: Vec<String> = fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .collect();
    names.sort();
    names
}

#[test]
fn an_older_result_is_replaced_as_a_whole_and_nothing_is_left_beside_it() {
    let folder = prepared("replaced", SERIES);
    let run = run_in(&folder, &["run", "s.rhy", "--out", "old.txt"]);
    assert_eq!((run.code, run.out.as_str(), run.err.as_str()), (Some(0), "", ""));
    assert!(fs::read_to_string(folder.join("old.txt")).unwrap().contains("3 steps"));
    assert_eq!(names(&folder), ["data.csv", "old.txt", "s.rhy"]);
}

#[test]
fn results_never_take_the_place_of_the_program_or_of_what_it_read() {
    let folder = prepared("spared", SERIES);
    for (out, says) in [
        ("s.rhy", "is the program itself"),
        ("../command-written-spared/s.rhy", "is the program itself"),
        ("data.csv", "was read for these results"),
        ("./data.csv", "was read for these results"),
    ] {
        let run = run_in(&folder, &["run", "s.rhy", "--out", out]);
        assert_eq!((run.code, run.out.as_str()), (Some(2), ""), "{out} {run:?}");
        assert!(run.err.contains(says) && run.err.contains("name another file"), "{out} {}", run.err);
    }
    assert_eq!(fs::read_to_string(folder.join("s.rhy")).unwrap(), SERIES);
    assert_eq!(fs::read_to_string(folder.join("data.csv")).unwrap(), DATA);
    // A file that was not read is no input, whatever its name.
    assert_eq!(run_in(&folder, &["run", "s.rhy", "--out", "other.csv"]).code, Some(0));
}

#[cfg(unix)]
#[test]
fn a_link_to_the_program_or_to_an_input_is_known_for_what_it_is() {
    let folder = prepared("links", SERIES);
    std::os::unix::fs::symlink("s.rhy", folder.join("program")).unwrap();
    std::os::unix::fs::symlink("data.csv", folder.join("input")).unwrap();
    for out in ["program", "input"] {
        let run = run_in(&folder, &["run", "s.rhy", "--out", out]);
        assert_eq!(run.code, Some(2), "{out} {run:?}");
    }
    assert_eq!(fs::read_to_string(folder.join("s.rhy")).unwrap(), SERIES);
    assert_eq!(fs::read_to_string(folder.join("data.csv")).unwrap(), DATA);
}

#[test]
fn nobody_waits_for_results_that_have_nowhere_to_go() {
    // The program is wrong, too: its mistakes are not what is told.
    let folder = prepared("nowhere", "1 m + 1 s\n");
    for (out, says) in [("none/o.txt", "there is no folder none"), (".", "is a folder")] {
        let run = run_in(&folder, &["run", "s.rhy", "--out", out]);
        assert_eq!((run.code, run.out.as_str()), (Some(2), ""), "{out} {run:?}");
        assert!(run.err.contains(says) && !run.err.contains("unit-mismatch"), "{out} {}", run.err);
    }
}

#[cfg(unix)]
#[test]
fn what_is_no_regular_file_is_written_into() {
    let folder = prepared("device", "1 + 1\n");
    let run = run_in(&folder, &["run", "s.rhy", "--out", "/dev/stdout"]);
    assert_eq!(run.code, Some(0), "{run:?}");
    assert!(run.out.starts_with("1 + 1\n  2\n"), "{run:?}");
}

#[test]
fn a_figure_never_takes_the_place_of_an_input() {
    let folder = prepared("figures", "x = load(\"01-x.svg\")\nx\n");
    fs::write(folder.join("01-x.svg"), DATA).unwrap();
    let run = run_in(&folder, &["run", "s.rhy", "--figures", "."]);
    assert_eq!(run.code, Some(2), "{run:?}");
    assert!(run.err.contains("was read for these results"), "{}", run.err);
    assert_eq!(fs::read_to_string(folder.join("01-x.svg")).unwrap(), DATA);
    let elsewhere = run_in(&folder, &["run", "s.rhy", "--figures", "figures"]);
    assert_eq!(elsewhere.code, Some(0), "{elsewhere:?}");
    assert_eq!(names(&folder.join("figures")), ["01-x.svg"]);
}

#[test]
fn figures_are_written_in_every_format_that_is_asked_for() {
    let folder = prepared("formats", SERIES);
    let run = run_in(&folder, &["run", "s.rhy", "--figures", "figures", "--figures-as", "svg,pdf,png"]);
    assert_eq!(run.code, Some(0), "{run:?}");
    assert_eq!(names(&folder.join("figures")), ["01-x.pdf", "01-x.png", "01-x.svg"]);
    for (ending, beginning) in [("pdf", &b"%PDF-1.7"[..]), ("png", b"\x89PNG\r\n\x1a\n"), ("svg", b"<svg ")] {
        let file = fs::read(folder.join("figures/01-x").with_extension(ending)).unwrap();
        assert!(file.starts_with(beginning), "{ending}");
    }
    let alone = run_in(&folder, &["run", "s.rhy", "--figures", "more", "--figures-as", "pdf"]);
    assert_eq!((alone.code, names(&folder.join("more"))), (Some(0), vec!["01-x.pdf".to_owned()]));
}

#[test]
fn what_says_how_figures_are_written_needs_figures() {
    let folder = prepared("no-figures", SERIES);
    for arguments in [&["--figures-as", "pdf"][..], &["--png"], &["--figures", "f", "--figures-as", "gif"]] {
        let run = run_in(&folder, &[&["run", "s.rhy"], arguments].concat());
        assert_eq!((run.code, run.out.as_str()), (Some(2), ""), "{run:?}");
    }
}
