//! Figures as PNG, on white.

use miniz_oxide::deflate::compress_to_vec_zlib;
use tiny_skia::{
    Color, FillRule, LineCap, LineJoin, Paint as Brush, Path, PathBuilder, Pixmap, Shader, StrokeDash,
    Transform,
};
use ttf_parser::OutlineBuilder;

use super::drawing::{Colour, Paint, Shape, Stroke, Words, drawing};
use super::typeface::{Letter, Typeface};
use crate::value::Figure;

/// The most pixels along a side.
const MOST: f64 = 16_000.0;

/// Higher levels take five times as long, and a third less room.
const LEVEL: u8 = 1;

/// A figure as a PNG image of `scale` pixels to each pixel of a page, 96 of which are an inch; 2 is what fine screens
/// have, 3 is fit for print. A scale beyond sense is taken as the nearest sensible one.
pub fn png(figure: &Figure, scale: f64) -> Vec<u8> {
    let drawing = drawing(figure);
    let scale = if scale.is_finite() { scale } else { 1.0 };
    let scale = scale.clamp(0.1, 10.0).min(MOST / drawing.height.max(drawing.width));
    let [width, height] =
        [drawing.width, drawing.height].map(|length| (length * scale).ceil().max(1.0) as u32);
    // There is none of no width or beyond memory's reach, which the bounds forbid.
    let Some(pixels) = Pixmap::new(width, height) else { return Vec::new() };
    let mut canvas = Canvas { pixels, scale };
    canvas.pixels.fill(Color::WHITE);
    for shape in &drawing.shapes {
        canvas.put(shape);
    }
    encoded(&canvas.pixels, scale)
}

struct Canvas {
    pixels: Pixmap,
    scale: f64,
}

impl Canvas {
    fn transform(&self) -> Transform {
        Transform::from_scale(self.scale as f32, self.scale as f32)
    }

    fn put(&mut self, shape: &Shape) {
        match shape {
            Shape::Rule { from, to, stroke } => {
                let (from, to) = self.crisp(*from, *to, stroke.width);
                self.stroke(path(&[vec![from, to]], false), stroke);
            }
            Shape::Lines { runs, stroke } => self.stroke(path(runs, false), stroke),
            Shape::Areas { rings, paint } => self.fill(path(rings, true), *paint),
            Shape::Dots { places, size, colour } => {
                let mut builder = PathBuilder::new();
                for [x, y] in places {
                    builder.push_circle(*x as f32, *y as f32, (size / 2.0) as f32);
                }
                self.fill(builder.finish(), Paint { colour: *colour, opacity: 1.0 });
            }
            Shape::Words(words) => self.words(words),
        }
    }

    /// A line without slope, moved so that it covers whole pixels.
    fn crisp(&self, from: [f64; 2], to: [f64; 2], width: f64) -> ([f64; 2], [f64; 2]) {
        let odd = (width * self.scale).round() as i64 % 2 == 1;
        let shift = if odd { 0.5 } else { 0.0 };
        let snap = |place: f64| ((place * self.scale - shift).round() + shift) / self.scale;
        let (mut from, mut to) = (from, to);
        for side in 0..2 {
            if (from[side] - to[side]).abs() < 1e-9 {
                (from[side], to[side]) = (snap(from[side]), snap(to[side]));
            }
        }
        (from, to)
    }

    fn fill(&mut self, path: Option<Path>, paint: Paint) {
        if let Some(path) = path {
            self.pixels.fill_path(&path, &brush(paint), FillRule::Winding, self.transform(), None);
        }
    }

    fn stroke(&mut self, path: Option<Path>, stroke: &Stroke) {
        let dashes = stroke.dashes.iter().map(|length| *length as f32).collect();
        let pen = tiny_skia::Stroke {
            width: stroke.width as f32,
            line_cap: LineCap::Butt,
            line_join: if stroke.round { LineJoin::Round } else { LineJoin::Miter },
            dash: StrokeDash::new(dashes, 0.0),
            ..tiny_skia::Stroke::default()
        };
        if let Some(path) = path {
            self.pixels.stroke_path(&path, &brush(stroke.paint), &pen, self.transform(), None);
        }
    }

    fn words(&mut self, words: &Words) {
        let Some(typeface) = Typeface::of(words.bold) else { return };
        let letters = typeface.letters(&words.text);
        let width: f64 = letters.iter().map(Letter::width).sum::<f64>() * words.size;
        let mut x = words.at[0] - width * words.anchor.part_before();
        let mut outline = Outline { path: PathBuilder::new(), x: 0.0, y: 0.0, scale: 0.0 };
        for letter in &letters {
            outline.x = x as f32;
            outline.y = (words.at[1] - letter.rise * words.size) as f32;
            outline.scale = (letter.scale * words.size / typeface.em()) as f32;
            typeface.outline(letter.glyph, &mut outline);
            x += letter.width() * words.size;
        }
        self.fill(outline.path.finish(), Paint { colour: Colour::Text, opacity: words.opacity });
    }
}

fn brush(paint: Paint) -> Brush<'static> {
    let [red, green, blue] = paint.colour.on_white();
    let mut colour = Color::from_rgba8(red, green, blue, 255);
    colour.apply_opacity(paint.opacity as f32);
    Brush { shader: Shader::SolidColor(colour), ..Brush::default() }
}

fn path(runs: &[Vec<[f64; 2]>], closed: bool) -> Option<Path> {
    let mut builder = PathBuilder::new();
    for run in runs {
        for (index, [x, y]) in run.iter().enumerate() {
            if index == 0 {
                builder.move_to(*x as f32, *y as f32);
            } else {
                builder.line_to(*x as f32, *y as f32);
            }
        }
        if closed {
            builder.close();
        }
    }
    builder.finish()
}

/// The outlines of glyphs, put where they stand.
struct Outline {
    path: PathBuilder,
    x: f32,
    y: f32,
    scale: f32,
}

impl Outline {
    fn place(&self, x: f32, y: f32) -> (f32, f32) {
        (self.x + x * self.scale, self.y - y * self.scale)
    }
}

impl OutlineBuilder for Outline {
    fn move_to(&mut self, x: f32, y: f32) {
        let (x, y) = self.place(x, y);
        self.path.move_to(x, y);
    }

    fn line_to(&mut self, x: f32, y: f32) {
        let (x, y) = self.place(x, y);
        self.path.line_to(x, y);
    }

    fn quad_to(&mut self, x1: f32, y1: f32, x: f32, y: f32) {
        let ((x1, y1), (x, y)) = (self.place(x1, y1), self.place(x, y));
        self.path.quad_to(x1, y1, x, y);
    }

    fn curve_to(&mut self, x1: f32, y1: f32, x2: f32, y2: f32, x: f32, y: f32) {
        let ((x1, y1), (x2, y2), (x, y)) = (self.place(x1, y1), self.place(x2, y2), self.place(x, y));
        self.path.cubic_to(x1, y1, x2, y2, x, y);
    }

    fn close(&mut self) {
        self.path.close();
    }
}

/// The pixels as a file: red, green and blue, a byte each, and how many of them are a metre.
fn encoded(pixels: &Pixmap, scale: f64) -> Vec<u8> {
    let mut file = b"\x89PNG\r\n\x1a\n".to_vec();
    let size = [pixels.width().to_be_bytes(), pixels.height().to_be_bytes()].concat();
    chunk(&mut file, *b"IHDR", &[&size[..], &[8, 2, 0, 0, 0]].concat());
    let per_metre = ((scale * 96.0 / 0.0254).round() as u32).to_be_bytes();
    chunk(&mut file, *b"pHYs", &[&per_metre[..], &per_metre, &[1]].concat());
    let row = pixels.width() as usize * 4;
    let mut data = Vec::with_capacity((row + 1) * pixels.height() as usize);
    for row in pixels.data().chunks(row) {
        // Not filtered.
        data.push(0);
        for pixel in row.as_chunks::<4>().0 {
            let [red, green, blue, _] = *pixel;
            data.extend_from_slice(&[red, green, blue]);
        }
    }
    chunk(&mut file, *b"IDAT", &compress_to_vec_zlib(&data, LEVEL));
    chunk(&mut file, *b"IEND", &[]);
    file
}

fn chunk(file: &mut Vec<u8>, kind: [u8; 4], data: &[u8]) {
    file.extend((data.len() as u32).to_be_bytes());
    let start = file.len();
    file.extend(kind);
    file.extend(data);
    let checked = crc(file.get(start..).unwrap_or(&[]));
    file.extend(checked.to_be_bytes());
}

/// The check sum of PNG (ISO/IEC 15948, annex D).
fn crc(data: &[u8]) -> u32 {
    let table: [u32; 256] = std::array::from_fn(|byte| {
        (0..8).fold(byte as u32, |rest, _| if rest & 1 == 1 { 0xedb8_8320 ^ (rest >> 1) } else { rest >> 1 })
    });
    !data.iter().fold(u32::MAX, |rest, byte| table[((rest ^ u32::from(*byte)) & 0xff) as usize] ^ (rest >> 8))
}
