use std::collections::{BTreeMap, BTreeSet};

use serde_json::{Map, Value as Json, json};

/// The target of the comm by which a page says that it keeps outputs and displays together by itself.
pub(super) const RELINK: &str = "rhythmite.relink";

/// The comms that are open.
#[derive(Default)]
pub(super) struct Comms {
    /// Target and front end by the comm's id.
    open: BTreeMap<String, (String, String)>,
    /// Front ends whose pages find the outputs of a display after they were loaded again.
    relinking: BTreeSet<String>,
}

impl Comms {
    /// Open a comm; whether its target is known.
    pub(super) fn open(&mut self, id: &str, target: &str, client: &str) -> bool {
        if target != RELINK {
            return false;
        }
        self.open.insert(id.to_owned(), (target.to_owned(), client.to_owned()));
        self.relinking.insert(client.to_owned());
        true
    }

    pub(super) fn close(&mut self, id: &str) {
        if let Some((_, client)) = self.open.remove(id)
            && self.open.values().all(|(_, other)| *other != client)
        {
            self.relinking.remove(&client);
        }
    }

    /// Whether the pages of a front end find the outputs of displays that they did not see drawn.
    pub(super) fn relinks(&self, client: &str) -> bool {
        self.relinking.contains(client)
    }

    /// The answer to a request for those open, of one target or of all.
    pub(super) fn answer(&self, target: Option<&str>) -> Json {
        let open = self.open.iter().filter(|(_, (name, _))| target.is_none_or(|target| target == name));
        let comms: Map<String, Json> =
            open.map(|(id, (name, _))| (id.clone(), json!({"target_name": name}))).collect();
        json!({"status": "ok", "comms": comms})
    }
}
