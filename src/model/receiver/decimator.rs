//! From the internal rate down to the output rate by a whole factor, behind an anti-alias filter.
//!
//! Kaiser-windowed (Kaiser 1974): flat to 0.42 of the output rate, 100 dB down from 0.58 of it, so nothing folds below 0.42.
//! Without a gain to give back it has linear phase; its delay is half its length.

use super::Complex;
use std::f64::consts::TAU;

/// Attenuation of what would fold, dB.
const STOP_DB: f64 = 100.0;
/// Transition band between pass and stop edge, in output rates.
const TRANSITION: f64 = 0.16;

/// Edge of the band that is kept, in output rates.
const PASS_EDGE: f64 = 0.42;
/// Frequencies at which the gain to give back is taken.
const FREQUENCIES: usize = 256;
/// Rounds in which what the window takes away is made good: each leaves about a hundredth.
const ROUNDS: usize = 2;

/// A decimator at work.
#[derive(Debug, Clone, PartialEq)]
pub struct Decimator {
    factor: usize,
    taps: Vec<f64>,
    /// The last inputs, oldest first, with room to append before they are moved to the front.
    history: Vec<f64>,
    filled: usize,
}

impl Decimator {
    /// A decimator at rest whose gain at a frequency, in cycles per internal sample, is the given one inside its band.
    #[must_use]
    pub fn new(factor: usize, gain: impl Fn(f64) -> Complex) -> Self {
        let taps = design(factor, gain);
        let history = vec![0.0; taps.len() + 4096];
        let filled = taps.len() - 1;
        Self { factor, taps, history, filled }
    }

    /// Internal samples for one output sample.
    #[must_use]
    pub fn factor(&self) -> usize {
        self.factor
    }

    /// Delay in internal samples.
    #[must_use]
    pub fn delay(&self) -> f64 {
        (self.taps.len() - 1) as f64 / 2.0
    }

    /// Takes one internal sample.
    #[inline]
    pub fn push(&mut self, sample: f64) {
        if self.filled == self.history.len() {
            let keep = self.taps.len() - 1;
            self.history.copy_within(self.filled - keep.., 0);
            self.filled = keep;
        }
        self.history[self.filled] = sample;
        self.filled += 1;
    }

    /// The output at the newest internal sample.
    #[must_use]
    pub fn output(&self) -> f64 {
        dot(&self.taps, &self.history[self.filled - self.taps.len()..self.filled])
    }
}

/// Sum of products in eight independent sums, which the compiler can keep in vector registers.
fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut sums = [0.0; 8];
    let (a_chunks, b_chunks) = (a.chunks_exact(8), b.chunks_exact(8));
    let rest: f64 = a_chunks.remainder().iter().zip(b_chunks.remainder()).map(|(x, y)| x * y).sum();
    for (x, y) in a_chunks.zip(b_chunks) {
        for i in 0..8 {
            sums[i] += x[i] * y[i];
        }
    }
    sums.iter().sum::<f64>() + rest
}

/// Taps, for the oldest sample first.
fn design(factor: usize, gain: impl Fn(f64) -> Complex) -> Vec<f64> {
    let m = factor as f64;
    let step = 0.5 / (m * FREQUENCIES as f64);
    let cycles = |k: usize| (k as f64 + 0.5) * step;
    let asked: Vec<Complex> = (0..FREQUENCIES).map(|k| gain(cycles(k))).collect();
    let edge = (PASS_EDGE * FREQUENCIES as f64 / 0.5) as usize;
    // The window smooths a gain that is bent; what it has taken away is asked for in addition. Beyond the pass edge, where the
    // gain falls on purpose, as much as at the edge.
    let mut ask = asked.clone();
    for _ in 0..ROUNDS {
        let taps = windowed(m, &ask, step);
        let half = (taps.len() - 1) as f64 / 2.0;
        let lacking: Vec<Complex> = (0..=edge)
            .map(|k| {
                let turn = |(i, tap): (usize, &f64)| Complex::from_polar(*tap, TAU * cycles(k) * (i as f64 - half));
                asked[k] - taps.iter().enumerate().map(turn).sum::<Complex>()
            })
            .collect();
        ask.iter_mut().enumerate().for_each(|(k, ask)| *ask += lacking[k.min(edge)]);
    }
    windowed(m, &ask, step)
}

/// The windowed impulse response of a gain that ends at half the output rate.
fn windowed(m: f64, gain: &[Complex], step: f64) -> Vec<f64> {
    let length = (STOP_DB - 7.95) / (2.285 * TAU * TRANSITION / m);
    let half = (length / 2.0).ceil() as i64;
    let beta = 0.1102 * (STOP_DB - 8.7);
    (-half..=half)
        .rev()
        .map(|k| {
            let turned = |(i, gain): (usize, &Complex)| {
                (gain * Complex::from_polar(2.0 * step, TAU * (i as f64 + 0.5) * step * k as f64)).re
            };
            let x = k as f64 / half as f64;
            let window = bessel_i0(beta * (1.0 - x * x).max(0.0).sqrt()) / bessel_i0(beta);
            gain.iter().enumerate().map(turned).sum::<f64>() * window
        })
        .collect()
}

/// Modified Bessel function of order 0 by its series.
fn bessel_i0(x: f64) -> f64 {
    let quarter = x * x / 4.0;
    let (mut term, mut sum) = (1.0, 1.0);
    let mut k = 1.0;
    while term > 1e-17 * sum {
        term *= quarter / (k * k);
        sum += term;
        k += 1.0;
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Gain for a tone of a frequency in cycles per internal sample.
    fn gain(decimator: &Decimator, cycles: f64) -> Complex {
        let newest = decimator.taps.len() - 1;
        let turn = |(i, tap): (usize, &f64)| Complex::from_polar(*tap, -TAU * cycles * (newest - i) as f64);
        decimator.taps.iter().enumerate().map(turn).sum()
    }

    #[test]
    fn the_band_has_the_gain_asked_for_and_nothing_folds_into_it() {
        let asked = |cycles: f64| Complex::new(1.0 + 3.0 * cycles * cycles, 0.2 * cycles);
        for factor in [2, 3, 12] {
            let decimator = Decimator::new(factor, asked);
            for k in 0..=42 {
                let cycles = 0.01 * f64::from(k) / factor as f64;
                let delay = Complex::from_polar(1.0, -TAU * cycles * decimator.delay());
                // The window leaves 100 dB of a gain that ends in a step.
                assert!((gain(&decimator, cycles) - asked(cycles) * delay).norm() < 3e-5, "{factor}: {cycles}");
                let folding = 1.0 / factor as f64 - cycles;
                assert!(gain(&decimator, folding).norm() < 3e-5, "{factor}: {folding}");
            }
        }
    }
}
