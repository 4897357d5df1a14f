//! The functions a notebook can call, ONE entry each. Evaluation, argument checks, completion, the reference,
//! `explain` and the tests of every example read the entries; there is no second list.
//!
//! To add a function, write one `static` entry in the file of its room and list it in that file's `FAMILY`.

#![allow(
    clippy::wildcard_enum_match_arm,
    reason = "a body takes some kinds of value and refuses all others, those to come included"
)]

mod algebra;
mod attribution;
mod call;
mod citations;
mod entry;
mod explain;
mod filters;
mod gases;
mod onto;
mod operators;
mod reading;
mod reductions;
mod response;
mod seasons;
mod shapes;
mod showing;
mod splice;
mod tables;
mod time;

pub use call::{Call, Context, Given, InputFile, Path, Stop, What, check_arguments};
pub use entry::{Body, Citation, Entry, Fails, ReadsClock, Room, Shows};
pub use explain::{explain, explain_parameter, markdown, reference};
pub use onto::{onto_clock, total};

const FAMILIES: &[&[&Entry]] = &[
    operators::FAMILY,
    time::FAMILY,
    reading::FAMILY,
    tables::FAMILY,
    shapes::FAMILY,
    algebra::FAMILY,
    filters::FAMILY,
    seasons::FAMILY,
    reductions::FAMILY,
    gases::FAMILY,
    response::FAMILY,
    attribution::FAMILY,
    showing::FAMILY,
];

/// Every entry, room by room.
pub fn entries() -> impl Iterator<Item = &'static Entry> {
    FAMILIES.iter().flat_map(|family| family.iter().copied())
}

/// The entry called `name`.
pub fn find(name: &str) -> Option<&'static Entry> {
    entries().find(|entry| entry.name == name)
}

/// The name among `names` that `word` may have meant.
pub fn nearest<'a>(word: &str, names: impl Iterator<Item = &'a str>) -> Option<&'a str> {
    let length = word.chars().count();
    // Between short names everything is near: `x` is not a slip of `y`.
    let reach = match length {
        0..=2 => 0,
        3 => 1,
        _ => 2,
    };
    let word = word.to_lowercase();
    names
        .filter(|name| name.chars().count().abs_diff(length) <= reach)
        .map(|name| (strsim::osa_distance(&word, &name.to_lowercase()), name))
        .filter(|(distance, _)| *distance <= reach)
        .min_by_key(|(distance, _)| *distance)
        .map(|(_, name)| name)
}

/// The function that `word` may have meant: a near spelling, or another word for it.
pub fn nearest_function(word: &str) -> Option<&'static str> {
    nearest(word, entries().map(|entry| entry.name)).or_else(|| {
        entries().find(|entry| entry.search.contains(&word.to_lowercase().as_str())).map(|entry| entry.name)
    })
}
