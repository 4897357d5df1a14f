//! What was probably meant by a word that is no choice, unit or era.

use crate::base::Fault;
use crate::catalogue;
use crate::language::{Parameter, UnitText};
use crate::value::{Era, Unit, UnitFault};

pub(super) fn wrong_choice(parameter: &Parameter, word: &str) -> Fault {
    let words: Vec<&str> = parameter.choices.iter().map(|choice| choice.name).collect();
    let fault = Fault::new("unknown-choice", format!("`{}` cannot be `{word}`", parameter.name));
    let bare = word.trim_matches('"');
    if words.contains(&bare) {
        return fault.help(format!("a choice stands without quotes: write `{bare}`"));
    }
    match near_choice(parameter, bare) {
        Some(near) => fault.help(format!("did you mean `{near}`? It takes {}", words.join(", "))),
        None => fault.help(format!("it takes {}", words.join(", "))),
    }
}

/// The choice that a word may have meant: spelt nearly so, another word for it, its initials, or its beginning.
fn near_choice(parameter: &Parameter, word: &str) -> Option<&'static str> {
    let word = word.to_lowercase();
    let initials = |name: &str| name.split('_').filter_map(|part| part.chars().next()).collect::<String>();
    let choices = || parameter.choices.iter();
    catalogue::nearest(&word, choices().map(|choice| choice.name))
        .or_else(|| choices().find(|choice| choice.search.contains(&&*word)).map(|choice| choice.name))
        .or_else(|| {
            choices().map(|choice| choice.name).find(|name| name.contains('_') && initials(name) == word)
        })
        .or_else(|| {
            choices().map(|choice| choice.name).find(|name| word.len() > 2 && name.starts_with(&word))
        })
}

pub(super) fn unit_fault(fault: &UnitFault, written: &UnitText, value: Option<f64>) -> Fault {
    if written.text == "BP" {
        return Fault::new("plain-bp", "a plain BP says nothing about calibration")
            .help("for calendar years before 1950 write `cal BP`; an uncalibrated radiocarbon age is no calendar age, and must be calibrated first");
    }
    let message = if fault.word == written.text {
        format!("`{}` is no unit", fault.word)
    } else {
        format!("`{}` in `{}` is no unit", fault.word, written.text)
    };
    if let Some(era) = meant_era(&written.text) {
        let write = match value {
            Some(value) => format!("write `{value} {era}`"),
            None => format!("write `{era}`"),
        };
        return Fault::new("unknown-unit", format!("`{}` is no era; it is written {era} here", written.text))
            .help(write);
    }
    let near = fault.near.clone().map(|near| format!("did you mean `{near}`? ")).unwrap_or_default();
    if let Some(base) = written.text.strip_suffix('m').filter(|base| Unit::parse(base).is_ok()) {
        // `3 Wm-2`: the lexer stops before the minus sign.
        return Fault::new("unknown-unit", message)
            .help(format!("exponents below the line stand after a slash: `{base}/m2`"));
    }
    let multiply = match value {
        Some(value) if written.text.chars().all(|letter| letter.is_alphanumeric() || letter == '_') => {
            format!("to multiply, write `{value} * {}`", written.text)
        }
        _ => "a unit is written such as W/m2, W*yr/m2/K, ppm, kyr".to_owned(),
    };
    Fault::new("unknown-unit", message).help(near + &multiply)
}

/// The era that was meant by another word for it, or by another case.
fn meant_era(word: &str) -> Option<&'static str> {
    let slip = match word {
        "BC" | "bc" => Some(Era::Bce),
        "AD" | "ad" => Some(Era::Ce),
        "kya" | "kyrBP" | "kaBP" => Some(Era::Ka),
        "Mya" | "mya" => Some(Era::Ma),
        _ => Era::ALL.into_iter().find(|era| era.symbol().eq_ignore_ascii_case(word)),
    };
    slip.map(Era::symbol)
}
