//! Runs cells, the one thread that changes the session: results are sent as they come, then the reply, then what moved
//! elsewhere.

use std::sync::Arc;

use serde_json::{Map, Value as Json, json};

use super::answers::{Kernel, lock};
use super::drawn::Drawn;
use super::message::Request;
use super::progress::Activity;
use super::queue::Turn;
use super::sockets::Channel;
use crate::base::Diagnostic;
use crate::display;
use crate::notebook::{Bundle, Media, Pieces, pieces, result_metadata, words_bundle};
use crate::session::{Audience, CellReply, Output, Pending, Session};

/// Run cells as they come, for as long as the kernel lives.
pub(super) fn work(kernel: &Kernel) {
    let mut count = 0;
    loop {
        let (request, turn) = kernel.queue.next();
        kernel.busy_with(&request, || match turn {
            Turn::Abort => abort(kernel, &request, count),
            Turn::Run => {
                kernel.set_running(Some(request.clone()));
                Execution::of(kernel, &request, &mut count).run();
                kernel.activity().take();
                kernel.set_running(None);
            }
        });
    }
}

/// A cell that stood behind one that failed is not run.
fn abort(kernel: &Kernel, request: &Request, count: u64) {
    let content =
        json!({"status": "aborted", "execution_count": count, "payload": [], "user_expressions": {}});
    kernel.reply(Channel::Shell, request, "execute_reply", &content);
}

/// So many mistakes of one cell are told; nobody reads more.
const TOLD: usize = 20;

/// One mistake, as a front end shows it.
struct Failure {
    name: &'static str,
    value: String,
    traceback: Vec<String>,
}

impl Failure {
    fn of(session: &Session, problem: &Diagnostic) -> Self {
        let text = display::diagnostic(problem, &|id| session.source(id), true);
        Self {
            name: problem.code,
            value: problem.message.clone(),
            traceback: text.trim_end().lines().map(str::to_owned).collect(),
        }
    }

    fn content(&self) -> Map<String, Json> {
        let mut content = Map::new();
        content.insert("ename".to_owned(), json!(self.name));
        content.insert("evalue".to_owned(), json!(self.value));
        content.insert("traceback".to_owned(), json!(self.traceback));
        content
    }
}

/// The run of one cell.
struct Execution<'k> {
    kernel: &'k Kernel,
    request: &'k Arc<Request>,
    /// What the session knows the cell by.
    cell: String,
    /// Whether the front end names its cells; a cell that has no name is a new one each time.
    named: bool,
    number: u64,
    silent: bool,
    /// How many expressions the cell shows.
    several: bool,
    failure: Option<Failure>,
    /// How many mistakes there were, told or not.
    mistakes: usize,
    interrupted: bool,
    replied: bool,
    /// What is kept in the history beside the input.
    text: String,
    /// Displays that moved where no page that asks now can be reached, by cell.
    beyond_reach: Vec<String>,
    /// Of those, the ones whose cell may not be there any more.
    perhaps_gone: bool,
}

impl<'k> Execution<'k> {
    fn of(kernel: &'k Kernel, request: &'k Arc<Request>, count: &mut u64) -> Self {
        let silent = request.flag("silent", false);
        if !silent && request.flag("store_history", true) {
            *count += 1;
        }
        let named = request.metadata.get("cellId").and_then(Json::as_str).filter(|id| !id.is_empty());
        Self {
            kernel,
            request,
            cell: named.unwrap_or_else(|| request.id()).to_owned(),
            named: named.is_some(),
            number: *count,
            silent,
            several: false,
            failure: None,
            mistakes: 0,
            interrupted: false,
            replied: false,
            text: String::new(),
            beyond_reach: Vec::new(),
            perhaps_gone: false,
        }
    }

    fn run(mut self) {
        let code = self.request.text("code").to_owned();
        if !self.silent {
            let content = json!({"code": code, "execution_count": self.number});
            self.kernel.publish(self.request, "execute_input", &json!({}), &content);
        }
        if self.request.unreadable {
            self.refuse(
                "unreadable",
                "what the front end sent of this cell is no text: it is not valid Unicode",
            );
        } else {
            let run = std::panic::AssertUnwindSafe(|| self.run_cell(&code));
            if std::panic::catch_unwind(run).is_err() && !self.replied {
                self.refuse("internal", "this cell ended in a mistake of the program");
            }
        }
        if !self.silent && self.request.flag("store_history", true) {
            lock(&self.kernel.history).add(self.number, &code, std::mem::take(&mut self.text));
        }
    }

    /// Reply that the cell could not be run at all.
    fn refuse(&mut self, name: &'static str, why: &str) {
        let failure = Failure { name, value: why.to_owned(), traceback: vec![why.to_owned()] };
        self.publish("error", &json!({}), &Json::Object(failure.content()));
        self.failure = Some(failure);
        self.answer(None);
    }

    fn run_cell(&mut self, code: &str) {
        let cell = self.cell.clone();
        let mut reply = {
            let mut session = self.kernel.session_mut();
            self.lose_cells(&mut session);
            let oldest = {
                let mut board = lock(&self.kernel.board);
                if self.named {
                    board.begin(&cell, self.number);
                    None
                } else {
                    board.begin_nameless(&cell, self.number)
                }
            };
            if let Some(oldest) = oldest {
                session.retire_cell(&oldest);
            }
            session.name_cell(&cell, &format!("cell [{}]", self.number));
            session.install_cell(&cell, code)
        };
        {
            let session = self.kernel.session();
            self.several = session.shown_in(&cell) > 1;
            session.show_cell(&cell, &mut reply, self);
            if !self.replied {
                self.answer(Some(&session));
            }
        }
        self.kernel.session_mut().settle(&reply);
        if !self.silent {
            self.tell_postponed(&reply);
            self.tell_waiting();
            self.tell_what_lags();
        }
        lock(&self.kernel.board).keep();
    }

    /// Cells that the front end says are gone.
    fn lose_cells(&self, session: &mut Session) {
        let gone = self.request.metadata.get("deletedCells").and_then(Json::as_array);
        let gone: Vec<&str> = gone.into_iter().flatten().filter_map(Json::as_str).collect();
        if !gone.is_empty() {
            session.mark_deleted(&gone);
            lock(&self.kernel.board).lose(&gone);
        }
    }

    fn publish(&self, kind: &str, metadata: &Json, content: &Json) {
        if !self.silent {
            self.kernel.publish(self.request, kind, metadata, content);
        }
    }

    /// Put a bundle where a display stands, or make it stand there.
    fn put(&self, drawn: bool, id: &str, bundle: &Bundle, metadata: &Json) {
        let kind = if drawn { "update_display_data" } else { "display_data" };
        // Whatever stands there: a page that was loaded again finds the output by it.
        let mut metadata = metadata.clone();
        metadata["rhythmite"]["display"] = json!(id);
        let content = json!({"data": bundle, "metadata": metadata, "transient": {"display_id": id}});
        self.publish(kind, &json!({}), &content);
    }

    fn say(&self, words: &str) {
        let content = json!({"data": words_bundle(words), "metadata": {}, "transient": {}});
        self.publish("display_data", &json!({}), &content);
    }

    fn fail(&mut self, session: &Session, problem: &Diagnostic, display: Option<u64>) {
        self.mistakes += 1;
        if self.mistakes > TOLD {
            return lock(&self.kernel.board).fail(&self.cell, display);
        }
        let failure = Failure::of(session, problem);
        self.publish("error", &json!({}), &Json::Object(failure.content()));
        self.failure.get_or_insert(failure);
        lock(&self.kernel.board).fail(&self.cell, display);
    }

    fn metadata(id: &str, output: &Output) -> Json {
        let mut own = result_metadata(output);
        own.insert("display".to_owned(), json!(id));
        json!({"rhythmite": own})
    }

    /// Reply to the request.
    fn answer(&mut self, session: Option<&Session>) {
        self.replied = true;
        let mut content = Map::new();
        content.insert("execution_count".to_owned(), json!(self.number));
        match &self.failure {
            None => {
                content.insert("status".to_owned(), json!("ok"));
                let asked = self.request.content.get("user_expressions").and_then(Json::as_object);
                let asked = asked.into_iter().flatten().zip(session.into_iter().cycle());
                let answers: Map<String, Json> = asked
                    .map(|((name, text), session)| {
                        (name.clone(), user_expression(session, text.as_str().unwrap_or("")))
                    })
                    .collect();
                content.insert("payload".to_owned(), json!([]));
                content.insert("user_expressions".to_owned(), Json::Object(answers));
            }
            Some(failure) => {
                content.insert("status".to_owned(), json!("error"));
                content.extend(failure.content());
                if self.request.flag("stop_on_error", true) {
                    self.kernel.queue.fail();
                }
            }
        }
        self.kernel.reply(Channel::Shell, self.request, "execute_reply", &Json::Object(content));
    }

    /// Results that moved and could not be computed because someone interrupted: what stands there is not true any more.
    fn tell_postponed(&self, reply: &CellReply) {
        if reply.postponed.is_empty() || self.kernel.queue.is_waited_for() {
            return;
        }
        let board = lock(&self.kernel.board);
        let mut cells = Vec::new();
        for pending in &reply.postponed {
            let Some(drawn) = board.find(pending.display) else { continue };
            cells.push(drawn.cell.as_str());
            let words = format!(
                "{} moved and waits to be computed again: the next cell that is run does it",
                pending.expression
            );
            if let Some(figure) = &drawn.figure {
                self.put(true, figure, &words_bundle(""), &json!({}));
            }
            self.put(true, &drawn.words, &words_bundle(&words), &json!({}));
        }
        if !cells.is_empty() {
            let results = counted(cells.len(), "result waits", "results wait");
            let cells = board.call(cells);
            self.say(&format!(
                "{results} to be computed again, in {cells}: the next cell that is run does it"
            ));
        }
    }

    /// What cells wait for, as it is now.
    fn tell_waiting(&self) {
        let waiting = lock(&self.kernel.board).waiting();
        if waiting.is_empty() {
            return;
        }
        let session = self.kernel.session();
        let cells: Vec<&str> = waiting.iter().map(String::as_str).collect();
        for (cell, standing) in cells.iter().zip(session.standing(&cells)) {
            let still = (!standing.waiting.is_empty()).then(|| waiting_words(&session, &standing.waiting));
            if let Some(display) = lock(&self.kernel.board).change_waiting(cell, still.as_deref()) {
                let words = still.unwrap_or_else(|| "all names are defined now".to_owned());
                self.put(true, &display, &words_bundle(&words), &json!({}));
            }
        }
    }

    /// Other cells that show mistakes which would be none if they were run again.
    fn healed_cells(&self) -> Vec<String> {
        let mut cells = lock(&self.kernel.board).perhaps_healed();
        cells.retain(|cell| *cell != self.cell);
        let names: Vec<&str> = cells.iter().map(String::as_str).collect();
        if names.is_empty() {
            return Vec::new();
        }
        let standing = self.kernel.session().standing(&names);
        let healed = standing.iter().map(|standing| standing.problems.is_empty());
        cells.iter().zip(healed).filter(|(_, healed)| *healed).map(|(cell, _)| cell.clone()).collect()
    }

    /// What stands in the notebook and is not true any more, where nothing can take its place.
    fn tell_what_lags(&self) {
        let healed = self.healed_cells();
        let mut board = lock(&self.kernel.board);
        let mut lines = Vec::new();
        if !self.beyond_reach.is_empty() {
            let results = counted(self.beyond_reach.len(), "result was", "results were");
            let cells = board.call(self.beyond_reach.iter().map(String::as_str));
            let there = if self.perhaps_gone { ", as far as they are still there" } else { "" };
            if cells.contains('[') {
                lines.push(format!("{results} drawn before this change: run {cells}{there}"));
            }
        }
        if self.named && !healed.is_empty() {
            let cells = board.call(healed.iter().map(String::as_str));
            lines.push(format!("what was wrong there is put right: run {cells} again"));
            healed.iter().for_each(|cell| board.forgive(cell));
        }
        if self.named
            && !self.kernel.queue.is_waited_for()
            && let Some((count, cells)) = board.take_former()
        {
            let cells_hold = counted(count, "cell holds", "cells hold");
            lines.push(format!(
                "the kernel was started anew, and {cells_hold} results from before: run {cells}"
            ));
        }
        drop(board);
        if !lines.is_empty() {
            self.say(&lines.join("\n"));
        }
    }

    /// The display in which the progress was told, if it was.
    fn end_activity(&self) -> Option<Activity> {
        self.kernel.activity().take()
    }
}

impl Audience for Execution<'_> {
    fn checked(&mut self, session: &Session, reply: &CellReply) {
        for problem in &reply.problems {
            self.fail(session, problem, None);
        }
        if !reply.installed {
            // What cannot be read is put right by nobody but its author.
            lock(&self.kernel.board).forgive(&self.cell);
        }
        if !reply.waiting.is_empty() && !self.silent {
            let id = self.kernel.display_id(format!("{}-waits", self.number));
            let words = waiting_words(session, &reply.waiting);
            self.put(false, &id, &words_bundle(&words), &json!({}));
            lock(&self.kernel.board).set_waiting(&self.cell, id, words);
        }
        // A terminal or a batch run names no cells: a name that is bound again there is no rival.
        if self.named && !reply.notices.is_empty() {
            self.say(&reply.notices.join("\n"));
        }
    }

    fn begun(&mut self, display: &Pending) {
        if self.silent {
            return;
        }
        let activity = if *display.cell == *self.cell {
            let id = self.kernel.display_id(display.display);
            Some(Activity::new(self.request, &display.expression, id, false))
        } else {
            let words = lock(&self.kernel.board).find(display.display).map(|drawn| drawn.words.clone());
            words.map(|words| Activity::new(self.request, &display.expression, words, true))
        };
        *self.kernel.activity() = activity;
    }

    fn shown(&mut self, session: &Session, reply: &CellReply, output: &Output) {
        let progress = self.end_activity().filter(|activity| activity.drawn);
        if let Err(problem) = &output.result {
            if let Some(progress) = &progress {
                let words = format!("stopped after {} s", progress.lasted().as_secs());
                self.put(true, &progress.display, &words_bundle(&words), &json!({}));
            }
            let again = self.interrupted && output.is_interrupted();
            if !reply.problems.iter().any(|told| told.is_same_mistake(problem)) && !again {
                self.fail(session, problem, Some(output.display));
            }
            self.interrupted |= output.is_interrupted();
            return;
        }
        let Pieces { figure, figure_metadata, words } =
            pieces(session, output, self.several, self.kernel.media);
        let plain = words.get("text/plain").and_then(Json::as_str).unwrap_or("");
        if !self.text.is_empty() {
            self.text.push('\n');
        }
        self.text += plain;
        if output.fixed && figure.is_none() && progress.is_none() {
            let content = json!({"execution_count": self.number, "data": words,
                "metadata": {"rhythmite": result_metadata(output)}});
            self.publish("execute_result", &json!({}), &content);
            return;
        }
        let first = self.kernel.display_id(output.display);
        let second = self.kernel.display_id(format!("{}-words", output.display));
        let mut drawn = progress.is_some();
        let mut figure_id = None;
        if let Some(figure) = &figure {
            let metadata = with(Self::metadata(&first, output), figure_metadata);
            self.put(drawn, &first, figure, &metadata);
            drawn = false;
            figure_id = Some(first.clone());
        }
        let words_id = if figure_id.is_some() { second } else { first };
        self.put(drawn, &words_id, &words, &Self::metadata(&words_id, output));
        let entry = Drawn::new(&self.cell, figure_id, words_id, self.request.client());
        lock(&self.kernel.board).draw(output.display, entry);
    }

    fn answered(&mut self, session: &Session, _: &CellReply) -> bool {
        if self.mistakes > TOLD {
            self.say(&format!("and {} mistakes more", self.mistakes - TOLD));
        }
        self.answer(Some(session));
        !self.silent && !self.kernel.queue.is_waited_for()
    }

    fn refreshed(&mut self, session: &Session, _: &CellReply, output: &Output) -> bool {
        self.end_activity();
        let mut board = lock(&self.kernel.board);
        let Some(drawn) = board.find(output.display) else {
            // It was a mistake when its cell was run.
            if output.result.is_ok() {
                board.heal(&output.cell, output.display);
            }
            return !self.kernel.queue.is_waited_for();
        };
        let client = self.request.client();
        if !drawn.is_within_reach(client) && !lock(&self.kernel.comms).relinks(client) {
            self.beyond_reach.push(drawn.cell.clone());
            self.perhaps_gone |= drawn.is_gone();
        }
        let several = session.shown_in(&output.cell) > 1;
        let Pieces { figure, figure_metadata, words } = pieces(session, output, several, self.kernel.media);
        // A result that is drawn now and was not before takes the place of its numbers.
        let (figure, words) = match (&drawn.figure, figure) {
            (None, Some(figure)) => (None, figure),
            (_, figure) => (figure, words),
        };
        if let Some(id) = &drawn.figure {
            let figure = figure.unwrap_or_else(|| words_bundle(""));
            let metadata = with(Self::metadata(id, output), figure_metadata);
            self.put(true, id, &figure, &metadata);
        }
        self.put(true, &drawn.words, &words, &Self::metadata(&drawn.words, output));
        !self.kernel.queue.is_waited_for()
    }
}

fn with(mut metadata: Json, more: Map<String, Json>) -> Json {
    metadata.as_object_mut().into_iter().for_each(|all| all.extend(more.clone()));
    metadata
}

fn counted(number: usize, one: &str, more: &str) -> String {
    format!("{number} {}", if number == 1 { one } else { more })
}

fn waiting_words(session: &Session, waiting: &[Diagnostic]) -> String {
    let line = |problem: &Diagnostic| {
        let place = display::problem_line(problem, &|id| session.source(id));
        format!("{} ({place})", problem.message)
    };
    waiting.iter().map(line).collect::<Vec<_>>().join("\n")
}

/// What a front end asked to be evaluated beside the cell.
fn user_expression(session: &Session, text: &str) -> Json {
    let failed = |problem: &Diagnostic| json!({"status": "error", "ename": problem.code, "evalue": problem.message, "traceback": [problem.message]});
    match session.peek(text) {
        Ok(output) => match &output.result {
            Ok(_) => {
                json!({"status": "ok", "data": pieces(session, &output, false, Media::default()).words, "metadata": {}})
            }
            Err(problem) => failed(problem),
        },
        Err(problem) => failed(&problem),
    }
}
