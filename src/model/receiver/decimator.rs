//! From the internal rate down to the output rate by a whole factor, behind a linear-phase anti-alias filter.
//!
//! Kaiser-windowed sinc (Kaiser 1974): flat to 0.42 of the output rate, 80 dB down from 0.58 of it, so nothing folds below
//! 0.42. Its delay is constant: half its length.

use std::f64::consts::PI;

/// Attenuation of what would fold, dB.
const STOP_DB: f64 = 80.0;
/// Transition band between pass and stop edge, in output rates.
const TRANSITION: f64 = 0.16;

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
    /// A decimator at rest; a factor of 1 passes everything through.
    #[must_use]
    pub fn new(factor: usize) -> Self {
        let taps = if factor > 1 { design(factor) } else { vec![1.0] };
        let history = vec![0.0; taps.len() + 4096];
        let filled = taps.len() - 1;
        Self { factor: factor.max(1), taps, history, filled }
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

/// Taps, symmetric, sum 1.
fn design(factor: usize) -> Vec<f64> {
    let m = factor as f64;
    let length = (STOP_DB - 7.95) / (2.285 * 2.0 * PI * TRANSITION / m);
    let half = (length / 2.0).ceil() as i64;
    let beta = 0.1102 * (STOP_DB - 8.7);
    let mut taps: Vec<f64> = (-half..=half)
        .map(|k| {
            let x = k as f64 / half as f64;
            sinc(k as f64 / m) * bessel_i0(beta * (1.0 - x * x).max(0.0).sqrt())
        })
        .collect();
    let sum: f64 = taps.iter().sum();
    taps.iter_mut().for_each(|t| *t /= sum);
    taps
}

fn sinc(x: f64) -> f64 {
    if x == 0.0 { 1.0 } else { (PI * x).sin() / (PI * x) }
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
