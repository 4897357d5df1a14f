//! The looks of inks.

use super::Colour;
use crate::value::Ink;

/// Colours of the numbered inks. Found by a search for the six colours that lie farthest apart in the OKLab space for
/// normal sight and for the three kinds of colour deficiency, between the lightness that a white and the one that a
/// dark ground allow; a test holds them to it.
const COLOURS: [u32; 6] = [0x28_91_ff, 0xe6_75_2e, 0x00_7c_6f, 0x84_3e_b9, 0xbd_80_ab, 0xc1_26_07];

/// Line styles of the numbered inks, which tell the same apart without colour: lengths of dash and gap.
const DASHES: [&[f64]; 7] = [
    &[],
    &[8.0, 3.0],
    &[3.0, 2.2],
    &[9.0, 3.0, 2.0, 3.0],
    &[15.0, 4.0],
    &[5.0, 2.0, 2.0, 2.0, 2.0, 2.0],
    &[1.0, 4.0],
];

/// What is neither dark nor light.
pub(super) const GREY: Colour = Colour::Fixed(0x80_80_80);

pub(super) fn colour(ink: Ink) -> Colour {
    match ink {
        Ink::Foremost => Colour::Text,
        Ink::Numbered(index) => {
            COLOURS.get(index % COLOURS.len()).map_or(Colour::Text, |colour| Colour::Fixed(*colour))
        }
        Ink::Faint => GREY,
    }
}

pub(super) fn dashes(ink: Ink) -> &'static [f64] {
    match ink {
        Ink::Numbered(index) => DASHES.get(index % DASHES.len()).copied().unwrap_or(&[]),
        Ink::Foremost | Ink::Faint => &[],
    }
}

pub(super) fn thickness(ink: Ink) -> f64 {
    match ink {
        Ink::Foremost => 2.2,
        Ink::Numbered(_) => 1.8,
        Ink::Faint => 0.8,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn linear(colour: u32) -> [f64; 3] {
        Colour::Fixed(colour).on_white().map(|byte| {
            let part = f64::from(byte) / 255.0;
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
                    let [one, other] = [one, other].map(|colour| oklab(mix(sight, linear(*colour))));
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
            assert!(1.05 / luminance(colour) >= 3.0, "{colour:06x} on white");
            assert!(luminance(colour) / luminance(0x11_11_11) >= 3.0, "{colour:06x} on dark");
        }
    }

    #[test]
    fn every_numbered_ink_up_to_twelve_differs_in_colour_or_line_style() {
        for one in 0..12 {
            for other in 0..one {
                let look = |index| (colour(Ink::Numbered(index)), dashes(Ink::Numbered(index)));
                assert!(look(one) != look(other), "{one} and {other}");
            }
        }
    }
}
