use super::axis::{Axis, AxisKind, Span};
use super::era::{Era, Instant, decimal_year};
use crate::base::Fault;

/// The most steps a clock may have: enough for days over fifty thousand years, few enough to fit in memory.
pub const STEPS_LIMIT: usize = 20_000_000;

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
                format!(
                    "this clock would have {} steps; the most is {}",
                    grouped(count),
                    grouped(STEPS_LIMIT as f64)
                ),
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
        let fault = Fault::new(
            "clock-step",
            format!(
                "a step of {} does not divide {span}, which is {} long",
                duration_words(step_years),
                duration_words(total)
            ),
        )
        .blame("step");
        let most = (count + 1e-9).floor().max(1.0) as usize;
        let offered =
            (1..=most).rev().take(12).find_map(|steps| Some((steps, divided(span, step_years, steps)?)));
        match offered {
            Some((1, span)) => fault.help(format!("write {span}, which is one step, or take another step")),
            Some((steps, span)) => {
                fault.help(format!("write {span}, which has {steps} of them, or take another step"))
            }
            None => fault.help("take another step, or another span"),
        }
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

/// A span like `span` that a step divides into so many, if one can be written with three decimals. An age span keeps
/// its younger end, a calendar span its beginning.
fn divided(span: &Span, step_years: f64, steps: usize) -> Option<Span> {
    let whole = steps as f64 * step_years;
    let written = |year: f64| {
        let era = match span.era {
            Era::Ce | Era::Bce => {
                if year < 1.0 {
                    Era::Bce
                } else {
                    Era::Ce
                }
            }
            age @ (Era::Ka | Era::Ma | Era::CalBp | Era::B2k) => age,
        };
        Instant::new((era.of_year(year) * 1000.0).round() / 1000.0, era).ok()
    };
    let (first, last) = if span.era.is_age() {
        (written(span.end - whole)?, written(span.end)?)
    } else {
        // A whole year as an end covers that year; any other number ends there.
        let end = span.start + whole;
        let is_whole = (end - end.round()).abs() < 1e-9;
        (written(span.start)?, written(if is_whole { end - 1.0 } else { end })?)
    };
    let found = Span::between(&first, &last).ok()?;
    let count = (found.end - found.start) / step_years;
    ((count - steps as f64).abs() <= 1e-6 * (steps as f64).sqrt()).then_some(found)
}

/// A count with its thousands parted: `20,000,000`; past what anybody counts, its power of ten.
fn grouped(count: f64) -> String {
    if count >= 1e15 {
        return format!("about 10^{:.0}", count.log10().floor());
    }
    let digits = format!("{count:.0}");
    let mut out = String::new();
    for (place, digit) in digits.chars().enumerate() {
        if place > 0 && (digits.len() - place).is_multiple_of(3) {
            out.push(',');
        }
        out.push(digit);
    }
    out
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
    fn a_span_that_is_offered_instead_can_be_written_and_is_divided() {
        let eras =
            [(1850.0, 1900.0, Era::Ce), (44.0, 1.0, Era::Bce), (3.0, 1.0, Era::Bce), (21.0, 0.5, Era::Ka)];
        for (first, last, era) in eras {
            for step in [0.7, 1.5, 2.0, 2.5, 4.0, 7.0, 13.0, 400.0, 1500.0] {
                let Err(fault) = Clock::new(&span(first, last, era), step, None, None) else { continue };
                let help = fault.help.unwrap();
                let Some(offered) = help.strip_prefix("write ") else { continue };
                let offered = offered.split(", which").next().unwrap();
                let (from, to) = offered.split_once("..").unwrap();
                let (to, last_era) = to.split_once(' ').unwrap();
                let (from, first_era) = from.split_once(' ').unwrap_or((from, last_era));
                let instant =
                    |number: &str, era| Instant::new(number.parse().unwrap(), Era::parse(era).unwrap());
                let (from, to) = (instant(from, first_era).unwrap(), instant(to, last_era).unwrap());
                let span = Span::between(&from, &to).unwrap();
                assert!(Clock::new(&span, step, None, None).is_ok(), "{first} {last} {era:?} {step} {help}");
            }
        }
        let help = Clock::new(&span(3.0, 1.0, Era::Bce), 2.0, None, None).unwrap_err().help.unwrap();
        assert_eq!(help, "write 3..2 BCE, which is one step, or take another step");
    }

    #[test]
    fn a_clock_that_is_too_long_says_by_how_much() {
        let fault = Clock::new(&span(1.0, 2000.0, Era::Ce), 2e-9, None, None).unwrap_err();
        assert_eq!(fault.message, "this clock would have 1,000,000,000,000 steps; the most is 20,000,000");
        assert_eq!(grouped(999.0), "999");
        assert_eq!(grouped(1e300), "about 10^300");
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
