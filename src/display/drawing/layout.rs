//! Where everything of a figure stands.

use super::ink::{GREY, colour, dashes, thickness};
use super::{Anchor, Colour, Drawing, Paint, Shape, Stroke, TEXT_SIZE, Words};
use crate::display::lettering::{cut, lines, spread, width};
use crate::display::thinning::{thinned, thinned_band};
use crate::value::{Band, Figure, Ink, Line, Mark, Panel, PlotAxis};

const WIDTH: f64 = 720.0;
const MARGIN: f64 = 16.0;
const PLOT_HEIGHT: f64 = 252.0;
const TITLE_SIZE: f64 = 16.0;
const SMALL_SIZE: f64 = 10.5;
/// The distance of two lines of text.
const LEADING: f64 = 17.0;
/// The length of the piece of line before a label.
const SAMPLE: f64 = 22.0;
/// The most room that labels at line ends take.
const LABEL_ROOM: f64 = 150.0;

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

/// A figure laid out.
pub(in crate::display) fn drawing(figure: &Figure) -> Drawing {
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
    let mut shapes = Vec::new();
    let mut y = MARGIN;
    for line in title {
        y += 20.0;
        let at = [MARGIN, y - 4.0];
        shapes.push(Shape::Words(Words { size: TITLE_SIZE, bold: true, ..words(line, at, Anchor::Start) }));
    }
    for line in subtitle {
        y += LEADING;
        shapes.push(muted(line, [MARGIN, y - 4.0], TEXT_SIZE, Anchor::Start));
    }
    for (panel, frame) in figure.panels.iter().zip(&frames) {
        draw(&mut shapes, panel, *frame);
    }
    let height = bottom + 10.0 + (notes.len() + 1) as f64 * LEADING;
    let mut y = bottom;
    for note in notes {
        y += LEADING;
        shapes.push(muted(note, [MARGIN, y], SMALL_SIZE, Anchor::Start));
    }
    let footer = cut(&figure.footer, SMALL_SIZE, room);
    shapes.push(muted(footer, [WIDTH - MARGIN, y + LEADING], SMALL_SIZE, Anchor::End));
    Drawing {
        width: WIDTH,
        height,
        title: figure.title.clone(),
        description: figure.description.clone(),
        shapes,
    }
}

fn words(text: String, at: [f64; 2], anchor: Anchor) -> Words {
    Words { text, at, anchor, size: TEXT_SIZE, bold: false, opacity: 1.0 }
}

fn muted(text: String, at: [f64; 2], size: f64, anchor: Anchor) -> Shape {
    Shape::Words(Words { size, opacity: 0.75, ..words(text, at, anchor) })
}

fn thin(colour: Colour, opacity: f64) -> Stroke {
    Stroke { paint: Paint { colour, opacity }, width: 1.0, dashes: &[], round: false }
}

/// A stroke in the ink.
fn stroke(ink: Ink) -> Stroke {
    Stroke { width: thickness(ink), dashes: dashes(ink), round: true, ..thin(colour(ink), 1.0) }
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

fn draw(shapes: &mut Vec<Shape>, panel: &Panel, frame: Frame) {
    let across = Scale::new(&panel.horizontal, frame.left, frame.right);
    let up = Scale::new(&panel.vertical, frame.bottom, frame.top);
    let caption = cut(&panel.vertical.title, TEXT_SIZE, WIDTH - 2.0 * MARGIN);
    shapes.push(Shape::Words(words(caption, [MARGIN, frame.top - 16.0], Anchor::Start)));
    vertical_axis(shapes, &panel.vertical, up, frame);
    horizontal_axis(shapes, &panel.horizontal, across, frame);
    for mark in &panel.marks {
        match mark {
            Mark::Band(band) => draw_band(shapes, band, across, up),
            Mark::Line(line) => draw_line(shapes, line, across, up),
        }
    }
    draw_labels(shapes, panel, frame, across, up);
}

fn vertical_axis(shapes: &mut Vec<Shape>, axis: &PlotAxis, up: Scale, frame: Frame) {
    for tick in &axis.ticks {
        let y = up.place(tick.at);
        // The line of nothing is what deviations are seen against.
        let stroke =
            if tick.at.abs() < f64::MIN_POSITIVE { thin(Colour::Text, 0.55) } else { thin(GREY, 0.28) };
        shapes.push(Shape::Rule { from: [frame.left, y], to: [frame.right, y], stroke });
        shapes.push(Shape::Words(words(tick.label.clone(), [frame.left - 8.0, y + 4.0], Anchor::End)));
    }
}

fn horizontal_axis(shapes: &mut Vec<Shape>, axis: &PlotAxis, across: Scale, frame: Frame) {
    let bottom = frame.bottom;
    let stroke = thin(Colour::Text, 1.0);
    shapes.push(Shape::Rule { from: [frame.left, bottom], to: [frame.right, bottom], stroke });
    for tick in &axis.ticks {
        let x = across.place(tick.at);
        shapes.push(Shape::Rule { from: [x, bottom], to: [x, bottom + 5.0], stroke });
        shapes.push(Shape::Words(words(tick.label.clone(), [x, bottom + 19.0], Anchor::Middle)));
    }
    let at = [(frame.left + frame.right) / 2.0, bottom + 38.0];
    shapes.push(Shape::Words(words(axis.title.clone(), at, Anchor::Middle)));
}

fn draw_line(shapes: &mut Vec<Shape>, line: &Line, across: Scale, up: Scale) {
    let runs: Vec<Vec<[f64; 2]>> = line
        .runs
        .iter()
        .map(|run| run.iter().map(|[along, value]| [across.place(*along), up.place(*value)]).collect())
        .collect();
    let runs = thinned(runs, (across.to - across.from).abs());
    // A value between two gaps is no line.
    let places: Vec<[f64; 2]> =
        runs.iter().filter(|run| line.dots || run.len() == 1).flatten().copied().collect();
    let runs: Vec<_> = runs.into_iter().filter(|run| run.len() > 1).collect();
    if !runs.is_empty() {
        shapes.push(Shape::Lines { runs, stroke: stroke(line.ink) });
    }
    if !places.is_empty() {
        let size = if line.dots { 5.0 } else { 3.2 };
        shapes.push(Shape::Dots { places, size, colour: colour(line.ink) });
    }
}

fn draw_band(shapes: &mut Vec<Shape>, band: &Band, across: Scale, up: Scale) {
    let runs: Vec<Vec<[f64; 3]>> = band
        .runs
        .iter()
        .map(|run| {
            run.iter()
                .map(|[along, low, high]| [across.place(*along), up.place(*low), up.place(*high)])
                .collect()
        })
        .collect();
    let (mut rings, mut bars) = (Vec::new(), Vec::new());
    for run in thinned_band(runs, (across.to - across.from).abs()) {
        match run.as_slice() {
            [[x, low, high]] => bars.push(vec![[*x, *low], [*x, *high]]),
            run => {
                let above = run.iter().map(|[x, _, high]| [*x, *high]);
                let below = run.iter().rev().map(|[x, low, _]| [*x, *low]);
                rings.push(above.chain(below).collect());
            }
        }
    }
    let colour = colour(band.ink);
    if !rings.is_empty() {
        let opacity = if band.ink == Ink::Foremost { 0.2 } else { 0.16 };
        shapes.push(Shape::Areas { rings, paint: Paint { colour, opacity } });
    }
    if !bars.is_empty() {
        shapes.push(Shape::Lines { runs: bars, stroke: Stroke { width: 3.0, ..thin(colour, 0.35) } });
    }
}

/// Labels beside the ends of lines, moved apart, each behind a piece of its line and tied to its end.
fn draw_labels(shapes: &mut Vec<Shape>, panel: &Panel, frame: Frame, across: Scale, up: Scale) {
    let labels: Vec<_> = labelled(panel).collect();
    let desired: Vec<f64> = labels.iter().map(|(_, _, [_, value])| up.place(*value)).collect();
    let half = LEADING / 2.0;
    let placed = spread(&desired, LEADING, frame.top - half, frame.bottom + half);
    for (((line, label, [along, _]), y), end) in labels.iter().zip(&placed).zip(&desired) {
        let x = frame.right + 10.0;
        let tie = vec![[across.place(*along), *end], [x, *y]];
        let tied = Stroke { width: 0.8, ..thin(colour(line.ink), 0.6) };
        shapes.push(Shape::Lines { runs: vec![tie], stroke: tied });
        let sample = vec![[x, *y], [x + SAMPLE, *y]];
        shapes.push(Shape::Lines { runs: vec![sample], stroke: stroke(line.ink) });
        let text = cut(label, TEXT_SIZE, LABEL_ROOM);
        shapes.push(Shape::Words(words(text, [x + SAMPLE + 4.0, y + 4.0], Anchor::Start)));
    }
}
