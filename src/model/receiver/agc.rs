//! Automatic gain control by one of three laws. A firing rate far above 1/decay looks to it like a steady carrier; a slow train
//! is turned down after each click.
//!
//! Over one internal step the level is held, and the step of each law is exact.

use super::detector::remains;
use serde::{Deserialize, Serialize};

/// How the gain follows the level.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum AgcLaw {
    /// A level that rises with the attack and falls with the decay time constant; the gain holds it at the threshold.
    Forward,
    /// The gain itself moves towards threshold/level with the attack time constant where the output is above the threshold and
    /// with the decay time constant where it is below.
    #[default]
    Feedback,
    /// The output less the threshold drives the gain: the time constants are those at level 1 and become shorter as the level
    /// rises. Such a loop pumps: a large click pulls it down at once, and in silence it climbs at a constant rate.
    LevelDependent,
}

/// Law, time constants, threshold and limit.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct AgcSettings {
    /// Law.
    pub law: AgcLaw,
    /// Attack time constant, s.
    pub attack_s: f64,
    /// Decay time constant, s.
    pub decay_s: f64,
    /// Level to which the output is regulated, in click peaks.
    pub threshold: f64,
    /// The attack of a loop sets in only where the level is this far above threshold/gain, in click peaks.
    pub margin: f64,
    /// Greatest gain; at 1 nothing below the threshold is turned up.
    pub greatest_gain: f64,
}

impl Default for AgcSettings {
    /// Attack and decay of an ordinary broadcast receiver (common practice: 1 to 20 ms and 0.1 to 0.3 s).
    fn default() -> Self {
        Self { law: AgcLaw::default(), attack_s: 3e-3, decay_s: 0.3, threshold: 0.3, margin: 0.0, greatest_gain: 1.0 }
    }
}

/// An AGC at work.
#[derive(Debug, Clone, PartialEq)]
pub struct Agc {
    settings: AgcSettings,
    step_s: f64,
    attack: f64,
    decay: f64,
    level: f64,
    gain: f64,
}

impl Agc {
    /// An AGC at full gain (at unit gain where the gain has no practical limit), stepped by `step_s`.
    #[must_use]
    pub fn new(settings: AgcSettings, step_s: f64) -> Self {
        Self {
            settings,
            step_s,
            attack: remains(step_s, settings.attack_s),
            decay: remains(step_s, settings.decay_s),
            level: 0.0,
            gain: settings.greatest_gain.min(1.0),
        }
    }

    /// Gain for the envelope of this step.
    #[inline]
    pub fn gain(&mut self, envelope: f64) -> f64 {
        match self.settings.law {
            AgcLaw::Forward => self.forward(envelope),
            AgcLaw::Feedback => self.feedback(envelope),
            AgcLaw::LevelDependent => self.level_dependent(envelope),
        }
    }

    fn forward(&mut self, envelope: f64) -> f64 {
        let memory = if envelope > self.level { self.attack } else { self.decay };
        self.level = envelope + (self.level - envelope) * memory;
        (self.settings.threshold / self.level).min(self.settings.greatest_gain)
    }

    fn attacks(&self, envelope: f64) -> bool {
        (envelope - self.settings.margin) * self.gain > self.settings.threshold
    }

    fn feedback(&mut self, envelope: f64) -> f64 {
        let used = self.gain;
        let memory = if self.attacks(envelope) { self.attack } else { self.decay };
        let aim = (self.settings.threshold / envelope).min(self.settings.greatest_gain);
        self.gain = aim + (used - aim) * memory;
        used
    }

    fn level_dependent(&mut self, envelope: f64) -> f64 {
        let used = self.gain;
        let AgcSettings { threshold, attack_s, decay_s, greatest_gain, .. } = self.settings;
        let excess = envelope * used - threshold;
        let time_constant_s = if self.attacks(envelope) { attack_s } else { decay_s };
        // dg/dt = (threshold − level·g)/τ: at level 0 a straight line, else exponential with τ/level.
        let x = envelope * self.step_s / time_constant_s;
        let share = if x > 1e-6 { -(-x).exp_m1() / x } else { 1.0 - 0.5 * x };
        let change =
            if time_constant_s > 0.0 { excess * share * self.step_s / time_constant_s } else { excess / envelope };
        self.gain = (used - change).clamp(0.0, greatest_gain);
        used
    }
}
