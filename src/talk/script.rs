//! The inputs of a session as a script that runs again.

use std::collections::{BTreeMap, BTreeSet};
use std::fs::OpenOptions;
use std::io::Write;
use std::path::{Component, Path, PathBuf};

use super::conversation::Input;
use crate::base::SourceId;
use crate::language::{StatementKind, parse};
use crate::session::InForce;

/// A script made of inputs.
pub(super) struct Script {
    pub(super) text: String,
    /// How many statements it has.
    pub(super) statements: usize,
    /// How many were left out.
    pub(super) left_out: usize,
}

/// The statements of all inputs that are in force: definitions that nothing replaced, and shown results without an error.
pub(super) fn compose(inputs: &[Input], in_force: &[InForce], shows: &BTreeMap<u64, bool>) -> Script {
    let stands = |name: &str, cell: &str| {
        in_force.iter().any(|found| {
            let bare = found.name.split('(').next().unwrap_or("");
            let function = found.name.contains('(');
            let same = if function { name.strip_suffix("()") == Some(bare) } else { name == found.name };
            same && *found.cell == *cell && found.fault.is_none()
        })
    };
    let mut script = Script { text: String::new(), statements: 0, left_out: 0 };
    for input in inputs {
        let Ok(program) = parse(&input.text, SourceId::default()) else {
            script.left_out += 1;
            continue;
        };
        let mut displays = input.displays.iter();
        let mut kept: Vec<&str> = Vec::new();
        let total = program.statements.len();
        for statement in &program.statements {
            let keep = match &statement.kind {
                StatementKind::Define { name, .. } => stands(name, &input.cell),
                StatementKind::Function { name, .. } => stands(&format!("{name}()"), &input.cell),
                StatementKind::Show(_) => {
                    displays.next().and_then(|display| shows.get(display)).copied().unwrap_or(false)
                }
            };
            if keep {
                kept.extend(input.text.get(statement.span.start..statement.span.end));
            }
        }
        script.statements += kept.len();
        script.left_out += total - kept.len();
        // An input that is kept whole keeps its comments, too.
        if kept.len() == total {
            script.text += input.text.trim_end();
            script.text.push('\n');
        } else {
            script.text.extend(kept.iter().map(|statement| format!("{}\n", statement.trim_end())));
        }
    }
    script
}

/// Write a script into `folder` or below. A file that was there before the session is not written over.
pub(super) fn write(
    folder: &Path,
    file: &str,
    text: &str,
    own: &BTreeSet<PathBuf>,
) -> Result<PathBuf, String> {
    let relative = Path::new(file);
    let plain = relative.components().all(|part| matches!(part, Component::Normal(_) | Component::CurDir));
    let outside = || format!("\"{file}\" lies outside the session's folder; nothing was written");
    let place = folder.join(relative);
    let (Some(parent), Some(name), true) = (place.parent(), place.file_name(), plain) else {
        return Err(outside());
    };
    let failed = |error: std::io::Error| format!("\"{file}\" cannot be written: {error}");
    let (real, root) = (parent.canonicalize().map_err(failed)?, folder.canonicalize().map_err(failed)?);
    if !real.starts_with(&root) {
        return Err(outside());
    }
    let place = real.join(name);
    let mut options = OpenOptions::new();
    options.write(true);
    if own.contains(&place) && place.symlink_metadata().is_ok_and(|found| found.is_file()) {
        options.truncate(true);
    } else if place.symlink_metadata().is_ok() {
        return Err(format!(
            "there is a \"{file}\" already, and this session did not write it: name another"
        ));
    } else {
        options.create_new(true);
    }
    let mut open = options.open(&place).map_err(failed)?;
    open.write_all(text.as_bytes()).map_err(failed)?;
    Ok(place)
}
