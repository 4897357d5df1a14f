//! Figures as PDF: one page as large as the figure, on white, its words in an embedded typeface and to be copied.

use std::borrow::Cow;
use std::collections::{BTreeMap, BTreeSet};
use std::sync::{Arc, Mutex, PoisonError};

use miniz_oxide::deflate::compress_to_vec_zlib;
use pdf_writer::types::{CidFontType, FontFlags, LineCapStyle, LineJoinStyle, SystemInfo, UnicodeCmap};
use pdf_writer::{Chunk, Content, Filter, Finish, Name, Pdf, Rect, Ref, Settings, Str, TextStr};
use subsetter::{GlyphRemapper, subset};

use super::drawing::{Colour, Drawing, Paint, Shape, Stroke, Words, drawing};
use super::typeface::{Letter, Typeface};
use crate::value::Figure;

/// Points of a page to a unit of a drawing: 72 and 96 to the inch.
const POINTS: f64 = 0.75;

/// Lists of numbers get little smaller at higher levels, and much slower.
const LEVEL: u8 = 1;

/// Data shorter than this are not compressed: to begin with it takes longer than all the rest, and saves little.
const SHORT: usize = 4096;

/// Without blanks and breaks that nobody reads.
const TERSE: Settings = Settings { pretty: false };

const ADOBE_IDENTITY: SystemInfo<'_> =
    SystemInfo { registry: Str(b"Adobe"), ordering: Str(b"Identity"), supplement: 0 };

/// A figure as a PDF document of one page, as large as the figure is in a page of a screen. The same figure gives the
/// same bytes.
pub fn pdf(figure: &Figure) -> Vec<u8> {
    let drawing = drawing(figure);
    let mut page = Page::new(drawing.height);
    for shape in &drawing.shapes {
        page.put(shape);
    }
    page.document(&drawing)
}

/// The page that is being written.
struct Page {
    height: f64,
    content: Content,
    /// The opacities that are used, in thousandths.
    opacities: BTreeSet<u16>,
    regular: Used,
    bold: Used,
}

/// What is used of a typeface.
#[derive(Default)]
struct Used {
    /// The code of each letter; codes are its places in `letters`, from 1.
    codes: BTreeMap<char, u16>,
    letters: Vec<Letter>,
}

impl Used {
    fn code(&mut self, letter: &Letter) -> u16 {
        *self.codes.entry(letter.character).or_insert_with(|| {
            self.letters.push(*letter);
            // More letters than there are codes for are boxes.
            u16::try_from(self.letters.len()).unwrap_or(0)
        })
    }
}

/// A number of a page: two decimals, as in other formats.
fn rounded(value: f64) -> f32 {
    if value.is_finite() { ((value * 100.0).round() / 100.0) as f32 } else { 0.0 }
}

impl Page {
    fn new(height: f64) -> Self {
        let mut content = Content::with_settings_and_capacity(TERSE, 1 << 15);
        content.transform([POINTS as f32, 0.0, 0.0, POINTS as f32, 0.0, 0.0]);
        Self { height, content, opacities: BTreeSet::new(), regular: Used::default(), bold: Used::default() }
    }

    fn put(&mut self, shape: &Shape) {
        match shape {
            Shape::Rule { from, to, stroke } => {
                self.stroke(stroke);
                self.path(&[*from, *to]);
                self.content.stroke();
            }
            Shape::Lines { runs, stroke } => {
                self.stroke(stroke);
                for run in runs {
                    self.path(run);
                }
                self.content.stroke();
            }
            Shape::Areas { rings, paint } => {
                self.fill(*paint);
                for ring in rings {
                    self.path(ring);
                    self.content.close_path();
                }
                self.content.fill_nonzero();
            }
            Shape::Dots { places, size, colour } => {
                let paint = Paint { colour: *colour, opacity: 1.0 };
                self.stroke(&Stroke { paint, width: *size, dashes: &[], round: true });
                // Lines of no length with round ends.
                self.content.set_line_cap(LineCapStyle::RoundCap);
                for place in places {
                    self.path(&[*place, *place]);
                }
                self.content.stroke().set_line_cap(LineCapStyle::ButtCap);
            }
            Shape::Words(words) => self.words(words),
        }
    }

    fn path(&mut self, places: &[[f64; 2]]) {
        for (index, [x, y]) in places.iter().enumerate() {
            let (x, y) = (rounded(*x), rounded(self.height - y));
            if index == 0 {
                self.content.move_to(x, y);
            } else {
                self.content.line_to(x, y);
            }
        }
    }

    fn opacity(&mut self, opacity: f64) {
        let thousandths = (opacity.clamp(0.0, 1.0) * 1000.0).round() as u16;
        self.opacities.insert(thousandths);
        self.content.set_parameters(Name(state_name(thousandths).as_bytes()));
    }

    fn fill(&mut self, paint: Paint) {
        self.opacity(paint.opacity);
        let [red, green, blue] = components(paint.colour);
        self.content.set_fill_rgb(red, green, blue);
    }

    fn stroke(&mut self, stroke: &Stroke) {
        self.opacity(stroke.paint.opacity);
        let [red, green, blue] = components(stroke.paint.colour);
        self.content.set_stroke_rgb(red, green, blue).set_line_width(rounded(stroke.width));
        let join = if stroke.round { LineJoinStyle::RoundJoin } else { LineJoinStyle::MiterJoin };
        self.content.set_line_join(join);
        self.content.set_dash_pattern(stroke.dashes.iter().map(|length| rounded(*length)), 0.0);
    }

    fn words(&mut self, words: &Words) {
        let Some(typeface) = Typeface::of(words.bold) else { return };
        let letters = typeface.letters(&words.text);
        let width: f64 = letters.iter().map(Letter::width).sum::<f64>() * words.size;
        let (x, y) = (words.at[0] - width * words.anchor.part_before(), self.height - words.at[1]);
        self.fill(Paint { colour: Colour::Text, opacity: words.opacity });
        let (font, used) =
            if words.bold { (Name(b"bold"), &mut self.bold) } else { (Name(b"regular"), &mut self.regular) };
        self.content.begin_text().set_text_matrix([1.0, 0.0, 0.0, 1.0, rounded(x), rounded(y)]);
        let is_alike = |one: &Letter, next: &Letter| (one.scale, one.rise) == (next.scale, next.rise);
        for alike in letters.chunk_by(is_alike) {
            let Some(first) = alike.first() else { continue };
            let codes: Vec<u8> = alike.iter().flat_map(|letter| used.code(letter).to_be_bytes()).collect();
            self.content.set_font(font, rounded(words.size * first.scale));
            self.content.set_rise(rounded(words.size * first.rise));
            self.content.show(Str(&codes));
        }
        self.content.end_text();
    }

    /// The page and all that it needs.
    fn document(self, drawing: &Drawing) -> Vec<u8> {
        let mut next = Ref::new(1);
        let mut id = || next.bump();
        let (catalog, pages, page, content, information) = (id(), id(), id(), id(), id());
        let mut pdf = Pdf::with_settings_and_capacity(TERSE, 1 << 16);
        let mut root = pdf.catalog(catalog);
        root.pages(pages);
        root.viewer_preferences().display_doc_title(true);
        root.finish();
        pdf.pages(pages).kids([page]).count(1);
        let fonts: Vec<(Name<'_>, Ref)> =
            [(Name(b"regular"), false, &self.regular), (Name(b"bold"), true, &self.bold)]
                .into_iter()
                .filter(|(_, _, used)| !used.letters.is_empty())
                .filter_map(|(name, bold, used)| {
                    let font = id();
                    embed(&mut pdf, font, &mut id, Typeface::of(bold)?, used)?;
                    Some((name, font))
                })
                .collect();
        let mut sheet = pdf.page(page);
        let size = [drawing.width, drawing.height].map(|length| rounded(length * POINTS));
        sheet.parent(pages).media_box(Rect::new(0.0, 0.0, size[0], size[1])).contents(content);
        sheet.group().transparency().isolated(true).color_space().device_rgb();
        let mut resources = sheet.resources();
        let mut dictionary = resources.fonts();
        for (name, font) in &fonts {
            dictionary.pair(*name, *font);
        }
        dictionary.finish();
        let mut states = resources.ext_g_states();
        for thousandths in &self.opacities {
            let opacity = f32::from(*thousandths) / 1000.0;
            let name = state_name(*thousandths);
            let mut state = states.insert(Name(name.as_bytes())).dict();
            state.pair(Name(b"CA"), opacity).pair(Name(b"ca"), opacity);
        }
        states.finish();
        resources.finish();
        sheet.finish();
        stream(&mut pdf, content, &self.content.finish());
        let mut words = pdf.document_info(information);
        words.title(TextStr(&drawing.title)).subject(TextStr(&drawing.description));
        words.creator(TextStr("Rhythmite"));
        words.finish();
        pdf.finish()
    }
}

/// The name of the state that has the opacity.
fn state_name(thousandths: u16) -> String {
    format!("o{thousandths}")
}

fn components(colour: Colour) -> [f32; 3] {
    // A thousandth is less than a step of a byte.
    colour.on_white().map(|byte| (f32::from(byte) / 0.255).round() / 1000.0)
}

/// Data as they stand in the document, and how they are read.
fn packed(data: &[u8]) -> (Cow<'_, [u8]>, Option<Filter>) {
    if data.len() < SHORT {
        (Cow::Borrowed(data), None)
    } else {
        (Cow::Owned(compress_to_vec_zlib(data, LEVEL)), Some(Filter::FlateDecode))
    }
}

fn stream(chunk: &mut Chunk, id: Ref, data: &[u8]) {
    let (packed, filter) = packed(data);
    let mut stream = chunk.stream(id, &packed);
    filter.into_iter().for_each(|filter| {
        stream.filter(filter);
    });
}

/// Put what is used of a typeface into the document. Codes are letters and not glyphs, so that letters that are drawn
/// alike, such as boxes, are still copied as what they are.
fn embed(
    chunk: &mut Chunk,
    font: Ref,
    id: &mut impl FnMut() -> Ref,
    typeface: &Typeface,
    used: &Used,
) -> Option<()> {
    let part = Part::of(typeface, &used.letters)?;
    let (mut map, mut meanings) = (vec![0, 0], UnicodeCmap::new(Name(b"letters"), ADOBE_IDENTITY));
    for (code, letter) in (1..u16::MAX).zip(&used.letters) {
        map.extend(part.glyphs.get(letter.glyph).unwrap_or(0).to_be_bytes());
        meanings.pair(code, letter.character);
    }
    let name = format!("{}+{}", tag(&used.letters), typeface.name);
    let [descendant, descriptor, letters, places, data] = [id(), id(), id(), id(), id()];
    chunk
        .type0_font(font)
        .base_font(Name(name.as_bytes()))
        .encoding_predefined(Name(b"Identity-H"))
        .descendant_font(descendant)
        .to_unicode(letters);
    let mut cid = chunk.cid_font(descendant);
    cid.subtype(CidFontType::Type2).base_font(Name(name.as_bytes())).system_info(ADOBE_IDENTITY);
    cid.font_descriptor(descriptor).default_width(750.0).cid_to_gid_map_stream(places);
    cid.widths().consecutive(1, used.letters.iter().map(|letter| rounded(letter.advance * 1000.0)));
    cid.finish();
    let extent = typeface.extent();
    let [left, bottom, right, top] = extent.around;
    chunk
        .font_descriptor(descriptor)
        .name(Name(name.as_bytes()))
        .flags(FontFlags::SYMBOLIC)
        .bbox(Rect::new(left, bottom, right, top))
        .italic_angle(0.0)
        .ascent(extent.ascent)
        .descent(extent.descent)
        .cap_height(extent.capitals)
        .stem_v(if typeface.name.ends_with("Bold") { 140.0 } else { 88.0 })
        .font_file2(data);
    let meanings = meanings.finish();
    let (packed, filter) = packed(meanings.as_slice());
    let mut map_of_letters = chunk.cmap(letters, &packed);
    filter.into_iter().for_each(|filter| {
        map_of_letters.filter(filter);
    });
    map_of_letters.finish();
    stream(chunk, places, &map);
    chunk.stream(data, &part.packed).filter(Filter::FlateDecode).pair(Name(b"Length1"), part.length as i32);
    Some(())
}

/// The part of a typeface that a document needs, as a file.
struct Part {
    /// Which glyph of the typeface is which of the part.
    glyphs: GlyphRemapper,
    packed: Vec<u8>,
    /// Of the file before it was packed.
    length: usize,
}

/// Parts by the name of their typeface and their glyphs in order.
type Parts = BTreeMap<(&'static str, Vec<u16>), Arc<Part>>;

/// The letters of fingerprints: they are in every part, so that a figure that is refreshed needs the part that it had.
const FINGERPRINTS: &str = "0123456789abcdef";

/// How many parts are remembered.
const REMEMBERED: usize = 64;

impl Part {
    /// Of those that were made before, or a new one: to make one takes a third of the time of a document.
    fn of(typeface: &Typeface, letters: &[Letter]) -> Option<Arc<Self>> {
        static MADE: Mutex<Parts> = Mutex::new(Parts::new());
        let always = typeface.letters(FINGERPRINTS);
        let mut glyphs: Vec<u16> = letters.iter().chain(&always).map(|letter| letter.glyph).collect();
        glyphs.sort_unstable();
        glyphs.dedup();
        let key = (typeface.name, glyphs);
        let made = || MADE.lock().unwrap_or_else(PoisonError::into_inner);
        if let Some(part) = made().get(&key) {
            return Some(part.clone());
        }
        let glyphs = GlyphRemapper::new_from_glyphs_sorted(&key.1);
        let file = subset(typeface.data, 0, &glyphs).ok()?;
        let packed = compress_to_vec_zlib(&file, LEVEL);
        let part = Arc::new(Self { glyphs, packed, length: file.len() });
        let mut made = made();
        if made.len() >= REMEMBERED {
            made.clear();
        }
        made.insert(key, part.clone());
        Some(part)
    }
}

/// Six capital letters that tell this part of a typeface from other parts, as the format asks for.
fn tag(letters: &[Letter]) -> String {
    let mut number = letters.iter().fold(0xcbf2_9ce4_8422_2325_u64, |number, letter| {
        // FNV-1a, over letters.
        (number ^ u64::from(u32::from(letter.character))).wrapping_mul(0x0100_0000_01b3)
    });
    let mut tag = String::new();
    for _ in 0..6 {
        tag.push(char::from(b'A' + (number % 26) as u8));
        number /= 26;
    }
    tag
}
