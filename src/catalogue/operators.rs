//! The signs between expressions. They are entries like any other function, so that `explain` and the tests of
//! every example know them too. One file, though a long one: the operators share their arithmetic.

use std::sync::Arc;

use super::call::{Call, Numeric, Path, Stop, wrong_kind};
use super::citations::WICHURA_1988;
use super::entry::{Body, Entry, Fails, ReadsClock, Room, Shows};
use super::onto::{align, total};
use crate::base::Fault;
use crate::language::{Parameter, Signature};
use crate::value::{
    Block, Clock, Era, Instant, Measure, Quantity, Range, Series, Shape, TimeSpan, Unit, Value,
};

const NUMERIC: &[&str] = &["quantity", "series", "bundle"];
const NUMERIC_OR_INSTANT: &[&str] = &["quantity", "series", "bundle", "instant"];

const fn two(left: Parameter, right: Parameter) -> [Parameter; 2] {
    [left, right]
}

const fn operator(name: &'static str, summary: &'static str, parameters: &'static [Parameter]) -> Entry {
    Entry {
        name,
        room: Room::Operators,
        summary,
        signature: Signature { parameters },
        gaps: "A gap on either side is a gap in the result.",
        reads_clock: ReadsClock::WithSeries,
        shape: sum_shape,
        body: Body::PerMember(plus),
        ..Entry::PLAIN
    }
}

static PLUS: Entry = Entry {
    result: "in the unit of the left side",
    shows: &[
        Shows { program: "1 W/m2 + 500 mW/m2", gives: "1.5 W/m2" },
        Shows { program: "1850 CE + 30 yr", gives: "1880 CE" },
    ],
    fails: &[
        Fails { program: "1 W/m2 + 1 degC", code: "unit-mismatch", says: "measure different things" },
        Fails { program: "1850 CE + 21 ka", code: "wrong-argument", says: "two instants" },
    ],
    ..operator(
        "+",
        "The sum of two quantities or series; an instant moved by a duration.",
        &two(
            Parameter::required("left", NUMERIC_OR_INSTANT, "what is added to"),
            Parameter::required(
                "right",
                NUMERIC_OR_INSTANT,
                "what is added; converted to the unit of the left side",
            ),
        ),
    )
};

static MINUS: Entry = Entry {
    result: "in the unit of the left side; a duration between two instants",
    shows: &[
        Shows { program: "x = 5 ± 1 degC\nx - x", gives: "0 degC" },
        Shows { program: "21 ka - 19 ka", gives: "-2 kyr" },
    ],
    fails: &[Fails { program: "1 ppm - 1 W/m2", code: "unit-mismatch", says: "measure different things" }],
    shape: difference_shape,
    body: Body::PerMember(minus),
    ..operator(
        "-",
        "The difference of two quantities or series; the duration between two instants.",
        &two(
            Parameter::required("left", NUMERIC_OR_INSTANT, "what is subtracted from"),
            Parameter::required(
                "right",
                NUMERIC_OR_INSTANT,
                "what is subtracted; converted to the unit of the left side",
            ),
        ),
    )
};

static TIMES: Entry = Entry {
    result: "in the product of the units",
    shows: &[Shows { program: "0.8 degC*m2/W * 3.7 W/m2", gives: "2.96 degC" }],
    fails: &[Fails { program: "2 * \"a\"", code: "wrong-argument", says: "`*` takes" }],
    shape: times_shape,
    body: Body::PerMember(times),
    ..operator(
        "*",
        "The product of two quantities or series.",
        &two(
            Parameter::required("left", NUMERIC, "one factor"),
            Parameter::required("right", NUMERIC, "the other factor"),
        ),
    )
};

static OVER: Entry = Entry {
    result: "in the quotient of the units",
    gaps: "A gap on either side is a gap in the result, and so is a division by zero.",
    shows: &[Shows { program: "3.7 W/m2 / 1.2 W/m2/K", gives: "3.08333 K" }],
    fails: &[Fails { program: "1 / 1850 CE", code: "wrong-argument", says: "`1850 CE` is an instant" }],
    shape: over_shape,
    body: Body::PerMember(over),
    ..operator(
        "/",
        "The quotient of two quantities or series.",
        &two(
            Parameter::required("left", NUMERIC, "what is divided"),
            Parameter::required("right", NUMERIC, "what it is divided by"),
        ),
    )
};

static POWER: Entry = Entry {
    result: "in the power of the unit",
    gaps: "A gap stays a gap, and so does what has no real power.",
    shows: &[Shows { program: "(3 km)^2", gives: "9 km2" }, Shows { program: "-2^2", gives: "-4" }],
    fails: &[Fails { program: "(3 km)^0.5", code: "fractional-power", says: "whole" }],
    shape: power_shape,
    body: Body::PerMember(power),
    ..operator(
        "^",
        "A quantity or series to a power.",
        &two(
            Parameter::required("base", NUMERIC, "what is raised; with a unit, only to a whole power"),
            Parameter::required("exponent", &["quantity"], "the power").in_unit("1"),
        ),
    )
};

static NEGATE: Entry = Entry {
    result: "in the same unit",
    shows: &[Shows { program: "x = 3 W/m2\n-x", gives: "-3 W/m2" }],
    fails: &[Fails { program: "x = 1850 CE\n-x", code: "wrong-argument", says: "`x` is an instant" }],
    shape: |call| Ok(numeric_shape(call.measure("value")?, &[call.shape("value")?])),
    body: Body::PerMember(|call| {
        Ok(match numeric(call, "value")? {
            Numeric::Quantity(quantity) => Value::Quantity(Quantity {
                values: quantity.values.map(|value| -value),
                measure: quantity.measure,
            }),
            Numeric::Series(series) => {
                Value::Series(series.with(series.values.map(|value| -value), series.measure.clone()))
            }
        })
    }),
    gaps: "A gap stays a gap.",
    ..operator(
        "negate",
        "The same with the other sign, written `-x`.",
        &[Parameter::required("value", NUMERIC, "what changes its sign")],
    )
};

static PLUS_MINUS: Entry = Entry {
    result: "a random variable in the unit of the centre",
    equation: Some(r"X = \mu + \sigma\,\Phi^{-1}(U),\quad U \sim \mathrm{uniform}(0, 1)"),
    gaps: "It meets none.",
    shows: &[
        Shows { program: "18 ± 4 Mt", gives: "18.0 Mt [11.3, 24.7]" },
        Shows { program: "a = 1 ± 0.1\nb = a * 2\nb - a - a", gives: "0" },
    ],
    fails: &[
        Fails { program: "18 Mt ± 4 degC", code: "unit-mismatch", says: "measure different things" },
        Fails { program: "18 ± -4 Mt", code: "negative-spread", says: "standard deviation" },
    ],
    citations: &[&WICHURA_1988],
    search: &["normal", "gaussian", "uncertainty", "error", "spread"],
    reads_clock: ReadsClock::Never,
    random: true,
    shape: spread_shape,
    body: Body::PerMember(plus_minus),
    ..operator(
        "±",
        "A normal random variable, given by its centre and one standard deviation; each place in the text is a variable of its own.",
        &two(
            Parameter::required(
                "centre",
                &["quantity", "instant"],
                "the mean, which is also the nominal value",
            ),
            Parameter::required("spread", &["quantity"], "one standard deviation; a duration for an instant"),
        ),
    )
};

static TO: Entry = Entry {
    result: "a span of time, or a range of quantities",
    gaps: "It meets none.",
    shows: &[
        Shows { program: "1850..1900 CE", gives: "1850..1900 CE" },
        Shows { program: "19..23 kyr", gives: "19..23 kyr" },
    ],
    fails: &[Fails { program: "1900..1850 CE", code: "reversed-span", says: "backwards" }],
    search: &["span", "range", "window", "period"],
    reads_clock: ReadsClock::Never,
    shape: |call| match (call.shape("first")?, call.shape("last")?) {
        (Shape::Instant(_), Shape::Instant(_)) => Ok(Shape::Span),
        (Shape::Quantity(first), Shape::Quantity(last)) => {
            first.unit.factor_to(&last.unit)?;
            Ok(Shape::Range(first.unit))
        }
        (first, last) => Err(Fault::new(
            "wrong-argument",
            format!("found {} and {}", first.describe(), last.describe()),
        )
        .help("both ends need the same kind: two instants (1850..1900 CE) or two quantities (19..23 kyr)")
        .into()),
    },
    body: Body::PerMember(|call| match (call.value("first")?.as_ref(), call.value("last")?.as_ref()) {
        (Value::Instant(first), Value::Instant(last)) => Ok(Value::Span(TimeSpan::between(first, last)?)),
        (Value::Quantity(_), Value::Quantity(last)) => {
            let factor = last.measure.unit.factor_to(&call.measure("first")?.unit)?;
            let (low, high) = (call.certain("first")?, call.certain("last")? * factor);
            let unit = call.measure("first")?.unit;
            Ok(Value::Range(Range { low: low.min(high), high: low.max(high), unit }))
        }
        (first, _) => Err(wrong_kind("first", first).into()),
    }),
    ..operator(
        "..",
        "A span of time or a range, both ends in; a calendar year as an end counts whole.",
        &two(
            Parameter::required("first", &["instant", "quantity"], "one end"),
            Parameter::required("last", &["instant", "quantity"], "the other end"),
        ),
    )
};

static BY: Entry = Entry {
    result: "a clock: steps of the calendar, or instants of an age",
    gaps: "It meets none.",
    shows: &[
        Shows { program: "1850..1900 CE by 1 yr", gives: "51 steps, 1850 CE to 1900 CE" },
        Shows { program: "800..0 ka by 1 kyr", gives: "801 instants, 800 ka to 0 ka" },
    ],
    fails: &[
        Fails { program: "1850..1900 CE by 10 yr", code: "clock-step", says: "does not divide" },
        Fails { program: "1850..1900 CE by 0 yr", code: "clock-step", says: "longer than nothing" },
        Fails { program: "0..1000 Ma by 1 day", code: "clock-size", says: "steps" },
    ],
    search: &["clock", "axis", "resolution", "time step"],
    reads_clock: ReadsClock::Never,
    shape: |_| Ok(Shape::Clock),
    body: Body::PerMember(|call| {
        let Some(span) = call.span("span")? else {
            return Err(Fault::new("missing-argument", "no span").into());
        };
        let step_years = call.certain("step")?;
        let step = call.value("step")?;
        let days = match step.as_ref() {
            Value::Quantity(step)
                if step.measure.unit.to_string() == "day" && step.first().fract().abs() < 1e-9 =>
            {
                Some(step.first() as i64)
            }
            _ => None,
        };
        Ok(Value::Clock(Arc::new(Clock::new(&span, step_years, days, None)?)))
    }),
    ..operator(
        "by",
        "A span divided into a clock.",
        &two(
            Parameter::required("span", &["span"], "what is divided"),
            Parameter::required("step", &["duration"], "the length of a step; it must divide the span")
                .in_unit("yr"),
        ),
    )
};

static IN: Entry = Entry {
    result: "the same in the unit asked for; an instant in another era",
    gaps: "A gap stays a gap.",
    shows: &[
        Shows { program: "1.8 ppm in ppb", gives: "1800 ppb" },
        Shows { program: "21 ka in BCE", gives: "19051 BCE" },
    ],
    fails: &[Fails { program: "1 ppm in W/m2", code: "unit-mismatch", says: "measure different things" }],
    search: &["convert", "unit"],
    reads_clock: ReadsClock::Never,
    shape: |call| match (call.shape("value")?, unit_argument(call)?) {
        (Shape::Instant(_), Target::Era(era)) => Ok(Shape::Instant(era)),
        (Shape::Quantity(measure), Target::Unit(unit)) => Ok(Shape::Quantity(measure.convert(&unit)?.0)),
        (Shape::Series(measure), Target::Unit(unit)) => Ok(Shape::Series(measure.convert(&unit)?.0)),
        (Shape::Bundle(parts), Target::Unit(unit)) => {
            let convert =
                |(label, measure): &(Arc<str>, Measure)| Ok((label.clone(), measure.convert(&unit)?.0));
            Ok(Shape::Bundle(parts.iter().map(convert).collect::<Result<_, Fault>>()?))
        }
        (shape, _) => Err(Fault::new("wrong-argument", format!("{} is not shown in that", shape.describe()))
            .help("an instant is shown in an era (`in ka`), a quantity or series in a unit (`in ppb`)")
            .into()),
    },
    body: Body::PerMember(|call| {
        let value = call.value("value")?;
        match (value.as_ref(), unit_argument(call)?) {
            (Value::Instant(instant), Target::Era(era)) => {
                // Who asks for an era wants the number in it, of a date, too.
                let moved = Instant::at(instant.years.clone(), era, instant.width_years);
                Ok(Value::Instant(Instant { is_date: false, ..moved }))
            }
            (Value::Quantity(quantity), Target::Unit(unit)) => {
                let (measure, factor) = quantity.measure.convert(&unit)?;
                Ok(Value::Quantity(Quantity { values: quantity.values.times(factor), measure }))
            }
            (Value::Series(series), Target::Unit(unit)) => {
                let (measure, factor) = series.measure.convert(&unit)?;
                Ok(Value::Series(series.with(series.values.times(factor), measure)))
            }
            (Value::Bundle(bundle), Target::Unit(unit)) => {
                let converted = super::onto::each_component(bundle, &mut |series, _| {
                    let (measure, factor) = series.measure.convert(&unit)?;
                    Ok(series.with(series.values.times(factor), measure))
                })?;
                Ok(Value::Bundle(converted))
            }
            (other, _) => Err(wrong_kind("value", other).into()),
        }
    }),
    ..operator(
        "in",
        "Convert to another unit, or show an instant in another era.",
        &two(
            Parameter::required("value", NUMERIC_OR_INSTANT, "what is converted"),
            Parameter::required("unit", &["text"], "the unit or era, written without quotes"),
        ),
    )
};

pub(super) const FAMILY: &[&Entry] =
    &[&PLUS, &MINUS, &TIMES, &OVER, &POWER, &NEGATE, &PLUS_MINUS, &TO, &BY, &IN];

enum Target {
    Unit(Unit),
    Era(Era),
}

fn unit_argument(call: &Call<'_>) -> Result<Target, Stop> {
    let text = call.text("unit")?.unwrap_or_default();
    if let Some(era) = Era::parse(&text) {
        return Ok(Target::Era(era));
    }
    Unit::parse(&text).map(Target::Unit).map_err(|fault| {
        Fault::new("unknown-unit", format!("`{}` is no unit", fault.word)).blame("unit").into()
    })
}

/// The argument as a quantity or one series: a bundle counts by its sum.
pub(super) fn numeric(call: &Call<'_>, name: &'static str) -> Result<Numeric, Stop> {
    let value = call.value(name)?;
    match value.as_ref() {
        Value::Quantity(quantity) => Ok(Numeric::Quantity(quantity.clone())),
        Value::Series(series) => Ok(Numeric::Series(series.clone())),
        Value::Bundle(bundle) => Ok(Numeric::Series(total(call.context, bundle)?)),
        other => Err(wrong_kind(name, other).into()),
    }
}

/// A quantity where all operands are, a series where one is.
fn numeric_shape(measure: Measure, operands: &[Shape]) -> Shape {
    if operands.iter().all(|shape| matches!(shape, Shape::Quantity(_))) {
        Shape::Quantity(measure)
    } else {
        Shape::Series(measure)
    }
}

fn sum_shape(call: &Call<'_>) -> Result<Shape, Stop> {
    match (call.shape("left")?, call.shape("right")?) {
        (Shape::Instant(_), Shape::Instant(_)) => {
            Err(Fault::new("wrong-argument", "two instants cannot be added")
                .help("subtract them for a duration")
                .into())
        }
        (Shape::Instant(era), other) | (other, Shape::Instant(era)) => {
            moved_instant(&other)?;
            Ok(Shape::Instant(era))
        }
        (left, right) => {
            let (measure, _) = call.measure("left")?.sum(&call.measure("right")?, false)?;
            Ok(numeric_shape(measure, &[left, right]))
        }
    }
}

fn difference_shape(call: &Call<'_>) -> Result<Shape, Stop> {
    match (call.shape("left")?, call.shape("right")?) {
        (Shape::Instant(era), Shape::Instant(_)) => Ok(Shape::Quantity(Measure::of(duration_unit(era)?))),
        (Shape::Instant(era), other) => {
            moved_instant(&other)?;
            Ok(Shape::Instant(era))
        }
        (left, Shape::Instant(_)) => {
            let message = format!("an instant cannot be subtracted from {}", left.describe());
            Err(Fault::new("wrong-argument", message)
                .help("a span of time is written with two points: `1850..1900 CE`")
                .into())
        }
        (left, right) => {
            let (measure, _) = call.measure("left")?.sum(&call.measure("right")?, true)?;
            Ok(numeric_shape(measure, &[left, right]))
        }
    }
}

fn moved_instant(by: &Shape) -> Result<(), Stop> {
    match by {
        Shape::Quantity(measure) if measure.unit.is_time() => Ok(()),
        other => Err(Fault::new(
            "wrong-argument",
            format!("an instant moves by a duration, not by {}", other.describe()),
        )
        .help("write for instance `1850 CE + 30 yr`")
        .into()),
    }
}

/// The unit in which the distance of two instants of an era is told.
fn duration_unit(era: Era) -> Result<Unit, Stop> {
    let text = match era {
        Era::Ka => "kyr",
        Era::Ma => "Myr",
        Era::Ce | Era::Bce | Era::CalBp | Era::B2k => "yr",
    };
    Unit::parse(text).map_err(|_| Fault::new("internal", "a unit of the table is missing").into())
}

fn years_of(quantity: &Quantity) -> Result<Block, Stop> {
    let factor = quantity.measure.unit.factor_to(&duration_unit(Era::Ce)?)?;
    Ok(quantity.values.times(factor))
}

fn plus(call: &Call<'_>) -> Result<Value, Stop> {
    sum(call, 1.0)
}

fn minus(call: &Call<'_>) -> Result<Value, Stop> {
    sum(call, -1.0)
}

fn sum(call: &Call<'_>, sign: f64) -> Result<Value, Stop> {
    let (left, right) = (call.value("left")?, call.value("right")?);
    match (left.as_ref(), right.as_ref()) {
        (Value::Instant(later), Value::Instant(earlier)) => {
            let unit = duration_unit(later.era)?;
            let years = later.years.zip(&earlier.years, |later, earlier| later - earlier);
            let factor = duration_unit(Era::Ce)?.factor_to(&unit)?;
            Ok(Value::Quantity(Quantity { values: years.times(factor), measure: Measure::of(unit) }))
        }
        (Value::Instant(instant), Value::Quantity(duration))
        | (Value::Quantity(duration), Value::Instant(instant)) => {
            let moved = instant.years.zip(&years_of(duration)?, |year, years| year + sign * years);
            Ok(Value::Instant(Instant::at(moved, instant.era, instant.width_years)))
        }
        _ => combine(
            call,
            |left, right| left.sum(right, sign < 0.0),
            // The factor is one for equal units, so that x - x is exactly zero.
            move |left, right, factor| left + sign * (factor * right),
        ),
    }
}

/// Two numeric operands, number by number on one axis.
fn combine(
    call: &Call<'_>,
    measure: impl Fn(&Measure, &Measure) -> Result<(Measure, f64), Fault>,
    function: impl Fn(f64, f64, f64) -> f64,
) -> Result<Value, Stop> {
    // What is too large for a number is no number: infinities are gaps here as in files.
    let function = |left: f64, right: f64, factor: f64| {
        let result = function(left, right, factor);
        if result.is_finite() { result } else { f64::NAN }
    };
    match (numeric(call, "left")?, numeric(call, "right")?) {
        (Numeric::Quantity(left), Numeric::Quantity(right)) => {
            let (measure, factor) = measure(&left.measure, &right.measure)?;
            let values = left.values.zip(&right.values, |left, right| function(left, right, factor));
            Ok(Value::Quantity(Quantity { values, measure }))
        }
        (Numeric::Series(left), Numeric::Quantity(right)) => {
            let (measure, factor) = measure(&left.measure, &right.measure)?;
            let values = left.values.zip(&right.values, |left, right| function(left, right, factor));
            Ok(Value::Series(left.with(values, measure)))
        }
        (Numeric::Quantity(left), Numeric::Series(right)) => {
            let (measure, factor) = measure(&left.measure, &right.measure)?;
            let values = left.values.zip(&right.values, |left, right| function(left, right, factor));
            Ok(Value::Series(right.with(values, measure)))
        }
        (Numeric::Series(left), Numeric::Series(right)) => {
            let (measure, factor) = measure(&left.measure, &right.measure)?;
            let named = [(&left, call.label("left")), (&right, call.label("right"))];
            let aligned = align(call.context, &named)?;
            let mut blocks = aligned.blocks.into_iter();
            let (Some(first), Some(second)) = (blocks.next(), blocks.next()) else {
                return Err(Fault::new("internal", "two series came back as fewer").into());
            };
            let values = first.zip(&second, |left, right| function(left, right, factor));
            Ok(Value::Series(Series::new(aligned.axis, values, measure, aligned.standing)))
        }
    }
}

fn times_shape(call: &Call<'_>) -> Result<Shape, Stop> {
    let measure = call.measure("left")?.product(&call.measure("right")?, 1);
    Ok(numeric_shape(measure, &[call.shape("left")?, call.shape("right")?]))
}

fn times(call: &Call<'_>) -> Result<Value, Stop> {
    combine(call, |left, right| Ok((left.product(right, 1), 1.0)), |left, right, _| left * right)
}

fn over_shape(call: &Call<'_>) -> Result<Shape, Stop> {
    let measure = call.measure("left")?.product(&call.measure("right")?, -1);
    Ok(numeric_shape(measure, &[call.shape("left")?, call.shape("right")?]))
}

fn over(call: &Call<'_>) -> Result<Value, Stop> {
    combine(call, |left, right| Ok((left.product(right, -1), 1.0)), |left, right, _| left / right)
}

fn power_measure(call: &Call<'_>) -> Result<Measure, Stop> {
    let base = call.measure("base")?;
    if base.unit.is_bare() {
        return Ok(Measure::number());
    }
    let exponent = call.certain("exponent")?;
    let whole = exponent.round();
    if (exponent - whole).abs() > 1e-12 || whole.abs() > 20.0 {
        return Err(Fault::new(
            "fractional-power",
            format!("only a whole power can be taken of {}", base.unit),
        )
        .blame("exponent")
        .help("divide by a quantity of the same unit first, so that a plain number is raised")
        .into());
    }
    Ok(Measure::of(Unit::number().times(&base.unit, whole as i8)))
}

fn power_shape(call: &Call<'_>) -> Result<Shape, Stop> {
    Ok(numeric_shape(power_measure(call)?, &[call.shape("base")?]))
}

fn power(call: &Call<'_>) -> Result<Value, Stop> {
    let measure = power_measure(call)?;
    let exponent = call.numbers("exponent")?;
    let raise = |base: f64, exponent: f64| {
        let power = base.powf(exponent);
        if power.is_finite() { power } else { f64::NAN }
    };
    Ok(match numeric(call, "base")? {
        Numeric::Quantity(base) => {
            Value::Quantity(Quantity { values: base.values.zip(&exponent, raise), measure })
        }
        Numeric::Series(base) => Value::Series(base.with(base.values.zip(&exponent, raise), measure)),
    })
}

fn spread_shape(call: &Call<'_>) -> Result<Shape, Stop> {
    let centre = call.shape("centre")?;
    let spread = call.measure("spread")?;
    match &centre {
        Shape::Instant(_) if !spread.unit.is_time() => Err(Fault::new(
            "wrong-argument",
            format!("the spread of an instant is a duration, not {}", call.shape("spread")?.describe()),
        )
        .blame("spread")
        .into()),
        Shape::Quantity(measure) => {
            spread.unit.factor_to(&measure.unit)?;
            Ok(centre)
        }
        _ => Ok(centre),
    }
}

fn plus_minus(call: &Call<'_>) -> Result<Value, Stop> {
    let spread = call.value("spread")?;
    let Value::Quantity(spread) = spread.as_ref() else { return Err(wrong_kind("spread", &spread).into()) };
    if spread.values.data().iter().any(|value| *value < 0.0) {
        return Err(Fault::new(
            "negative-spread",
            "after ± stands a standard deviation, which is not negative",
        )
        .blame("spread")
        .into());
    }
    let drawn = |centre: &Block, spread: &Block| match call.context.path() {
        Path::Nominal => centre.clone(),
        Path::Block { .. } => {
            let deviation =
                spread.zip(&Block::column(call.context.standard_normals()), |size, draw| size * draw);
            centre.zip(&deviation, |centre, deviation| centre + deviation)
        }
    };
    let centre = call.value("centre")?;
    match centre.as_ref() {
        Value::Instant(instant) => {
            let years = drawn(&instant.years, &years_of(spread)?);
            let drawn = Instant::at(years, instant.era, 0.0);
            Ok(Value::Instant(Instant { is_date: instant.is_date, ..drawn }))
        }
        Value::Quantity(quantity) => {
            let factor = spread.measure.unit.factor_to(&quantity.measure.unit)?;
            let values = drawn(&quantity.values, &spread.values.times(factor));
            Ok(Value::Quantity(Quantity { values, measure: quantity.measure.clone() }))
        }
        other => Err(wrong_kind("centre", other).into()),
    }
}
