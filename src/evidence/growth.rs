//! How far firings wander from an even beat: the scatter of the time over 1, 2, 3, .. periods.
//!
//! With independent periods of scatter σ_T, each read with a timing error σ_e, the time over m periods has the variance
//! m·σ_T² + 2·σ_e². A clock has none of the first, so its line stays flat.

use super::short;
use serde::{Deserialize, Serialize};

/// Scatter of the time over so many periods.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Growth {
    /// Periods.
    pub periods: u32,
    /// Standard deviation of the time over them, s.
    pub sd_s: f64,
    /// How many stretches of that length lie side by side in what was heard.
    pub pieces: f64,
}

/// Numbers of periods: two or so to the octave.
const LAGS: [u32; 24] =
    [1, 2, 3, 4, 6, 8, 12, 16, 24, 32, 48, 64, 96, 128, 192, 256, 384, 512, 768, 1024, 1536, 2048, 3072, 4096];
/// Slots for firing times: more than the longest lag.
const SLOTS: usize = 4608;
/// Longest step that joins two firings, periods, and how far it may be from a whole number.
const LONGEST_STEP: f64 = 4.5;
const OFF: f64 = 0.25;
/// Fewest stretches side by side from which a scatter is told.
const FEWEST: f64 = 8.0;

/// Collects firing times.
#[derive(Debug, Clone)]
pub(super) struct Meter {
    slots: Vec<(u64, f64)>,
    number: u64,
    last_s: Option<f64>,
    period_s: Option<f64>,
    sums: [(f64, f64, f64); LAGS.len()],
}

impl Default for Meter {
    fn default() -> Self {
        Self {
            slots: vec![(u64::MAX, 0.0); SLOTS],
            number: 0,
            last_s: None,
            period_s: None,
            sums: [(0.0, 0.0, 0.0); LAGS.len()],
        }
    }
}

impl Meter {
    /// The next firing: its time, its single period if it has one, and the missed firings before it.
    pub fn push(&mut self, time_s: f64, period_s: Option<f64>, missed: u64) {
        self.period_s = self.period_s.or(period_s.filter(|period_s| *period_s > 0.0));
        let Some(beat_s) = self.period_s else {
            // Nothing is known of the beat before the first single period: the chain begins here, or at the next.
            self.last_s = Some(time_s);
            self.slots[self.number as usize % SLOTS] = (self.number, time_s);
            return;
        };
        match self.last_s.and_then(|last_s| steps((time_s - last_s) / beat_s, period_s.is_some(), missed)) {
            Some(steps) => self.number += steps,
            // A new chain begins out of reach of the one before.
            None => self.number += SLOTS as u64,
        }
        self.last_s = Some(time_s);
        for (sum, lag) in self.sums.iter_mut().zip(LAGS) {
            let Some(before) = self.number.checked_sub(u64::from(lag)) else { continue };
            let (number, then_s) = self.slots[before as usize % SLOTS];
            if number == before {
                let apart_s = time_s - then_s - f64::from(lag) * beat_s;
                *sum = (sum.0 + 1.0, sum.1 + apart_s, sum.2 + apart_s * apart_s);
            }
        }
        self.slots[self.number as usize % SLOTS] = (self.number, time_s);
    }

    pub fn finish(&self) -> Vec<Growth> {
        let told = self.sums.iter().zip(LAGS).filter_map(|((n, sum, squares), lag)| {
            let pieces = n / f64::from(lag);
            let variance = (squares - sum * sum / n) / (n - 1.0);
            (pieces >= FEWEST && variance > 0.0).then(|| Growth {
                periods: lag,
                sd_s: short(variance.sqrt(), 6),
                pieces: short(pieces, 6),
            })
        });
        told.collect()
    }
}

/// Whole periods of a step; none if it does not join.
fn steps(periods: f64, single: bool, missed: u64) -> Option<u64> {
    if single {
        return Some(1);
    }
    if missed > 0 {
        return Some(missed + 1);
    }
    let whole = periods.round();
    (whole >= 1.0 && periods < LONGEST_STEP && (periods - whole).abs() < OFF).then_some(whole as u64)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A table of evenly spread normal scores, shuffled by a fixed stride: no random numbers are needed.
    fn normal(n: usize) -> Vec<f64> {
        use statrs::distribution::{ContinuousCDF, Normal};
        let law = Normal::standard();
        (0..n).map(|k| law.inverse_cdf(((k * 7919 % n) as f64 + 0.5) / n as f64)).collect()
    }

    #[test]
    fn independent_periods_grow_with_the_root_and_timing_noise_stays() {
        let (jitter_s, noise_s) = (20e-6, 5e-6);
        let (gaps, errors) = (normal(40_009), normal(40_037));
        let mut meter = Meter::default();
        let (mut at_s, mut last_s) = (0.0, None);
        for k in 0..40_000 {
            at_s += 2.5e-3 + jitter_s * gaps[(k * k + 17 * k) % 40_009];
            let heard_s = at_s + noise_s * errors[(k * k * 3 + k) % 40_037];
            meter.push(heard_s, last_s.map(|last: f64| heard_s - last), 0);
            last_s = Some(heard_s);
        }
        for growth in meter.finish().iter().filter(|growth| growth.periods <= 64) {
            let law = (f64::from(growth.periods) * jitter_s * jitter_s + 2.0 * noise_s * noise_s).sqrt();
            // Four standard deviations of a scatter from so many pieces.
            let allowed = 4.0 / (2.0 * growth.pieces).sqrt() + 0.02;
            assert!((growth.sd_s / law - 1.0).abs() < allowed, "{growth:?} {law}");
        }
    }

    #[test]
    fn a_break_is_not_bridged_and_a_missed_firing_is_counted() {
        let mut meter = Meter::default();
        let mut push = |time_s: f64, single: bool, missed| meter.push(time_s, single.then_some(0.01), missed);
        for k in 0..40 {
            push(0.01 * f64::from(k), k > 0, 0);
        }
        push(0.41, false, 1);
        push(5.003, false, 0);
        for k in 1..40 {
            push(5.003 + 0.01 * f64::from(k), true, 0);
        }
        // The beat is exact, so nothing scatters beyond rounding; a wrong count would show 10 ms.
        assert!(meter.finish().iter().all(|growth| growth.sd_s < 1e-9), "{:?}", meter.finish());
    }
}
