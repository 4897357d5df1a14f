//! The source as a function of time: pieces of a straight or flat line, in order of time.

use std::rc::Rc;

/// Between `start` and `end` the function goes straight from source value `left` to source value `right`; flat when they
/// are one. A piece without length is a lone instant.
#[derive(Debug, Clone, Copy)]
pub(super) struct Piece {
    pub(super) start: f64,
    pub(super) end: f64,
    pub(super) left: usize,
    pub(super) right: usize,
}

impl Piece {
    fn flat(start: f64, end: f64, index: usize) -> Self {
        Self { start, end, left: index, right: index }
    }

    /// How far along the piece a time is, from 0 to 1.
    fn fraction(&self, time: f64) -> f64 {
        if self.end > self.start {
            ((time - self.start) / (self.end - self.start)).clamp(0.0, 1.0)
        } else {
            0.0
        }
    }
}

/// Each valid step as a flat piece: what coarsening averages.
pub(super) fn flat_steps(starts: &[f64], ends: &[f64], valid: &[bool]) -> Vec<Piece> {
    (0..starts.len())
        .filter(|&index| valid[index])
        .map(|index| Piece::flat(starts[index], ends[index], index))
        .collect()
}

/// The line through valid instants, broken where neighbours are more than `longest_gap` apart.
pub(super) fn line_through_instants(times: &[f64], valid: &[bool], longest_gap: f64) -> Vec<Piece> {
    let mut pieces = Vec::new();
    let mut before: Option<usize> = None;
    let mut before_is_joined = false;
    for index in (0..times.len()).filter(|&index| valid[index]) {
        let joined = before.is_some_and(|before| times[index] - times[before] <= longest_gap);
        match before {
            Some(before) if joined => {
                pieces.push(Piece { start: times[before], end: times[index], left: before, right: index });
            }
            Some(before) if !before_is_joined => {
                pieces.push(Piece::flat(times[before], times[before], before))
            }
            Some(_) | None => {}
        }
        before = Some(index);
        before_is_joined = joined;
    }
    if let Some(before) = before.filter(|_| !before_is_joined) {
        pieces.push(Piece::flat(times[before], times[before], before));
    }
    pieces
}

/// The line through the mid-points of valid steps, flat within half a step of the ends of each run of data; runs are
/// parted where more than `longest_gap` lies between the end of one valid step and the start of the next.
pub(super) fn line_through_steps(
    starts: &[f64],
    ends: &[f64],
    valid: &[bool],
    longest_gap: f64,
) -> Vec<Piece> {
    let middle = |index: usize| f64::midpoint(starts[index], ends[index]);
    let mut pieces = Vec::new();
    let mut before: Option<usize> = None;
    for index in (0..starts.len()).filter(|&index| valid[index]) {
        match before {
            Some(before) if starts[index] - ends[before] <= longest_gap => {
                pieces.push(Piece { start: middle(before), end: middle(index), left: before, right: index });
            }
            Some(before) => {
                pieces.push(Piece::flat(middle(before), ends[before], before));
                pieces.push(Piece::flat(starts[index], middle(index), index));
            }
            None => pieces.push(Piece::flat(starts[index], middle(index), index)),
        }
        before = Some(index);
    }
    if let Some(before) = before {
        pieces.push(Piece::flat(middle(before), ends[before], before));
    }
    pieces
}

/// A list of pieces and the first that can still matter: questions are asked in order of time, so that one pass over
/// the pieces answers all.
pub(super) struct Sweep {
    pieces: Rc<Vec<Piece>>,
    first: usize,
}

impl Sweep {
    pub(super) fn over(pieces: Rc<Vec<Piece>>) -> Self {
        Self { pieces, first: 0 }
    }

    fn forget_before(&mut self, time: f64) {
        while self.pieces.get(self.first).is_some_and(|piece| piece.end < time) {
            self.first += 1;
        }
    }

    /// Writes the weights of the mean from `start` to `end` over what is covered into `entries` (emptied first), and
    /// returns the covered part of that span, from 0 to 1. Overlaps within `rounding` of the span are none.
    pub(super) fn mean(
        &mut self,
        start: f64,
        end: f64,
        rounding: f64,
        entries: &mut Vec<(usize, f64)>,
    ) -> f64 {
        entries.clear();
        self.forget_before(start);
        let negligible = rounding * (end - start);
        let mut covered = 0.0;
        for piece in self.pieces[self.first..].iter().take_while(|piece| piece.start < end) {
            let (from, to) = (piece.start.max(start), piece.end.min(end));
            let overlap = to - from;
            if overlap <= negligible {
                continue;
            }
            covered += overlap;
            let fraction = piece.fraction(f64::midpoint(from, to));
            if piece.left == piece.right {
                add(entries, piece.left, overlap);
            } else {
                add(entries, piece.left, overlap * (1.0 - fraction));
                add(entries, piece.right, overlap * fraction);
            }
        }
        for (_, weight) in entries.iter_mut() {
            *weight /= covered;
        }
        covered / (end - start)
    }

    /// Writes the weights of the value at `time` into `entries` (emptied first; left so where there is none).
    pub(super) fn value(&mut self, time: f64, entries: &mut Vec<(usize, f64)>) {
        entries.clear();
        self.forget_before(time);
        let Some(piece) = self.pieces.get(self.first).filter(|piece| piece.start <= time) else { return };
        let fraction = piece.fraction(time);
        if fraction < 1.0 {
            add(entries, piece.left, 1.0 - fraction);
        }
        if fraction > 0.0 {
            add(entries, piece.right, fraction);
        }
    }

    /// The overlap-weighted mean length of the pieces between `start` and `end`, if there are any.
    pub(super) fn mean_length(&mut self, start: f64, end: f64) -> Option<f64> {
        self.forget_before(start);
        let (mut weight, mut sum) = (0.0, 0.0);
        for piece in self.pieces[self.first..].iter().take_while(|piece| piece.start < end) {
            let overlap = (piece.end.min(end) - piece.start.max(start)).max(0.0);
            weight += overlap;
            sum += overlap * (piece.end - piece.start);
        }
        (weight > 0.0).then(|| sum / weight)
    }
}

/// Pieces come in order of time and share the values where they meet, so that only the last entry can be the same one.
fn add(entries: &mut Vec<(usize, f64)>, index: usize, weight: f64) {
    match entries.last_mut() {
        Some((last, sum)) if *last == index => *sum += weight,
        Some(_) | None => entries.push((index, weight)),
    }
}
