use serde_json::{Map, Value as Json, json};

use crate::base::Diagnostic;
use crate::display::{self, Caption, Page};
use crate::session::{Output, Session};

/// A result by media type, each a string; a front end takes the richest that it can show.
pub type Bundle = Map<String, Json>;

/// What stands for one result in a notebook: its figure, where it is drawn, and its words beneath.
#[derive(Clone, Debug)]
pub struct Pieces {
    /// The figure.
    pub figure: Option<Bundle>,
    /// The numbers, the notes on them, and the fingerprint.
    pub words: Bundle,
}

/// A result, or the mistake that it now is, as a notebook shows it. It stands under its expression where `expression`
/// says so.
pub fn pieces(session: &Session, output: &Output, expression: bool) -> Pieces {
    let shown = match &output.result {
        Ok(shown) => shown,
        Err(problem) => return Pieces { figure: None, words: problem_bundle(session, output, problem) },
    };
    let fingerprint = output.fingerprint.short();
    let caption = Caption {
        expression: &output.expression,
        fingerprint: &fingerprint,
        refreshed_by: &output.refreshed_by,
    };
    let figure = display::chart(shown, &caption);
    let page = Page {
        expression: (expression && figure.is_none()).then_some(&*output.expression),
        notes: &output.notes,
        // A figure has it in its own small print, and what never moves needs none.
        footer: &if figure.is_some() || output.fixed { String::new() } else { display::footer(&caption) },
    };
    let words =
        bundle([("text/plain", display::page(shown, &page)), ("text/html", display::html(shown, &page))]);
    let figure = figure.map(|figure| {
        bundle([("text/plain", figure.description.clone()), ("image/svg+xml", display::svg(&figure))])
    });
    Pieces { figure, words }
}

/// What is kept with a result in a notebook, so that it can be found and held against another run.
pub fn result_metadata(output: &Output) -> Map<String, Json> {
    let mut own = Map::new();
    own.insert("expression".to_owned(), json!(output.expression));
    own.insert("fingerprint".to_owned(), json!(output.fingerprint.to_string()));
    if !output.refreshed_by.is_empty() {
        own.insert("refreshed_by".to_owned(), json!(output.refreshed_by));
    }
    own
}

/// A few words beside the results.
pub fn words_bundle(words: &str) -> Bundle {
    bundle([("text/plain", words.to_owned()), ("text/html", display::words_html(words))])
}

fn problem_bundle(session: &Session, output: &Output, problem: &Diagnostic) -> Bundle {
    let mut text = display::diagnostic(problem, &|id| session.source(id), false);
    if !output.refreshed_by.is_empty() {
        text += &format!("  since {} changed\n", output.refreshed_by.join(", "));
    }
    bundle([("text/plain", text.clone()), ("text/html", display::diagnostic_html(&text))])
}

fn bundle<const N: usize>(data: [(&str, String); N]) -> Bundle {
    data.into_iter().map(|(kind, text)| (kind.to_owned(), Json::String(text))).collect()
}
