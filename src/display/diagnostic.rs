use annotate_snippets::{AnnotationKind, Group, Level, Renderer, Snippet};

use crate::base::{Diagnostic, LineIndex, Mark, Source, SourceId};

/// A diagnostic as text: the message, the source line with carets in the cell where the cause stands, and help.
///
/// `sources` finds the text of a span; `colour` adds ANSI colours.
pub fn diagnostic(
    diagnostic: &Diagnostic,
    sources: &dyn Fn(SourceId) -> Option<Source>,
    colour: bool,
) -> String {
    let mut marks: Vec<(AnnotationKind, &Mark)> = vec![(AnnotationKind::Primary, &diagnostic.primary)];
    marks.extend(diagnostic.secondary.iter().map(|mark| (AnnotationKind::Context, mark)));
    let mut texts: Vec<Source> = Vec::new();
    for (_, mark) in &marks {
        if texts.iter().all(|source| source.id != mark.span.source)
            && let Some(source) = sources(mark.span.source)
        {
            texts.push(source);
        }
    }
    let title = Level::ERROR.primary_title(&*diagnostic.message).id(diagnostic.code);
    let mut group = Group::with_title(title);
    for source in &texts {
        let here = || marks.iter().filter(|(_, mark)| mark.span.source == source.id);
        // Only the lines about the marks: a script of many lines may have many mistakes.
        let length = source.text.len();
        let first = here().map(|(_, mark)| mark.span.start).min().unwrap_or(0).min(length);
        let last = here().map(|(_, mark)| mark.span.end).max().unwrap_or(0).min(length);
        let before = source.text.get(..first).unwrap_or("");
        let begin = before.rfind('\n').map_or(0, |line| line + 1);
        let rest = source.text.get(last..).and_then(|rest| rest.find('\n'));
        let end = rest.map_or(length, |line| last + line);
        let window = source.text.get(begin..end).unwrap_or("");
        let first_line = before.matches('\n').count() + 1;
        let annotations = here().map(|(kind, mark)| {
            let end = mark.span.end.clamp(begin, end) - begin;
            let range = mark.span.start.saturating_sub(begin).min(end)..end;
            let annotation = kind.span(range);
            if mark.label.is_empty() { annotation } else { annotation.label(&*mark.label) }
        });
        group = group.element(
            Snippet::source(window).line_start(first_line).path(&*source.name).annotations(annotations),
        );
    }
    for detail in &diagnostic.details {
        group = group.element(Level::NOTE.message(&**detail));
    }
    if let Some(help) = &diagnostic.help {
        group = group.element(Level::HELP.message(&**help));
    }
    let renderer = if colour { Renderer::styled() } else { Renderer::plain() };
    let text = renderer.render(&[group]).to_string();
    text.lines().map(|line| line.trim_end().to_owned() + "\n").collect()
}

/// The place of a diagnostic as `name:line:column`.
pub fn problem_line(diagnostic: &Diagnostic, sources: &dyn Fn(SourceId) -> Option<Source>) -> String {
    match sources(diagnostic.primary.span.source) {
        None => String::new(),
        Some(source) => {
            let position = LineIndex::new(&source.text).position(diagnostic.primary.span.start);
            format!("{}:{}:{}", source.name, position.line, position.column)
        }
    }
}
