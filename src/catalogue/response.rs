//! Response models, and what they make of a forcing.

use std::sync::Arc;

use super::call::{Context, Path, Stop, wrong_kind};
use super::citations::{GEOFFROY_2013A, GEOFFROY_2013B};
use super::entry::{Body, Entry, Fails, ReadsClock, Room, Shows};
use super::onto::bring;
use super::time::{each_measure, series_or_bundle};
use crate::base::Fault;
use crate::language::{Choice, Parameter, Signature};
use crate::science::two_layer::{
    Propagator, State, TwoLayerError, TwoLayerParameters, respond_constant_over_steps,
    respond_linear_between_instants, temperature_over_steps,
};
use crate::value::{AxisKind, Block, Measure, Model, Series, Shape, Standing, Unit, Value};

static TWO_LAYER: Entry = Entry {
    name: "two_layer",
    room: Room::Response,
    summary: "The two-layer energy balance model: an upper layer that exchanges heat with the deep ocean.",
    signature: Signature {
        parameters: &[
            Parameter::required("heat_capacity", &["quantity"], "heat capacity of the upper layer")
                .in_unit("W*yr/m2/K")
                .by_default("7.3 W*yr/m2/K"),
            Parameter::required("deep_heat_capacity", &["quantity"], "heat capacity of the deep layer")
                .in_unit("W*yr/m2/K")
                .by_default("106 W*yr/m2/K"),
            Parameter::required("exchange", &["quantity"], "heat exchange between the layers")
                .in_unit("W/m2/K")
                .by_default("0.73 W/m2/K"),
            Parameter::required("feedback", &["quantity"], "radiative feedback, positive where it restores")
                .in_unit("W/m2/K")
                .by_default("1.13 W/m2/K"),
            Parameter::required("heat_uptake_efficacy", &["quantity"], "efficacy of deep-ocean heat uptake")
                .in_unit("1")
                .by_default("1"),
        ],
    },
    result: "a model; the defaults are the multi-model means of Geoffroy et al. (2013a)",
    equation: Some(
        r"C \dot T = F - \lambda T - \varepsilon\gamma (T - T_d),\quad C_d \dot T_d = \gamma (T - T_d)",
    ),
    gaps: "It meets none.",
    shows: &[Shows {
        program: "two_layer(feedback: 1.3 ± 0.2 W/m2/K)",
        gives: "two-layer model: heat_capacity 7.3 W*yr/m2/K, deep_heat_capacity 106 W*yr/m2/K, exchange 0.73 W/m2/K, feedback 1.30 [0.98, 1.63] W/m2/K, heat_uptake_efficacy 1",
    }],
    fails: &[
        Fails { program: "two_layer(feedback: 1.3 W/m2)", code: "unit-mismatch", says: "W/m2/K" },
        Fails { program: "two_layer(feedback: -1.3 W/m2/K)", code: "out-of-range", says: "runs away" },
        Fails { program: "two_layer(heat_capacity: -7 W*yr/m2/K)", code: "out-of-range", says: "above zero" },
    ],
    citations: &[&GEOFFROY_2013A, &GEOFFROY_2013B],
    search: &["energy balance", "climate model", "box model", "ocean heat", "ecs", "feedback"],
    shape: |_| Ok(Shape::Model),
    body: Body::PerMember(|call| {
        let model = Model::TwoLayer {
            heat_capacity: call.numbers("heat_capacity")?,
            deep_heat_capacity: call.numbers("deep_heat_capacity")?,
            exchange: call.numbers("exchange")?,
            feedback: call.numbers("feedback")?,
            heat_uptake_efficacy: call.numbers("heat_uptake_efficacy")?,
        };
        let mut out_of_range = 0;
        for member in 0..rows(&model) {
            if let Err(error) = checked(&parameters(&model, member)) {
                // One nominal model out of range is a mistake; a few members of a wide distribution are gaps.
                if call.context.path() == Path::Nominal {
                    return Err(out_of_range_fault(&error).into());
                }
                out_of_range += 1;
            }
        }
        if let (Path::Block { first, count }, true) = (call.context.path(), out_of_range > 0) {
            call.context.note(format!(
                "two_layer: of the members {} to {}, {out_of_range} have no stable model; what follows from them is a gap",
                first + 1,
                first + count as u64
            ));
        }
        Ok(Value::Model(model))
    }),
    ..Entry::PLAIN
};

fn out_of_range_fault(error: &TwoLayerError) -> Fault {
    let (parameter, value, range) = match error {
        TwoLayerError::HeatCapacity(value) => ("heat_capacity", *value, "above zero"),
        TwoLayerError::DeepHeatCapacity(value) => ("deep_heat_capacity", *value, "above zero"),
        TwoLayerError::Exchange(value) => ("exchange", *value, "zero or above zero"),
        TwoLayerError::Feedback(value) => ("feedback", *value, "above zero, or the model runs away"),
        TwoLayerError::HeatUptakeEfficacy(value) => ("heat_uptake_efficacy", *value, "above zero"),
        TwoLayerError::StepLength { .. } | TwoLayerError::LengthMismatch { .. } => {
            return Fault::new("internal", format!("the model cannot be stepped: {error:?}"));
        }
    };
    Fault::new("out-of-range", format!("`{parameter}` is {value}, and must be {range}")).blame(parameter)
}

/// Whether a model is one that has an equilibrium: the science steps any feedback, but nothing can be attributed to a
/// climate that runs away.
fn checked(parameters: &TwoLayerParameters) -> Result<(), TwoLayerError> {
    parameters.validate()?;
    if parameters.feedback > 0.0 { Ok(()) } else { Err(TwoLayerError::Feedback(parameters.feedback)) }
}

fn rows(model: &Model) -> usize {
    model.parameters().iter().map(|(_, _, block)| block.rows()).max().unwrap_or(1)
}

fn parameters(model: &Model, member: usize) -> TwoLayerParameters {
    let Model::TwoLayer { heat_capacity, deep_heat_capacity, exchange, feedback, heat_uptake_efficacy } =
        model;
    TwoLayerParameters {
        heat_capacity: heat_capacity.scalar(member),
        deep_heat_capacity: deep_heat_capacity.scalar(member),
        exchange: exchange.scalar(member),
        feedback: feedback.scalar(member),
        heat_uptake_efficacy: heat_uptake_efficacy.scalar(member),
    }
}

static RESPOND: Entry = Entry {
    name: "respond",
    room: Room::Response,
    summary: "The surface temperature that a forcing causes in a model, from equilibrium; a bundle's components apart.",
    signature: Signature {
        parameters: &[
            Parameter::required("forcing", &["series", "bundle"], "the forcing").in_unit("W/m2"),
            Parameter::required("model", &["model"], "the response model"),
            Parameter::optional(
                "within_step",
                &[],
                "how the forcing runs within a step; by default constant over steps, linear between instants",
            )
            .or_choices(&[
                Choice::plain(
                    "constant",
                    "constant within each step; between instants, the later value holds",
                ),
                Choice::plain("linear", "straight between instants"),
            ]),
        ],
    },
    result: "the temperature change in degC: step means on a clock of steps, values at the instants on one of instants",
    equation: Some(
        r"\mathbf{T}(t + h) = e^{hA}\,\mathbf{T}(t) + \int_0^h e^{(h-s)A}\,\mathbf{b}\,F(t+s)\,ds",
    ),
    gaps: "The response begins in equilibrium at the first value; after a gap inside, everything is a gap. Data from before the clock's start are used where there are any.",
    shows: &[Shows {
        program: "clock = 1850..1950 CE by 1 yr\nrespond(constant(3.45 W/m2), two_layer())",
        gives: "101 steps, 1850 CE to 1950 CE: first 0.21746, last 2.23645 degC",
    }],
    fails: &[
        Fails {
            program: "clock = 1850..1950 CE by 1 yr\nrespond(constant(3 ppm), two_layer())",
            code: "unit-mismatch",
            says: "W/m2",
        },
        Fails {
            program: "clock = 1850..1950 CE by 1 yr\nrespond(constant(3 W/m2), two_layer(), within_step: linear)",
            code: "wrong-argument",
            says: "instants",
        },
    ],
    citations: &[&GEOFFROY_2013A, &GEOFFROY_2013B],
    search: &["temperature", "warming", "simulate", "run", "convolve"],
    reads_clock: ReadsClock::WithSeries,
    shape: |call| {
        let measure = temperature()?;
        each_measure(call.shape("forcing")?, |_| Ok(measure.clone()))
    },
    body: Body::PerMember(|call| {
        let model = call.value("model")?;
        let Value::Model(model) = model.as_ref() else { return Err(wrong_kind("model", &model).into()) };
        let within_step = call.choice("within_step").map(|(word, _)| word);
        let name = call.label("forcing");
        series_or_bundle(&*call.value("forcing")?, &name, &mut |series, name| {
            respond(call.context, series, name, model, within_step)
        })
    }),
    ..Entry::PLAIN
};

/// The most steps that a response takes, those before the clock included.
const LEAD_LIMIT: usize = 5_000_000;

fn temperature() -> Result<Measure, Fault> {
    Unit::parse("degC").map(Measure::of).map_err(|_| Fault::new("internal", "a unit of the table is missing"))
}

/// The response of one series: on the clock begun early enough for all its data, then cut to the clock.
pub(super) fn respond(
    context: &dyn Context,
    forcing: &Series,
    name: &str,
    model: &Model,
    within_step: Option<&'static str>,
) -> Result<Series, Stop> {
    let flux = Unit::parse("W/m2").map_err(|_| Fault::new("internal", "a unit of the table is missing"))?;
    let factor = forcing.measure.unit.factor_to(&flux).map_err(|fault| fault.blame("forcing"))?;
    let clock = context.clock().filter(|_| forcing.standing == Standing::Own);
    let (axis, values, lead) = match &clock {
        None => (forcing.axis.clone(), forcing.values.clone(), 0),
        Some(clock) => {
            let earlier = match (clock.axis.bounds(), forcing.axis.bounds()) {
                (Some((start, _)), Some((first, _))) if first < start => {
                    ((start - first) / clock.step_years + 1e-6).floor() as usize
                }
                _ => 0,
            };
            if earlier.saturating_add(clock.axis.len()) > LEAD_LIMIT {
                return Err(Fault::new(
                    "clock-size",
                    format!("`{name}` begins {earlier} steps of the clock before the clock"),
                )
                .blame("forcing")
                .help("take a part of it with `within`, or a clock with longer steps")
                .into());
            }
            let longer = if earlier == 0 { clock.axis.clone() } else { clock.extended_back(earlier).axis };
            if earlier > 0 && context.path() == Path::Nominal {
                context.note(format!(
                    "{name}: the response begins with the data, {earlier} steps before the clock"
                ));
            }
            let values = bring(context, forcing, name, &longer)?;
            (longer, values, earlier)
        }
    };
    let constant = match (within_step, axis.kind) {
        (Some("linear"), AxisKind::Steps) => {
            return Err(Fault::new(
                "wrong-argument",
                "a forcing is linear between instants, and this one is on steps",
            )
            .blame("within_step")
            .help("leave `within_step` out, or put the forcing on a clock of instants: `on(instants(clock))`")
            .into());
        }
        (Some("constant"), _) | (None, AxisKind::Steps) => true,
        _ => false,
    };
    let forcing_w_per_m2 = values.times(factor);
    let lengths = axis.lengths();
    let regular = axis.kind == AxisKind::Steps && is_regular(&lengths);
    let members = forcing_w_per_m2.rows().max(rows(model));
    let mut data = vec![f64::NAN; members * axis.len()];
    if !axis.is_empty() {
        for (member, out) in data.chunks_exact_mut(axis.len()).enumerate() {
            if member % 64 == 0 {
                context.cancellation().check()?;
            }
            let row = forcing_w_per_m2.member(member);
            let first = row.iter().position(|value| !value.is_nan()).unwrap_or(row.len());
            let (Some(row), Some(out)) = (row.get(first..), out.get_mut(first..)) else { continue };
            let parameters = parameters(model, member);
            if checked(&parameters).is_err() {
                continue;
            }
            if regular {
                let step = lengths.first().copied().unwrap_or(1.0);
                if let Ok(propagator) = Propagator::new(&parameters, step) {
                    temperature_over_steps(&propagator, row, out);
                }
                continue;
            }
            let response = if axis.kind == AxisKind::Steps {
                respond_constant_over_steps(
                    &parameters,
                    lengths.get(first..).unwrap_or(&[]),
                    row,
                    State::default(),
                )
                .map(|response| response.temperature)
            } else if constant {
                held_between_instants(&parameters, axis.starts().get(first..).unwrap_or(&[]), row)
            } else {
                respond_linear_between_instants(
                    &parameters,
                    axis.starts().get(first..).unwrap_or(&[]),
                    row,
                    State::default(),
                )
                .map(|response| response.temperature)
            };
            if let Ok(response) = response {
                out.copy_from_slice(&response);
            }
        }
    }
    note_gaps(context, &forcing_w_per_m2, name, &axis);
    let whole = Block::new(members, axis.len(), data);
    let measure = temperature()?;
    Ok(match clock {
        None => forcing_series(forcing, axis, whole, measure),
        Some(clock) => {
            let cut = whole.columns_in(lead..axis.len());
            Series::new(clock.axis.clone(), cut, measure, Standing::OnClock)
        }
    })
}

fn forcing_series(
    forcing: &Series,
    axis: Arc<crate::value::Axis>,
    values: Block,
    measure: Measure,
) -> Series {
    Series { axis, values, measure, standing: forcing.standing, longest_gap_years: forcing.longest_gap_years }
}

fn is_regular(lengths: &[f64]) -> bool {
    let first = lengths.first().copied().unwrap_or(0.0);
    lengths.iter().all(|length| (length - first).abs() <= 1e-10 * first)
}

/// The temperature at instants where the forcing of each holds since the one before; the first is in equilibrium.
fn held_between_instants(
    parameters: &TwoLayerParameters,
    times: &[f64],
    forcing: &[f64],
) -> Result<Vec<f64>, TwoLayerError> {
    let mut state = State::default();
    let mut temperature = vec![0.0; times.len().min(1)];
    for (times, forcing) in times.windows(2).zip(forcing.iter().skip(1)) {
        if let [before, after] = times {
            (state, _) = Propagator::new(parameters, after - before)?.step_constant(state, *forcing);
        }
        temperature.push(state.temperature);
    }
    Ok(temperature)
}

fn note_gaps(context: &dyn Context, forcing: &Block, name: &str, axis: &crate::value::Axis) {
    if context.path() != Path::Nominal {
        return;
    }
    let row = forcing.member(0);
    let Some(first) = row.iter().position(|value| !value.is_nan()) else { return };
    let place =
        |index: usize| axis.starts().get(index).map_or_else(String::new, |year| axis.era.format(*year));
    if first > 0 {
        context.note(format!(
            "{name}: the response begins in equilibrium with the first value, at {}",
            place(first)
        ));
    }
    let gap = row.iter().enumerate().skip(first).find(|(_, value)| value.is_nan());
    if let Some((index, _)) = gap {
        context
            .note(format!("{name}: the forcing has a gap at {}, so the response ends there", place(index)));
    }
}

pub(super) const FAMILY: &[&Entry] = &[&TWO_LAYER, &RESPOND];
