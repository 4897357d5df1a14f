//! Bringing a series from the axis it came on onto another, as a plan of sparse weights that is made once for a pair of
//! axes and a pattern of gaps, and applied to every member.
//!
//! The rules:
//! - **Coarsening takes means.** Source steps count by their overlap with the target step or cell. Source instants are
//!   joined by straight lines, whose exact mean is taken.
//! - **Refining is linear.** Source instants are joined by straight lines. Source steps stand at their mid-points, and
//!   within half a step of an end of the data the end step's own value holds. A target step takes the mean of that line.
//! - A target *instant* stands for the cell that reaches half way to its neighbours. It is coarsening when its cell
//!   is longer than the median spacing of the source. The outer half of the first and the last cell mirrors the inner
//!   half, but ends where the source ends.
//! - A target *step* is coarsening when it is at least nine tenths as long as the source steps it overlaps (in their
//!   overlap-weighted mean), so that months of 28 to 31 days onto twelfths of a year are averaged throughout.
//! - **Never past the source's ends, never across a long gap.** Neighbouring instants with a value are joined
//!   when they are at most `longest_gap_years` apart; steps with a value, when at most that lies between the end of one
//!   and the start of the next. When coarsening steps nothing is bridged.
//! - **Two thirds.** A mean over a step or cell is taken of what is covered by data, if that is two thirds of it;
//!   otherwise the target is a gap.
//! - On equal axes every value comes back bit for bit, gaps included, and so does a source step that is exactly a target step.

mod pieces;
mod plan;

pub use plan::Plan;

use crate::base::Cancelled;

/// The time axis of a series, in years, ascending.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Axis<'times> {
    /// Each value is a mean over a step. Steps may leave time out between them, but do not overlap.
    Steps {
        /// Where each step starts.
        starts: &'times [f64],
        /// Where each step ends.
        ends: &'times [f64],
    },
    /// Each value stands at an instant.
    Instants {
        /// The instants.
        times: &'times [f64],
    },
}

/// Which of the two axes an error is about.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Side {
    /// The axis that the values are on.
    Source,
    /// The axis that they are to be brought onto.
    Target,
}

/// Why no plan can be made or applied.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum ResampleError {
    /// A time is NaN or infinite.
    NotFinite {
        /// Whose axis.
        side: Side,
        /// Place of the time.
        index: usize,
    },
    /// A time does not come after the one before it, or a step ends before it starts.
    NotAscending {
        /// Whose axis.
        side: Side,
        /// Place of the later time or of the step.
        index: usize,
    },
    /// A step starts before the one before it has ended.
    Overlapping {
        /// Whose axis.
        side: Side,
        /// Place of the later step.
        index: usize,
    },
    /// There are `found` starts, flags or values where `expected` are needed.
    LengthMismatch {
        /// What the axis has.
        expected: usize,
        /// What was given.
        found: usize,
    },
    /// The longest gap is this, and not a number of zero or above.
    LongestGap(f64),
    /// The computation was asked to stop.
    Cancelled,
}

impl From<Cancelled> for ResampleError {
    fn from(_: Cancelled) -> Self {
        Self::Cancelled
    }
}

/// Lengths closer than this part of a step are equal: they differ by the rounding of the times.
const ROUNDING: f64 = 1e-9;

impl<'times> Axis<'times> {
    /// Number of steps or instants.
    #[must_use]
    pub fn len(&self) -> usize {
        match self {
            Self::Steps { starts, .. } => starts.len(),
            Self::Instants { times } => times.len(),
        }
    }

    /// Whether the axis has no step or instant.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// The median length of the steps, or the median distance of neighbouring instants, in years; `None` for no step,
    /// or fewer than two instants. Three of these are the customary longest gap.
    #[must_use]
    pub fn median_spacing_years(&self) -> Option<f64> {
        match self {
            Self::Steps { starts, ends } => {
                let lengths: Vec<f64> = starts.iter().zip(*ends).map(|(start, end)| end - start).collect();
                (!lengths.is_empty()).then(|| crate::science::reduce::median(&lengths))
            }
            Self::Instants { times } => crate::science::reduce::median_spacing(times),
        }
    }

    fn validate(&self, side: Side) -> Result<(), ResampleError> {
        let (starts, ends): (&[f64], &[f64]) = match self {
            Self::Steps { starts, ends } => (starts, ends),
            Self::Instants { times } => (times, times),
        };
        if starts.len() != ends.len() {
            return Err(ResampleError::LengthMismatch { expected: starts.len(), found: ends.len() });
        }
        let of_steps = matches!(self, Self::Steps { .. });
        for (index, (&start, &end)) in starts.iter().zip(ends).enumerate() {
            if !(start.is_finite() && end.is_finite()) {
                return Err(ResampleError::NotFinite { side, index });
            }
            let before = index.checked_sub(1);
            if (of_steps && end <= start) || before.is_some_and(|before| start <= starts[before]) {
                return Err(ResampleError::NotAscending { side, index });
            }
            let overlap = before.map_or(0.0, |before| ends[before] - start);
            if of_steps && overlap > ROUNDING * (end - start) {
                return Err(ResampleError::Overlapping { side, index });
            }
        }
        Ok(())
    }

    /// Whether both are the same axis, bit for bit.
    fn equals(&self, other: &Axis<'_>) -> bool {
        let same = |a: &[f64], b: &[f64]| {
            a.len() == b.len() && a.iter().zip(b).all(|(a, b)| a.to_bits() == b.to_bits())
        };
        match (self, other) {
            (Self::Steps { starts, ends }, Axis::Steps { starts: other_starts, ends: other_ends }) => {
                same(starts, other_starts) && same(ends, other_ends)
            }
            (Self::Instants { times }, Axis::Instants { times: others }) => same(times, others),
            (Self::Steps { .. }, Axis::Instants { .. }) | (Self::Instants { .. }, Axis::Steps { .. }) => {
                false
            }
        }
    }
}

#[cfg(test)]
mod tests;
