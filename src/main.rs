//! The command line.

use std::io::{IsTerminal, Read, Write};
use std::path::PathBuf;
use std::process::ExitCode;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

use clap::{Parser, Subcommand, ValueEnum};

use rhythmite::session::Session;
use rhythmite::{catalogue, notebook};

/// Climate forcing time series: compose drivers, respond, attribute a record.
#[derive(Parser)]
#[command(name = "rhythmite", version, about)]
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Subcommand)]
enum Command {
    /// Run a script (.rhy) and print its results.
    Run {
        /// The script; it reads files in its own folder and below.
        file: PathBuf,
        /// How results are printed.
        #[arg(long, value_enum, default_value = "text")]
        format: Format,
        /// Write the results there instead of printing them.
        #[arg(long)]
        out: Option<PathBuf>,
        /// Write each series and bundle that is shown as a figure (SVG) into this folder.
        #[arg(long, value_name = "FOLDER")]
        figures: Option<PathBuf>,
        /// How many threads to use; all processors by default. The numbers are the same for any.
        #[arg(long)]
        threads: Option<usize>,
        /// The largest input file that is read, in MiB.
        #[arg(long, default_value_t = 256)]
        file_limit: u64,
    },
    /// Print the help of one function.
    Explain {
        /// Its name, or the sign of an operator.
        name: String,
    },
}

#[derive(Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Format {
    /// Lines and tables.
    Text,
    /// One JSON object.
    Json,
}

/// The longest script that is read, in bytes: a device as the script must not fill the memory.
const SCRIPT_LIMIT: u64 = 64 << 20;

/// The program ran and every result is there.
const SUCCESS: u8 = 0;
/// Something in the program is wrong.
const WRONG_PROGRAM: u8 = 1;
/// The command line is wrong, or a file it names cannot be read or written.
const WRONG_CALL: u8 = 2;

fn main() -> ExitCode {
    let arguments = Arguments::parse();
    let code = match arguments.command {
        Command::Run { file, format, out, figures, threads, file_limit } => {
            let (session_limit, memory) = (file_limit.saturating_mul(1024 * 1024), 512 * 1024 * 1024);
            run(&file, format, out.as_deref(), figures.as_deref(), threads, memory, session_limit)
        }
        Command::Explain { name } => explain(&name),
    };
    ExitCode::from(code)
}

/// Print to standard output; a reader that has gone (`| head`) is no mistake.
fn print(text: &str) {
    let mut out = std::io::stdout().lock();
    let _ = out.write_all(text.as_bytes());
    let _ = out.flush();
}

fn complain(text: &str) {
    let mut out = std::io::stderr().lock();
    let _ = out.write_all(text.as_bytes());
}

fn explain(name: &str) -> u8 {
    match catalogue::find(name) {
        Some(entry) => {
            print(&catalogue::explain(entry));
            SUCCESS
        }
        None => {
            let near = catalogue::nearest_function(name);
            let names: Vec<&str> = catalogue::entries().map(|entry| entry.name).collect();
            complain(&match near {
                Some(near) => format!("there is no function `{name}`; did you mean `{near}`?\n"),
                None => format!("there is no function `{name}`; there are {}\n", names.join(", ")),
            });
            WRONG_CALL
        }
    }
}

fn run(
    file: &std::path::Path,
    format: Format,
    out: Option<&std::path::Path>,
    figures: Option<&std::path::Path>,
    threads: Option<usize>,
    memory: usize,
    file_limit: u64,
) -> u8 {
    if file.extension().is_some_and(|extension| extension == "ipynb") {
        complain("this version runs scripts (.rhy); copy the cells of the notebook into one\n");
        return WRONG_CALL;
    }
    let mut bytes = Vec::new();
    let read = std::fs::File::open(file).and_then(|open| open.take(SCRIPT_LIMIT + 1).read_to_end(&mut bytes));
    if let Err(error) = read {
        complain(&format!("{} cannot be read: {error}\n", file.display()));
        return WRONG_CALL;
    }
    if bytes.len() as u64 > SCRIPT_LIMIT {
        complain(&format!(
            "{} is longer than any script: more than {} MiB\n",
            file.display(),
            SCRIPT_LIMIT >> 20
        ));
        return WRONG_CALL;
    }
    let text = match String::from_utf8(bytes) {
        Ok(text) => text,
        Err(error) => {
            let at = error.utf8_error().valid_up_to();
            complain(&format!(
                "{} is not UTF-8: the first wrong byte is number {}\n",
                file.display(),
                at + 1
            ));
            return WRONG_CALL;
        }
    };
    let folder =
        file.parent().filter(|folder| !folder.as_os_str().is_empty()).unwrap_or(std::path::Path::new("."));
    let name = file.file_name().map_or_else(|| "script".into(), |name| name.to_string_lossy().into_owned());
    let mut session = Session::with_limits(folder, threads, memory, file_limit);
    let progress = Progress::begin();
    let reply = session.run_cell(&name, &text);
    progress.end();
    let failed = !reply.problems.is_empty()
        || !reply.waiting.is_empty()
        || reply.outputs.iter().any(|output| output.result.is_err());
    let drawn = figures.map(|folder| (folder, notebook::figure_files(&reply.outputs)));
    let printed = match format {
        Format::Text => {
            let colour =
                out.is_none() && std::io::stdout().is_terminal() && std::env::var_os("NO_COLOR").is_none();
            let mut report = notebook::Report::new(colour, true);
            report.add(&session, &reply);
            report.take()
        }
        Format::Json => {
            let json = notebook::run_to_json(&session, &[(0, reply)]);
            serde_json::to_string_pretty(&json).unwrap_or_default() + "\n"
        }
    };
    match out {
        None => print(&printed),
        Some(path) => {
            if let Err(error) = std::fs::write(path, printed) {
                complain(&format!("{} cannot be written: {error}\n", path.display()));
                return WRONG_CALL;
            }
        }
    }
    if let Some((folder, files)) = drawn
        && let Err(error) = write_figures(folder, &files)
    {
        complain(&format!("figures cannot be written into {}: {error}\n", folder.display()));
        return WRONG_CALL;
    }
    if failed { WRONG_PROGRAM } else { SUCCESS }
}

/// Write figures into a folder, which is made where there is none, and say so.
fn write_figures(folder: &std::path::Path, files: &[notebook::FigureFile]) -> std::io::Result<()> {
    std::fs::create_dir_all(folder)?;
    for file in files {
        std::fs::write(folder.join(&file.name), &file.svg)?;
        complain(&format!("wrote {}\n", folder.join(&file.name).display()));
    }
    if files.is_empty() {
        complain("no series or bundle is shown, so that no figure was written\n");
    }
    Ok(())
}

/// A line on standard error that says how long a run has taken, on a terminal and after half a second.
struct Progress {
    done: Arc<AtomicBool>,
    ticker: Option<std::thread::JoinHandle<()>>,
}

impl Progress {
    fn begin() -> Self {
        let done = Arc::new(AtomicBool::new(false));
        if !std::io::stderr().is_terminal() {
            return Self { done, ticker: None };
        }
        let flag = done.clone();
        let ticker = std::thread::spawn(move || {
            let began = Instant::now();
            let mut shown = false;
            while !flag.load(Ordering::Relaxed) {
                std::thread::sleep(Duration::from_millis(100));
                if began.elapsed() > Duration::from_millis(500) && !flag.load(Ordering::Relaxed) {
                    shown = true;
                    complain(&format!(
                        "\rcomputing, {:.1} s; Ctrl-C stops it",
                        began.elapsed().as_secs_f64()
                    ));
                }
            }
            if shown {
                complain("\r\x1b[K");
            }
        });
        Self { done, ticker: Some(ticker) }
    }

    fn end(self) {
        self.done.store(true, Ordering::Relaxed);
        if let Some(ticker) = self.ticker {
            let _ = ticker.join();
        }
    }
}
