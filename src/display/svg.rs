//! Figures as SVG: transparent ground, words and axes in the colour of the page's text, a fixed view box.
//!
//! An image inside a page has no text colour of its own, so its root sets one by the reader's scheme; where the drawing
//! stands in the page itself, `svg:root` is not it and the page's colour holds.

use super::drawing::{Anchor, Colour, Paint, Shape, Stroke, TEXT_ON_WHITE, TEXT_SIZE, Words, drawing};
use super::markup::{Element, Markup, number, push_number};
use crate::value::Figure;

/// The colour of words and axes on dark grounds.
const TEXT_ON_DARK: u32 = 0xdf_e3_e8;

/// A figure as an SVG document.
pub fn svg(figure: &Figure) -> String {
    let drawing = drawing(figure);
    let style = format!(
        "svg:root{{color:#{TEXT_ON_WHITE:06x}}}@media(prefers-color-scheme:dark){{svg:root{{color:#{TEXT_ON_DARK:06x}}}}}"
    );
    let mut markup = Markup::default();
    markup
        .element("svg")
        .with("xmlns", "http://www.w3.org/2000/svg")
        .with("viewBox", &format!("0 0 {} {}", number(drawing.width), number(drawing.height)))
        .at("width", drawing.width)
        .at("height", drawing.height)
        .with("role", "img")
        .with("style", "max-width:100%;height:auto")
        .with("font-family", "Helvetica, Arial, 'Liberation Sans', sans-serif")
        .at("font-size", TEXT_SIZE)
        .with("fill", "currentColor")
        .holding(|markup| {
            markup.element("title").saying(&drawing.title);
            markup.element("desc").saying(&drawing.description);
            markup.element("style").saying(&style);
            for shape in &drawing.shapes {
                put(markup, shape);
            }
        });
    markup.finish()
}

fn put(markup: &mut Markup, shape: &Shape) {
    match shape {
        Shape::Rule { from, to, stroke } => {
            let line = markup.element("line").at("x1", from[0]).at("x2", to[0]);
            drop(stroked(line.at("y1", from[1]).at("y2", to[1]), stroke));
        }
        Shape::Lines { runs, stroke } => {
            let path: String = runs.iter().map(|run| polyline(run)).collect();
            drop(stroked(markup.element("path").with("d", &path).with("fill", "none"), stroke));
        }
        Shape::Areas { rings, paint } => {
            let path: String = rings.iter().map(|ring| polyline(ring) + "Z").collect();
            drop(painted(markup.element("path").with("d", &path), ["fill", "fill-opacity"], *paint));
        }
        Shape::Dots { places, size, colour } => {
            // A line of no length with round ends.
            let path: String = places.iter().map(|place| polyline(&[*place]) + "h0").collect();
            let element = markup.element("path").with("d", &path).with("fill", "none");
            let element = element.with("stroke", &name(*colour)).at("stroke-width", *size);
            drop(element.with("stroke-linecap", "round"));
        }
        Shape::Words(words) => put_words(markup, words),
    }
}

fn put_words(markup: &mut Markup, words: &Words) {
    let mut text = markup.element("text").at("x", words.at[0]).at("y", words.at[1]);
    if (words.size - TEXT_SIZE).abs() > 1e-9 {
        text = text.at("font-size", words.size);
    }
    if words.bold {
        text = text.at("font-weight", 600.0);
    }
    text = match words.anchor {
        Anchor::Start => text,
        Anchor::Middle => text.with("text-anchor", "middle"),
        Anchor::End => text.with("text-anchor", "end"),
    };
    if words.opacity < 1.0 {
        text = text.at("fill-opacity", words.opacity);
    }
    text.saying(&words.text);
}

fn name(colour: Colour) -> String {
    match colour {
        Colour::Text => "currentColor".to_owned(),
        Colour::Fixed(colour) => format!("#{colour:06x}"),
    }
}

fn painted<'a>(element: Element<'a>, [colour, opacity]: [&'static str; 2], paint: Paint) -> Element<'a> {
    let element = element.with(colour, &name(paint.colour));
    if paint.opacity < 1.0 { element.at(opacity, paint.opacity) } else { element }
}

fn stroked<'a>(element: Element<'a>, stroke: &Stroke) -> Element<'a> {
    let mut element = painted(element, ["stroke", "stroke-opacity"], stroke.paint);
    if (stroke.width - 1.0).abs() > 1e-9 {
        element = element.at("stroke-width", stroke.width);
    }
    if stroke.round {
        element = element.with("stroke-linejoin", "round");
    }
    if !stroke.dashes.is_empty() {
        let dashes: Vec<String> = stroke.dashes.iter().map(|length| number(*length)).collect();
        element = element.with("stroke-dasharray", &dashes.join(" "));
    }
    element
}

fn polyline(places: &[[f64; 2]]) -> String {
    let mut path = String::with_capacity(places.len() * 14);
    for (index, [x, y]) in places.iter().enumerate() {
        path.push(if index == 0 { 'M' } else { 'L' });
        push_number(&mut path, *x);
        path.push(' ');
        push_number(&mut path, *y);
    }
    path
}
