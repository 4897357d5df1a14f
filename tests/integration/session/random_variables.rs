//! Which random variables are one and which are two, and what moves their draws.

use super::{nominal, number, results, run, session, spread};
use rhythmite::value::Shown;

fn quantiles(shown: &Shown) -> [f64; 3] {
    spread(shown).expect("members").map(|column| column[0])
}

fn width(shown: &Shown) -> f64 {
    let [low, _, high] = quantiles(shown);
    high - low
}

/// The correlation of two variables of equal spread, from the widths of their sum and difference.
fn correlation(sum: &Shown, difference: &Shown) -> f64 {
    let (sum, difference) = (width(sum).powi(2), width(difference).powi(2));
    (sum - difference) / (sum + difference)
}

/// Nominal value and, where there are members, their quantiles are all exactly this.
fn is_exactly(shown: &Shown, number: f64) -> bool {
    let members = spread(shown).into_iter().flatten().flatten();
    nominal(shown).into_iter().chain(members).all(|value| value == number)
}

const CLOCK: &str = "clock = 1850..1859 CE by 1 yr\n";

#[test]
fn a_thing_minus_itself_is_exactly_zero_and_over_itself_exactly_one() {
    for x in [
        "5 ± 1 degC",
        "constant(2 ± 0.5 W/m2)",
        "series([1 ± 0.3, 2, 3 ± 0.1] ppm, along: 1851..1853 CE by 1 yr) + constant(10 ± 1 ppm)",
        "respond(constant(2 ± 0.5 W/m2), two_layer(feedback: 1.3 ± 0.1 W/m2/K))",
        "scale(constant(3 W/m2), 1 ± 0.2) |> lag(2 yr)",
        "compose(sun: constant(1 ± 0.1 W/m2), haze: constant(2 ± 0.1 W/m2))",
    ] {
        let shown = results(&format!("{CLOCK}x = {x}\nx - x\ny = x + x\ny / y\nx"));
        assert!(spread(&shown[2]).is_some(), "{x} is uncertain");
        let gaps = |value: &f64| value.is_nan();
        let clean = |shown: &Shown| -> Vec<f64> {
            nominal(shown).into_iter().chain(spread(shown).into_iter().flatten().flatten()).collect()
        };
        assert!(clean(&shown[0]).contains(&0.0), "{x}");
        assert!(clean(&shown[0]).iter().all(|value| *value == 0.0 || gaps(value)), "{x}: {:?}", shown[0]);
        assert!(clean(&shown[1]).contains(&1.0), "{x}");
        assert!(clean(&shown[1]).iter().all(|value| *value == 1.0 || gaps(value)), "{x}: {:?}", shown[1]);
    }
}

#[test]
fn two_lines_that_read_the_same_are_independent() {
    let shown = results("members = 4000\na = 10 ± 1\nb = 10 ± 1\na + b\na - b\na\nb");
    let correlation = correlation(&shown[0], &shown[1]);
    assert!(correlation.abs() < 0.08, "{correlation}");
    let ratio = width(&shown[1]) / width(&shown[2]);
    assert!((ratio - 2f64.sqrt()).abs() < 0.08, "{ratio}");
    assert_ne!(quantiles(&shown[2]), quantiles(&shown[3]));
}

#[test]
fn two_places_in_one_line_are_independent() {
    let shown = results("members = 4000\n(10 ± 1) + (10 ± 1)\n(10 ± 1) - (10 ± 1)");
    assert!(correlation(&shown[0], &shown[1]).abs() < 0.08);
}

#[test]
fn names_share_one_variable() {
    let shown = results("a = 10 ± 1\nb = a\nc = b * 2\nc - a - b\nb - a");
    assert!(shown.iter().all(|shown| is_exactly(shown, 0.0)), "{shown:?}");
}

#[test]
fn a_spread_inside_a_function_is_drawn_anew_for_each_call() {
    let text = "members = 4000\nf(x) = x + (0 ± 1)\nf(1) + f(1)\nf(1) - f(1)\nf(1)";
    let shown = results(text);
    assert!(correlation(&shown[0], &shown[1]).abs() < 0.08);
    let nested = "members = 4000\nf(x) = x * (1 ± 0.1)\ng(x) = f(x)\na = g(1)\nb = g(1)\na + b\na - b";
    let shown = results(nested);
    assert!(correlation(&shown[0], &shown[1]).abs() < 0.08);
}

#[test]
fn an_argument_keeps_the_variable_of_its_caller() {
    let shown = results("gone(x) = x - x\none(x) = x\na = 1 ± 1\ngone(5 ± 1)\none(a) - one(a)\none(a) - a");
    assert!(shown.iter().all(|shown| is_exactly(shown, 0.0)), "{shown:?}");
}

#[test]
fn the_items_of_a_loop_share_their_draws() {
    let shown = results(
        "[e + (0 ± 1) for e in [1, 1]]\n[1 + (0 ± 1), 1 + (0 ± 1)]\nn(e) = e + (0 ± 1)\n[n(e) for e in [1, 1]]",
    );
    let pairs: Vec<[[f64; 3]; 2]> = shown
        .iter()
        .map(|shown| match shown {
            Shown::List(items) => [quantiles(&items[0].1), quantiles(&items[1].1)],
            other => panic!("{other:?}"),
        })
        .collect();
    assert_eq!(pairs[0][0], pairs[0][1]);
    assert_ne!(pairs[1][0], pairs[1][1]);
    assert_eq!(pairs[2][0], pairs[2][1], "a body is one place, calls in it too");
}

#[test]
fn editing_adding_or_moving_other_lines_moves_no_draw() {
    let draws = |text: &str| {
        let shown = results(text);
        quantiles(shown.last().unwrap())
    };
    let first = draws("a = 10 ± 1\nb = 3 ± 2\nb");
    assert_eq!(first, draws("a = 99 ± 7\nb = 3 ± 2\nb"));
    assert_eq!(first, draws("b = 3 ± 2\na = 10 ± 1\nb"));
    assert_eq!(
        first,
        draws("# a comment\n\nz = (1 ± 1) * (2 ± 2)\nf(x) = x + (1 ± 1)\nb = 3 ± 2\nc = f(b)\nb")
    );
    assert_eq!(first, draws("1 ± 1\nb   =   (3 ± 2)   # the same\nb"));
    assert_eq!(first, draws("b = 3 +- 2\nb"));
    let mut session = session();
    run(&mut session, "late", "b = 3 ± 2");
    let other_cell = run(&mut session, "shown", "b");
    assert_eq!(first, quantiles(other_cell.outputs[0].result.as_ref().unwrap()));
}

#[test]
fn renaming_redraws() {
    let shown = results("alpha = 10 ± 1\nbeta = 10 ± 1\nalpha");
    let renamed = results("gamma = 10 ± 1\ngamma");
    assert_ne!(quantiles(&shown[0]), quantiles(&renamed[0]));
}

#[test]
fn a_new_centre_or_spread_keeps_the_draws() {
    let standard = |centre: f64, deviation: f64| {
        let shown = results(&format!("a = {centre} ± {deviation}\na"));
        quantiles(&shown[0]).map(|value| (value - centre) / deviation)
    };
    let first = standard(10.0, 1.0);
    for other in [standard(20.0, 1.0), standard(10.0, 4.0), standard(-3.0, 0.5)] {
        for (one, two) in first.iter().zip(other) {
            assert!((one - two).abs() < 1e-12, "{first:?} {other:?}");
        }
    }
}

#[test]
fn the_seed_and_the_number_of_members_move_the_draws_and_the_fingerprint() {
    let of = |settings: &str| {
        let reply = run(&mut session(), "script", &format!("{settings}a = 10 ± 1\na\n2 * 3"));
        let prints = [reply.outputs[0].fingerprint, reply.outputs[1].fingerprint];
        (quantiles(reply.outputs[0].result.as_ref().unwrap()), prints)
    };
    let plain = of("");
    assert_eq!(plain, of("seed = 1\nmembers = 1000\n"), "the defaults, said");
    for settings in ["seed = 2\n", "members = 999\n"] {
        let other = of(settings);
        assert_ne!(plain.0, other.0, "{settings}");
        assert_ne!(plain.1[0], other.1[0], "{settings}");
        assert_eq!(plain.1[1], other.1[1], "what is certain reads no {settings}");
    }
}

#[test]
fn members_are_as_the_normal_distribution_says() {
    // 5 and 95 % of the normal distribution lie 1.644854 standard deviations from its centre.
    let shown = results("members = 40000\n100 ± 10 Mt");
    let [low, median, high] = quantiles(&shown[0]);
    assert!((low - 83.55).abs() < 0.5 && (median - 100.0).abs() < 0.3 && (high - 116.45).abs() < 0.5);
}

#[test]
fn the_nominal_path_takes_each_variable_at_its_centre() {
    let shown =
        results(&format!("{CLOCK}(2 ± 1)^2\nx = constant(3 ± 1 W/m2)\nx * x\n(4 ± 2) / (2 ± 0.1) + 1"));
    assert_eq!(number(&shown[0]), 4.0);
    assert!(spread(&shown[0]).unwrap()[1][0] != 4.0, "the median of the squares is another number");
    assert!(nominal(&shown[1]).iter().all(|value| *value == 9.0));
    assert_eq!(number(&shown[2]), 3.0);
}

#[test]
fn a_default_is_one_for_the_whole_notebook() {
    let mut session = session();
    let one = run(&mut session, "one", "first = two_layer()\nfirst");
    let two = run(&mut session, "two", "second = two_layer()\nsecond\nf(x) = two_layer()\nf(1)");
    assert_eq!(one.outputs[0].fingerprint, two.outputs[0].fingerprint);
    assert_eq!(one.outputs[0].fingerprint, two.outputs[1].fingerprint);
    let responses = format!("{CLOCK}x = constant(1 W/m2)\nrespond(x, two_layer()) - respond(x, first)");
    let three = run(&mut session, "three", &responses);
    assert!(is_exactly(three.outputs[0].result.as_ref().unwrap(), 0.0));
}
