//! Lines from a pipe or a file: grouped into inputs, run one after the other.

use std::io::BufRead;

use super::conversation::Conversation;
use super::print;
use crate::base::SourceId;
use crate::language::parse;

/// Run the lines of a reader until it ends.
pub(super) fn talk(conversation: &mut Conversation, reader: &mut dyn BufRead) -> std::io::Result<()> {
    let mut pending = String::new();
    // Comments and empty lines after what is pending: they belong to what comes next.
    let mut between = String::new();
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
        let blank = line.trim().is_empty() || line.trim_start().starts_with('#');
        let complete = !pending.is_empty() && !is_incomplete(&pending);
        // What is complete waits for the next line that says something, since that may begin with `|>`.
        if blank && (complete || pending.is_empty()) {
            between += line;
            between.push('\n');
            continue;
        }
        if complete && !line.trim_start().starts_with("|>") {
            print(&conversation.take(&pending));
            pending.clear();
        }
        if line.starts_with(':') && pending.is_empty() {
            between.clear();
            print(&conversation.take(line));
            continue;
        }
        let comments = std::mem::take(&mut between);
        pending += if pending.is_empty() { comments.trim_start_matches('\n') } else { &comments };
        pending += line;
        pending.push('\n');
    }
    if !conversation.is_over() {
        print(&conversation.take(&pending));
    }
    Ok(())
}

/// Whether further lines can make a text right: what is open at the end of a line can be closed on the next only inside
/// brackets.
pub(super) fn is_incomplete(text: &str) -> bool {
    // What begins with `|>` goes on from the input before, which is complete.
    let before = if text.trim_start().starts_with("|>") { "x" } else { "" };
    parse(&format!("{before}{text}\n"), SourceId::default()).is_err_and(|error| error.incomplete)
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
            ("|> scale(", true),
            ("|> scale(2)", false),
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
