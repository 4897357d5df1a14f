//! The outside of a text file: its encoding, its comments, its delimiter.

use super::FileFault;
use std::borrow::Cow;

fn newlines_in(bytes: &[u8]) -> usize {
    memchr::memchr_iter(b'\n', bytes).count()
}

pub(super) fn newlines(text: &str) -> usize {
    newlines_in(text.as_bytes())
}

pub(super) fn comment_text(line: &str) -> String {
    line.trim().trim_matches('"').trim_start_matches('#').trim().to_owned()
}

/// Checks the encoding, drops the byte order mark, makes lone carriage returns newlines.
pub(super) fn decode(bytes: &[u8]) -> Result<Cow<'_, str>, FileFault> {
    let bytes = bytes.strip_prefix(b"\xEF\xBB\xBF").unwrap_or(bytes);
    let not_text = if bytes.starts_with(b"\xFF\xFE") || bytes.starts_with(b"\xFE\xFF") {
        Some("the file is encoded as UTF-16; only UTF-8 is read")
    } else if bytes.starts_with(b"PK\x03\x04") {
        Some("this is a spreadsheet or an archive, not delimited text")
    } else {
        None
    };
    if let Some(what) = not_text {
        return Err(FileFault::new("file-not-utf8", what).help("save it as CSV in UTF-8"));
    }
    let text = std::str::from_utf8(bytes).map_err(|error| {
        let at = error.valid_up_to();
        let before = &bytes[..at];
        let line_start = before.iter().rposition(|&byte| byte == b'\n').map_or(0, |i| i + 1);
        let byte = bytes.get(at).copied().unwrap_or(0);
        let latin1 = char::from(byte);
        let meaning =
            if latin1.is_control() { String::new() } else { format!("; in Latin-1 the byte is `{latin1}`") };
        FileFault::new(
            "file-not-utf8",
            format!("byte {} of the line (0x{byte:02X}) is not UTF-8{meaning}", at - line_start + 1),
        )
        .help("save the file as UTF-8")
        .at_line(newlines_in(before) + 1)
    })?;
    let bytes = text.as_bytes();
    let lone_return = memchr::memchr_iter(b'\r', bytes).any(|at| bytes.get(at + 1) != Some(&b'\n'));
    if lone_return {
        return Ok(Cow::Owned(text.replace("\r\n", "\n").replace('\r', "\n")));
    }
    Ok(Cow::Borrowed(text))
}

/// Collects the comments that open the file and returns where they end. Unlike the reader of rows it
/// also takes an indented `#`, and one that a spreadsheet has put into quotes because of a comma in
/// the comment.
pub(super) fn header_comments(text: &str, comments: &mut Vec<String>) -> usize {
    let mut at = 0;
    for line in text.split_inclusive('\n') {
        let trimmed = line.trim();
        if trimmed.starts_with('#') || trimmed.starts_with("\"#") {
            comments.push(comment_text(line));
        } else if !trimmed.is_empty() {
            break;
        }
        at += line.len();
    }
    at
}

pub(super) fn find_delimiter(body: &str, decimal_comma: bool) -> u8 {
    let mut lines = body.lines().filter(|line| !line.trim().is_empty() && !line.starts_with('#'));
    let first = lines.next().unwrap_or("");
    let second = lines.next();
    let present: Vec<u8> =
        [b'\t', b';', b','].into_iter().filter(|&delimiter| fields_in(first, delimiter) > 1).collect();
    // A header such as `year,co2; dry (ppm)` holds two candidates; the second line tells which one
    // separates.
    let agreeing = present.iter().find(|&&delimiter| {
        second.is_none_or(|second| fields_in(first, delimiter) == fields_in(second, delimiter))
    });
    if decimal_comma && let Some(&delimiter) = present.iter().find(|&&delimiter| delimiter != b',') {
        return delimiter;
    }
    agreeing.or(present.first()).copied().unwrap_or(b',')
}

fn fields_in(line: &str, delimiter: u8) -> usize {
    let mut quoted = false;
    let mut fields = 1;
    for byte in line.bytes() {
        if byte == b'"' {
            quoted = !quoted;
        } else if byte == delimiter && !quoted {
            fields += 1;
        }
    }
    fields
}
