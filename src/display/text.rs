use std::borrow::Cow;

use super::html::Page;
use super::number::{plain, rounded, with_range};
use crate::value::{
    Attribution, Axis, Cell, Era, Events, ForcingKind, Measure, Shown, ShownSeries, Spread, Table, Unit,
    date_label,
};

/// The one line of text under an output: the numbers a person wants first.
pub fn line(shown: &Shown) -> String {
    match shown {
        Shown::Quantity { measure, nominal, spread } => quantity(*nominal, spread.as_deref(), measure),
        Shown::Instant { is_date: true, nominal, spread, .. } => date(*nominal, spread.as_deref()),
        Shown::Instant { era, nominal, spread, .. } => instant(*era, *nominal, spread.as_deref()),
        Shown::Series(series) => series_line(series),
        Shown::Bundle { components, total } => {
            let labels: Vec<&str> = components.iter().map(|(label, _)| &**label).collect();
            let word = if labels.len() == 1 { "component" } else { "components" };
            format!("{} {word} ({}); total: {}", labels.len(), labels.join(", "), series_line(total))
        }
        Shown::Span(span) => span.to_string(),
        Shown::Range(range) => format!("{}..{}{}", plain(range.low), plain(range.high), after(&range.unit)),
        Shown::Clock(clock) => clock.axis.describe(),
        Shown::Model(model, spreads) => {
            let parameters: Vec<String> = model
                .parameters()
                .into_iter()
                .zip(spreads.iter().map(Some).chain(std::iter::repeat(None)))
                .map(|((name, unit, values), spread)| {
                    let number = ranged(values.first(), spread.and_then(|spread| spread.as_deref()), 0);
                    format!("{name} {number}{}", if unit == "1" { String::new() } else { format!(" {unit}") })
                })
                .collect();
            format!("two-layer model: {}", parameters.join(", "))
        }
        Shown::Attribution(attribution) => attribution_line(attribution),
        Shown::Events(events) => events_line(events),
        Shown::Table(table) => {
            let columns: Vec<String> = table.columns.iter().map(heading).collect();
            let word = if table.rows.len() == 1 { "row" } else { "rows" };
            format!("{} {word}: {}", table.rows.len(), columns.join(", "))
        }
        Shown::Text(text) => text.to_string(),
        Shown::List(items) => {
            format!("[{}]", items.iter().map(|(_, item)| line(item)).collect::<Vec<_>>().join(", "))
        }
    }
}

/// All of an output as text: the line, and the table where there is one.
pub fn text(shown: &Shown) -> String {
    match shown {
        Shown::Attribution(_) | Shown::Events(_) | Shown::Table(_) => match tabulated(shown) {
            Some((content, beneath)) => table(&content) + &beneath,
            None => String::new(),
        },
        Shown::Bundle { components, total } => {
            let width = components.iter().map(|(label, _)| label.chars().count()).max().unwrap_or(0).max(5);
            let row =
                |label: &str, series: &ShownSeries| format!("{label:width$}  {}\n", series_line(series));
            let rows: String = components.iter().map(|(label, series)| row(label, series)).collect();
            rows + &row("total", total)
        }
        Shown::List(items) => items
            .iter()
            .map(|(label, item)| {
                let line = line(item);
                if label.is_empty() || **label == line { line + "\n" } else { format!("{label}: {line}\n") }
            })
            .collect(),
        Shown::Series(series) => series_line(series) + "\n" + &extremes(series),
        Shown::Quantity { .. }
        | Shown::Instant { .. }
        | Shown::Span(_)
        | Shown::Range(_)
        | Shown::Clock(_)
        | Shown::Model(..)
        | Shown::Text(_) => line(shown) + "\n",
    }
}

/// All of an output as text, as it stands on a page.
pub fn page(shown: &Shown, page: &Page<'_>) -> String {
    let mut out = String::new();
    if let Some(expression) = page.expression {
        out += &format!("{expression}\n");
    }
    out += &text(shown);
    for note in page.notes {
        out += &format!("– {note}\n");
    }
    out += page.footer;
    out.trim_end().to_owned()
}

/// The table of an output that is one, with the lines beneath it.
pub(super) fn tabulated(shown: &Shown) -> Option<(Cow<'_, Table>, String)> {
    match shown {
        Shown::Attribution(attribution) => Some((Cow::Owned(attribution.table()), diagnostics(attribution))),
        Shown::Events(events) => Some((Cow::Owned(events.table()), String::new())),
        Shown::Table(content) => Some((Cow::Borrowed(content), String::new())),
        Shown::Quantity { .. }
        | Shown::Instant { .. }
        | Shown::Series(_)
        | Shown::Bundle { .. }
        | Shown::Span(_)
        | Shown::Range(_)
        | Shown::Clock(_)
        | Shown::Model(..)
        | Shown::Text(_)
        | Shown::List(_) => None,
    }
}

/// What kind of forcing a number is, where that is declared.
fn kind(measure: &Measure) -> String {
    match &measure.forcing {
        Some(forcing) if forcing.kind != ForcingKind::Undeclared => format!(", {forcing}"),
        _ => String::new(),
    }
}

fn after(unit: &Unit) -> String {
    if unit.is_bare() { String::new() } else { format!(" {unit}") }
}

/// A number with its range at one column of the members, where it has one.
fn ranged(nominal: f64, spread: Option<&Spread>, column: usize) -> String {
    let range = spread.and_then(|spread| spread.low.get(column).zip(spread.high.get(column)));
    range.map_or_else(|| plain(nominal), |(low, high)| with_range(nominal, *low, *high))
}

fn quantity(nominal: f64, spread: Option<&Spread>, measure: &Measure) -> String {
    let number = ranged(nominal, spread, 0);
    let unit = after(&measure.unit);
    let kind = kind(measure);
    match number.split_once(" [") {
        Some((value, range)) => format!("{value}{unit} [{range}{kind}"),
        None => number + &unit + &kind,
    }
}

fn date(nominal: f64, spread: Option<&Spread>) -> String {
    let nominal = date_label(nominal);
    match spread.and_then(|spread| spread.low.first().zip(spread.high.first())) {
        None => nominal,
        Some((low, high)) => format!("{nominal} [{}, {}]", date_label(*low), date_label(*high)),
    }
}

fn instant(era: Era, nominal: f64, spread: Option<&Spread>) -> String {
    let range = spread.and_then(|spread| spread.low.first().zip(spread.high.first()));
    match range {
        None => era.format(nominal),
        Some((low, high)) => {
            let (low, high) = (era.of_year(*low), era.of_year(*high));
            let number = with_range(era.of_year(nominal), low.min(high), low.max(high));
            match number.split_once(" [") {
                Some((value, range)) => format!("{value} {} [{range}", era.symbol()),
                None => format!("{number} {}", era.symbol()),
            }
        }
    }
}

fn series_line(series: &ShownSeries) -> String {
    let unit = after(&series.measure.unit);
    let is_known = |value: &f64| !value.is_nan();
    let axis = series.axis.describe();
    let (Some(first), Some(last)) =
        (series.nominal.iter().position(is_known), series.nominal.iter().rposition(is_known))
    else {
        return format!("{axis}: all gaps");
    };
    let at = |index: usize| series.nominal.get(index).copied().unwrap_or(f64::NAN);
    let mut words = match &series.spread {
        None => format!("{axis}: first {}, last {}{unit}", plain(at(first)), plain(at(last))),
        Some(spread) => {
            let ends = [first, last].map(|index| ranged(at(index), Some(spread), index));
            format!("{axis}: first {}, last {}{unit}", ends[0], ends[1])
        }
    };
    let gaps = series.nominal.iter().filter(|value| value.is_nan()).count();
    words += &kind(&series.measure);
    if gaps > 0 {
        words += &format!("; {gaps} {}", if gaps == 1 { "gap" } else { "gaps" });
    }
    words
}

/// The lowest and the highest value and when they were, where there are more than a few.
fn extremes(series: &ShownSeries) -> String {
    let known = || series.nominal.iter().enumerate().filter(|(_, value)| !value.is_nan());
    let lowest = known().min_by(|left, right| left.1.total_cmp(right.1));
    let highest = known().max_by(|left, right| left.1.total_cmp(right.1));
    match (lowest, highest) {
        (Some((low, lowest)), Some((high, highest))) if known().count() > 3 && lowest < highest => format!(
            "lowest {} ({}), highest {} ({})\n",
            plain(*lowest),
            series.axis.label(low),
            plain(*highest),
            series.axis.label(high)
        ),
        _ => String::new(),
    }
}

fn events_line(events: &Events) -> String {
    let axis = events.axis();
    let word = if axis.len() == 1 { "event" } else { "events" };
    let mut words = format!("{} {word}", axis.len());
    if let Some(last) = axis.len().checked_sub(1) {
        words += &format!(", {} to {}", axis.label(0), axis.label(last));
    }
    if let Some(sizes) = &events.sizes {
        let known = || sizes.values.iter().copied().filter(|value| !value.is_nan());
        let (low, high) = (known().fold(f64::INFINITY, f64::min), known().fold(f64::NEG_INFINITY, f64::max));
        let unit = after(&sizes.measure.unit);
        words += &if low <= high {
            format!("; {} {} to {}{unit}", sizes.name, plain(low), plain(high))
        } else {
            format!("; {} not known", sizes.name)
        };
    }
    words
}

fn attribution_line(attribution: &Attribution) -> String {
    let drivers: Vec<String> = attribution
        .drivers
        .iter()
        .map(|driver| {
            let number = with_range(driver.value, driver.low, driver.high);
            match number.split_once(" [") {
                Some((value, range)) => format!("{} {value}{} [{range}", driver.label, after(&driver.unit)),
                None => format!("{} {number}{}", driver.label, after(&driver.unit)),
            }
        })
        .collect();
    let statistics = &attribution.statistics;
    format!("{}; n = {}, R2 = {:.3}", drivers.join(", "), statistics.count, statistics.r_squared)
}

fn diagnostics(attribution: &Attribution) -> String {
    let statistics = &attribution.statistics;
    let times = span_words(&attribution.axis);
    format!(
        "  n = {} ({times}), R2 {:.3}, Durbin–Watson {:.2}{}, residual autocorrelation {:.2}, condition number {:.1}, log-likelihood {:.2}, AIC {:.2}\n",
        statistics.count,
        statistics.r_squared,
        statistics.durbin_watson,
        if statistics.rho.is_some() { " (after whitening)" } else { "" },
        statistics.residual_autocorrelation,
        statistics.condition_number,
        statistics.log_likelihood,
        statistics.akaike
    )
}

fn span_words(axis: &Axis) -> String {
    let words = axis.describe();
    words.split_once(", ").map_or(words.clone(), |(_, span)| span.to_owned())
}

/// A column's heading with its unit: `contribution (degC)`.
fn heading(column: &crate::value::Column) -> String {
    match &column.unit {
        Some(unit) if unit != "1" => format!("{} ({unit})", column.name),
        _ => column.name.clone(),
    }
}

/// How many rows of a long table are shown at its beginning and at its end.
const HEAD: usize = 20;
const TAIL: usize = 5;

/// A table laid out for reading: a long one is cut.
pub(super) struct Layout {
    /// Column by column, the heading first; numbers of a column have trailing spaces in place of missing decimals.
    pub(super) columns: Vec<Vec<String>>,
    /// How many rows there are.
    pub(super) rows: usize,
    /// After so many rows, so many were left out.
    pub(super) cut: Option<(usize, usize)>,
}

/// Lay out a table: the ends of ranges in one column with their middle, empty columns left out.
pub(super) fn layout(content: &Table) -> Layout {
    let content = &with_ranges(content);
    let rows = content.rows.len();
    let cut = (rows > HEAD + TAIL + 1).then(|| (HEAD, rows - HEAD - TAIL));
    let shown: Vec<&Vec<Cell>> = match cut {
        Some(_) => content.rows.iter().take(HEAD).chain(content.rows.iter().skip(rows - TAIL)).collect(),
        None => content.rows.iter().collect(),
    };
    let columns = content
        .columns
        .iter()
        .enumerate()
        .filter(|(index, _)| {
            content.rows.iter().any(|row| row.get(*index).is_some_and(|cell| *cell != Cell::Empty))
        })
        .map(|(index, column)| {
            let cells: Vec<&Cell> = shown.iter().filter_map(|row| row.get(index)).collect();
            std::iter::once(heading(column)).chain(aligned(&cells)).collect()
        })
        .collect();
    Layout { columns, rows: shown.len(), cut }
}

/// A table as text: aligned on the decimal point, a long one cut with a count, notes beneath.
pub fn table(content: &Table) -> String {
    let Layout { columns, rows, cut } = layout(content);
    let widths: Vec<usize> = columns
        .iter()
        .map(|cells| cells.iter().map(|cell| cell.chars().count()).max().unwrap_or(0))
        .collect();
    let mut out = String::new();
    for line in 0..=rows {
        let cells: Vec<String> = columns
            .iter()
            .zip(&widths)
            .enumerate()
            .map(|(number, (cells, width))| {
                let cell = cells.get(line).map_or("", String::as_str);
                let padding = " ".repeat(width - cell.chars().count());
                // Words begin at the left, numbers end at the right.
                if number == 0 { format!("{cell}{padding}") } else { format!("{padding}{cell}") }
            })
            .collect();
        out += &format!("  {}\n", cells.join("  ").trim_end());
        if let Some((after, left_out)) = cut
            && line == after
        {
            out += &format!("  {}\n", left_out_words(left_out));
        }
    }
    for note in &content.notes {
        out += &format!("  {note}\n");
    }
    out
}

/// What stands where rows were left out.
pub(super) fn left_out_words(rows: usize) -> String {
    format!("… {rows} rows more …")
}

/// The same table with `x`, `x_low` and `x_high` in one column: `0.81 [0.66, 0.96]`.
fn with_ranges(content: &Table) -> Table {
    let mut merged = content.clone();
    let names: Vec<String> = content.columns.iter().map(|column| column.name.clone()).collect();
    for (index, name) in names.iter().enumerate().rev() {
        let low = names.get(index + 1).is_some_and(|low| *low == format!("{name}_low"));
        let high = names.get(index + 2).is_some_and(|high| *high == format!("{name}_high"));
        if !(low && high) {
            continue;
        }
        merged.columns.drain(index + 1..index + 3);
        for row in &mut merged.rows {
            let ends: Vec<Cell> = row.drain(index + 1..index + 3).collect();
            if let (Some(cell), [low, high]) = (row.get_mut(index), ends.as_slice())
                && *cell != Cell::Empty
            {
                let text = |cell: &Cell| aligned(&[cell]).concat();
                *cell = Cell::Text(format!("{} [{}, {}]", text(cell), text(low), text(high)).into());
            }
        }
    }
    merged
}

/// Numbers of one column with as many decimals as the column needs, words as they are.
fn aligned(cells: &[&Cell]) -> Vec<String> {
    let texts: Vec<String> = cells
        .iter()
        .map(|cell| match cell {
            Cell::Text(text) => text.to_string(),
            Cell::Number(value) => plain(*value),
            Cell::Rounded(value, decimals) => rounded(*value, *decimals),
            Cell::Empty => String::new(),
        })
        .collect();
    let decimals = |text: &str| text.split_once('.').map_or(0, |(_, decimals)| decimals.len());
    let numbers: Vec<bool> =
        cells.iter().map(|cell| matches!(cell, Cell::Number(_) | Cell::Rounded(..))).collect();
    let most = texts
        .iter()
        .zip(&numbers)
        .filter(|(text, number)| **number && !text.contains('e'))
        .map(|(text, _)| decimals(text))
        .max()
        .unwrap_or(0);
    texts
        .into_iter()
        .zip(numbers)
        .map(|(text, number)| {
            if !number {
                return text;
            }
            // Spaces stand for missing decimals, so that the points stand in one column.
            let missing = if text.contains('.') {
                most - decimals(&text).min(most)
            } else if most > 0 {
                most + 1
            } else {
                0
            };
            text + &" ".repeat(missing)
        })
        .collect()
}
