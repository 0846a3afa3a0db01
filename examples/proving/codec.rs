//! What lossy storage does: telephone coding and coarse quantisation of a lapped transform.

use rustfft::FftPlanner;
use rustfft::num_complex::Complex64;
use std::f64::consts::PI;

/// How the samples are stored.
#[derive(Clone, Copy)]
pub enum Codec {
    /// Sixteen bits, nothing lost.
    None,
    /// Linear, of this many bits.
    Linear(u32),
    /// Eight bits, logarithmic (the µ-law of telephony, µ = 255).
    MuLaw,
    /// Lapped transform of `frame` bands; bands above `top_hz` dropped, the others quantised with a step of
    /// `coarseness` times their rms in groups.
    Transform {
        /// Bands, half the window.
        frame: usize,
        /// Highest frequency kept, Hz.
        top_hz: f64,
        /// Quantiser step over the rms of a group of bands.
        coarseness: f64,
    },
}

impl Codec {
    /// Codes and decodes.
    pub fn pass(&self, samples: Vec<f64>, rate_hz: u32) -> Vec<f64> {
        match *self {
            Self::None => samples,
            Self::Linear(bits) => {
                let steps = 2f64.powi(bits as i32 - 1);
                samples.iter().map(|x| (x * steps).round().clamp(-steps, steps - 1.0) / steps).collect()
            }
            Self::MuLaw => samples.iter().map(|&x| mu_law(x)).collect(),
            Self::Transform { frame, top_hz, coarseness } => {
                let top = (top_hz / f64::from(rate_hz) * 2.0 * frame as f64) as usize;
                Lapped::new(frame).code(&samples, |bands| quantise(bands, top, coarseness))
            }
        }
    }
}

fn mu_law(x: f64) -> f64 {
    const MU: f64 = 255.0;
    let compressed = (1.0 + MU * x.abs().min(1.0)).ln() / (1.0 + MU).ln();
    let stored = (compressed * 127.0).round() / 127.0;
    x.signum() * ((stored * (1.0 + MU).ln()).exp() - 1.0) / MU
}

/// Quantises groups of bands whose width grows with frequency.
fn quantise(bands: &mut [f64], top: usize, coarseness: f64) {
    let mut start = 0;
    while start < bands.len() {
        let end = (start + 4 + start / 6).min(bands.len());
        let group = &mut bands[start..end];
        let rms = (group.iter().map(|b| b * b).sum::<f64>() / group.len() as f64).sqrt();
        if start >= top {
            group.fill(0.0);
        } else if rms > 0.0 {
            let step = coarseness * rms;
            group.iter_mut().for_each(|b| *b = (*b / step).round() * step);
        }
        start = end;
    }
}

/// Modified discrete cosine transform with a sine window.
struct Lapped {
    frame: usize,
    window: Vec<f64>,
    planner: FftPlanner<f64>,
}

impl Lapped {
    fn new(frame: usize) -> Self {
        let window = (0..2 * frame).map(|n| (PI * (n as f64 + 0.5) / (2 * frame) as f64).sin()).collect();
        Self { frame, window, planner: FftPlanner::new() }
    }

    /// Analysis, `change` on each frame of bands, synthesis.
    fn code(mut self, samples: &[f64], change: impl Fn(&mut [f64])) -> Vec<f64> {
        let m = self.frame;
        let blocks = samples.len() / m + 2;
        let mut padded = vec![0.0; (blocks + 1) * m];
        padded[m..m + samples.len()].copy_from_slice(samples);
        let mut output = vec![0.0; padded.len()];
        for b in 0..blocks {
            let mut bands = self.forward(&padded[b * m..(b + 2) * m]);
            change(&mut bands);
            let part = self.inverse(&bands);
            output[b * m..(b + 2) * m].iter_mut().zip(part).for_each(|(o, p)| *o += p);
        }
        output[m..m + samples.len()].to_vec()
    }

    fn forward(&mut self, block: &[f64]) -> Vec<f64> {
        let m = self.frame as f64;
        let shift = 0.5 + m / 2.0;
        let mut work: Vec<Complex64> = block
            .iter()
            .zip(&self.window)
            .enumerate()
            .map(|(n, (x, w))| Complex64::from_polar(x * w, -PI * n as f64 / (2.0 * m)))
            .collect();
        self.planner.plan_fft_forward(work.len()).process(&mut work);
        (0..self.frame).map(|k| (work[k] * Complex64::from_polar(1.0, -PI * shift * (k as f64 + 0.5) / m)).re).collect()
    }

    fn inverse(&mut self, bands: &[f64]) -> Vec<f64> {
        let m = self.frame as f64;
        let shift = 0.5 + m / 2.0;
        let mut work = vec![Complex64::default(); 2 * self.frame];
        for (k, (z, x)) in work.iter_mut().zip(bands).enumerate() {
            *z = Complex64::from_polar(*x, PI * shift * k as f64 / m);
        }
        self.planner.plan_fft_inverse(work.len()).process(&mut work);
        work.iter()
            .zip(&self.window)
            .enumerate()
            .map(|(n, (z, w))| (z * Complex64::from_polar(2.0 * w / m, PI * (n as f64 + shift) / (2.0 * m))).re)
            .collect()
    }
}
