//! Files that a program may read, for the text at the cursor.

use std::path::{Component, Path};

use super::situation::{Situation, own_names};
use super::{Completion, CompletionKind, Completions, Parameters, folded, parameter_at};
use crate::session::Session;

/// At most so many entries of a folder are offered.
const MOST: usize = 2000;

impl Session {
    /// The files below the session's folder that the text at the cursor may name; nothing where no file is asked for.
    pub(super) fn files(&self, here: &Situation, typed: &str, after: &str, cursor: usize) -> Completions {
        let nothing = Completions { start: cursor, end: cursor, items: Vec::new() };
        if !self.names_a_file(here) {
            return nothing;
        }
        let (folder, name) = match typed.rfind('/') {
            Some(at) => typed.split_at(at + 1),
            None => ("", typed),
        };
        let quote = if after.starts_with('"') { "" } else { "\"" };
        let mut items: Vec<Completion> = self
            .listing(folder)
            .into_iter()
            .filter(|(entry, _)| folded(entry).starts_with(&folded(name)))
            .filter(|(entry, _)| !entry.starts_with('.') || name.starts_with('.'))
            .map(|(entry, is_folder)| {
                let kind = if is_folder { CompletionKind::Folder } else { CompletionKind::File };
                let end = if is_folder { "/" } else { quote };
                Completion { text: format!("{entry}{end}"), kind, detail: kind.word().to_owned() }
            })
            .collect();
        items.sort_by(|left, right| left.text.cmp(&right.text));
        Completions { start: cursor - name.len(), end: cursor, items }
    }

    /// Whether the text at the cursor is the argument of an entry that names a file.
    fn names_a_file(&self, here: &Situation) -> bool {
        let Some(level) = here.levels.last() else { return false };
        let Some(parameters) = self.parameters(&here.levels, &own_names("", 0)) else { return false };
        let Parameters::Known(_, Some(entry)) = &parameters else { return false };
        level.pieces == 0
            && parameter_at(level, &parameters)
                .is_some_and(|parameter| entry.reads_file == Some(parameter.name))
    }

    /// Names in a folder below the session's, and whether each is a folder; links out of it are left out.
    fn listing(&self, folder: &str) -> Vec<(String, bool)> {
        let below = Path::new(folder)
            .components()
            .all(|part| matches!(part, Component::Normal(_) | Component::CurDir));
        let root = self.inputs.folder();
        let (Ok(real_root), true) = (root.canonicalize(), below) else { return Vec::new() };
        let inside = |path: &Path| path.canonicalize().is_ok_and(|real| real.starts_with(&real_root));
        let place = root.join(folder);
        if !inside(&place) {
            return Vec::new();
        }
        let Ok(entries) = place.read_dir() else { return Vec::new() };
        entries
            .flatten()
            .take(MOST)
            .filter(|entry| inside(&entry.path()))
            .filter_map(|entry| {
                let name = entry.file_name().into_string().ok()?;
                let metadata = entry.path().metadata().ok()?;
                let readable = metadata.is_file() || metadata.is_dir();
                readable.then(|| (name, metadata.is_dir()))
            })
            .collect()
    }
}
