//! One line on the terminal that tells how far a long run is. Off a terminal nothing is shown.

use std::io::{self, IsTerminal, Write};
use std::sync::Mutex;
use std::time::{Duration, Instant};

/// Runs shorter than this show nothing, and the line changes no more often.
const INTERVAL: Duration = Duration::from_millis(500);

/// Progress of a run over several recordings; workers share it.
pub(super) struct Progress {
    state: Option<Mutex<State>>,
    total: usize,
}

struct State {
    changed: Instant,
    done: usize,
    heard_s: f64,
    shown: bool,
}

impl Progress {
    pub fn new(total: usize) -> Self {
        let state = State { changed: Instant::now(), done: 0, heard_s: 0.0, shown: false };
        Self { state: io::stderr().is_terminal().then(|| Mutex::new(state)), total }
    }

    /// So much more audio was heard.
    pub fn heard(&self, duration_s: f64) {
        self.change(|state| state.heard_s += duration_s);
    }

    /// A recording is done.
    pub fn done(&self) {
        self.change(|state| state.done += 1);
    }

    fn change(&self, change: impl FnOnce(&mut State)) {
        let Some(Ok(mut state)) = self.state.as_ref().map(Mutex::lock) else { return };
        change(&mut state);
        if state.changed.elapsed() >= INTERVAL {
            state.changed = Instant::now();
            state.shown = true;
            let (done, total, heard_s) = (state.done, self.total, state.heard_s);
            let line = format!("\r\x1b[Kgaptone: {done} of {total} recordings done, {heard_s:.0} s of audio read");
            // A terminal that cannot be written shows no progress.
            let _ = io::stderr().lock().write_all(line.as_bytes());
        }
    }

    /// Takes the line away, before something else is written.
    pub fn clear(&self) {
        let Some(Ok(mut state)) = self.state.as_ref().map(Mutex::lock) else { return };
        if std::mem::take(&mut state.shown) {
            let _ = io::stderr().lock().write_all(b"\r\x1b[K");
        }
    }
}
