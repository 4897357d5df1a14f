//! Which figure a result is drawn as, if any.

use std::ops::Range;

use super::text;
use super::ticks::{time_ticks, value_ticks};
use crate::value::{
    Axis, AxisKind, Band, Dimension, Figure, ForcingKind, Ink, Line, Mark, Measure, Panel, PlotAxis, Reading,
    Shown, ShownSeries, superscript,
};

/// What a figure says about where its result comes from.
#[derive(Clone, Copy, Debug)]
pub struct Caption<'a> {
    /// The expression, as it was written.
    pub expression: &'a str,
    /// The fingerprint, short.
    pub fingerprint: &'a str,
    /// The names whose change moved it.
    pub refreshed_by: &'a [String],
}

/// Up to so many steps are drawn as stairs, each as long as it lasts; more are a line through their middles.
const STAIRS: usize = 80;

/// Up to so many instants have a dot each.
const DOTS: usize = 60;

/// So many values beside each other can be told apart in any drawing; of more, the outermost of their neighbours count.
const DISTINCT: usize = 10_000;

/// How many components of a bundle have a style and a label of their own.
const NUMBERED: usize = 12;

/// The small print under a result: the fingerprint, and what it was refreshed by.
pub fn footer(caption: &Caption<'_>) -> String {
    match caption.refreshed_by {
        [] => format!("fingerprint {}", caption.fingerprint),
        names => format!("fingerprint {}, refreshed by {}", caption.fingerprint, names.join(", ")),
    }
}

/// The figure of a series or a bundle; nothing for other results, and for axes without any value.
pub fn chart(shown: &Shown, caption: &Caption<'_>) -> Option<Figure> {
    match shown {
        Shown::Series(series) => {
            let marks = [band(series, 1.0, Ink::Numbered(0)), line(series, 1.0, Ink::Numbered(0), None)];
            figure(caption, series, "series", &text::text(shown), marks.into(), Vec::new())
        }
        Shown::Bundle { components, total } => bundle(components, total, caption, &text::text(shown)),
        Shown::Quantity { .. }
        | Shown::Instant { .. }
        | Shown::Events(_)
        | Shown::Span(_)
        | Shown::Range(_)
        | Shown::Clock(_)
        | Shown::Model(..)
        | Shown::Attribution(_)
        | Shown::Table(_)
        | Shown::Text(_)
        | Shown::List(_) => None,
    }
}

fn bundle(
    components: &[(std::sync::Arc<str>, ShownSeries)],
    total: &ShownSeries,
    caption: &Caption<'_>,
    numbers: &str,
) -> Option<Figure> {
    // A component may have been given in another unit than the sum.
    let factor = |part: &ShownSeries| part.measure.unit.factor_to(&total.measure.unit).unwrap_or(f64::NAN);
    let mut by_size: Vec<(usize, f64)> =
        components.iter().map(|(_, part)| largest(part) * factor(part).abs()).enumerate().collect();
    by_size.sort_by(|left, right| right.1.total_cmp(&left.1));
    let mut numbered: Vec<usize> = by_size.iter().map(|(index, _)| *index).take(NUMBERED).collect();
    numbered.sort_unstable();
    let (mut bands, mut faint, mut lines, mut notes) = (Vec::new(), Vec::new(), Vec::new(), Vec::new());
    for (index, (label, part)) in components.iter().enumerate() {
        if part.nominal.iter().all(|value| !value.is_finite()) {
            notes.push(format!("{label}: all gaps"));
        }
        match numbered.iter().position(|chosen| *chosen == index) {
            Some(number) => {
                let ink = Ink::Numbered(number);
                bands.push(band(part, factor(part), ink));
                lines.push(line(part, factor(part), ink, Some(label.to_string())));
            }
            None => faint.push(line(part, factor(part), Ink::Faint, None)),
        }
    }
    if !faint.is_empty() {
        notes.push(format!("{} smaller components are grey and without label", faint.len()));
    }
    // The sum of one component is that component.
    if components.len() > 1 {
        bands.push(band(total, 1.0, Ink::Foremost));
        lines.push(line(total, 1.0, Ink::Foremost, Some("total".to_owned())));
    }
    let marks = bands.into_iter().chain(faint).chain(lines).collect();
    let word = if components.len() == 1 { "component" } else { "components" };
    let kind = format!("bundle of {} {word}", components.len());
    figure(caption, total, &kind, numbers, marks, notes)
}

fn largest(series: &ShownSeries) -> f64 {
    series.nominal.iter().filter(|value| value.is_finite()).fold(0.0, |most, value| most.max(value.abs()))
}

fn figure(
    caption: &Caption<'_>,
    series: &ShownSeries,
    kind: &str,
    numbers: &str,
    marks: Vec<Mark>,
    mut notes: Vec<String>,
) -> Option<Figure> {
    let horizontal = time_axis(&series.axis)?;
    let vertical = value_axis(&series.measure, &marks);
    if marks.iter().all(is_empty) {
        notes.push("all gaps: there is nothing to draw".to_owned());
    }
    let title: Vec<&str> = caption.expression.split_whitespace().collect();
    let mut subtitle = format!("{kind}, {}", series.axis.describe());
    if let Some(reference) = series.measure.forcing.as_ref().and_then(|forcing| forcing.reference.as_ref()) {
        subtitle += &format!(", change from {reference}");
    }
    if let Some(spread) = &series.spread {
        subtitle += &format!("; band 5–95 %, {} members", spread.members);
    }
    Some(Figure {
        title: title.join(" "),
        subtitle,
        description: description(&horizontal.title, &vertical.title, numbers),
        notes,
        footer: footer(caption),
        panels: vec![Panel { horizontal, vertical, marks }],
    })
}

/// The figure in words: what is drawn against what, and the numbers that stand under it.
fn description(along: &str, up: &str, numbers: &str) -> String {
    let lines: Vec<String> =
        numbers.lines().map(|line| line.split_whitespace().collect::<Vec<_>>().join(" ")).collect();
    format!("Line chart of {up} by {along}. {}.", lines.join(". "))
}

fn is_empty(mark: &Mark) -> bool {
    match mark {
        Mark::Band(band) => band.runs.is_empty(),
        Mark::Line(line) => line.runs.is_empty(),
    }
}

fn forcing_words(kind: ForcingKind) -> String {
    if kind == ForcingKind::Undeclared { "forcing".to_owned() } else { format!("{kind} forcing") }
}

fn temperature_words(measure: &Measure) -> &'static str {
    match measure.reading {
        Reading::Difference => "temperature difference",
        Reading::Undeclared => "temperature",
    }
}

fn time_axis(axis: &Axis) -> Option<PlotAxis> {
    let (start, end) = axis.bounds()?;
    // A single instant stands in the middle of two units of its era.
    let room = if end > start { 0.0 } else { axis.era.years_per_unit().max(start.abs() * 1e-9) };
    let (low, high) = (start - room, end + room);
    let (ticks, title) = time_ticks(axis.era, low, high, 100);
    Some(PlotAxis { title, low, high, turned: false, ticks })
}

fn value_axis(measure: &Measure, marks: &[Mark]) -> PlotAxis {
    let mut range: Option<(f64, f64)> = None;
    let mut include = |low: f64, high: f64| {
        let (least, most) = range.unwrap_or((low, high));
        range = Some((least.min(low), most.max(high)));
    };
    for mark in marks {
        match mark {
            Mark::Band(band) => band.runs.iter().flatten().for_each(|[_, low, high]| include(*low, *high)),
            Mark::Line(line) => line.runs.iter().flatten().for_each(|[_, value]| include(*value, *value)),
        }
    }
    let (low, high) = with_room(range.unwrap_or((0.0, 1.0)));
    let (ticks, power) = value_ticks(low, high, 8);
    let unit = measure.unit.typeset();
    let raised = superscript(&power.to_string());
    let unit = match (power, unit.as_str()) {
        (0, unit) => unit.to_owned(),
        (_, "") => format!("10{raised}"),
        (_, unit) => format!("10{raised} {unit}"),
    };
    let words = match &measure.forcing {
        Some(forcing) => forcing_words(forcing.kind),
        None if measure.unit.dimension() == Dimension::TEMPERATURE => temperature_words(measure).to_owned(),
        None => String::new(),
    };
    let title = match (words.as_str(), unit.as_str()) {
        ("", "") => "value, without unit".to_owned(),
        ("", unit) => unit.to_owned(),
        (words, "") => words.to_owned(),
        (words, unit) => format!("{words} ({unit})"),
    };
    PlotAxis { title, low, high, turned: false, ticks }
}

/// The range of the values with some room about them, and down to nothing where that is near.
fn with_room((mut low, mut high): (f64, f64)) -> (f64, f64) {
    // Half of the range, so that the range of the largest numbers is finite.
    let half = high / 2.0 - low / 2.0;
    let size = low.abs().max(high.abs());
    if half <= size * 1e-12 || half < 1e-306 {
        // One value is no range: it stands in the middle of one that suits its size.
        let about = if size < 1e-305 { 1.0 } else { size * 0.1 };
        let middle = low / 2.0 + high / 2.0;
        return (bounded(middle - about), bounded(middle + about));
    }
    if low > 0.0 && low < half {
        low = 0.0;
    } else if high < 0.0 && -high < half {
        high = 0.0;
    }
    let room = half * 0.1;
    let below = if low.abs() < f64::MIN_POSITIVE { 0.0 } else { room };
    let above = if high.abs() < f64::MIN_POSITIVE { 0.0 } else { room };
    (bounded(low - below), bounded(high + above))
}

fn bounded(value: f64) -> f64 {
    value.clamp(-f64::MAX, f64::MAX)
}

/// The numbers of the values in each stretch without a gap. A gap is a value that is missing, steps that are missing,
/// or more time between instants than is bridged by rule: three median distances.
fn stretches(axis: &Axis, known: &dyn Fn(usize) -> bool) -> Vec<Range<usize>> {
    let allowed_years = match axis.kind {
        AxisKind::Steps => 0.01 * axis.median_step(),
        AxisKind::Instants => 3.0 * axis.median_step(),
    };
    let mut runs: Vec<Range<usize>> = Vec::new();
    for (index, start) in axis.starts().iter().enumerate() {
        if !known(index) {
            continue;
        }
        let before = index.checked_sub(1).and_then(|before| axis.ends().get(before));
        match (before, runs.last_mut()) {
            (Some(end), Some(run)) if run.end == index && start - end <= allowed_years * (1.0 + 1e-9) => {
                run.end = index + 1;
            }
            _ => runs.push(index..index + 1),
        }
    }
    runs
}

/// The numbers of a stretch that are drawn: of very many only the first, the lowest, the highest and the last of as many
/// as nobody can tell apart.
fn drawn(run: Range<usize>, axis: &Axis, range: &dyn Fn(usize) -> (f64, f64)) -> Vec<usize> {
    let together = axis.len() / DISTINCT;
    if together < 2 {
        return run.collect();
    }
    let mut kept = Vec::new();
    for first in run.clone().step_by(together) {
        let last = (first + together - 1).min(run.end - 1);
        let (mut lowest, mut highest) = (first, first);
        for index in first..=last {
            if range(index).0 < range(lowest).0 {
                lowest = index;
            }
            if range(index).1 > range(highest).1 {
                highest = index;
            }
        }
        let mut wanted = [first, lowest, highest, last];
        wanted.sort_unstable();
        for index in wanted {
            if kept.last() != Some(&index) {
                kept.push(index);
            }
        }
    }
    kept
}

/// Where value number `index` is drawn: at its instant or the middle of its step, or from end to end of a short row of
/// steps.
fn places(axis: &Axis, index: usize) -> impl Iterator<Item = f64> {
    let start = axis.starts().get(index).copied().unwrap_or(f64::NAN);
    let end = axis.ends().get(index).copied().unwrap_or(start);
    let pair = match axis.kind {
        AxisKind::Instants => [Some(start), None],
        AxisKind::Steps if axis.len() <= STAIRS => [Some(start), Some(end)],
        AxisKind::Steps => [Some(start / 2.0 + end / 2.0), None],
    };
    pair.into_iter().flatten()
}

fn line(series: &ShownSeries, factor: f64, ink: Ink, label: Option<String>) -> Mark {
    let value = |index: usize| series.nominal.get(index).map_or(f64::NAN, |value| value * factor);
    let runs = stretches(&series.axis, &|index| value(index).is_finite())
        .into_iter()
        .map(|run| {
            drawn(run, &series.axis, &|index| (value(index), value(index)))
                .into_iter()
                .flat_map(|index| places(&series.axis, index).map(move |place| [place, value(index)]))
                .collect()
        })
        .collect();
    let dots = series.axis.kind == AxisKind::Instants && series.axis.len() <= DOTS;
    Mark::Line(Line { runs, ink, label, dots })
}

fn band(series: &ShownSeries, factor: f64, ink: Ink) -> Mark {
    let range = |index: usize| {
        let spread = series.spread.as_ref()?;
        let (low, high) = (spread.low.get(index)? * factor, spread.high.get(index)? * factor);
        // A gap of the line is one of its band.
        let known = series.nominal.get(index).is_some_and(|value| value.is_finite());
        (known && low.is_finite() && high.is_finite()).then_some((low.min(high), low.max(high)))
    };
    let runs = stretches(&series.axis, &|index| range(index).is_some())
        .into_iter()
        .map(|run| {
            drawn(run, &series.axis, &|index| range(index).unwrap_or((f64::NAN, f64::NAN)))
                .into_iter()
                .filter_map(|index| Some((index, range(index)?)))
                .flat_map(|(index, (low, high))| {
                    places(&series.axis, index).map(move |place| [place, low, high])
                })
                .collect()
        })
        .collect();
    Mark::Band(Band { runs, ink })
}
