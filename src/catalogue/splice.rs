//! One record made of two.

use std::sync::Arc;

use super::call::{Call, Stop};
use super::entry::{Body, Entry, Fails, Room, Shows};
use super::filters::cells;
use super::onto::counted;
use crate::base::Fault;
use crate::language::{Choice, Parameter, Signature};
use crate::science::{reduce, smoothing};
use crate::value::{Axis, AxisKind, Block, Series, Shape, Standing, Value};

pub(super) static SPLICE: Entry = Entry {
    name: "splice",
    room: Room::Algebra,
    summary: "One series before an instant and another from it on, as one record.",
    signature: Signature {
        parameters: &[
            Parameter::required("early", &["series"], "the series used before `at`"),
            Parameter::required("late", &["series"], "the series used from `at` on; converted to the unit of the early one"),
            Parameter::required("at", &["instant"], "where one takes over from the other"),
            Parameter::choice(
                "adjust",
                &[
                    Choice::plain("none", "the early series as it is"),
                    Choice::plain("offset", "the early series moved, so that both have one mean where they overlap"),
                    Choice::plain("scale", "the early series scaled, so that both have one mean where they overlap"),
                ],
                "none",
                "how the early series is fitted to the late one",
            ),
            Parameter::optional("longest_gap", &["duration"], "the longest gap to bridge when it is brought onto a clock; the wider of the two series' own by default")
                .in_unit("yr"),
        ],
    },
    revision: 2,
    result: "in the unit of the early one; a series of steps where both have steps of one length, else of instants, with steps at their middles",
    gaps: "A gap stays a gap; the stretch between the two is one, unless `longest_gap` bridges it, which makes instants of steps.",
    shows: &[
        Shows {
            program: "ice = series([280, 282] ppm, at: [1800 CE, 1850 CE])\nair = series([315, 316] ppm, along: 1958..1959 CE by 1 yr)\nsplice(ice, air, at: 1900 CE)",
            gives: "4 instants, 1800.5 CE to 1959.5 CE: first 280, last 316 ppm",
        },
        Shows {
            program: "old = series([1, 2, 3] degC, along: 1850..1852 CE by 1 yr)\nnew = series([4, 5] degC, along: 1852..1853 CE by 1 yr)\nsplice(old, new, at: 1852 CE, adjust: offset)",
            gives: "4 steps, 1850 CE to 1853 CE: first 2, last 5 degC",
        },
    ],
    fails: &[Fails {
        program: "ice = series([280, 282] ppm, at: [1800 CE, 1850 CE])\nair = series([315, 316] ppm, along: 1958..1959 CE by 1 yr)\nsplice(ice, air, at: 1700 CE)",
        code: "no-overlap",
        says: "before",
    }],
    search: &["join", "merge", "concatenate", "two sources"],
    shape: |call| {
        let early = call.measure("early")?;
        call.measure("late")?.unit.factor_to(&early.unit)?;
        Ok(Shape::Series(early))
    },
    body: Body::PerMember(splice),
    ..Entry::PLAIN
};

fn splice(call: &Call<'_>) -> Result<Value, Stop> {
    let (early, late, at) = (call.value("early")?, call.value("late")?, call.value("at")?);
    let (Value::Series(early), Value::Series(late), Value::Instant(at)) =
        (early.as_ref(), late.as_ref(), at.as_ref())
    else {
        return Err(Fault::new("wrong-argument", "two series and an instant are spliced").into());
    };
    if at.years.rows() > 1 {
        return Err(Fault::new("must-be-certain", "`at` cannot carry an uncertainty").blame("at").into());
    }
    let factor = late.measure.unit.factor_to(&early.measure.unit)?;
    let (before, after) = (early.axis.middles(), late.axis.middles());
    let first = before.partition_point(|time| *time < at.year());
    let second = after.partition_point(|time| *time < at.year());
    if first == 0 || second == after.len() {
        let (name, side) = if first == 0 { ("early", "before") } else { ("late", "from") };
        return Err(Fault::new("no-overlap", format!("`{}` has no value {side} {at}", call.label(name)))
            .blame("at")
            .into());
    }
    let bridged = call.slot("longest_gap").is_some();
    let (axis, done) = joined_axis(&early.axis, first, &late.axis, second, bridged);
    let late_part = late.values.columns_in(second..after.len()).times(factor);
    let early_part = adjusted(call, early, late, factor)?.columns_in(0..first);
    let rows = early_part.rows().max(late_part.rows());
    let mut data = Vec::with_capacity(rows * axis.len());
    for member in 0..rows {
        data.extend(early_part.member(member));
        data.extend(late_part.member(member));
    }
    let values = Block::new(rows, axis.len(), data);
    call.context.note(format!(
        "{} up to {at}, {} from then on{done}",
        call.label("early"),
        call.label("late")
    ));
    let mut joined = Series::new(Arc::new(axis), values, early.measure.clone(), Standing::Own);
    joined.longest_gap_years = if bridged {
        call.certain("longest_gap")?
    } else {
        early.longest_gap_years.max(late.longest_gap_years)
    };
    Ok(Value::Series(joined))
}

/// The times of the first `first` values of one axis and of those of the other from `second` on, and what was done to
/// them in words. Steps of one length that do not overlap stay steps; a gap between steps is never bridged, so that
/// where one is to be, they become instants.
fn joined_axis(
    early: &Axis,
    first: usize,
    late: &Axis,
    second: usize,
    bridged: bool,
) -> (Axis, &'static str) {
    let (before, after) = (early.part(0..first), late.part(second..late.len()));
    let steps = [&before, &after].map(|axis| axis.kind == AxisKind::Steps);
    let between = match (before.bounds(), after.bounds()) {
        (Some((_, end)), Some((start, _))) => start - end,
        _ => 0.0,
    };
    let step = early.median_step();
    let slack = 1e-6 * step;
    let why = match steps {
        [false, false] => "",
        [true, false] | [false, true] => {
            "; steps stand as instants at their middles, as the other has instants"
        }
        [true, true] if !of_one_length(early, late) => {
            "; steps stand as instants at their middles, as they differ in length"
        }
        [true, true] if between < -slack => {
            "; steps stand as instants at their middles, as they overlap there"
        }
        [true, true] if bridged && between > slack => {
            "; steps stand as instants at their middles, so that the gap between them can be bridged"
        }
        [true, true] => {
            let joined = |left: &[f64], right: &[f64]| [left, right].concat();
            let (starts, ends) =
                (joined(before.starts(), after.starts()), joined(before.ends(), after.ends()));
            return (Axis::steps(starts, ends, early.era), "; steps stay steps");
        }
    };
    (Axis::instants([before.middles(), after.middles()].concat(), early.era), why)
}

/// Whether all steps of both axes are as long as each other; months and days may differ as those of a calendar do.
fn of_one_length(one: &Axis, other: &Axis) -> bool {
    let (step, second) = (one.median_step(), other.median_step());
    let near = |length: &f64| (length / step - 1.0).abs() < CALENDAR_VARIATION;
    (second / step - 1.0).abs() < 0.01 && one.lengths().iter().all(near) && other.lengths().iter().all(near)
}

/// By how much of itself a month of 28 to 31 days may differ from a twelfth of a year.
const CALENDAR_VARIATION: f64 = 0.1;

/// The early series, moved or scaled so that it has the late one's mean over the time that both cover.
fn adjusted(call: &Call<'_>, early: &Series, late: &Series, factor: f64) -> Result<Block, Stop> {
    let method = call.choice("adjust").map_or("none", |(word, _)| word);
    if method == "none" {
        call.context.note("nothing was adjusted where they overlap".to_owned());
        return Ok(early.values.clone());
    }
    // The finer of the two is averaged onto the cells of the coarser.
    let ((early_starts, early_ends), (late_starts, late_ends)) = (cells(&early.axis), cells(&late.axis));
    let onto_early = early.axis.median_step() >= late.axis.median_step();
    let (starts, ends) = if onto_early { (&early_starts, &early_ends) } else { (&late_starts, &late_ends) };
    let means = |series: &Series, own_starts: &[f64], own_ends: &[f64]| {
        series.values.map_rows(starts.len(), |row, out| {
            smoothing::overlap_means(own_starts, own_ends, row, starts, ends, out);
        })
    };
    let mine = means(early, &early_starts, &early_ends);
    let theirs = means(late, &late_starts, &late_ends).times(factor);
    let pairs =
        mine.zip(&theirs, |mine, theirs| if mine.is_nan() || theirs.is_nan() { f64::NAN } else { 1.0 });
    let count = pairs.member(0).iter().filter(|pair| !pair.is_nan()).count();
    let (early_name, late_name) = (call.label("early"), call.label("late"));
    if count == 0 {
        let message = format!("`{early_name}` and `{late_name}` have no time in common to be fitted over");
        return Err(Fault::new("no-overlap", message)
            .help("leave `adjust` out, so that nothing is fitted")
            .into());
    }
    let mean = |values: &Block| {
        values.zip(&pairs, |value, pair| value * pair).map_rows(1, |row, out| out.fill(reduce::mean(row)))
    };
    let (mine, theirs) = (mean(&mine), mean(&theirs));
    let overlap = counted(count, "times");
    let unit = &early.measure.unit;
    if method == "offset" {
        let offset = theirs.zip(&mine, |theirs, mine| theirs - mine);
        let by = offset.first();
        call.context.note(format!(
            "{early_name}: moved by {by:.6} {unit} to the mean of {late_name} over {overlap} they share"
        ));
        Ok(early.values.zip(&offset, |value, offset| value + offset))
    } else {
        let scale = theirs.zip(&mine, |theirs, mine| theirs / mine);
        let by = scale.first();
        call.context.note(format!(
            "{early_name}: scaled by {by:.6} to the mean of {late_name} over {overlap} they share"
        ));
        Ok(early.values.zip(&scale, |value, scale| value * scale))
    }
}
