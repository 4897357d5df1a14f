//! The three settings: what they may be bound to, and what is in force.

use std::sync::Arc;

use super::environment::Environment;
use super::evaluate::Evaluator;
use super::node::Node;
use super::show::MEMBERS_LIMIT;
use crate::base::{Diagnostic, Fault};
use crate::catalogue::{Path, Stop};
use crate::value::Value;

/// The settings in force.
pub(super) fn environment(evaluator: &Evaluator<'_>) -> Environment {
    let mut environment = Environment::empty();
    let setting = |name: &str| -> Option<Result<Arc<Value>, Stop>> {
        let definition = evaluator.definitions.values.get(name)?;
        if let Some(problem) = evaluator.graph.problems.get(name) {
            return Some(Err(Stop::Placed(Box::new(problem.clone()))));
        }
        let node = match &definition.node {
            Ok(node) => node,
            Err(problem) => return Some(Err(Stop::Placed(Box::new(problem.clone())))),
        };
        Some(evaluator.shape(node, &Environment::empty()).and_then(|_| {
            evaluator.value(node, &Environment::empty(), Path::Nominal).map(|(value, _)| value)
        }))
    };
    for name in ["members", "seed"] {
        let problem = evaluator.definitions.values.get(name).and_then(|definition| match &definition.node {
            Ok(node) => check(evaluator, name, node),
            Err(problem) => Some(problem.clone()),
        });
        if let Some(problem) = problem {
            environment.members_problem = Some(Arc::new(problem));
            continue;
        }
        if let Some(Ok(value)) = setting(name)
            && let Value::Quantity(number) = value.as_ref()
        {
            match name {
                "members" => environment.members = number.first() as u64,
                _ => environment.seed = number.first() as u64,
            }
        }
    }
    match setting("clock") {
        None => {}
        Some(Ok(value)) => {
            if let Value::Clock(clock) = value.as_ref() {
                environment = environment.with_clock(clock.clone());
            }
        }
        Some(Err(Stop::Placed(problem))) => environment = environment.without_clock(Arc::from(problem)),
        Some(Err(Stop::Fault(_))) => {}
    }
    environment
}

/// What is wrong with the definition of a setting; nothing for other names.
pub(super) fn check(evaluator: &Evaluator<'_>, name: &str, node: &Arc<Node>) -> Option<Diagnostic> {
    let expected = match name {
        "clock" => "a clock, such as `clock = 1850..2020 CE by 1 yr`",
        "members" => "a whole number above zero, such as `members = 2000`",
        "seed" => "a whole number, such as `seed = 11`",
        _ => return None,
    };
    if evaluator.is_uncertain(node) {
        let fault = Fault::new("setting-uncertain", format!("the setting `{name}` holds an uncertainty"))
            .help("settings are certain: write it without ±");
        return Some(fault.at(node.span));
    }
    let empty = Environment::empty();
    let value = evaluator.shape(node, &empty).and_then(|_| evaluator.value(node, &empty, Path::Nominal));
    let value = match value {
        Ok((value, _)) => value,
        Err(Stop::Placed(problem)) => return Some(*problem),
        Err(Stop::Fault(fault)) => return Some(fault.at(node.span)),
    };
    let wrong = |found: String| {
        Some(
            Fault::new("setting", format!("`{name}` is {found}"))
                .help(format!("it takes {expected}"))
                .at(node.span),
        )
    };
    match (name, value.as_ref()) {
        ("clock", Value::Clock(_)) => None,
        ("members" | "seed", Value::Quantity(quantity)) if quantity.measure.unit.is_bare() => {
            let number = quantity.first();
            let least = if name == "members" { 1.0 } else { 0.0 };
            let whole = (number - number.round()).abs() < 1e-9;
            if !whole || number < least {
                return wrong(format!("{number}"));
            }
            if name == "members" && number > MEMBERS_LIMIT as f64 {
                return wrong(format!("{number}, and the most is {MEMBERS_LIMIT}"));
            }
            None
        }
        (_, other) => wrong(other.shape().describe()),
    }
}
