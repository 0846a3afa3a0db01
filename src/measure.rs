//! From audio to a measurement: joins [`crate::clicks`], [`crate::rhythm`] and [`crate::voltage`].
//!
//! Interface only, for the command line to compile against: nothing is analysed in this branch, and every outcome
//! says that no gap was heard.

use crate::firing::Event;
use crate::rhythm::{FiringCounts, Reading, Verdict};

/// Settings of the analysis.
#[derive(Debug, Clone, Default)]
pub struct Options {}

/// Takes in audio and gives an outcome.
pub struct Measurer;

/// What the analysis found.
pub struct Outcome {
    /// The figures.
    pub reading: Reading,
    /// Every click.
    pub events: Vec<Event>,
    /// How the verdict came about.
    pub explanation: Vec<String>,
}

impl Measurer {
    /// A measurer for mono audio at this rate, Hz.
    #[must_use]
    pub fn new(_sample_rate_hz: u32, _options: Options) -> Self {
        Self
    }

    /// Takes in samples.
    pub fn push(&mut self, _mono: &[f32]) {}

    /// The outcome.
    #[must_use]
    pub fn finish(self) -> Outcome {
        let reading = Reading {
            verdict: Verdict::None,
            reason: "the analysis is not part of this branch".to_owned(),
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
        };
        Outcome { reading, events: Vec::new(), explanation: Vec::new() }
    }
}
