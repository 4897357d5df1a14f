use super::*;

const PLAIN: TwoLayerParameters = TwoLayerParameters {
    heat_capacity: 8.0,
    deep_heat_capacity: 100.0,
    exchange: 0.7,
    feedback: 1.2,
    heat_uptake_efficacy: 1.3,
};

fn derivative(parameters: &TwoLayerParameters, state: State, forcing: f64) -> State {
    let p = parameters;
    let flux = p.exchange * (state.temperature - state.deep_temperature);
    State {
        temperature: (forcing - p.feedback * state.temperature - p.heat_uptake_efficacy * flux)
            / p.heat_capacity,
        deep_temperature: flux / p.deep_heat_capacity,
    }
}

/// One step by ten thousand small ones of the classical Runge–Kutta method: slow, plain and independent.
fn step_by_runge_kutta(
    parameters: &TwoLayerParameters,
    initial: State,
    years: f64,
    forcings: (f64, f64),
) -> State {
    const STEPS: u32 = 10_000;
    let width = years / f64::from(STEPS);
    let forcing = |part: f64| forcings.0 + (forcings.1 - forcings.0) * part / f64::from(STEPS);
    let add = |state: State, slope: State, by: f64| State {
        temperature: state.temperature + by * slope.temperature,
        deep_temperature: state.deep_temperature + by * slope.deep_temperature,
    };
    let mut state = initial;
    for step in 0..STEPS {
        let start = f64::from(step);
        let k1 = derivative(parameters, state, forcing(start));
        let k2 = derivative(parameters, add(state, k1, width / 2.0), forcing(start + 0.5));
        let k3 = derivative(parameters, add(state, k2, width / 2.0), forcing(start + 0.5));
        let k4 = derivative(parameters, add(state, k3, width), forcing(start + 1.0));
        for (slope, weight) in [(k1, 1.0), (k2, 2.0), (k3, 2.0), (k4, 1.0)] {
            state = add(state, slope, width * weight / 6.0);
        }
    }
    state
}

fn assert_close(found: State, expected: State, tolerance: f64, what: &str) {
    let scale = expected.temperature.abs().max(expected.deep_temperature.abs()).max(1.0);
    let error = (found.temperature - expected.temperature)
        .abs()
        .max((found.deep_temperature - expected.deep_temperature).abs());
    assert!(error <= tolerance * scale, "{what}: {found:?} against {expected:?}");
}

fn edge_cases() -> Vec<(&'static str, TwoLayerParameters)> {
    vec![
        ("plain", PLAIN),
        ("no feedback", TwoLayerParameters { feedback: 0.0, ..PLAIN }),
        ("hardly any feedback", TwoLayerParameters { feedback: 1e-12, ..PLAIN }),
        ("runaway", TwoLayerParameters { feedback: -0.4, ..PLAIN }),
        ("strong runaway", TwoLayerParameters { feedback: -3.0, ..PLAIN }),
        ("no exchange", TwoLayerParameters { exchange: 0.0, ..PLAIN }),
        ("neither", TwoLayerParameters { exchange: 0.0, feedback: 0.0, ..PLAIN }),
        (
            "near-equal eigenvalues",
            TwoLayerParameters {
                heat_capacity: 10.0,
                deep_heat_capacity: 1e-4,
                exchange: 1e-7,
                feedback: 1e-2,
                heat_uptake_efficacy: 1.0,
            },
        ),
    ]
}

#[test]
fn a_step_of_any_length_is_the_one_that_small_steps_come_to() -> Result<(), TwoLayerError> {
    let initial = State { temperature: 0.4, deep_temperature: -0.1 };
    for (name, parameters) in edge_cases() {
        for years in [1e-3, 1.0, 30.0] {
            for forcings in [(2.0, 2.0), (-1.0, 3.0)] {
                let found =
                    Propagator::new(&parameters, years)?.step_linear(initial, forcings.0, forcings.1).0;
                let expected = step_by_runge_kutta(&parameters, initial, years, forcings);
                assert_close(found, expected, 1e-11, &format!("{name}, {years} yr, {forcings:?}"));
            }
        }
    }
    Ok(())
}

#[test]
fn a_step_mean_closes_the_heat_budget_of_both_layers() -> Result<(), TwoLayerError> {
    let initial = State { temperature: 0.4, deep_temperature: -0.1 };
    for (name, p) in edge_cases() {
        for years in [1e-6, 0.1, 1.0, 40.0] {
            let (end, mean) = Propagator::new(&p, years)?.step_linear(initial, -1.0, 3.0);
            let slope = derivative(&p, mean, 1.0);
            let budget = State {
                temperature: initial.temperature + years * slope.temperature,
                deep_temperature: initial.deep_temperature + years * slope.deep_temperature,
            };
            assert_close(end, budget, 1e-12, &format!("{name}, {years} yr"));
        }
    }
    Ok(())
}

#[test]
fn two_halves_make_a_whole_step() -> Result<(), TwoLayerError> {
    for (name, parameters) in edge_cases() {
        for years in [1e-7, 0.5, 3.0, 50.0] {
            let whole = Propagator::new(&parameters, years)?;
            let half = Propagator::new(&parameters, years / 2.0)?;
            let (middle, first) = half.step_linear(State::default(), 1.0, 2.0);
            let (end, second) = half.step_linear(middle, 2.0, 3.0);
            let (expected_end, expected_mean) = whole.step_linear(State::default(), 1.0, 3.0);
            let mean = State {
                temperature: f64::midpoint(first.temperature, second.temperature),
                deep_temperature: f64::midpoint(first.deep_temperature, second.deep_temperature),
            };
            assert_close(end, expected_end, 1e-13, name);
            assert_close(mean, expected_mean, 1e-13, name);
        }
    }
    Ok(())
}

#[test]
fn a_very_long_step_ends_in_equilibrium() -> Result<(), TwoLayerError> {
    let (end, _) = Propagator::new(&PLAIN, 1e6)?.step_constant(State::default(), 3.7);
    let Some(equilibrium) = equilibrium_temperature(&PLAIN, 3.7) else {
        panic!("the plain model has an equilibrium")
    };
    assert_close(
        end,
        State { temperature: equilibrium, deep_temperature: equilibrium },
        1e-13,
        "after a million years",
    );
    assert!(equilibrium_temperature(&TwoLayerParameters { feedback: 0.0, ..PLAIN }, 3.7).is_none());
    Ok(())
}

#[test]
fn the_deep_layer_rests_without_exchange() -> Result<(), TwoLayerError> {
    let parameters = TwoLayerParameters { exchange: 0.0, ..PLAIN };
    let response = respond_constant_over_steps(&parameters, &[1.0; 50], &[3.0; 50], State::default())?;
    assert!(response.deep_temperature.iter().all(|value| value.abs() < f64::MIN_POSITIVE));
    assert!(time_constants(&parameters).is_none());
    Ok(())
}

#[test]
fn the_temperature_alone_is_that_of_the_full_response() -> Result<(), TwoLayerError> {
    let forcing: Vec<f64> = (0..201).map(|year| (f64::from(year) * 0.37).sin() * 2.0).collect();
    for (name, parameters) in edge_cases() {
        for years in [1e-3, 0.5, 2.0] {
            // An odd and an even number of steps.
            for count in [201, 200] {
                let full = respond_constant_over_steps(
                    &parameters,
                    &vec![years; count],
                    &forcing[..count],
                    State::default(),
                )?;
                let mut temperature = vec![0.0; count];
                temperature_over_steps(&Propagator::new(&parameters, years)?, &forcing, &mut temperature);
                for (found, expected) in temperature.iter().zip(&full.temperature) {
                    // The runaway cases grow without bound, and with them the rounding.
                    assert!(
                        (found - expected).abs() <= 1e-12 * (1.0 + expected.abs()),
                        "{name}: {found} {expected}"
                    );
                }
            }
        }
    }
    Ok(())
}

#[test]
fn a_gap_in_the_forcing_leaves_every_later_value_empty() -> Result<(), TwoLayerError> {
    let forcing = [1.0, 1.0, f64::NAN, 1.0, 1.0];
    let steps = respond_constant_over_steps(&PLAIN, &[1.0; 5], &forcing, State::default())?;
    let instants =
        respond_linear_between_instants(&PLAIN, &[0.0, 1.0, 2.0, 3.0, 4.0], &forcing, State::default())?;
    let mut alone = [0.0; 5];
    temperature_over_steps(&Propagator::new(&PLAIN, 1.0)?, &forcing, &mut alone);
    let kept = [false, false, true, true, true];
    let series =
        [&steps.temperature[..], &steps.deep_temperature, &steps.imbalance, &instants.temperature, &alone];
    for values in series.into_iter().chain([&instants.deep_temperature[..], &instants.imbalance]) {
        assert_eq!(values.iter().map(|value| value.is_nan()).collect::<Vec<_>>(), kept);
    }
    Ok(())
}

#[test]
fn steps_of_unlike_length_give_what_their_parts_give() -> Result<(), TwoLayerError> {
    let uneven = respond_constant_over_steps(&PLAIN, &[2.0, 1.0, 3.0], &[1.0, -2.0, 0.5], State::default())?;
    let even =
        respond_constant_over_steps(&PLAIN, &[1.0; 6], &[1.0, 1.0, -2.0, 0.5, 0.5, 0.5], State::default())?;
    assert_close(uneven.end, even.end, 1e-14, "end");
    let mean = even.temperature[3..].iter().sum::<f64>() / 3.0;
    assert!((uneven.temperature[2] - mean).abs() < 1e-14);
    assert!((uneven.imbalance[2] - even.imbalance[3..].iter().sum::<f64>() / 3.0).abs() < 1e-14);
    Ok(())
}

#[test]
fn parameters_out_of_range_are_named() {
    let broken = |change: fn(&mut TwoLayerParameters)| {
        let mut parameters = PLAIN;
        change(&mut parameters);
        Propagator::new(&parameters, 1.0).err()
    };
    assert_eq!(broken(|p| p.heat_capacity = 0.0), Some(TwoLayerError::HeatCapacity(0.0)));
    assert_eq!(broken(|p| p.deep_heat_capacity = -1.0), Some(TwoLayerError::DeepHeatCapacity(-1.0)));
    assert_eq!(broken(|p| p.exchange = -0.1), Some(TwoLayerError::Exchange(-0.1)));
    assert_eq!(broken(|p| p.feedback = f64::INFINITY), Some(TwoLayerError::Feedback(f64::INFINITY)));
    assert_eq!(broken(|p| p.heat_uptake_efficacy = 0.0), Some(TwoLayerError::HeatUptakeEfficacy(0.0)));
    assert!(
        matches!(broken(|p| p.feedback = f64::NAN), Some(TwoLayerError::Feedback(value)) if value.is_nan())
    );
    assert_eq!(broken(|_| ()), None);
}

#[test]
fn axes_that_do_not_fit_are_refused() {
    let rest = State::default();
    assert_eq!(
        respond_constant_over_steps(&PLAIN, &[1.0, 0.0], &[1.0, 1.0], rest).err(),
        Some(TwoLayerError::StepLength { index: 1, step_years: 0.0 })
    );
    assert_eq!(
        respond_linear_between_instants(&PLAIN, &[0.0, 1.0, 0.5], &[1.0; 3], rest).err(),
        Some(TwoLayerError::StepLength { index: 1, step_years: -0.5 })
    );
    assert_eq!(
        respond_constant_over_steps(&PLAIN, &[1.0], &[1.0; 3], rest).err(),
        Some(TwoLayerError::LengthMismatch { axis: 1, forcing: 3 })
    );
    assert_eq!(respond_linear_between_instants(&PLAIN, &[], &[], rest), Ok(Response::default()));
}
