//! What a watch tells at one moment.

use super::limit::Alarm;
use crate::estimate::Estimate;
use crate::rhythm::Reading;
use serde::{Deserialize, Serialize};

/// Name of the format, in every line.
pub const FORMAT: &str = "gaptone.watch/1";

/// What the gap is doing.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum State {
    /// Too little was heard yet to say anything.
    Listening,
    /// It fires on a rhythm.
    Firing,
    /// It fires without a rhythm, or something else clicks.
    Irregular,
    /// It does not fire.
    NotFiring,
}

/// Which way the rate goes.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Trend {
    /// Up.
    Rising,
    /// No drift that stands out of the scatter.
    Steady,
    /// Down.
    Falling,
}

/// What has changed, with the time at which it happened and the time at which it was noticed, s.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Change {
    /// Time of the audio at which it happened, s.
    pub time_s: f64,
    /// Time of the audio by which it was noticed, s.
    pub noticed_s: f64,
    /// What.
    #[serde(flatten)]
    pub what: Changed,
}

/// Kinds of change.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", tag = "change")]
pub enum Changed {
    /// The gap began to fire.
    Began,
    /// The gap stopped.
    Stopped,
    /// The clicks go on, but not on the rhythm that was followed.
    LostRhythm,
    /// The rate made a step.
    Rate {
        /// Rate before it, Hz.
        before_hz: f64,
        /// Rate after it, Hz.
        after_hz: f64,
    },
    /// A weaker train beside the watched one appeared.
    SecondTrain {
        /// Its rate, Hz.
        rate_hz: f64,
    },
    /// The rate fell into step with the mains.
    Locked {
        /// The mains line, Hz.
        line_hz: f64,
    },
    /// It is in step no more.
    Unlocked,
    /// Audio was lost: the train is counted anew from here on.
    AudioLost,
}

/// Level of the audio since the last glance.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
pub struct Level {
    /// Largest magnitude, dB of full scale; none of silence.
    pub peak_dbfs: Option<f64>,
    /// Root mean square, dB of full scale; none of silence.
    pub rms_dbfs: Option<f64>,
    /// Share of samples that were clipped.
    pub clipped_share: f64,
}

/// What a watch tells at one moment.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Glance {
    /// Always [`FORMAT`].
    pub format: String,
    /// Time since the start of the audio, s.
    pub time_s: f64,
    /// What the gap is doing.
    pub state: State,
    /// From here on the firings are those of the figures, s; none without firings.
    pub since_s: Option<f64>,
    /// The figures of the present.
    #[serde(flatten)]
    pub reading: Reading,
    /// Which way the rate goes; none without a rate.
    pub trend: Option<Trend>,
    /// Share of firings that were missed.
    pub missed_share: Option<f64>,
    /// Extra strikes per firing.
    pub extra_share: Option<f64>,
    /// Gap voltage, V; none without a bench.
    pub gap_voltage_v: Option<Estimate>,
    /// Its spread, V.
    pub gap_voltage_spread_v: Option<Estimate>,
    /// Level since the last glance.
    pub level: Level,
    /// Time since the last firing, s; none before the first.
    pub silence_s: Option<f64>,
    /// What has changed since the last glance.
    pub changes: Vec<Change>,
    /// Limits that are passed.
    pub alarms: Vec<Alarm>,
}
