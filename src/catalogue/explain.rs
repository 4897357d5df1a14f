//! The help of one entry as text, and the reference of all as Markdown: both are made from the entries.

use super::entries;
use super::entry::Entry;
use crate::language::{Parameter, Presence, Words};

/// `name(first, second: …)`, or how an operator is written.
fn usage(entry: &Entry) -> String {
    let names: Vec<&str> = entry.signature.parameters.iter().map(|parameter| parameter.name).collect();
    match (entry.name, names.as_slice()) {
        ("negate", _) => "-value".to_owned(),
        ("..", [first, last]) => format!("{first}..{last}"),
        (name, [first, last]) if !is_function(name) => format!("{first} {name} {last}"),
        _ => {
            let parameters = entry.signature.parameters.iter().map(|parameter| match parameter.presence {
                Presence::Required => parameter.name.to_owned(),
                Presence::Optional => format!("{}: …", parameter.name),
                Presence::Default(text) => format!("{}: {text}", parameter.name),
                Presence::Repeated { .. } => format!("{}…", parameter.name),
            });
            format!("{}({})", entry.name, parameters.collect::<Vec<_>>().join(", "))
        }
    }
}

fn is_function(name: &str) -> bool {
    name.chars().next().is_some_and(char::is_alphabetic) && !matches!(name, "in" | "by")
}

/// What a parameter takes, in words.
fn takes(parameter: &Parameter) -> String {
    let mut words: Vec<String> = parameter.accepts.iter().map(|kind| (*kind).to_owned()).collect();
    words.extend(parameter.choices.iter().map(|choice| format!("`{}`", choice.name)));
    match parameter.words {
        Words::None => {}
        Words::Groups => words = vec!["labels in a list".to_owned()],
        Words::Months => words = vec!["a month, or months such as `December..February`".to_owned()],
    }
    let unit =
        parameter.unit.filter(|unit| *unit != "1").map(|unit| format!(" in {unit}")).unwrap_or_default();
    format!("{}{unit}", words.join(" or "))
}

/// What one parameter takes and means, with its default and choices, for a terminal.
pub fn explain_parameter(parameter: &Parameter) -> String {
    let mut out = String::new();
    out += &format!("  {:<22} {}: {}\n", parameter.name, takes(parameter), parameter.meaning);
    if let Presence::Default(text) = parameter.presence {
        out += &format!("  {:<22} default {text}\n", "");
    }
    for choice in parameter.choices {
        let inner: Vec<&str> = choice.parameters.iter().map(|parameter| parameter.name).collect();
        let inner = if inner.is_empty() { String::new() } else { format!("({})", inner.join(", ")) };
        out += &format!("  {:<24} {}{inner}: {}\n", "", choice.name, choice.meaning);
    }
    out
}

/// The help of one function, for a terminal.
pub fn explain(entry: &Entry) -> String {
    let mut out = format!("{}\n\n{}\n", usage(entry), entry.summary);
    out += &format!("Result: {}.\n", entry.result);
    out += "\nArguments\n";
    for parameter in entry.signature.parameters {
        out += &explain_parameter(parameter);
    }
    if let Some(equation) = entry.equation {
        out += &format!("\nEquation\n  {equation}\n");
    }
    out += &format!("\nGaps\n  {}\n\nExamples\n", entry.gaps);
    for example in entry.shows {
        for line in example.program.lines() {
            out += &format!("  {line}\n");
        }
        out += &format!("    → {}\n", example.gives);
    }
    if !entry.citations.is_empty() {
        out += "\nSources\n";
        for citation in entry.citations {
            out += &format!("  {}\n", citation.reference);
        }
    }
    out
}

/// The help of one function, in Markdown with equations.
pub fn markdown(entry: &Entry) -> String {
    let mut out = format!("`{}`\n\n{}\n\n", usage(entry), entry.summary);
    out += &format!("**Result:** {}.\n\n", entry.result);
    out += "| argument | takes | meaning |\n|---|---|---|\n";
    for parameter in entry.signature.parameters {
        let default = match parameter.presence {
            Presence::Default(text) => format!(" Default: `{text}`."),
            Presence::Optional => " May be left out.".to_owned(),
            Presence::Required | Presence::Repeated { .. } => String::new(),
        };
        out +=
            &format!("| `{}` | {} | {}.{default} |\n", parameter.name, takes(parameter), parameter.meaning);
    }
    if let Some(equation) = entry.equation {
        out += &format!("\n$${equation}$$\n");
    }
    out += &format!("\n**Gaps:** {}\n", entry.gaps);
    for example in entry.shows {
        out +=
            &format!("\n```rhythmite\n{}\n# {}\n```\n", example.program, example.gives.replace('\n', "\n# "));
    }
    if !entry.citations.is_empty() {
        let sources: Vec<&str> = entry.citations.iter().map(|citation| citation.reference).collect();
        out += &format!("\n**Sources:** {}\n", sources.join("; "));
    }
    out
}

/// The reference of the whole language, in Markdown.
pub fn reference() -> String {
    let mut out = String::from(
        "# Reference\n\nMade from the catalogue; a test compares it, and `BLESS=1 cargo test reference` writes it anew.\n",
    );
    let mut room = None;
    for entry in entries() {
        if room != Some(entry.room) {
            out += &format!("\n## {}\n", entry.room.title());
            room = Some(entry.room);
        }
        out += &format!("\n### {}", markdown(entry));
    }
    out
}
