//! The words of the language for highlighting, from the tables that the parser and the catalogue read themselves.

use std::collections::BTreeSet;

use serde_json::{Value, json};

use crate::catalogue::{self, Room};
use crate::language::{KEYWORDS, KeywordRole, MONTHS, Parameter, Words};
use crate::value::{Era, unit_spellings};

/// The words by what they are: `reserved`, `operators` and `punctuation` (in the order in which they must be tried),
/// `functions`, `choices`, `units` (with prefixes; µ is written u) and `eras`.
pub fn words() -> Value {
    let with_role = |role| -> Vec<&str> {
        KEYWORDS.iter().filter(|keyword| keyword.role == role).map(|keyword| keyword.text).collect()
    };
    // Operators are entries, too; their signs stand in the keyword table.
    let functions: Vec<&str> =
        catalogue::entries().filter(|entry| entry.room != Room::Operators).map(|entry| entry.name).collect();
    let mut choices = BTreeSet::new();
    for entry in catalogue::entries() {
        collect_choices(entry.signature.parameters, &mut choices);
    }
    json!({
        "reserved": with_role(KeywordRole::Word),
        "operators": with_role(KeywordRole::Operator),
        "punctuation": with_role(KeywordRole::Punctuation),
        "functions": functions,
        "choices": choices,
        "units": unit_spellings().into_iter().map(|(spelling, _, _)| spelling).collect::<Vec<_>>(),
        "eras": Era::ALL.map(Era::symbol),
    })
}

fn collect_choices(parameters: &'static [Parameter], found: &mut BTreeSet<&'static str>) {
    for parameter in parameters {
        for choice in parameter.choices {
            found.insert(choice.name);
            collect_choices(choice.parameters, found);
        }
        if matches!(parameter.words, Words::Months) {
            found.extend(MONTHS);
        }
    }
}
