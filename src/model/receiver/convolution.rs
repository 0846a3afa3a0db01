//! Convolution of a long signal with a long filter in blocks, by Fourier transforms (overlap and save, textbook).

use super::Complex;
use rustfft::{Fft, FftPlanner};
use std::fmt;
use std::sync::Arc;

/// Least length of a transform in lengths of the filter.
const LENGTHS: usize = 4;

/// A filter at work on blocks.
#[derive(Clone)]
pub(super) struct Convolution {
    forward: Arc<dyn Fft<f64>>,
    backward: Arc<dyn Fft<f64>>,
    /// Spectrum of the filter over the length of the transform.
    spectrum: Vec<Complex>,
    /// The last inputs, oldest first: one fewer than the filter has taps.
    history: Vec<Complex>,
}

impl fmt::Debug for Convolution {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_struct("Convolution").field("length", &self.spectrum.len()).finish_non_exhaustive()
    }
}

impl Convolution {
    /// A filter at rest.
    pub(super) fn new(taps: &[f64]) -> Self {
        let length = (LENGTHS * taps.len()).next_power_of_two();
        let mut planner = FftPlanner::new();
        let (forward, backward) = (planner.plan_fft_forward(length), planner.plan_fft_inverse(length));
        let mut spectrum: Vec<Complex> = taps.iter().map(|&tap| Complex::from(tap / length as f64)).collect();
        spectrum.resize(length, Complex::default());
        forward.process(&mut spectrum);
        Self { forward, backward, spectrum, history: vec![Complex::default(); taps.len() - 1] }
    }

    /// Length of a block.
    pub(super) fn block(&self) -> usize {
        self.spectrum.len() - self.history.len()
    }

    /// Output for the next block of input.
    pub(super) fn next(&mut self, block: &[Complex]) -> Vec<Complex> {
        debug_assert_eq!(block.len(), self.block());
        let mut buffer = [self.history.as_slice(), block].concat();
        let keep = self.history.len();
        self.history.copy_from_slice(&buffer[buffer.len() - keep..]);
        self.forward.process(&mut buffer);
        buffer.iter_mut().zip(&self.spectrum).for_each(|(z, h)| *z *= h);
        self.backward.process(&mut buffer);
        buffer.split_off(keep)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn blocks_joined_are_the_plain_sum_of_products() {
        let taps: Vec<f64> = (0..37).map(|k| (0.3 * f64::from(k)).sin()).collect();
        let mut convolution = Convolution::new(&taps);
        let count = 3 * convolution.block();
        let input: Vec<Complex> = (0..count).map(|k| Complex::from_polar(1.0, 0.7 * (k * k) as f64)).collect();
        let block = convolution.block();
        let got: Vec<Complex> = input.chunks(block).flat_map(|block| convolution.next(block)).collect();
        for (n, z) in got.iter().enumerate() {
            let expected: Complex = taps.iter().take(n + 1).enumerate().map(|(k, tap)| input[n - k] * tap).sum();
            assert!((z - expected).norm() < 1e-12, "{n}: {z} against {expected}");
        }
    }
}
