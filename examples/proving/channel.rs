//! The receiver's selectivity at complex baseband, scaled so that a unit impulse peaks at one.

use crate::filters::{self, Chain};
use crate::random::Dice;
use rustfft::num_complex::Complex64;
use std::f64::consts::{LN_2, PI};

/// How the selectivity is made.
#[derive(Clone, Copy)]
pub enum Shape {
    /// Linear-phase finite response (a software receiver): Hamming-windowed sinc; relative length.
    LinearPhase(f64),
    /// Butterworth of the given order.
    Butterworth(usize),
    /// Pairs of coupled circuits: number of pairs and coupling relative to critical.
    Coupled(usize, f64),
    /// Gaussian.
    Gaussian,
}

impl Shape {
    /// Draws a shape.
    pub fn draw(dice: &mut Dice) -> Self {
        match dice.whole(0, 3) {
            0 => Self::LinearPhase(dice.uniform(1.5, 4.0)),
            1 => Self::Butterworth(dice.whole(2, 5)),
            2 => Self::Coupled(dice.whole(1, 3), dice.uniform(0.8, 1.3)),
            _ => Self::Gaussian,
        }
    }
}

/// A ready channel.
pub struct Channel {
    filter: Filter,
    scale: f64,
    /// Rms output for white complex noise of unit power a sample, on the scale of the unit click peak.
    pub noise_gain: f64,
    /// Gain for a constant, on the same scale.
    pub carrier_gain: f64,
}

enum Filter {
    Response(Vec<f64>),
    Recursive(Chain),
}

impl Channel {
    /// A channel of the given two-sided 6 dB bandwidth.
    pub fn new(shape: Shape, bandwidth_hz: f64, rate_hz: f64) -> Self {
        let half = bandwidth_hz / 2.0;
        // Corner at which the named 3 dB prototype is 6 dB down at the half bandwidth: |H|² = 1/4.
        let filter = match shape {
            Shape::LinearPhase(length) => Filter::Response(windowed_low_pass(half, length, rate_hz)),
            Shape::Gaussian => Filter::Response(gaussian(half, rate_hz)),
            Shape::Butterworth(order) => {
                let corner = half / 3f64.powf(0.5 / order as f64);
                Filter::Recursive(filters::low_pass(order, corner, rate_hz))
            }
            Shape::Coupled(pairs, coupling) => {
                let alone = half / coupled_six_db(pairs, coupling);
                Filter::Recursive(vec![filters::coupled_pair(coupling, alone, rate_hz); pairs])
            }
        };
        let mut channel = Self { filter, scale: 1.0, noise_gain: 1.0, carrier_gain: 1.0 };
        let mut impulse = vec![Complex64::default(); 8192];
        impulse[0].re = 1.0;
        channel.run(&mut impulse);
        let peak = impulse.iter().map(|z| z.norm()).fold(0.0, f64::max);
        channel.noise_gain = impulse.iter().map(Complex64::norm_sqr).sum::<f64>().sqrt() / peak;
        channel.carrier_gain = impulse.iter().map(|z| z.re).sum::<f64>() / peak;
        channel.scale = 1.0 / peak;
        channel
    }

    /// Filters in place.
    pub fn run(&mut self, samples: &mut [Complex64]) {
        match &mut self.filter {
            Filter::Response(response) => filters::convolve(samples, response),
            Filter::Recursive(chain) => run_recursive(chain, samples),
        }
        samples.iter_mut().for_each(|z| *z *= self.scale);
    }
}

fn run_recursive(chain: &Chain, samples: &mut [Complex64]) {
    let (mut real, mut imaginary) = (chain.clone(), chain.clone());
    for z in samples.iter_mut() {
        for (r, i) in real.iter_mut().zip(&mut imaginary) {
            *z = Complex64::new(r.step(z.re), i.step(z.im));
        }
    }
}

/// Frequency, in units of one circuit's half-width, where `pairs` coupled pairs together are 6 dB down.
fn coupled_six_db(pairs: usize, coupling: f64) -> f64 {
    let c = 1.0 + coupling * coupling;
    let loss = |x: f64| ((((c - x * x).powi(2) + 4.0 * x * x) / (c * c)).powi(pairs as i32)).sqrt();
    let (mut low, mut high) = (coupling.max(0.1), 20.0);
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        if loss(middle) < 2.0 { low = middle } else { high = middle }
    }
    low
}

/// Hamming-windowed sinc whose 6 dB point is `half_hz`; `length` in units of 1/`half_hz`.
fn windowed_low_pass(half_hz: f64, length: f64, rate_hz: f64) -> Vec<f64> {
    let reach = (length * rate_hz / half_hz / 2.0).round();
    let taps = (-(reach as i64)..=reach as i64).map(|k| {
        let t = k as f64;
        let x = 2.0 * half_hz * t / rate_hz;
        let sinc = if k == 0 { 1.0 } else { (PI * x).sin() / (PI * x) };
        sinc * (0.54 + 0.46 * (PI * t / (reach + 1.0)).cos())
    });
    taps.collect()
}

/// Gaussian whose amplitude response is one half at `half_hz`.
fn gaussian(half_hz: f64, rate_hz: f64) -> Vec<f64> {
    // H(f) = exp(−ln 2 (f/half)²) belongs to h(t) ∝ exp(−(π half t)²/ln 2).
    let width = (LN_2).sqrt() / (PI * half_hz) * rate_hz;
    let reach = (4.5 * width).ceil() as i64;
    (-reach..=reach).map(|k| (-(k as f64 / width).powi(2)).exp()).collect()
}
