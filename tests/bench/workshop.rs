//! Half a scientist's day beside pandas: a million rows loaded, smoothed, brought onto another axis.
//! `cargo bench --bench workshop`. Both do the same tasks on the same files in turn, and must come to the same numbers.
//! Never asserted about time; figures go into notes.

#[path = "../integration/python_environment.rs"]
mod python_environment;

use std::error::Error;
use std::fmt::Write as _;
use std::fs;
use std::io::{BufRead, BufReader, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};
use std::time::Instant;

use rhythmite::display;
use rhythmite::session::Session;
use rhythmite::value::{Shown, ShownSeries};

type Outcome<T> = Result<T, Box<dyn Error>>;

const ROWS: usize = 1_000_000;
const ROUNDS: usize = 9;

/// What both are asked to do.
struct Task {
    name: &'static str,
    /// The cell that is run before the clock starts.
    before: &'static str,
    cell: &'static str,
    /// The function of workshop.py, and what it uses.
    function: &'static str,
    using: &'static str,
    /// How far the values may be apart; none where the other means something else by them.
    tolerance: Option<f64>,
}

const YEARS: &str = "years = load(\"years.csv\", unit: \"1\")\nyears";
const UNEVEN: &str = "uneven = load(\"uneven.csv\", unit: \"1\")\nuneven";
const DECADES: &str = "uneven |> on(997991 BCE..40002 BCE by 10 yr)";

const TASKS: &[Task] = &[
    Task {
        name: "load 1e6 years",
        before: "",
        cell: YEARS,
        function: "load_years",
        using: "pandas read_csv",
        tolerance: Some(1e-15),
    },
    Task {
        name: "load 1e6 uneven decimal years",
        before: "",
        cell: UNEVEN,
        function: "load_uneven",
        using: "pandas read_csv",
        tolerance: Some(1e-15),
    },
    Task {
        name: "load 1e6 dates",
        before: "",
        cell: "load(\"days.csv\", unit: \"1\")",
        function: "load_days",
        using: "pandas read_csv, parse_dates",
        tolerance: Some(1e-15),
    },
    Task {
        name: "running mean of 1e6 years over 101",
        before: YEARS,
        cell: "years |> smooth(101 yr)",
        function: "running_mean",
        using: "pandas rolling, centred",
        tolerance: Some(1e-12),
    },
    Task {
        name: "1e6 uneven points to means of decades",
        before: UNEVEN,
        cell: DECADES,
        function: "means_of_points",
        using: "pandas groupby (of the points)",
        tolerance: None,
    },
    Task {
        name: "1e6 uneven points to means of decades",
        before: UNEVEN,
        cell: DECADES,
        function: "means_of_the_line",
        using: "NumPy (of the line)",
        tolerance: Some(1e-9),
    },
    Task {
        name: "1e6 uneven points to 957,990 years, linear",
        before: UNEVEN,
        cell: "uneven |> on(997991 BCE..40002 BCE by 1 yr, method: linear)",
        function: "line_at_years",
        using: "NumPy interp",
        tolerance: Some(1e-9),
    },
];

/// The files of both: whole years, uneven decimal years, and dates, each with an invented value.
fn write_files(folder: &Path) -> Outcome<()> {
    let mut state = 20_260_711_u64;
    let mut uniform = || {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (state >> 11) as f64 / (1_u64 << 53) as f64
    };
    let mut years = "year,value\n".to_owned();
    let mut uneven = "decimal_year,value\n".to_owned();
    let mut days = "date,value\n".to_owned();
    let mut time = -998_000.0;
    let (mut year, mut month, mut day) = (1, 1, 1);
    for row in 0..ROWS {
        time += 0.01 + 1.9 * uniform();
        writeln!(years, "{},{:.6}", row as i64 - 998_000, uniform())?;
        writeln!(uneven, "{time:.4},{:.6}", uniform())?;
        writeln!(days, "{year:04}-{month:02}-{day:02},{:.6}", uniform())?;
        day += 1;
        if day > days_in_month(year, month) {
            (month, day) = (month + 1, 1);
        }
        if month > 12 {
            (year, month) = (year + 1, 1);
        }
    }
    fs::create_dir_all(folder)?;
    fs::write(folder.join("years.csv"), years)?;
    fs::write(folder.join("uneven.csv"), uneven)?;
    fs::write(folder.join("days.csv"), days)?;
    Ok(())
}

fn days_in_month(year: u32, month: u32) -> u32 {
    match month {
        2 if year.is_multiple_of(4) && (!year.is_multiple_of(100) || year.is_multiple_of(400)) => 29,
        2 => 28,
        4 | 6 | 9 | 11 => 30,
        _ => 31,
    }
}

/// Runs a cell as a notebook does and makes the text under each output; the last series shown.
fn run(session: &mut Session, cell: &str) -> Outcome<Option<ShownSeries>> {
    let reply = session.run_cell(cell, cell);
    if let Some(problem) = reply.problems.first().or(reply.waiting.first()) {
        return Err(format!("{cell}: {problem:?}").into());
    }
    let mut last = None;
    for output in reply.outputs {
        let shown = output.result.map_err(|problem| format!("{cell}: {problem:?}"))?;
        std::hint::black_box(display::text(&shown));
        last = if let Shown::Series(series) = shown { Some(series) } else { last };
    }
    Ok(last)
}

/// How long one task takes in a session of its own, in seconds, and what it gives.
fn ours(folder: &Path, task: &Task) -> Outcome<(f64, ShownSeries)> {
    let mut session = Session::new(folder);
    if !task.before.is_empty() {
        run(&mut session, task.before)?;
    }
    let began = Instant::now();
    let series = run(&mut session, task.cell)?;
    let taken = began.elapsed().as_secs_f64();
    Ok((taken, series.ok_or_else(|| format!("{} shows no series", task.cell))?))
}

/// The process that does the tasks with pandas and NumPy.
struct Theirs {
    folder: PathBuf,
    process: Child,
    questions: ChildStdin,
    answers: BufReader<ChildStdout>,
}

impl Theirs {
    fn start(folder: &Path) -> Outcome<Self> {
        let requirements = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference/requirements.txt");
        let python =
            python_environment::python("python_reference", &requirements, "compares with pandas and NumPy")?;
        let mut process = Command::new(python)
            .arg(Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/bench/workshop.py"))
            .arg(folder)
            // Settings of the machine for its linear algebra, which say nothing about the library as it comes.
            .env_remove("OPENBLAS_CORETYPE")
            .env_remove("OPENBLAS_L2_SIZE")
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()?;
        let (Some(questions), Some(answers)) = (process.stdin.take(), process.stdout.take()) else {
            return Err("the other process has no pipes".into());
        };
        Ok(Self { folder: folder.to_owned(), process, questions, answers: BufReader::new(answers) })
    }

    /// How long one task takes, in seconds.
    fn ask(&mut self, question: &str) -> Outcome<f64> {
        writeln!(self.questions, "{question}")?;
        let mut answer = String::new();
        self.answers.read_line(&mut answer)?;
        answer.trim().parse().map_err(|_| format!("{question} failed: {answer}").into())
    }

    /// The times and values of a task.
    fn numbers(&mut self, task: &Task) -> Outcome<Vec<f64>> {
        self.ask(&format!("write {}", task.function))?;
        let bytes = fs::read(self.folder.join("numbers"))?;
        Ok(bytes.as_chunks().0.iter().map(|bytes| f64::from_le_bytes(*bytes)).collect())
    }

    fn end(self) -> Outcome<()> {
        let Self { mut process, questions, .. } = self;
        drop(questions);
        process.wait()?;
        Ok(())
    }
}

/// The largest difference of two results, times and values, as a part of the number where that is above one.
fn difference(series: &ShownSeries, theirs: &[f64]) -> Outcome<f64> {
    let ours = series.axis.starts().iter().chain(&series.nominal);
    if ours.clone().count() != theirs.len() {
        return Err(format!("{} numbers beside {}", ours.count(), theirs.len()).into());
    }
    let apart = ours.zip(theirs).map(|(a, b)| (a - b).abs() / a.abs().max(1.0));
    // Neither has gaps, and a NaN that f64::max would pass over is no agreement.
    Ok(apart.map(|apart| if apart.is_nan() { f64::INFINITY } else { apart }).fold(0.0, f64::max))
}

fn median(mut numbers: Vec<f64>) -> f64 {
    numbers.sort_by(f64::total_cmp);
    numbers.get(numbers.len() / 2).copied().unwrap_or(f64::NAN)
}

fn main() -> Outcome<()> {
    // `cargo test --all-targets` runs benchmarks too, without this word.
    if !std::env::args().any(|word| word == "--bench") {
        return Ok(());
    }
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("workshop");
    write_files(&folder)?;
    let mut theirs = Theirs::start(&folder)?;
    let mut out = std::io::stdout().lock();
    writeln!(
        out,
        "{:44} {:32} {:>9} {:>9} {:>6}",
        "task, medians of turns", "beside", "ours", "theirs", "ratio"
    )?;
    for task in TASKS {
        let (_, series) = ours(&folder, task)?;
        let others = theirs.numbers(task)?;
        if let Some(tolerance) = task.tolerance {
            let most = difference(&series, &others).map_err(|error| format!("{}: {error}", task.name))?;
            if most > tolerance {
                return Err(format!("{}: the numbers differ by {most:e}", task.name).into());
            }
        }
        let mut turns = Vec::with_capacity(ROUNDS);
        for _ in 0..ROUNDS {
            turns.push((ours(&folder, task)?.0, theirs.ask(task.function)?));
        }
        writeln!(
            out,
            "{:44} {:32} {:6.0} ms {:6.0} ms {:6.2}",
            task.name,
            task.using,
            1e3 * median(turns.iter().map(|turn| turn.0).collect()),
            1e3 * median(turns.iter().map(|turn| turn.1).collect()),
            median(turns.iter().map(|turn| turn.0 / turn.1).collect())
        )?;
    }
    theirs.end()
}
