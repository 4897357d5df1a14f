//! A computation that takes long says so where its result will stand.

use std::sync::Arc;
use std::time::{Duration, Instant};

use serde_json::json;

use super::answers::Kernel;
use super::message::Request;
use crate::display;

/// From here on a computation is long.
const LONG: Duration = Duration::from_millis(500);
/// So often its progress is told.
const BETWEEN: Duration = Duration::from_millis(500);
const BETWEEN_LOOKS: Duration = Duration::from_millis(100);

/// What is being computed now.
pub(super) struct Activity {
    request: Arc<Request>,
    expression: String,
    /// The display where it is told.
    pub(super) display: String,
    /// Whether that display stands in the notebook.
    pub(super) drawn: bool,
    began: Instant,
    told: Option<Instant>,
}

impl Activity {
    pub(super) fn new(request: &Arc<Request>, expression: &str, display: String, drawn: bool) -> Self {
        Self {
            request: request.clone(),
            expression: expression.to_owned(),
            display,
            drawn,
            began: Instant::now(),
            told: None,
        }
    }

    /// How long it has been going on.
    pub(super) fn lasted(&self) -> Duration {
        self.began.elapsed()
    }
}

/// Tell the progress of whatever is computed, for as long as the kernel lives.
pub(super) async fn watch(kernel: Arc<Kernel>) {
    loop {
        tokio::time::sleep(BETWEEN_LOOKS).await;
        let mut activity = kernel.activity();
        let Some(activity) = activity.as_mut() else { continue };
        let due = activity.lasted() >= LONG && activity.told.is_none_or(|told| told.elapsed() >= BETWEEN);
        if !due {
            continue;
        }
        let (done, total) = kernel.progress();
        let seconds = activity.lasted().as_secs();
        let blocks = if total > 1 { format!("{done} of {total} blocks of members, ") } else { String::new() };
        let words = format!("computing {}: {blocks}{seconds} s", activity.expression);
        let fraction = (total > 1).then(|| done as f64 / total as f64);
        let kind = if activity.drawn { "update_display_data" } else { "display_data" };
        let content = json!({
            "data": {"text/plain": words, "text/html": display::progress_html(&words, fraction)},
            "metadata": {"rhythmite": {"display": activity.display}},
            "transient": {"display_id": activity.display},
        });
        kernel.publish(&activity.request, kind, &json!({}), &content);
        activity.drawn = true;
        activity.told = Some(Instant::now());
    }
}
