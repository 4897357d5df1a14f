//! What `enrol` and `lab` write, start and leave alone.

use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use rhythmite::catalogue::{self, Room};
use rhythmite::lab;
use rhythmite::language::{KEYWORDS, KeywordRole};
use rhythmite::value::{Era, unit_spellings};
use serde_json::Value as Json;

const PROGRAM: &str = env!("CARGO_BIN_EXE_rhythmite");

/// An empty folder of this test's own.
fn folder(name: &str) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("lab").join(name);
    let _ = fs::remove_dir_all(&folder);
    fs::create_dir_all(&folder).unwrap();
    folder
}

/// A command for which `home` is all that the user has.
fn command(program: impl AsRef<std::ffi::OsStr>, home: &Path) -> Command {
    let mut command = Command::new(program);
    command.env("HOME", home).env_remove("JUPYTER_DATA_DIR").env_remove("XDG_DATA_HOME");
    command
}

fn run(command: &mut Command) -> (Option<i32>, String, String) {
    let Output { status, stdout, stderr } = command.output().unwrap();
    (status.code(), String::from_utf8(stdout).unwrap(), String::from_utf8(stderr).unwrap())
}

/// Every file below a folder, by its path from there.
fn files(folder: &Path) -> BTreeSet<String> {
    fn collect(root: &Path, folder: &Path, found: &mut BTreeSet<String>) {
        for entry in fs::read_dir(folder).into_iter().flatten() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                collect(root, &path, found);
            } else {
                found.insert(path.strip_prefix(root).unwrap().display().to_string());
            }
        }
    }
    let mut found = BTreeSet::new();
    collect(folder, folder, &mut found);
    found
}

fn json(path: &Path) -> Json {
    serde_json::from_slice(&fs::read(path).unwrap()).unwrap()
}

#[test]
fn a_prefix_gets_a_kernelspec_that_starts_this_program_and_an_extension_that_names_its_script() {
    let prefix = folder("prefix");
    let (code, out, err) = run(command(PROGRAM, &prefix).arg("enrol").arg("--prefix").arg(&prefix));
    assert_eq!((code, err.as_str()), (Some(0), ""));
    let data = prefix.join("share/jupyter");
    let spec = json(&data.join("kernels/rhythmite/kernel.json"));
    let program = fs::canonicalize(PROGRAM).unwrap();
    assert_eq!(spec["argv"], serde_json::json!([program.to_str().unwrap(), "kernel", "{connection_file}"]));
    assert_eq!(spec["display_name"], "Rhythmite");
    assert_eq!(spec["language"], "rhythmite");
    assert_eq!(spec["interrupt_mode"], "message");
    for logo in ["logo-svg.svg", "logo-64x64.png", "logo-32x32.png"] {
        assert!(data.join("kernels/rhythmite").join(logo).is_file(), "{logo}");
    }
    let package = json(&data.join("labextensions/rhythmite/package.json"));
    assert_eq!(package["name"], "rhythmite");
    let script = package["jupyterlab"]["_build"]["load"].as_str().unwrap();
    let script = fs::read_to_string(data.join("labextensions/rhythmite").join(script)).unwrap();
    assert_eq!(script, lab::script());
    let lines: Vec<&str> = out.lines().collect();
    assert_eq!(lines.len(), 3, "{out}");
    assert!(lines[0].starts_with(&format!("wrote the kernel {}", data.display())), "{out}");
    assert!(lines[1].starts_with("wrote the lab extension "), "{out}");
    assert!(lines[2].starts_with("note: ") && lines[2].contains("build folder"), "{out}");
}

#[test]
fn the_user_folder_is_where_jupyter_looks_for_it() {
    let home = folder("user");
    let there = |folder: &str| home.join(folder).join("kernels/rhythmite/kernel.json").is_file();
    assert_eq!(
        run(command(PROGRAM, &home).arg("enrol").env("JUPYTER_DATA_DIR", home.join("named"))).0,
        Some(0)
    );
    assert!(there("named"));
    if cfg!(all(unix, not(target_os = "macos"))) {
        assert_eq!(run(command(PROGRAM, &home).args(["enrol", "--user"])).0, Some(0));
        assert!(there(".local/share/jupyter"));
        // A variable that is set to nothing is not set.
        let mut enrol = command(PROGRAM, &home);
        enrol.arg("enrol").env("XDG_DATA_HOME", home.join("data")).env("JUPYTER_DATA_DIR", "");
        assert_eq!(run(&mut enrol).0, Some(0));
        assert!(there("data/jupyter"));
    }
}

#[test]
fn user_and_prefix_are_one_or_the_other() {
    let home = folder("both");
    assert_eq!(run(command(PROGRAM, &home).args(["enrol", "--user", "--prefix", "x"])).0, Some(2));
}

#[test]
fn what_was_enrolled_is_not_written_again_and_is_removed_without_a_trace() {
    let prefix = folder("again");
    let enrol =
        |more: &[&str]| run(command(PROGRAM, &prefix).arg("enrol").arg("--prefix").arg(&prefix).args(more));
    enrol(&[]);
    let before = files(&prefix);
    assert_eq!(before.len(), 9, "{before:?}");
    assert_eq!(enrol(&[]).1, "kernel and lab extension were enrolled already, as they are\n");
    assert_eq!(files(&prefix), before);
    let (code, out, _) = enrol(&["--remove"]);
    assert_eq!(code, Some(0));
    assert_eq!(out.lines().filter(|line| line.starts_with("removed the ")).count(), 2, "{out}");
    assert_eq!(files(&prefix), BTreeSet::new());
    assert!(!prefix.join("share/jupyter/kernels/rhythmite").exists());
    assert!(!prefix.join("share/jupyter/labextensions/rhythmite").exists());
    let (code, out, _) = enrol(&["--remove"]);
    assert_eq!(code, Some(0));
    assert!(out.starts_with("nothing was enrolled in "), "{out}");
}

#[test]
fn an_older_enrolment_is_replaced_and_leaves_nothing_behind() {
    let prefix = folder("older");
    let data = prefix.join("share/jupyter");
    let extension = data.join("labextensions/rhythmite");
    fs::create_dir_all(extension.join("static")).unwrap();
    fs::write(extension.join("static/remoteEntry.old.js"), "old").unwrap();
    fs::write(extension.join("package.json"), "old").unwrap();
    let receipt = r#"{"by": "rhythmite enrol", "files": ["static/remoteEntry.old.js", "package.json"]}"#;
    fs::write(extension.join("enrolled.json"), receipt).unwrap();
    assert_eq!(run(command(PROGRAM, &prefix).arg("enrol").arg("--prefix").arg(&prefix)).0, Some(0));
    assert!(!extension.join("static/remoteEntry.old.js").exists());
    assert_eq!(json(&extension.join("package.json"))["name"], "rhythmite");
    let spare: Vec<String> = files(&prefix).into_iter().filter(|name| name.ends_with(".part")).collect();
    assert!(spare.is_empty(), "{spare:?}");
}

#[test]
fn a_file_that_is_not_ours_is_neither_written_over_nor_removed() {
    let prefix = folder("foreign");
    let kernel = prefix.join("share/jupyter/kernels/rhythmite");
    fs::create_dir_all(&kernel).unwrap();
    fs::write(kernel.join("kernel.json"), "mine").unwrap();
    let enrol =
        |more: &[&str]| run(command(PROGRAM, &prefix).arg("enrol").arg("--prefix").arg(&prefix).args(more));
    let (code, out, err) = enrol(&[]);
    assert_eq!((code, out.as_str()), (Some(2), ""));
    assert!(err.contains("kernel.json is there already and was not written by `rhythmite enrol`"), "{err}");
    // Not even the extension was written.
    assert_eq!(files(&prefix).len(), 1);
    assert!(enrol(&["--remove"]).1.starts_with("left "));
    assert_eq!(fs::read_to_string(kernel.join("kernel.json")).unwrap(), "mine");

    fs::remove_file(kernel.join("kernel.json")).unwrap();
    fs::write(kernel.join("notes.txt"), "mine").unwrap();
    assert_eq!(enrol(&[]).0, Some(0));
    let (_, out, _) = enrol(&["--remove"]);
    assert!(out.contains("but for files in it that are not ours"), "{out}");
    assert_eq!(files(&prefix), BTreeSet::from(["share/jupyter/kernels/rhythmite/notes.txt".to_owned()]));
}

#[test]
fn a_receipt_that_leads_out_of_its_folder_removes_nothing() {
    let prefix = folder("receipt");
    let kernel = prefix.join("share/jupyter/kernels/rhythmite");
    fs::create_dir_all(&kernel).unwrap();
    fs::write(prefix.join("precious.txt"), "mine").unwrap();
    for files in [r#"["../../../../precious.txt"]"#, r#"["/precious.txt"]"#, "17", r#"[""]"#] {
        fs::write(kernel.join("enrolled.json"), format!(r#"{{"files": {files}}}"#)).unwrap();
        let (code, _, err) =
            run(command(PROGRAM, &prefix).arg("enrol").arg("--prefix").arg(&prefix).arg("--remove"));
        assert_eq!(code, Some(2), "{files}");
        assert!(err.contains("enrolled.json is not as `rhythmite enrol` writes it"), "{err}");
    }
    assert!(prefix.join("precious.txt").is_file());
}

#[test]
fn a_program_whose_path_holds_odd_characters_is_enrolled_as_it_is() {
    let prefix = folder("odd");
    let odd = prefix.join("a \"quoted\" ‘µ’ $HOME {folder} \\ path");
    fs::create_dir_all(&odd).unwrap();
    let program = odd.join("rhythmite");
    fs::hard_link(PROGRAM, &program).or_else(|_| fs::copy(PROGRAM, &program).map(|_| ())).unwrap();
    let (code, _, err) = run(command(&program, &prefix).arg("enrol").arg("--prefix").arg(&prefix));
    assert_eq!(code, Some(0), "{err}");
    let spec = json(&prefix.join("share/jupyter/kernels/rhythmite/kernel.json"));
    assert_eq!(spec["argv"][0].as_str().unwrap(), program.to_str().unwrap());
}

#[test]
fn a_program_whose_path_jupyter_would_change_is_refused() {
    let prefix = folder("braces");
    let odd = prefix.join("{prefix}");
    fs::create_dir_all(&odd).unwrap();
    let program = odd.join("rhythmite");
    fs::hard_link(PROGRAM, &program).or_else(|_| fs::copy(PROGRAM, &program).map(|_| ())).unwrap();
    let (code, _, err) = run(command(&program, &prefix).arg("enrol").arg("--prefix").arg(&prefix));
    assert_eq!(code, Some(2));
    assert!(err.contains("`{prefix}`"), "{err}");
}

#[test]
fn a_place_that_cannot_be_written_is_named() {
    let prefix = folder("unwritable");
    // A file stands where a folder is needed: this fails for every user, the one who may do all included.
    fs::write(prefix.join("share"), "").unwrap();
    let (code, _, err) = run(command(PROGRAM, &prefix).arg("enrol").arg("--prefix").arg(&prefix));
    assert_eq!(code, Some(2));
    assert!(err.contains("share/jupyter/kernels/rhythmite cannot be made"), "{err}");
}

#[test]
fn highlighting_knows_every_word_of_the_language() {
    let words = lab::words();
    let set = |kind: &str| -> BTreeSet<String> {
        words[kind].as_array().unwrap().iter().map(|word| word.as_str().unwrap().to_owned()).collect()
    };
    let functions: BTreeSet<String> = catalogue::entries()
        .filter(|entry| entry.room != Room::Operators)
        .map(|entry| entry.name.to_owned())
        .collect();
    assert!(functions.contains("attribute") && functions.len() > 30);
    assert_eq!(set("functions"), functions);
    assert_eq!(set("units"), unit_spellings().into_iter().map(|(spelling, _, _)| spelling).collect());
    assert_eq!(set("eras"), Era::ALL.iter().map(|era| era.symbol().to_owned()).collect());
    for keyword in KEYWORDS {
        let kind = match keyword.role {
            KeywordRole::Word => "reserved",
            KeywordRole::Operator => "operators",
            KeywordRole::Punctuation => "punctuation",
        };
        assert!(set(kind).contains(keyword.text), "{}", keyword.text);
    }
    for choice in ["gaussian", "generalised_least_squares", "ar1", "January"] {
        assert!(set("choices").contains(choice), "{choice}");
    }
    assert!(lab::script().contains(&words.to_string()));
}

#[test]
fn lab_says_what_is_missing() {
    let home = folder("missing");
    let (code, _, err) = run(command(PROGRAM, &home).arg("lab").arg(home.join("nowhere")));
    assert_eq!(code, Some(2));
    assert!(err.contains("nowhere is no folder"), "{err}");
    // Neither JupyterLab nor Python is on this PATH.
    let (code, _, err) = run(command(PROGRAM, &home).arg("lab").arg(&home).env("PATH", &home));
    assert_eq!(code, Some(2));
    assert!(err.contains("install one of them"), "{err}");
    assert!(!home.join(".local/share/jupyter").exists());
}

/// A program on PATH that says what it is called with.
#[cfg(unix)]
fn pretend(folder: &Path, name: &str, script: &str) {
    use std::os::unix::fs::PermissionsExt;
    let path = folder.join(name);
    fs::write(&path, format!("#!/bin/sh\n{script}\n")).unwrap();
    fs::set_permissions(&path, fs::Permissions::from_mode(0o755)).unwrap();
}

#[cfg(unix)]
#[test]
fn lab_enrols_for_the_user_becomes_the_jupyterlab_on_path_and_ends_as_it_ends() {
    let home = folder("found");
    pretend(
        &home,
        "jupyter-lab",
        "[ \"$1\" = --version ] && echo 4.1.0 && exit\nprintf '%s|' \"$@\" $$\nexit 7",
    );
    let data = home.join("data");
    let mut open = command(PROGRAM, &home);
    open.args(["lab", "--port", "8877", "--no-browser", "."]).args(["--", "--allow-root"]);
    open.current_dir(&home).env("PATH", &home).env("JUPYTER_DATA_DIR", &data);
    let child =
        open.stdout(std::process::Stdio::piped()).stderr(std::process::Stdio::piped()).spawn().unwrap();
    let process = child.id();
    let ended = child.wait_with_output().unwrap();
    let (out, err) = (String::from_utf8(ended.stdout).unwrap(), String::from_utf8(ended.stderr).unwrap());
    // The process is the same: signals reach JupyterLab itself.
    let expected = format!("--port=8877|--no-browser|--allow-root|{}|{process}|", home.display());
    assert_eq!(out.replace("/.|", "|"), expected);
    assert_eq!(ended.status.code(), Some(7));
    assert!(err.contains("wrote the kernel "), "{err}");
    assert!(data.join("kernels/rhythmite/kernel.json").is_file());

    // The second time nothing is left to be said.
    let mut open = command(PROGRAM, &home);
    open.arg("lab").arg(&home).env("PATH", &home).env("JUPYTER_DATA_DIR", &data);
    assert_eq!(run(&mut open).2, "");
}

#[cfg(unix)]
#[test]
fn an_environment_that_cannot_be_made_is_explained_and_made_anew_the_next_time() {
    let home = folder("environment");
    let path = folder("environment-path");
    pretend(&path, "jupyter-lab", "echo 3.6.8");
    let open = || {
        let mut open = command(PROGRAM, &home);
        open.arg("lab").arg(&home).env("PATH", format!("{}:/usr/bin:/bin", path.display()));
        open.env("XDG_DATA_HOME", home.join("data"));
        run(&mut open)
    };
    // A Python whose venv is missing.
    pretend(&path, "python3", "[ \"$1\" = -c ] && exit\necho 'ensurepip is not available' >&2\nexit 1");
    let (code, _, err) = open();
    assert_eq!(code, Some(2));
    assert!(err.contains("the JupyterLab on PATH is 3.6.8, and 4 or newer is needed"), "{err}");
    assert!(err.contains("python3-venv") && err.contains("  ensurepip is not available"), "{err}");

    // One whose registry cannot be reached: what it left is no environment.
    let python = "[ \"$1\" = -c ] && exit\nmkdir -p \"$4/bin\" && cp \"$0\" \"$4/bin/python\"";
    pretend(&path, "python3", &format!("[ \"$2\" = pip ] && echo 'no connection' >&2 && exit 1\n{python}"));
    let (code, _, err) = open();
    assert_eq!(code, Some(2));
    assert!(err.contains("registry") && err.contains("  no connection"), "{err}");

    // One that works: pip says what it does, and JupyterLab is what starts.
    let pip = "[ \"$2\" = pip ] && echo 'Collecting a' && echo 'Collecting b' && echo 'Installing collected packages: a, b' && exit";
    let starts = "[ \"$2\" = jupyterlab ] && echo \"lab $3 $JUPYTER_PREFER_ENV_PATH\" && exit 3";
    pretend(&path, "python3", &format!("[ \"$1\" = --version ] && exit\n{pip}\n{starts}\n{python}"));
    let (code, out, err) = open();
    assert_eq!((code, out), (Some(3), format!("lab {} 1\n", home.display())), "{err}");
    assert!(err.contains("installing 2 packages") && err.contains("the environment is ready"), "{err}");
    let prefix = home.join(if cfg!(target_os = "macos") {
        "Library/Application Support/rhythmite/jupyterlab"
    } else {
        "data/rhythmite/jupyterlab"
    });
    assert!(prefix.join("share/jupyter/kernels/rhythmite/kernel.json").is_file());
    let list = fs::read_to_string(prefix.join("requirements.txt")).unwrap();
    assert!(list.starts_with("jupyterlab==4.") && list.lines().all(|line| line.contains("==")), "{list}");

    // And it is made once.
    let (code, _, err) = open();
    assert_eq!(code, Some(3));
    assert!(!err.contains("making an environment"), "{err}");
}
