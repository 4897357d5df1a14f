//! Clocks, windows, lags, and bringing onto another clock.

use std::sync::Arc;

use super::call::{Call, Stop, wrong_kind};
use super::entry::{Body, Entry, Fails, ReadsClock, Room, Shows};
use super::onto::{bring, bring_by, each_component};
use crate::base::Fault;
use crate::language::{Choice, Parameter, Signature};
use crate::value::{Axis, AxisKind, Bundle, Clock, Series, Shape, Standing, TimeSpan, Value};

const SERIES: &[&str] = &["series", "bundle"];

static STEPS: Entry = Entry {
    name: "steps",
    room: Room::Time,
    summary: "The clock made of steps: each value is the mean over a step.",
    signature: Signature {
        parameters: &[Parameter::required(
            "clock",
            &["clock"],
            "a clock, most often of ages, whose default is instants",
        )],
    },
    result: "a clock of steps; between n instants lie n − 1 steps",
    gaps: "It meets none.",
    shows: &[Shows { program: "steps(800..0 ka by 1 kyr)", gives: "800 steps, 800 ka to 0 ka" }],
    fails: &[Fails { program: "steps(800..0 ka)", code: "wrong-argument", says: "a clock" }],
    search: &["mean", "interval"],
    shape: |_| Ok(Shape::Clock),
    body: Body::PerMember(|call| {
        let clock = clock_argument(call, "clock")?;
        let axis = &clock.axis;
        if axis.kind == AxisKind::Steps {
            return Ok(Value::Clock(clock));
        }
        let times = axis.starts();
        let (Some((_, starts)), Some((_, ends))) = (times.split_last(), times.split_first()) else {
            return Ok(Value::Clock(clock));
        };
        let axis = Axis::steps(starts.to_vec(), ends.to_vec(), axis.era);
        Ok(Value::Clock(Arc::new(Clock { axis: axis.into(), step_years: clock.step_years })))
    }),
    ..Entry::PLAIN
};

static INSTANTS: Entry = Entry {
    name: "instants",
    room: Room::Time,
    summary: "The clock made of instants: each value holds at a point in time.",
    signature: Signature {
        parameters: &[Parameter::required(
            "clock",
            &["clock"],
            "a clock, most often of the calendar, whose default is steps",
        )],
    },
    result: "a clock of instants, at the beginning of each step",
    gaps: "It meets none.",
    shows: &[Shows { program: "instants(1850..1900 CE by 1 yr)", gives: "51 instants, 1850 CE to 1900 CE" }],
    fails: &[Fails { program: "instants(1850 CE)", code: "wrong-argument", says: "a clock" }],
    search: &["point"],
    shape: |_| Ok(Shape::Clock),
    body: Body::PerMember(|call| {
        let clock = clock_argument(call, "clock")?;
        let axis = Axis::instants(clock.axis.starts().to_vec(), clock.axis.era);
        Ok(Value::Clock(Arc::new(Clock { axis: axis.into(), step_years: clock.step_years })))
    }),
    ..Entry::PLAIN
};

static ON: Entry = Entry {
    name: "on",
    room: Room::Time,
    summary: "The series on another clock: formulas are evaluated afresh under it, data are brought onto it.",
    signature: Signature {
        parameters: &[
            Parameter::required("series", SERIES, "a series or bundle"),
            Parameter::required("clock", &["clock"], "the clock"),
            Parameter::optional("method", &[], "how data are brought onto it; by default means where that is coarser and straight lines where it is finer")
                .or_choices(&[
                    Choice::plain("mean", "the mean of what each step covers, each value holding over its own step")
                        .also(&["average", "averages", "bin", "bins"]),
                    Choice::plain("linear", "straight between values, read at the middle of each step"),
                    Choice::plain("monotone_cubic", "a smooth curve that stays between neighbours, read at the middle of each step")
                        .also(&["cubic", "spline", "pchip"]),
                    Choice::plain("nearest", "the value nearest in time"),
                    Choice::plain("none", "only values that stand at the very same time"),
                ]),
        ],
    },
    result: "the same on that clock; it meets no series on another axis",
    gaps: "A step is the mean of its data if two thirds of it are covered, else a gap; gaps longer than `longest_gap` are not bridged.",
    shows: &[
        Shows {
            program: "x = series([1, 2, 3, 4] ppm, along: 1850..1853 CE by 1 yr)\nx |> on(1850..1853 CE by 2 yr)",
            gives: "2 steps, 1850 CE to 1852 CE: first 1.5, last 3.5 ppm",
        },
        Shows {
            program: "x = series([1, 2, 4] ppm, at: [1850 CE, 1852 CE, 1854 CE])\nx |> on(1850..1854 CE by 1 yr, method: nearest)",
            gives: "5 steps, 1850 CE to 1854 CE: first 1, last 4 ppm",
        },
    ],
    fails: &[Fails {
        program: "x = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)\nx |> on(21..20 ka by 1 kyr)",
        code: "no-overlap",
        says: "no value inside",
    }],
    search: &["resample", "interpolate", "average", "regrid"],
    under: Some("clock"),
    shape: |call| call.shape("series"),
    body: Body::PerMember(|call| {
        let clock = clock_argument(call, "clock")?;
        let name = call.label("series");
        let value = under(call, "series", clock.clone())?;
        let pin = |series: &Series, name: &str| -> Result<Series, Stop> {
            let values = match series.standing {
                Standing::OnClock => series.values.clone(),
                Standing::Own | Standing::Pinned => match call.choice("method") {
                    None => bring(call.context, series, name, &clock.axis)?,
                    Some((method, _)) => bring_by(call.context, series, name, &clock.axis, method)?,
                },
            };
            Ok(Series::new(clock.axis.clone(), values, series.measure.clone(), Standing::Pinned))
        };
        series_or_bundle(&value, &name, &mut |series, label| pin(series, label))
    }),
    ..Entry::PLAIN
};

static WITHIN: Entry = Entry {
    name: "within",
    room: Room::Time,
    summary: "The part of a series that lies inside a span.",
    signature: Signature {
        parameters: &[
            Parameter::required("series", SERIES, "a series or bundle"),
            Parameter::required(
                "span",
                &["span"],
                "the span, both ends in; steps count when they lie inside whole",
            ),
        ],
    },
    result: "the same, with the values outside left away",
    gaps: "A gap inside stays a gap.",
    shows: &[Shows {
        program: "x = series([1, 2, 3, 4] ppm, along: 1850..1853 CE by 1 yr)\nx |> within(1851..1852 CE)",
        gives: "2 steps, 1851 CE to 1852 CE: first 2, last 3 ppm",
    }],
    fails: &[Fails {
        program: "x = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)\nx |> within(1900..1950 CE)",
        code: "no-overlap",
        says: "nothing of",
    }],
    search: &["window", "select", "subset", "crop", "between"],
    shape: |call| call.shape("series"),
    body: Body::PerMember(|call| {
        let Some(span) = call.span("span")? else {
            return Err(Fault::new("missing-argument", "no span").into());
        };
        let name = call.label("series");
        series_or_bundle(&*call.value("series")?, &name, &mut |series, label| part(series, label, &span))
    }),
    ..Entry::PLAIN
};

fn part(series: &Series, name: &str, span: &TimeSpan) -> Result<Series, Stop> {
    let range = series.axis.inside(span);
    if range.is_empty() {
        return Err(Fault::new("no-overlap", format!("nothing of `{name}` lies inside {span}"))
            .detail(format!("{name}: {}", series.axis.describe()))
            .blame("span")
            .into());
    }
    let values = series.values.columns_in(range.clone());
    // What is left has an axis of its own: outside it nothing is known any more.
    let standing = if series.standing == Standing::Pinned { Standing::Pinned } else { Standing::Own };
    let mut part = Series::new(series.axis.part(range).into(), values, series.measure.clone(), standing);
    part.longest_gap_years = series.longest_gap_years;
    Ok(part)
}

static LAG: Entry = Entry {
    name: "lag",
    room: Room::Time,
    summary: "The series as it was a while before: what happens at a time is shown later by the lag.",
    signature: Signature {
        parameters: &[
            Parameter::required("series", SERIES, "a series or bundle"),
            Parameter::required(
                "by",
                &["duration"],
                "how much later; negative for earlier; any part of a step",
            )
            .in_unit("yr"),
        ],
    },
    result: "the same, moved in time",
    equation: Some(r"y(t) = x(t - \tau)"),
    gaps: "A gap moves along. Formulas are evaluated at the earlier times, and data from before the clock's start are used where there are any.",
    shows: &[
        Shows {
            program: "x = series([1, 2, 3] ppm, along: 1850..1852 CE by 1 yr)\nx |> lag(1 yr)",
            gives: "3 steps, 1851 CE to 1853 CE: first 1, last 3 ppm",
        },
        Shows {
            program: "clock = 1851..1852 CE by 1 yr\nx = series([1, 2, 3] ppm, along: 1850..1852 CE by 1 yr)\n(x + 0 ppm * x) |> lag(6 month)",
            gives: "2 steps, 1851 CE to 1852 CE: first 1.5, last 2.5 ppm",
        },
    ],
    fails: &[Fails {
        program: "x = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)\nx |> lag(1 ppm)",
        code: "wrong-argument",
        says: "a duration",
    }],
    search: &["delay", "shift", "lead"],
    reads_clock: ReadsClock::WithSeries,
    shape: |call| call.shape("series"),
    body: Body::PerMember(|call| {
        let years = call.certain("by")?;
        // Under a clock moved back, formulas see the earlier times and data are averaged onto them.
        let value = match call.context.clock() {
            Some(clock) => under(call, "series", Arc::new(clock.shifted(-years)))?,
            None => call.value("series")?,
        };
        let clock = call.context.clock();
        series_or_bundle(&value, "", &mut |series, _| {
            let axis = match (&clock, series.standing) {
                (Some(clock), Standing::OnClock) => clock.axis.clone(),
                _ => Arc::new(series.axis.shifted(years)),
            };
            Ok(Series { axis, ..series.clone() })
        })
    }),
    ..Entry::PLAIN
};

pub(super) const FAMILY: &[&Entry] = &[&STEPS, &INSTANTS, &ON, &WITHIN, &LAG];

fn under(call: &Call<'_>, name: &'static str, clock: Arc<Clock>) -> Result<Arc<Value>, Stop> {
    match call.slot(name) {
        Some(slot) => call.context.value_under(slot, clock),
        None => Err(Fault::new("missing-argument", format!("`{name}` is missing")).into()),
    }
}

/// A clock given as an argument.
pub(super) fn clock_argument(call: &Call<'_>, name: &'static str) -> Result<Arc<Clock>, Stop> {
    match call.value(name)?.as_ref() {
        Value::Clock(clock) => Ok(clock.clone()),
        other => Err(wrong_kind(name, other).into()),
    }
}

/// The measures of a bundle's components after a change of each.
pub(super) fn each_measure(
    shape: Shape,
    change: impl Fn(&crate::value::Measure) -> Result<crate::value::Measure, Fault>,
) -> Result<Shape, Stop> {
    match shape {
        Shape::Quantity(measure) => Ok(Shape::Quantity(change(&measure)?)),
        Shape::Series(measure) => Ok(Shape::Series(change(&measure)?)),
        Shape::Bundle(parts) => {
            let parts = parts.iter().map(|(label, measure)| Ok((label.clone(), change(measure)?)));
            Ok(Shape::Bundle(parts.collect::<Result<_, Fault>>()?))
        }
        other => Err(Fault::new("wrong-argument", format!("found {}", other.describe())).into()),
    }
}

/// Apply a function to a series, or to each component of a bundle.
pub(super) fn series_or_bundle(
    value: &Value,
    name: &str,
    apply: &mut dyn FnMut(&Series, &str) -> Result<Series, Stop>,
) -> Result<Value, Stop> {
    match value {
        Value::Series(series) => Ok(Value::Series(apply(series, name)?)),
        Value::Bundle(bundle) => {
            let changed: Bundle = each_component(bundle, apply)?;
            Ok(Value::Bundle(changed))
        }
        other => Err(Fault::new("wrong-argument", format!("found {}", other.shape().describe())).into()),
    }
}
