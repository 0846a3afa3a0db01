//! Pieces of the audio with what was found in them: the beginning, and where something is odd.

use super::{Oddity, Trace};
use crate::firing::{Event, EventKind};
use serde::{Deserialize, Serialize};

/// Why a piece is shown.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Why {
    /// The first firings.
    Beginning,
    /// A firing is missed.
    Missed,
    /// A click is off the rhythm.
    Extra,
    /// Clicks that keep no rhythm.
    Irregular,
    /// There is audio, but no click.
    Nothing,
}

/// A piece of audio.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Excerpt {
    /// Why it is shown.
    pub why: Why,
    /// The audio.
    pub audio: Trace,
    /// What was found in it.
    pub events: Vec<Oddity>,
}

/// Periods in a piece, and its least and greatest length, s.
const PERIODS: f64 = 14.0;
const SHORTEST_S: f64 = 0.012;
const LONGEST_S: f64 = 4.0;
/// Clicks in a piece without a rhythm, and the room on both sides of them, share of its length.
const LOOSE: usize = 12;
const MARGIN: f64 = 0.06;
/// Stretches of a piece.
pub(super) const STRETCHES: usize = 900;
/// Events that are looked back on.
const RECENT: usize = 64;

/// Picks the pieces as events go by.
#[derive(Debug, Clone, Default)]
pub(super) struct Picker {
    recent: Vec<Event>,
    taken: Vec<(Why, f64)>,
    /// Beginning, length, reason.
    wanted: Vec<(f64, f64, Why)>,
    found: Vec<(f64, f64, Why, Vec<Oddity>)>,
}

impl Picker {
    pub fn push(&mut self, event: &Event, period_s: Option<f64>) {
        self.recent.push(*event);
        if self.recent.len() > 2 * RECENT {
            self.recent.drain(..RECENT);
        }
        let Some(period_s) = period_s else { return self.loose() };
        let length_s = (PERIODS * period_s).clamp(SHORTEST_S, LONGEST_S);
        let why = match event.kind {
            EventKind::Firing => Why::Beginning,
            EventKind::Missed => Why::Missed,
            EventKind::Extra => Why::Extra,
        };
        if !self.taken.iter().any(|taken| taken.0 == why) {
            let first = self.recent.iter().find(|event| event.kind == EventKind::Firing);
            let first_s = first.map_or(event.time_s, |first| first.time_s);
            let from_s = match why {
                Why::Beginning => first_s - 0.7 * period_s,
                _ => event.time_s - 0.4 * length_s,
            };
            // The beginning may show it already.
            let shown = self.taken.iter().any(|taken| event.time_s > taken.1 && event.time_s < taken.1 + length_s);
            self.taken.push((why, from_s));
            if !shown {
                self.wanted.push((from_s.max(0.0), length_s, why));
            }
        }
        while let Some(next) = self.wanted.first().filter(|next| event.time_s > next.0 + next.1).copied() {
            self.wanted.remove(0);
            self.close(next);
        }
    }

    /// The pieces that are complete, to be filled with audio.
    pub fn take(&mut self) -> Vec<(f64, f64, Why, Vec<Oddity>)> {
        std::mem::take(&mut self.found)
    }

    /// Shows the first clicks that keep no rhythm, once there are so many.
    fn loose(&mut self) {
        let loose = || self.recent.iter().filter(|event| event.kind == EventKind::Extra);
        let (Some(first), Some(last)) = (loose().next(), loose().nth(LOOSE - 1)) else { return };
        if self.taken.iter().any(|taken| taken.0 == Why::Irregular) {
            return;
        }
        let length_s = (last.time_s - first.time_s).clamp(SHORTEST_S, LONGEST_S);
        let from_s = (first.time_s - MARGIN * length_s).max(0.0);
        self.taken.push((Why::Irregular, from_s));
        self.close((from_s, (1.0 + 2.0 * MARGIN) * length_s, Why::Irregular));
    }

    pub fn finish(&mut self) {
        for next in std::mem::take(&mut self.wanted) {
            self.close(next);
        }
    }

    fn close(&mut self, (from_s, length_s, why): (f64, f64, Why)) {
        let inside = from_s..from_s + length_s;
        let events = self
            .recent
            .iter()
            .filter(|event| inside.contains(&event.time_s))
            .map(|event| Oddity { time_s: super::short(event.time_s, 9), kind: event.kind })
            .collect();
        self.found.push((from_s, length_s, why, events));
    }
}
