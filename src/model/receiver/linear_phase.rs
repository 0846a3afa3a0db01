//! A flat channel filter of linear phase, as ceramic or digital filters come near: a sinc under a Hamming window.
//!
//! With a 6 dB bandwidth B and edges of width E (from pass to stop band, 53 dB down) its impulse response is
//! B·sinc(B·τ)·w(τ/L) over the length L = 3.3/E (design rule of the Hamming window, textbook), τ from its middle. It is a formula
//! in continuous time, so a click between two samples is as exact as one on a sample. Units: s, Hz.

use super::Complex;
use std::f64::consts::{PI, TAU};

/// Length of a Hamming window times the width of the edge that it gives.
const LENGTH_TIMES_EDGE: f64 = 3.3;
/// Intervals of Simpson's rule over the impulse response.
const INTERVALS: usize = 600;

/// The filter.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct LinearPhase {
    bandwidth_hz: f64,
    length_s: f64,
    /// Makes the gain at the tuned frequency 1.
    scale: f64,
}

impl LinearPhase {
    /// A filter of a 6 dB bandwidth and a width of its edges.
    pub(super) fn new(bandwidth_hz: f64, edge_hz: f64) -> Self {
        let mut filter = Self { bandwidth_hz, length_s: LENGTH_TIMES_EDGE / edge_hz, scale: 1.0 };
        filter.scale = 1.0 / filter.gain(0.0).re;
        filter
    }

    pub(super) fn length_s(&self) -> f64 {
        self.length_s
    }

    pub(super) fn impulse_response(&self, time_s: f64) -> f64 {
        if !(0.0..=self.length_s).contains(&time_s) {
            return 0.0;
        }
        let part = time_s / self.length_s;
        let x = PI * self.bandwidth_hz * (time_s - 0.5 * self.length_s);
        let sinc = if x.abs() < 1e-9 { 1.0 } else { x.sin() / x };
        self.scale * self.bandwidth_hz * sinc * (0.54 - 0.46 * (TAU * part).cos())
    }

    pub(super) fn gain(&self, offset_hz: f64) -> Complex {
        let half_s = 0.5 * self.length_s;
        let step_s = self.length_s / INTERVALS as f64;
        let sum: f64 = (0..=INTERVALS)
            .map(|k| {
                let weight = match k {
                    0 | INTERVALS => 1.0,
                    k if k % 2 == 1 => 4.0,
                    _ => 2.0,
                };
                let time_s = k as f64 * step_s;
                weight * self.impulse_response(time_s) * (TAU * offset_hz * (time_s - half_s)).cos()
            })
            .sum();
        Complex::from_polar(1.0, -TAU * offset_hz * half_s) * (sum * step_s / 3.0)
    }

    pub(super) fn state(&self, step_s: f64) -> LinearState {
        let count = (self.length_s / step_s).ceil() as usize + 1;
        LinearState {
            step_s,
            taps: (0..count).map(|k| self.impulse_response(k as f64 * step_s)).collect(),
            coming: vec![Complex::default(); count],
            now: 0,
            filter: self.clone(),
        }
    }
}

/// The filter at work: what is on its way to the output.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct LinearState {
    filter: LinearPhase,
    step_s: f64,
    /// Impulse response at whole steps.
    taps: Vec<f64>,
    /// Ring of the outputs to come, the present one at `now`.
    coming: Vec<Complex>,
    now: usize,
}

impl LinearState {
    pub(super) fn advance(&mut self) {
        self.coming[self.now] = Complex::default();
        self.now = (self.now + 1) % self.coming.len();
    }

    pub(super) fn add_impulse(&mut self, strength: Complex, age_s: f64) {
        let count = self.coming.len();
        for k in 0..count {
            self.coming[(self.now + k) % count] +=
                strength * self.filter.impulse_response(age_s + k as f64 * self.step_s);
        }
    }

    pub(super) fn add_impulse_now(&mut self, strength: Complex) {
        let (later, sooner) = self.coming.split_at_mut(self.now);
        let (first, rest) = self.taps.split_at(sooner.len());
        // Two plain loops, which the compiler keeps in vector registers.
        for (z, tap) in sooner.iter_mut().zip(first) {
            *z += strength * tap;
        }
        for (z, tap) in later.iter_mut().zip(rest) {
            *z += strength * tap;
        }
    }

    pub(super) fn output(&self) -> Complex {
        self.coming[self.now]
    }
}
