//! Idealised series: formulas that are averaged onto steps exactly, and read at instants.

use super::call::{Call, Stop, wrong_kind};
use super::entry::{Body, Entry, Fails, ReadsClock, Room, Shows};
use super::reading::made_measure;
use crate::base::Fault;
use crate::language::{Parameter, Signature};
use crate::value::{AxisKind, Block, Instant, Measure, Quantity, Series, Shape, Standing, Value};

const FORMULA: Entry =
    Entry { room: Room::Shapes, gaps: "It has none.", reads_clock: ReadsClock::Always, ..Entry::PLAIN };

static CONSTANT: Entry = Entry {
    name: "constant",
    summary: "The same value at every time of the clock.",
    signature: Signature { parameters: &[Parameter::required("value", &["quantity"], "the value")] },
    result: "a series in the unit of the value",
    equation: Some(r"x(t) = x_0"),
    shows: &[Shows {
        program: "clock = 1850..1852 CE by 1 yr\nconstant(0.3 ± 0.1 W/m2)",
        gives: "3 steps, 1850 CE to 1852 CE: first 0.30 [0.13, 0.46], last 0.30 [0.13, 0.46] W/m2",
    }],
    fails: &[Fails { program: "constant(0.3 W/m2)", code: "no-clock", says: "clock" }],
    search: &["flat", "uniform"],
    shape: |call| Ok(Shape::Series(made_measure(call.measure("value")?.unit))),
    body: Body::PerMember(|call| {
        let value = quantity(call, "value")?;
        on_clock(call, &value.measure, &[&value.values], &|_, _, parameters| parameters[0])
    }),
    ..FORMULA
};

static STEP_CHANGE: Entry = Entry {
    name: "step_change",
    summary: "Nothing before an instant, and a constant value from it on.",
    signature: Signature {
        parameters: &[
            Parameter::required("at", &["instant"], "when it begins"),
            Parameter::required("to", &["quantity"], "the value afterwards"),
        ],
    },
    result: "a series in the unit of the value; the step in which it begins has its share of it",
    equation: Some(r"x(t) = x_1\,H(t - t_0)"),
    shows: &[Shows {
        program: "clock = 1850..1852 CE by 1 yr\nstep_change(1851.25 CE, 4 W/m2)\ntable(step_change(1851.25 CE, 4 W/m2))",
        gives: "3 rows: year CE, value (W/m2)",
    }],
    fails: &[Fails {
        program: "clock = 1850..1852 CE by 1 yr\nstep_change(4 W/m2, 1851 CE)",
        code: "wrong-argument",
        says: "instant",
    }],
    search: &["heaviside", "jump", "abrupt", "switch on"],
    shape: |call| Ok(Shape::Series(made_measure(call.measure("to")?.unit))),
    body: Body::PerMember(|call| {
        let (at, to) = (instant(call, "at")?, quantity(call, "to")?);
        on_clock(call, &to.measure, &[&at.years, &to.values], &|start, end, parameters| {
            parameters[1] * share_after(start, end, parameters[0])
        })
    }),
    ..FORMULA
};

static RAMP: Entry = Entry {
    name: "ramp",
    summary: "Nothing before a span, a straight rise through it, and a constant value after it.",
    signature: Signature {
        parameters: &[
            Parameter::required("during", &["span"], "the span of the rise"),
            Parameter::required("to", &["quantity"], "the value at its end and afterwards"),
        ],
    },
    result: "a series in the unit of the value",
    equation: Some(r"x(t) = x_1\,\min\!\left(1, \max\!\left(0, \frac{t - t_0}{t_1 - t_0}\right)\right)"),
    shows: &[Shows {
        program: "clock = 1850..1859 CE by 1 yr\nramp(1852..1855 CE, 8 W/m2)",
        gives: "10 steps, 1850 CE to 1859 CE: first 0, last 8 W/m2",
    }],
    fails: &[Fails {
        program: "clock = 1850..1852 CE by 1 yr\nramp(1851 CE, 4 W/m2)",
        code: "wrong-argument",
        says: "a span",
    }],
    search: &["linear increase", "gradual", "slope"],
    shape: |call| Ok(Shape::Series(made_measure(call.measure("to")?.unit))),
    body: Body::PerMember(|call| {
        let to = quantity(call, "to")?;
        let Some(span) = call.span("during")? else {
            return Err(Fault::new("missing-argument", "no span").into());
        };
        let (first, length) = (span.start, (span.end - span.start).max(f64::MIN_POSITIVE));
        on_clock(call, &to.measure, &[&to.values], &|start, end, parameters| {
            // The integral of the ramp is a parabola, then a line.
            let integral = |time: f64| {
                let inside = (time - first).clamp(0.0, length);
                0.5 * inside * inside / length + (time - first - length).max(0.0)
            };
            let rise = if end > start {
                (integral(end) - integral(start)) / (end - start)
            } else {
                ((start - first) / length).clamp(0.0, 1.0)
            };
            parameters[0] * rise
        })
    }),
    ..FORMULA
};

static PULSE: Entry = Entry {
    name: "pulse",
    summary: "A constant value during a span, and nothing outside it.",
    signature: Signature {
        parameters: &[
            Parameter::required("during", &["span"], "the span"),
            Parameter::required("height", &["quantity"], "the value in it"),
        ],
    },
    result: "a series in the unit of the value; a step that the span covers in part has its share of it",
    equation: Some(r"x(t) = x_1\,[t_0 \le t < t_1]"),
    shows: &[Shows {
        program: "clock = 1850..1852 CE by 1 yr\npulse(1851..1851 CE, -3 W/m2) |> within(1851..1852 CE)",
        gives: "2 steps, 1851 CE to 1852 CE: first -3, last 0 W/m2",
    }],
    fails: &[Fails {
        program: "clock = 1850..1852 CE by 1 yr\npulse(1851 CE, 4 W/m2)",
        code: "wrong-argument",
        says: "a span",
    }],
    search: &["boxcar", "spike", "episode"],
    shape: |call| Ok(Shape::Series(made_measure(call.measure("height")?.unit))),
    body: Body::PerMember(|call| {
        let height = quantity(call, "height")?;
        let Some(span) = call.span("during")? else {
            return Err(Fault::new("missing-argument", "no span").into());
        };
        on_clock(call, &height.measure, &[&height.values], &|start, end, parameters| {
            parameters[0] * (share_after(start, end, span.start) - share_after(start, end, span.end))
        })
    }),
    ..FORMULA
};

static SINUSOID: Entry = Entry {
    name: "sinusoid",
    summary: "A sine wave with its crest at an instant.",
    signature: Signature {
        parameters: &[
            Parameter::required("period", &["duration"], "the period").in_unit("yr"),
            Parameter::required("amplitude", &["quantity"], "half the distance from trough to crest"),
            Parameter::required("crest", &["instant"], "an instant at which it stands highest"),
        ],
    },
    result: "a series in the unit of the amplitude; steps hold exact means, which are flatter than the wave",
    equation: Some(r"x(t) = a \cos\frac{2\pi (t - t_0)}{P}"),
    shows: &[Shows {
        program: "clock = instants(1850..1855 CE by 1 yr)\nsinusoid(10 yr, 0.5 W/m2, crest: 1850 CE)",
        gives: "6 instants, 1850 CE to 1855 CE: first 0.5, last -0.5 W/m2",
    }],
    fails: &[Fails {
        program: "clock = 1850..1852 CE by 1 yr\nsinusoid(0 yr, 4 W/m2, crest: 1851 CE)",
        code: "out-of-range",
        says: "longer than nothing",
    }],
    search: &["sine", "cosine", "cycle", "oscillation", "wave"],
    shape: |call| Ok(Shape::Series(made_measure(call.measure("amplitude")?.unit))),
    body: Body::PerMember(|call| {
        let (amplitude, crest) = (quantity(call, "amplitude")?, instant(call, "crest")?);
        let period = call.numbers("period")?;
        if period.data().iter().any(|years| *years <= 0.0) {
            return Err(Fault::new("out-of-range", "a period must be longer than nothing")
                .blame("period")
                .into());
        }
        on_clock(
            call,
            &amplitude.measure,
            &[&period, &amplitude.values, &crest.years],
            &|start, end, parameters| {
                let turn = std::f64::consts::TAU / parameters[0];
                let middle = 0.5 * (start + end);
                // The mean of a cosine over a step is the cosine at its middle times sin(x)/x of half the turn.
                let half = 0.5 * turn * (end - start);
                let flatter = if half.abs() < 1e-8 { 1.0 } else { half.sin() / half };
                parameters[1] * (turn * (middle - parameters[2])).cos() * flatter
            },
        )
    }),
    ..FORMULA
};

pub(super) const FAMILY: &[&Entry] = &[&CONSTANT, &STEP_CHANGE, &RAMP, &PULSE, &SINUSOID];

/// The share of a step that lies after an instant; at an instant, whether it has come.
fn share_after(start: f64, end: f64, at: f64) -> f64 {
    if end > start { ((end - at) / (end - start)).clamp(0.0, 1.0) } else { f64::from(u8::from(start >= at)) }
}

fn quantity(call: &Call<'_>, name: &'static str) -> Result<Quantity, Stop> {
    match call.value(name)?.as_ref() {
        Value::Quantity(quantity) => Ok(quantity.clone()),
        other => Err(wrong_kind(name, other).into()),
    }
}

fn instant(call: &Call<'_>, name: &'static str) -> Result<Instant, Stop> {
    match call.value(name)?.as_ref() {
        Value::Instant(instant) => Ok(instant.clone()),
        other => Err(wrong_kind(name, other).into()),
    }
}

/// A formula on the clock in force: its mean over each step, or its value at each instant (where start and end are
/// one), for every member of its parameters.
fn on_clock(
    call: &Call<'_>,
    measure: &Measure,
    parameters: &[&Block],
    formula: &dyn Fn(f64, f64, &[f64]) -> f64,
) -> Result<Value, Stop> {
    let Some(clock) = call.context.clock() else {
        return Err(Fault::new("no-clock", "a formula needs a clock to be evaluated on")
            .help("define one, such as `clock = 1850..2020 CE by 1 yr`")
            .into());
    };
    let axis = &clock.axis;
    let rows = parameters.iter().map(|block| block.rows()).max().unwrap_or(1);
    let ends = if axis.kind == AxisKind::Steps { axis.ends() } else { axis.starts() };
    let mut data = Vec::with_capacity(rows * axis.len());
    for member in 0..rows {
        call.context.cancellation().check()?;
        let numbers: Vec<f64> = parameters.iter().map(|block| block.scalar(member)).collect();
        data.extend(axis.starts().iter().zip(ends).map(|(start, end)| formula(*start, *end, &numbers)));
    }
    let values = Block::new(rows, axis.len(), data);
    Ok(Value::Series(Series::new(
        axis.clone(),
        values,
        made_measure(measure.unit.clone()),
        Standing::OnClock,
    )))
}
