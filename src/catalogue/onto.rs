//! Bringing series onto one axis: the clock in force, a record's own steps, or an axis asked for.

use std::borrow::Cow;
use std::sync::Arc;

use super::call::{Context, Path, Stop};
use super::filters::cells;
use crate::base::Fault;
use crate::science::resample::{self, Plan};
use crate::science::smoothing;
use crate::value::{Axis, AxisKind, Block, Bundle, Content, Measure, Series, Standing};

/// Several series on one axis.
pub(super) struct Aligned {
    pub(super) axis: Arc<Axis>,
    pub(super) standing: Standing,
    pub(super) blocks: Vec<Block>,
}

fn view(axis: &Axis) -> resample::Axis<'_> {
    match axis.kind {
        AxisKind::Steps => resample::Axis::Steps { starts: axis.starts(), ends: axis.ends() },
        AxisKind::Instants => resample::Axis::Instants { times: axis.starts() },
    }
}

/// The series on `axis`, with a note of what was done; `name` is what the user calls it.
pub(super) fn bring(
    context: &dyn Context,
    series: &Series,
    name: &str,
    axis: &Arc<Axis>,
) -> Result<Block, Stop> {
    if Arc::ptr_eq(&series.axis, axis) || *series.axis == **axis {
        return Ok(series.values.clone());
    }
    let valid: Vec<bool> = series.values.member(0).iter().map(|value| !value.is_nan()).collect();
    let plan =
        Plan::new(view(&series.axis), &valid, view(axis), series.longest_gap_years).map_err(|error| {
            Fault::new("internal", format!("`{name}` cannot be brought onto the clock: {error:?}"))
        })?;
    let mut out = vec![f64::NAN; series.values.rows() * axis.len()];
    plan.apply_to_members(series.values.data(), &mut out, context.cancellation()).map_err(
        |error| match error {
            resample::ResampleError::Cancelled => Stop::from(crate::base::Cancelled),
            other => {
                Fault::new("internal", format!("`{name}` cannot be brought onto the clock: {other:?}")).into()
            }
        },
    )?;
    let gaps = plan.not_covered() + plan.too_little_covered();
    if gaps >= axis.len() {
        return Err(Fault::new("no-overlap", format!("`{name}` has no value inside the time asked for"))
            .detail(format!("{name}: {}", series.axis.describe()))
            .detail(format!("asked for: {}", axis.describe()))
            .help("check the era of both, and whether one is an age (ka, cal BP) and the other a year (CE)")
            .into());
    }
    if context.path() == Path::Nominal
        && let Some(words) = words(series, name, axis, &plan, gaps)
    {
        context.note(words);
    }
    Ok(Block::new(series.values.rows(), axis.len(), out))
}

/// The series on `axis` by a method that the user chose.
pub(super) fn bring_by(
    context: &dyn Context,
    series: &Series,
    name: &str,
    axis: &Arc<Axis>,
    method: &'static str,
) -> Result<Block, Stop> {
    let (times, at) = (series.axis.middles(), axis.middles());
    let nominal_gaps = if method == "mean" {
        Vec::new()
    } else {
        in_long_gaps(&times, series.values.member(0), &at, series.longest_gap_years)
    };
    let values = series.values.map_rows(axis.len(), |row, out| {
        // Gaps take no part in a line or a curve; one that is too long to bridge is put back afterwards.
        let (known_times, known) = without_gaps(&times, row);
        match method {
            "mean" => {
                let ((starts, ends), (target_starts, target_ends)) = (cells(&series.axis), cells(axis));
                smoothing::overlap_means(&starts, &ends, row, &target_starts, &target_ends, out);
            }
            "linear" => smoothing::linear(&known_times, &known, &at, out),
            "monotone_cubic" => smoothing::monotone_cubic(&known_times, &known, &at, out),
            "nearest" => smoothing::nearest(&known_times, &known, &at, out),
            _ => {
                for (target, time) in out.iter_mut().zip(&at) {
                    let place = times.partition_point(|other| *other < time - 1e-6);
                    let found = times.get(place).filter(|other| (**other - time).abs() <= 1e-6);
                    *target = found.and_then(|_| row.get(place)).copied().unwrap_or(f64::NAN);
                }
            }
        }
        for (target, gap) in out.iter_mut().zip(&nominal_gaps) {
            if *gap {
                *target = f64::NAN;
            }
        }
    });
    let gaps = values.member(0).iter().filter(|value| value.is_nan()).count();
    if gaps >= axis.len() {
        return Err(Fault::new("no-overlap", format!("`{name}` has no value inside the time asked for"))
            .detail(format!("{name}: {}", series.axis.describe()))
            .detail(format!("asked for: {}", axis.describe()))
            .into());
    }
    if context.path() == Path::Nominal {
        let left = if gaps > 0 { left_as_gaps(gaps, axis) } else { String::new() };
        let method = method.replace('_', " ");
        context.note(format!(
            "{name}: {} brought onto {} by the method {method}{left}",
            series.axis.describe(),
            axis.describe()
        ));
    }
    Ok(values)
}

/// The values that are there, with their times.
fn without_gaps<'a>(times: &'a [f64], values: &'a [f64]) -> (Cow<'a, [f64]>, Cow<'a, [f64]>) {
    if !values.iter().any(|value| value.is_nan()) {
        return (Cow::Borrowed(times), Cow::Borrowed(values));
    }
    let known = times.iter().zip(values).filter(|(_, value)| !value.is_nan());
    let (times, values): (Vec<f64>, Vec<f64>) = known.unzip();
    (Cow::Owned(times), Cow::Owned(values))
}

/// Which of the ascending times `at` lie in a gap that is longer than may be bridged; empty where there is no such gap.
fn in_long_gaps(times: &[f64], values: &[f64], at: &[f64], longest_gap_years: f64) -> Vec<bool> {
    let (known, _) = without_gaps(times, values);
    let is_long = |before: f64, after: f64| after - before > longest_gap_years * (1.0 + 1e-9);
    if known.windows(2).all(|pair| !is_long(pair[0], pair[1])) {
        return Vec::new();
    }
    let mut place = 0;
    at.iter()
        .map(|at| {
            while known.get(place + 1).is_some_and(|next| next <= at) {
                place += 1;
            }
            let bounds = known.get(place).zip(known.get(place + 1));
            bounds.is_some_and(|(before, after)| before < at && is_long(*before, *after))
        })
        .collect()
}

/// What was done, in words; nothing where values were only taken as they are, all of them.
fn words(series: &Series, name: &str, axis: &Axis, plan: &Plan, gaps: usize) -> Option<String> {
    let partly = plan.partly_covered();
    let taken = axis.len() - gaps;
    if partly == 0 && (0..axis.len()).all(|index| plan.entries(index).count() <= 1) {
        let kind = series.axis.kind.word();
        let mut words = format!("{name}: {taken} of its {} {kind} taken as they are", series.axis.len());
        if gaps > 0 {
            words += &left_as_gaps(gaps, axis);
        }
        return Some(words).filter(|_| gaps > 0 || taken < series.axis.len());
    }
    let how = if axis.median_step() >= 0.9 * series.axis.median_step() {
        "averaged"
    } else {
        "interpolated linearly"
    };
    let mut words = format!("{name}: {} {how} onto {}", series.axis.describe(), axis.describe());
    if partly > 0 {
        words += &format!("; {} covered in part", counted(partly, axis.kind.word()));
    }
    if let Some((from, to)) = longest_bridge(series) {
        let label = |year: f64| series.axis.era.format((year * 100.0).round() / 100.0);
        words += &format!("; {} to {} bridged by a straight line", label(from), label(to));
    }
    if gaps > 0 {
        words += &left_as_gaps(gaps, axis);
    }
    Some(words)
}

/// The longest stretch without values that is bridged although it is longer than the customary three median steps.
fn longest_bridge(series: &Series) -> Option<(f64, f64)> {
    let customary = 3.0 * series.axis.median_step();
    if series.longest_gap_years <= customary * 1.01 {
        return None;
    }
    let known =
        series.axis.middles().into_iter().zip(series.values.member(0)).filter(|(_, value)| !value.is_nan());
    let times: Vec<f64> = known.map(|(time, _)| time).collect();
    let spaces = times.iter().zip(times.iter().skip(1)).map(|(from, to)| (*from, *to));
    spaces
        .filter(|(from, to)| to - from > customary * 1.01 && to - from <= series.longest_gap_years)
        .max_by(|left, right| f64::total_cmp(&(left.1 - left.0), &(right.1 - right.0)))
}

/// `; 1 step left as a gap`, `; 3 steps left as gaps`.
fn left_as_gaps(number: usize, axis: &Axis) -> String {
    let gaps = if number == 1 { "a gap" } else { "gaps" };
    format!("; {} left as {gaps}", counted(number, axis.kind.word()))
}

/// `1 step`, `3 steps`.
pub(super) fn counted(number: usize, plural: &str) -> String {
    if number == 1 {
        format!("1 {}", plural.strip_suffix('s').unwrap_or(plural))
    } else {
        format!("{number} {plural}")
    }
}

/// Bring series that meet in one operation onto one axis: the clock in force, a pinned axis that all share, or
/// without a clock an axis that all share.
pub(super) fn align(context: &dyn Context, members: &[(&Series, Arc<str>)]) -> Result<Aligned, Stop> {
    let pinned = members.iter().find(|(series, _)| series.standing == Standing::Pinned);
    let (axis, standing) = match (pinned, context.clock(), members) {
        (Some((series, _)), ..) => (series.axis.clone(), Standing::Pinned),
        (None, Some(clock), _) => (clock.axis.clone(), Standing::OnClock),
        (None, None, [(first, _), ..]) => (first.axis.clone(), first.standing),
        (None, None, []) => return Err(Fault::new("missing-argument", "there is no series here").into()),
    };
    let mut blocks = Vec::with_capacity(members.len());
    for (series, name) in members {
        let may_move = standing == Standing::OnClock && series.standing == Standing::Own;
        let same = Arc::ptr_eq(&series.axis, &axis) || *series.axis == *axis;
        if !same && !may_move {
            return Err(two_axes(series, name, &axis, standing).into());
        }
        blocks.push(bring(context, series, name, &axis)?);
    }
    Ok(Aligned { axis, standing, blocks })
}

fn two_axes(series: &Series, name: &str, axis: &Axis, standing: Standing) -> Fault {
    let fault = if standing == Standing::Pinned {
        Fault::new("two-axes", format!("`{name}` meets a series that was put on another axis with `on`"))
            .help(
                "bring it onto the same clock with `on`, or take the `on` away so that both follow the clock",
            )
    } else {
        Fault::new("two-axes", "these series are on different axes, and there is no clock to bring them onto")
            .help("define a clock, such as `clock = 1850..2020 CE by 1 yr`, or bring one onto the other's with `on`")
    };
    fault
        .detail(format!("{name}: {}", series.axis.describe()))
        .detail(format!("the other: {}", axis.describe()))
}

/// The sum of a bundle's components, on one axis.
///
/// # Errors
/// What keeps the components from meeting on one axis, or adding.
pub fn total(context: &dyn Context, bundle: &Bundle) -> Result<Series, Stop> {
    let leaves = bundle.leaves();
    let named: Vec<(&Series, Arc<str>)> =
        leaves.iter().map(|(label, series)| (*series, label.clone())).collect();
    let aligned = align(context, &named)?;
    let mut measure: Option<Measure> = None;
    let mut sum: Option<Block> = None;
    for ((series, _), block) in named.iter().zip(aligned.blocks) {
        (measure, sum) = match (measure, sum) {
            (Some(measure), Some(sum)) => {
                let (measure, factor) = measure.sum(&series.measure, false)?;
                (Some(measure), Some(sum.zip(&block, |total, part| total + factor * part)))
            }
            _ => (Some(series.measure.clone()), Some(block)),
        };
    }
    match (measure, sum) {
        (Some(measure), Some(sum)) => Ok(Series::new(aligned.axis, sum, measure, aligned.standing)),
        _ => Err(Fault::new("missing-argument", "this bundle has no component").into()),
    }
}

/// A component as one series.
pub(super) fn content_total(context: &dyn Context, content: &Content) -> Result<Series, Stop> {
    match content {
        Content::Series(series) => Ok(series.clone()),
        Content::Bundle(bundle) => total(context, bundle),
    }
}

/// A series as it stands on the clock in force; where there is none, or it is pinned, as it is.
///
/// # Errors
/// `no-overlap` where it has no value inside the clock's span.
pub fn onto_clock(context: &dyn Context, series: &Series, name: &str) -> Result<Series, Stop> {
    match context.clock() {
        Some(clock) if series.standing == Standing::Own => {
            let values = bring(context, series, name, &clock.axis)?;
            Ok(Series::new(clock.axis.clone(), values, series.measure.clone(), Standing::OnClock))
        }
        _ => Ok(series.clone()),
    }
}

/// Apply a function to a series, or to every component of a bundle.
pub(super) fn each_component(
    bundle: &Bundle,
    apply: &mut dyn FnMut(&Series, &str) -> Result<Series, Stop>,
) -> Result<Bundle, Stop> {
    let mut components = Vec::with_capacity(bundle.components.len());
    for part in &bundle.components {
        let content = match &part.content {
            Content::Series(series) => Content::Series(apply(series, &part.label)?),
            Content::Bundle(inner) => Content::Bundle(each_component(inner, apply)?),
        };
        components.push(crate::value::Component { label: part.label.clone(), content });
    }
    Ok(Bundle { components })
}
