//! Figures from outside: what is drawn, as data, and that the SVG is sound whatever the data.

use std::sync::Arc;

use proptest::prelude::*;
use roxmltree::{Document, Node};

use rhythmite::display::{Caption, chart, svg};
use rhythmite::value::{
    Axis, Band, Era, Figure, Forcing, ForcingKind, Ink, Line, Mark, Measure, Shown, ShownSeries, Spread, Unit,
};

fn measure(unit: &str) -> Measure {
    Measure::of(Unit::parse(unit).unwrap())
}

fn forcing() -> Measure {
    let reference = Some("278 ppm".into());
    Measure { forcing: Some(Forcing { kind: ForcingKind::Effective, reference }), ..measure("W/m2") }
}

fn yearly(first: i32, count: usize) -> Axis {
    let years = |offset: usize| (0..count).map(|index| f64::from(first) + (index + offset) as f64).collect();
    Axis::steps(years(0), years(1), Era::Ce)
}

fn series(axis: Axis, measure: Measure, nominal: Vec<f64>) -> ShownSeries {
    ShownSeries { axis: Arc::new(axis), measure, nominal, spread: None }
}

fn with_band(mut series: ShownSeries, half_width: f64) -> ShownSeries {
    let moved = |by: f64| series.nominal.iter().map(|value| value + by).collect();
    let spread =
        Spread { low: moved(-half_width), median: moved(0.0), high: moved(half_width), members: 500 };
    series.spread = Some(Arc::new(spread));
    series
}

fn figure(shown: &Shown) -> Figure {
    let caption = Caption { expression: "a |> b()", fingerprint: "0123456789ab", refreshed_by: &[] };
    chart(shown, &caption).unwrap()
}

fn drawn(nominal: Vec<f64>) -> Figure {
    figure(&Shown::Series(series(yearly(1850, nominal.len()), forcing(), nominal)))
}

fn lines(figure: &Figure) -> Vec<&Line> {
    figure.panels[0]
        .marks
        .iter()
        .filter_map(|mark| if let Mark::Line(line) = mark { Some(line) } else { None })
        .collect()
}

fn bands(figure: &Figure) -> Vec<&Band> {
    figure.panels[0]
        .marks
        .iter()
        .filter_map(|mark| if let Mark::Band(band) = mark { Some(band) } else { None })
        .collect()
}

/// Left, right, top and bottom of a text, by the mean width of letters of a common sans-serif.
fn extent(text: Node<'_, '_>) -> [f64; 4] {
    let number = |name: &str| text.attribute(name).map(|value| value.parse::<f64>().unwrap());
    let (x, y, size) = (number("x").unwrap(), number("y").unwrap(), number("font-size").unwrap_or(12.0));
    let width = text.text().unwrap_or("").chars().count() as f64 * 0.52 * size;
    let left = match text.attribute("text-anchor") {
        Some("middle") => x - width / 2.0,
        Some("end") => x - width,
        _ => x,
    };
    [left, left + width, y - 0.75 * size, y + 0.2 * size]
}

/// What is wrong with a drawing: it is no XML, words overlap, or something lies outside the view box.
fn complaints(text: &str) -> Vec<String> {
    let document = match Document::parse(text) {
        Ok(document) => document,
        Err(error) => return vec![error.to_string()],
    };
    let root = document.root_element();
    let view: Vec<f64> =
        root.attribute("viewBox").unwrap().split(' ').map(|number| number.parse().unwrap()).collect();
    let mut complaints = Vec::new();
    let texts: Vec<Node<'_, '_>> = root.descendants().filter(|node| node.has_tag_name("text")).collect();
    for (index, one) in texts.iter().enumerate() {
        let [left, right, top, bottom] = extent(*one);
        if left < 0.0 || right > view[2] || top < 0.0 || bottom > view[3] {
            complaints.push(format!("{:?} is outside", one.text()));
        }
        for other in &texts[..index] {
            let [other_left, other_right, other_top, other_bottom] = extent(*other);
            if left < other_right && other_left < right && top < other_bottom && other_top < bottom {
                complaints.push(format!("{:?} covers {:?}", one.text(), other.text()));
            }
        }
    }
    for path in root.descendants().filter_map(|node| node.attribute("d")) {
        let numbers = path.split(|letter: char| letter.is_ascii_alphabetic() || letter == ' ');
        for number in numbers.filter(|number| !number.is_empty()) {
            match number.parse::<f64>() {
                Ok(number) if (0.0..=view[2].max(view[3])).contains(&number) => {}
                _ => complaints.push(format!("{number} in a path")),
            }
        }
    }
    complaints
}

#[track_caller]
fn assert_sound(figure: &Figure) -> String {
    let text = svg(figure);
    let complaints = complaints(&text);
    assert!(complaints.is_empty(), "{complaints:#?}\n{text}");
    text
}

#[test]
fn a_series_is_a_line_with_a_band_and_an_axis_in_words() {
    let axis = yearly(1850, 171);
    let nominal = (0..171).map(|year| f64::from(year) * 0.01).collect();
    let figure = figure(&Shown::Series(with_band(series(axis, forcing(), nominal), 0.3)));
    assert_eq!(figure.title, "a |> b()");
    assert_eq!(
        figure.subtitle,
        "series, 171 steps, 1850 CE to 2020 CE, change from 278 ppm; band 5–95 %, 500 members"
    );
    assert_eq!(figure.footer, "fingerprint 0123456789ab");
    let panel = &figure.panels[0];
    assert_eq!(panel.vertical.title, "effective forcing (W m⁻²)");
    assert_eq!(panel.horizontal.title, "year CE");
    assert_eq!((panel.horizontal.low, panel.horizontal.high), (1850.0, 2021.0));
    assert_eq!((bands(&figure).len(), lines(&figure).len()), (1, 1));
    assert_eq!(lines(&figure)[0].runs[0][0], [1850.5, 0.0], "a mean stands in the middle of its year");
    assert_eq!(bands(&figure)[0].runs[0][0], [1850.5, -0.3, 0.3]);
    assert!(
        figure.description.contains("first 0.00 [-0.30, 0.30], last 1.70 [1.40, 2.00] W/m2"),
        "{}",
        figure.description
    );
    let text = assert_sound(&figure);
    assert!(text.contains("<title>a |&gt; b()</title><desc>Line chart of effective forcing"), "{text}");
}

#[test]
fn a_gap_breaks_the_line_and_a_value_between_gaps_is_a_dot() {
    let mut nominal = vec![1.0; 200];
    nominal[50..60].fill(f64::NAN);
    nominal[61..70].fill(f64::INFINITY);
    let figure = drawn(nominal);
    let runs: Vec<usize> = lines(&figure)[0].runs.iter().map(Vec::len).collect();
    assert_eq!(runs, [50, 1, 130]);
    assert!(assert_sound(&figure).contains("h0\""), "the lonely value");
}

#[test]
fn steps_that_are_missing_are_a_gap_too() {
    let starts: Vec<f64> = (0..200).filter(|year| !(90..96).contains(year)).map(f64::from).collect();
    let axis = Axis::steps(starts.clone(), starts.iter().map(|start| start + 1.0).collect(), Era::Ce);
    let count = starts.len();
    assert_eq!(
        lines(&figure(&Shown::Series(series(axis, measure("ppm"), vec![280.0; count]))))[0].runs.len(),
        2
    );
}

#[test]
fn instants_farther_apart_than_data_are_bridged_are_not_joined() {
    let times = [0.0, 10.0, 20.0, 50.0, 81.0, 91.0];
    let axis = Axis::instants(times.to_vec(), Era::Ce);
    let figure = figure(&Shown::Series(series(axis, measure("permil"), vec![1.0, 2.0, 1.0, 2.0, 1.0, 2.0])));
    let runs: Vec<usize> = lines(&figure)[0].runs.iter().map(Vec::len).collect();
    assert_eq!(runs, [4, 2], "three median distances of ten years are, 31 years are not");
    assert!(lines(&figure)[0].dots);
}

#[test]
fn a_short_row_of_steps_is_drawn_as_stairs() {
    let figure = drawn(vec![1.0, 3.0]);
    assert_eq!(lines(&figure)[0].runs, [[[1850.0, 1.0], [1851.0, 1.0], [1851.0, 3.0], [1852.0, 3.0]]]);
}

#[test]
fn ages_have_the_older_at_the_left() {
    let times: Vec<f64> = (0..=800).map(|age| Era::Ka.to_year(800.0 - f64::from(age))).collect();
    let figure =
        figure(&Shown::Series(series(Axis::instants(times, Era::Ka), measure("permil"), vec![3.5; 801])));
    let text = assert_sound(&figure);
    let document = Document::parse(&text).unwrap();
    let place = |words: &str| -> f64 {
        let found =
            document.descendants().find(|node| node.has_tag_name("text") && node.text() == Some(words));
        found.unwrap().attribute("x").unwrap().parse().unwrap()
    };
    assert!(place("800") < place("400") && place("400") < place("0"));
    let mut turned = figure.clone();
    turned.panels[0].horizontal.turned = true;
    let text = assert_sound(&turned);
    let document = Document::parse(&text).unwrap();
    let zero =
        document.descendants().find(|node| node.has_tag_name("text") && node.text() == Some("0")).unwrap();
    assert!(zero.attribute("x").unwrap().parse::<f64>().unwrap() < 100.0, "one switch turns it");
}

fn bundle(values: &[(&str, &str, f64)]) -> Shown {
    let part = |unit: &str, value: f64| series(yearly(1850, 100), measure(unit), vec![value; 100]);
    let components =
        values.iter().map(|(label, unit, value)| (Arc::from(*label), part(unit, *value))).collect();
    Shown::Bundle { components, total: part("W/m2", 9.0) }
}

#[test]
fn a_bundle_has_a_labelled_line_for_each_component_and_a_bold_one_for_the_total() {
    let figure = figure(&bundle(&[("sun", "W/m2", 1.0), ("haze", "mW/m2", -500.0)]));
    let found: Vec<_> = lines(&figure)
        .iter()
        .map(|line| (line.label.clone().unwrap(), line.ink, line.end().unwrap()[1]))
        .collect();
    assert_eq!(
        found,
        [
            ("sun".to_owned(), Ink::Numbered(0), 1.0),
            ("haze".to_owned(), Ink::Numbered(1), -0.5),
            ("total".to_owned(), Ink::Foremost, 9.0)
        ],
        "all in the unit of the total"
    );
    assert_sound(&figure);
}

#[test]
fn the_total_of_one_component_is_that_component() {
    assert_eq!(lines(&figure(&bundle(&[("sun", "W/m2", 9.0)]))).len(), 1);
}

#[test]
fn of_many_components_the_largest_have_labels_and_the_others_are_told_in_a_note() {
    let names: Vec<String> = (0..40).map(|index| format!("driver number {index}")).collect();
    let parts: Vec<(&str, &str, f64)> =
        names.iter().enumerate().map(|(index, name)| (name.as_str(), "W/m2", index as f64 * 1e-6)).collect();
    let figure = figure(&bundle(&parts));
    let labels: Vec<&str> = lines(&figure).iter().filter_map(|line| line.label.as_deref()).collect();
    assert_eq!(labels.len(), 13);
    assert!(labels.contains(&"driver number 39") && !labels.contains(&"driver number 27"));
    assert_eq!(figure.notes, ["28 smaller components are grey and without label"]);
    assert_sound(&figure);
}

#[test]
fn words_from_data_are_escaped_and_cut() {
    let label = "</text><script>alert('&')</script>\u{1}\u{202e}".repeat(20);
    let nasty =
        bundle(&[(&label, "W/m2", 1.0), ("a<b", "W/m2", 2.0), ("名前".repeat(60).as_str(), "W/m2", 2.0)]);
    let caption = Caption { expression: &label, fingerprint: "<>&\"'", refreshed_by: &["\"x\"".repeat(90)] };
    let figure = chart(&nasty, &caption).unwrap();
    let text = assert_sound(&figure);
    let document = Document::parse(&text).unwrap();
    assert!(document.descendants().all(|node| !node.has_tag_name("script")));
    assert!(document.descendants().any(|node| node.text() == Some("a<b")));
}

#[test]
fn extreme_numbers_draw_something_sensible() {
    let extremes: [(&str, Vec<f64>); 13] = [
        ("one value", vec![3.0]),
        ("one nothing", vec![0.0]),
        ("constant", vec![-7.25; 300]),
        ("gaps alone", vec![f64::NAN; 300]),
        ("tiny", vec![1e-300, 3e-300, 2e-300]),
        ("huge", vec![1e300, -1e300]),
        ("the largest", vec![f64::MAX, -f64::MAX]),
        ("the smallest", vec![5e-324, 0.0]),
        ("a constant beyond", vec![1e300; 5]),
        ("little on much", vec![1e9, 1e9 + 1.0, 1e9 + 2.0]),
        ("bits on much", vec![1e15, 1e15 + 0.25]),
        ("all scales", vec![1e-12, 1.0, 1e12]),
        ("a gap at each end", vec![f64::NAN, 1.0, 2.0, f64::NAN]),
    ];
    for (name, nominal) in extremes {
        for measure in [measure("1"), measure("degC"), forcing()] {
            let shown = Shown::Series(series(yearly(1850, nominal.len()), measure, nominal.clone()));
            let figure = figure(&shown);
            assert_sound(&figure);
            let axis = &figure.panels[0].vertical;
            assert!((2..=9).contains(&axis.ticks.len()), "{name}: {axis:?}");
            // A tick may miss the end that it stands on by a few bits.
            let bits = 1e-9 * (axis.high / 2.0 - axis.low / 2.0);
            let inside = |at: f64| at >= axis.low - bits && at <= axis.high + bits;
            assert!(axis.ticks.iter().all(|tick| inside(tick.at)), "{name}: {axis:?}");
            let labels: Vec<&str> = axis.ticks.iter().map(|tick| tick.label.as_str()).collect();
            assert!(
                labels.iter().zip(labels.iter().skip(1)).all(|(one, next)| one != next),
                "{name}: {labels:?}"
            );
            assert!(labels.iter().all(|label| label.chars().count() < 18), "{name}: {labels:?}");
        }
    }
    assert!(drawn(vec![f64::NAN; 9]).notes.iter().any(|note| note.contains("all gaps")));
}

#[test]
fn five_million_years_are_a_small_drawing() {
    let count = 5_000_000;
    let times = (0..count).map(|year| 1950.0 - 5e6 + f64::from(year)).collect();
    let nominal: Vec<f64> = (0..count).map(|year| (f64::from(year) / 6500.0).sin()).collect();
    let shown =
        Shown::Series(with_band(series(Axis::instants(times, Era::Ma), measure("permil"), nominal), 0.1));
    let figure = figure(&shown);
    let labels: Vec<&str> =
        figure.panels[0].horizontal.ticks.iter().map(|tick| tick.label.as_str()).collect();
    assert_eq!(labels, ["5.0", "4.5", "4.0", "3.5", "3.0", "2.5", "2.0", "1.5", "1.0", "0.5"]);
    let text = assert_sound(&figure);
    assert!(text.len() < 100_000, "{} bytes", text.len());
}

#[test]
fn an_axis_without_values_and_a_quantity_have_no_figure() {
    let caption = Caption { expression: "x", fingerprint: "0", refreshed_by: &[] };
    let nothing = series(Axis::instants(Vec::new(), Era::Ce), measure("K"), Vec::new());
    assert!(chart(&Shown::Series(nothing), &caption).is_none());
    let quantity = Shown::Quantity { measure: measure("K"), nominal: 1.0, spread: None };
    assert!(chart(&quantity, &caption).is_none());
}

#[test]
fn what_it_was_refreshed_by_stands_in_the_footer() {
    let names = ["haze".to_owned(), "sun".to_owned()];
    let caption = Caption { expression: "x", fingerprint: "0", refreshed_by: &names };
    let shown = Shown::Series(series(yearly(1900, 3), measure("K"), vec![1.0; 3]));
    assert_eq!(chart(&shown, &caption).unwrap().footer, "fingerprint 0, refreshed by haze, sun");
}

fn eras() -> impl Strategy<Value = (Era, f64)> {
    // Where the axis begins, in years CE, and its era.
    prop_oneof![
        (1.0..2030.0f64).prop_map(|year| (Era::Ce, year.floor())),
        (-9000.0..1.0f64).prop_map(|year| (Era::Ce, year.floor())),
        (-9000.0..-1.0f64).prop_map(|year| (Era::Bce, year.floor())),
        (-8e5..1900.0f64).prop_map(|year| (Era::Ka, year)),
        (-6e7..0.0f64).prop_map(|year| (Era::Ma, year)),
        (-5e4..1900.0f64).prop_map(|year| (Era::CalBp, year)),
        (-1.2e5..1900.0f64).prop_map(|year| (Era::B2k, year)),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(300))]
    #[test]
    fn whatever_is_drawn_no_words_overlap_or_leave_the_page(
        (era, start) in eras(),
        step_power in -3.0..4.0f64,
        steps in any::<bool>(),
        scale_power in -20..20i32,
        offset in -10.0..10.0f64,
        rows in proptest::collection::vec(proptest::collection::vec((-1.0..1.0f64, 0..8u8), 1..120), 1..9),
        banded in any::<bool>(),
    ) {
        let step = 10f64.powf(step_power);
        let count = rows[0].len();
        let times = |from: usize| (0..count).map(|index| start + (index + from) as f64 * step).collect();
        let axis = if steps { Axis::steps(times(0), times(1), era) } else { Axis::instants(times(0), era) };
        let scale = 10f64.powi(scale_power);
        let mut parts: Vec<ShownSeries> = rows
            .iter()
            .map(|row| {
                let value = |index: usize| match row[index % row.len()] {
                    (_, 0) => f64::NAN,
                    (value, _) => (value + offset) * scale,
                };
                let part = series(axis.clone(), measure("W/m2"), (0..count).map(value).collect());
                if banded { with_band(part, 0.3 * scale) } else { part }
            })
            .collect();
        let total = parts.pop().unwrap();
        let shown = if parts.is_empty() {
            Shown::Series(total)
        } else {
            let named = |(index, part)| (Arc::from(format!("driver {index}")), part);
            Shown::Bundle { components: parts.into_iter().enumerate().map(named).collect(), total }
        };
        let figure = figure(&shown);
        let complaints = complaints(&svg(&figure));
        prop_assert!(complaints.is_empty(), "{complaints:#?}");
        let horizontal = &figure.panels[0].horizontal;
        prop_assert!(horizontal.ticks.iter().all(|tick| tick.at >= horizontal.low - 1e-3 && tick.at <= horizontal.high + 1e-3), "{horizontal:?}");
        prop_assert!(horizontal.ticks.len() <= 24);
        prop_assert!(!horizontal.ticks.is_empty(), "{horizontal:?}");
        let labels: Vec<&str> = horizontal.ticks.iter().map(|tick| tick.label.as_str()).collect();
        prop_assert!(labels.iter().zip(labels.iter().skip(1)).all(|(one, next)| one != next), "{labels:?}");
    }
}
