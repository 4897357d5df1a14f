//! One binary for all tests that use the crate from outside.
#![allow(
    clippy::unwrap_used,
    clippy::expect_used,
    clippy::panic,
    clippy::float_cmp,
    clippy::wildcard_enum_match_arm,
    reason = "what a test does not expect, it fails on loudly"
)]

mod catalogue_examples;
mod certified_science;
mod command_line;
mod completion;
mod events;
mod figure_files;
mod figures;
mod front_ends;
mod grammar;
mod kernel;
mod lab;
mod layers;
mod notebooks;
mod python_environment;
mod python_reference;
mod readme;
mod real_record;
mod rough_files;
mod series_properties;
mod session;
mod suite;
mod talk;
