use crate::base::Diagnostic;
use crate::session::{CellReply, OUTSIDE, Output, Session};

/// A piece of program to run: a code cell of a notebook, or a whole script.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct CodeCell {
    /// Its place among all cells of the file, from 0.
    pub index: usize,
    /// What the session knows it by; unique in the file.
    pub id: String,
    /// What messages call it: `cell 3`, or a file's name.
    pub name: String,
    /// Its text.
    pub source: String,
}

/// A program that was run cell by cell, as it stands at its end: what a later cell moved or put right is as the later
/// cell left it.
#[derive(Debug)]
pub struct Run {
    /// The cells in order.
    pub cells: Vec<(CodeCell, CellReply)>,
    /// What is to be said about definitions that came from outside.
    pub outside: CellReply,
}

impl Run {
    /// Run cells in order, in a session of their own.
    pub fn of(session: &mut Session, cells: &[CodeCell]) -> Self {
        let mut run = Self { cells: Vec::with_capacity(cells.len()), outside: CellReply::default() };
        for cell in cells {
            session.name_cell(&cell.id, &cell.name);
            let mut reply = session.run_cell(&cell.id, &cell.source);
            for fresh in std::mem::take(&mut reply.moved) {
                run.replace(fresh);
            }
            run.cells.push((cell.clone(), reply));
        }
        let ids: Vec<&str> =
            std::iter::once(OUTSIDE).chain(cells.iter().map(|cell| cell.id.as_str())).collect();
        let mut standing = session.standing(&ids).into_iter();
        if let Some(outside) = standing.next() {
            (run.outside.problems, run.outside.waiting) = (outside.problems, outside.waiting);
        }
        for ((_, reply), standing) in run.cells.iter_mut().zip(standing) {
            // What is wrong with a text that could not be read stays wrong.
            if reply.installed {
                (reply.problems, reply.waiting) = (standing.problems, standing.waiting);
            }
        }
        run.outside.notices = session.unmet_from_outside();
        run
    }

    /// Put what a later cell moved in place of what was shown before.
    fn replace(&mut self, mut fresh: Output) {
        let Some((_, reply)) = self.cells.iter_mut().find(|(cell, _)| cell.id == *fresh.cell) else { return };
        let Some(old) = reply.outputs.iter_mut().find(|old| old.display == fresh.display) else { return };
        let mut by = std::mem::take(&mut old.refreshed_by);
        fresh.refreshed_by.retain(|name| !by.contains(name));
        by.append(&mut fresh.refreshed_by);
        *old = Output { refreshed_by: by, ..fresh };
    }

    /// Whether anything in the program is wrong, or waits for a name that never came.
    pub fn failed(&self) -> bool {
        let replies = self.cells.iter().map(|(_, reply)| reply).chain([&self.outside]);
        replies.into_iter().any(|reply| {
            !reply.problems.is_empty()
                || !reply.waiting.is_empty()
                || reply.outputs.iter().any(|output| output.result.is_err())
        })
    }

    /// The place in the file of the cell where a mistake stands; none for a definition from outside.
    pub(super) fn index_of(&self, session: &Session, problem: &Diagnostic) -> Option<usize> {
        let source = session.source(problem.primary.span.source)?;
        self.cells.iter().find(|(cell, _)| cell.name == source.name).map(|(cell, _)| cell.index)
    }
}

/// Whether the mistake that keeps an output from being shown is told with its cell already.
pub(super) fn is_told(reply: &CellReply, problem: &Diagnostic) -> bool {
    reply.problems.iter().chain(&reply.waiting).any(|told| told.is_same_mistake(problem))
}
