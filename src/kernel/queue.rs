use std::collections::VecDeque;
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::time::{Duration, Instant, SystemTime};

use super::message::Request;

/// For so long after a failure a request that was sent before it still counts as queued behind the cell that failed.
const ON_ITS_WAY: Duration = Duration::from_secs(1);

/// For so long a reply that tells of a failure is held back: cells that were sent together with the one that failed
/// arrive meanwhile. A cell that fails in no time would else be answered before those sent behind it are here.
const HELD_BACK: Duration = Duration::from_millis(20);

/// Cells that wait to be run, in the order in which they came.
#[derive(Default)]
pub(super) struct Queue {
    waiting: Mutex<Waiting>,
    arrived: Condvar,
}

#[derive(Default)]
struct Waiting {
    requests: VecDeque<(Arc<Request>, Instant)>,
    /// When a cell failed whose failure stops those behind it.
    failed: Option<(SystemTime, Instant)>,
}

/// What is to be done with a request.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Turn {
    Run,
    /// It stood behind a cell that failed.
    Abort,
}

impl Queue {
    fn lock(&self) -> MutexGuard<'_, Waiting> {
        self.waiting.lock().unwrap_or_else(PoisonError::into_inner)
    }

    pub(super) fn push(&self, request: Arc<Request>) {
        self.lock().requests.push_back((request, Instant::now()));
        self.arrived.notify_one();
    }

    /// Wait for the next request.
    pub(super) fn next(&self) -> (Arc<Request>, Turn) {
        let mut waiting = self.lock();
        loop {
            if let Some((request, arrived)) = waiting.requests.pop_front() {
                let behind = waiting.failed.is_some_and(|(failed, at)| {
                    arrived <= at
                        || (arrived < at + ON_ITS_WAY && request.sent().is_some_and(|sent| sent < failed))
                });
                return (request, if behind { Turn::Abort } else { Turn::Run });
            }
            waiting = self.arrived.wait(waiting).unwrap_or_else(PoisonError::into_inner);
        }
    }

    /// A cell failed, of which its front end is told when this returns: those that came before then are not run.
    pub(super) fn fail(&self) {
        std::thread::sleep(HELD_BACK);
        self.lock().failed = Some((SystemTime::now(), Instant::now()));
    }

    /// Whether a cell waits that will be run.
    pub(super) fn is_waited_for(&self) -> bool {
        let waiting = self.lock();
        let failed = waiting.failed.map(|(_, at)| at);
        waiting.requests.iter().any(|(_, arrived)| failed.is_none_or(|at| *arrived > at))
    }
}
