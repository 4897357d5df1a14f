//! A figure laid out on a sheet: plain data, which `svg`, `pdf` and `png` put into their formats. Places are in units of
//! the sheet, from its left upper corner: pixels of a page, 96 to the inch.

mod ink;
mod layout;

pub(super) use layout::drawing;

use crate::value::Figure;

/// The colour of words and axes on paper.
pub(super) const TEXT_ON_WHITE: u32 = 0x20_24_2a;

/// The size of type that is not said otherwise.
pub(super) const TEXT_SIZE: f64 = 12.0;

/// The width and height that a figure has in a page, in its pixels, 96 to the inch.
pub fn figure_size(figure: &Figure) -> [f64; 2] {
    let drawing = drawing(figure);
    [drawing.width, drawing.height]
}

/// What is on the sheet, the hindmost first.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Drawing {
    pub(super) width: f64,
    pub(super) height: f64,
    /// What it shows.
    pub(super) title: String,
    /// The same in words, for those who cannot see it.
    pub(super) description: String,
    pub(super) shapes: Vec<Shape>,
}

/// One thing on the sheet.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Shape {
    /// A line along the sheet or down it, of an axis or a tick: what has no slope may be put on whole pixels.
    Rule { from: [f64; 2], to: [f64; 2], stroke: Stroke },
    /// Lines through places, in one stroke: where they cross they are no darker.
    Lines { runs: Vec<Vec<[f64; 2]>>, stroke: Stroke },
    /// Areas within places.
    Areas { rings: Vec<Vec<[f64; 2]>>, paint: Paint },
    /// Round dots.
    Dots { places: Vec<[f64; 2]>, size: f64, colour: Colour },
    /// Words on one line.
    Words(Words),
}

/// In what something is drawn.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Paint {
    pub(super) colour: Colour,
    /// 1 hides what is behind it.
    pub(super) opacity: f64,
}

/// How a line is drawn.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Stroke {
    pub(super) paint: Paint,
    pub(super) width: f64,
    /// Lengths of dash and gap in turn; none for a line without gaps.
    pub(super) dashes: &'static [f64],
    /// Whether corners are round, as of lines that measure something.
    pub(super) round: bool,
}

/// A colour.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Colour {
    /// That of the text around the figure.
    Text,
    /// Red, green and blue, a byte each.
    Fixed(u32),
}

/// Words on one line.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Words {
    pub(super) text: String,
    /// Where the anchor stands on the line of writing.
    pub(super) at: [f64; 2],
    pub(super) anchor: Anchor,
    pub(super) size: f64,
    pub(super) bold: bool,
    pub(super) opacity: f64,
}

/// Which part of words stands at their place.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Anchor {
    Start,
    Middle,
    End,
}

impl Colour {
    /// Red, green and blue on paper.
    pub(super) fn on_white(self) -> [u8; 3] {
        let colour = match self {
            Self::Text => TEXT_ON_WHITE,
            Self::Fixed(colour) => colour,
        };
        let [_, red, green, blue] = colour.to_be_bytes();
        [red, green, blue]
    }
}

impl Anchor {
    /// How much of the words stands before their place.
    pub(super) fn part_before(self) -> f64 {
        match self {
            Self::Start => 0.0,
            Self::Middle => 0.5,
            Self::End => 1.0,
        }
    }
}
