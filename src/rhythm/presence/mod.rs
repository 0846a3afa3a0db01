//! Is it a gap at all? Rules that refuse tones, noise and speech. A wrong number is worse than none.

pub mod character;
pub mod coherence;

use super::fit::{Fit, median};
use crate::clicks::spectrum::{power_of_two_near, welch};

/// Fewest firings for a rhythm.
const FEWEST: usize = 8;
/// Least evidence, nats, in all and per firing.
const EVIDENCE: f64 = 15.0;
const EVIDENCE_PER_FIRING: f64 = 0.25;
/// Least share of the time covered.
const COVER: f64 = 0.4;

/// Where the energy lies.
#[derive(Debug, Clone, Copy)]
pub struct Tones {
    /// Share of the energy above 150 Hz in narrow lines that are no multiples of the rate.
    pub foreign: f64,
    /// Share outside the line at the rate.
    pub outside: f64,
    /// Share in the six strongest lines.
    pub six: f64,
}

/// Sorts the energy of a window by its lines, for a train of a given rate.
#[must_use]
pub fn tones(x: &[f32], sample_rate_hz: f64, firing_rate_hz: f64) -> Tones {
    let segment = power_of_two_near(sample_rate_hz / 3.0);
    if x.len() < segment {
        return Tones { foreign: 0.0, outside: 1.0, six: 0.0 };
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
    let foreign = peaks.iter().take(12).filter(|&&k| is_foreign(k as f64 * s.step_hz, s.step_hz, firing_rate_hz));
    let foreign = foreign.map(|&k| about(k, 3)).sum::<f64>() / total;
    let six = peaks.iter().take(6).map(|&k| about(k, 2)).sum::<f64>() / total;
    let reach = 0.06 * firing_rate_hz + 2.0 * s.step_hz;
    let outside = 1.0 - s.sum(firing_rate_hz - reach, firing_rate_hz + reach) / total;
    Tones { foreign, outside, six }
}

fn surroundings(p: &[f64], k: usize) -> f64 {
    median(&p[k.saturating_sub(20)..(k + 21).min(p.len())])
}

fn is_foreign(f: f64, step_hz: f64, firing_rate_hz: f64) -> bool {
    let off = |unit: f64| (f - (f / unit).round().max(1.0) * unit).abs();
    let mains = f < 700.0 && [50.0, 60.0].iter().any(|&m| off(m) < step_hz);
    off(firing_rate_hz) > 2.5 * step_hz + 0.004 * f && !mains
}

/// The reason to refuse a train of separate clicks, if there is one.
#[must_use]
pub fn refuse(fit: &Fit, tones: &Tones, firing_rate_hz: f64, jitter: f64) -> Option<&'static str> {
    let per_firing = fit.evidence / fit.chain.index.len().max(1) as f64;
    if fit.chain.index.len() < FEWEST {
        Some("fewer than eight clicks stand on a rhythm")
    } else if fit.evidence < EVIDENCE || per_firing < EVIDENCE_PER_FIRING {
        Some("no rhythm explains what is heard better than chance")
    } else if fit.cover < COVER {
        Some("a rhythm holds in less than half of the time")
    } else if tones.foreign > 0.3 {
        Some("most of the sound is steady tones that no click train makes")
    } else if tones.six > 0.9 && 0.9 * tones.outside > 0.5 && firing_rate_hz < 900.0 && jitter > 4e-3 {
        Some("the sound is a handful of tones")
    } else if firing_rate_hz < 1250.0 && tones.outside < 0.03 {
        Some("the sound is one tone without the harmonics of clicks")
    } else {
        None
    }
}
