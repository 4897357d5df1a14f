//! Figures as SVG: transparent ground, words and axes in the colour of the page's text, a fixed view box.
//!
//! An image inside a page has no text colour of its own, so its root sets one by the reader's scheme; where the drawing
//! stands in the page itself, `svg:root` is not it and the page's colour holds.

use super::lettering::{cut, lines, spread, width};
use super::markup::{Markup, number};
use super::thinning::{thinned, thinned_band};
use crate::value::{Band, Figure, Ink, Line, Mark, Panel, PlotAxis};

/// Colours of the numbered inks. Found by a search for the six colours that lie farthest apart in the OKLab space for
/// normal sight and for the three kinds of colour deficiency, between the lightness that a white and the one that a
/// dark ground allow; a test holds them to it.
const COLOURS: [&str; 6] = ["#2891ff", "#e6752e", "#007c6f", "#843eb9", "#bd80ab", "#c12607"];

/// Line styles of the numbered inks, which tell the same apart without colour: lengths of dash and gap.
const DASHES: [&str; 7] = ["", "8 3", "3 2.2", "9 3 2 3", "15 4", "5 2 2 2 2 2", "1 4"];

const WIDTH: f64 = 720.0;
const MARGIN: f64 = 16.0;
const PLOT_HEIGHT: f64 = 252.0;
const TITLE_SIZE: f64 = 16.0;
const TEXT_SIZE: f64 = 12.0;
const SMALL_SIZE: f64 = 10.5;
/// The distance of two lines of text.
const LEADING: f64 = 17.0;
/// The length of the piece of line before a label.
const SAMPLE: f64 = 22.0;
/// The most room that labels at line ends take.
const LABEL_ROOM: f64 = 150.0;

const STYLE: &str = "svg:root{color:#20242a}@media(prefers-color-scheme:dark){svg:root{color:#dfe3e8}}";

/// The rectangle between the axes.
#[derive(Clone, Copy)]
struct Frame {
    left: f64,
    right: f64,
    top: f64,
    bottom: f64,
}

/// An axis laid between two places of the drawing.
#[derive(Clone, Copy)]
struct Scale {
    low: f64,
    high: f64,
    from: f64,
    to: f64,
}

impl Scale {
    fn new(axis: &PlotAxis, from: f64, to: f64) -> Self {
        let (from, to) = if axis.turned { (to, from) } else { (from, to) };
        Self { low: axis.low, high: axis.high, from, to }
    }

    fn place(self, value: f64) -> f64 {
        // In quarters, so that the length of an axis of the largest numbers is finite.
        let part = (value / 4.0 - self.low / 4.0) / (self.high / 4.0 - self.low / 4.0);
        self.from + part.clamp(0.0, 1.0) * (self.to - self.from)
    }
}

/// A figure as an SVG document.
pub fn svg(figure: &Figure) -> String {
    let room = WIDTH - 2.0 * MARGIN;
    // Bold type is wider.
    let title = lines(&figure.title, TITLE_SIZE * 1.08, room, 2);
    let subtitle = lines(&figure.subtitle, TEXT_SIZE, room, 3);
    let notes: Vec<String> = figure.notes.iter().flat_map(|note| lines(note, SMALL_SIZE, room, 2)).collect();
    let (left, right) = sides(figure);
    let mut frames = Vec::new();
    let mut bottom = MARGIN + title.len() as f64 * 20.0 + subtitle.len() as f64 * LEADING;
    for panel in &figure.panels {
        let top = bottom + 36.0;
        let labels = labelled(panel).count() as f64;
        let frame = Frame { left, right, top, bottom: top + PLOT_HEIGHT.max(labels * LEADING) };
        frames.push(frame);
        bottom = frame.bottom + 42.0;
    }
    let height = bottom + 10.0 + (notes.len() + 1) as f64 * LEADING;
    let mut markup = Markup::default();
    markup
        .element("svg")
        .with("xmlns", "http://www.w3.org/2000/svg")
        .with("viewBox", &format!("0 0 {} {}", number(WIDTH), number(height)))
        .at("width", WIDTH)
        .at("height", height)
        .with("role", "img")
        .with("style", "max-width:100%;height:auto")
        .with("font-family", "Helvetica, Arial, 'Liberation Sans', sans-serif")
        .at("font-size", TEXT_SIZE)
        .with("fill", "currentColor")
        .holding(|markup| {
            markup.element("title").saying(&figure.title);
            markup.element("desc").saying(&figure.description);
            markup.element("style").saying(STYLE);
            let mut y = MARGIN;
            for line in &title {
                y += 20.0;
                let text = markup.element("text").at("x", MARGIN).at("y", y - 4.0);
                text.at("font-size", TITLE_SIZE).at("font-weight", 600.0).saying(line);
            }
            for line in &subtitle {
                y += LEADING;
                muted(markup, MARGIN, y - 4.0, TEXT_SIZE, "start", line);
            }
            for (panel, frame) in figure.panels.iter().zip(&frames) {
                draw(markup, panel, *frame);
            }
            let mut y = bottom;
            for note in &notes {
                y += LEADING;
                muted(markup, MARGIN, y, SMALL_SIZE, "start", note);
            }
            let footer = cut(&figure.footer, SMALL_SIZE, room);
            muted(markup, WIDTH - MARGIN, y + LEADING, SMALL_SIZE, "end", &footer);
        });
    markup.finish()
}

fn muted(markup: &mut Markup, x: f64, y: f64, size: f64, anchor: &str, words: &str) {
    let text = markup.element("text").at("x", x).at("y", y).at("font-size", size);
    text.with("text-anchor", anchor).with("fill-opacity", "0.75").saying(words);
}

/// Lines that have a label and an end to put it at.
fn labelled(panel: &Panel) -> impl Iterator<Item = (&Line, &str, [f64; 2])> {
    panel.marks.iter().filter_map(|mark| match mark {
        Mark::Line(line) => Some((line, line.label.as_deref()?, line.end()?)),
        Mark::Band(_) => None,
    })
}

/// Where the plots begin and end, so that ticks and labels have room beside them.
fn sides(figure: &Figure) -> (f64, f64) {
    let widest = |words: &mut dyn Iterator<Item = &str>| {
        words.map(|words| width(words, TEXT_SIZE)).fold(0.0, f64::max)
    };
    let panels = || figure.panels.iter();
    let values = widest(&mut panels().flat_map(|panel| panel.vertical.ticks.iter().map(|tick| &*tick.label)));
    let times =
        widest(&mut panels().flat_map(|panel| panel.horizontal.ticks.iter().map(|tick| &*tick.label)));
    let labels = widest(&mut panels().flat_map(|panel| labelled(panel).map(|(_, label, _)| label)));
    let labels = if labels > 0.0 { labels.min(LABEL_ROOM) + SAMPLE + 14.0 } else { 0.0 };
    let left = (MARGIN + values + 8.0).max(times / 2.0 + 2.0);
    (left, WIDTH - (MARGIN + labels).max(times / 2.0 + 2.0))
}

fn draw(markup: &mut Markup, panel: &Panel, frame: Frame) {
    let across = Scale::new(&panel.horizontal, frame.left, frame.right);
    let up = Scale::new(&panel.vertical, frame.bottom, frame.top);
    let caption = cut(&panel.vertical.title, TEXT_SIZE, WIDTH - 2.0 * MARGIN);
    markup.element("text").at("x", MARGIN).at("y", frame.top - 16.0).saying(&caption);
    vertical_axis(markup, &panel.vertical, up, frame);
    horizontal_axis(markup, &panel.horizontal, across, frame);
    for mark in &panel.marks {
        match mark {
            Mark::Band(band) => draw_band(markup, band, across, up),
            Mark::Line(line) => draw_line(markup, line, across, up),
        }
    }
    draw_labels(markup, panel, frame, across, up);
}

fn vertical_axis(markup: &mut Markup, axis: &PlotAxis, up: Scale, frame: Frame) {
    for tick in &axis.ticks {
        let y = up.place(tick.at);
        // The line of nothing is what deviations are seen against.
        let (colour, opacity) =
            if tick.at.abs() < f64::MIN_POSITIVE { ("currentColor", "0.55") } else { ("#808080", "0.28") };
        let line = markup.element("line").at("x1", frame.left).at("x2", frame.right).at("y1", y).at("y2", y);
        drop(line.with("stroke", colour).with("stroke-opacity", opacity));
        let text = markup.element("text").at("x", frame.left - 8.0).at("y", y + 4.0);
        text.with("text-anchor", "end").saying(&tick.label);
    }
}

fn horizontal_axis(markup: &mut Markup, axis: &PlotAxis, across: Scale, frame: Frame) {
    let bottom = frame.bottom;
    let line = markup.element("line").at("x1", frame.left).at("x2", frame.right);
    drop(line.at("y1", bottom).at("y2", bottom).with("stroke", "currentColor"));
    for tick in &axis.ticks {
        let x = across.place(tick.at);
        let line = markup.element("line").at("x1", x).at("x2", x).at("y1", bottom).at("y2", bottom + 5.0);
        drop(line.with("stroke", "currentColor"));
        let text = markup.element("text").at("x", x).at("y", bottom + 19.0);
        text.with("text-anchor", "middle").saying(&tick.label);
    }
    let text = markup.element("text").at("x", (frame.left + frame.right) / 2.0).at("y", bottom + 38.0);
    text.with("text-anchor", "middle").saying(&axis.title);
}

fn colour(ink: Ink) -> &'static str {
    match ink {
        Ink::Foremost => "currentColor",
        Ink::Numbered(index) => COLOURS.get(index % COLOURS.len()).copied().unwrap_or("currentColor"),
        Ink::Faint => "#808080",
    }
}

fn dashes(ink: Ink) -> &'static str {
    match ink {
        Ink::Numbered(index) => DASHES.get(index % DASHES.len()).copied().unwrap_or(""),
        Ink::Foremost | Ink::Faint => "",
    }
}

fn thickness(ink: Ink) -> f64 {
    match ink {
        Ink::Foremost => 2.2,
        Ink::Numbered(_) => 1.8,
        Ink::Faint => 0.8,
    }
}

/// A path that is stroked in the ink.
fn stroke(markup: &mut Markup, path: &str, ink: Ink) {
    let element = markup.element("path").with("d", path).with("fill", "none").with("stroke", colour(ink));
    let element = element.at("stroke-width", thickness(ink)).with("stroke-linejoin", "round");
    match dashes(ink) {
        "" => drop(element),
        dashes => drop(element.with("stroke-dasharray", dashes)),
    }
}

fn draw_line(markup: &mut Markup, line: &Line, across: Scale, up: Scale) {
    let runs: Vec<Vec<[f64; 2]>> = line
        .runs
        .iter()
        .map(|run| run.iter().map(|[along, value]| [across.place(*along), up.place(*value)]).collect())
        .collect();
    let runs = thinned(runs, (across.to - across.from).abs());
    let path: String = runs.iter().filter(|run| run.len() > 1).map(|run| polyline(run)).collect();
    if !path.is_empty() {
        stroke(markup, &path, line.ink);
    }
    // A value between two gaps is a line of no length, which shows as a dot alone.
    let dotted = runs.iter().filter(|run| line.dots || run.len() == 1).flatten();
    let dots: String = dotted.map(|[x, y]| format!("M{} {}h0", number(*x), number(*y))).collect();
    if !dots.is_empty() {
        let size = if line.dots { 5.0 } else { 3.2 };
        let element = markup.element("path").with("d", &dots).with("fill", "none");
        let element = element.with("stroke", colour(line.ink)).at("stroke-width", size);
        drop(element.with("stroke-linecap", "round"));
    }
}

fn polyline(places: &[[f64; 2]]) -> String {
    let mut path = String::new();
    for (index, [x, y]) in places.iter().enumerate() {
        path += if index == 0 { "M" } else { "L" };
        path += &format!("{} {}", number(*x), number(*y));
    }
    path
}

fn draw_band(markup: &mut Markup, band: &Band, across: Scale, up: Scale) {
    let runs: Vec<Vec<[f64; 3]>> = band
        .runs
        .iter()
        .map(|run| {
            run.iter()
                .map(|[along, low, high]| [across.place(*along), up.place(*low), up.place(*high)])
                .collect()
        })
        .collect();
    let (mut areas, mut bars) = (String::new(), String::new());
    for run in thinned_band(runs, (across.to - across.from).abs()) {
        match run.as_slice() {
            [[x, low, high]] => bars += &format!("M{} {}V{}", number(*x), number(*low), number(*high)),
            run => {
                let above = run.iter().map(|[x, _, high]| [*x, *high]);
                let below = run.iter().rev().map(|[x, low, _]| [*x, *low]);
                areas += &(polyline(&above.chain(below).collect::<Vec<_>>()) + "Z");
            }
        }
    }
    if !areas.is_empty() {
        let element = markup.element("path").with("d", &areas).with("fill", colour(band.ink));
        drop(element.with("fill-opacity", if band.ink == Ink::Foremost { "0.2" } else { "0.16" }));
    }
    if !bars.is_empty() {
        let element = markup.element("path").with("d", &bars).with("stroke", colour(band.ink));
        drop(element.at("stroke-width", 3.0).with("stroke-opacity", "0.35"));
    }
}

/// Labels beside the ends of lines, moved apart, each behind a piece of its line and tied to its end.
fn draw_labels(markup: &mut Markup, panel: &Panel, frame: Frame, across: Scale, up: Scale) {
    let labels: Vec<_> = labelled(panel).collect();
    let desired: Vec<f64> = labels.iter().map(|(_, _, [_, value])| up.place(*value)).collect();
    let half = LEADING / 2.0;
    let placed = spread(&desired, LEADING, frame.top - half, frame.bottom + half);
    for (((line, label, [along, _]), y), end) in labels.iter().zip(&placed).zip(&desired) {
        let x = frame.right + 10.0;
        let tie = [[across.place(*along), *end], [x, *y]];
        let element = markup.element("path").with("d", &polyline(&tie)).with("fill", "none");
        drop(element.with("stroke", colour(line.ink)).with("stroke-opacity", "0.6").at("stroke-width", 0.8));
        stroke(markup, &polyline(&[[x, *y], [x + SAMPLE, *y]]), line.ink);
        let text = markup.element("text").at("x", x + SAMPLE + 4.0).at("y", y + 4.0);
        text.saying(&cut(label, TEXT_SIZE, LABEL_ROOM));
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn linear(colour: &str) -> [f64; 3] {
        [1, 3, 5].map(|at| {
            let part = f64::from(u8::from_str_radix(&colour[at..at + 2], 16).unwrap()) / 255.0;
            if part <= 0.04045 { part / 12.92 } else { ((part + 0.055) / 1.055).powf(2.4) }
        })
    }

    fn mix(rows: [[f64; 3]; 3], colour: [f64; 3]) -> [f64; 3] {
        rows.map(|row| row.iter().zip(colour).map(|(part, light)| part * light).sum::<f64>().max(0.0))
    }

    /// The OKLab space (Ottosson 2020), its matrices from memory.
    fn oklab(colour: [f64; 3]) -> [f64; 3] {
        let cones = mix(
            [
                [0.412_221_470_8, 0.536_332_536_3, 0.051_445_992_9],
                [0.211_903_498_2, 0.680_699_545_1, 0.107_396_956_6],
                [0.088_302_461_9, 0.281_718_837_6, 0.629_978_700_5],
            ],
            colour.map(|light| light.min(1.0)),
        );
        let [long, middle, short] = cones.map(f64::cbrt);
        [
            0.210_454_255_3 * long + 0.793_617_785 * middle - 0.004_072_046_8 * short,
            1.977_998_495_1 * long - 2.428_592_205 * middle + 0.450_593_709_9 * short,
            0.025_904_037_1 * long + 0.782_771_766_2 * middle - 0.808_675_766 * short,
        ]
    }

    /// Normal sight and the complete deficiencies of Machado and others (2009), the matrices from memory.
    const SIGHTS: [[[f64; 3]; 3]; 4] = [
        [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]],
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]],
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.01182, 0.04294, 0.968881]],
        [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.3039]],
    ];

    #[test]
    fn colours_are_told_apart_with_any_sight() {
        for sight in SIGHTS {
            for (index, one) in COLOURS.iter().enumerate() {
                for other in &COLOURS[..index] {
                    let [one, other] = [one, other].map(|colour| oklab(mix(sight, linear(colour))));
                    let distance =
                        one.iter().zip(other).map(|(one, other)| (one - other).powi(2)).sum::<f64>().sqrt();
                    // Two per cent is about what can just be seen side by side.
                    assert!(distance > 0.1, "{distance:.3}");
                }
            }
        }
    }

    #[test]
    fn colours_stand_out_from_white_and_from_dark_grounds() {
        let luminance = |colour| mix([[0.2126, 0.7152, 0.0722]; 3], linear(colour))[0] + 0.05;
        for colour in COLOURS {
            // Contrast of 3:1, as WCAG 2 asks of what is drawn.
            assert!(1.05 / luminance(colour) >= 3.0, "{colour} on white");
            assert!(luminance(colour) / luminance("#111111") >= 3.0, "{colour} on dark");
        }
    }

    #[test]
    fn every_numbered_ink_up_to_twelve_differs_in_colour_or_line_style() {
        for one in 0..12 {
            for other in 0..one {
                let look = |index| (colour(Ink::Numbered(index)), dashes(Ink::Numbered(index)));
                assert_ne!(look(one), look(other));
            }
        }
    }
}
