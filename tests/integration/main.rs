//! One binary for all tests that use the crate from outside.

mod catalogue_examples;
mod certified_science;
mod layers;
mod suite;
