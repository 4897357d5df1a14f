//! Rhythmite: a language for climate forcing time series.
//!
//! The layers, each of which uses only those before it, are `base`, `science`, `value`, `files`, `display`,
//! `language`, `catalogue`, `session`, `notebook`, `kernel`, `lab` and `talk`; `DEVELOPERS.md` says what each is for.

pub mod base;
pub mod catalogue;
pub mod display;
pub mod files;
#[cfg(unix)]
pub mod kernel;
pub mod lab;
pub mod language;
pub mod notebook;
pub mod science;
pub mod session;
pub mod talk;
pub mod value;
