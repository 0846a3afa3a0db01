//! Automatic gain control: a level that rises with the attack and falls with the decay time constant sets the gain.
//!
//! Feed-forward and delayed: below the threshold the gain is 1, above it the gain holds the level at the threshold. A firing
//! rate far above 1/decay looks to it like a steady carrier; a slow train is turned down after each click.

use super::detector::remains;
use serde::{Deserialize, Serialize};

/// Time constants and threshold.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct AgcSettings {
    /// Attack time constant, s.
    pub attack_s: f64,
    /// Decay time constant, s.
    pub decay_s: f64,
    /// Level from which the gain is reduced, in click peaks.
    pub threshold: f64,
}

/// An AGC at work.
#[derive(Debug, Clone, PartialEq)]
pub struct Agc {
    attack: f64,
    decay: f64,
    threshold: f64,
    level: f64,
}

impl Agc {
    /// An AGC at full gain, stepped by `step_s`.
    #[must_use]
    pub fn new(settings: AgcSettings, step_s: f64) -> Self {
        Self {
            attack: remains(step_s, settings.attack_s),
            decay: remains(step_s, settings.decay_s),
            threshold: settings.threshold,
            level: 0.0,
        }
    }

    /// Gain for the envelope of this step.
    #[inline]
    pub fn gain(&mut self, envelope: f64) -> f64 {
        let memory = if envelope > self.level { self.attack } else { self.decay };
        self.level = envelope + (self.level - envelope) * memory;
        if self.level > self.threshold { self.threshold / self.level } else { 1.0 }
    }
}
