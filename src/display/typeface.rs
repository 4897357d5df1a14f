//! The typeface of figures in files that must bring their own: Liberation Sans, whose letters are as wide as those that
//! pages show figures in. Its licence stands beside it.

use std::sync::OnceLock;

use ttf_parser::{Face, GlyphId, OutlineBuilder};
use unicode_normalization::UnicodeNormalization;
use unicode_normalization::char::decompose_compatible;

/// One weight of the typeface.
pub(super) struct Typeface {
    /// The file.
    pub(super) data: &'static [u8],
    /// What documents call it.
    pub(super) name: &'static str,
    face: Face<'static>,
}

/// A letter as it is drawn.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Letter {
    /// What it stands for.
    pub(super) character: char,
    /// The drawing of it in the typeface; 0 is a box.
    pub(super) glyph: u16,
    /// From it to the next, in parts of the size that the glyph is drawn at.
    pub(super) advance: f64,
    /// The size that the glyph is drawn at, in parts of the size of type.
    pub(super) scale: f64,
    /// How far above the line of writing, in parts of the size of type.
    pub(super) rise: f64,
}

impl Letter {
    /// How wide it is, in parts of the size of type.
    pub(super) fn width(&self) -> f64 {
        self.advance * self.scale
    }
}

/// The glyph of what a typeface has not.
const BOX: u16 = 0;

/// How large letters above and below the line are that are made of those on the line, and how far from it: about as the
/// typeface's own.
const SMALL: f64 = 0.62;
const RAISED: f64 = 0.27;
const LOWERED: f64 = -0.085;

impl Typeface {
    /// The bold or the regular weight; it comes with the program, so that only a broken program has none.
    pub(super) fn of(bold: bool) -> Option<&'static Self> {
        static REGULAR: OnceLock<Option<Typeface>> = OnceLock::new();
        static BOLD: OnceLock<Option<Typeface>> = OnceLock::new();
        let parsed =
            |data: &'static [u8], name| Face::parse(data, 0).ok().map(|face| Self { data, name, face });
        if bold {
            BOLD.get_or_init(|| {
                parsed(include_bytes!("typeface/LiberationSans-Bold.ttf"), "LiberationSans-Bold")
            })
        } else {
            REGULAR.get_or_init(|| {
                parsed(include_bytes!("typeface/LiberationSans-Regular.ttf"), "LiberationSans")
            })
        }
        .as_ref()
    }

    /// Words letter by letter: what the typeface has not is made of what it has, or is a box.
    pub(super) fn letters(&self, words: &str) -> Vec<Letter> {
        words.nfc().filter(|letter| !is_silent(*letter)).map(|letter| self.letter(letter)).collect()
    }

    fn letter(&self, character: char) -> Letter {
        let drawn = |glyph: u16, scale: f64, rise: f64| {
            let advance = f64::from(self.face.glyph_hor_advance(GlyphId(glyph)).unwrap_or(0)) / self.em();
            Letter { character, glyph, advance, scale, rise }
        };
        if character.is_control() {
            let blank = matches!(character, '\t' | '\n' | '\r');
            return drawn(if blank { self.glyph(' ').unwrap_or(BOX) } else { BOX }, 1.0, 0.0);
        }
        let raised = matches!(character, '¹' | '²' | '³' | '\u{2070}'..='\u{207f}');
        // The typeface has some digits above the line, of two sizes, and no minus: all are made of those on the line.
        if let Some(glyph) = self.glyph(character).filter(|_| !raised) {
            return drawn(glyph, 1.0, 0.0);
        }
        match (stand_in(character).and_then(|other| self.glyph(other)), character) {
            (None, _) => drawn(BOX, 1.0, 0.0),
            (Some(glyph), _) if raised => drawn(glyph, SMALL, RAISED),
            (Some(glyph), '\u{1d2c}'..='\u{1d61}') => drawn(glyph, SMALL, RAISED),
            (Some(glyph), '\u{1d62}'..='\u{1d6a}' | '\u{2080}'..='\u{209c}' | '\u{2c7c}') => {
                drawn(glyph, SMALL, LOWERED)
            }
            (Some(glyph), _) => drawn(glyph, 1.0, 0.0),
        }
    }

    fn glyph(&self, character: char) -> Option<u16> {
        self.face.glyph_index(character).map(|glyph| glyph.0).filter(|glyph| *glyph != BOX)
    }

    /// Tell the outline of a glyph, in units of which there are `em` to the size it is drawn at, upward.
    pub(super) fn outline(&self, glyph: u16, to: &mut impl OutlineBuilder) {
        // What is blank has none.
        let _ = self.face.outline_glyph(GlyphId(glyph), to);
    }

    /// The units of the size that a glyph is drawn at.
    pub(super) fn em(&self) -> f64 {
        f64::from(self.face.units_per_em())
    }

    /// What a document must know of the typeface, in thousandths of the size of type.
    pub(super) fn extent(&self) -> Extent {
        let thousandths = |units: i16| (f64::from(units) * 1000.0 / self.em()).round() as f32;
        let around = self.face.global_bounding_box();
        Extent {
            around: [around.x_min, around.y_min, around.x_max, around.y_max].map(thousandths),
            ascent: thousandths(self.face.ascender()),
            descent: thousandths(self.face.descender()),
            capitals: self.face.capital_height().map_or(700.0, thousandths),
        }
    }
}

/// How far the glyphs of a typeface reach, in thousandths of the size of type.
pub(super) struct Extent {
    /// Left, bottom, right and top of all of them.
    pub(super) around: [f32; 4],
    pub(super) ascent: f32,
    pub(super) descent: f32,
    /// The height of capital letters.
    pub(super) capitals: f32,
}

/// What says something about other letters and is none itself: directions, joins, variants.
fn is_silent(character: char) -> bool {
    matches!(character, '\u{ad}' | '\u{200b}'..='\u{200f}' | '\u{202a}'..='\u{202e}' | '\u{2060}'..='\u{206f}'
        | '\u{fe00}'..='\u{fe0f}' | '\u{feff}' | '\u{e0000}'..='\u{e0fff}')
}

/// The plain letter that a special one is a form of: `−` of `⁻`, `x` of the mathematical italic.
fn stand_in(character: char) -> Option<char> {
    if character == '⋅' {
        return Some('·');
    }
    let (mut count, mut last) = (0, None);
    decompose_compatible(character, |part| {
        count += 1;
        last = Some(part);
    });
    last.filter(|part| count == 1 && *part != character)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn letters(words: &str) -> Vec<Letter> {
        Typeface::of(false).unwrap().letters(words)
    }

    #[test]
    fn both_weights_are_there() {
        for bold in [false, true] {
            let typeface = Typeface::of(bold).unwrap();
            let width: f64 = typeface.letters("forcing").iter().map(Letter::width).sum();
            assert!((2.8..3.6).contains(&width), "{width}");
        }
    }

    #[test]
    fn everything_that_figures_say_has_a_glyph() {
        let said = "W m⁻² 10⁻⁹ 10¹⁰ 10⁶ 3 °C ±0.5 µmol ‰ 5–95 % a |> b() [−1.2, 3] ε λ Δ σ φ·x … “ē” \u{202f}\u{2009}\u{a0}⁺⁽⁾₋₀ₙ⋅";
        for bold in [false, true] {
            for letter in Typeface::of(bold).unwrap().letters(said) {
                assert_ne!(letter.glyph, BOX, "{letter:?}");
            }
        }
    }

    #[test]
    fn a_minus_above_the_line_is_a_small_minus_and_all_digits_there_are_alike() {
        let (raised, plain) = (letters("⁻⁰¹²⁴⁹"), letters("−01249"));
        for (raised, plain) in raised.iter().zip(&plain) {
            assert_eq!(raised.glyph, plain.glyph);
            assert!(raised.character != plain.character && raised.width() < plain.width());
            assert!(raised.rise > 0.2);
        }
        assert!(letters("ₙ")[0].rise < 0.0 && letters("₂")[0].rise.abs() < 1e-9, "the typeface has its own");
    }

    #[test]
    fn what_the_typeface_has_not_is_a_box_and_what_is_silent_is_nothing() {
        let boxes: Vec<u16> = letters("名🌋\u{1}\u{10ffff}").iter().map(|letter| letter.glyph).collect();
        assert_eq!(boxes, [BOX; 4]);
        assert!(letters("名").iter().all(|letter| letter.width() > 0.3));
        assert_eq!(letters("\u{202e}\u{feff}a\u{200d}").len(), 1);
        assert_eq!(letters("e\u{301}").len(), 1, "composed");
        assert!(letters("\t")[0].glyph != BOX);
    }
}
