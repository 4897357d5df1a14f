use std::sync::Arc;

/// Which text a span points into. Every execution of a cell is a text of its own.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct SourceId(pub u32);

/// A half-open range of bytes `start..end` in one source text.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash)]
pub struct Span {
    /// The text.
    pub source: SourceId,
    /// First byte.
    pub start: usize,
    /// One past the last byte.
    pub end: usize,
}

impl Span {
    /// The range `start..end` of `source`.
    pub fn new(source: SourceId, start: usize, end: usize) -> Self {
        Self { source, start, end }
    }

    /// The smallest span that holds both; both must lie in the same text.
    pub fn to(self, other: Span) -> Span {
        Span { source: self.source, start: self.start.min(other.start), end: self.end.max(other.end) }
    }
}

/// A text that was executed, with the name a person knows it by.
#[derive(Clone, Debug)]
pub struct Source {
    /// Its identity in spans.
    pub id: SourceId,
    /// What a message calls it: a file name, or `cell 3`.
    pub name: String,
    /// The text itself.
    pub text: Arc<str>,
}

/// A place for people: line and column count from one, the column in Unicode code points.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Position {
    /// Line, from 1.
    pub line: usize,
    /// Column in code points, from 1.
    pub column: usize,
}

/// The one place where byte offsets become lines, columns and code points.
///
/// `µ`, `°` and `±` take two bytes, so that no other code may count columns.
#[derive(Clone, Debug)]
pub struct LineIndex<'a> {
    text: &'a str,
    line_starts: Vec<usize>,
}

impl<'a> LineIndex<'a> {
    /// Index the lines of `text`.
    pub fn new(text: &'a str) -> Self {
        let line_starts = std::iter::once(0).chain(text.match_indices('\n').map(|(at, _)| at + 1)).collect();
        Self { text, line_starts }
    }

    /// The line and column of a byte offset; offsets past the end, or inside a code point, are moved back to
    /// the nearest place that exists.
    pub fn position(&self, offset: usize) -> Position {
        let offset = floor_boundary(self.text, offset);
        let line = self.line_starts.partition_point(|start| *start <= offset);
        let start = self.line_starts.get(line.saturating_sub(1)).copied().unwrap_or(0);
        let column = self.text.get(start..offset).map_or(0, |before| before.chars().count());
        Position { line: line.max(1), column: column + 1 }
    }

    /// The byte offset of the code point number `code_points`, clamped to the text.
    pub fn byte_of_code_point(&self, code_points: usize) -> usize {
        self.text.char_indices().nth(code_points).map_or(self.text.len(), |(at, _)| at)
    }
}

fn floor_boundary(text: &str, offset: usize) -> usize {
    let mut offset = offset.min(text.len());
    while !text.is_char_boundary(offset) {
        offset -= 1;
    }
    offset
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn columns_count_code_points_where_letters_take_two_bytes() {
        let text = "a = 18 ± 4 µm\nb";
        let index = LineIndex::new(text);
        let offset = text.find('m').unwrap();
        assert_eq!(index.position(offset), Position { line: 1, column: 13 });
        assert_eq!(index.position(text.len()), Position { line: 2, column: 2 });
        assert_eq!(index.byte_of_code_point(12), offset);
    }

    #[test]
    fn an_offset_outside_the_text_is_clamped() {
        let index = LineIndex::new("±");
        assert_eq!(index.position(99), Position { line: 1, column: 2 });
        assert_eq!(index.position(1), Position { line: 1, column: 1 });
        assert_eq!(index.byte_of_code_point(9), 2);
    }
}
