//! Text to rows of cells. Nothing is copied but what stands in quotation marks: a cell is a place in the text.

use std::borrow::Cow;
use std::ops::Range;

use memchr::memchr;

use super::FileFault;
use super::text_layout::{comment_text, newlines};

/// The cells of a file, row after row.
#[derive(Debug, Clone)]
pub(super) struct Cells<'t> {
    text: Cow<'t, str>,
    /// What stood in quotation marks, without them; its places count on from the end of `text`.
    unquoted: String,
    places: Vec<CellPlace>,
}

impl<'t> Cells<'t> {
    /// The cells that were found in a text.
    pub(super) fn found(text: Cow<'t, str>, (places, unquoted): (Vec<CellPlace>, String)) -> Self {
        Self { text, unquoted, places }
    }

    /// The text of one cell, `""` when there is no such cell.
    pub(super) fn get(&self, index: usize) -> &str {
        self.places.get(index).map_or("", |place| place.text(&self.text, &self.unquoted))
    }
}

/// Where the text of a cell begins and ends, trimmed of white space. Half the size of two `usize`: long files have
/// millions of them.
#[derive(Debug, Clone, Copy)]
pub(super) struct CellPlace {
    start: u32,
    end: u32,
}

impl CellPlace {
    fn text<'a>(self, text: &'a str, unquoted: &'a str) -> &'a str {
        let (start, end) = (self.start as usize, self.end as usize);
        let found = match start.checked_sub(text.len()) {
            None => text.get(start..end),
            Some(start) => unquoted.get(start..end - text.len()),
        };
        found.unwrap_or("")
    }
}

/// Twice this, the text with all of it in quotation marks, is counted by a [`CellPlace`].
const LONGEST_TEXT: usize = 1 << 31;

/// A text is read in parts of about this many bytes, whatever the number of threads.
const PART: usize = 1 << 20;

/// Reads row after row. Comment lines and empty lines between rows are skipped; a cell that begins with a quotation mark
/// goes to the next one, delimiters and newlines included, and two of them stand for one.
pub(super) struct RowReader<'t> {
    /// Comments so far, each with its line.
    pub(super) comments: Vec<(usize, String)>,
    text: &'t str,
    delimiter: u8,
    at: usize,
    end: usize,
    line: usize,
    places: Vec<CellPlace>,
    unquoted: String,
    /// Where the present row begins in the text and among the cells.
    row_start: usize,
    row_cells: usize,
}

impl<'t> RowReader<'t> {
    /// Begins at the byte `at` of a text.
    ///
    /// # Errors
    /// `file-size` for more text than can be counted.
    pub(super) fn new(text: &'t str, at: usize, delimiter: u8) -> Result<Self, FileFault> {
        if text.len() > LONGEST_TEXT {
            return Err(FileFault::new("file-size", "the file is longer than 2 GiB, the most that is read")
                .help("take the columns that are needed, or several files"));
        }
        Ok(Self::within(text, at..text.len(), 1 + newlines(&text[..at]), delimiter))
    }

    fn within(text: &'t str, range: Range<usize>, line: usize, delimiter: u8) -> Self {
        Self {
            comments: Vec::new(),
            text,
            delimiter,
            at: range.start,
            end: range.end,
            line,
            places: Vec::new(),
            unquoted: String::new(),
            row_start: range.start,
            row_cells: 0,
        }
    }

    /// Cuts what was not read yet into parts that can be read at the same time. They know their lines. With quotation
    /// marks it stays one part: a newline may stand inside them.
    pub(super) fn rest_in_parts(&self) -> Vec<RowReader<'t>> {
        let bytes = self.text.as_bytes();
        let longest = if memchr(b'"', &bytes[self.at..]).is_some() { usize::MAX } else { PART };
        let (mut at, mut line) = (self.at, self.line);
        let mut parts = Vec::new();
        while at < self.end {
            let cut = at.saturating_add(longest).min(self.end);
            let end = memchr(b'\n', &bytes[cut..self.end]).map_or(self.end, |length| cut + length + 1);
            parts.push(Self::within(self.text, at..end, line, self.delimiter));
            line += newlines(&self.text[at..end]);
            at = end;
        }
        parts
    }

    /// Takes in what the part that follows has read.
    pub(super) fn append(&mut self, next: Self) {
        self.comments.extend(next.comments);
        // Places of unquoted text count from the end of the whole text and what is unquoted of it before.
        let shift = self.unquoted.len() as u32;
        let length = self.text.len() as u32;
        self.places.extend(next.places.into_iter().map(|place| {
            if shift == 0 || place.start < length {
                place
            } else {
                CellPlace { start: place.start + shift, end: place.end + shift }
            }
        }));
        self.unquoted.push_str(&next.unquoted);
    }

    /// The places of the cells that were read, and the text of those in quotation marks.
    pub(super) fn found(self) -> (Vec<CellPlace>, String) {
        (self.places, self.unquoted)
    }

    /// How many cells the present row has.
    pub(super) fn width(&self) -> usize {
        self.places.len() - self.row_cells
    }

    /// Whether no cell of the present row holds anything.
    pub(super) fn row_is_empty(&self) -> bool {
        self.places[self.row_cells..].iter().all(|place| place.start == place.end)
    }

    /// The cells of the present row.
    pub(super) fn row(&self) -> impl Iterator<Item = &str> {
        self.places[self.row_cells..].iter().map(|place| place.text(self.text, &self.unquoted))
    }

    /// Forgets the present row.
    pub(super) fn drop_row(&mut self) {
        self.places.truncate(self.row_cells);
    }

    /// Whether the present row goes over several lines.
    pub(super) fn has_several_lines(&self) -> bool {
        let row = self.text.get(self.row_start..self.at).unwrap_or("");
        newlines(row.trim_end()) > 0
    }

    /// Goes to the next row, and gives the line on which it begins; `None` at the end.
    ///
    /// # Errors
    /// `file-open-quote` where a quotation mark takes in all lines that follow.
    pub(super) fn next_row(&mut self) -> Result<Option<usize>, FileFault> {
        self.skip_to_row();
        let line = self.line;
        self.row_start = self.at;
        self.row_cells = self.places.len();
        if self.at >= self.end {
            return Ok(None);
        }
        let bytes = self.text.as_bytes();
        loop {
            let from = self.at;
            if bytes.get(from) == Some(&b'"') {
                let closed = self.read_quoted();
                if !closed && self.has_several_lines() {
                    return Err(FileFault::new(
                        "file-open-quote",
                        "a quotation mark opened in this row is never closed",
                    )
                    .at_line(line));
                }
            } else {
                self.at = self.cell_end(from);
                self.push(from, self.at);
            }
            match bytes.get(self.at) {
                Some(b'\n') => {
                    self.at += 1;
                    self.line += 1;
                    return Ok(Some(line));
                }
                Some(_) => self.at += 1,
                None => return Ok(Some(line)),
            }
        }
    }

    /// Where a cell without quotation marks ends that goes on at `from`.
    fn cell_end(&self, from: usize) -> usize {
        let rest = &self.text.as_bytes()[from..];
        position_of_either(rest, self.delimiter, b'\n').map_or(self.text.len(), |length| from + length)
    }

    /// Takes down `from..to` of the text, or of what counts on from its end, without the white space around it.
    fn push(&mut self, from: usize, to: usize) {
        let length = self.text.len();
        let (text, base) = if from < length { (self.text, 0) } else { (self.unquoted.as_str(), length) };
        // Most cells have nothing to trim, which is seen from their outermost bytes.
        let is_plain = |at: usize| text.as_bytes().get(at - base).is_some_and(u8::is_ascii_graphic);
        let (start, end) = if from < to && is_plain(from) && is_plain(to - 1) {
            (from, to)
        } else {
            let cell = text.get(from - base..to - base).unwrap_or("").trim_end();
            (from + cell.len() - cell.trim_start().len(), from + cell.len())
        };
        // No text is longer than LONGEST_TEXT, and no cells in quotation marks are longer than the text.
        self.places.push(CellPlace { start: start as u32, end: end as u32 });
    }

    fn skip_to_row(&mut self) {
        while let Some(&byte) = self.text.as_bytes()[..self.end].get(self.at) {
            if byte == b'#' {
                let rest = &self.text[self.at..];
                let length = memchr(b'\n', rest.as_bytes()).unwrap_or(rest.len());
                self.comments.push((self.line, comment_text(&rest[..length])));
                self.at += length;
            } else if byte == b'\n' || byte == b'\r' {
                self.line += usize::from(byte == b'\n');
                self.at += 1;
            } else {
                break;
            }
        }
    }

    /// Reads a cell that begins with a quotation mark; whether that is closed.
    fn read_quoted(&mut self) -> bool {
        let text = self.text;
        let unquoted_from = text.len() + self.unquoted.len();
        let mut from = self.at + 1;
        let closed = loop {
            let rest = &text[from..];
            let Some(length) = memchr(b'"', rest.as_bytes()) else {
                self.unquoted.push_str(rest);
                from = text.len();
                break false;
            };
            self.unquoted.push_str(&rest[..length]);
            from += length + 1;
            if text.as_bytes().get(from) != Some(&b'"') {
                break true;
            }
            self.unquoted.push('"');
            from += 1;
        };
        self.line += newlines(&text[self.at..from]);
        // What stands between the closing mark and the delimiter belongs to the cell as it is.
        self.at = self.cell_end(from);
        self.unquoted.push_str(&text[from..self.at]);
        self.push(unquoted_from, text.len() + self.unquoted.len());
        closed
    }
}

/// Where the first of two bytes is. Cells are short, and a general search takes longer to begin than to find; here
/// eight bytes are looked at in one word.
fn position_of_either(bytes: &[u8], one: u8, other: u8) -> Option<usize> {
    const ONES: u64 = u64::from_ne_bytes([0x01; 8]);
    const HIGHS: u64 = u64::from_ne_bytes([0x80; 8]);
    // The lowest high bit that is set in `zeros(x)` belongs to the first byte of x that is zero.
    let zeros = |word: u64| word.wrapping_sub(ONES) & !word & HIGHS;
    let (words, rest) = bytes.as_chunks::<8>();
    for (index, word) in words.iter().enumerate() {
        let word = u64::from_le_bytes(*word);
        let found = zeros(word ^ (ONES * u64::from(one))) | zeros(word ^ (ONES * u64::from(other)));
        if found != 0 {
            return Some(8 * index + found.trailing_zeros() as usize / 8);
        }
    }
    let in_rest = rest.iter().position(|&byte| byte == one || byte == other)?;
    Some(8 * words.len() + in_rest)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn rows(text: &str, delimiter: u8) -> Vec<Vec<String>> {
        let mut reader = RowReader::new(text, 0, delimiter).unwrap();
        let mut rows = Vec::new();
        while reader.next_row().unwrap().is_some() {
            rows.push(reader.row().map(str::to_owned).collect());
        }
        rows
    }

    fn rows_of_the_csv_crate(text: &str, delimiter: u8) -> Vec<Vec<String>> {
        csv::ReaderBuilder::new()
            .has_headers(false)
            .flexible(true)
            .delimiter(delimiter)
            .comment(Some(b'#'))
            .from_reader(text.as_bytes())
            .records()
            .map(|record| record.unwrap().iter().map(|cell| cell.trim().to_owned()).collect())
            .collect()
    }

    proptest! {
        /// The open quotation mark that goes over several lines is left out: the crate takes it for a cell.
        #[test]
        fn rows_and_cells_are_those_of_the_csv_crate(
            pieces in prop::collection::vec(
                prop::sample::select(vec![
                    "1850", "-1.5", ",", ",", ";", "\n", "\n", "\r\n", " ", "\t", "#", "a", "µ", "\"", "\"\"", "\"b\"",
                    "\"c, d\"", "\"e\nf\"",
                ]),
                0..40,
            ),
            delimiter in prop::sample::select(vec![b',', b';', b'\t']),
        ) {
            let mut text = pieces.concat();
            // The crate makes an empty row of a comment that ends the text without a newline.
            if text.lines().last().is_some_and(|line| line.starts_with('#')) {
                text.push('\n');
            }
            let mut reader = RowReader::new(&text, 0, delimiter).unwrap();
            let mut is_open = false;
            loop {
                match reader.next_row() {
                    Ok(Some(_)) => {}
                    Ok(None) => break,
                    Err(_) => {
                        is_open = true;
                        break;
                    }
                }
            }
            prop_assume!(!is_open);
            prop_assert_eq!(rows(&text, delimiter), rows_of_the_csv_crate(&text, delimiter));
        }
    }

    proptest! {
        #[test]
        fn the_first_of_two_bytes_is_found_wherever_it_is(
            bytes in prop::collection::vec(prop::sample::select(vec![b'a', b'b', 0x80, 0xFF, 0, 1, b',', b'\n']), 0..30),
        ) {
            let expected = bytes.iter().position(|&byte| byte == b',' || byte == b'\n');
            prop_assert_eq!(position_of_either(&bytes, b',', b'\n'), expected);
        }
    }

    #[test]
    fn each_row_knows_its_line_past_comments_empty_lines_and_quoted_newlines() {
        let text = "a,b\n\n# c\n1,\"x\ny\"\r\n\r\n2,z\n";
        let mut reader = RowReader::new(text, 0, b',').unwrap();
        let lines: Vec<usize> = std::iter::from_fn(|| reader.next_row().unwrap()).collect();
        assert_eq!(lines, [1, 4, 7]);
        assert_eq!(reader.comments, [(3, "c".to_owned())]);
        assert_eq!(rows(text, b',')[1], ["1", "x\ny"]);
    }

    #[test]
    fn a_long_text_is_read_in_parts_that_know_their_lines() {
        let text: String = (0..300_000)
            .map(|row| format!("{row},{}\n{}", row % 7, if row % 1000 == 0 { "# c\n" } else { "" }))
            .collect();
        let whole = RowReader::new(&text, 0, b',').unwrap();
        let parts = whole.rest_in_parts();
        assert!(parts.len() > 2);
        let mut row = 0_usize;
        for mut part in parts {
            while let Some(line) = part.next_row().unwrap() {
                assert_eq!(line, 1 + row + row.div_ceil(1000));
                assert_eq!(part.row().next(), Some(row.to_string().as_str()));
                row += 1;
            }
        }
        assert_eq!(row, 300_000);
    }

    #[test]
    fn an_open_quotation_mark_is_told_at_the_row_where_it_opens() {
        let mut reader = RowReader::new("a,b\n1,\"x\n2,y\n", 0, b',').unwrap();
        assert!(reader.next_row().is_ok());
        let fault = reader.next_row().unwrap_err();
        assert_eq!((fault.code, fault.place.map(|place| place.line)), ("file-open-quote", Some(2)));
    }
}
