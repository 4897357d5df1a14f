use base64::Engine;
use base64::engine::general_purpose::STANDARD as BASE64;
use serde_json::{Map, Value as Json, json};

use crate::base::Diagnostic;
use crate::display::{self, Caption, Page};
use crate::session::{Output, Session};

/// A result by media type, each a string; a front end takes the richest that it can show.
pub type Bundle = Map<String, Json>;

/// Which formats of figures go into a bundle beside words, SVG and PDF.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Media {
    /// PNG, for front ends that show no other pictures, such as pages of repositories.
    pub png: bool,
}

/// Pixels of a PNG in a bundle to one of a page: fine screens have two.
const PNG_SCALE: f64 = 2.0;

/// What stands for one result in a notebook: its figure, where it is drawn, and its words beneath.
#[derive(Clone, Debug)]
pub struct Pieces {
    /// The figure.
    pub figure: Option<Bundle>,
    /// What front ends must know of formats in the figure, by media type: how large a PNG is to be shown.
    pub figure_metadata: Map<String, Json>,
    /// The numbers, the notes on them, and the fingerprint.
    pub words: Bundle,
}

/// A result, or the mistake that it now is, as a notebook shows it. It stands under its expression where `expression`
/// says so.
pub fn pieces(session: &Session, output: &Output, expression: bool, media: Media) -> Pieces {
    let shown = match &output.result {
        Ok(shown) => shown,
        Err(problem) => {
            return Pieces {
                figure: None,
                figure_metadata: Map::new(),
                words: problem_bundle(session, output, problem),
            };
        }
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
    let mut figure_metadata = Map::new();
    let figure = figure.map(|figure| {
        let mut plain = figure.description.clone();
        if !output.refreshed_by.is_empty() {
            plain += &format!("\n{}", figure.footer);
        }
        let mut bundle = bundle([
            ("text/plain", plain),
            ("image/svg+xml", display::svg(&figure)),
            ("application/pdf", BASE64.encode(display::pdf(&figure))),
        ]);
        if media.png {
            let png = BASE64.encode(display::png(&figure, PNG_SCALE));
            bundle.insert("image/png".to_owned(), Json::String(png));
            let [width, height] = display::figure_size(&figure);
            figure_metadata.insert("image/png".to_owned(), json!({"width": width, "height": height}));
        }
        bundle
    });
    Pieces { figure, figure_metadata, words }
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
