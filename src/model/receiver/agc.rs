//! Automatic gain control by one of three laws. A firing rate far above 1/decay looks to it like a steady carrier; a slow train
//! is turned down after each click.
//!
//! Over one internal step the level is held at its mean, and the step of each law is exact; a step in which attack and decay
//! take turns is taken in pieces.

use super::Complex;
use super::detector::remains;
use super::passage::{PARTS, Passage, halves, simpson};
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

/// Pieces of a step in which attack and decay take turns.
const PIECES: usize = 8;

/// An AGC at work.
#[derive(Debug, Clone, PartialEq)]
pub struct Agc {
    settings: AgcSettings,
    whole: Stretch,
    piece: Stretch,
    level: f64,
    gain: f64,
}

/// What a stretch of time does.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Stretch {
    length_s: f64,
    /// What remains of a difference after attack, and after decay.
    attack: f64,
    decay: f64,
}

impl Stretch {
    fn new(settings: AgcSettings, length_s: f64) -> Self {
        let [attack, decay] = [settings.attack_s, settings.decay_s].map(|time_s| remains(length_s, time_s));
        Self { length_s, attack, decay }
    }
}

impl Agc {
    /// An AGC at full gain (at unit gain where the gain has no practical limit), stepped by `step_s`.
    #[must_use]
    pub fn new(settings: AgcSettings, step_s: f64) -> Self {
        Self {
            settings,
            whole: Stretch::new(settings, step_s),
            piece: Stretch::new(settings, step_s / PIECES as f64),
            level: 0.0,
            gain: settings.greatest_gain.min(1.0),
        }
    }

    /// Gain after the steps so far.
    #[inline]
    #[must_use]
    pub fn now(&self) -> f64 {
        match self.settings.law {
            AgcLaw::Forward => self.aim(self.level),
            AgcLaw::Feedback | AgcLaw::LevelDependent => self.gain,
        }
    }

    /// Gain at the end of a step of the given mean envelope.
    #[inline]
    pub fn gain(&mut self, envelope: f64) -> f64 {
        self.stretch(self.whole, envelope, self.aim(envelope));
        self.now()
    }

    /// Gain at the end of a step of the envelope.
    #[inline]
    pub(super) fn passage<F: Fn(usize) -> Complex>(&mut self, passage: &Passage<'_, F>) -> f64 {
        let [from, .., to] = passage.lengths;
        if self.rises(from) == self.rises(to) {
            // The aim is bent where the level rises steeply, and what its mean would be off adds up from click to click.
            let aim = match self.settings.law {
                AgcLaw::Feedback => simpson(halves(&passage.lengths).map(|length| self.aim(length))),
                AgcLaw::Forward | AgcLaw::LevelDependent => 0.0,
            };
            self.stretch(self.whole, passage.mean_length, aim);
            return self.now();
        }
        for piece in 0..PIECES {
            let middle = passage.at((2 * piece + 1) * PARTS / (2 * PIECES));
            let length = middle.norm_sqr().sqrt();
            self.stretch(self.piece, length, self.aim(length));
        }
        self.now()
    }

    /// True if such an envelope lets the attack act.
    #[inline]
    fn rises(&self, envelope: f64) -> bool {
        match self.settings.law {
            AgcLaw::Forward => envelope > self.level,
            AgcLaw::Feedback | AgcLaw::LevelDependent => self.attacks(envelope),
        }
    }

    /// Gain at which the loop would come to rest.
    #[inline]
    fn aim(&self, envelope: f64) -> f64 {
        let aim = self.settings.threshold / envelope;
        if aim < self.settings.greatest_gain { aim } else { self.settings.greatest_gain }
    }

    #[inline]
    fn stretch(&mut self, stretch: Stretch, envelope: f64, aim: f64) {
        let rises = self.rises(envelope);
        let memory = if rises { stretch.attack } else { stretch.decay };
        match self.settings.law {
            AgcLaw::Forward => self.level = envelope + (self.level - envelope) * memory,
            AgcLaw::Feedback => self.gain = aim + (self.gain - aim) * memory,
            AgcLaw::LevelDependent => self.level_dependent(stretch.length_s, envelope, rises),
        }
    }

    #[inline]
    fn attacks(&self, envelope: f64) -> bool {
        (envelope - self.settings.margin) * self.gain > self.settings.threshold
    }

    fn level_dependent(&mut self, length_s: f64, envelope: f64, rises: bool) {
        let AgcSettings { threshold, attack_s, decay_s, greatest_gain, .. } = self.settings;
        let excess = envelope * self.gain - threshold;
        let time_constant_s = if rises { attack_s } else { decay_s };
        // dg/dt = (threshold − level·g)/τ: at level 0 a straight line, else exponential with τ/level.
        let x = envelope * length_s / time_constant_s;
        let share = if x > 1e-6 { -(-x).exp_m1() / x } else { 1.0 - 0.5 * x };
        let change =
            if time_constant_s > 0.0 { excess * share * length_s / time_constant_s } else { excess / envelope };
        self.gain = (self.gain - change).clamp(0.0, greatest_gain);
    }
}
