//! How fast the language is to think with: `cargo bench`. Never asserted; figures go into notes.
#![allow(missing_docs)]

use std::fmt::Write;
use std::hint::black_box;
use std::path::Path;

use criterion::{Criterion, criterion_group, criterion_main};

use rhythmite::base::SourceId;
use rhythmite::display::{self, Caption};
use rhythmite::language::parse;
use rhythmite::session::Session;

fn folder() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

/// A script of so many lines as people write them.
fn long_script(lines: usize) -> String {
    let mut text = String::new();
    for line in 0..lines {
        let _ = writeln!(
            text,
            "driver{line} = series([1, 2.5, 3 ± 0.2] W/m2, along: 1850..1852 CE by 1 yr) |> lag({} month) |> scale(0.{line})  # a note",
            line % 12
        );
    }
    text
}

/// 300 definitions on a clock, each of which follows from the one before; `first` is the number at the start.
fn chain(first: f64) -> String {
    let mut text = format!("clock = 1750..2019 CE by 1 yr\nx0 = constant({first} W/m2)\n");
    for number in 1..299 {
        let _ = writeln!(text, "x{number} = x{} + constant({number} mW/m2) |> scale(0.99)", number - 1);
    }
    text + "x298\n"
}

const ENSEMBLE: &str = "
clock = 1750..2019 CE by 1 yr
members = 2000
sun = constant(0.1 ± 0.05 W/m2)
haze = constant(-0.6 W/m2) |> scale(1 ± 0.35)
gases = constant(1.5 W/m2) |> scale(1 ± 0.1)
all = compose(sun, haze, gases)
respond(all, two_layer(feedback: 1.3 ± 0.2 W/m2/K))
";

fn parsing(criterion: &mut Criterion) {
    let text = long_script(10_000);
    criterion.bench_function("parse 10,000 lines", |bench| {
        bench.iter(|| parse(black_box(&text), SourceId(1)).map(|program| program.statements.len()));
    });
}

fn definitions(criterion: &mut Criterion) {
    criterion.bench_function("300 definitions cold", |bench| {
        bench.iter_batched(
            || Session::new(folder()),
            |mut session| session.run_cell("script", &chain(1.0)).outputs.len(),
            criterion::BatchSize::PerIteration,
        );
    });
    let mut group = criterion.benchmark_group("300 definitions in cells of their own");
    for (name, changed) in [("after a change of the last", 298), ("after a change of the first", 1)] {
        let mut session = Session::new(folder());
        for (number, line) in chain(1.0).lines().enumerate() {
            session.run_cell(&format!("cell {number}"), line);
        }
        let mut value = 0;
        group.bench_function(name, |bench| {
            bench.iter(|| {
                value += 1;
                let line = format!("x{changed} = x{} + constant({value} mW/m2)", changed - 1);
                session.run_cell(&format!("cell {}", changed + 1), &line).moved.len()
            });
        });
    }
    group.finish();
}

fn ensembles(criterion: &mut Criterion) {
    let mut group = criterion.benchmark_group("2,000 members x 270 years composed and responded");
    for threads in [1, 2] {
        group.bench_function(format!("{threads} threads"), |bench| {
            bench.iter_batched(
                || Session::with_limits(folder(), Some(threads), 512 << 20, 1 << 20),
                |mut session| session.run_cell("script", ENSEMBLE).outputs.len(),
                criterion::BatchSize::PerIteration,
            );
        });
    }
    group.finish();
}

/// A bundle of 171 steps with bands, as a notebook sends it: 30 of them are refreshed within 100 ms.
fn figures(criterion: &mut Criterion) {
    let source = ENSEMBLE.replace("1750..2019", "1850..2020").replace("members = 2000", "members = 200");
    let output = Session::new(folder()).run_cell("script", &source).outputs.pop();
    let Some(Ok(shown)) = output.map(|output| output.result) else { return };
    let caption = Caption {
        expression: "respond(all, two_layer(feedback: 1.3 ± 0.2 W/m2/K))",
        fingerprint: "0123456789ab",
        refreshed_by: &["haze".to_owned()],
    };
    let Some(figure) = display::chart(&shown, &caption) else { return };
    let mut group = criterion.benchmark_group("a bundle with bands");
    group.bench_function("as SVG", |bench| bench.iter(|| display::svg(black_box(&figure)).len()));
    group.bench_function("as PDF", |bench| bench.iter(|| display::pdf(black_box(&figure)).len()));
    group.bench_function("as PNG", |bench| bench.iter(|| display::png(black_box(&figure), 2.0).len()));
    group.finish();
}

criterion_group!(benches, figures, parsing, definitions, ensembles);
criterion_main!(benches);
