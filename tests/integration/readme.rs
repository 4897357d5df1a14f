//! What the README shows is what the program does.

use std::fs;
use std::path::Path;
use std::process::Command;

fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

/// The lines of the blocks with a mark.
fn block(page: &str, mark: &str) -> Vec<String> {
    let mut lines = Vec::new();
    let mut inside = false;
    for line in page.lines() {
        match line {
            _ if line == format!("```{mark}") => inside = true,
            "```" => inside = false,
            _ if inside && !line.is_empty() => lines.push(line.to_owned()),
            _ => {}
        }
    }
    lines
}

#[test]
fn the_readme_shows_lines_of_the_demo_and_what_it_prints() {
    let page = fs::read_to_string(root().join("README.md")).unwrap();
    let script = fs::read_to_string(root().join("notebooks-demo/lake.rhy")).unwrap();
    let shown = block(&page, "rhythmite");
    assert!(shown.len() > 8);
    for line in shown {
        assert!(script.lines().any(|other| other == line), "not in lake.rhy: {line}");
    }
    let demo = Command::new(env!("CARGO_BIN_EXE_rhythmite"))
        .args(["run", "notebooks-demo/lake.rhy"])
        .current_dir(root())
        .output()
        .unwrap();
    assert!(demo.status.success());
    let printed = String::from_utf8(demo.stdout).unwrap();
    let shown = block(&page, "text");
    assert!(shown.len() > 12);
    for line in shown {
        assert!(printed.lines().any(|other| other == line), "not printed: {line}");
    }
}

#[test]
fn the_readme_opens_with_the_job_and_two_commands() {
    let page = fs::read_to_string(root().join("README.md")).unwrap();
    let commands = block(&page, "sh");
    assert!(commands[0].starts_with("cargo run --release --locked -- run notebooks-demo/"), "{commands:?}");
    assert_eq!(commands[1], "cargo test --locked");
    let file = commands[0].split(' ').next_back().unwrap();
    assert!(root().join(file).exists(), "{file}");
}
