//! Second-order sections and the filters made of them (bilinear transform with prewarping, from memory),
//! and convolution with a finite impulse response by overlap-save. Frequencies in hertz.

use rustfft::FftPlanner;
use rustfft::num_complex::Complex64;
use std::f64::consts::PI;

/// One second-order section, transposed direct form.
#[derive(Clone)]
pub struct Section {
    b: [f64; 3],
    a: [f64; 2],
    state: [f64; 2],
}

impl Section {
    /// From the analogue H(s) = (n2 s² + n1 s + n0)/(d2 s² + d1 s + d0) with s in units of the prewarped corner.
    fn bilinear(corner_hz: f64, rate_hz: f64, num: [f64; 3], den: [f64; 3]) -> Self {
        let k = 1.0 / (PI * corner_hz / rate_hz).tan();
        let map =
            |c: [f64; 3]| [c[2] * k * k + c[1] * k + c[0], 2.0 * (c[0] - c[2] * k * k), c[2] * k * k - c[1] * k + c[0]];
        let (n, d) = (map(num), map(den));
        Self { b: n.map(|v| v / d[0]), a: [d[1] / d[0], d[2] / d[0]], state: [0.0; 2] }
    }

    /// Next output.
    pub fn step(&mut self, x: f64) -> f64 {
        let y = self.b[0] * x + self.state[0];
        self.state[0] = self.b[1] * x - self.a[0] * y + self.state[1];
        self.state[1] = self.b[2] * x - self.a[1] * y;
        y
    }
}

/// A chain of sections.
pub type Chain = Vec<Section>;

/// Runs a chain over samples in place.
pub fn run(chain: &mut Chain, samples: &mut [f64]) {
    for section in chain {
        for x in samples.iter_mut() {
            *x = section.step(*x);
        }
    }
}

/// Butterworth low-pass of any order, 3 dB at `corner_hz`.
pub fn low_pass(order: usize, corner_hz: f64, rate_hz: f64) -> Chain {
    butterworth(order, corner_hz, rate_hz, [1.0, 0.0, 0.0], [1.0, 0.0, 0.0])
}

/// Butterworth high-pass of any order, 3 dB at `corner_hz`.
pub fn high_pass(order: usize, corner_hz: f64, rate_hz: f64) -> Chain {
    butterworth(order, corner_hz, rate_hz, [0.0, 0.0, 1.0], [0.0, 1.0, 0.0])
}

fn butterworth(order: usize, corner_hz: f64, rate_hz: f64, pair: [f64; 3], single: [f64; 3]) -> Chain {
    let mut chain: Chain = (0..order / 2)
        .map(|k| {
            let damping = 2.0 * (PI * (2 * k + 1) as f64 / (2 * order) as f64).sin();
            Section::bilinear(corner_hz, rate_hz, pair, [1.0, damping, 1.0])
        })
        .collect();
    if order % 2 == 1 {
        chain.push(Section::bilinear(corner_hz, rate_hz, single, [1.0, 1.0, 0.0]));
    }
    chain
}

/// Low-pass equivalent of two coupled circuits: each of half-width `half_hz` alone, coupling relative to critical.
pub fn coupled_pair(coupling: f64, half_hz: f64, rate_hz: f64) -> Section {
    let c = 1.0 + coupling * coupling;
    Section::bilinear(half_hz, rate_hz, [c, 0.0, 0.0], [c, 2.0, 1.0])
}

/// Convolution with a finite impulse response, same length, in place; the response's own delay stays in.
pub fn convolve(samples: &mut [Complex64], response: &[f64]) {
    let size = (4 * response.len()).next_power_of_two().max(4096);
    let keep = size - (response.len() - 1);
    let mut planner = FftPlanner::new();
    let (forward, inverse) = (planner.plan_fft_forward(size), planner.plan_fft_inverse(size));
    let mut kernel = vec![Complex64::default(); size];
    for (k, &h) in kernel.iter_mut().zip(response) {
        k.re = h / size as f64;
    }
    forward.process(&mut kernel);
    let mut past = vec![Complex64::default(); response.len() - 1];
    let mut block = vec![Complex64::default(); size];
    for chunk in samples.chunks_mut(keep) {
        let history = past.len();
        block[..history].copy_from_slice(&past);
        block[history..history + chunk.len()].copy_from_slice(chunk);
        block[history + chunk.len()..].fill(Complex64::default());
        if chunk.len() >= history {
            past.copy_from_slice(&chunk[chunk.len() - history..]);
        }
        forward.process(&mut block);
        block.iter_mut().zip(&kernel).for_each(|(b, k)| *b *= k);
        inverse.process(&mut block);
        chunk.copy_from_slice(&block[history..history + chunk.len()]);
    }
}
