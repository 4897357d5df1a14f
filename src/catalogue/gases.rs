//! Forcing by greenhouse gases.

use std::sync::Arc;

use super::call::{Call, Numeric, Stop};
use super::citations::MYHRE_1998;
use super::entry::{Body, Entry, Fails, ReadsClock, Room, Shows};
use super::onto::onto_clock;
use super::operators::numeric;
use crate::base::Fault;
use crate::language::{Choice, Parameter, Signature};
use crate::science::gases;
use crate::value::{Forcing, ForcingKind, Measure, Quantity, Shape, Unit, Value};

static CO2_FORCING: Entry = Entry {
    name: "co2_forcing",
    room: Room::Gases,
    summary: "The radiative forcing by a change of carbon dioxide.",
    signature: Signature {
        parameters: &[
            Parameter::required("co2", &["series", "quantity"], "the amount of CO2 in air").in_unit("ppm"),
            Parameter::required("reference", &["quantity"], "the amount that the change is from")
                .in_unit("ppm")
                .by_default("278 ppm"),
            Parameter::choice(
                "formula",
                &[Choice::plain("myhre1998", "5.35 W/m2 times the logarithm; stratosphere-adjusted")],
                "myhre1998",
                "the published formula",
            ),
        ],
    },
    result: "in W/m2, stratosphere-adjusted, as a change from the reference",
    equation: Some(r"F = 5.35\,\mathrm{W\,m^{-2}} \ln\frac{C}{C_0}"),
    gaps: "A gap stays a gap, and an amount that is not above zero is one.",
    shows: &[
        Shows {
            program: "co2_forcing(556 ppm)",
            gives: "3.70834 W/m2, stratosphere-adjusted change from 278 ppm CO2",
        },
        Shows {
            program: "co2 = series([278, 417] ppm, along: 1850..1851 CE by 1 yr)\nco2_forcing(co2)",
            gives: "2 steps, 1850 CE to 1851 CE: first 0, last 2.16924 W/m2, stratosphere-adjusted change from 278 ppm CO2",
        },
    ],
    fails: &[
        Fails { program: "co2_forcing(400 W/m2)", code: "unit-mismatch", says: "ppm" },
        Fails { program: "co2_forcing(400 ppm, formula: myhre)", code: "unknown-choice", says: "myhre" },
        Fails {
            program: "co2_forcing(400 ppm, reference: -1 ppm)",
            code: "out-of-range",
            says: "above zero",
        },
    ],
    citations: &[&MYHRE_1998],
    search: &["carbon dioxide", "greenhouse", "radiative forcing"],
    reads_clock: ReadsClock::WithSeries,
    shape: |call| {
        let measure = forcing_measure(call)?;
        Ok(match call.shape("co2")? {
            Shape::Quantity(_) => Shape::Quantity(measure),
            _ => Shape::Series(measure),
        })
    },
    body: Body::PerMember(co2_forcing),
    ..Entry::PLAIN
};

/// The forcing's measure: its kind, and what it is a change from.
fn forcing_measure(call: &Call<'_>) -> Result<Measure, Stop> {
    let unit = Unit::parse("W/m2").map_err(|_| Fault::new("internal", "a unit of the table is missing"))?;
    let reference = format!("{} ppm CO2", call.numbers("reference")?.first());
    let forcing = Forcing { kind: ForcingKind::StratosphereAdjusted, reference: Some(Arc::from(reference)) };
    Ok(Measure { forcing: Some(forcing), ..Measure::of(unit) })
}

fn co2_forcing(call: &Call<'_>) -> Result<Value, Stop> {
    let reference = call.numbers("reference")?;
    if reference.data().iter().any(|value| *value <= 0.0) {
        return Err(Fault::new("out-of-range", "the reference amount must be above zero")
            .blame("reference")
            .into());
    }
    let ppm = Unit::parse("ppm").map_err(|_| Fault::new("internal", "a unit of the table is missing"))?;
    let measure = forcing_measure(call)?;
    match numeric(call, "co2")? {
        Numeric::Quantity(co2) => {
            let values = co2.values.times(co2.measure.unit.factor_to(&ppm)?);
            let values = values.zip(&reference, gases::co2_forcing_myhre1998);
            Ok(Value::Quantity(Quantity { values, measure }))
        }
        Numeric::Series(co2) => {
            // The logarithm of a mean is not the mean of logarithms: the amounts are brought onto the clock first,
            // as they are for every product of series.
            let co2 = onto_clock(call.context, &co2, &call.label("co2"))?;
            let values = co2.values.times(co2.measure.unit.factor_to(&ppm)?);
            Ok(Value::Series(co2.with(values.zip(&reference, gases::co2_forcing_myhre1998), measure)))
        }
    }
}

pub(super) const FAMILY: &[&Entry] = &[&CO2_FORCING];
