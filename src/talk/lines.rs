//! Lines from a pipe or a file: grouped into inputs, run one after the other.

use std::io::BufRead;

use super::conversation::Conversation;
use super::print;
use crate::base::SourceId;
use crate::language::parse;

/// Run the lines of a reader until it ends.
pub(super) fn talk(conversation: &mut Conversation, reader: &mut dyn BufRead) -> std::io::Result<()> {
    let mut pending = String::new();
    let mut number = 0usize;
    let mut bytes = Vec::new();
    while !conversation.is_over() {
        bytes.clear();
        if reader.read_until(b'\n', &mut bytes)? == 0 {
            break;
        }
        number += 1;
        let Ok(line) = std::str::from_utf8(&bytes) else {
            conversation.fail();
            print(&format!("line {number} is not UTF-8 and was left out\n\n"));
            continue;
        };
        let line = line.trim_end_matches(['\n', '\r']);
        // What is complete waits for one line more, since that may begin with `|>`.
        if !pending.is_empty() && !is_incomplete(&pending) && begins_anew(line) {
            print(&conversation.take(&pending));
            pending.clear();
        }
        if line.starts_with(':') && pending.is_empty() {
            print(&conversation.take(line));
            continue;
        }
        if !(pending.is_empty() && line.trim().is_empty()) {
            pending += line;
            pending.push('\n');
        }
    }
    if !conversation.is_over() {
        print(&conversation.take(&pending));
    }
    Ok(())
}

/// Whether a line begins a statement of its own.
fn begins_anew(line: &str) -> bool {
    let line = line.trim_start();
    !(line.is_empty() || line.starts_with('#') || line.starts_with("|>"))
}

/// Whether further lines can make a text right: what is open at the end of a line can be closed on the next only inside
/// brackets.
pub(super) fn is_incomplete(text: &str) -> bool {
    parse(&format!("{text}\n"), SourceId::default()).is_err_and(|error| error.incomplete)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_open_brackets_go_on_to_the_next_line() {
        for (text, incomplete) in [
            ("scale(x,", true),
            ("[1, 2", true),
            ("x = (1 +", true),
            ("scale(x, # why", true),
            ("1 +", false),
            ("x |>", false),
            ("load(\"a", false),
            ("1 + 1", false),
            ("", false),
            ("x )", false),
        ] {
            assert_eq!(is_incomplete(text), incomplete, "{text}");
        }
    }
}
