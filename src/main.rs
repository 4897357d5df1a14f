//! The command line.

use std::ffi::OsString;
use std::io::{IsTerminal, Read, Write};
use std::path::{Path, PathBuf};
use std::process::ExitCode;

use clap::{Parser, Subcommand, ValueEnum};

use rhythmite::lab::{self, Opening, Place};
use rhythmite::notebook::{CodeCell, FigureFormat, Media, Notebook, Report, Run};
use rhythmite::session::{OUTSIDE, Session};
use rhythmite::talk::{self, Ending, Progress};
use rhythmite::{catalogue, display, notebook};

/// Climate forcing time series: compose drivers, respond, attribute a record.
#[derive(Parser)]
#[command(name = "rhythmite", version, about)]
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Subcommand)]
enum Command {
    /// Run a script (.rhy) or a notebook (.ipynb) and print its results.
    Run {
        /// The script or notebook; it reads files in its own folder and below.
        file: PathBuf,
        /// How results are printed.
        #[arg(long, value_enum, default_value = "text")]
        format: Format,
        /// Write the results there instead of printing them; a run that is interrupted leaves the file as it was.
        #[arg(long)]
        out: Option<PathBuf>,
        /// A definition that wins over those of the program, such as "members = 500"; may be given more than once.
        #[arg(long, value_name = "DEFINITION")]
        define: Vec<String>,
        /// Write each series and bundle that is shown as a figure into this folder.
        #[arg(long, value_name = "FOLDER")]
        figures: Option<PathBuf>,
        /// The format of those figures; several are parted by commas.
        #[arg(
            long,
            value_enum,
            value_name = "FORMAT",
            value_delimiter = ',',
            default_value = "svg",
            requires = "figures"
        )]
        figures_as: Vec<FiguresAs>,
        /// Put figures into the notebook as PNG, too, for pages that show no SVG; for `--format ipynb`.
        #[arg(long)]
        png: bool,
        /// How many threads to use; all processors by default. The numbers are the same for any.
        #[arg(long)]
        threads: Option<usize>,
        /// The largest input file that is read, in MiB.
        #[arg(long, default_value_t = 256)]
        file_limit: u64,
    },
    /// Serve Jupyter front ends; what Jupyter calls with its connection file.
    #[cfg(unix)]
    Kernel {
        /// The connection file.
        connection: PathBuf,
        /// Send figures as PNG, too, for pages that show no SVG.
        #[arg(long)]
        png: bool,
    },
    /// Talk in the terminal: type expressions and see them at once; lines can be piped in, too.
    Talk {
        /// The folder whose files may be read, and those below.
        #[arg(default_value = ".")]
        folder: PathBuf,
        /// How many threads to use; all processors by default. The numbers are the same for any.
        #[arg(long)]
        threads: Option<usize>,
        /// The largest input file that is read, in MiB.
        #[arg(long, default_value_t = 256)]
        file_limit: u64,
    },
    /// Make the kernel and the lab extension known to Jupyter, or take them away again.
    Enrol {
        /// For this user, in the data folder of Jupyter; this is the default.
        #[arg(long, conflicts_with = "prefix")]
        user: bool,
        /// For an environment: below FOLDER/share/jupyter.
        #[arg(long, value_name = "FOLDER")]
        prefix: Option<PathBuf>,
        /// Take away what was written there.
        #[arg(long)]
        remove: bool,
    },
    /// Open a folder in JupyterLab with the kernel ready; where no JupyterLab is installed, an environment is made once.
    Lab {
        /// The folder.
        #[arg(default_value = ".")]
        folder: PathBuf,
        /// The port of the server.
        #[arg(long, value_name = "NUMBER")]
        port: Option<u16>,
        /// Open no browser: the server prints its address.
        #[arg(long)]
        no_browser: bool,
        /// What is handed on to JupyterLab, after `--`.
        #[arg(last = true, value_name = "ARGUMENT")]
        others: Vec<OsString>,
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
    /// The notebook with its outputs.
    Ipynb,
}

#[derive(Clone, Copy, PartialEq, Eq, ValueEnum)]
enum FiguresAs {
    /// For pages of the web.
    Svg,
    /// For papers.
    Pdf,
    /// For slides: 288 pixels to the inch.
    Png,
}

/// The longest script or notebook that is read, in bytes: a device in its place must not fill the memory.
const PROGRAM_LIMIT: u64 = 64 << 20;

/// How many bytes of values are remembered.
const MEMORY: usize = 512 * 1024 * 1024;

/// The program ran and every result is there.
const SUCCESS: u8 = 0;
/// Something in the program is wrong.
const WRONG_PROGRAM: u8 = 1;
/// The command line is wrong, or a file it names cannot be read or written.
const WRONG_CALL: u8 = 2;

fn main() -> ExitCode {
    let arguments = Arguments::parse();
    let code = match arguments.command {
        Command::Run { file, format, out, define, figures, figures_as, png, threads, file_limit } => {
            let folder = file.parent().filter(|folder| !folder.as_os_str().is_empty());
            let folder = folder.unwrap_or(Path::new(".")).to_owned();
            let limit = file_limit.saturating_mul(1024 * 1024);
            let session = Session::with_limits(&folder, threads, MEMORY, limit);
            let formats = figures_as.into_iter().map(|format| match format {
                FiguresAs::Svg => FigureFormat::Svg,
                FiguresAs::Pdf => FigureFormat::Pdf,
                FiguresAs::Png => FigureFormat::Png,
            });
            let figures = figures.map(|folder| (folder, formats.collect()));
            let wanted = Wanted { folder, format, out, figures, media: Media { png } };
            run(session, &file, &wanted, &define)
        }
        Command::Talk { folder, threads, file_limit } => {
            talk_in(&folder, threads, MEMORY, file_limit.saturating_mul(1024 * 1024))
        }
        Command::Enrol { user: _, prefix, remove } => enrol(prefix, remove),
        Command::Lab { folder, port, no_browser, others } => {
            open_lab(&Opening { folder, port, no_browser, others })
        }
        Command::Explain { name } => explain(&name),
        #[cfg(unix)]
        Command::Kernel { connection, png } => serve(&connection, Media { png }),
    };
    ExitCode::from(code)
}

/// Serve Jupyter front ends; files are read in the folder where Jupyter starts the program, the notebook's own.
#[cfg(unix)]
fn serve(connection: &Path, media: Media) -> u8 {
    match rhythmite::kernel::serve(connection, Session::new("."), media) {
        Ok(()) => 0,
        Err(refusal) => {
            complain(&format!("{refusal}\n"));
            2
        }
    }
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

fn enrol(prefix: Option<PathBuf>, remove: bool) -> u8 {
    let place = prefix.map_or(Place::User, Place::Prefix);
    let done = if remove {
        lab::withdraw(&place)
    } else {
        lab::running_program().and_then(|program| lab::enrol(&place, &program))
    };
    match done {
        Ok(lines) if lines.is_empty() => {
            print("kernel and lab extension were enrolled already, as they are\n");
            SUCCESS
        }
        Ok(lines) => {
            print(&(lines.join("\n") + "\n"));
            SUCCESS
        }
        Err(why) => {
            complain(&format!("{why}\n"));
            WRONG_CALL
        }
    }
}

fn open_lab(opening: &Opening) -> u8 {
    let opened = lab::running_program()
        .and_then(|program| lab::open(opening, &program, &mut |line| complain(&format!("{line}\n"))));
    match opened {
        Ok(code) => u8::try_from(code).unwrap_or(WRONG_PROGRAM),
        Err(why) => {
            complain(&format!("{why}\n"));
            WRONG_CALL
        }
    }
}

fn talk_in(folder: &Path, threads: Option<usize>, memory: usize, file_limit: u64) -> u8 {
    if !folder.is_dir() {
        complain(&format!("{} is no folder\n", folder.display()));
        return WRONG_CALL;
    }
    let session = Session::with_limits(folder, threads, memory, file_limit);
    match talk::talk(session, folder) {
        Ok(Ending::Well) => SUCCESS,
        Ok(Ending::Failed) => WRONG_PROGRAM,
        Err(error) => {
            complain(&format!("the terminal cannot be read: {error}\n"));
            WRONG_CALL
        }
    }
}

/// What is run: a script is one cell.
enum Program {
    Script(CodeCell),
    Notebook(Notebook),
}

impl Program {
    fn cells(&self) -> &[CodeCell] {
        match self {
            Self::Script(script) => std::slice::from_ref(script),
            Self::Notebook(notebook) => notebook.code_cells(),
        }
    }
}

/// Read a script or a notebook; the error is a sentence for people.
fn read(file: &Path) -> Result<Program, String> {
    let named = |what: String| format!("{} {what}", file.display());
    let mut bytes = Vec::new();
    std::fs::File::open(file)
        .and_then(|open| open.take(PROGRAM_LIMIT + 1).read_to_end(&mut bytes))
        .map_err(|error| named(format!("cannot be read: {error}")))?;
    let is_notebook = file.extension().is_some_and(|extension| extension.eq_ignore_ascii_case("ipynb"));
    if bytes.len() as u64 > PROGRAM_LIMIT {
        let what = if is_notebook { "notebook" } else { "script" };
        return Err(named(format!("is longer than any {what}: more than {} MiB", PROGRAM_LIMIT >> 20)));
    }
    if is_notebook {
        return Notebook::read(&bytes).map(Program::Notebook).map_err(|error| named(error.to_string()));
    }
    let source = String::from_utf8(bytes).map_err(|error| {
        let at = error.utf8_error().valid_up_to();
        named(format!("is not UTF-8: the first wrong byte is number {}", at + 1))
    })?;
    let name = file.file_name().map_or_else(|| "script".into(), |name| name.to_string_lossy().into_owned());
    Ok(Program::Script(CodeCell { index: 0, id: name.clone(), name, source }))
}

/// What a run is asked for.
struct Wanted {
    /// The folder of the program, from which it reads files.
    folder: PathBuf,
    format: Format,
    out: Option<PathBuf>,
    /// Where figures are written, and as what.
    figures: Option<(PathBuf, Vec<FigureFormat>)>,
    media: Media,
}

fn run(mut session: Session, file: &Path, wanted: &Wanted, define: &[String]) -> u8 {
    let format = wanted.format;
    let program = match read(file) {
        Ok(program) => program,
        Err(why) => {
            complain(&format!("{why}\n"));
            return WRONG_CALL;
        }
    };
    if format == Format::Ipynb && matches!(program, Program::Script(_)) {
        complain("a script has no cells to write outputs into: `--format ipynb` is for notebooks (.ipynb)\n");
        return WRONG_CALL;
    }
    if wanted.media.png && format != Format::Ipynb {
        complain(
            "`--png` is for `--format ipynb`; figures are written into a folder by `--figures FOLDER --figures-as png`\n",
        );
        return WRONG_CALL;
    }
    if let Some(why) = wanted.out.as_deref().and_then(|out| unfit(out, file, format)) {
        complain(&format!("{why}\n"));
        return WRONG_CALL;
    }
    session.name_cell(OUTSIDE, "--define");
    if let Err(problems) = session.define_from_outside(define) {
        for problem in problems {
            complain(&display::diagnostic(&problem, &|id| session.source(id), false));
        }
        return WRONG_CALL;
    }
    let progress = Progress::begin();
    let ran = Run::of(&mut session, program.cells());
    progress.end();
    let printed = match (format, &program) {
        (Format::Text, _) => {
            let colour = wanted.out.is_none()
                && std::io::stdout().is_terminal()
                && std::env::var_os("NO_COLOR").is_none();
            let mut report = Report::new(colour, true);
            report.add_run(&session, &ran, matches!(program, Program::Notebook(_)));
            report.take()
        }
        (Format::Ipynb, Program::Notebook(notebook)) => {
            // No cell of the notebook is theirs.
            let mut report = Report::new(false, true);
            report.add(&session, &ran.outside);
            complain(&report.take());
            notebook.with_outputs(&session, &ran, wanted.media)
        }
        (Format::Json | Format::Ipynb, _) => {
            let json = notebook::run_to_json(&session, &ran);
            serde_json::to_string_pretty(&json).unwrap_or_default() + "\n"
        }
    };
    let inputs: Vec<PathBuf> =
        session.inputs().into_iter().map(|(input, _)| wanted.folder.join(input)).collect();
    let failed = match &wanted.out {
        None => {
            print(&printed);
            None
        }
        Some(path) => write(path, printed.as_bytes(), &inputs).err(),
    };
    let failed = failed.or_else(|| {
        let (folder, formats) = wanted.figures.as_ref()?;
        write_figures(folder, formats, &ran, &[&inputs[..], &[file.to_owned()]].concat()).err()
    });
    if let Some(why) = failed {
        complain(&format!("{why}\n"));
        return WRONG_CALL;
    }
    if ran.failed() { WRONG_PROGRAM } else { SUCCESS }
}

/// Why results cannot go to `out`, as far as that is known before the program is run: nobody waits for a result that
/// has nowhere to go.
fn unfit(out: &Path, program: &Path, format: Format) -> Option<String> {
    // A notebook with its outputs takes the place of the notebook: all else in it stays.
    if format != Format::Ipynb && notebook::same_file(out, program) {
        return Some(format!("{} is the program itself: name another file for its results", out.display()));
    }
    if out.is_dir() {
        return Some(format!("{} is a folder: name a file in it", out.display()));
    }
    let folder = out.parent().filter(|folder| !folder.as_os_str().is_empty())?;
    (!folder.is_dir())
        .then(|| format!("{} cannot be written: there is no folder {}", out.display(), folder.display()))
}

/// Write one file of results as a whole; the error is a sentence for people.
fn write(path: &Path, contents: &[u8], spared: &[PathBuf]) -> Result<(), String> {
    if spared.iter().any(|other| notebook::same_file(path, other)) {
        return Err(format!(
            "{} was read for these results, and nothing was written over it: name another file",
            path.display()
        ));
    }
    notebook::write_whole(path, contents)
        .map_err(|error| format!("{} cannot be written: {error}", path.display()))
}

/// Write what is drawn of the results into a folder, which is made where there is none, and say so. `spared` are files
/// that no figure is written over.
fn write_figures(
    folder: &Path,
    formats: &[FigureFormat],
    ran: &Run,
    spared: &[PathBuf],
) -> Result<(), String> {
    let files = notebook::figure_files(ran.cells.iter().flat_map(|(_, reply)| &reply.outputs), formats);
    std::fs::create_dir_all(folder)
        .map_err(|error| format!("figures cannot be written into {}: {error}", folder.display()))?;
    for file in &files {
        let path = folder.join(&file.name);
        write(&path, &file.contents, spared)?;
        complain(&format!("wrote {}\n", path.display()));
    }
    if files.is_empty() {
        complain("no series or bundle is shown, so that no figure was written\n");
    }
    Ok(())
}
