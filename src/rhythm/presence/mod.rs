//! Is it a gap at all? Rules that refuse tones, noise and speech. A wrong number is worse than none.

pub mod character;
pub mod coherence;

use super::fit::Fit;
use super::order::median;
use crate::clicks::spectrum::{Spectrum, power_of_two_near, welch};
use character::Character;
use coherence::LineCharacter;

/// Fewest firings for a rhythm.
const FEWEST: usize = 8;
/// Least evidence, nats, in all and per firing. Some hundred periods and shapes are tried: noise reaches 30.
const EVIDENCE: f64 = 40.0;
const EVIDENCE_PER_FIRING: f64 = 0.4;

// Limits of the character of clicks. Set on generated recordings (all kinds of the proving ground, seeds 0..4 without and
// 20..26 with a gap), where they leave a margin to both sides; see DEVELOPERS.md for the command that repeats the table.

/// Clicks are alike from here on …
const ALIKE: f64 = 0.7;
/// … or from here on if each firing brings this evidence and most of its energy lies in the core.
const BARELY_ALIKE: (f64, f64, f64) = (0.5, 2.5, 0.7);
/// A click's energy lies within this time, s, and this share of it in the core.
const WIDTH_S: f64 = 0.65e-3;
const CORE: f64 = 0.64;
/// Clicks that stand out by this factor with this share in the core may be wider (a ticking clock, a ringing receiver).
const CLEAR_ANYWAY: (f64, f64) = (15.0, 0.5);
/// Rate from which neighbours lie within the window of a click's shape, Hz; the line must then hold.
const CROWDED_HZ: f64 = 500.0;
const CROWDED_CORE: f64 = 0.5;
/// Crowded clicks without jitter hardly move the line's surroundings: they must be alike, clear and most in the core instead,
/// and short (s); while they sound their line must hold for this share of the time.
const CROWDED_CLICKS: (f64, f64, f64, f64) = (0.9, 1.8, 0.65, 1.05e-3);
const CROWDED_STABLE: f64 = 0.75;
/// So must clicks be whose line is so coherent that its wander (drift of the rate) need not be looked at: alike, share of time on
/// the line, coherence.
const COHERENT: (f64, f64, f64) = (0.9, 0.8, 0.5);
/// Clicks that are alike and clear may be a little wider at any rate: alike, clear, core, width (s).
const WIDER: (f64, f64, f64, f64) = (0.9, 2.5, 0.78, 0.8e-3);
/// Clicks in noise: alike from here on if they are this narrow (s), this much in the core and this clear.
const NOISY: (f64, f64, f64, f64) = (0.55, 0.45e-3, 0.85, 3.0);
/// Very short clicks in wide noise are a small part of what is looked at about them. They count as alike from here on if they are this
/// narrow (s), this much in the core and this clear, and if each firing of a tight rhythm brings this evidence, which noise does not.
const NARROW: (f64, f64, f64, f64, f64) = (0.4, 0.12e-3, 0.95, 3.3, 1.0);
/// Rate from which the line alone decides, Hz.
const OVERLAP_HZ: f64 = 1_200.0;
/// The line is the train's: share of time on it, coherence of its surroundings with it, growth of its phase variance.
const STABLE: f64 = 0.93;
const COHERENCE: f64 = 0.12;
const GROWTH: (f64, f64) = (0.4, 2.0);
/// A line with less coherence is a train's if it is never off, wanders just as a train of independent periods does and keeps its
/// amplitude: share of time, growth, amplitude, and either the coherence that noise beside a tone does not reach (tones and
/// whistles of the proving ground, seeds 5000..5008: 0.01 where the line is stable) or this many harmonics nearly alike.
const WALKS: (f64, (f64, f64), f64, f64, usize) = (0.97, (0.7, 1.4), 0.1, 0.03, 3);
/// The line's frequency is the rate of separate clicks within this.
const SAME_RATE: f64 = 0.02;
/// A crowded train whose line is off for most of the time that it sounds is none (random phases are off for a third).
const CROWDED_OFF: f64 = 0.45;
/// Six lines with this share of the energy are tones unless clicks stand out by this factor.
const SIX_LINES: f64 = 0.9;
const CLEAR_OF_TONES: f64 = 1.2;
/// Clicks that stand out by less than this are lost in what lies between them, unless they have a line that holds.
const LOST: f64 = 1.2;
/// So are they, however they stand out, with this share of the energy in six lines and less scatter than any gap has.
const CHORD: (f64, f64) = (0.99, 2e-3);
/// Clicks that stand out by less than this must not have more than this share of the energy in six lines, nor a line that is
/// off its frequency in more than this share of the time at less than this scatter.
const UNCLEAR: f64 = 2.0;
const MANY_TONES: f64 = 0.5;
/// Nor, standing out by less than this, be less alike than this (an engine's beats).
const UNSURE: (f64, f64) = (1.8, 0.85);
const WANDERING: (f64, f64) = (0.12, 0.7);
/// A rate on a mains multiple, within this, with this share of the energy in mains lines is buzz unless clicks stand out by
/// this factor …
const ON_MAINS: f64 = 7e-4;
const MAINS_ENERGY: f64 = 0.6;
const CLEAR_OF_MAINS: f64 = 3.0;
/// … and one without scatter needs more.
const BUZZ_SCATTER: f64 = 1e-2;
const CLEAR_OF_BUZZ: f64 = 8.0;
/// Clicks that fill less than this share of the time must stand clear, or be alike to the last.
const PARTLY: (f64, f64, f64) = (0.6, 4.0, 0.97);

/// Where the energy lies.
#[derive(Debug, Clone, Copy)]
pub struct Tones {
    /// Share outside the line at the rate.
    pub outside: f64,
    /// Share in the six strongest lines.
    pub six: f64,
    /// Share in narrow lines on multiples of 50 Hz or of 60 Hz, whichever is more.
    pub mains: f64,
    /// Multiples of the rate, of the first eight, that hold a tenth or more of what the strongest of them holds: clicks have
    /// many alike, a tone's fall off.
    pub harmonics: usize,
}

/// Sorts the energy of a window by its lines, for a train of a given rate.
#[must_use]
pub fn tones(x: &[f32], sample_rate_hz: f64, firing_rate_hz: f64) -> Tones {
    let segment = power_of_two_near(sample_rate_hz / 3.0);
    if x.len() < segment {
        return Tones { outside: 1.0, six: 0.0, mains: 0.0, harmonics: 0 };
    }
    let mut s = welch(x, sample_rate_hz, segment, true);
    let low = s.bin(150.0);
    s.power[..=low].fill(0.0);
    let p = &s.power;
    let total = p.iter().sum::<f64>() + 1e-300;
    let mut peaks: Vec<usize> =
        (1..p.len() - 1).filter(|&k| p[k] > p[k - 1] && p[k] >= p[k + 1] && p[k] > 30.0 * surroundings(p, k)).collect();
    peaks.sort_by(|&a, &b| p[b].total_cmp(&p[a]));
    let about = |k: usize, r: usize| p[k.saturating_sub(r)..(k + r + 1).min(p.len())].iter().sum::<f64>();
    let six = peaks.iter().take(6).map(|&k| about(k, 2)).sum::<f64>() / total;
    let reach = 0.06 * firing_rate_hz + 2.0 * s.step_hz;
    let outside = 1.0 - s.sum(firing_rate_hz - reach, firing_rate_hz + reach) / total;
    let on_mains = |unit: f64| {
        let on = |f: f64| (f - (f / unit).round().max(1.0) * unit).abs() < 1.5 * s.step_hz;
        peaks.iter().take(24).filter(|&&k| on(k as f64 * s.step_hz)).map(|&k| about(k, 2)).sum::<f64>() / total
    };
    Tones { outside, six, mains: on_mains(50.0).max(on_mains(60.0)), harmonics: even_harmonics(&s, firing_rate_hz) }
}

/// Half width of a harmonic, share of its frequency.
const HARMONIC: f64 = 0.02;

fn even_harmonics(s: &Spectrum, rate_hz: f64) -> usize {
    let energy: Vec<f64> = (1..=8)
        .map(|k| rate_hz * f64::from(k))
        .map(|f| s.sum(f * (1.0 - HARMONIC) - s.step_hz, f * (1.0 + HARMONIC) + s.step_hz))
        .collect();
    let most = energy.iter().copied().fold(0.0, f64::max);
    energy.iter().filter(|e| **e >= 0.1 * most).count()
}

fn surroundings(p: &[f64], k: usize) -> f64 {
    median(&p[k.saturating_sub(20)..(k + 21).min(p.len())])
}

/// Everything that the judgement rests on.
#[derive(Debug, Clone, Copy)]
pub struct Heard {
    /// Rate, Hz.
    pub rate_hz: f64,
    /// Firings in the part looked at, evidence (nats), share of the time covered, relative scatter.
    pub firings: usize,
    /// Evidence, nats.
    pub evidence: f64,
    /// Share of the time covered.
    pub cover: f64,
    /// True if it fires most of the time, or in long stretches.
    pub fills_its_time: bool,
    /// Relative scatter of periods.
    pub scatter: f64,
    /// Where the energy lies.
    pub tones: Tones,
    /// What the clicks look like.
    pub character: Option<Character>,
    /// What the line at the rate does.
    pub line: Option<LineCharacter>,
}

impl Heard {
    /// Gathers what is heard of a fitted train.
    #[must_use]
    pub fn of(fit: &Fit, tones: Tones, character: Option<Character>, line: Option<LineCharacter>) -> Self {
        Self {
            rate_hz: 1.0 / fit.period_s,
            firings: fit.chain.index.len(),
            evidence: fit.evidence,
            cover: fit.cover,
            fills_its_time: fit.fills_its_time(),
            scatter: fit.jitter,
            tones,
            character,
            line,
        }
    }

    /// One line for those who doubt.
    #[must_use]
    pub fn describe(&self) -> String {
        let mut text = format!(
            "presence: {} firings at {:.2} /s, {:.2} nats each, cover {:.2}, scatter {:.2} %; six lines hold {:.2} of the energy, {} harmonics alike",
            self.firings,
            self.rate_hz,
            self.evidence / self.firings.max(1) as f64,
            self.cover,
            100.0 * self.scatter,
            self.tones.six,
            self.tones.harmonics
        );
        if let Some(c) = &self.character {
            text += &format!(
                "; clicks alike {:.2}, {:.2} ms wide, core {:.2}, clear by {:.1}",
                c.alike,
                1e3 * c.width_s,
                c.core,
                c.clear
            );
        }
        if let Some(l) = &self.line {
            text += &format!(
                "; line stable {:.2}, coherence {:.2}, phase growth {:.2}, amplitude varies {:.2}",
                l.stable, l.coherence, l.growth, l.amplitude_cv
            );
        }
        text
    }

    /// The reason to refuse, if there is one.
    #[must_use]
    pub fn refusal(&self) -> Option<&'static str> {
        if self.firings < FEWEST {
            Some("fewer than eight clicks stand on a rhythm")
        } else if self.evidence < EVIDENCE || self.evidence < EVIDENCE_PER_FIRING * self.firings as f64 {
            Some("no rhythm explains what is heard better than chance")
        } else if !self.fills_its_time {
            Some("a rhythm holds only here and there")
        } else if self.rate_hz > OVERLAP_HZ {
            (!self.line_holds())
                .then_some("a tone is heard, and what lies beside it does not move with it as with clicks")
        } else {
            self.refusal_of_clicks()
        }
    }

    fn refusal_of_clicks(&self) -> Option<&'static str> {
        let Some(c) = &self.character else { return Some("too few clicks to tell what they look like") };
        let each = self.evidence / self.firings.max(1) as f64;
        let noisy = c.alike >= NOISY.0 && c.width_s <= NOISY.1 && c.core >= NOISY.2 && c.clear >= NOISY.3;
        let narrow = c.alike >= NARROW.0
            && c.width_s <= NARROW.1
            && c.core >= NARROW.2
            && c.clear >= NARROW.3
            && each >= NARROW.4
            && self.scatter < WANDERING.0;
        let alike = c.alike >= ALIKE
            || noisy
            || narrow
            || (c.alike >= BARELY_ALIKE.0 && each >= BARELY_ALIKE.1 && c.core >= BARELY_ALIKE.2);
        let wider = c.alike >= WIDER.0 && c.clear >= WIDER.1 && c.core >= WIDER.2 && c.width_s <= WIDER.3;
        let short = (c.width_s <= WIDTH_S && c.core >= CORE) || wider;
        let clean = c.alike >= CROWDED_CLICKS.0
            && c.clear >= CROWDED_CLICKS.1
            && c.core >= CROWDED_CLICKS.2
            && c.width_s <= CROWDED_CLICKS.3
            && self.line.is_none_or(|l| l.stable >= CROWDED_STABLE * self.cover);
        let coherent =
            c.alike >= COHERENT.0 && self.line.is_some_and(|l| l.stable >= COHERENT.1 && l.coherence >= COHERENT.2);
        let crowded = self.rate_hz > CROWDED_HZ && (clean || coherent || (c.core >= CROWDED_CORE && self.line_holds()));
        let on_mains = [50.0, 60.0].iter().any(|unit| {
            let multiple = (self.rate_hz / unit).round();
            multiple >= 1.0 && (self.rate_hz / (unit * multiple) - 1.0).abs() < ON_MAINS
        });
        // A line that wanders as a train's does is not the mains'.
        let buzz = on_mains
            && !self.line_holds()
            && ((self.tones.mains > MAINS_ENERGY && c.clear < CLEAR_OF_MAINS)
                || (self.scatter < BUZZ_SCATTER && c.clear < CLEAR_OF_BUZZ));
        if !alike {
            Some("what repeats is not the same click each time")
        } else if !(short || crowded || (c.clear >= CLEAR_ANYWAY.0 && c.core >= CLEAR_ANYWAY.1)) {
            Some("what repeats is longer than a click")
        } else if self.rate_hz > CROWDED_HZ && self.line.is_some_and(|l| l.stable < CROWDED_OFF * self.cover) {
            Some("what repeats has no line at its rate")
        } else if buzz {
            Some("what is heard keeps step with the mains and does not stand out like clicks: hum or buzz")
        } else if c.clear < LOST && self.rate_hz < CROWDED_HZ && !(coherent || self.line_holds()) {
            Some("what repeats does not stand out of what lies between")
        } else if c.clear < UNCLEAR
            && !(coherent || self.line_holds())
            && ((self.rate_hz < CROWDED_HZ
                && (self.tones.six > MANY_TONES || (c.clear < UNSURE.0 && c.alike < UNSURE.1)))
                || self.line_wanders())
        {
            Some("what repeats hardly stands out of tones or a voice")
        } else if self.cover < PARTLY.0 && c.clear < PARTLY.1 && c.alike < PARTLY.2 {
            Some("a rhythm that hardly stands out holds only here and there")
        } else if (self.tones.six > SIX_LINES && c.clear < CLEAR_OF_TONES && !crowded)
            || (self.tones.six > CHORD.0 && self.scatter < CHORD.1)
        {
            Some("the sound is a handful of tones")
        } else {
            None
        }
    }

    /// True if a tight rhythm goes with a line that is elsewhere most of the time, as in speech.
    fn line_wanders(&self) -> bool {
        self.scatter < WANDERING.0 && self.line.is_some_and(|l| l.stable < WANDERING.1)
    }

    fn line_holds(&self) -> bool {
        self.line.is_some_and(|l| {
            // A line nearby, as a harmonic of a slower train, is not the rate's.
            if (l.frequency_hz / self.rate_hz - 1.0).abs() > SAME_RATE && self.character.is_some() {
                return false;
            }
            let coherent = l.stable >= STABLE && l.coherence >= COHERENCE && (GROWTH.0..GROWTH.1).contains(&l.growth);
            let walks = l.stable >= WALKS.0
                && (WALKS.1.0..WALKS.1.1).contains(&l.growth)
                && l.amplitude_cv <= WALKS.2
                && (l.coherence >= WALKS.3 || self.tones.harmonics >= WALKS.4);
            coherent || walks
        })
    }
}
