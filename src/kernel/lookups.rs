//! Questions that are answered from the definitions in force: completion, help, whether a cell is complete.

use serde_json::{Value as Json, json};

use super::message::Request;
use crate::base::{LineIndex, SourceId};
use crate::language;
use crate::session::Session;

/// The byte in a text that a position in code points stands for; front ends send positions past its end.
fn byte(text: &str, code_points: Option<&Json>) -> usize {
    let position = code_points.and_then(Json::as_u64).and_then(|position| usize::try_from(position).ok());
    position.map_or(text.len(), |position| LineIndex::new(text).byte_of_code_point(position))
}

fn code_points(text: &str, byte: usize) -> usize {
    text.get(..byte).map_or(0, |before| before.chars().count())
}

pub(super) fn complete(session: &Session, request: &Request) -> Json {
    let text = request.text("code");
    let found = session.complete(text, byte(text, request.content.get("cursor_pos")));
    let (start, end) = (code_points(text, found.start), code_points(text, found.end));
    let matches: Vec<&str> = found.items.iter().map(|item| item.text.as_str()).collect();
    let described: Vec<Json> = found
        .items
        .iter()
        .map(|item| {
            json!({
                "text": item.text,
                "type": item.kind.word(),
                "signature": item.detail,
                "start": start,
                "end": end,
            })
        })
        .collect();
    json!({
        "status": "ok",
        "matches": matches,
        "cursor_start": start,
        "cursor_end": end,
        "metadata": {"_jupyter_types_experimental": described},
    })
}

pub(super) fn inspect(session: &Session, request: &Request) -> Json {
    let text = request.text("code");
    match session.inspect(text, byte(text, request.content.get("cursor_pos"))) {
        None => json!({"status": "ok", "found": false, "data": {}, "metadata": {}}),
        Some(found) => json!({
            "status": "ok",
            "found": true,
            "data": {"text/plain": found.text, "text/markdown": found.markdown(text)},
            "metadata": {},
        }),
    }
}

pub(super) fn is_complete(request: &Request) -> Json {
    match language::parse(request.text("code"), SourceId::default()) {
        Ok(_) => json!({"status": "complete"}),
        Err(error) if error.incomplete => json!({"status": "incomplete", "indent": "  "}),
        Err(_) => json!({"status": "invalid"}),
    }
}
