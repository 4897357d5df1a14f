//! Where a fault of a call stands, and which calls of the user's functions led there.

use std::sync::Arc;

use super::node::{CallNode, Called, Node};
use crate::base::{Blame, Mark, Span};
use crate::catalogue::{Given, Stop, What};
use crate::language::{Parameter, Presence};

/// Give a fault of a call its place: the argument that it blames, else the call.
pub(super) fn placed(stop: Stop, node: &Node, call: &CallNode) -> Stop {
    let fault = match stop {
        Stop::Placed(_) => return stop,
        Stop::Fault(fault) => fault,
    };
    let parameters = call.entry.signature.parameters;
    let place = match &fault.blame {
        Blame::Call => None,
        Blame::Argument(name) => blamed(parameters, &call.given, &call.slots, name),
        Blame::Item(number) => call
            .given
            .iter()
            .filter(|given| {
                let parameter = parameters.get(given.parameter);
                parameter.is_some_and(|parameter| matches!(parameter.presence, Presence::Repeated { .. }))
            })
            .nth(*number)
            .map(|given| span_of(given, &call.slots)),
    };
    let span = place.unwrap_or(node.span);
    let mut problem = fault.at(span);
    if node.called.is_some() {
        let inside =
            span.source == node.span.source && node.span.start <= span.start && span.end <= node.span.end;
        if !inside {
            // The caller's argument is to blame, for what the body does with it.
            problem.secondary.push(Mark { span: node.span, label: "used here".to_owned() });
        } else {
            problem.secondary = Called::marks(node.called.as_ref());
        }
    }
    Stop::Placed(Box::new(problem))
}

/// Where an argument stands: where its value does, which for a parameter of a function is the caller's text.
fn span_of(given: &Given, slots: &[Arc<Node>]) -> Span {
    match &given.what {
        What::Value(slot) => slots.get(*slot).map_or(given.span, |node| node.span),
        What::Choice { .. } | What::Groups(_) | What::Months { .. } => given.span,
    }
}

/// The place of the argument of a parameter, or of a parameter of a choice inside.
fn blamed(
    parameters: &'static [Parameter],
    given: &[Given],
    slots: &[Arc<Node>],
    name: &str,
) -> Option<Span> {
    given.iter().find_map(|given| {
        let parameter = parameters.get(given.parameter)?;
        if parameter.name == name {
            return Some(span_of(given, slots));
        }
        let What::Choice { choice, given } = &given.what else { return None };
        blamed(parameter.choices.get(*choice)?.parameters, given, slots, name)
    })
}
