//! Ticks where a person would put them: values in steps of 1, 2 or 5, years and ages too, and below some years the
//! beginnings of months and days.

use crate::value::{Era, Tick, decimal_year};

/// A step of 1, 2 or 5 times a power of ten.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
struct RoundStep {
    digit: i64,
    power: i32,
}

impl RoundStep {
    /// `count` steps as a number, rounded once: three steps of 0.1 are 0.3.
    fn times(self, count: i64) -> f64 {
        format!("{}e{}", count.saturating_mul(self.digit), self.power).parse().unwrap_or(f64::NAN)
    }

    fn next(self) -> Self {
        match self.digit {
            1 => Self { digit: 2, ..self },
            2 => Self { digit: 5, ..self },
            _ => Self { digit: 1, power: self.power + 1 },
        }
    }

    /// The numbers of the steps between `low` and `high`, both in.
    fn between(self, low: f64, high: f64) -> std::ops::RangeInclusive<i64> {
        let size = self.times(1);
        // The quotient of a round number may miss it by a few bits.
        let slack = 1e-9;
        (low / size - slack).ceil() as i64..=(high / size + slack).floor() as i64
    }
}

/// The smallest step of at least ten to the `least` that has at most `most` numbers between `low` and `high`.
fn round_step(low: f64, high: f64, most: usize, least: i32) -> RoundStep {
    let rough = high / 2.0 - low / 2.0;
    // Begun some steps too fine, for the bits that logarithms lose.
    let power = ((rough / most.max(1) as f64).log10().floor() as i32 - 1).max(least);
    let mut step = RoundStep { digit: 1, power };
    for _ in 0..40 {
        let numbers = step.between(low, high);
        if (numbers.end() - numbers.start()) < most as i64 {
            break;
        }
        step = step.next();
    }
    step
}

/// A number on an axis: so many decimals, a true minus, thousands apart from five digits on.
fn axis_number(value: f64, decimals: usize) -> String {
    let text = format!("{:.decimals$}", value.abs());
    let (whole, rest) = text.split_at(text.find('.').unwrap_or(text.len()));
    let mut grouped = String::new();
    for (index, digit) in whole.chars().enumerate() {
        if whole.len() > 4 && index > 0 && (whole.len() - index).is_multiple_of(3) {
            grouped.push('\u{202f}');
        }
        grouped.push(digit);
    }
    let nothing = !text.contains(|letter: char| ('1'..='9').contains(&letter));
    format!("{}{grouped}{rest}", if value < 0.0 && !nothing { "−" } else { "" })
}

/// Ticks of a value axis, and the power of ten (a multiple of three) by which their labels are to be multiplied.
pub(super) fn value_ticks(low: f64, high: f64, most: usize) -> (Vec<Tick>, i32) {
    let step = round_step(low, high, most, -330);
    let largest = low.abs().max(high.abs());
    let magnitude = largest.log10().floor() as i32;
    let power = if (-3..5).contains(&magnitude) { 0 } else { magnitude.div_euclid(3) * 3 };
    let decimals = (power - step.power).clamp(0, 17) as usize;
    let scaled = RoundStep { digit: step.digit, power: step.power - power };
    let ticks = step
        .between(low, high)
        .take(most + 1)
        .map(|count| Tick { at: step.times(count), label: axis_number(scaled.times(count), decimals) })
        .collect();
    (ticks, power)
}

/// Ticks of a time axis from `start` to `end` (decimal years CE) in `era`, and the axis's title. All labels together
/// have room for about `letters` letters.
pub(super) fn time_ticks(era: Era, start: f64, end: f64, letters: usize) -> (Vec<Tick>, String) {
    if era.is_age() {
        let title = match era {
            Era::Ka => "age (ka before 1950)",
            Era::Ma => "age (Ma before 1950)",
            Era::CalBp => "age (cal BP)",
            Era::B2k | Era::Ce | Era::Bce => "age (years b2k)",
        };
        return (age_ticks(era, start, end, letters), title.to_owned());
    }
    let before = start < 1.0;
    let title = match (before, end <= 1.0) {
        (true, true) => "year BCE",
        (true, false) => "year",
        (false, _) => "year CE",
    };
    let span = end - start;
    let by_date = !before && span < 3.0;
    let ticks = if by_date && span < 0.2 {
        day_ticks(start, end, letters)
    } else if by_date {
        month_ticks(start, end, letters)
    } else {
        fitting(letters, |most| year_ticks(start, end, most))
    };
    (ticks, if by_date { "date".to_owned() } else { title.to_owned() })
}

/// The most ticks whose labels fit, from ten downwards.
fn fitting(letters: usize, ticks: impl Fn(usize) -> Vec<Tick>) -> Vec<Tick> {
    (2..=10).rev().map(&ticks).find(|ticks| fits(ticks, letters)).unwrap_or_else(|| ticks(1))
}

fn fits(ticks: &[Tick], letters: usize) -> bool {
    let longest = ticks.iter().map(|tick| tick.label.chars().count()).max().unwrap_or(0);
    ticks.len() * (longest + 4) <= letters
}

fn age_ticks(era: Era, start: f64, end: f64, letters: usize) -> Vec<Tick> {
    let (young, old) = (era.of_year(end), era.of_year(start));
    fitting(letters, |most| {
        let step = round_step(young, old, most, -330);
        let decimals = (-step.power).clamp(0, 17) as usize;
        step.between(young, old)
            .rev()
            .take(most + 1)
            .map(|count| {
                let age = step.times(count);
                Tick { at: era.to_year(age), label: axis_number(age, decimals) }
            })
            .collect()
    })
}

/// Whole years; before 1 CE they are round in BCE, which has no year zero.
fn year_ticks(start: f64, end: f64, most: usize) -> Vec<Tick> {
    let step = round_step(start, end, most, 0);
    let both = start < 1.0 && end > 1.0;
    step.between(start - 1.0, end)
        .map(|count| {
            let number = step.times(count);
            let (at, number, word) = if number < 0.0 {
                (number + 1.0, -number, " BCE")
            } else if number < 1.0 {
                // Between the eras stands the beginning of 1 CE; an axis that ends there begins its last year in 1 BCE.
                (if both || start >= 1.0 { 1.0 } else { 0.0 }, 1.0, " CE")
            } else {
                (number, number, " CE")
            };
            let label = axis_number(number, 0) + if both { word } else { "" };
            Tick { at, label }
        })
        .filter(|tick| tick.at >= start && tick.at <= end)
        .take(most + 1)
        .collect()
}

/// The beginnings of months; those of years where these are enough.
fn month_ticks(start: f64, end: f64, letters: usize) -> Vec<Tick> {
    let ticks = |every: i64| -> Vec<Tick> {
        let first = (start * 12.0 - 1e-6).ceil() as i64;
        let last = (end * 12.0 + 1e-6).floor() as i64;
        (first..=last)
            .filter(|month| month.rem_euclid(every) == 0)
            .map(|month| Tick {
                at: month as f64 / 12.0,
                label: format!("{}-{:02}", month.div_euclid(12), month.rem_euclid(12) + 1),
            })
            .collect()
    };
    [1, 2, 3, 6].into_iter().map(ticks).find(|found| fits(found, letters)).unwrap_or_else(|| ticks(12))
}

/// The beginnings of days.
fn day_ticks(start: f64, end: f64, letters: usize) -> Vec<Tick> {
    let mut days: Vec<(f64, String)> = (start.floor() as i64..=end.floor() as i64)
        .flat_map(|year| (0..366).map(move |day| (year, day)))
        .map(|(year, day)| decimal_year(year, day))
        .filter(|at| *at >= start - 1e-9 && *at <= end + 1e-9)
        .map(|at| (at, crate::value::date_label(at)))
        .collect();
    // Day 366 of a common year is the next New Year again.
    days.dedup_by(|one, before| one.1 == before.1);
    if days.is_empty() {
        return vec![Tick { at: start, label: crate::value::date_label(start) }];
    }
    let ticks = |every: u32| -> Vec<Tick> {
        let wanted = |label: &str| {
            let day: u32 = label.rsplit('-').next().and_then(|day| day.parse().ok()).unwrap_or(1);
            (day - 1).is_multiple_of(every) && (every == 1 || day < 30)
        };
        days.iter()
            .filter(|(_, label)| wanted(label))
            .map(|(at, label)| Tick { at: *at, label: label.clone() })
            .collect()
    };
    [1, 2, 5, 10].into_iter().map(ticks).find(|found| fits(found, letters)).unwrap_or_else(|| ticks(31))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn labels(ticks: &[Tick]) -> Vec<&str> {
        ticks.iter().map(|tick| tick.label.as_str()).collect()
    }

    #[test]
    fn values_are_labelled_in_steps_of_one_two_or_five() {
        let (ticks, power) = value_ticks(-0.43, 1.27, 6);
        assert_eq!((labels(&ticks), power), (vec!["0.0", "0.5", "1.0"], 0));
        let (ticks, _) = value_ticks(-0.12, 0.31, 6);
        assert_eq!(labels(&ticks), ["−0.1", "0.0", "0.1", "0.2", "0.3"]);
        assert_eq!(ticks[4].at.to_bits(), 0.3f64.to_bits(), "three tenths, not the sum of three");
        assert_eq!(
            labels(&value_ticks(0.0, 20_000.0, 5).0),
            ["0", "5000", "10\u{202f}000", "15\u{202f}000", "20\u{202f}000"]
        );
    }

    #[test]
    fn extreme_values_share_a_power_of_ten() {
        for (low, high, power) in
            [(0.0, 2.5e300, 300), (1e-300, 6e-300, -300), (0.0, 4e-5, -6), (-3e7, 1e7, 6)]
        {
            let (ticks, found) = value_ticks(low, high, 6);
            assert_eq!(found, power);
            assert!((3..=6).contains(&ticks.len()), "{ticks:?}");
            assert!(ticks.iter().all(|tick| tick.label.chars().count() <= 4), "{ticks:?}");
        }
    }

    #[test]
    fn ages_are_round_in_their_own_era() {
        let (ticks, title) = time_ticks(Era::Ka, Era::Ka.to_year(800.0), Era::Ka.to_year(0.0), 90);
        assert_eq!(labels(&ticks), ["800", "700", "600", "500", "400", "300", "200", "100", "0"]);
        assert_eq!(title, "age (ka before 1950)");
        assert!((ticks[0].at - (1950.0 - 800e3)).abs() < 1e-6);
        let (ticks, _) = time_ticks(Era::Ma, Era::Ma.to_year(5.0), Era::Ma.to_year(0.0), 90);
        assert_eq!(labels(&ticks), ["5", "4", "3", "2", "1", "0"]);
        let (ticks, _) = time_ticks(Era::CalBp, Era::CalBp.to_year(11_000.0), Era::CalBp.to_year(-60.0), 90);
        assert_eq!(labels(&ticks)[0], "10\u{202f}000");
    }

    #[test]
    fn calendar_years_count_on_both_sides_of_the_year_that_is_missing() {
        let (ticks, title) = time_ticks(Era::Ce, -999.0, 1001.0, 90);
        assert_eq!(labels(&ticks), ["1000 BCE", "500 BCE", "1 CE", "500 CE", "1000 CE"]);
        assert_eq!((ticks[1].at, title.as_str()), (-499.0, "year"));
        let (ticks, title) = time_ticks(Era::Bce, -299.0, -99.0, 90);
        assert_eq!((labels(&ticks)[0], title.as_str()), ("300", "year BCE"));
        let (ticks, _) = time_ticks(Era::Bce, -9.0, 1.0, 90);
        assert_eq!(
            (ticks.last().map(|tick| (tick.at, &*tick.label))),
            Some((0.0, "1")),
            "the last year before 1 CE"
        );
        let (ticks, title) = time_ticks(Era::Ce, 1850.0, 2021.0, 90);
        assert_eq!(labels(&ticks), ["1860", "1880", "1900", "1920", "1940", "1960", "1980", "2000", "2020"]);
        assert_eq!(title, "year CE");
    }

    #[test]
    fn short_spans_are_labelled_by_months_and_days() {
        let (ticks, title) = time_ticks(Era::Ce, 2015.0, 2017.0, 100);
        assert_eq!(labels(&ticks)[..2], ["2015-01", "2015-04"]);
        assert_eq!(title, "date");
        let start = decimal_year(2016, 40);
        let (ticks, _) = time_ticks(Era::Ce, start, start + 30.0 / 366.0, 100);
        assert_eq!(labels(&ticks)[..2], ["2016-02-11", "2016-02-16"]);
        let (ticks, _) = time_ticks(Era::Ce, 2015.0 - 3.0 / 365.0, 2015.0 + 2.5 / 365.0, 100);
        assert_eq!(
            labels(&ticks),
            ["2014-12-29", "2014-12-30", "2014-12-31", "2015-01-01", "2015-01-02", "2015-01-03"]
        );
        let (ticks, _) = time_ticks(Era::Ce, 2015.0 + 0.25 / 365.0, 2015.0 + 0.75 / 365.0, 100);
        assert_eq!(labels(&ticks), ["2015-01-01"]);
    }
}
