use std::collections::VecDeque;

use serde_json::{Value as Json, json};

use super::message::Request;

/// So many inputs are remembered.
const REMEMBERED: usize = 1_000;

/// Inputs and outputs of more bytes are not.
const LONGEST: usize = 100_000;

/// The inputs of this session.
#[derive(Default)]
pub(super) struct History {
    inputs: VecDeque<Input>,
}

struct Input {
    number: u64,
    text: String,
    /// What it gave, as text.
    output: String,
}

impl History {
    pub(super) fn add(&mut self, number: u64, text: &str, output: String) {
        if text.len() > LONGEST {
            return;
        }
        let output = if output.len() > LONGEST { String::new() } else { output };
        self.inputs.push_back(Input { number, text: text.to_owned(), output });
        if self.inputs.len() > REMEMBERED {
            self.inputs.pop_front();
        }
    }

    /// What a history request asks for: `[session, number, input]`, or `[session, number, [input, output]]`.
    pub(super) fn answer(&self, request: &Request) -> Json {
        let count = |name: &str| request.content.get(name).and_then(Json::as_i64);
        let most = count("n").and_then(|number| usize::try_from(number).ok());
        let mut found: Vec<&Input> = match request.text("hist_access_type") {
            // Only this session is remembered: it is number 0 or 1.
            "range" if matches!(count("session"), None | Some(0 | 1)) => {
                let start = count("start").unwrap_or(1).max(0) as u64;
                let stop = count("stop").map_or(u64::MAX, |stop| stop.max(0) as u64);
                self.inputs.iter().filter(|input| (start..stop).contains(&input.number)).collect()
            }
            "tail" => self.inputs.iter().collect(),
            "search" => {
                let pattern: Vec<char> = request.text("pattern").chars().collect();
                self.inputs.iter().filter(|input| fits(&pattern, &input.text)).collect()
            }
            _ => Vec::new(),
        };
        if request.flag("unique", false) {
            let mut seen = std::collections::BTreeSet::new();
            // The last of several that are the same stays.
            found.reverse();
            found.retain(|input| seen.insert(&input.text));
            found.reverse();
        }
        if request.text("hist_access_type") != "range"
            && let Some(most) = most
        {
            found.drain(..found.len().saturating_sub(most));
        }
        let outputs = request.flag("output", false);
        let entry = |input: &Input| match outputs {
            true => json!([1, input.number, [input.text, input.output]]),
            false => json!([1, input.number, input.text]),
        };
        json!({"status": "ok", "history": found.into_iter().map(entry).collect::<Vec<_>>()})
    }
}

/// Whether a text fits a pattern in which `*` stands for anything and `?` for one character.
fn fits(pattern: &[char], text: &str) -> bool {
    let text: Vec<char> = text.chars().collect();
    let (mut at, mut next) = (0, 0);
    let mut retry: Option<(usize, usize)> = None;
    while at < text.len() {
        match pattern.get(next) {
            Some('*') => {
                retry = Some((next + 1, at));
                next += 1;
            }
            Some(sign) if *sign == '?' || text.get(at) == Some(sign) => {
                at += 1;
                next += 1;
            }
            _ => match retry {
                // The last star takes one character more.
                Some((after, from)) => {
                    (next, at) = (after, from + 1);
                    retry = Some((after, from + 1));
                }
                None => return false,
            },
        }
    }
    pattern.get(next..).is_none_or(|rest| rest.iter().all(|sign| *sign == '*'))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn patterns_fit_as_the_shell_has_them() {
        let fits = |pattern: &str, text: &str| fits(&pattern.chars().collect::<Vec<_>>(), text);
        for (pattern, text) in
            [("*", ""), ("", ""), ("a*c", "abc"), ("*b*", "abc"), ("a?c", "a±c"), ("*ab", "aab")]
        {
            assert!(fits(pattern, text), "{pattern} {text}");
        }
        for (pattern, text) in [("", "a"), ("a", ""), ("a*c", "ab"), ("?", ""), ("a?", "a"), ("*b", "abc")] {
            assert!(!fits(pattern, text), "{pattern} {text}");
        }
    }
}
