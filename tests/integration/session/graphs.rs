//! Random graphs of definitions: order does not matter, and only what follows from a change is computed.

use std::collections::BTreeSet;

use proptest::prelude::*;
use proptest::test_runner::{Config, TestCaseError, TestRunner};

use super::{run, session};
use rhythmite::session::Session;

/// One definition, over the definitions before it (their numbers are taken modulo its own).
#[derive(Clone, Debug)]
enum Rule {
    Constant(u32, u32),
    Data(u32),
    Sum(usize, usize),
    Difference(usize, usize),
    Scale(usize, u32, u32),
    Lag(usize, i32),
    Compose(usize, usize),
    Respond(usize),
    Twice(usize),
}

fn rule() -> impl Strategy<Value = Rule> {
    let any = 0usize..1000;
    prop_oneof![
        (1u32..9, 0u32..3).prop_map(|(centre, spread)| Rule::Constant(centre, spread)),
        (1u32..9).prop_map(Rule::Data),
        (any.clone(), any.clone()).prop_map(|(a, b)| Rule::Sum(a, b)),
        (any.clone(), any.clone()).prop_map(|(a, b)| Rule::Difference(a, b)),
        (any.clone(), 1u32..5, 0u32..2).prop_map(|(a, factor, spread)| Rule::Scale(a, factor, spread)),
        (any.clone(), -3i32..7).prop_map(|(a, months)| Rule::Lag(a, months)),
        (any.clone(), any.clone()).prop_map(|(a, b)| Rule::Compose(a, b)),
        any.clone().prop_map(Rule::Respond),
        any.prop_map(Rule::Twice),
    ]
}

/// The right side of definition `number`.
fn text(number: usize, rule: &Rule) -> String {
    let name = |other: usize| if number == 0 { "base".to_owned() } else { format!("d{}", other % number) };
    let pm = |spread: u32| if spread == 0 { String::new() } else { format!(" ± 0.{spread}") };
    match rule {
        Rule::Constant(centre, spread) => format!("constant({centre}{} W/m2)", pm(*spread)),
        Rule::Data(first) => {
            format!("series([{first}, 2 ± 0.5, 7, 1, 4, 3, {first}] W/m2, along: 1846..1859 CE by 2 yr)")
        }
        Rule::Sum(a, b) => format!("{} + {}", name(*a), name(*b)),
        Rule::Difference(a, b) => format!("{} - {}", name(*a), name(*b)),
        Rule::Scale(a, factor, spread) => format!("{} |> scale({factor}{})", name(*a), pm(*spread)),
        Rule::Lag(a, months) => format!("{} |> lag({months} month)", name(*a)),
        Rule::Compose(a, b) => format!("compose(early: {}, late: {})", name(*a), name(*b)),
        Rule::Respond(a) => format!("respond({}, two_layer()) * 1 W/m2/degC", name(*a)),
        Rule::Twice(a) => format!("twice({})", name(*a)),
    }
}

const HEAD: [&str; 4] = [
    "clock = 1850..1855 CE by 1 yr",
    "members = 20",
    "twice(x) = x + x * (1 ± 0.1)",
    "base = constant(1 ± 0.5 W/m2)",
];

/// What a session shows for every name, in full, with notes and fingerprint.
fn shown(session: &mut Session, count: usize) -> Vec<String> {
    let names: String = (0..count).map(|number| format!("d{number}\n")).collect();
    let reply = session.run_cell("shown", &names);
    reply
        .outputs
        .iter()
        .map(|output| {
            let problem = output.result.as_ref().err().map(|problem| (problem.code, &problem.message));
            format!("{} {:?} {:?} {problem:?}", output.fingerprint, output.result.as_ref().ok(), output.notes)
        })
        .collect()
}

#[test]
fn the_order_of_lines_and_of_cells_changes_nothing() {
    let strategy = proptest::collection::vec(rule(), 2..12).prop_flat_map(|rules| {
        let lines: Vec<String> = HEAD.iter().map(ToString::to_string).collect();
        let lines: Vec<String> = lines
            .into_iter()
            .chain(
                rules.iter().enumerate().map(|(number, rule)| format!("d{number} = {}", text(number, rule))),
            )
            .collect();
        let homes = proptest::collection::vec(0usize..4, lines.len());
        (Just(rules.len()), Just(lines.clone()), Just(lines).prop_shuffle(), homes)
    });
    let good = std::cell::Cell::new(0);
    let mut runner = TestRunner::new(Config { cases: 48, failure_persistence: None, ..Config::default() });
    let outcome = runner.run(&strategy, |(count, lines, shuffled, homes)| {
        let mut ordered = session();
        ordered.run_cell("all", &lines.join("\n"));
        let expected = shown(&mut ordered, count);
        let mut spread = session();
        // Shown before it is defined, so that evaluation begins from the other end too.
        shown(&mut spread, count);
        for cell in 0..4 {
            let text: Vec<&str> = shuffled
                .iter()
                .zip(&homes)
                .filter(|(_, home)| **home == cell)
                .map(|(line, _)| line.as_str())
                .collect();
            spread.run_cell(&format!("cell {cell}"), &text.join("\n"));
        }
        let found = shown(&mut spread, count);
        for (number, (expected, found)) in expected.iter().zip(&found).enumerate() {
            if expected != found {
                let program = lines.join("\n");
                return Err(TestCaseError::fail(format!("d{number} of\n{program}\n{expected}\n{found}")));
            }
        }
        good.set(good.get() + expected.iter().filter(|shown| shown.ends_with("None")).count());
        Ok(())
    });
    outcome.unwrap_or_else(|error| panic!("{error}"));
    let good = good.get();
    assert!(good > 100, "only {good} definitions had a value: the programs are too often wrong");
}

/// A graph of definitions of one or two calls, so that the calls can be counted from the graph alone.
struct Counted {
    lines: Vec<String>,
    needs: Vec<Vec<usize>>,
    uncertain: Vec<bool>,
}

impl Counted {
    /// `count` definitions; the choices come from a small generator of its own, so that the graph never changes.
    fn new(count: usize) -> Self {
        let mut state = 12_345u64;
        let mut next = |below: usize| {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            (state >> 33) as usize % below
        };
        let mut graph = Self { lines: Vec::new(), needs: Vec::new(), uncertain: Vec::new() };
        for number in 0..count {
            // Few are leaves, and most hang on near ones, so that chains grow long.
            let kind = if number < 5 { next(2) } else { 1 + next(9) };
            let near = |offset: usize| number - 1 - offset % number.min(20);
            let (text, needs) = match kind {
                0 => (format!("constant({}.5 W/m2)", number + 1), vec![]),
                1 => (format!("constant({} ± 0.25 W/m2)", number + 1), vec![]),
                2..=4 => {
                    let a = near(next(20));
                    (format!("scale(d{a}, 1.{})", number + 1000), vec![a])
                }
                _ => {
                    let (a, b) = (near(next(20)), near(next(20)));
                    let sign = if kind < 8 { "+" } else { "-" };
                    (format!("d{a} {sign} d{b} * 0.{}", number + 1000), vec![a, b])
                }
            };
            let uncertain = kind == 1 || needs.iter().any(|other| graph.uncertain[*other]);
            graph.lines.push(format!("d{number} = {text}"));
            graph.needs.push(needs);
            graph.uncertain.push(uncertain);
        }
        graph
    }

    /// What follows from a definition, itself included.
    fn following(&self, first: usize) -> BTreeSet<usize> {
        let mut following = BTreeSet::from([first]);
        for number in first + 1..self.lines.len() {
            if self.needs[number].iter().any(|other| following.contains(other)) {
                following.insert(number);
            }
        }
        following
    }

    /// How many calls the definitions in `set` cost where only they are new: each call once on the nominal path, and
    /// where it is uncertain once for every block of members.
    fn cost(&self, set: &BTreeSet<usize>, but_for: Option<usize>, blocks: u64) -> u64 {
        let calls = |uncertain: bool| if uncertain { 1 + blocks } else { 1 };
        set.iter()
            .filter(|number| Some(**number) != but_for)
            .map(|number| {
                let uncertain = self.uncertain[*number];
                match self.needs[*number].as_slice() {
                    [] if uncertain => 2 * calls(true),
                    // `a + b * 0.5`: the product is new only where `b` is.
                    [_, second] if set.contains(second) => calls(uncertain) + calls(self.uncertain[*second]),
                    _ => calls(uncertain),
                }
            })
            .sum()
    }
}

#[test]
fn changing_one_line_of_three_hundred_recomputes_only_what_follows_from_it() {
    let graph = Counted::new(300);
    let blocks = 2;
    let mut session = session();
    run(&mut session, "settings", "clock = 1850..1852 CE by 1 yr\nmembers = 1500");
    for (number, line) in graph.lines.iter().enumerate() {
        run(&mut session, &format!("cell {number}"), line);
    }
    let before = session.evaluations();
    let names: String = (0..300).map(|number| format!("d{number}\n")).collect();
    run(&mut session, "shown", &names);
    assert_eq!(
        session.evaluations() - before,
        graph.cost(&(0..300).collect(), None, blocks),
        "everything is computed once"
    );
    let mut partly = 0;
    for changed in [0, 3, 7, 60, 150, 250, 290, 299] {
        let following = graph.following(changed);
        let before = session.evaluations();
        let line =
            format!("d{changed} = ({}) + 0.125 W/m2", graph.lines[changed].split_once(" = ").unwrap().1);
        let reply = run(&mut session, &format!("cell {changed}"), &line);
        let moved: BTreeSet<usize> =
            reply.moved.iter().map(|output| output.expression[1..].parse().unwrap()).collect();
        assert_eq!(moved, following, "d{changed}");
        // The change itself keeps its old value beneath a new sum, which is all it costs.
        let sum = if graph.uncertain[changed] { 1 + blocks } else { 1 };
        let rest = graph.cost(&following, Some(changed), blocks);
        assert_eq!(session.evaluations() - before, sum + rest, "d{changed}");
        partly += usize::from(following.len() > 1 && following.len() < 250);
        let before = session.evaluations();
        let back = run(&mut session, &format!("cell {changed}"), &graph.lines[changed]);
        assert_eq!(back.moved.len(), following.len());
        assert_eq!(session.evaluations(), before, "the old values are still remembered");
    }
    assert!(partly >= 3, "the graph is too dense or too thin to tell anything");
}

#[test]
fn running_all_cells_twice_costs_nothing_the_second_time() {
    let cells = [
        ("settings", "clock = 1850..1859 CE by 1 yr\nmembers = 2500"),
        ("data", "x = series([1, 2 ± 0.3, 4, 1] W/m2, along: 1850..1853 CE by 1 yr)\nf(y) = y * (1 ± 0.1)"),
        ("drivers", "sun = f(constant(1 W/m2)) |> lag(6 month)\nhaze = constant(2 ± 0.1 W/m2)"),
        ("shown", "both = compose(sun, haze)\nboth\nrespond(both, two_layer())\ntable(both)"),
        ("more", "[haze * e for e in [1, 2]]\nx |> on(1850..1853 CE by 2 yr)\nx |> within(1990..1991 CE)"),
        ("fit", "attribute(respond(haze, two_layer()) + constant(0 degC), to: [both])"),
    ];
    let mut session = session();
    let all = |session: &mut Session| {
        let replies = cells.map(|(cell, text)| session.run_cell(cell, text));
        let texts = replies.iter().flat_map(|reply| {
            reply.outputs.iter().map(|output| {
                format!("{} {:?} {:?}", output.fingerprint, output.result.as_ref().ok(), output.notes)
            })
        });
        (texts.collect::<Vec<_>>(), replies.iter().map(|reply| reply.moved.len()).sum::<usize>())
    };
    let first = all(&mut session).0;
    let before = session.evaluations();
    assert!(before > 30, "{before}");
    let (second, moved) = all(&mut session);
    assert_eq!(session.evaluations(), before);
    assert_eq!(moved, 0);
    assert_eq!(first, second);
}

#[test]
fn a_small_memory_is_kept_to_and_changes_no_result() {
    let graph = Counted::new(80);
    let script = format!("clock = 1850..1859 CE by 1 yr\nmembers = 1500\n{}", graph.lines.join("\n"));
    let limit = 200_000;
    // One block of members: 1,024 times ten steps of eight bytes.
    let largest = 1024 * 10 * 8 + 4096;
    let mut small = Session::with_limits(env!("CARGO_TARGET_TMPDIR"), Some(2), limit, 1 << 20);
    let mut large = session();
    for session in [&mut small, &mut large] {
        run(session, "script", &script);
    }
    let few = shown(&mut small, 80);
    assert_eq!(few, shown(&mut large, 80));
    assert!(small.remembered_bytes() <= limit.max(largest), "{}", small.remembered_bytes());
    assert!(large.remembered_bytes() > 10 * limit, "the bound was never reached");
    let before = small.evaluations();
    assert_eq!(few, shown(&mut small, 80), "what left the memory is computed again");
    assert!(small.evaluations() > before);
}

#[test]
fn the_same_numbers_come_from_any_number_of_threads() {
    let graph = Counted::new(60);
    let script = format!("clock = 1850..1859 CE by 1 yr\nmembers = 5000\n{}", graph.lines.join("\n"));
    let of = |threads: usize| {
        let mut session = Session::with_limits(env!("CARGO_TARGET_TMPDIR"), Some(threads), 64 << 20, 1);
        run(&mut session, "script", &script);
        shown(&mut session, 60)
    };
    let one = of(1);
    assert_eq!(one, of(3));
    assert_eq!(one, of(7));
}
