//! The hinge of the two halves: what the forward model makes and the analyzer recovers.

use serde::{Deserialize, Serialize};

/// What an entry of a train is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum EventKind {
    /// A firing on the rhythm that the audio shows.
    Firing,
    /// A firing that the rhythm demands and the audio does not show.
    Missed,
    /// A click off the rhythm.
    Extra,
}

/// One event that the analyzer recovered from audio.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Event {
    /// Time of the click from the start of the audio in seconds (the receiver's constant delay is in it).
    pub time_s: f64,
    /// What it is.
    pub kind: EventKind,
    /// Size of the click, in units of the recording's full scale behind the click filter; 0 for a missed one.
    pub size: f64,
    /// Standard uncertainty of the time in seconds.
    pub timing_u_s: f64,
    /// Time since the firing before it on the rhythm, seconds; none for the first, after a break, a missed or an extra one.
    pub period_s: Option<f64>,
}

/// One firing of the forward model, with what only the model knows.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Firing {
    /// Instant of breakdown in seconds from switching on (render: from the start of the clip).
    pub time_s: f64,
    /// Voltage across the gap at breakdown, volts.
    pub voltage_v: f64,
    /// `Firing`: on the rhythm and heard. `Missed`: the gap fires, the audio does not show it. `Extra`: off the rhythm.
    pub kind: EventKind,
}
