//! Smoothing, trends, sums and rates along time.

use std::borrow::Cow;
use std::sync::Arc;

use super::entry::{Body, Entry, Fails, Shows};
use super::time::{each_measure, series_or_bundle};
use crate::base::Fault;
use crate::language::{Choice, Parameter, Signature};
use crate::science::smoothing::{self, Ends};
use crate::value::{Axis, AxisKind, Measure, Reading, Series, Standing, Unit};

const SERIES: &[&str] = &["series", "bundle"];

static SMOOTH: Entry = Entry {
    name: "smooth",
    summary: "The series averaged by a window that moves along it.",
    signature: Signature {
        parameters: &[
            Parameter::required("series", SERIES, "a series or bundle"),
            Parameter::required(
                "width",
                &["duration"],
                "the width of a running mean; one standard deviation of a Gaussian",
            )
            .in_unit("yr"),
            Parameter::choice(
                "window",
                &[
                    Choice::plain("running_mean", "every value inside the window counts the same").also(&[
                        "mean",
                        "moving_average",
                        "moving_mean",
                        "boxcar",
                        "rolling",
                    ]),
                    Choice::plain("gaussian", "Gaussian weights, cut at four standard deviations"),
                ],
                "running_mean",
                "the weights",
            ),
            Parameter::choice(
                "ends",
                &[
                    Choice::plain("shortened", "the mean of the part of the window inside the record"),
                    Choice::plain("gap", "no value where the window reaches past the record"),
                ],
                "shortened",
                "what happens at the ends",
            ),
        ],
    },
    result: "the same on its own axis; a cell that the window covers in part counts by that part",
    equation: Some(r"y(t) = \frac{\int w(s)\,x(t+s)\,ds}{\int w(s)\,ds}"),
    gaps: "Two thirds of the window inside the record must have values, or there is a gap.",
    shows: &[
        Shows {
            program: "x = series([1, 2, 6, 2, 1] ppm, along: 1850..1854 CE by 1 yr)\nx |> smooth(3 yr)",
            gives: "5 steps, 1850 CE to 1854 CE: first 1.5, last 1.5 ppm",
        },
        Shows {
            program: "x = series([1, 2, 6, 2, 1] ppm, along: 1850..1854 CE by 1 yr)\nx |> smooth(3 yr, ends: gap)",
            gives: "5 steps, 1850 CE to 1854 CE: first 3, last 3 ppm; 2 gaps",
        },
    ],
    fails: &[Fails {
        program: "x = series([1, 2] ppm, along: 1850..1851 CE by 1 yr)\nx |> smooth(0 yr)",
        code: "out-of-range",
        says: "longer than nothing",
    }],
    search: &["moving average", "running mean", "filter", "gaussian"],
    shape: |call| call.shape("series"),
    body: Body::PerMember(|call| {
        let width = call.certain("width")?;
        if width <= 0.0 {
            return Err(Fault::new("out-of-range", "the width of a window must be longer than nothing")
                .blame("width")
                .into());
        }
        let gaussian = call.choice("window").is_some_and(|(word, _)| word == "gaussian");
        let ends = if call.choice("ends").is_some_and(|(word, _)| word == "gap") {
            Ends::Gap
        } else {
            Ends::Shortened
        };
        series_or_bundle(&*call.value("series")?, "", &mut |series, _| {
            let (starts, stops) = cells(&series.axis);
            let cancellation = call.context.cancellation();
            let values = series.values.map_rows_until(series.axis.len(), cancellation, |from, to| {
                if gaussian {
                    return smoothing::gaussian_mean(&starts, &stops, from, width, ends, cancellation, to);
                }
                smoothing::running_mean(&starts, &stops, from, width, ends, to);
                Ok(())
            })?;
            Ok(series.with(values, series.measure.clone()))
        })
    }),
    ..Entry::PLAIN
};

/// The stretch of time that each value stands for: its step, or half way to the neighbouring instants.
pub(super) fn cells(axis: &Axis) -> (Cow<'_, [f64]>, Cow<'_, [f64]>) {
    if axis.kind == AxisKind::Steps {
        return (Cow::Borrowed(axis.starts()), Cow::Borrowed(axis.ends()));
    }
    let times = axis.starts();
    let between: Vec<f64> =
        times.iter().zip(times.iter().skip(1)).map(|(before, after)| 0.5 * (before + after)).collect();
    let half = |near: Option<(&f64, &f64)>| near.map_or(0.5, |(time, edge)| (edge - time).abs());
    let first = times.first().map(|time| time - half(times.first().zip(between.first())));
    let last = times.last().map(|time| time + half(times.last().zip(between.last())));
    let starts = first.into_iter().chain(between.iter().copied()).collect();
    let ends = between.iter().copied().chain(last).collect();
    (starts, ends)
}

static DETREND: Entry = Entry {
    name: "detrend",
    summary: "The series without its straight line.",
    signature: Signature { parameters: &[Parameter::required("series", SERIES, "a series or bundle")] },
    result: "in the same unit, as a difference; its mean is zero",
    equation: Some(r"y(t) = x(t) - \hat a - \hat b\,t"),
    gaps: "A gap stays a gap, and takes no part in the line.",
    shows: &[Shows {
        program: "x = series([1, 2, 3, 5] degC, along: 1850..1853 CE by 1 yr)\nx |> detrend()",
        gives: "4 steps, 1850 CE to 1853 CE: first 0.2, last 0.3 degC",
    }],
    fails: &[Fails { program: "detrend(3 ppm)", code: "wrong-argument", says: "a series" }],
    search: &["trend", "linear", "residual"],
    shape: |call| each_measure(call.shape("series")?, |measure| Ok(difference(measure))),
    body: Body::PerMember(|call| {
        series_or_bundle(&*call.value("series")?, "", &mut |series, _| {
            let times = series.axis.middles();
            let values = series.values.map_rows(times.len(), |from, to| {
                let line = smoothing::line(&times, from);
                for ((target, value), time) in to.iter_mut().zip(from).zip(&times) {
                    *target = line.map_or(f64::NAN, |(mean_time, mean, slope)| {
                        value - mean - slope * (time - mean_time)
                    });
                }
            });
            Ok(series.with(values, difference(&series.measure)))
        })
    }),
    ..Entry::PLAIN
};

fn difference(measure: &Measure) -> Measure {
    Measure { reading: Reading::Difference, ..measure.clone() }
}

static STANDARDISE: Entry = Entry {
    name: "standardise",
    summary: "The series minus its mean, over its standard deviation.",
    signature: Signature {
        parameters: &[
            Parameter::required("series", SERIES, "a series or bundle"),
            Parameter::optional(
                "over",
                &["span"],
                "the span that mean and standard deviation are taken of; all of it by default",
            ),
        ],
    },
    result: "a plain number; the standard deviation is that of a sample (n − 1)",
    equation: Some(r"y(t) = \frac{x(t) - \bar x}{s_x}"),
    gaps: "A gap stays a gap.",
    shows: &[Shows {
        program: "x = series([1, 2, 3] ppm, along: 1850..1852 CE by 1 yr)\nx |> standardise()",
        gives: "3 steps, 1850 CE to 1852 CE: first -1, last 1",
    }],
    fails: &[Fails {
        program: "x = series([2, 2, 2] ppm, along: 1850..1852 CE by 1 yr)\nx |> standardise()",
        code: "no-spread",
        says: "does not change",
    }],
    search: &["normalise", "z-score", "unit variance"],
    shape: |call| each_measure(call.shape("series")?, |_| Ok(Measure::number())),
    body: Body::PerMember(|call| {
        let over = call.span("over")?;
        let name = call.label("series");
        series_or_bundle(&*call.value("series")?, &name, &mut |series, name| {
            let window = match &over {
                None => series.values.clone(),
                Some(span) => series.values.columns_in(series.axis.inside(span)),
            };
            let flat = |row: &[f64]| {
                smoothing::mean_and_deviation(row).is_none_or(|(_, deviation)| deviation <= 0.0)
            };
            if flat(window.member(0)) {
                return Err(Fault::new(
                    "no-spread",
                    format!("`{name}` does not change there, so nothing can be divided by its spread"),
                )
                .into());
            }
            let mut member = 0;
            let values = series.values.map_rows(series.axis.len(), |from, to| {
                let known = smoothing::mean_and_deviation(window.member(member));
                member += 1;
                for (target, value) in to.iter_mut().zip(from) {
                    *target = known
                        .filter(|(_, deviation)| *deviation > 0.0)
                        .map_or(f64::NAN, |(mean, deviation)| (value - mean) / deviation);
                }
            });
            Ok(series.with(values, Measure::number()))
        })
    }),
    ..Entry::PLAIN
};

static CUMULATE: Entry = Entry {
    name: "cumulate",
    summary: "The integral of the series from its beginning.",
    signature: Signature { parameters: &[Parameter::required("series", SERIES, "a series or bundle")] },
    result: "in the unit times years: instants at the bounds of steps, the first of them zero; so `rate(cumulate(x))` is x",
    equation: Some(r"y(t) = \int_{t_0}^{t} x(s)\,ds"),
    gaps: "After a gap, everything is a gap.",
    shows: &[Shows {
        program: "x = series([1, 2, 3] W/m2, along: 1850..1852 CE by 1 yr)\ncumulate(x)",
        gives: "4 instants, 1850 CE to 1853 CE: first 0, last 6 W*yr/m2",
    }],
    fails: &[Fails { program: "cumulate(3 ppm)", code: "wrong-argument", says: "a series" }],
    search: &["integrate", "integral", "sum", "total", "heat content"],
    shape: |call| each_measure(call.shape("series")?, |measure| Ok(measure.product(&per_year()?, 1))),
    body: Body::PerMember(|call| {
        series_or_bundle(&*call.value("series")?, "", &mut |series, _| {
            let axis = &series.axis;
            let times: Vec<f64> = match axis.kind {
                AxisKind::Instants => axis.starts().to_vec(),
                AxisKind::Steps => axis.starts().iter().chain(axis.ends().last()).copied().collect(),
            };
            let lengths = axis.lengths();
            let values = series.values.map_rows(times.len(), |from, to| match axis.kind {
                AxisKind::Steps => smoothing::integral_of_steps(&lengths, from, to),
                AxisKind::Instants => smoothing::integral_of_instants(&times, from, to),
            });
            let axis = Arc::new(Axis::instants(times, axis.era));
            Ok(derived(series, axis, values, series.measure.product(&per_year()?, 1)))
        })
    }),
    ..Entry::PLAIN
};

static RATE: Entry = Entry {
    name: "rate",
    summary: "The change of the series per time.",
    signature: Signature { parameters: &[Parameter::required("series", SERIES, "a series or bundle")] },
    result: "in the unit over years: steps between instants; between steps, instants at their bounds",
    equation: Some(r"y = \frac{x_{k+1} - x_k}{t_{k+1} - t_k}"),
    gaps: "Beside a gap there is a gap.",
    shows: &[
        Shows {
            program: "x = series([1, 2, 4] W/m2, along: 1850..1852 CE by 1 yr)\nrate(cumulate(x))",
            gives: "3 steps, 1850 CE to 1852 CE: first 1, last 4 W/m2",
        },
        Shows {
            program: "clock = 1850..1852 CE by 1 yr\nx = ramp(1850..1852 CE, 3 W/m2)\nmaximum(rate(cumulate(x)) - x)",
            gives: "0 W/m2",
        },
        Shows {
            program: "x = series([1, 2, 4] ppm, along: 1850..1852 CE by 1 yr)\nrate(x)",
            gives: "2 instants, 1851 CE to 1852 CE: first 1, last 2 ppm/yr",
        },
    ],
    fails: &[Fails {
        program: "x = series([1] ppm, at: [1850 CE])\nrate(x)",
        code: "too-few-values",
        says: "two values",
    }],
    search: &["derivative", "difference", "slope", "per year"],
    shape: |call| each_measure(call.shape("series")?, |measure| Ok(measure.product(&per_year()?, -1))),
    body: Body::PerMember(|call| {
        let name = call.label("series");
        series_or_bundle(&*call.value("series")?, &name, &mut |series, name| {
            let axis = &series.axis;
            if axis.len() < 2 {
                return Err(Fault::new(
                    "too-few-values",
                    format!("a rate needs two values, and `{name}` has {}", axis.len()),
                )
                .into());
            }
            let times = axis.middles();
            let values =
                series.values.map_rows(times.len() - 1, |from, to| smoothing::differences(&times, from, to));
            let new = match axis.kind {
                AxisKind::Instants => Axis::steps(
                    times.iter().take(times.len() - 1).copied().collect(),
                    times.iter().skip(1).copied().collect(),
                    axis.era,
                ),
                AxisKind::Steps => Axis::instants(axis.starts().iter().skip(1).copied().collect(), axis.era),
            };
            Ok(derived(series, Arc::new(new), values, series.measure.product(&per_year()?, -1)))
        })
    }),
    ..Entry::PLAIN
};

pub(super) const FAMILY: &[&Entry] = &[&SMOOTH, &DETREND, &STANDARDISE, &CUMULATE, &RATE];

fn per_year() -> Result<Measure, Fault> {
    Unit::parse("yr").map(Measure::of).map_err(|_| Fault::new("internal", "a unit of the table is missing"))
}

/// A series on an axis that follows from another's: its own, unless that was pinned.
fn derived(from: &Series, axis: Arc<Axis>, values: crate::value::Block, measure: Measure) -> Series {
    let standing = if from.standing == Standing::Pinned { Standing::Pinned } else { Standing::Own };
    let mut series = Series::new(axis, values, measure, standing);
    series.longest_gap_years = series.longest_gap_years.max(from.longest_gap_years);
    series
}
