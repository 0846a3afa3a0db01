//! The evidence of a measurement: what a person who doubts a figure wants to see, small enough to be kept with it.
//!
//! It is collected beside the analyzer from the same audio and the same events, in bounded memory: the sum of many clicks and
//! some of them one by one, pieces of the audio with their firings, single periods (every n-th of many) and the course of
//! all of them with its extremes, how far the firings wander, the spectrum. Units: s, Hz, V; sizes in full scale.

mod clicks;
mod collect;
mod excerpts;
mod growth;
mod spectrum;
mod thin;
mod trace;

pub use clicks::ClickShape;
pub use collect::{Collector, HOLD_S};
pub use excerpts::{Excerpt, Why};
pub use growth::Growth;
pub use spectrum::Spectrum;
pub use thin::Thinned;
pub use trace::Trace;

use crate::firing::EventKind;
use serde::{Deserialize, Serialize};

/// Name of the format.
pub const EVIDENCE_FORMAT: &str = "gaptone.evidence/1";

/// A firing on the rhythm with a single period before it.
///
/// In JSON an array of its fields in this order, as the other rows of evidence: their names would be most of the text.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(into = "(f64, f64, f64, Option<f64>)", from = "(f64, f64, f64, Option<f64>)")]
pub struct FiringPoint {
    /// Time in the recording, s.
    pub time_s: f64,
    /// Time since the firing before, s.
    pub period_s: f64,
    /// Size of the click, full scale behind the click filter.
    pub size: f64,
    /// Gap voltage that the period implies, V; none without a bench.
    pub gap_voltage_v: Option<f64>,
}

impl From<FiringPoint> for (f64, f64, f64, Option<f64>) {
    fn from(point: FiringPoint) -> Self {
        (point.time_s, point.period_s, point.size, point.gap_voltage_v)
    }
}

impl From<(f64, f64, f64, Option<f64>)> for FiringPoint {
    fn from((time_s, period_s, size, gap_voltage_v): (f64, f64, f64, Option<f64>)) -> Self {
        Self { time_s, period_s, size, gap_voltage_v }
    }
}

/// A run of single periods.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(into = "[f64; 5]", from = "[f64; 5]")]
pub struct Course {
    /// Time of the first of them, s.
    pub from_s: f64,
    /// Time of the last, s.
    pub to_s: f64,
    /// Shortest period, s.
    pub low_s: f64,
    /// Longest, s.
    pub high_s: f64,
    /// Mean, s.
    pub mean_s: f64,
}

impl From<Course> for [f64; 5] {
    fn from(run: Course) -> Self {
        [run.from_s, run.to_s, run.low_s, run.high_s, run.mean_s]
    }
}

impl From<[f64; 5]> for Course {
    fn from([from_s, to_s, low_s, high_s, mean_s]: [f64; 5]) -> Self {
        Self { from_s, to_s, low_s, high_s, mean_s }
    }
}

/// A firing, a missed firing or an extra click.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(into = "(f64, EventKind)", from = "(f64, EventKind)")]
pub struct Oddity {
    /// Time in the recording, s.
    pub time_s: f64,
    /// What it is.
    pub kind: EventKind,
}

impl From<Oddity> for (f64, EventKind) {
    fn from(oddity: Oddity) -> Self {
        (oddity.time_s, oddity.kind)
    }
}

impl From<(f64, EventKind)> for Oddity {
    fn from((time_s, kind): (f64, EventKind)) -> Self {
        Self { time_s, kind }
    }
}

/// What a measurement can be checked by. Whatever there is nothing of is empty.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Evidence {
    /// Always [`EVIDENCE_FORMAT`].
    pub format: String,
    /// The whole recording: least and greatest sample of each stretch.
    pub audio: Trace,
    /// The click.
    pub click: Option<ClickShape>,
    /// Pieces of the audio with what was found in them.
    pub excerpts: Vec<Excerpt>,
    /// Every n-th firing that has a single period before it.
    pub firings: Thinned<FiringPoint>,
    /// All single periods, in runs of equal number.
    pub course: Vec<Course>,
    /// Missed firings and extra clicks, every n-th.
    pub oddities: Thinned<Oddity>,
    /// How far firings wander from an even beat.
    pub growth: Vec<Growth>,
    /// Spectrum of the audio.
    pub spectrum: Option<Spectrum>,
}

/// A number with so many significant digits: evidence is looked at, and long tails only fill the page.
fn short(value: f64, digits: usize) -> f64 {
    format!("{value:.*e}", digits.saturating_sub(1)).parse().unwrap_or(value)
}
