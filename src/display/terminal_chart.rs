use super::number::significant;
use crate::value::{Axis, Era, ShownSeries};

/// How many lines of text the plot takes.
const ROWS: usize = 10;

/// A character holds two by four dots.
const ACROSS: usize = 2;
const DOWN: usize = 4;

/// Two values further apart than so many median steps are not joined: the longest gap that is bridged in data, too.
const LONGEST_GAP_STEPS: f64 = 3.0;

/// A line chart of dots for a terminal, `columns` wide: a line for the best values, sparse dots for the 5–95 % range,
/// nothing where there is a gap. Nothing at all for fewer than three values, or values that are too large to scale.
pub fn terminal_chart(series: &ShownSeries, columns: usize, colour: bool) -> Option<String> {
    let (start, end) = series.axis.bounds()?;
    let known = series.nominal.iter().filter(|value| value.is_finite()).count();
    if known < 3 || end <= start {
        return None;
    }
    let (low, high) = extent(series)?;
    let marks = value_marks(low, high);
    let margin = marks.iter().map(|(_, label)| label.chars().count()).max().unwrap_or(0);
    let width = columns.checked_sub(margin + 2).filter(|width| *width >= 20)?;
    let place = Scale { start, end, low, high, width };
    let mut line = Dots::new(width);
    draw(&mut line, &place, series, &series.nominal, false);
    let mut band = Dots::new(width);
    if let Some(spread) = &series.spread {
        draw(&mut band, &place, series, &spread.low, true);
        draw(&mut band, &place, series, &spread.high, true);
    }
    let mut out = String::new();
    if !series.measure.unit.is_bare() {
        let unit = series.measure.unit.to_string();
        out += &format!("{unit:>margin$}\n");
    }
    let (dim, plain) = if colour { ("\x1b[2m", "\x1b[0m") } else { ("", "") };
    for row in 0..ROWS {
        let label = marks.iter().find(|(value, _)| place.row(*value) / DOWN == row);
        let (text, corner) = label.map_or(("", '│'), |(_, text)| (text.as_str(), '┤'));
        let mut text = format!("{text:>margin$} {corner}");
        for column in 0..width {
            let (best, range) = (line.cell(column, row), band.cell(column, row));
            match char::from_u32(0x2800 + u32::from(best | range)) {
                _ if best | range == 0 => text.push(' '),
                Some(letter) if best == 0 && colour => text += &format!("{dim}{letter}{plain}"),
                Some(letter) => text.push(letter),
                None => text.push(' '),
            }
        }
        out += text.trim_end();
        out.push('\n');
    }
    let [axis, labels] = time_axis(&series.axis, &place);
    out += &format!("{:margin$} └{axis}\n{:margin$}  {labels}\n", "", "");
    if let Some(spread) = &series.spread {
        let words = format!("line: best values; dots: 5–95 % of {} members", spread.members);
        out += &format!("{:margin$}  {dim}{words}{plain}\n", "");
    }
    Some(out)
}

/// Lowest and highest value of all that is drawn.
fn extent(series: &ShownSeries) -> Option<(f64, f64)> {
    let spread = series.spread.iter().flat_map(|spread| spread.low.iter().chain(&spread.high));
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for value in series.nominal.iter().chain(spread).filter(|value| value.is_finite()) {
        (low, high) = (low.min(*value), high.max(*value));
    }
    if !(high - low).is_finite() {
        return None;
    }
    // A constant stands in the middle.
    let least = 1e-9 * low.abs().max(high.abs());
    if high - low <= least {
        let half = if least > 0.0 { 0.5 * high.abs() } else { 1.0 };
        return Some((low - half, high + half));
    }
    Some((low, high))
}

/// From times and values to dots.
struct Scale {
    start: f64,
    end: f64,
    low: f64,
    high: f64,
    width: usize,
}

impl Scale {
    fn column(&self, year: f64) -> usize {
        let last = (self.width * ACROSS - 1) as f64;
        ((year - self.start) / (self.end - self.start) * last).round().clamp(0.0, last) as usize
    }

    fn row(&self, value: f64) -> usize {
        let last = (ROWS * DOWN - 1) as f64;
        ((self.high - value) / (self.high - self.low) * last).round().clamp(0.0, last) as usize
    }
}

/// The dots of a plot, eight to a character.
struct Dots {
    width: usize,
    cells: Vec<u8>,
}

impl Dots {
    fn new(width: usize) -> Self {
        Self { width, cells: vec![0; width * ROWS] }
    }

    fn set(&mut self, column: usize, row: usize) {
        /// The bits of a braille character, row by row, the left dot and the right one.
        const BITS: [[u8; ACROSS]; DOWN] = [[0x01, 0x08], [0x02, 0x10], [0x04, 0x20], [0x40, 0x80]];
        let bit = BITS.get(row % DOWN).and_then(|bits| bits.get(column % ACROSS)).copied().unwrap_or(0);
        if let Some(cell) = self.cells.get_mut((row / DOWN) * self.width + column / ACROSS) {
            *cell |= bit;
        }
    }

    fn cell(&self, column: usize, row: usize) -> u8 {
        self.cells.get(row * self.width + column).copied().unwrap_or(0)
    }
}

fn draw(dots: &mut Dots, place: &Scale, series: &ShownSeries, values: &[f64], sparse: bool) {
    let longest = LONGEST_GAP_STEPS * series.axis.median_step() * (1.0 + 1e-9);
    let mut before: Option<(f64, usize, usize)> = None;
    for (year, value) in series.axis.middles().into_iter().zip(values) {
        if !value.is_finite() {
            before = None;
            continue;
        }
        let (column, row) = (place.column(year), place.row(*value));
        let from = before.filter(|(last, _, _)| year - last <= longest);
        let (from_column, from_row) = from.map_or((column, row), |(_, column, row)| (column, row));
        join(dots, [from_column, from_row], [column, row], sparse);
        before = Some((year, column, row));
    }
}

/// Dots on the straight line from one dot to another; `sparse` keeps every other column.
fn join(dots: &mut Dots, from: [usize; 2], to: [usize; 2], sparse: bool) {
    let steps = from[0].abs_diff(to[0]).max(from[1].abs_diff(to[1])).max(1);
    let between = |from: usize, to: usize, step: usize| {
        (from as f64 + (to as f64 - from as f64) * step as f64 / steps as f64).round() as usize
    };
    for step in 0..=steps {
        let column = between(from[0], to[0], step);
        if !(sparse && column % ACROSS == 1) {
            dots.set(column, between(from[1], to[1], step));
        }
    }
}

/// The next of 1, 2, 5, 10, 20, … that is not below `length`.
fn round_step(length: f64) -> f64 {
    let power = 10f64.powf(length.log10().floor());
    let factor = [1.0, 2.0, 5.0].into_iter().find(|factor| factor * power >= length * (1.0 - 1e-9));
    power * factor.unwrap_or(10.0)
}

/// Round numbers between two, with their labels.
fn value_marks(low: f64, high: f64) -> Vec<(f64, String)> {
    let step = round_step((high - low) / 4.0);
    let decimals = (-step.log10().floor()).clamp(0.0, 12.0) as usize;
    let exponent = low.abs().max(high.abs()) >= 1e7 || step < 1e-5;
    let first = (low / step).ceil() as i64;
    let last = (high / step).floor() as i64;
    (first..=last.min(first.saturating_add(12)))
        .map(|number| {
            let value = number as f64 * step;
            let label = if exponent { significant(value, 4) } else { format!("{value:.decimals$}") };
            (value, label)
        })
        .collect()
}

/// The line under the plot with its marks, and their labels: round years or ages, the era at the last one.
fn time_axis(axis: &Axis, place: &Scale) -> [String; 2] {
    let marks = time_marks(axis, place.start, place.end);
    let mut line: Vec<char> = vec!['─'; place.width];
    let mut labels: Vec<char> = Vec::new();
    let last = marks.len().saturating_sub(1);
    for (number, (year, label)) in marks.iter().enumerate() {
        let column = place.column(*year) / ACROSS;
        let text = if number == last { label.clone() } else { without_era(axis.era, label) };
        let length = text.chars().count();
        // The era stands behind the number, which alone is centred.
        let centred = without_era(axis.era, &text).chars().count() / 2;
        let at = column.saturating_sub(centred).min(place.width.saturating_sub(length));
        if number > 0 && at < labels.len() + 1 {
            continue;
        }
        if let Some(mark) = line.get_mut(column) {
            *mark = '┬';
        }
        labels.resize(at, ' ');
        labels.extend(text.chars());
    }
    [line.into_iter().collect(), labels.into_iter().collect()]
}

/// The number of a label, where it is in the axis's own era.
fn without_era(era: Era, label: &str) -> String {
    label.strip_suffix(era.symbol()).and_then(|number| number.strip_suffix(' ')).unwrap_or(label).to_owned()
}

fn time_marks(axis: &Axis, start: f64, end: f64) -> Vec<(f64, String)> {
    let era = axis.era;
    let length = end - start;
    if era.is_age() {
        let (oldest, youngest) = (era.of_year(start), era.of_year(end));
        let step = round_step((oldest - youngest) / 6.0);
        let (first, last) = ((youngest / step).ceil() as i64, (oldest / step).floor() as i64);
        return (first..=last)
            .rev()
            .map(|number| era.to_year(number as f64 * step))
            .map(|year| (year, era.format(year)))
            .collect();
    }
    if length < 0.34 {
        let last = axis.len().saturating_sub(1);
        return vec![(start, axis.label(0)), (end, axis.label(last))];
    }
    if length < 4.0 {
        let months = [1.0, 2.0, 3.0, 6.0, 12.0].into_iter().find(|step| length * 12.0 / step <= 7.0);
        let step = months.unwrap_or(12.0);
        let (first, last) = ((start * 12.0 / step).ceil() as i64, (end * 12.0 / step).floor() as i64);
        return (first..=last)
            .map(|number| number as f64 * step)
            .map(|months| {
                let year = (months / 12.0).floor();
                let month = months - year * 12.0 + 1.0;
                (months / 12.0, if year < 1.0 { era.format(year) } else { format!("{year}-{month:02}") })
            })
            .collect();
    }
    let step = round_step(length / 6.0).max(1.0);
    let (first, last) = ((start / step).ceil() as i64 - 1, (end / step).floor() as i64);
    (first..=last)
        .map(|number| number as f64 * step)
        // There is no year zero: round years before the common era lie one year later on the axis.
        .map(|year| if year < 0.5 { year + 1.0 } else { year })
        .filter(|year| *year >= start && *year <= end && (*year > 1.5 || *year < 0.5))
        .map(|year| (year, era.format(year)))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::value::{Measure, Spread, Unit};
    use std::sync::Arc;

    fn series(axis: Axis, nominal: Vec<f64>, unit: &str) -> ShownSeries {
        let measure = Measure::of(Unit::parse(unit).unwrap());
        ShownSeries { axis: Arc::new(axis), measure, nominal, spread: None }
    }

    fn years(first: i64, last: i64) -> Axis {
        let starts: Vec<f64> = (first..=last).map(|year| year as f64).collect();
        let ends = starts.iter().map(|year| year + 1.0).collect();
        Axis::steps(starts, ends, Era::Ce)
    }

    fn is_dots(letter: char) -> bool {
        ('\u{2801}'..='\u{28ff}').contains(&letter)
    }

    /// The columns of characters that hold dots.
    fn inked(chart: &str) -> Vec<usize> {
        let mut columns: Vec<usize> = chart
            .lines()
            .flat_map(|line| {
                line.chars().enumerate().filter(|(_, letter)| is_dots(*letter)).map(|(at, _)| at)
            })
            .collect();
        columns.sort_unstable();
        columns.dedup();
        columns
    }

    #[test]
    fn a_rising_line_goes_from_the_lower_left_to_the_upper_right() {
        let rising = series(years(1901, 2000), (0..100).map(f64::from).collect(), "W/m2");
        let chart = terminal_chart(&rising, 70, false).unwrap();
        let plot: Vec<&str> = chart.lines().skip(1).take(ROWS).collect();
        let first_ink = |line: &str| line.chars().position(is_dots).unwrap();
        assert!(plot.windows(2).all(|pair| first_ink(pair[0]) > first_ink(pair[1])), "{chart}");
        assert!(chart.lines().all(|line| line.chars().count() <= 70), "{chart}");
        assert!(
            chart.starts_with("W/m2\n") && chart.contains("2000 CE") && chart.contains("50 ┤"),
            "{chart}"
        );
        assert!(!chart.contains("CE  "), "{chart}");
    }

    #[test]
    fn a_gap_stays_empty_and_a_single_value_between_gaps_is_a_dot() {
        let mut values: Vec<f64> = (0..100).map(|year| f64::from(year % 10)).collect();
        values[40..60].fill(f64::NAN);
        values[50] = 5.0;
        let chart = terminal_chart(&series(years(1901, 2000), values, "1"), 102, false).unwrap();
        let columns = inked(&chart);
        // Two columns of margin and axis, then one column a year.
        let inside: Vec<usize> = columns.into_iter().filter(|column| (44..62).contains(column)).collect();
        assert_eq!(inside.len(), 1, "{chart}");
        assert!((52..=54).contains(&inside[0]), "{chart}");
    }

    #[test]
    fn values_far_apart_in_time_are_not_joined() {
        let times: Vec<f64> = (0..50).chain(80..100).map(|time| 1900.0 + f64::from(time)).collect();
        let count = times.len();
        let chart =
            terminal_chart(&series(Axis::instants(times, Era::Ce), vec![1.0; count], "K"), 103, false);
        let chart = chart.unwrap();
        assert!(inked(&chart).iter().all(|column| !(58..80).contains(column)), "{chart}");
    }

    #[test]
    fn ages_run_from_old_to_young_and_carry_their_era_once() {
        let times: Vec<f64> = (0..=800).map(|age| 1950.0 - 1000.0 * f64::from(800 - age)).collect();
        let waves = (0..=800).map(|age| (f64::from(age) / 41.0).sin()).collect();
        let chart = terminal_chart(&series(Axis::instants(times, Era::Ka), waves, "1"), 80, false).unwrap();
        let labels = chart.lines().last().unwrap();
        assert!(labels.find("800").unwrap() < labels.find("200").unwrap(), "{chart}");
        assert!(labels.trim_end().ends_with("0 ka") && labels.matches("ka").count() == 1, "{chart}");
    }

    #[test]
    fn the_range_is_drawn_in_dots_and_said() {
        let mut wide = series(years(1901, 2000), vec![0.0; 100], "K");
        let spread =
            Spread { median: vec![0.0; 100], low: vec![-1.0; 100], high: vec![1.0; 100], members: 500 };
        wide.spread = Some(Arc::new(spread));
        let chart = terminal_chart(&wide, 80, false).unwrap();
        let plot: Vec<&str> = chart.lines().skip(1).take(ROWS).collect();
        assert!(plot[0].contains('⠁') && plot[ROWS - 1].contains('⡀'), "{chart}");
        assert!(chart.contains("5–95 % of 500 members"), "{chart}");
        assert!(terminal_chart(&wide, 80, true).unwrap().contains("\x1b[2m⠁\x1b[0m"));
    }

    #[test]
    fn there_is_no_year_zero_on_the_axis() {
        let times: Vec<f64> = (-60..=60).map(|time| f64::from(time) * 10.0).collect();
        let chart =
            terminal_chart(&series(Axis::instants(times, Era::Ce), vec![2.0; 121], "1"), 90, false).unwrap();
        let labels = chart.lines().last().unwrap();
        assert!(labels.contains("BCE") && !labels.contains(" 0 ") && labels.contains("CE"), "{chart}");
    }

    #[test]
    fn nothing_is_drawn_of_nothing() {
        assert!(terminal_chart(&series(years(1901, 2000), vec![f64::NAN; 100], "1"), 80, false).is_none());
        assert!(terminal_chart(&series(years(1901, 1902), vec![1.0, 2.0], "1"), 80, false).is_none());
        let huge = series(years(1901, 1904), vec![-1.7e308, 1.7e308, 0.0, 1.0], "1");
        assert!(terminal_chart(&huge, 80, false).is_none());
    }
}
