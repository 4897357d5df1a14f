//! Editing, history and completion on a real terminal, by rustyline.

use std::borrow::Cow;
use std::io;
use std::path::{Path, PathBuf};

use rustyline::completion::{Completer, Pair};
use rustyline::config::{BellStyle, CompletionType};
use rustyline::error::ReadlineError;
use rustyline::highlight::Highlighter;
use rustyline::hint::Hinter;
use rustyline::history::DefaultHistory;
use rustyline::validate::{ValidationContext, ValidationResult, Validator};
use rustyline::{Config, Context, Editor, Helper};

use super::conversation::{Conversation, WORDS};
use super::lines::is_incomplete;
use super::print;
use super::progress::Progress;

/// Charts and texts are at least so wide, and at most; a narrower terminal breaks their lines.
const COLUMNS: (usize, usize) = (60, 100);

/// Read inputs until the person at the terminal ends the session.
pub(super) fn talk(conversation: Conversation, folder: &Path, colour: bool) -> io::Result<()> {
    // A computation is stopped by Ctrl-C; while a line is edited, the editor reads it as a key.
    signal_hook::flag::register(signal_hook::consts::SIGINT, conversation.session.cancellation().flag())?;
    let config = Config::builder()
        .completion_type(CompletionType::List)
        .completion_show_all_if_ambiguous(true)
        .bell_style(BellStyle::None)
        .auto_add_history(true)
        .build();
    let mut editor: Editor<Desk, DefaultHistory> = Editor::with_config(config).map_err(io::Error::other)?;
    editor.set_helper(Some(Desk { conversation, colour }));
    // A history that cannot be read or kept is none; it is no reason to end.
    let history = history_file();
    if let Some(file) = &history {
        let _ = editor.load_history(file);
    }
    print(&format!(
        "rhythmite {}, reading files in {}\n`:help` says more, Tab completes, Ctrl-D ends\n\n",
        env!("CARGO_PKG_VERSION"),
        folder.canonicalize().unwrap_or_else(|_| folder.to_owned()).display()
    ));
    loop {
        let columns = editor.dimensions().map_or(COLUMNS.0, |(columns, _)| usize::from(columns));
        let Some(desk) = editor.helper_mut() else { return Ok(()) };
        if desk.conversation.is_over() {
            return Ok(());
        }
        desk.conversation.set_columns(columns.clamp(COLUMNS.0, COLUMNS.1));
        let prompt = desk.conversation.prompt();
        let text = match editor.readline(&prompt) {
            Ok(text) => text,
            Err(ReadlineError::Interrupted) => continue,
            Err(ReadlineError::Eof) => return Ok(()),
            Err(ReadlineError::Io(error)) => return Err(error),
            Err(other) => return Err(io::Error::other(other)),
        };
        if let Some(file) = &history {
            let _ = editor.append_history(file);
        }
        let Some(desk) = editor.helper_mut() else { return Ok(()) };
        let progress = Progress::begin();
        let answer = desk.conversation.take(&text);
        progress.end();
        print(&answer);
    }
}

/// `rhythmite/history` in the folder where the system keeps the state of programs; its folder is made.
fn history_file() -> Option<PathBuf> {
    let variable = |name: &str| std::env::var_os(name).map(PathBuf::from).filter(|path| path.is_absolute());
    let state = variable("XDG_STATE_HOME")
        .or_else(|| variable("HOME").map(|home| home.join(".local").join("state")))
        .or_else(|| variable("LOCALAPPDATA"))?;
    let folder = state.join("rhythmite");
    std::fs::create_dir_all(&folder).ok()?;
    Some(folder.join("history"))
}

/// What the editor asks while a line is written.
struct Desk {
    conversation: Conversation,
    colour: bool,
}

impl Completer for Desk {
    type Candidate = Pair;

    fn complete(&self, line: &str, at: usize, _: &Context<'_>) -> rustyline::Result<(usize, Vec<Pair>)> {
        let pair = |text: &str| Pair { display: text.to_owned(), replacement: text.to_owned() };
        let before = line.get(..at).unwrap_or(line);
        if before.starts_with(':') {
            return Ok(match before.strip_prefix(":explain ") {
                Some(word) => {
                    let found = self.conversation.session.complete(word, word.len());
                    let names =
                        found.items.iter().map(|item| pair(item.text.trim_end_matches('('))).collect();
                    (found.start + before.len() - word.len(), names)
                }
                None => {
                    let words = WORDS.iter().map(|(word, _)| word.split(' ').next().unwrap_or(word));
                    (0, words.filter(|word| word.starts_with(before)).map(pair).collect())
                }
            });
        }
        let found = self.conversation.session.complete(line, at);
        Ok((found.start, found.items.iter().map(|item| pair(&item.text)).collect()))
    }
}

impl Validator for Desk {
    fn validate(&self, context: &mut ValidationContext<'_>) -> rustyline::Result<ValidationResult> {
        let text = context.input();
        let more = !text.starts_with(':') && is_incomplete(text);
        Ok(if more { ValidationResult::Incomplete } else { ValidationResult::Valid(None) })
    }
}

impl Highlighter for Desk {
    fn highlight_prompt<'b, 's: 'b, 'p: 'b>(&'s self, prompt: &'p str, _: bool) -> Cow<'b, str> {
        if self.colour { Cow::Owned(format!("\x1b[2m{prompt}\x1b[0m")) } else { Cow::Borrowed(prompt) }
    }
}

impl Hinter for Desk {
    type Hint = String;
}

impl Helper for Desk {}
