//! A waveform in a fixed number of stretches, each with its extremes.

use super::short;
use serde::{Deserialize, Serialize};

/// A waveform: the least and the greatest sample of stretches of equal length. Where a stretch is one sample, `high` is empty.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Trace {
    /// Time of the first stretch, s.
    pub from_s: f64,
    /// Length of a stretch, s.
    pub step_s: f64,
    /// Least sample of each stretch, full scale.
    pub low: Vec<f32>,
    /// Greatest sample of each stretch, full scale.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub high: Vec<f32>,
}

impl Trace {
    /// Samples in at most `most` stretches.
    #[must_use]
    pub fn of(samples: &[f32], from_s: f64, rate_hz: f64, most: usize) -> Self {
        let per = samples.len().div_ceil(most.max(1)).max(1);
        let folded = |fold: fn(f32, f32) -> f32, start| {
            samples.chunks(per).map(|part| rounded(part.iter().copied().fold(start, fold))).collect()
        };
        let low = folded(f32::min, f32::INFINITY);
        let high = if per == 1 { Vec::new() } else { folded(f32::max, f32::NEG_INFINITY) };
        Self { from_s, step_s: per as f64 / rate_hz, low, high }
    }

    /// Each stretch: middle, least, greatest.
    pub fn stretches(&self) -> impl Iterator<Item = (f64, f64, f64)> {
        let single = self.high.is_empty();
        // A stretch of one sample lies at its sample.
        let offset = if single { 0.0 } else { 0.5 };
        self.low.iter().enumerate().map(move |(k, low)| {
            let high = if single { *low } else { self.high.get(k).copied().unwrap_or(*low) };
            (self.from_s + (k as f64 + offset) * self.step_s, f64::from(*low), f64::from(high))
        })
    }

    /// Time at the end, s.
    #[must_use]
    pub fn to_s(&self) -> f64 {
        self.from_s + self.step_s * self.low.len() as f64
    }
}

fn rounded(sample: f32) -> f32 {
    short(f64::from(sample), 4) as f32
}

/// A [`Trace`] of samples that come in blocks, of a length that is not known beforehand.
#[derive(Debug, Clone)]
pub(super) struct Growing {
    per: usize,
    in_last: usize,
    pairs: Vec<(f32, f32)>,
}

/// Stretches that are kept at most; half as many at least, once so many samples have come.
const MOST: usize = 1200;
/// Samples of a stretch to begin with.
const FIRST: usize = 16;

impl Default for Growing {
    fn default() -> Self {
        Self { per: FIRST, in_last: 0, pairs: Vec::new() }
    }
}

impl Growing {
    pub fn push(&mut self, samples: &[f32]) {
        let mut rest = samples;
        while !rest.is_empty() {
            if self.in_last == 0 {
                if self.pairs.len() == MOST {
                    self.pairs =
                        self.pairs.chunks(2).map(|two| (two[0].0.min(two[1].0), two[0].1.max(two[1].1))).collect();
                    self.per *= 2;
                }
                self.pairs.push((f32::INFINITY, f32::NEG_INFINITY));
            }
            let (now, later) = rest.split_at((self.per - self.in_last).min(rest.len()));
            if let Some(last) = self.pairs.last_mut() {
                *last = now.iter().fold(*last, |(low, high), s| (low.min(*s), high.max(*s)));
            }
            self.in_last = (self.in_last + now.len()) % self.per;
            rest = later;
        }
    }

    pub fn finish(&self, from_s: f64, rate_hz: f64) -> Trace {
        Trace {
            from_s,
            step_s: self.per as f64 / rate_hz,
            low: self.pairs.iter().map(|pair| rounded(pair.0)).collect(),
            high: self.pairs.iter().map(|pair| rounded(pair.1)).collect(),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn extremes_outlive_every_folding() {
        let mut samples = vec![0.0f32; 1_000_000];
        (samples[123_456], samples[765_432]) = (0.75, -0.5);
        let mut growing = Growing::default();
        samples.chunks(777).for_each(|block| growing.push(block));
        let trace = growing.finish(0.0, 48_000.0);
        assert!(trace.low.len() <= MOST && trace.low.len() > MOST / 2 - 1, "{}", trace.low.len());
        let at = |wanted: f64, of: fn(&(f64, f64, f64)) -> f64| {
            trace.stretches().find(|s| of(s) == wanted).map_or(f64::NAN, |s| s.0 * 48_000.0)
        };
        let per = trace.step_s * 48_000.0;
        assert!((at(0.75, |s| s.2) - 123_456.0).abs() <= per && (at(-0.5, |s| s.1) - 765_432.0).abs() <= per);
        let whole = Trace::of(&samples[123_000..124_000], 0.0, 48_000.0, 2000);
        assert!(whole.high.is_empty() && whole.low[456] == 0.75);
    }
}
