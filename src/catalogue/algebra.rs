//! Putting series together and taking them apart.

use std::sync::Arc;

use super::call::{Call, Stop, wrong_kind};
use super::entry::{Body, Entry, Fails, ReadsClock, Room, Shows};
use super::onto::{align, counted};
use super::splice::SPLICE;
use super::time::{each_measure, series_or_bundle};
use crate::base::Fault;
use crate::language::{Parameter, Signature};
use crate::science::reduce;
use crate::value::{Block, Bundle, Component, Content, Measure, Reading, Series, Shape, TimeSpan, Value};

const SERIES: &[&str] = &["series", "bundle"];

static COMPOSE: Entry = Entry {
    name: "compose",
    room: Room::Algebra,
    summary: "Drivers put together as named components whose sum is the forcing.",
    signature: Signature {
        parameters: &[Parameter::required(
            "components",
            SERIES,
            "series and bundles; each is called by its name, or by a label before it: `compose(early: x, late: y)`",
        )
        .repeated(true)],
    },
    result: "a bundle; its components keep their own axes until they are summed, shown or responded to",
    equation: Some(r"F(t) = \sum_i F_i(t)"),
    gaps: "A gap in one component is a gap in the sum.",
    shows: &[Shows {
        program: "clock = 1850..1851 CE by 1 yr\nsun = constant(0.1 W/m2)\nhaze = constant(-0.5 W/m2)\ncompose(sun, haze)",
        gives: "2 components (sun, haze); total: 2 steps, 1850 CE to 1851 CE: first -0.4, last -0.4 W/m2",
    }],
    fails: &[
        Fails {
            program: "clock = 1850..1851 CE by 1 yr\nx = constant(1 W/m2)\ncompose(x, x)",
            code: "equal-labels",
            says: "two components",
        },
        Fails {
            program: "clock = 1850..1851 CE by 1 yr\nx = constant(1 W/m2)\ny = constant(1 ppm)\ncompose(x, y)",
            code: "unit-mismatch",
            says: "measure different things",
        },
    ],
    search: &["sum", "combine", "add", "together", "total"],
    reads_clock: ReadsClock::WithSeries,
    labels: true,
    shape: |call| {
        let mut parts: Vec<(Arc<str>, Measure)> = Vec::new();
        let mut sum: Option<Measure> = None;
        for (item, (label, slot)) in call.repeated("components").into_iter().enumerate() {
            let label = label.unwrap_or_else(|| call.context.label(slot));
            let Some(measure) = call.context.shape(slot)?.measure() else { continue };
            if parts.iter().any(|(other, _)| *other == label) {
                return Err(Fault::new("equal-labels", format!("two components are called `{label}`"))
                    .blame_item(item)
                    .help(format!("name them apart: compose(early: {label}, late: {label})"))
                    .into());
            }
            sum = Some(match sum {
                None => measure.clone(),
                Some(sum) => {
                    let added = sum.sum(&measure, false).map_err(|fault| match fault.help {
                        Some(_) => fault,
                        None => fault.help(
                            "components add up to one forcing; a regressor that is none goes into `beside:` of `attribute`, or into a list",
                        ),
                    });
                    added.map_err(|fault| fault.blame_item(item))?.0
                }
            });
            parts.push((label, measure));
        }
        Ok(Shape::Bundle(parts))
    },
    body: Body::PerMember(|call| {
        let mut components = Vec::new();
        let mut leaves = 0;
        for (label, slot) in call.repeated("components") {
            let label = label.unwrap_or_else(|| call.context.label(slot));
            let content = match call.context.value(slot)?.as_ref() {
                Value::Series(series) => Content::Series(series.clone()),
                Value::Bundle(bundle) => Content::Bundle(bundle.clone()),
                other => return Err(wrong_kind("components", other).into()),
            };
            leaves += match &content {
                Content::Series(_) => 1,
                Content::Bundle(bundle) => bundle.leaves().len(),
            };
            if leaves > COMPONENTS_LIMIT {
                return Err(Fault::new("too-large", format!("this bundle has more than {COMPONENTS_LIMIT} components")).into());
            }
            components.push(Component { label, content });
        }
        let bundle = Bundle { components };
        let mixed = mixed_kinds(&bundle);
        if let Some(note) = mixed {
            call.context.note(note);
        }
        // Without a clock the components must share an axis; better to hear of it here than where they are summed.
        if call.context.clock().is_none() {
            let leaves = bundle.leaves();
            let named: Vec<_> = leaves.iter().map(|(label, series)| (*series, label.clone())).collect();
            align(call.context, &named)?;
        }
        Ok(Value::Bundle(bundle))
    }),
    ..Entry::PLAIN
};

/// The most components that a bundle may have, those of bundles inside it included: bundles of bundles double.
const COMPONENTS_LIMIT: usize = 1_000;

/// What to say where a forcing of undeclared kind goes with a declared one.
fn mixed_kinds(bundle: &Bundle) -> Option<String> {
    use crate::value::ForcingKind::Undeclared;
    let kinds: Vec<_> = bundle
        .leaves()
        .iter()
        .filter_map(|(label, series)| {
            series.measure.forcing.as_ref().map(|forcing| (label.clone(), forcing.kind))
        })
        .collect();
    let declared = kinds.iter().find(|(_, kind)| *kind != Undeclared)?.1;
    let undeclared: Vec<&str> =
        kinds.iter().filter(|(_, kind)| *kind == Undeclared).map(|(label, _)| &**label).collect();
    (!undeclared.is_empty()).then(|| {
        format!(
            "{}: loaded or made by hand, so its kind of forcing is not known; composed with {declared} forcing",
            undeclared.join(", ")
        )
    })
}

static WITHOUT: Entry = Entry {
    name: "without",
    room: Room::Algebra,
    summary: "A bundle with components left out.",
    signature: Signature {
        parameters: &[
            Parameter::required("bundle", &["bundle"], "a bundle"),
            Parameter::required(
                "components",
                &["list"],
                "the labels of the components to leave out: `[sun, haze]`",
            )
            .as_groups(),
        ],
    },
    result: "a bundle of the other components",
    gaps: "Gaps stay as they are.",
    shows: &[Shows {
        program: "clock = 1850..1851 CE by 1 yr\nsun = constant(0.1 W/m2)\nhaze = constant(-0.5 W/m2)\ncompose(sun, haze) |> without([haze])",
        gives: "1 component (sun); total: 2 steps, 1850 CE to 1851 CE: first 0.1, last 0.1 W/m2",
    }],
    fails: &[Fails {
        program: "clock = 1850..1851 CE by 1 yr\nsun = constant(0.1 W/m2)\nhaze = constant(1 W/m2)\ncompose(sun, haze) |> without([gases])",
        code: "unknown-component",
        says: "gases",
    }],
    search: &["drop", "exclude", "remove", "leave out"],
    shape: |call| {
        let Shape::Bundle(parts) = call.shape("bundle")? else {
            return Err(Fault::new("wrong-argument", "only a bundle has components to leave out")
                .blame("bundle")
                .into());
        };
        let labels: Vec<Arc<str>> = parts.iter().map(|(label, _)| label.clone()).collect();
        let out = labels_left_out(call, &labels)?;
        Ok(Shape::Bundle(parts.into_iter().filter(|(label, _)| !out.contains(label)).collect()))
    },
    body: Body::PerMember(|call| {
        let value = call.value("bundle")?;
        let Value::Bundle(bundle) = value.as_ref() else { return Err(wrong_kind("bundle", &value).into()) };
        let labels: Vec<Arc<str>> = bundle.components.iter().map(|part| part.label.clone()).collect();
        let out = labels_left_out(call, &labels)?;
        let components =
            bundle.components.iter().filter(|part| !out.contains(&part.label)).cloned().collect();
        Ok(Value::Bundle(Bundle { components }))
    }),
    ..Entry::PLAIN
};

fn labels_left_out(call: &Call<'_>, labels: &[Arc<str>]) -> Result<Vec<Arc<str>>, Stop> {
    let out: Vec<Arc<str>> = call.groups("components").unwrap_or(&[]).iter().flatten().cloned().collect();
    for label in &out {
        if !labels.contains(label) {
            return Err(unknown_component(label, labels).blame("components").into());
        }
    }
    if labels.iter().all(|label| out.contains(label)) {
        return Err(Fault::new("missing-argument", "no component would be left").blame("components").into());
    }
    Ok(out)
}

/// The fault for a label that no component has.
pub(super) fn unknown_component(label: &str, labels: &[Arc<str>]) -> Fault {
    let list: Vec<&str> = labels.iter().map(|label| &**label).collect();
    let fault = Fault::new("unknown-component", format!("no component is called `{label}`"))
        .detail(format!("the components are {}", list.join(", ")));
    match super::nearest(label, list.iter().copied()) {
        Some(near) => fault.help(format!("did you mean `{near}`?")),
        None => fault,
    }
}

static SCALE: Entry = Entry {
    name: "scale",
    room: Room::Algebra,
    summary: "A series, or every component of a bundle, times a factor.",
    signature: Signature {
        parameters: &[
            Parameter::required("series", SERIES, "a series or bundle"),
            Parameter::required(
                "factor",
                &["quantity"],
                "the factor; `1 ± 0.35` makes one shared scale uncertainty",
            ),
        ],
    },
    result: "in the product of the units; a plain factor keeps unit and kind of forcing",
    equation: Some(r"y(t) = a\,x(t)"),
    shows: &[Shows {
        program: "x = series([1, 2] W/m2, along: 1850..1851 CE by 1 yr)\nx |> scale(0.5)",
        gives: "2 steps, 1850 CE to 1851 CE: first 0.5, last 1 W/m2",
    }],
    fails: &[Fails {
        program: "x = series([1, 2] W/m2, along: 1850..1851 CE by 1 yr)\nx |> scale(\"half\")",
        code: "wrong-argument",
        says: "a quantity",
    }],
    search: &["multiply", "factor", "rescale", "efficacy"],
    shape: |call| {
        let factor = call.measure("factor")?;
        each_measure(call.shape("series")?, |measure| Ok(measure.product(&factor, 1)))
    },
    body: Body::PerMember(|call| {
        let factor = call.value("factor")?;
        let Value::Quantity(factor) = factor.as_ref() else {
            return Err(wrong_kind("factor", &factor).into());
        };
        series_or_bundle(&*call.value("series")?, "", &mut |series, _| {
            let values = series.values.zip(&factor.values, |value, factor| value * factor);
            Ok(series.with(values, series.measure.product(&factor.measure, 1)))
        })
    }),
    ..Entry::PLAIN
};

static ANOMALY: Entry = Entry {
    name: "anomaly",
    room: Room::Algebra,
    summary: "The series minus its own mean over a baseline.",
    signature: Signature {
        parameters: &[
            Parameter::required("series", SERIES, "a series or bundle"),
            Parameter::required("relative_to", &["span"], "the baseline"),
        ],
    },
    result: "in the same unit, as a difference",
    equation: Some(r"y(t) = x(t) - \overline{x}_{\mathrm{baseline}}"),
    gaps: "A gap stays a gap; two thirds of the baseline must have values.",
    shows: &[Shows {
        program: "x = series([14, 15, 16] degC, along: 1850..1852 CE by 1 yr)\nx |> anomaly(relative_to: 1850..1851 CE)",
        gives: "3 steps, 1850 CE to 1852 CE: first -0.5, last 1.5 degC",
    }],
    fails: &[Fails {
        program: "x = series([14, 15, 16] degC, along: 1850..1852 CE by 1 yr)\nx |> anomaly(relative_to: 1840..1851 CE)",
        code: "baseline",
        says: "two thirds",
    }],
    search: &["baseline", "reference period", "departure"],
    shape: |call| {
        each_measure(call.shape("series")?, |measure| {
            Ok(Measure { reading: Reading::Difference, ..measure.clone() })
        })
    },
    body: Body::PerMember(|call| {
        let Some(span) = call.span("relative_to")? else {
            return Err(Fault::new("missing-argument", "no baseline").into());
        };
        let name = call.label("series");
        series_or_bundle(&*call.value("series")?, &name, &mut |series, name| {
            let means = window_means(series, name, &span).map_err(|stop| stop.blame("relative_to"))?;
            let values = series.values.zip(&means, |value, mean| value - mean);
            Ok(series.with(values, Measure { reading: Reading::Difference, ..series.measure.clone() }))
        })
    }),
    ..Entry::PLAIN
};

/// The mean of every member over a window, of which two thirds must have values.
pub(super) fn window_means(series: &Series, name: &str, span: &TimeSpan) -> Result<Block, Stop> {
    let range = series.axis.inside(span);
    // What the window would hold if the axis filled it: steps by their length, instants by their spacing.
    let step = series.axis.median_step().max(1e-9);
    let whole = match series.axis.kind {
        crate::value::AxisKind::Steps => (span.end - span.start) / step,
        crate::value::AxisKind::Instants => ((span.end - span.start) / step).max(1.0),
    };
    let here = series.values.columns_in(range);
    let present = here.member(0).iter().filter(|value| !value.is_nan()).count();
    if (present as f64) < whole * (2.0 / 3.0) - 1e-6 || present == 0 {
        return Err(Fault::new(
            "baseline",
            format!("`{name}` has {} in {span}, and two thirds of it are needed", counted(present, "values")),
        )
        .detail(format!("{name}: {}", series.axis.describe()))
        .into());
    }
    Ok(here.map_rows(1, |row, mean| {
        let values: Vec<f64> = row.iter().copied().filter(|value| !value.is_nan()).collect();
        if let Some(mean) = mean.first_mut() {
            *mean = reduce::mean(&values);
        }
    }))
}

pub(super) const FAMILY: &[&Entry] = &[&COMPOSE, &WITHOUT, &SCALE, &ANOMALY, &SPLICE];
