//! The pages of `tests/suite` are a manual of the language, and each is a test.
//!
//! A page is Markdown. Each section that begins with `## ` is a session of its own, in an empty folder. A block marked
//! `rhythmite` is a cell, named by the words after the mark or by its number; a block marked `file NAME` is written to
//! that file of the section's folder; a block marked `text` after a cell holds exactly what the cell prints. With
//! `BLESS=1` the text blocks are written anew, to be read before they are committed.

use std::fs;
use std::path::{Path, PathBuf};

use rhythmite::notebook::Report;
use rhythmite::session::Session;

struct Page<'a> {
    lines: std::iter::Peekable<std::str::Lines<'a>>,
    out: String,
    folder: PathBuf,
    session: Session,
    report: Report,
    cells: usize,
}

fn empty_folder(page: &str, section: usize) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join(format!("suite-{page}-{section}"));
    let _ = fs::remove_dir_all(&folder);
    fs::create_dir_all(&folder).unwrap();
    folder
}

impl Page<'_> {
    fn block(&mut self) -> String {
        let mut text = String::new();
        for line in self.lines.by_ref() {
            if line == "```" {
                break;
            }
            text += line;
            text.push('\n');
        }
        text
    }

    fn write_block(&mut self, mark: &str, text: &str) {
        self.out += &format!("```{mark}\n{text}```\n");
    }

    /// Run a cell and write it with what it prints, in place of the text block that follows.
    fn cell(&mut self, mark: &str) {
        let code = self.block();
        self.write_block(mark, &code);
        self.cells += 1;
        let name = mark.trim_start_matches("rhythmite").trim();
        let name = if name.is_empty() { format!("cell {}", self.cells) } else { name.to_owned() };
        let reply = self.session.run_cell(&name, &code);
        self.report.add(&self.session, &reply);
        let printed = self.report.take();
        let printed = printed.trim_end_matches('\n');
        while self.lines.peek().is_some_and(|line| line.is_empty()) {
            self.lines.next();
        }
        if self.lines.peek() == Some(&"```text") {
            self.lines.next();
            self.block();
        }
        if printed.is_empty() {
            self.out.push('\n');
        } else {
            self.out += &format!("\n```text\n{printed}\n```\n");
        }
    }
}

/// The page as it should be, with what its cells print now.
fn run(name: &str, text: &str) -> String {
    let mut section = 0;
    let folder = empty_folder(name, section);
    let session = Session::new(&folder);
    let lines = text.lines().peekable();
    let mut page =
        Page { lines, out: String::new(), folder, session, report: Report::new(false, false), cells: 0 };
    while let Some(line) = page.lines.next() {
        if line.starts_with("## ") {
            section += 1;
            page.folder = empty_folder(name, section);
            page.session = Session::new(&page.folder);
            page.report = Report::new(false, false);
            page.cells = 0;
        }
        match line.strip_prefix("```") {
            Some(mark) if mark.split(' ').next() == Some("rhythmite") => page.cell(mark),
            Some(mark) => {
                let text = page.block();
                if let Some(file) = mark.strip_prefix("file ") {
                    let path = page.folder.join(file);
                    fs::create_dir_all(path.parent().unwrap()).unwrap();
                    fs::write(path, &text).unwrap();
                }
                page.write_block(mark, &text);
            }
            None => page.out += &format!("{line}\n"),
        }
    }
    page.out
}

/// Blank lines between blocks are the writer's business.
fn squeezed(text: &str) -> Vec<&str> {
    text.lines().map(str::trim_end).filter(|line| !line.is_empty()).collect()
}

#[test]
fn every_page_prints_what_it_says() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/suite");
    let mut pages: Vec<PathBuf> = fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().path()).collect();
    pages.sort();
    assert!(pages.len() >= 8, "{} pages", pages.len());
    let mut complaints = Vec::new();
    for path in pages {
        let text = fs::read_to_string(&path).unwrap();
        let name = path.file_stem().unwrap().to_string_lossy().into_owned();
        let fresh = run(&name, &text);
        if std::env::var_os("BLESS").is_some() {
            fs::write(&path, &fresh).unwrap();
        } else if squeezed(&fresh) != squeezed(&text) {
            let (said, printed) = (squeezed(&text), squeezed(&fresh));
            let place = said.iter().zip(&printed).position(|(said, printed)| said != printed).unwrap_or(0);
            complaints.push(format!(
                "{}\n  says:\n{}\n  prints:\n{}",
                path.display(),
                said[place..said.len().min(place + 12)].join("\n"),
                printed[place..printed.len().min(place + 12)].join("\n")
            ));
        }
    }
    assert!(complaints.is_empty(), "\n{}", complaints.join("\n\n"));
}
