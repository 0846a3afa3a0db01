//! What the audio alone says: the result of the analyzer, before any bench is consulted.

use crate::estimate::Estimate;
use serde::{Deserialize, Serialize};

/// The verdict in one word.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Verdict {
    /// A rhythm with a period jitter under 5 % of the period.
    Steady,
    /// A rhythm with more jitter.
    Unsteady,
    /// Clicks without a rhythm; the rate is the mean count rate.
    Irregular,
    /// No gap heard; every figure is absent.
    None,
}

/// Counts of firings.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct FiringCounts {
    /// Firings on the rhythm that the audio shows.
    pub on_rhythm: u64,
    /// Firings that the rhythm demands and the audio does not show.
    pub missed: u64,
    /// Clicks off the rhythm.
    pub extra: u64,
}

/// The part of the jitter that keeps step with the mains.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct MainsJitter {
    /// Standard deviation of the periods due to it, seconds.
    #[serde(flatten)]
    pub jitter_s: Estimate,
    /// Frequency of the line, Hz.
    pub frequency_hz: f64,
}

/// A weaker train beside the measured one.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct OtherTrain {
    /// Its firing rate, Hz.
    pub firing_rate_hz: Estimate,
    /// Its period jitter, s, where it can be told.
    pub period_jitter_s: Option<Estimate>,
    /// Median click size relative to the measured train's.
    pub relative_size: f64,
}

/// A stretch of time in which the gap fires.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Stretch {
    /// Time of its first firing, s.
    pub from_s: f64,
    /// Time of its last firing, s.
    pub to_s: f64,
}

/// What the audio alone says.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Reading {
    /// The verdict.
    pub verdict: Verdict,
    /// One sentence a person can act on.
    pub reason: String,
    /// Counts.
    pub firings: FiringCounts,
    /// Firings per second.
    pub firing_rate_hz: Option<Estimate>,
    /// Mean period, s.
    pub period_s: Option<Estimate>,
    /// Standard deviation of single periods about a straight line, timing noise removed, mains-locked part included, s.
    pub period_jitter_s: Option<Estimate>,
    /// Standard deviation of the difference of neighbouring periods, timing noise removed, s.
    pub cycle_jitter_s: Option<Estimate>,
    /// The part of the period jitter locked to the mains.
    pub mains_locked_jitter_s: Option<MainsJitter>,
    /// Relative change of the rate per second, 1/s.
    pub drift_per_s: Option<Estimate>,
    /// Standard deviation of the error of a click time, s.
    pub timing_noise_s: Option<Estimate>,
    /// Weaker trains.
    pub other_trains: Vec<OtherTrain>,
    /// Stretches in which the gap fires.
    pub stretches: Vec<Stretch>,
    /// What else the person should know.
    pub notes: Vec<String>,
}

impl Reading {
    /// No gap heard, for a reason in words.
    #[must_use]
    pub fn none(reason: String) -> Self {
        Self {
            verdict: Verdict::None,
            reason,
            firings: FiringCounts::default(),
            firing_rate_hz: None,
            period_s: None,
            period_jitter_s: None,
            cycle_jitter_s: None,
            mains_locked_jitter_s: None,
            drift_per_s: None,
            timing_noise_s: None,
            other_trains: Vec::new(),
            stretches: Vec::new(),
            notes: Vec::new(),
        }
    }
}
