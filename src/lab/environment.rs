//! An environment with JupyterLab in pinned versions, made once where no JupyterLab is installed.

use std::fs::{self, File};
use std::io::{BufRead, BufReader, Read};
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use super::Refusal;
use super::places::own_environment;

/// What is installed. JupyterLab is the first of them.
const REQUIREMENTS: &str = include_str!("assets/requirements.txt");

/// Written last, so that an environment that was left half made is made anew.
const MARK: &str = "installed.txt";

/// How often a long installation says that it goes on.
const PROGRESS: Duration = Duration::from_secs(5);

/// An environment that is ready.
pub(super) struct Environment {
    /// Its folder.
    pub(super) prefix: PathBuf,
    /// Its Python.
    pub(super) python: PathBuf,
}

/// The environment, which is made if it is not there.
///
/// # Errors
/// No Python 3.10 or newer with venv, no package registry to be reached, no room.
pub(super) fn environment(say: &mut dyn FnMut(&str)) -> Result<Environment, Refusal> {
    let prefix = own_environment()?;
    let python = if cfg!(windows) {
        prefix.join("Scripts").join("python.exe")
    } else {
        prefix.join("bin").join("python")
    };
    let ready = Environment { prefix, python };
    if ready.is_whole() {
        return Ok(ready);
    }
    // Two that begin at the same time: the second waits, and finds it made.
    let folder = ready.prefix.parent().unwrap_or(&ready.prefix).to_owned();
    let lock = fs::create_dir_all(&folder).and_then(|()| File::create(folder.join("making.lock"))).and_then(
        |lock| {
            lock.lock()?;
            Ok(lock)
        },
    );
    let _lock =
        lock.map_err(|error| Refusal::new(format!("{} cannot be written: {error}", folder.display())))?;
    if !ready.is_whole() {
        ready.make(say)?;
    }
    Ok(ready)
}

impl Environment {
    fn is_whole(&self) -> bool {
        fs::read_to_string(self.prefix.join(MARK)).is_ok_and(|installed| installed == REQUIREMENTS)
            // The Python that it was made with may have gone since.
            && Command::new(&self.python).arg("--version").output().is_ok_and(|run| run.status.success())
    }

    fn make(&self, say: &mut dyn FnMut(&str)) -> Result<(), Refusal> {
        let lab = REQUIREMENTS.lines().next().unwrap_or_default().replace("==", " ");
        say(&format!("making an environment with {lab} in {}; this is done once", self.prefix.display()));
        let python = system_python()?;
        let made = Command::new(python).args(["-m", "venv", "--clear"]).arg(&self.prefix).output();
        let made = made.map_err(|error| Refusal::new(format!("`{python}` does not start: {error}")))?;
        if !made.status.success() {
            let said =
                String::from_utf8_lossy(&made.stdout).into_owned() + &String::from_utf8_lossy(&made.stderr);
            return Err(Refusal::new(format!(
                "`{python} -m venv` cannot make an environment in {}; on Debian and Ubuntu its module venv is the package python3-venv. It said:\n{}",
                self.prefix.display(),
                last_lines(&said)
            )));
        }
        let list = self.prefix.join("requirements.txt");
        let write = |path: &Path, text: &str| {
            fs::write(path, text)
                .map_err(|error| Refusal::new(format!("{} cannot be written: {error}", path.display())))
        };
        write(&list, REQUIREMENTS)?;
        say(
            "fetching JupyterLab and what it needs from the package registry of Python; this takes a minute or two",
        );
        self.install(&list, say)?;
        write(&self.prefix.join(MARK), REQUIREMENTS)?;
        say("the environment is ready");
        Ok(())
    }

    fn install(&self, list: &Path, say: &mut dyn FnMut(&str)) -> Result<(), Refusal> {
        let mut pip = Command::new(&self.python)
            .args([
                "-m",
                "pip",
                "install",
                "--disable-pip-version-check",
                "--progress-bar",
                "off",
                "--no-input",
            ])
            .arg("--requirement")
            .arg(list)
            .stdin(Stdio::null())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .map_err(|error| Refusal::new(format!("pip does not start: {error}")))?;
        // Read beside its lines of progress, so that neither pipe fills.
        let complaints = pip.stderr.take().map(|mut pipe| {
            std::thread::spawn(move || {
                let mut text = Vec::new();
                let _ = pipe.read_to_end(&mut text);
                String::from_utf8_lossy(&text).into_owned()
            })
        });
        let (mut packages, mut said) = (0, Instant::now());
        for line in
            pip.stdout.take().into_iter().flat_map(|pipe| BufReader::new(pipe).lines().map_while(Result::ok))
        {
            if line.starts_with("Installing collected packages") {
                say(&format!("installing {packages} packages"));
            } else if line.starts_with("Collecting ") {
                packages += 1;
                if said.elapsed() > PROGRESS {
                    say(&format!("{packages} packages so far"));
                    said = Instant::now();
                }
            }
        }
        let complaints = complaints.and_then(|thread| thread.join().ok()).unwrap_or_default();
        match pip.wait() {
            Ok(status) if status.success() => Ok(()),
            _ => Err(Refusal::new(format!(
                "JupyterLab could not be installed: the package registry of Python must be reached once (pip's own settings, such as PIP_INDEX_URL, hold). Pip said:\n{}",
                last_lines(&complaints)
            ))),
        }
    }
}

/// The Python of this machine that environments are made with.
fn system_python() -> Result<&'static str, Refusal> {
    const NEW_ENOUGH: &str = "import sys; sys.exit(sys.version_info < (3, 10))";
    let runs = |name: &&str| {
        let run = Command::new(name).args(["-c", NEW_ENOUGH]).stdin(Stdio::null()).output();
        run.is_ok_and(|run| run.status.success())
    };
    ["python3", "python"].into_iter().find(runs).ok_or_else(|| {
        Refusal::new(
            "neither JupyterLab 4 nor Python 3.10 or newer (`python3`) was found on PATH: install one of them. Notebooks run without Jupyter, too: `rhythmite run FILE.ipynb`",
        )
    })
}

fn last_lines(text: &str) -> String {
    let lines: Vec<&str> = text.lines().filter(|line| !line.trim().is_empty()).collect();
    let from = lines.len().saturating_sub(6);
    lines.iter().skip(from).map(|line| format!("  {line}")).collect::<Vec<_>>().join("\n")
}
