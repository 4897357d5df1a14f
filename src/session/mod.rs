//! Definitions in force, their evaluation, and what of the shown results has moved.
//!
//! A cell goes through `resolve` (syntax to nodes, random variables named), `graph` (circles),
//! `evaluate` (shape and value), `prints` (fingerprints), `memo` (values remembered by fingerprint) and `inputs` (files).

#![allow(
    clippy::wildcard_enum_match_arm,
    reason = "where one kind of node or value is looked for, all others are none, those to come included"
)]

mod blame;
mod bodies;
mod cell;
mod completion;
mod context;
mod definitions;
mod displays;
mod environment;
mod evaluate;
mod fingerprint;
mod graph;
mod inputs;
mod memo;
mod node;
mod outside;
mod prints;
mod readings;
mod resolve;
mod settings;
mod show;
mod slips;

pub use cell::{CellReply, Session};
pub use completion::{Completion, CompletionKind, Completions, InForce, Inspection, Subject};
pub use displays::{Audience, Output, Pending};
pub use fingerprint::Fingerprint;
pub use outside::{OUTSIDE, Standing};
