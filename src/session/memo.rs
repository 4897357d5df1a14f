use std::collections::{BTreeMap, HashMap};
use std::sync::{Arc, Mutex, PoisonError};

use super::fingerprint::Fingerprint;
use crate::base::Fault;
use crate::catalogue::Path;
use crate::value::Value;

/// Notes of an evaluation, in the order they were made, each once.
pub(super) type Notes = Arc<Vec<Arc<str>>>;

/// A remembered result: a value with its notes, or a fault without a place.
pub(super) type Remembered = Result<(Arc<Value>, Notes), Fault>;

/// Values by fingerprint, with a bound on their bytes: the least recently used leaves first.
pub(super) struct Memo {
    limit: usize,
    inner: Mutex<Inner>,
}

#[derive(Default)]
struct Inner {
    entries: HashMap<(Fingerprint, Path), Entry>,
    by_use: BTreeMap<u64, (Fingerprint, Path)>,
    clock: u64,
    bytes: usize,
}

struct Entry {
    result: Remembered,
    bytes: usize,
    used: u64,
}

impl Memo {
    pub(super) fn new(limit: usize) -> Self {
        Self { limit, inner: Mutex::default() }
    }

    pub(super) fn get(&self, print: Fingerprint, path: Path) -> Option<Remembered> {
        let mut inner = self.inner.lock().unwrap_or_else(PoisonError::into_inner);
        let inner = &mut *inner;
        inner.clock += 1;
        let now = inner.clock;
        let entry = inner.entries.get_mut(&(print, path))?;
        inner.by_use.remove(&entry.used);
        inner.by_use.insert(now, (print, path));
        entry.used = now;
        Some(entry.result.clone())
    }

    pub(super) fn insert(&self, print: Fingerprint, path: Path, result: Remembered) {
        let bytes = result.as_ref().map_or(256, |(value, _)| value.bytes());
        let mut inner = self.inner.lock().unwrap_or_else(PoisonError::into_inner);
        let inner = &mut *inner;
        inner.clock += 1;
        let now = inner.clock;
        if let Some(old) = inner.entries.insert((print, path), Entry { result, bytes, used: now }) {
            inner.by_use.remove(&old.used);
            inner.bytes -= old.bytes;
        }
        inner.by_use.insert(now, (print, path));
        inner.bytes += bytes;
        // What was just made stays, however large: its caller is about to use it.
        while inner.bytes > self.limit && inner.entries.len() > 1 {
            let Some((_, key)) = inner.by_use.pop_first() else { break };
            if let Some(gone) = inner.entries.remove(&key) {
                inner.bytes -= gone.bytes;
            }
        }
    }

    pub(super) fn bytes(&self) -> usize {
        self.inner.lock().unwrap_or_else(PoisonError::into_inner).bytes
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::value::{Block, Measure, Quantity};

    fn value(numbers: usize) -> Remembered {
        let values = Block::row(vec![0.0; numbers]);
        Ok((Arc::new(Value::Quantity(Quantity { values, measure: Measure::number() })), Notes::default()))
    }

    fn print(number: u8) -> Fingerprint {
        Fingerprint([number; 32])
    }

    #[test]
    fn the_least_recently_used_leaves_first() {
        let memo = Memo::new(3 * (100 * 8 + 128));
        for number in 0..3 {
            memo.insert(print(number), Path::Nominal, value(100));
        }
        assert!(memo.get(print(0), Path::Nominal).is_some());
        memo.insert(print(3), Path::Nominal, value(100));
        assert!(memo.get(print(1), Path::Nominal).is_none());
        assert!(memo.get(print(0), Path::Nominal).is_some());
        assert!(memo.bytes() <= 3 * (100 * 8 + 128));
    }

    #[test]
    fn a_value_larger_than_the_bound_is_kept_alone() {
        let memo = Memo::new(10);
        memo.insert(print(0), Path::Nominal, value(100));
        memo.insert(print(1), Path::Nominal, value(100));
        assert!(memo.get(print(0), Path::Nominal).is_none());
        assert!(memo.get(print(1), Path::Nominal).is_some());
    }
}
