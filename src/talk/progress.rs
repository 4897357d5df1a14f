use std::io::{IsTerminal, Write};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

/// A line on standard error that says how long a run has taken, on a terminal and after half a second.
pub struct Progress {
    done: Arc<AtomicBool>,
    ticker: Option<std::thread::JoinHandle<()>>,
}

impl Progress {
    /// Begin to count.
    pub fn begin() -> Self {
        let done = Arc::new(AtomicBool::new(false));
        if !std::io::stderr().is_terminal() {
            return Self { done, ticker: None };
        }
        let flag = done.clone();
        let ticker = std::thread::spawn(move || {
            let began = Instant::now();
            let mut shown = false;
            while !flag.load(Ordering::Relaxed) {
                std::thread::sleep(Duration::from_millis(100));
                if began.elapsed() > Duration::from_millis(500) && !flag.load(Ordering::Relaxed) {
                    shown = true;
                    complain(&format!(
                        "\rcomputing, {:.1} s; Ctrl-C stops it",
                        began.elapsed().as_secs_f64()
                    ));
                }
            }
            if shown {
                complain("\r\x1b[K");
            }
        });
        Self { done, ticker: Some(ticker) }
    }

    /// The run is done: the line is taken away.
    pub fn end(self) {
        self.done.store(true, Ordering::Relaxed);
        if let Some(ticker) = self.ticker {
            let _ = ticker.join();
        }
    }
}

fn complain(text: &str) {
    let mut out = std::io::stderr().lock();
    let _ = out.write_all(text.as_bytes());
}
