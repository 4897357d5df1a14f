use std::fmt;
use std::ops::Range;
use std::sync::OnceLock;

use super::era::{Era, Instant, date_label, is_day};
use crate::base::Fault;

/// What the numbers of an axis stand for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum AxisKind {
    /// Each value is the mean over a stretch of time.
    Steps,
    /// Each value holds at a point in time.
    Instants,
}

impl AxisKind {
    /// The word for it in JSON and notes.
    pub fn word(self) -> &'static str {
        match self {
            AxisKind::Steps => "steps",
            AxisKind::Instants => "instants",
        }
    }
}

/// The times of a series, ascending, in decimal years CE.
#[derive(Clone, Debug)]
pub struct Axis {
    /// Steps or instants.
    pub kind: AxisKind,
    starts: Vec<f64>,
    ends: Vec<f64>,
    /// The era in which it is shown.
    pub era: Era,
    /// Found once: long axes are asked for it again and again.
    median_step: OnceLock<f64>,
}

impl PartialEq for Axis {
    /// The same times, whatever the era they are shown in.
    fn eq(&self, other: &Self) -> bool {
        self.kind == other.kind && self.starts == other.starts && self.ends == other.ends
    }
}

impl Axis {
    /// Steps that begin at `starts` and end at `ends`, one for one.
    pub fn steps(starts: Vec<f64>, ends: Vec<f64>, era: Era) -> Self {
        Self::of(AxisKind::Steps, starts, ends, era)
    }

    /// A row of instants.
    pub fn instants(times: Vec<f64>, era: Era) -> Self {
        Self::of(AxisKind::Instants, times, Vec::new(), era)
    }

    fn of(kind: AxisKind, starts: Vec<f64>, ends: Vec<f64>, era: Era) -> Self {
        Self { kind, starts, ends, era, median_step: OnceLock::new() }
    }

    /// Number of values.
    pub fn len(&self) -> usize {
        self.starts.len()
    }

    /// Whether it has no value.
    pub fn is_empty(&self) -> bool {
        self.starts.is_empty()
    }

    /// Where the steps begin, or the instants.
    pub fn starts(&self) -> &[f64] {
        &self.starts
    }

    /// Where the steps end, or the instants again.
    pub fn ends(&self) -> &[f64] {
        if self.kind == AxisKind::Steps { &self.ends } else { &self.starts }
    }

    /// The middle of every step, or the instants.
    pub fn middles(&self) -> Vec<f64> {
        self.starts.iter().zip(self.ends()).map(|(start, end)| 0.5 * (start + end)).collect()
    }

    /// The lengths of the steps; for instants the distance to the one before.
    pub fn lengths(&self) -> Vec<f64> {
        match self.kind {
            AxisKind::Steps => self.starts.iter().zip(&self.ends).map(|(start, end)| end - start).collect(),
            AxisKind::Instants => self
                .starts
                .iter()
                .zip(self.starts.iter().skip(1))
                .map(|(before, after)| after - before)
                .collect(),
        }
    }

    /// The median length of a step, or distance of two instants, in years.
    pub fn median_step(&self) -> f64 {
        *self.median_step.get_or_init(|| {
            let mut lengths = self.lengths();
            let middle = lengths.len() / 2;
            if lengths.is_empty() { 0.0 } else { *lengths.select_nth_unstable_by(middle, f64::total_cmp).1 }
        })
    }

    /// First and last moment it covers.
    pub fn bounds(&self) -> Option<(f64, f64)> {
        Some((*self.starts.first()?, *self.ends().last()?))
    }

    /// The same axis moved by `years`.
    #[must_use]
    pub fn shifted(&self, years: f64) -> Self {
        let moved = |times: &[f64]| times.iter().map(|time| time + years).collect();
        Self::of(self.kind, moved(&self.starts), moved(&self.ends), self.era)
    }

    /// The part of it numbered `range`.
    #[must_use]
    pub fn part(&self, range: Range<usize>) -> Self {
        let part = |times: &[f64]| times.get(range.clone()).unwrap_or(&[]).to_vec();
        Self::of(self.kind, part(&self.starts), part(&self.ends), self.era)
    }

    /// The numbers of the steps that lie wholly inside `span`, or of the instants in it.
    pub fn inside(&self, span: &Span) -> Range<usize> {
        // Steps made by division meet span ends to the last bits only.
        let slack = 1e-9 * (1.0 + span.start.abs().max(span.end.abs())).min(1e6);
        let first = self.starts.partition_point(|start| *start < span.start - slack);
        let last = self.ends().partition_point(|end| *end <= span.end + slack);
        first..last.max(first)
    }

    /// What a person calls value number `index`: `1991 CE`, `1958-03`, `21 ka`.
    pub fn label(&self, index: usize) -> String {
        let Some(start) = self.starts.get(index).copied() else { return String::new() };
        if self.era == Era::Ce && self.kind == AxisKind::Steps && start >= 1.0 && self.median_step() < 0.9 {
            let step = self.median_step();
            let year = (start + 1e-6).floor();
            let months = (start - year) * 12.0;
            if step > 0.07 && (months - months.round()).abs() < 0.06 {
                return format!("{year}-{:02}", months.round().max(0.0) + 1.0);
            }
            if step < 0.02 {
                return date_label(start);
            }
        }
        self.era.format(tidy(start))
    }

    /// A few words for messages: `271 steps, 1750 CE to 2020 CE`.
    pub fn describe(&self) -> String {
        match self.bounds() {
            None => "an empty axis".to_owned(),
            Some((start, end)) => {
                let word = self.kind.word();
                let word = if self.len() == 1 { word.trim_end_matches('s') } else { word };
                // The last step of a calendar is called by the year or month in which it begins; the span of steps
                // of ages is told by its ends.
                let (first, last) = if self.kind == AxisKind::Steps && self.era.is_age() {
                    (self.era.format(tidy(start)), self.era.format(tidy(end)))
                } else {
                    (self.label(0), self.label(self.len().saturating_sub(1)))
                };
                format!("{} {word}, {first} to {last}", self.len())
            }
        }
    }
}

/// Rounded to a thousandth of a year, for words only.
fn tidy(year: f64) -> f64 {
    (year * 1000.0).round() / 1000.0
}

/// A stretch of time with both ends in.
#[derive(Clone, Debug, PartialEq)]
pub struct Span {
    /// Its first moment, decimal years CE.
    pub start: f64,
    /// Its last moment: the end of 2020 for `..2020 CE`.
    pub end: f64,
    /// The era of its ends.
    pub era: Era,
    /// How it was written: the numbers of first and last in its era.
    pub last: f64,
}

impl Span {
    /// The span from one instant to another. Ages may be given in either order.
    ///
    /// # Errors
    /// `reversed-span` for calendar years that run backwards; `uncertain-span` for ends with a spread.
    pub fn between(first: &Instant, last: &Instant) -> Result<Self, Fault> {
        if first.years.rows() > 1 || last.years.rows() > 1 {
            return Err(Fault::new("uncertain-span", "the ends of a span cannot be uncertain")
                .help("write the span without ±, and put the spread on the data (an age model carries it)"));
        }
        let (start, end) = (first.year(), last.year());
        if start > end {
            if first.era.is_age() && last.era.is_age() {
                return Span::between(last, first);
            }
            return Err(Fault::new(
                "reversed-span",
                format!("this span runs backwards: {first} comes after {last}"),
            )
            .help(format!("write {}..{}", last.to_string().trim_end_matches(" CE"), first)));
        }
        Ok(Self { start, end: end + last.width_years, era: first.era, last: end })
    }
}

impl fmt::Display for Span {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.era == Era::Ce && is_day(self.end - self.last) {
            return write!(formatter, "{}..{}", date_label(self.start), date_label(self.last));
        }
        let first = self.era.format(tidy(self.start));
        let last = self.era.format(tidy(self.last));
        // The era is said once where it is one: `50 BCE..20 CE`, but `50..20 BCE`.
        let (number, era) = first.split_once(' ').unwrap_or((&first, ""));
        let short = last.split_once(' ').is_some_and(|(_, other)| other == era);
        write!(formatter, "{}..{last}", if short { number } else { &first })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn span(first: f64, last: f64, era: Era) -> Span {
        Span::between(&Instant::new(first, era).unwrap(), &Instant::new(last, era).unwrap()).unwrap()
    }

    #[test]
    fn a_span_names_its_era_once_where_it_is_one() {
        assert_eq!(span(44.0, 1.0, Era::Bce).to_string(), "44..1 BCE");
        let across = |first: f64, last: f64| {
            Span::between(
                &Instant::at(crate::value::Block::single(first), Era::Ce, 1.0),
                &Instant::new(last, Era::Ce).unwrap(),
            )
        };
        assert_eq!(across(-99.0, 20.0).unwrap().to_string(), "100 BCE..20 CE");
    }
}
