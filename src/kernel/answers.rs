//! The kernel as all its threads share it: what each request is answered, and what surrounds every answer.

use std::path::Path;
use std::sync::mpsc::{Sender, channel};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError, RwLock, RwLockReadGuard, RwLockWriteGuard};
use std::time::Duration;

use serde_json::{Value as Json, json};
use tokio::signal::unix::SignalKind;
use tokio::sync::Notify;

use super::comms::Comms;
use super::drawn::Board;
use super::executor;
use super::history::History;
use super::lookups;
use super::message::{PROTOCOL, Request, Seal, Writer};
use super::parent::{End, came};
use super::progress::Activity;
use super::queue::Queue;
use super::sockets::{Channel, Departures};
use crate::base::Cancellation;
use crate::notebook::Media;
use crate::session::Session;

/// Messages that have left the queues need so long to leave the sockets.
const LINGER: Duration = Duration::from_millis(150);

pub(super) struct Kernel {
    writer: Writer,
    departures: Departures,
    session: RwLock<Session>,
    cancellation: Cancellation,
    /// Which formats figures are sent in.
    pub(super) media: Media,
    pub(super) queue: Queue,
    pub(super) history: Mutex<History>,
    pub(super) comms: Mutex<Comms>,
    pub(super) board: Mutex<Board>,
    /// What is being computed, for whoever tells its progress.
    activity: Mutex<Option<Activity>>,
    /// The cell that is being run.
    running: Mutex<Option<Arc<Request>>>,
    /// Questions, answered one after the other beside the cell that is running.
    questions: Sender<Arc<Request>>,
    asked_to_end: Notify,
}

pub(super) fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}

impl Kernel {
    pub(super) fn start(
        seal: Arc<Seal>,
        departures: Departures,
        session: Session,
        media: Media,
        connection_file: &Path,
    ) -> Arc<Self> {
        let (questions, asked) = channel::<Arc<Request>>();
        let kernel = Arc::new(Self {
            writer: Writer::new(seal),
            departures,
            cancellation: session.cancellation(),
            session: RwLock::new(session),
            media,
            queue: Queue::default(),
            history: Mutex::default(),
            comms: Mutex::default(),
            board: Mutex::new(Board::new(connection_file)),
            activity: Mutex::default(),
            running: Mutex::default(),
            questions,
            asked_to_end: Notify::new(),
        });
        let _ = kernel.departures.iopub.send(kernel.writer.publication(
            None,
            "status",
            &json!({}),
            &json!({"execution_state": "starting"}),
        ));
        let executing = kernel.clone();
        std::thread::spawn(move || executor::work(&executing));
        let answering = kernel.clone();
        std::thread::spawn(move || {
            for request in asked {
                answering.answer(Channel::Shell, &request);
            }
        });
        kernel
    }

    pub(super) fn session(&self) -> RwLockReadGuard<'_, Session> {
        self.session.read().unwrap_or_else(PoisonError::into_inner)
    }

    pub(super) fn session_mut(&self) -> RwLockWriteGuard<'_, Session> {
        self.session.write().unwrap_or_else(PoisonError::into_inner)
    }

    pub(super) fn activity(&self) -> MutexGuard<'_, Option<Activity>> {
        lock(&self.activity)
    }

    /// How many blocks of members are done, and of how many.
    pub(super) fn progress(&self) -> (u64, u64) {
        self.session.try_read().map_or((0, 0), |session| session.progress())
    }

    /// The id of a display, which no other kernel gives to one.
    pub(super) fn display_id(&self, name: impl std::fmt::Display) -> String {
        format!("rhythmite-{}-{name}", self.writer.session())
    }

    /// Send a message to all front ends.
    pub(super) fn publish(&self, parent: &Request, kind: &str, metadata: &Json, content: &Json) {
        // The queues are closed only while the kernel ends.
        let _ = self.departures.iopub.send(self.writer.publication(Some(parent), kind, metadata, content));
    }

    pub(super) fn status(&self, parent: &Request, state: &str) {
        self.publish(parent, "status", &json!({}), &json!({"execution_state": state}));
    }

    /// Reply to a request.
    pub(super) fn reply(&self, channel: Channel, request: &Request, kind: &str, content: &Json) {
        let frames = self.writer.reply(request, kind, content);
        let _ = match channel {
            Channel::Shell => self.departures.shell.send(frames),
            Channel::Control => self.departures.control.send(frames),
        };
    }

    /// Say that the kernel is busy with a request, run `work`, and say that it is idle, whatever happened.
    pub(super) fn busy_with(&self, request: &Request, work: impl FnOnce()) {
        self.status(request, "busy");
        let done = std::panic::catch_unwind(std::panic::AssertUnwindSafe(work));
        if done.is_err() {
            super::log(&format!("a {} ended in a mistake of this program", request.kind()));
        }
        self.status(request, "idle");
    }

    /// Say which cell is being run; none any more.
    pub(super) fn set_running(&self, request: Option<Arc<Request>>) {
        *lock(&self.running) = request;
    }

    /// Take a request as it arrives: cells wait for their turn, control is answered at once.
    pub(super) fn take(&self, channel: Channel, request: Request) {
        let request = Arc::new(request);
        match (channel, request.kind()) {
            (Channel::Shell, "execute_request") => self.queue.push(request),
            (Channel::Shell, _) => drop(self.questions.send(request)),
            (Channel::Control, _) => self.answer(Channel::Control, &request),
        }
    }

    fn answer(&self, channel: Channel, request: &Request) {
        self.busy_with(request, || {
            if let Some((kind, content)) = self.content(request) {
                self.reply(channel, request, kind, &content);
            }
            if request.kind() == "shutdown_request" {
                self.publish(request, "shutdown_reply", &json!({}), &self.shutdown(request));
            }
        });
        // A front end takes this `idle` for that of the cell which is still being run.
        if let Some(running) = &*lock(&self.running) {
            self.status(running, "busy");
        }
    }

    /// The type and content of the reply to a request; none where it has none, or is not known.
    fn content(&self, request: &Request) -> Option<(&'static str, Json)> {
        Some(match request.kind() {
            "kernel_info_request" => ("kernel_info_reply", kernel_info()),
            "complete_request" => ("complete_reply", lookups::complete(&self.session(), request)),
            "inspect_request" => ("inspect_reply", lookups::inspect(&self.session(), request)),
            "is_complete_request" => ("is_complete_reply", lookups::is_complete(request)),
            "history_request" => ("history_reply", lock(&self.history).answer(request)),
            "comm_info_request" => {
                let target = request.content.get("target_name").and_then(Json::as_str);
                ("comm_info_reply", lock(&self.comms).answer(target))
            }
            "interrupt_request" => {
                self.cancellation.cancel();
                ("interrupt_reply", json!({"status": "ok"}))
            }
            "shutdown_request" => {
                self.cancellation.cancel();
                if !request.flag("restart", false) {
                    lock(&self.board).drop_kept();
                }
                self.asked_to_end.notify_one();
                ("shutdown_reply", self.shutdown(request))
            }
            "comm_open" => {
                let (id, target) = (request.text("comm_id"), request.text("target_name"));
                if !lock(&self.comms).open(id, target, request.client()) {
                    let content = json!({"comm_id": id, "data": {}});
                    self.publish(request, "comm_close", &json!({}), &content);
                }
                return None;
            }
            "comm_close" => {
                lock(&self.comms).close(request.text("comm_id"));
                return None;
            }
            _ => return None,
        })
    }

    fn shutdown(&self, request: &Request) -> Json {
        json!({"status": "ok", "restart": request.flag("restart", false)})
    }

    /// Wait for the end: one that is asked for, or `outside`. A signal from the keyboard stops the running cell.
    pub(super) async fn ended(&self, outside: impl Future<Output = End>) {
        let interrupts = async {
            loop {
                came(SignalKind::interrupt()).await;
                self.cancellation.cancel();
            }
        };
        let end = tokio::select! {
            () = self.asked_to_end.notified() => End::Asked,
            end = outside => end,
            () = interrupts => End::Signal,
        };
        self.cancellation.cancel();
        if end == End::Orphaned {
            lock(&self.board).drop_kept();
        }
        tokio::time::sleep(LINGER).await;
    }
}

fn kernel_info() -> Json {
    let version = env!("CARGO_PKG_VERSION");
    json!({
        "status": "ok",
        "protocol_version": PROTOCOL,
        "implementation": "rhythmite",
        "implementation_version": version,
        "language_info": {
            "name": "rhythmite",
            "version": version,
            "mimetype": "text/x-rhythmite",
            "file_extension": ".rhy",
            "pygments_lexer": "text",
            "codemirror_mode": "rhythmite",
        },
        "banner": format!("Rhythmite {version}: climate forcing time series, with units and uncertainty"),
        "debugger": false,
        "help_links": [],
    })
}
