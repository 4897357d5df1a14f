//! One number of a series: over all of it, or over a span.

use super::algebra::window_means;
use super::call::{Call, Stop, wrong_kind};
use super::entry::{Body, Entry, Fails, ReadsClock, Shows};
use super::onto::total;
use crate::base::Fault;
use crate::language::{Parameter, Signature};
use crate::science::{reduce, smoothing};
use crate::value::{Block, Measure, Quantity, Reading, Series, Shape, Value};

const OVER: Parameter = Parameter::optional("over", &["span"], "the span; all of the series by default");
const OF: Parameter =
    Parameter::required("series", &["series", "bundle"], "a series; a bundle counts by its sum");

const REDUCTION: Entry = Entry {
    gaps: "Gaps are left out; at least one value must be there.",
    reads_clock: ReadsClock::WithSeries,
    shape: |call| Ok(Shape::Quantity(as_it_is(call.measure("series")?))),
    ..Entry::PLAIN
};

static MEAN: Entry = Entry {
    name: "mean",
    summary: "The mean of a series along time.",
    signature: Signature { parameters: &[OF, OVER] },
    result: "a quantity in the unit of the series",
    equation: Some(r"\bar x = \frac{\sum_k h_k x_k}{\sum_k h_k}"),
    gaps: "Gaps are left out; steps count by their length.",
    shows: &[Shows {
        program: "x = series([1, 2, 6] ppm, along: 1850..1852 CE by 1 yr)\nmean(x, over: 1850..1851 CE)",
        gives: "1.5 ppm",
    }],
    fails: &[Fails {
        program: "x = series([1, 2, 6] ppm, along: 1850..1852 CE by 1 yr)\nmean(x, over: 1900..1910 CE)",
        code: "no-overlap",
        says: "no value",
    }],
    search: &["average"],
    body: Body::PerMember(|call| {
        reduced(call, as_it_is, &|values, lengths| {
            let known = values.iter().zip(lengths).filter(|(value, _)| !value.is_nan());
            let weighted: Vec<f64> = known.clone().map(|(value, length)| value * length).collect();
            let whole: Vec<f64> = known.map(|(_, length)| *length).collect();
            reduce::sum(&weighted) / reduce::sum(&whole)
        })
    }),
    ..REDUCTION
};

static SD: Entry = Entry {
    name: "sd",
    summary: "The standard deviation of a series along time.",
    signature: Signature { parameters: &[OF, OVER] },
    result: "a quantity in the unit of the series, of a sample (n − 1)",
    equation: Some(r"s = \sqrt{\frac{1}{n - 1} \sum_k (x_k - \bar x)^2}"),
    shows: &[Shows {
        program: "x = series([1, 2, 3] ppm, along: 1850..1852 CE by 1 yr)\nsd(x)",
        gives: "1 ppm",
    }],
    fails: &[Fails { program: "sd(3 ppm)", code: "wrong-argument", says: "a series" }],
    search: &["standard deviation", "variance", "variability"],
    shape: |call| Ok(Shape::Quantity(as_difference(call.measure("series")?))),
    body: Body::PerMember(|call| {
        reduced(call, as_difference, &|values, _| {
            smoothing::mean_and_deviation(values).map_or(f64::NAN, |(_, deviation)| deviation)
        })
    }),
    ..REDUCTION
};

static MINIMUM: Entry = Entry {
    name: "minimum",
    summary: "The lowest value of a series.",
    signature: Signature { parameters: &[OF, OVER] },
    result: "a quantity in the unit of the series",
    shows: &[Shows {
        program: "x = series([1, 2, 3] ppm, along: 1850..1852 CE by 1 yr)\nminimum(x)",
        gives: "1 ppm",
    }],
    fails: &[Fails { program: "minimum(3 ppm)", code: "wrong-argument", says: "a series" }],
    search: &["min", "lowest", "smallest"],
    body: Body::PerMember(|call| {
        reduced(call, as_it_is, &|values, _| values.iter().copied().fold(f64::NAN, f64::min))
    }),
    ..REDUCTION
};

static MAXIMUM: Entry = Entry {
    name: "maximum",
    summary: "The highest value of a series.",
    signature: Signature { parameters: &[OF, OVER] },
    result: "a quantity in the unit of the series",
    shows: &[Shows {
        program: "x = series([1, 2, 3] ppm, along: 1850..1852 CE by 1 yr)\nmaximum(x)",
        gives: "3 ppm",
    }],
    fails: &[Fails { program: "maximum(3 ppm)", code: "wrong-argument", says: "a series" }],
    search: &["max", "highest", "largest", "peak"],
    body: Body::PerMember(|call| {
        reduced(call, as_it_is, &|values, _| values.iter().copied().fold(f64::NAN, f64::max))
    }),
    ..REDUCTION
};

static QUANTILE: Entry = Entry {
    name: "quantile",
    summary: "The value below which a share of a series lies.",
    signature: Signature {
        parameters: &[
            OF,
            Parameter::required("share", &["quantity"], "the share, from 0 to 1").in_unit("1"),
            OVER,
        ],
    },
    result: "a quantity in the unit of the series, linear between values",
    shows: &[Shows {
        program: "x = series([1, 2, 3, 4] ppm, along: 1850..1853 CE by 1 yr)\nquantile(x, 0.5)",
        gives: "2.5 ppm",
    }],
    fails: &[Fails {
        program: "x = series([1, 2, 3] ppm, along: 1850..1852 CE by 1 yr)\nquantile(x, 50)",
        code: "out-of-range",
        says: "0 to 1",
    }],
    search: &["percentile", "median"],
    body: Body::PerMember(|call| {
        let share = call.certain("share")?;
        if !(0.0..=1.0).contains(&share) {
            return Err(Fault::new("out-of-range", format!("a share runs from 0 to 1, and this is {share}"))
                .blame("share")
                .help("for 50 % write 0.5, or `50 percent`")
                .into());
        }
        reduced(call, as_it_is, &|values, _| reduce::quantile(values, share))
    }),
    ..REDUCTION
};

static CHANGE: Entry = Entry {
    name: "change",
    summary: "The mean over a later window minus that over an earlier one.",
    signature: Signature {
        parameters: &[
            OF,
            Parameter::required("to", &["span"], "the later window"),
            Parameter::required("from", &["span"], "the earlier window"),
        ],
    },
    result: "a quantity in the unit of the series, as a difference",
    equation: Some(r"\Delta x = \overline{x}_{\mathrm{later}} - \overline{x}_{\mathrm{earlier}}"),
    gaps: "Two thirds of each window must have values.",
    shows: &[Shows {
        program: "x = series([1, 2, 6, 8] degC, along: 1850..1853 CE by 1 yr)\nchange(x, to: 1852..1853 CE, from: 1850..1851 CE)",
        gives: "5.5 degC",
    }],
    fails: &[Fails {
        program: "x = series([1, 2, 6] ppm, along: 1850..1852 CE by 1 yr)\nchange(x, to: 1900..1910 CE, from: 1850..1851 CE)",
        code: "baseline",
        says: "two thirds",
    }],
    search: &["difference", "warming", "window"],
    shape: |call| Ok(Shape::Quantity(as_difference(call.measure("series")?))),
    body: Body::PerMember(|call| {
        let series = one_series(call)?;
        let name = call.label("series");
        let (Some(later), Some(earlier)) = (call.span("to")?, call.span("from")?) else {
            return Err(Fault::new("missing-argument", "a change needs two windows").into());
        };
        let later = window_means(&series, &name, &later).map_err(|stop| stop.blame("to"))?;
        let earlier = window_means(&series, &name, &earlier).map_err(|stop| stop.blame("from"))?;
        let values = later.zip(&earlier, |later, earlier| later - earlier);
        Ok(Value::Quantity(Quantity { values, measure: as_difference(series.measure) }))
    }),
    ..REDUCTION
};

pub(super) const FAMILY: &[&Entry] = &[&MEAN, &SD, &MINIMUM, &MAXIMUM, &QUANTILE, &CHANGE];

/// A reduced forcing is a number of the series, not a forcing any more.
fn as_it_is(measure: Measure) -> Measure {
    Measure { forcing: None, ..measure }
}

fn as_difference(measure: Measure) -> Measure {
    Measure { forcing: None, reading: Reading::Difference, ..measure }
}

fn one_series(call: &Call<'_>) -> Result<Series, Stop> {
    match call.value("series")?.as_ref() {
        Value::Series(series) => Ok(series.clone()),
        Value::Bundle(bundle) => total(call.context, bundle),
        other => Err(wrong_kind("series", other).into()),
    }
}

/// Each member's number, from its values and the lengths of their steps (one for instants).
fn reduced(
    call: &Call<'_>,
    measure: fn(Measure) -> Measure,
    reduce: &dyn Fn(&[f64], &[f64]) -> f64,
) -> Result<Value, Stop> {
    let series = one_series(call)?;
    let range = match call.span("over")? {
        None => 0..series.axis.len(),
        Some(span) => series.axis.inside(&span),
    };
    let here = series.values.columns_in(range.clone());
    if here.member(0).iter().all(|value| value.is_nan()) {
        return Err(Fault::new("no-overlap", format!("`{}` has no value there", call.label("series")))
            .detail(format!("it has {}", series.axis.describe()))
            .blame("over")
            .into());
    }
    let lengths = match series.axis.kind {
        crate::value::AxisKind::Steps => series.axis.lengths().get(range).unwrap_or(&[]).to_vec(),
        crate::value::AxisKind::Instants => vec![1.0; here.columns()],
    };
    let numbers: Vec<f64> = (0..here.rows()).map(|member| reduce(here.member(member), &lengths)).collect();
    Ok(Value::Quantity(Quantity { values: Block::column(numbers), measure: measure(series.measure) }))
}
