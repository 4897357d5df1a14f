//! Figures as PDF and PNG: read back by what their formats say, whatever the data.

use std::collections::BTreeMap;
use std::sync::Arc;

use miniz_oxide::inflate::decompress_to_vec_zlib;
use proptest::prelude::*;

use rhythmite::display::{Caption, chart, figure_size, pdf, png, svg};
use rhythmite::value::{Axis, Era, Figure, Measure, Shown, ShownSeries, Spread, Unit};

fn series(nominal: Vec<f64>) -> ShownSeries {
    let steps = |offset: usize| (0..nominal.len()).map(|index| 1850.0 + (index + offset) as f64).collect();
    let moved = |by: f64| nominal.iter().map(|value| value + by).collect();
    let spread = Spread { low: moved(-0.3), median: moved(0.0), high: moved(0.3), members: 500 };
    ShownSeries {
        axis: Arc::new(Axis::steps(steps(0), steps(1), Era::Ce)),
        measure: Measure::of(Unit::parse("W/m2").unwrap()),
        nominal,
        spread: Some(Arc::new(spread)),
    }
}

fn captioned(shown: &Shown, expression: &str) -> Figure {
    chart(shown, &Caption { expression, fingerprint: "0123456789ab", refreshed_by: &[] }).unwrap()
}

fn waves(count: usize) -> Vec<f64> {
    (0..count).map(|index| (index as f64 / 7.0).sin()).collect()
}

fn drawn(nominal: Vec<f64>) -> Figure {
    captioned(&Shown::Series(series(nominal)), "forcing |> lag(3 yr)")
}

fn bundle(labels: &[&str]) -> Shown {
    let part = |index: usize| series(waves(171).iter().map(|value| value + index as f64).collect());
    Shown::Bundle {
        components: labels
            .iter()
            .enumerate()
            .map(|(index, label)| (Arc::from(*label), part(index)))
            .collect(),
        total: part(9),
    }
}

/// Bytes as text in which every byte keeps its place: those of compressed streams are no letters.
fn text(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| if byte.is_ascii() { char::from(*byte) } else { '?' }).collect()
}

/// A PDF document taken apart: the text of each object, and its stream where it has one.
struct Document {
    objects: BTreeMap<u32, (String, Vec<u8>)>,
    trailer: String,
}

impl Document {
    /// Read it by its table of places, as programs do.
    fn read(file: &[u8]) -> Self {
        assert!(file.starts_with(b"%PDF-1.7\n") && file.ends_with(b"%%EOF"));
        let all = text(file);
        let table: usize = all.rsplit("startxref\n").next().unwrap().lines().next().unwrap().parse().unwrap();
        let mut lines = all[table..].lines();
        assert_eq!(lines.next(), Some("xref"));
        let count: u32 = lines.next().unwrap().strip_prefix("0 ").unwrap().parse().unwrap();
        assert_eq!(lines.next(), Some("0000000000 65535 f"));
        let mut objects = BTreeMap::new();
        for number in 1..count {
            let place: usize = lines.next().unwrap().strip_suffix(" 00000 n").unwrap().parse().unwrap();
            let object = all[place..].strip_prefix(&format!("{number} 0 obj\n")).unwrap();
            let (head, rest) = object.split_once("endobj").unwrap();
            let object = match object.find("stream\n").filter(|at| *at < head.len()) {
                None => (head.to_owned(), Vec::new()),
                Some(at) => {
                    let dictionary = &object[..at];
                    let length: usize = after(dictionary, "/Length ").parse().unwrap();
                    let start = file.len() - rest.len() - "endobj".len() - head.len() + at + "stream\n".len();
                    let data = &file[start..start + length];
                    assert!(text(&file[start + length..]).starts_with("\nendstream"));
                    let packed = dictionary.contains("/Filter/FlateDecode");
                    let data = if packed { decompress_to_vec_zlib(data).unwrap() } else { data.to_vec() };
                    (dictionary.to_owned(), data)
                }
            };
            objects.insert(number, object);
        }
        let trailer = all.rsplit("trailer").next().unwrap().to_owned();
        Self { objects, trailer }
    }

    fn of(figure: &Figure) -> Self {
        Self::read(&pdf(figure))
    }

    fn object(&self, from: &str, key: &str) -> &(String, Vec<u8>) {
        &self.objects[&after(from, key).parse().unwrap()]
    }

    /// The one page.
    fn page(&self) -> &str {
        let pages: Vec<&str> =
            self.objects.values().map(|(head, _)| head.as_str()).filter(|head| is_page(head)).collect();
        assert_eq!(pages.len(), 1);
        pages[0]
    }

    /// The letters that the codes of each font mean, by its name in the page.
    fn meanings(&self) -> BTreeMap<String, BTreeMap<u16, char>> {
        let mut meanings = BTreeMap::new();
        for name in ["regular", "bold"] {
            if !self.page().contains(&format!("/{name} ")) {
                continue;
            }
            let (font, _) = self.object(self.page(), &format!("/{name} "));
            let (_, map) = self.object(font, "/ToUnicode ");
            let map = text(map);
            let lines = map.lines().filter_map(|line| {
                let (code, letter) = line.strip_prefix('<')?.strip_suffix('>')?.split_once("> <")?;
                let units: Vec<u16> = letter
                    .as_bytes()
                    .chunks(4)
                    .map(|unit| u16::from_str_radix(&text(unit), 16).unwrap())
                    .collect();
                let letter = String::from_utf16(&units).ok()?.chars().next()?;
                Some((u16::from_str_radix(code, 16).ok()?, letter))
            });
            // The range of all codes is written like a letter.
            meanings.insert(name.to_owned(), lines.filter(|(code, _)| *code != 0).collect());
        }
        meanings
    }

    /// The words of the page, as they would be copied, each line of them apart.
    fn words(&self) -> Vec<String> {
        let (_, content) = self.object(self.page(), "/Contents ");
        let meanings = self.meanings();
        let (mut words, mut font, mut rest) = (Vec::new(), String::new(), content.as_slice());
        while let Some(first) = rest.first() {
            if rest.starts_with(b"BT") {
                words.push(String::new());
            }
            if *first == b'/' {
                let name: String =
                    text(&rest[1..]).chars().take_while(|letter| letter.is_alphanumeric()).collect();
                if meanings.contains_key(&name) {
                    font = name;
                }
            }
            if matches!(first, b'(' | b'<') {
                let (bytes, used) = string(rest);
                for code in bytes.chunks(2) {
                    let code = u16::from_be_bytes([code[0], code[1]]);
                    words.last_mut().unwrap().push(meanings[&font][&code]);
                }
                rest = &rest[used..];
            } else {
                rest = &rest[1..];
            }
        }
        words
    }

    fn title(&self) -> String {
        let (information, _) = self.object(&self.trailer, "/Info ");
        let at = information.find("/Title").unwrap() + "/Title".len();
        let (bytes, _) = string(information[at..].trim_start().as_bytes());
        match bytes.strip_prefix(&[0xfe, 0xff]) {
            None => String::from_utf8(bytes).unwrap(),
            Some(bytes) => {
                let units: Vec<u16> =
                    bytes.chunks(2).map(|pair| u16::from_be_bytes([pair[0], pair[1]])).collect();
                String::from_utf16(&units).unwrap()
            }
        }
    }
}

fn is_page(head: &str) -> bool {
    head.contains("/Type/Page/") || head.contains("/Type/Page\n")
}

/// The word after a key.
fn after<'a>(text: &'a str, key: &str) -> &'a str {
    let rest = text.split_once(key).unwrap_or_else(|| panic!("{key} in {text}")).1;
    rest.split(|letter: char| !letter.is_ascii_digit()).next().unwrap()
}

/// A string of a PDF document, and how many bytes it takes there.
fn string(source: &[u8]) -> (Vec<u8>, usize) {
    let mut bytes = Vec::new();
    if source[0] == b'<' {
        let end = source.iter().position(|byte| *byte == b'>').unwrap();
        for pair in source[1..end].chunks(2) {
            bytes.push(u8::from_str_radix(&text(pair), 16).unwrap());
        }
        return (bytes, end + 1);
    }
    let (mut at, mut depth) = (1, 1);
    loop {
        match source[at] {
            b'\\' => {
                at += 1;
                let octal =
                    source[at..].iter().take(3).take_while(|byte| (b'0'..=b'7').contains(byte)).count();
                bytes.push(match source[at] {
                    b'n' => b'\n',
                    b'r' => b'\r',
                    b't' => b'\t',
                    b'b' => 8,
                    b'f' => 12,
                    _ if octal > 0 => {
                        let value = u8::from_str_radix(&text(&source[at..at + octal]), 8).unwrap();
                        at += octal - 1;
                        value
                    }
                    other => other,
                });
            }
            b')' if depth == 1 => return (bytes, at + 1),
            other => {
                depth += i32::from(other == b'(') - i32::from(other == b')');
                bytes.push(other);
            }
        }
        at += 1;
    }
}

/// The words of the figure as its SVG has them.
fn words_of_svg(figure: &Figure) -> Vec<String> {
    let text = svg(figure);
    let document = roxmltree::Document::parse(&text).unwrap();
    let texts = document.descendants().filter(|node| node.has_tag_name("text"));
    texts.map(|node| node.text().unwrap_or_default().to_owned()).collect()
}

/// Width, height and pixels, red, green and blue.
fn decoded(file: &[u8]) -> (u32, u32, Vec<u8>) {
    let mut reader = png_crate::Decoder::new(std::io::Cursor::new(file)).read_info().unwrap();
    let mut pixels = vec![0; reader.output_buffer_size().unwrap()];
    let frame = reader.next_frame(&mut pixels).unwrap();
    assert_eq!(frame.color_type, png_crate::ColorType::Rgb);
    (frame.width, frame.height, pixels)
}

#[test]
fn a_pdf_is_one_page_of_the_size_of_the_figure_with_its_typefaces_inside() {
    let figure = drawn(waves(171));
    let document = Document::of(&figure);
    let [width, height] = figure_size(&figure).map(|length| length * 0.75);
    assert!(document.page().contains(&format!("/MediaBox[0 0 {width} {height}]")), "{}", document.page());
    for name in ["/regular ", "/bold "] {
        let (font, _) = document.object(document.page(), name);
        let (descendant, _) = document.object(font, "/DescendantFonts[");
        let (descriptor, _) = document.object(descendant, "/FontDescriptor ");
        let (file, bytes) = document.object(descriptor, "/FontFile2 ");
        assert_eq!(after(file, "/Length1 "), bytes.len().to_string());
        assert!(bytes.len() < 40_000, "{} bytes of a typeface of 400,000", bytes.len());
        assert!(font.contains("+LiberationSans"), "{font}");
        let letters = document.meanings()[name.trim_matches(['/', ' '])].len();
        let (_, map) = document.object(descendant, "/CIDToGIDMap ");
        assert_eq!(map.len(), 2 * (letters + 1));
        assert!(map.chunks(2).skip(1).all(|glyph| glyph != [0, 0]), "every letter has a glyph");
    }
    assert_eq!(document.title(), "forcing |> lag(3 yr)");
    let names = ["/CreationDate", "/ModDate", "/ID"];
    assert!(names.iter().all(|name| !document.trailer.contains(name)));
}

#[test]
fn the_words_of_a_pdf_are_copied_as_they_are_in_the_svg() {
    for figure in [drawn(waves(171)), captioned(&bundle(&["sun", "haze", "αβ ±0.5 10⁻²"]), "compose(α, ē)")]
    {
        let words = Document::of(&figure).words();
        assert_eq!(words, words_of_svg(&figure));
        assert!(words.iter().any(|line| line.contains("W m⁻²")), "{words:?}");
    }
}

#[test]
fn the_same_figure_gives_the_same_bytes() {
    let figure = captioned(&bundle(&["sun", "haze"]), "all");
    assert!(pdf(&figure) == pdf(&figure) && png(&figure, 2.0) == png(&figure, 2.0));
    assert!(pdf(&figure) != pdf(&drawn(waves(171))));
}

#[test]
fn letters_that_the_typeface_has_not_are_boxes_and_are_copied_as_what_they_are() {
    let label = "名前 🌋 (\\)";
    let figure = captioned(&bundle(&[label, "e\u{301}t\u{202e}e\u{1}"]), "名(前)");
    let document = Document::of(&figure);
    let words = document.words();
    assert!(words.contains(&label.to_owned()), "{words:?}");
    assert!(words.contains(&"éte\u{1}".to_owned()), "{words:?}");
    assert_eq!(document.title(), "名(前)");
    let boxes = captioned(&bundle(&["名", "前"]), "x");
    let blank = captioned(&bundle(&["\u{200b}", "\u{200b}"]), "x");
    assert!(png(&boxes, 1.0) != png(&blank, 1.0), "a box is seen");
}

#[test]
fn a_png_has_the_size_that_was_asked_for_and_shows_the_figure() {
    let figure = captioned(&bundle(&["sun", "haze"]), "all");
    let [width, height] = figure_size(&figure);
    for scale in [0.5, 1.0, 2.0, 3.0] {
        let (across, down, pixels) = decoded(&png(&figure, scale));
        assert_eq!((f64::from(across), f64::from(down)), ((width * scale).ceil(), (height * scale).ceil()));
        let count = |test: &dyn Fn(&[u8]) -> bool| pixels.chunks(3).filter(|pixel| test(pixel)).count();
        let all = pixels.len() / 3;
        assert!(count(&|pixel| pixel == [255; 3]) > all / 2, "white ground");
        assert!(count(&|pixel| pixel.iter().all(|part| *part < 0x70)) > all / 1000, "words");
        assert!(count(&|pixel| pixel[2] > 0xe0 && pixel[0] < 0x80) > all / 2000, "the blue line");
        assert_eq!(&pixels[..3], [255; 3]);
    }
    assert!(decoded(&png(&figure, 2.0)).2 != decoded(&png(&drawn(waves(171)), 2.0)).2);
}

#[test]
fn a_scale_beyond_sense_is_taken_as_a_sensible_one() {
    let figure = drawn(waves(9));
    for scale in [f64::NAN, f64::INFINITY, -1.0, 0.0, 1e-300] {
        let (width, height, _) = decoded(&png(&figure, scale));
        assert!((72..=720).contains(&width) && height > 20, "{scale}: {width} by {height}");
    }
    assert_eq!(decoded(&png(&figure, 1e300)).0, 7200);
}

#[test]
fn figures_of_nothing_and_of_extreme_numbers_are_whole_documents() {
    let extremes: [Vec<f64>; 9] = [
        vec![0.0],
        vec![f64::NAN; 300],
        vec![1e-300, 3e-300],
        vec![1e300, -1e300],
        vec![f64::MAX, -f64::MAX],
        vec![5e-324, 0.0],
        vec![1e15, 1e15 + 0.25],
        vec![f64::NAN, 1.0, f64::NAN, 2.0, f64::NAN],
        waves(100_000),
    ];
    for nominal in extremes {
        let figure = drawn(nominal);
        assert_eq!(Document::of(&figure).words(), words_of_svg(&figure));
        assert!(decoded(&png(&figure, 1.0)).2.iter().any(|part| *part < 0x70));
    }
    let mut nothing = drawn(waves(3));
    nothing.panels.clear();
    (nothing.title, nothing.subtitle, nothing.footer) = Default::default();
    let document = Document::of(&nothing);
    assert!(document.words().iter().all(String::is_empty));
    assert!(decoded(&png(&nothing, 1.0)).2.iter().all(|part| *part == 255));
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(60))]
    #[test]
    fn whatever_is_written_is_a_document_that_says_it(label in "\\PC{0,40}", title in any::<String>()) {
        let figure = captioned(&bundle(&[&label, "sun"]), &title);
        let document = Document::of(&figure);
        prop_assert_eq!(document.title(), figure.title.clone());
        prop_assert_eq!(document.words().len(), words_of_svg(&figure).len());
        prop_assert!(decoded(&png(&figure, 0.5)).0 == 360);
    }
}
