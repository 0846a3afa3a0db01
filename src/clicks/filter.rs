//! Linear-phase filtering of a whole window by overlap-save FFT.
//!
//! All kernels here are centred: output sample `n` belongs to input sample `n`, no delay is left.

use realfft::{ComplexToReal, RealFftPlanner, RealToComplex};
use rustfft::num_complex::Complex32;
use std::sync::Arc;

/// FFT length of a block. 8192 keeps both buffers within a core's first caches.
const BLOCK: usize = 8192;
/// Longest kernel, taps (odd). 43 ms at 48 kHz: a 90 Hz wide feature needs about 22 ms.
const MAX_TAPS: usize = 2049;

/// A filter engine: the plans of the block transforms, shared by all kernels.
pub struct FilterBank {
    forward: Arc<dyn RealToComplex<f32>>,
    inverse: Arc<dyn ComplexToReal<f32>>,
    analytic: Arc<dyn rustfft::Fft<f32>>,
}

/// A kernel, as the spectrum of one block, for the engine that made it.
#[derive(Clone)]
pub struct Kernel {
    spectrum: Vec<Complex32>,
}

impl Kernel {
    /// One kernel behind another. Together they may be longer than a kernel can be: what hangs over wraps around, so that one of them
    /// must be short (a click's shape) and the other fade to nothing at its ends.
    #[must_use]
    pub fn then(&self, next: &Self) -> Self {
        // Each brings the delay of MAX_TAPS/2 that the engine expects once.
        let step = std::f64::consts::TAU * (MAX_TAPS / 2) as f64 / BLOCK as f64;
        let spectrum = self.spectrum.iter().zip(&next.spectrum).enumerate().map(|(k, (a, b))| {
            let turn = step * (k as f64).rem_euclid(BLOCK as f64);
            a * b * BLOCK as f32 * Complex32::new(turn.cos() as f32, turn.sin() as f32)
        });
        Self { spectrum: spectrum.collect() }
    }
}

impl Default for FilterBank {
    fn default() -> Self {
        Self::new()
    }
}

impl FilterBank {
    /// Makes the plans.
    #[must_use]
    pub fn new() -> Self {
        let mut real = RealFftPlanner::<f32>::new();
        let mut complex = rustfft::FftPlanner::<f32>::new();
        Self {
            forward: real.plan_fft_forward(BLOCK),
            inverse: real.plan_fft_inverse(BLOCK),
            analytic: complex.plan_fft_inverse(BLOCK),
        }
    }

    /// Zero-phase kernel of a given gain over frequency (Hz) at a sample rate (Hz), cut to `MAX_TAPS` by a Hann window.
    #[must_use]
    pub fn kernel_of_gain(&self, rate_hz: f64, gain: impl Fn(f64) -> f64) -> Kernel {
        let step = rate_hz / BLOCK as f64;
        let mut spectrum: Vec<Complex32> =
            (0..=BLOCK / 2).map(|k| Complex32::new(gain(k as f64 * step) as f32, 0.0)).collect();
        let mut impulse = self.inverse.make_output_vec();
        self.inverse_block(&mut spectrum, &mut impulse);
        let half = MAX_TAPS / 2;
        let scale = 1.0 / BLOCK as f32;
        let mut taps = vec![0.0f32; MAX_TAPS];
        for (i, tap) in taps.iter_mut().enumerate() {
            let lag = i as isize - half as isize;
            let window = 0.5 + 0.5 * (std::f32::consts::PI * lag as f32 / (half + 1) as f32).cos();
            *tap = impulse[lag.rem_euclid(BLOCK as isize) as usize] * window * scale;
        }
        self.kernel_of_taps(&taps, half)
    }

    /// Kernel of explicit taps; tap `centre` meets the output sample.
    #[must_use]
    pub fn kernel_of_taps(&self, taps: &[f32], centre: usize) -> Kernel {
        assert!(taps.len() <= MAX_TAPS, "a kernel is at most {MAX_TAPS} taps");
        let mut padded = vec![0.0f32; BLOCK];
        for (i, &tap) in taps.iter().enumerate() {
            // The centre lands at MAX_TAPS/2: the same alignment for all kernels.
            padded[i + MAX_TAPS / 2 - centre] += tap;
        }
        let mut spectrum = self.forward.make_output_vec();
        // Lengths are the plan's own, the only error this call knows.
        let _ = self.forward.process(&mut padded, &mut spectrum);
        for value in &mut spectrum {
            *value /= BLOCK as f32;
        }
        Kernel { spectrum }
    }

    /// Correlator with a click shape whose origin is sample `centre`: output `n` = `Σ x[n + k − centre]·shape[k]`.
    #[must_use]
    pub fn correlator(&self, shape: &[f32], centre: usize) -> Kernel {
        let reversed: Vec<f32> = shape.iter().rev().copied().collect();
        self.kernel_of_taps(&reversed, shape.len() - 1 - centre)
    }

    /// Filters a window; the output has the length of the input, zeros are assumed outside.
    pub fn apply(&self, x: &[f32], kernel: &Kernel, out: &mut Vec<f32>) {
        out.clear();
        out.resize(x.len(), 0.0);
        let mut block = self.inverse.make_output_vec();
        self.each_block(x, |bank, spectrum, start, len| {
            for (s, k) in spectrum.iter_mut().zip(&kernel.spectrum) {
                *s *= k;
            }
            bank.inverse_block(spectrum, &mut block);
            out[start..start + len].copy_from_slice(&block[MAX_TAPS - 1..MAX_TAPS - 1 + len]);
        });
    }

    /// Filters a window with several kernels at the price of one transform forward.
    #[must_use]
    pub fn apply_all(&self, x: &[f32], kernels: &[&Kernel]) -> Vec<Vec<f32>> {
        let mut outs: Vec<Vec<f32>> = kernels.iter().map(|_| vec![0.0; x.len()]).collect();
        let mut block = self.inverse.make_output_vec();
        let mut product = self.forward.make_output_vec();
        self.each_block(x, |bank, spectrum, start, len| {
            for (kernel, out) in kernels.iter().zip(&mut outs) {
                for ((p, s), k) in product.iter_mut().zip(spectrum.iter()).zip(&kernel.spectrum) {
                    *p = s * k;
                }
                bank.inverse_block(&mut product, &mut block);
                out[start..start + len].copy_from_slice(&block[MAX_TAPS - 1..MAX_TAPS - 1 + len]);
            }
        });
        outs
    }

    /// The analytic signal behind a kernel: real and imaginary part in one complex vector.
    pub fn apply_analytic(&self, x: &[f32], kernel: &Kernel, out: &mut Vec<Complex32>) {
        out.clear();
        out.resize(x.len(), Complex32::default());
        let mut full = vec![Complex32::default(); BLOCK];
        let mut scratch = vec![Complex32::default(); self.analytic.get_inplace_scratch_len()];
        self.each_block(x, |bank, spectrum, start, len| {
            full.fill(Complex32::default());
            for ((f, s), k) in full.iter_mut().zip(spectrum.iter()).zip(&kernel.spectrum).skip(1).take(BLOCK / 2 - 1) {
                *f = s * k * 2.0;
            }
            bank.analytic.process_with_scratch(&mut full, &mut scratch);
            out[start..start + len].copy_from_slice(&full[MAX_TAPS - 1..MAX_TAPS - 1 + len]);
        });
    }

    /// Cuts the window into overlapping blocks and hands on their spectra with the place of the valid output.
    fn each_block(&self, x: &[f32], mut work: impl FnMut(&Self, &mut [Complex32], usize, usize)) {
        let hop = BLOCK - (MAX_TAPS - 1);
        let lead = MAX_TAPS / 2;
        let mut input = self.forward.make_input_vec();
        let mut spectrum = self.forward.make_output_vec();
        let mut start = 0;
        while start < x.len() {
            // Input sample of block[i] is start + i − (MAX_TAPS − 1) + lead.
            let first = start as isize - (MAX_TAPS - 1) as isize + lead as isize;
            let from = first.max(0) as usize;
            let to = ((first + BLOCK as isize).max(0) as usize).min(x.len());
            input.fill(0.0);
            if to > from {
                let at = (from as isize - first) as usize;
                input[at..at + to - from].copy_from_slice(&x[from..to]);
            }
            let _ = self.forward.process(&mut input, &mut spectrum);
            work(self, &mut spectrum, start, hop.min(x.len() - start));
            start += hop;
        }
    }

    fn inverse_block(&self, spectrum: &mut [Complex32], block: &mut [f32]) {
        // The transform wants exactly real ends.
        spectrum[0].im = 0.0;
        let last = spectrum.len() - 1;
        spectrum[last].im = 0.0;
        let _ = self.inverse.process(spectrum, block);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn filtering_equals_the_plain_sum() {
        let bank = FilterBank::new();
        let x: Vec<f32> = (0..20_000u32).map(|n| ((n * 7919 % 1013) as f32 / 1013.0 - 0.5) * 2.0).collect();
        let shape = [0.1f32, -0.4, 1.0, 0.3, -0.2];
        let mut out = Vec::new();
        bank.apply(&x, &bank.correlator(&shape, 2), &mut out);
        assert_eq!(out.len(), x.len());
        for (n, &found) in out.iter().enumerate() {
            let mut plain = 0.0f64;
            for (k, &s) in shape.iter().enumerate() {
                let i = n as isize + k as isize - 2;
                if i >= 0 && (i as usize) < x.len() {
                    plain += f64::from(x[i as usize]) * f64::from(s);
                }
            }
            // Single-precision transform of 8192 points: a few 1e-7 of the largest value.
            assert!((plain - f64::from(found)).abs() < 5e-6, "sample {n}: {plain} against {found}");
        }
    }

    #[test]
    fn two_kernels_in_one_give_what_one_gives_after_the_other() {
        let bank = FilterBank::new();
        let x: Vec<f32> = (0..30_000u32).map(|n| (n * 7919 % 1013) as f32 / 1013.0 - 0.5).collect();
        let first = bank.kernel_of_gain(48_000.0, |f| 1.0 / (1.0 + (f / 3_000.0).powi(2)));
        let second = bank.correlator(&[0.1f32, -0.4, 1.0, 0.3, -0.2], 2);
        let both = bank.apply_all(&x, &[&first, &first.then(&second)]);
        let (mut one, mut after) = (Vec::new(), Vec::new());
        bank.apply(&x, &first, &mut one);
        bank.apply(&one, &second, &mut after);
        for i in 3_000..27_000 {
            // Single-precision transforms.
            assert!((both[0][i] - one[i]).abs() < 1e-6 && (both[1][i] - after[i]).abs() < 3e-6, "sample {i}");
        }
    }

    #[test]
    fn the_analytic_signal_of_a_tone_has_its_amplitude() {
        let bank = FilterBank::new();
        let x: Vec<f32> = (0..30_000).map(|n| 0.3 * (n as f32 * 0.2).cos()).collect();
        let mut out = Vec::new();
        bank.apply_analytic(&x, &bank.kernel_of_gain(48_000.0, |_| 1.0), &mut out);
        for value in &out[5_000..25_000] {
            assert!((value.norm() - 0.3).abs() < 2e-3, "{}", value.norm());
        }
    }
}
