//! Results as they are shown: the nominal path beside the members' medians and ranges.

use std::sync::Arc;
use std::sync::atomic::{AtomicU64, Ordering};

use rayon::prelude::*;

use super::context::NodeContext;
use super::environment::Environment;
use super::evaluate::{Evaluator, add_notes, internal};
use super::memo::Notes;
use super::node::Node;
use crate::base::{Cancellation, Cancelled, Fault};
use crate::catalogue::{Context, Path, Stop, onto_clock, total};
use crate::science::reduce;
use crate::value::{Block, Bundle, Component, Content, Series, Shown, ShownSeries, Spread, Value};

/// Members are computed in blocks of this many, folded in order: the same bits for any number of threads.
const BLOCK: u64 = 1024;

/// The most members that a session may have.
pub(super) const MEMBERS_LIMIT: u64 = 10_000_000;

/// The most bytes that the members of one shown result may take.
const BYTES_LIMIT: f64 = 2e9;

const PROBABILITIES: [f64; 3] = [0.05, 0.5, 0.95];

/// How far the members of what is shown are, for whoever waits.
#[derive(Default)]
pub(super) struct Progress {
    done: AtomicU64,
    total: AtomicU64,
}

impl Progress {
    fn begin(&self, total: u64) {
        self.done.store(0, Ordering::Relaxed);
        self.total.store(total, Ordering::Relaxed);
    }

    fn step(&self) {
        self.done.fetch_add(1, Ordering::Relaxed);
    }

    /// How many blocks are done, and of how many.
    pub(super) fn read(&self) -> (u64, u64) {
        let total = self.total.load(Ordering::Relaxed);
        (self.done.load(Ordering::Relaxed).min(total), total)
    }
}

impl Evaluator<'_> {
    /// A node's result as it is shown, with the notes made on the way.
    pub(super) fn shown(&self, node: &Arc<Node>, environment: &Environment) -> Result<(Shown, Notes), Stop> {
        let (nominal, notes) = self.value(node, environment, Path::Nominal)?;
        let context = NodeContext::showing(self, node, environment, Path::Nominal);
        add_notes(&mut context.notes.borrow_mut(), &notes);
        let ready = ready(&context, &nominal)?;
        let members = self.members(node, environment, &ready)?;
        self.cancellation.check()?;
        let members: Vec<&Value> = members.iter().map(AsRef::as_ref).collect();
        let shown = shown(&ready, &members, &self.item_names(node, environment), self.cancellation)?;
        Ok((shown, Arc::new(context.notes.into_inner())))
    }

    /// Medians and ranges of a quantity, instant, series, or a bundle's sum; none where it is certain.
    pub(super) fn spread_of(
        &self,
        node: &Arc<Node>,
        environment: &Environment,
    ) -> Result<Option<Arc<Spread>>, Stop> {
        match self.shown(node, environment)?.0 {
            Shown::Quantity { spread, .. } | Shown::Instant { spread, .. } => Ok(spread),
            Shown::Series(series) => Ok(series.spread),
            Shown::Bundle { total, .. } => Ok(total.spread),
            _ => Ok(None),
        }
    }

    /// The value for every block of members, ready to be shown; empty where it is certain.
    fn members(
        &self,
        node: &Arc<Node>,
        environment: &Environment,
        nominal: &Value,
    ) -> Result<Vec<Arc<Value>>, Stop> {
        if !self.is_uncertain(node) {
            return Ok(Vec::new());
        }
        if let Some(problem) = &environment.members_problem {
            return Err(Stop::Placed(Box::new(crate::base::Diagnostic::clone(problem))));
        }
        let bytes = nominal.bytes() as f64 * environment.members as f64;
        if bytes > BYTES_LIMIT {
            return Err(Fault::new(
                "too-large",
                format!("{} members of this would take {:.1} GB", environment.members, bytes / 1e9),
            )
            .help("take fewer `members`, or a clock with fewer steps")
            .at(node.span)
            .into());
        }
        let blocks: Vec<Path> = (0..environment.members.div_ceil(BLOCK))
            .map(|block| {
                let first = block * BLOCK;
                Path::Block { first, count: BLOCK.min(environment.members - first) as usize }
            })
            .collect();
        self.progress.begin(blocks.len() as u64);
        let members = blocks
            .into_par_iter()
            .map(|path| {
                let (value, _) = self.value(node, environment, path)?;
                let context = NodeContext::showing(self, node, environment, path);
                let value = Arc::new(ready(&context, &value)?);
                self.progress.step();
                Ok(value)
            })
            .collect();
        self.progress.begin(0);
        members
    }
}

impl From<crate::base::Diagnostic> for Stop {
    fn from(diagnostic: crate::base::Diagnostic) -> Self {
        Stop::Placed(Box::new(diagnostic))
    }
}

/// A value ready to be shown: the components of a bundle on the clock, with their sum as the last one.
fn ready(context: &dyn Context, value: &Value) -> Result<Value, Stop> {
    match value {
        Value::Bundle(bundle) => {
            let sum = total(context, bundle)?;
            let mut components = Vec::with_capacity(bundle.components.len() + 1);
            for part in &bundle.components {
                let series = match &part.content {
                    Content::Series(series) => onto_clock(context, series, &part.label)?,
                    Content::Bundle(inner) => total(context, inner)?,
                };
                components.push(Component { label: part.label.clone(), content: Content::Series(series) });
            }
            components.push(Component { label: Arc::from("total"), content: Content::Series(sum) });
            Ok(Value::Bundle(Bundle { components }))
        }
        Value::List(items) => {
            let items =
                items.iter().map(|item| Ok(Arc::new(ready(context, item)?))).collect::<Result<_, Stop>>()?;
            Ok(Value::List(items))
        }
        other => Ok(other.clone()),
    }
}

fn shown(
    nominal: &Value,
    members: &[&Value],
    names: &[Arc<str>],
    cancellation: &Cancellation,
) -> Result<Shown, Stop> {
    Ok(match nominal {
        Value::Quantity(quantity) => {
            let blocks = blocks(members, &|value| match value {
                Value::Quantity(quantity) => Some(&quantity.values),
                _ => None,
            });
            Shown::Quantity {
                measure: quantity.measure.clone(),
                nominal: quantity.first(),
                spread: spread(&blocks, cancellation)?,
            }
        }
        Value::Instant(instant) => {
            let blocks = blocks(members, &|value| {
                if let Value::Instant(instant) = value { Some(&instant.years) } else { None }
            });
            Shown::Instant {
                era: instant.era,
                is_date: instant.is_date,
                nominal: instant.year(),
                spread: spread(&blocks, cancellation)?,
            }
        }
        Value::Series(series) => {
            let blocks = blocks(members, &|value| {
                if let Value::Series(series) = value { Some(&series.values) } else { None }
            });
            Shown::Series(shown_series(series, &blocks, cancellation)?)
        }
        Value::Bundle(bundle) => {
            let mut components = Vec::with_capacity(bundle.components.len());
            for (index, part) in bundle.components.iter().enumerate() {
                let Content::Series(series) = &part.content else { continue };
                let blocks = blocks(members, &|value| {
                    let Value::Bundle(bundle) = value else { return None };
                    match bundle.components.get(index).map(|part| &part.content) {
                        Some(Content::Series(series)) => Some(&series.values),
                        _ => None,
                    }
                });
                components.push((part.label.clone(), shown_series(series, &blocks, cancellation)?));
            }
            let Some((_, total)) = components.pop() else {
                return Err(internal("a bundle without sum").into());
            };
            Shown::Bundle { components, total }
        }
        Value::Model(model) => {
            let count = model.parameters().len();
            let spreads = (0..count)
                .map(|index| {
                    let blocks = blocks(members, &|value| match value {
                        Value::Model(model) => model.parameters().get(index).map(|(_, _, block)| *block),
                        _ => None,
                    });
                    spread(&blocks, cancellation)
                })
                .collect::<Result<_, Cancelled>>()?;
            Shown::Model(model.clone(), spreads)
        }
        Value::List(items) => {
            let mut shown_items = Vec::with_capacity(items.len());
            for (index, item) in items.iter().enumerate() {
                let inner: Vec<&Value> = members
                    .iter()
                    .filter_map(|value| match value {
                        Value::List(items) => items.get(index).map(AsRef::as_ref),
                        _ => None,
                    })
                    .collect();
                let name = names.get(index).cloned().unwrap_or_else(|| Arc::from(""));
                shown_items.push((name, shown(item, &inner, &[], cancellation)?));
            }
            Shown::List(shown_items)
        }
        Value::Span(span) => Shown::Span(span.clone()),
        Value::Range(range) => Shown::Range(range.clone()),
        Value::Clock(clock) => Shown::Clock(clock.clone()),
        Value::Attribution(attribution) => Shown::Attribution(attribution.clone()),
        Value::Events(events) => Shown::Events(events.clone()),
        Value::Table(table) => Shown::Table(table.clone()),
        Value::Text(text) => Shown::Text(text.clone()),
    })
}

fn blocks<'a>(members: &[&'a Value], pick: &dyn Fn(&'a Value) -> Option<&'a Block>) -> Vec<&'a Block> {
    let picked: Vec<&Block> = members.iter().filter_map(|value| pick(value)).collect();
    // A part that is certain has one row in every block, and no spread.
    if picked.iter().all(|block| block.rows() <= 1) && picked.len() <= 1 { Vec::new() } else { picked }
}

fn shown_series(
    series: &Series,
    blocks: &[&Block],
    cancellation: &Cancellation,
) -> Result<ShownSeries, Cancelled> {
    Ok(ShownSeries {
        axis: series.axis.clone(),
        measure: series.measure.clone(),
        nominal: series.values.member(0).to_vec(),
        spread: spread(blocks, cancellation)?,
    })
}

/// Medians and 5–95 % ranges, column by column, of the members in order.
fn spread(blocks: &[&Block], cancellation: &Cancellation) -> Result<Option<Arc<Spread>>, Cancelled> {
    if blocks.is_empty() || blocks.iter().all(|block| block.rows() <= 1) {
        return Ok(None);
    }
    let columns = blocks.iter().map(|block| block.columns()).max().unwrap_or(0);
    let members: usize = blocks.iter().map(|block| block.rows()).sum();
    let quantiles: Vec<[f64; 3]> = (0..columns)
        .into_par_iter()
        .map_init(
            || (Vec::with_capacity(members), Vec::new()),
            |(values, workspace), column| {
                cancellation.check()?;
                values.clear();
                for block in blocks {
                    values.extend(
                        (0..block.rows())
                            .map(|row| block.member(row).get(column).copied().unwrap_or(f64::NAN)),
                    );
                }
                let mut out = [f64::NAN; 3];
                reduce::quantiles(values, &PROBABILITIES, workspace, &mut out);
                Ok(out)
            },
        )
        .collect::<Result<_, Cancelled>>()?;
    let pick =
        |index: usize| quantiles.iter().map(|out| out.get(index).copied().unwrap_or(f64::NAN)).collect();
    Ok(Some(Arc::new(Spread { low: pick(0), median: pick(1), high: pick(2), members: members as u64 })))
}
