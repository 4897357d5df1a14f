//! The plan: for each target a list of source values and weights.

use std::cell::OnceCell;
use std::rc::Rc;

use super::pieces::{Sweep, flat_steps, line_through_instants, line_through_steps};
use super::{Axis, ROUNDING, ResampleError, Side};
use crate::base::Cancellation;

/// The part of a step or cell that data must cover for its mean to be taken.
const LEAST_COVERAGE: f64 = 2.0 / 3.0;
/// A target step shorter than this part of the source steps under it is refining.
const REFINING: f64 = 0.9;

/// How each target value is made of source values, and how many targets are complete.
#[derive(Debug, Clone, PartialEq)]
pub struct Plan {
    source_length: usize,
    /// Target j has the entries `offsets[j]..offsets[j + 1]`; none for a gap.
    offsets: Vec<usize>,
    sources: Vec<usize>,
    weights: Vec<f64>,
    partly_covered: usize,
    too_little_covered: usize,
    not_covered: usize,
}

impl Plan {
    /// The plan from `source`, whose values are there where `valid` says so, to `target`, by the rules of this module.
    ///
    /// `longest_gap_years` is the longest gap that is bridged (infinity bridges all, zero none).
    /// Time and memory grow with the sum of the two lengths.
    ///
    /// # Errors
    /// [`ResampleError`] when an axis is not finite, ascending and free of overlap, `valid` has another length than the
    /// source, or the longest gap is NaN or below zero.
    pub fn new(
        source: Axis<'_>,
        valid: &[bool],
        target: Axis<'_>,
        longest_gap_years: f64,
    ) -> Result<Self, ResampleError> {
        source.validate(Side::Source)?;
        target.validate(Side::Target)?;
        if valid.len() != source.len() {
            return Err(ResampleError::LengthMismatch { expected: source.len(), found: valid.len() });
        }
        if longest_gap_years.is_nan() || longest_gap_years < 0.0 {
            return Err(ResampleError::LongestGap(longest_gap_years));
        }
        let mut plan = Self {
            source_length: source.len(),
            offsets: Vec::with_capacity(target.len() + 1),
            sources: Vec::new(),
            weights: Vec::new(),
            partly_covered: 0,
            too_little_covered: 0,
            not_covered: 0,
        };
        plan.offsets.push(0);
        if source.equals(&target) {
            for (index, &is_valid) in valid.iter().enumerate() {
                let entry = [(index, 1.0)];
                plan.push(if is_valid { &entry } else { &[] }, if is_valid { 1.0 } else { 0.0 });
            }
        } else {
            let mut shape = Shape::of(source, valid, longest_gap_years);
            match target {
                Axis::Steps { starts, ends } => plan.onto_steps(&mut shape, starts, ends),
                Axis::Instants { times } => plan.onto_instants(&mut shape, times),
            }
        }
        Ok(plan)
    }

    /// Number of target values.
    #[must_use]
    pub fn target_length(&self) -> usize {
        self.offsets.len() - 1
    }

    /// Number of source values.
    #[must_use]
    pub fn source_length(&self) -> usize {
        self.source_length
    }

    /// How many targets are means of less than their whole length, but of two thirds of it.
    #[must_use]
    pub fn partly_covered(&self) -> usize {
        self.partly_covered
    }

    /// How many targets are gaps because data cover some of their length, but less than two thirds.
    #[must_use]
    pub fn too_little_covered(&self) -> usize {
        self.too_little_covered
    }

    /// How many targets are gaps because no data cover them.
    #[must_use]
    pub fn not_covered(&self) -> usize {
        self.not_covered
    }

    /// The source indices and weights of target `index`; empty for a gap or past the end. The weights sum to one.
    pub fn entries(&self, index: usize) -> impl Iterator<Item = (usize, f64)> + '_ {
        let range = match (self.offsets.get(index), self.offsets.get(index + 1)) {
            (Some(&start), Some(&end)) => start..end,
            (_, None) | (None, _) => 0..0,
        };
        self.sources[range.clone()].iter().copied().zip(self.weights[range].iter().copied())
    }

    /// Brings one series onto the target axis; gaps become NaN.
    ///
    /// With x₀ the first source value of a target it computes x₀ + Σ wᵢ (xᵢ − x₀): a constant stays that constant
    /// exactly. A source value that is NaN where the plan was told it is there makes its targets NaN.
    ///
    /// # Errors
    /// [`ResampleError::LengthMismatch`] when a slice does not fit its axis.
    pub fn apply(&self, values: &[f64], out: &mut [f64]) -> Result<(), ResampleError> {
        fits(self.source_length, values.len())?;
        fits(self.target_length(), out.len())?;
        self.apply_to(values, out);
        Ok(())
    }

    /// Brings many members onto the target axis: `values` holds one member after the other, and so does `out`.
    ///
    /// # Errors
    /// [`ResampleError::LengthMismatch`] when the slices do not hold the same whole number of members,
    /// [`ResampleError::Cancelled`] when asked to stop (looked at about every million entries).
    pub fn apply_to_members(
        &self,
        values: &[f64],
        out: &mut [f64],
        cancellation: &Cancellation,
    ) -> Result<(), ResampleError> {
        let (source_length, target_length) = (self.source_length, self.target_length());
        if source_length == 0 || target_length == 0 {
            fits(0, if source_length == 0 { values.len() } else { out.len() })?;
            out.fill(f64::NAN);
            return Ok(());
        }
        let members = out.len() / target_length;
        fits(members * target_length, out.len())?;
        fits(members * source_length, values.len())?;
        let between_checks = (1 << 20) / (self.sources.len() + target_length) + 1;
        let pairs = values.chunks_exact(source_length).zip(out.chunks_exact_mut(target_length));
        for (member, (values, out)) in pairs.enumerate() {
            if member % between_checks == 0 {
                cancellation.check()?;
            }
            self.apply_to(values, out);
        }
        Ok(())
    }

    fn apply_to(&self, values: &[f64], out: &mut [f64]) {
        for (result, bounds) in out.iter_mut().zip(self.offsets.windows(2)) {
            let sources = &self.sources[bounds[0]..bounds[1]];
            let weights = &self.weights[bounds[0]..bounds[1]];
            *result = match sources.split_first() {
                None => f64::NAN,
                Some((&first, rest)) => {
                    let base = values[first];
                    let mut change = 0.0;
                    for (&source, &weight) in rest.iter().zip(&weights[1..]) {
                        change += weight * (values[source] - base);
                    }
                    // Adding zero would turn −0 into 0 where one value is passed through.
                    if rest.is_empty() { base } else { base + change }
                }
            };
        }
    }

    /// Takes down one target, `covered` being the covered part of it.
    fn push(&mut self, entries: &[(usize, f64)], covered: f64) {
        if entries.is_empty() || covered <= ROUNDING {
            self.not_covered += 1;
        } else if covered < LEAST_COVERAGE * (1.0 - ROUNDING) {
            self.too_little_covered += 1;
        } else {
            if covered < 1.0 - ROUNDING {
                self.partly_covered += 1;
            }
            self.sources.extend(entries.iter().map(|entry| entry.0));
            self.weights.extend(entries.iter().map(|entry| entry.1));
        }
        self.offsets.push(self.sources.len());
    }

    fn onto_steps(&mut self, shape: &mut Shape<'_>, starts: &[f64], ends: &[f64]) {
        let mut entries = Vec::new();
        for (&start, &end) in starts.iter().zip(ends) {
            let under = shape.steps.as_mut().and_then(|steps| steps.mean_length(start, end));
            let length = end - start;
            let refines = match under {
                Some(typical) => length < REFINING * typical,
                None => shape.spacing.median_meets(|median| length < REFINING * median, false),
            };
            let sweep = if refines { &mut shape.fine } else { &mut shape.coarse };
            let covered = sweep.mean(start, end, ROUNDING, &mut entries);
            self.push(&entries, covered);
        }
    }

    fn onto_instants(&mut self, shape: &mut Shape<'_>, times: &[f64]) {
        let mut entries = Vec::new();
        for (index, &time) in times.iter().enumerate() {
            let half_before = index.checked_sub(1).map(|before| (time - times[before]) / 2.0);
            let half_after = times.get(index + 1).map(|after| (after - time) / 2.0);
            let (Some(before), Some(after)) = (half_before.or(half_after), half_after.or(half_before)) else {
                // A lone instant has no cell.
                self.push_value(shape, time, &mut entries);
                continue;
            };
            if shape.spacing.median_meets(|median| before + after <= median * (1.0 + ROUNDING), true) {
                self.push_value(shape, time, &mut entries);
                continue;
            }
            let mut start = time - before;
            let mut end = time + after;
            if half_before.is_none() {
                start = start.max(shape.start).min(time);
            }
            if half_after.is_none() {
                end = end.min(shape.end).max(time);
            }
            let covered = shape.coarse.mean(start, end, ROUNDING, &mut entries);
            self.push(&entries, covered);
        }
    }

    fn push_value(&mut self, shape: &mut Shape<'_>, time: f64, entries: &mut Vec<(usize, f64)>) {
        shape.fine.value(time, entries);
        self.push(entries, 1.0);
    }
}

fn fits(expected: usize, found: usize) -> Result<(), ResampleError> {
    if expected == found { Ok(()) } else { Err(ResampleError::LengthMismatch { expected, found }) }
}

/// The source in the forms that targets ask for.
struct Shape<'source> {
    /// What is averaged when coarsening.
    coarse: Sweep,
    /// What is followed when refining.
    fine: Sweep,
    /// All source steps, with or without a value.
    steps: Option<Sweep>,
    spacing: Spacing<'source>,
    start: f64,
    end: f64,
}

impl<'source> Shape<'source> {
    fn of(source: Axis<'source>, valid: &[bool], longest_gap: f64) -> Self {
        let longest_gap = longest_gap * (1.0 + ROUNDING);
        let spacing = Spacing::of(source);
        match source {
            Axis::Steps { starts, ends } => Self {
                coarse: Sweep::over(flat_steps(starts, ends, valid).into()),
                fine: Sweep::over(line_through_steps(starts, ends, valid, longest_gap).into()),
                steps: Some(Sweep::over(flat_steps(starts, ends, &vec![true; starts.len()]).into())),
                spacing,
                start: starts.first().copied().unwrap_or(0.0),
                end: ends.last().copied().unwrap_or(0.0),
            },
            Axis::Instants { times } => {
                let line = Rc::new(line_through_instants(times, valid, longest_gap));
                Self {
                    coarse: Sweep::over(line.clone()),
                    fine: Sweep::over(line),
                    steps: None,
                    spacing,
                    start: times.first().copied().unwrap_or(0.0),
                    end: times.last().copied().unwrap_or(0.0),
                }
            }
        }
    }
}

/// The median spacing of the source. It is looked for only where the longest spacing leaves it open what it decides:
/// nothing else of a plan takes as long.
struct Spacing<'source> {
    source: Axis<'source>,
    longest: f64,
    median: OnceCell<Option<f64>>,
}

impl<'source> Spacing<'source> {
    fn of(source: Axis<'source>) -> Self {
        let longest = match source {
            Axis::Steps { starts, ends } => {
                starts.iter().zip(ends).map(|(start, end)| end - start).reduce(f64::max)
            }
            Axis::Instants { times } => times.windows(2).map(|pair| pair[1] - pair[0]).reduce(f64::max),
        };
        let longest = longest.unwrap_or(f64::INFINITY);
        Self { source, longest, median: OnceCell::new() }
    }

    /// Whether the median meets a condition that every longer spacing meets too; `if_none` where there is no spacing.
    fn median_meets(&self, condition: impl Fn(f64) -> bool, if_none: bool) -> bool {
        condition(self.longest)
            && self.median.get_or_init(|| self.source.median_spacing_years()).map_or(if_none, condition)
    }
}
