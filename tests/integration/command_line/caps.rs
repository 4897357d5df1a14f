//! Programs written to explode: each ends soon, with a clear error or the right result, and never takes the machine
//! along. Every one runs in a process of its own whose address space is bounded.

use std::fs;

use super::{Run, finish, folder};

/// How much address space an exploding program gets, in KiB: most of it is the stacks, of which little becomes real.
#[cfg(target_os = "linux")]
const ADDRESS_SPACE_KIB: u64 = 5_000_000;

/// Run a script in a bounded process; a crash, a hang or a message without a code fails the test.
fn bounded(name: &str, text: &str) -> Run {
    let folder = folder(&format!("cap-{name}"));
    fs::write(folder.join("script.rhy"), text).unwrap();
    let program = env!("CARGO_BIN_EXE_rhythmite");
    let arguments = ["run", "script.rhy", "--threads", "2"];
    #[cfg(target_os = "linux")]
    let mut command = {
        let mut command = std::process::Command::new("sh");
        let bound = format!("ulimit -v {ADDRESS_SPACE_KIB}; exec \"$0\" \"$@\"");
        command.args(["-c", &bound, program]);
        command
    };
    #[cfg(not(target_os = "linux"))]
    let mut command = std::process::Command::new(program);
    let run = finish(command.args(arguments).current_dir(folder));
    let ended = matches!(run.code, Some(0 | 1)) && run.err.is_empty();
    assert!(ended, "{name}: {:?}\n{}\n{}", run.code, run.err, run.out.chars().take(2000).collect::<String>());
    assert!(!run.out.contains("internal"), "{name}\n{}", run.out);
    run
}

/// Run a script that must be refused with this code.
fn refused(name: &str, text: &str, code: &str) {
    let run = bounded(name, text);
    let said: String = run.out.chars().take(2000).collect();
    assert!(run.code == Some(1) && run.out.contains(&format!("error[{code}]")), "{name}\n{said}");
}

/// `first`, then `count` lines made from their number and the one before, then the last name, shown.
fn chain(first: &str, count: usize, line: impl Fn(usize, usize) -> String) -> String {
    let lines: String = (1..=count).map(|number| line(number, number - 1) + "\n").collect();
    format!("{first}\n{lines}a{count}\n")
}

const CLOCK: &str = "clock = 1850..1851 CE by 1 yr\n";

#[test]
fn functions_that_double_forty_times_are_refused() {
    let functions: String = (1..=40).map(|n| format!("f{n}(x) = f{}(x) + f{}(x)\n", n - 1, n - 1)).collect();
    refused("functions", &format!("f0(x) = x + 1\n{functions}f40(1)\n"), "too-large");
    refused("unused-functions", &format!("f0(x) = x + 1\n{functions}a = f40(1)\n"), "too-large");
    let arguments: String = (1..=40).map(|n| format!("f{n}(x) = f{}(x + x)\n", n - 1)).collect();
    refused("arguments", &format!("f0(x) = x\n{arguments}f40(1)\n"), "too-large");
    let dropped: String =
        (1..=40).map(|n| format!("f{n}(x) = one(f{}(x), f{}(x))\n", n - 1, n - 1)).collect();
    refused("dropped", &format!("one(x, y) = 1\nf0(x) = x\n{dropped}f40(1)\n"), "too-large");
}

#[test]
fn many_lines_that_each_grow_to_their_own_limit_are_refused_together() {
    let functions: String = (1..=13).map(|n| format!("f{n}(x) = f{}(x) + f{}(x)\n", n - 1, n - 1)).collect();
    let lines: String = (0..2000).map(|n| format!("a{n} = f13({n})\n")).collect();
    refused("many-lines", &format!("f0(x) = x + 1\n{functions}{lines}"), "too-large");
    let shown: String = (0..2000).map(|n| format!("f13({n})\n")).collect();
    refused("many-shown", &format!("f0(x) = x + 1\n{functions}{shown}"), "too-large");
}

#[test]
fn loops_nested_sixty_four_deep_are_refused() {
    let loops: String = (0..64).map(|n| format!(" for e{n} in [1, 2]]")).collect();
    refused("loops", &format!("{}1{loops}\n", "[".repeat(64)), "nesting");
    let loops: String = (0..60).map(|n| format!(" for e{n} in [1, 2]]")).collect();
    let sum: Vec<String> = (0..60).map(|n| format!("e{n}")).collect();
    refused("loops-sum", &format!("{}{}{loops}\n", "[".repeat(60), sum.join(" + ")), "too-large");
    refused("loops-unused", &format!("{}1{loops}\n", "[".repeat(60)), "too-large");
    refused(
        "loops-named",
        &chain("a0 = [1, 2]", 40, |n, p| format!("a{n} = [[e, d] for e in a{p}]\nd = 1")),
        "defined-twice",
    );
    refused(
        "loops-lines",
        &chain("a0 = [1, 2]", 40, |n, p| format!("a{n} = [[e, e] for e in a{p}]")),
        "too-large",
    );
    refused(
        "loops-squared",
        &chain("a0 = [1, 2]", 40, |n, p| format!("a{n} = [a{p} for e in a{p}]")),
        "too-large",
    );
}

#[test]
fn lists_that_double_forty_times_are_refused() {
    for (name, first) in
        [("full", "[1, 2]"), ("empty", "[]"), ("empty-loop", "[1 for e in []]"), ("nested", "[[]]")]
    {
        let text = chain(&format!("a0 = {first}"), 40, |n, p| format!("a{n} = [a{p}, a{p}]"));
        let run = bounded(&format!("lists-{name}"), &text);
        assert_eq!(run.code, Some(1), "{name}");
    }
}

#[test]
fn bundles_that_double_forty_times_are_refused() {
    let first = format!("{CLOCK}a0 = compose(p: constant(1 W/m2))");
    refused("bundles", &chain(&first, 40, |n, p| format!("a{n} = compose(p: a{p}, q: a{p})")), "too-large");
    refused(
        "bundles-scaled",
        &chain(&first, 40, |n, p| format!("a{n} = scale(compose(p: a{p}, q: a{p}), 2)")),
        "too-large",
    );
    let unshown = chain(&first, 40, |n, p| format!("a{n} = compose(p: a{p}, q: a{p})"))
        .replace("\na40\n", "\nb = a40 + a40\nb\n");
    refused("bundles-summed", &unshown, "too-large");
}

#[test]
fn sums_that_double_forty_times_are_cheap() {
    let run = bounded("sums", &chain("a0 = 1 ± 0.1", 40, |n, p| format!("a{n} = a{p} + a{p}")));
    assert_eq!(run.code, Some(0));
    // 2^40 is 1.0995e12.
    assert!(run.out.contains("a40\n  1100000000000 "), "{}", run.out);
}

#[test]
fn clocks_that_double_with_every_lag_are_refused() {
    let first = "clock = 1850..1860 CE by 1 yr\na0 = constant(1 W/m2)";
    refused(
        "lags",
        &chain(first, 40, |n, p| format!("a{n} = lag(a{p}, {} yr) + a{p}", 1u64 << p)),
        "too-large",
    );
    refused(
        "lags-back",
        &chain(first, 40, |n, p| format!("a{n} = a{p} - lag(a{p}, -{} yr)", 3u64.pow(p as u32 % 20))),
        "too-large",
    );
}

#[test]
fn lags_of_one_step_in_a_long_chain_are_cheap() {
    let first = "clock = 1850..1860 CE by 1 yr\na0 = constant(1 W/m2)";
    let run = bounded("lag-chain", &chain(first, 100, |n, p| format!("a{n} = lag(a{p}, 1 yr)")));
    assert_eq!(run.code, Some(0), "{}", run.out);
}

#[test]
fn clocks_of_far_too_many_steps_are_refused() {
    refused("clock", "clock = 1..1000000000000 CE by 1 yr\nconstant(1 W/m2)\n", "clock-size");
    refused("clock-fine", "clock = 1850..1851 CE by 0.000000000001 yr\nconstant(1 W/m2)\n", "clock-size");
    refused(
        "on",
        "series([1, 2] ppm, along: 1850..1851 CE by 1 yr) |> on(1..1000000000000 CE by 1 yr)\n",
        "clock-size",
    );
    bounded("clock-days", "clock = 1..2000000 CE by 1 day\nconstant(1 W/m2)\n");
    bounded("clock-zero", "clock = 1850..1851 CE by 0 yr\nconstant(1 W/m2)\n");
    bounded("clock-infinite", "clock = 1..1e300 CE by 1e-300 yr\nconstant(1 W/m2)\n");
    bounded("clock-huge-years", "clock = 1e300..2e300 CE by 1e299 yr\nconstant(1 W/m2)\n");
}

#[test]
fn members_times_columns_are_bounded_wherever_they_meet() {
    let years = |last: u64| format!("clock = 1..{last} CE by 1 yr\n");
    refused("members", &format!("{}members = 100000\nconstant(1 ± 0.1 W/m2)\n", years(19_000)), "too-large");
    let wide = format!("{}x = constant(1 ± 0.1 W/m2)\n", years(1_900_000));
    refused("within", &format!("{wide}x |> within(1850..1851 CE)\n"), "too-large");
    refused("table-within", &format!("{wide}table(x |> within(1850..1851 CE))\n"), "too-large");
    refused("on-narrow", &format!("{wide}z = x + x\nz |> within(1850..1851 CE) |> scale(2)\n"), "too-large");
    refused(
        "members-list",
        &format!(
            "{}members = 10000\n[constant(1 ± 0.1 W/m2) for e in [1, 2, 3, 4, 5, 6, 7, 8, 9, 10]]\n",
            years(5_000)
        ),
        "too-large",
    );
    bounded("members-most", "members = 10000000\n1 ± 0.1\n");
    bounded(
        "members-hidden",
        &format!("{}members = 200000\nconstant(1 ± 0.1 W/m2) |> within(1850..1851 CE)\n", years(2_000)),
    );
}

#[test]
fn data_long_before_the_clock_do_not_make_it_endless() {
    for (name, step) in [("days", "0.01 yr"), ("seconds", "0.0000001 yr")] {
        let text = format!(
            "clock = 2000..2000 CE by {step}\nrespond(series([1, 2] W/m2, at: [800 ka, 0 ka]), two_layer())\n"
        );
        let run = bounded(&format!("before-{name}"), &text);
        assert_eq!(run.code, Some(1), "{name}");
    }
}

#[test]
fn a_chain_of_five_thousand_definitions_is_fine_in_either_order() {
    let mut lines: Vec<String> = (1..=5000).map(|n| format!("a{n} = a{} + 1", n - 1)).collect();
    lines.push("a0 = 1 ± 0.1".to_owned());
    let forward = bounded("chain", &format!("{}\na5000\n", lines.join("\n")));
    assert_eq!(forward.code, Some(0));
    assert!(forward.out.contains("5001.0"), "{}", forward.out);
    lines.reverse();
    let backward = bounded("chain-back", &format!("a5000\n{}\n", lines.join("\n")));
    assert_eq!(backward.out, forward.out);
}

#[test]
fn a_chain_of_a_hundred_thousand_definitions_ends() {
    let run = bounded("chain-long", &chain("a0 = 1", 100_000, |n, p| format!("a{n} = a{p} + 1")));
    assert!(run.out.contains("100001") || run.out.contains("error[nesting]"), "{}", run.out);
}

#[test]
fn a_circle_of_five_thousand_definitions_is_told_in_little_text() {
    let text = chain("a0 = a5000", 5000, |n, p| format!("a{n} = a{p} + 1"));
    let run = bounded("circle", &text);
    assert_eq!(run.code, Some(1));
    assert!(run.out.contains("error[circle]"));
    assert!(run.out.len() < 20_000_000, "{} bytes", run.out.len());
}

#[test]
fn expressions_of_ten_thousand_terms_are_told_or_computed() {
    for (name, text, result) in [
        ("terms", vec!["1"; 10_000].join(" + "), "10000"),
        ("factors", vec!["1"; 10_000].join("*"), "1"),
        ("powers", vec!["1"; 10_000].join("^"), "1"),
        ("minus", format!("{}1", "-".repeat(10_000)), "1"),
        ("pipes", format!("f(x) = x\n1{}", " |> f()".repeat(10_000)), "1"),
        ("conversions", format!("1 m{}", " in km in m".repeat(5_000)), "1 m"),
        ("brackets", format!("{}1{}", "(".repeat(10_000), ")".repeat(10_000)), "1"),
        ("lists", format!("{}1{}", "[".repeat(10_000), "]".repeat(10_000)), "1"),
        ("spreads", vec!["1"; 10_000].join(" ± "), "1"),
        ("spans", vec!["1"; 10_000].join(".."), "1"),
    ] {
        let run = bounded(name, &(text + "\n"));
        let right = run.code == Some(0) && run.out.contains(result);
        assert!(right || run.out.contains("error["), "{name}\n{}", run.out);
    }
}

#[test]
fn long_lists_names_and_texts_are_no_trouble() {
    let items: Vec<String> = (0..9_000).map(|n| n.to_string()).collect();
    assert_eq!(bounded("items", &format!("[{}]\n", items.join(", "))).code, Some(0));
    let more = vec!["1"; 100_000].join(", ");
    bounded("more-items", &format!("[{more}]\n"));
    let name = "n".repeat(100_000);
    assert_eq!(bounded("name", &format!("{name} = 1\n{name} + 1\n")).code, Some(0));
    assert_eq!(bounded("text", &format!("\"{}\"\n", "µ".repeat(100_000))).code, Some(0));
    bounded("digits", &format!("{}\n", "9".repeat(100_000)));
    let parts: Vec<String> = (0..2_000).map(|n| format!("c{n}: constant({n} W/m2)")).collect();
    bounded("components", &format!("{CLOCK}compose({})\n", parts.join(", ")));
    let parameters: Vec<String> = (0..3_000).map(|n| format!("p{n}")).collect();
    bounded(
        "parameters",
        &format!("f({}) = p0\nf({})\n", parameters.join(", "), vec!["1"; 3_000].join(", ")),
    );
}

#[test]
fn thousands_of_mistakes_are_told_without_delay() {
    let lines: String = (0..3_000).map(|n| format!("a{n} = nowhere{n} + {n}\n")).collect();
    let run = bounded("mistakes", &lines);
    assert_eq!(run.code, Some(1));
    assert!(run.out.contains("nowhere0`") && run.out.contains("nowhere2999`"));
}
