use std::fmt;
use std::ops::Range;

use super::era::{Era, Instant, decimal_year};
use crate::base::Fault;

/// The most steps a clock may have: enough for days over fifty thousand years, few enough to fit in memory.
pub const STEPS_LIMIT: usize = 20_000_000;

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
        Self { kind: AxisKind::Steps, starts, ends, era }
    }

    /// A row of instants.
    pub fn instants(times: Vec<f64>, era: Era) -> Self {
        Self { kind: AxisKind::Instants, starts: times, ends: Vec::new(), era }
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
        let mut lengths = self.lengths();
        lengths.sort_by(f64::total_cmp);
        lengths.get(lengths.len() / 2).copied().unwrap_or(0.0)
    }

    /// First and last moment it covers.
    pub fn bounds(&self) -> Option<(f64, f64)> {
        Some((*self.starts.first()?, *self.ends().last()?))
    }

    /// The same axis moved by `years`.
    #[must_use]
    pub fn shifted(&self, years: f64) -> Self {
        let moved = |times: &[f64]| times.iter().map(|time| time + years).collect();
        Self { kind: self.kind, starts: moved(&self.starts), ends: moved(&self.ends), era: self.era }
    }

    /// The part of it numbered `range`.
    #[must_use]
    pub fn part(&self, range: Range<usize>) -> Self {
        let part = |times: &[f64]| times.get(range.clone()).unwrap_or(&[]).to_vec();
        Self { kind: self.kind, starts: part(&self.starts), ends: part(&self.ends), era: self.era }
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
        let step = self.median_step();
        if self.era == Era::Ce && self.kind == AxisKind::Steps && step < 0.9 && start >= 1.0 {
            let year = (start + 1e-6).floor();
            let months = (start - year) * 12.0;
            if step > 0.07 && (months - months.round()).abs() < 0.06 {
                return format!("{year}-{:02}", months.round().max(0.0) + 1.0);
            }
            if step < 0.02 {
                return super::era::date_label(start);
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
        let first = self.era.format(tidy(self.start));
        let last = self.era.format(tidy(self.last));
        let short = first.strip_suffix(self.era.symbol()).filter(|_| last.ends_with(self.era.symbol()));
        write!(formatter, "{}..{last}", short.map_or(first.as_str(), str::trim_end))
    }
}

/// The axis on which formulas are evaluated, and onto which data are brought.
#[derive(Clone, Debug, PartialEq)]
pub struct Clock {
    /// Its steps or instants.
    pub axis: std::sync::Arc<Axis>,
    /// The length of one step, in years.
    pub step_years: f64,
}

impl Clock {
    /// Divide a span: a calendar span into steps, an age span into a row of instants with both ends in.
    ///
    /// `whole_days` says that the step is so many days of the calendar, whose years have 365 or 366 of them.
    ///
    /// # Errors
    /// `clock-step` for a step that is zero, negative or does not divide the span; `clock-size` for more than
    /// [`STEPS_LIMIT`] steps.
    pub fn new(
        span: &Span,
        step_years: f64,
        whole_days: Option<i64>,
        kind: Option<AxisKind>,
    ) -> Result<Self, Fault> {
        if !(step_years.is_finite() && step_years > 0.0) {
            return Err(Fault::new("clock-step", "the step of a clock must be longer than nothing")
                .blame("step")
                .help("write a positive duration, such as `by 1 yr`"));
        }
        let total = span.end - span.start;
        let count = total / step_years;
        if count > STEPS_LIMIT as f64 {
            return Err(Fault::new(
                "clock-size",
                format!("this clock would have {count:.3e} steps; the most is {STEPS_LIMIT}"),
            )
            .help("take a longer step, or a shorter span"));
        }
        let default = if span.era.is_age() { AxisKind::Instants } else { AxisKind::Steps };
        let kind = kind.unwrap_or(default);
        if let (Some(days), AxisKind::Steps, false) = (whole_days, kind, span.era.is_age()) {
            return Self::of_days(span, days, step_years);
        }
        let whole = count.round();
        if whole < 1.0 || (count - whole).abs() > 1e-6 * whole.max(1.0).sqrt() {
            return Err(Self::not_dividing(span, total, step_years, count));
        }
        let number = whole as usize;
        // One division for each step, so that whole years are whole numbers in every clock.
        let time = |step: usize| span.start + total * step as f64 / whole;
        let axis = match kind {
            AxisKind::Steps => {
                Axis::steps((0..number).map(time).collect(), (1..=number).map(time).collect(), span.era)
            }
            AxisKind::Instants => {
                let last = if span.era.is_age() { number + 1 } else { number };
                Axis::instants((0..last).map(time).collect(), span.era)
            }
        };
        Ok(Self { axis: axis.into(), step_years: total / whole })
    }

    fn of_days(span: &Span, days: i64, step_years: f64) -> Result<Self, Fault> {
        let year = span.start.floor();
        let length = if (decimal_year(year as i64, 365) - year).fract() > 0.0 { 366.0 } else { 365.0 };
        let first = ((span.start - year) * length).round() as i64;
        let mut bounds = vec![decimal_year(year as i64, first)];
        let mut day = first;
        while bounds.last().is_some_and(|last| *last < span.end - 1e-6) {
            day += days;
            bounds.push(decimal_year(year as i64, day));
        }
        if bounds.last().is_none_or(|last| (last - span.end).abs() > 1e-6) {
            return Err(Self::not_dividing(
                span,
                span.end - span.start,
                step_years,
                bounds.len() as f64 - 0.5,
            ));
        }
        let ends = bounds.iter().skip(1).copied().collect::<Vec<_>>();
        bounds.pop();
        Ok(Self { axis: Axis::steps(bounds, ends, span.era).into(), step_years })
    }

    fn not_dividing(span: &Span, total: f64, step_years: f64, count: f64) -> Fault {
        let unit = span.era.years_per_unit();
        let whole = (count + 1e-9).floor().max(1.0);
        let fault = Fault::new(
            "clock-step",
            format!(
                "a step of {} does not divide {span}, which is {} long",
                duration_words(step_years),
                duration_words(total)
            ),
        )
        .blame("step");
        let end = if span.era.is_age() {
            span.end - whole * step_years
        } else {
            span.start + whole * step_years - unit
        };
        let other = if span.era.is_age() {
            format!("{}..{}", trim(span.era.of_year(end)), span.era.format(span.end))
        } else {
            format!("{}..{}", trim(span.start), span.era.format(end))
        };
        fault.help(format!("write {other}, which has {whole} of them, or take another step"))
    }

    /// The same clock, moved by `years`.
    #[must_use]
    pub fn shifted(&self, years: f64) -> Self {
        Self { axis: self.axis.shifted(years).into(), step_years: self.step_years }
    }

    /// The same clock, begun `steps` steps earlier.
    #[must_use]
    pub fn extended_back(&self, steps: usize) -> Self {
        let Some((start, _)) = self.axis.bounds() else { return self.clone() };
        let earlier = |index: usize| start - self.step_years * (steps - index) as f64;
        let mut starts: Vec<f64> = (0..steps).map(earlier).collect();
        let axis = match self.axis.kind {
            AxisKind::Steps => {
                let mut ends: Vec<f64> = (1..=steps).map(earlier).collect();
                starts.extend(self.axis.starts());
                ends.extend(self.axis.ends());
                Axis::steps(starts, ends, self.axis.era)
            }
            AxisKind::Instants => {
                starts.extend(self.axis.starts());
                Axis::instants(starts, self.axis.era)
            }
        };
        Self { axis: axis.into(), step_years: self.step_years }
    }
}

fn trim(number: f64) -> String {
    let text = format!("{number:.3}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// A duration in the unit a person would say it in.
pub(crate) fn duration_words(years: f64) -> String {
    let size = years.abs();
    let (number, unit) = if size >= 1e6 {
        (years / 1e6, "Myr")
    } else if size >= 2e3 {
        (years / 1e3, "kyr")
    } else if size >= 1.0 {
        (years, "yr")
    } else if size >= 1.0 / 12.5 {
        (years * 12.0, "month")
    } else {
        (years * 365.2425, "day")
    };
    format!("{} {unit}", trim(number))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn span(first: f64, last: f64, era: Era) -> Span {
        Span::between(&Instant::new(first, era).unwrap(), &Instant::new(last, era).unwrap()).unwrap()
    }

    #[test]
    fn calendar_years_have_both_ends_in_and_are_steps() {
        let clock = Clock::new(&span(1750.0, 2020.0, Era::Ce), 1.0, None, None).unwrap();
        assert_eq!(clock.axis.len(), 271);
        assert_eq!(clock.axis.kind, AxisKind::Steps);
        assert_eq!(clock.axis.bounds(), Some((1750.0, 2021.0)));
    }

    #[test]
    fn months_end_on_whole_years() {
        let clock = Clock::new(&span(1850.0, 2020.0, Era::Ce), 1.0 / 12.0, None, None).unwrap();
        assert_eq!(clock.axis.len(), 171 * 12);
        assert!((clock.axis.starts()[12 * 100] - 1950.0).abs() < f64::EPSILON);
    }

    #[test]
    fn ages_are_instants_with_both_ends_in_either_way_round() {
        let down = Clock::new(&span(800.0, 0.0, Era::Ka), 1000.0, None, None).unwrap();
        let up = Clock::new(&span(0.0, 800.0, Era::Ka), 1000.0, None, None).unwrap();
        assert_eq!(down, up);
        assert_eq!((down.axis.len(), down.axis.kind), (801, AxisKind::Instants));
    }

    #[test]
    fn days_follow_the_calendar() {
        let first = crate::value::instant_of_date(2016, 1, 1).unwrap();
        let last = crate::value::instant_of_date(2016, 12, 31).unwrap();
        let year = Span::between(&first, &last).unwrap();
        let clock = Clock::new(&year, 1.0 / 365.2425, Some(1), None).unwrap();
        assert_eq!(clock.axis.len(), 366);
    }

    #[test]
    fn a_step_that_does_not_divide_offers_a_span_that_does() {
        let fault = Clock::new(&span(1750.0, 2020.0, Era::Ce), 10.0, None, None).unwrap_err();
        assert_eq!(fault.code, "clock-step");
        assert_eq!(
            fault.help.as_deref(),
            Some("write 1750..2019 CE, which has 27 of them, or take another step")
        );
    }

    #[test]
    fn a_clock_begun_earlier_keeps_its_own_steps() {
        let clock = Clock::new(&span(1850.0, 1859.0, Era::Ce), 1.0, None, None).unwrap();
        let longer = clock.extended_back(3);
        assert_eq!(longer.axis.len(), 13);
        assert_eq!(longer.axis.starts()[..4], [1847.0, 1848.0, 1849.0, 1850.0]);
        assert!((longer.axis.ends()[2] - 1850.0).abs() < f64::EPSILON);
    }

    #[test]
    fn a_window_takes_whole_steps() {
        let clock = Clock::new(&span(1850.0, 2020.0, Era::Ce), 1.0, None, None).unwrap();
        assert_eq!(clock.axis.inside(&span(1850.0, 1900.0, Era::Ce)).len(), 51);
    }
}
