//! A flat channel filter of linear phase, as ceramic or digital filters come near: a sinc under a Hamming window.
//!
//! With a 6 dB bandwidth B and edges of width E (from pass to stop band, 53 dB down) its impulse response is
//! B·sinc(B·τ)·w(τ/L) over the length L = 3.3/E (design rule of the Hamming window, textbook), τ from its middle;
//! the steps at the ends of that window are rounded off. It is a formula
//! in continuous time, so a click between two samples is as exact as one on a sample. Between samples what clicks leave is read
//! by a parabola through samples at half steps, what noise and carrier leave by the polynomial through the last six. Units: s, Hz.

use super::Complex;
use super::convolution::Convolution;
use super::passage::PARTS;
use super::turning::Turning;
use std::f64::consts::{PI, TAU};

/// Length of a Hamming window times the width of the edge that it gives.
const LENGTH_TIMES_EDGE: f64 = 3.3;
/// Intervals of Simpson's rule over the impulse response.
const INTERVALS: usize = 600;
/// Part of the length over which the window rises from zero, and falls to it.
const RAMP: f64 = 0.02;
/// Samples through which the polynomial between samples goes.
const NODES: usize = 6;

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
        self.scale * self.bandwidth_hz * sinc * (0.54 - 0.46 * (TAU * part).cos()) * ramp(part)
    }

    /// The impulse response at an age and then from step to step, its sine and cosine turned instead of computed anew.
    fn samples(&self, age_s: f64, step_s: f64, count: usize) -> impl Iterator<Item = f64> {
        let angle = |time_s: f64| PI * self.bandwidth_hz * (time_s - 0.5 * self.length_s);
        let mut sine = Turning::new(Complex::from_polar(1.0, angle(age_s)), 0.5 * self.bandwidth_hz, step_s);
        let window = TAU * age_s / self.length_s;
        let mut cosine = Turning::new(Complex::from_polar(1.0, window), 1.0 / self.length_s, step_s);
        let scale = self.scale * self.bandwidth_hz;
        (0..count).map(move |k| {
            let time_s = age_s + k as f64 * step_s;
            let (x, sin, cos) = (angle(time_s), sine.next().im, cosine.next().re);
            let sinc = if x.abs() < 1e-9 { 1.0 } else { sin / x };
            let part = time_s / self.length_s;
            if (0.0..=1.0).contains(&part) { scale * sinc * (0.54 - 0.46 * cos) * ramp(part) } else { 0.0 }
        })
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
        let count = (self.length_s / step_s).ceil() as usize + 2;
        let taps: Vec<f64> = (0..count).map(|k| self.impulse_response(k as f64 * step_s)).collect();
        LinearState {
            step_s,
            clicks: vec![[Complex::default(); 2]; count],
            now: 0,
            before: Complex::default(),
            convolution: Convolution::new(&taps),
            driven: Vec::new(),
            place: 0,
            recent: [Complex::default(); NODES - 1],
            weights: (0..=PARTS).map(|part| Weights::before(part as f64 / PARTS as f64)).collect(),
            filter: self.clone(),
        }
    }
}

/// Takes away the steps at both ends of the window, which no sampling could follow; the stop band is 53 dB down all the same.
fn ramp(part: f64) -> f64 {
    let in_ramps = part.min(1.0 - part) / RAMP;
    if in_ramps < 1.0 { (0.5 * PI * in_ramps).sin().powi(2) } else { 1.0 }
}

/// Weights of the values at 0, −1, −2, … in the value at `x` of the polynomial through them (Lagrange).
fn interpolation<const N: usize>(x: f64) -> [f64; N] {
    std::array::from_fn(|i| {
        let own = -(i as f64);
        (0..N).filter(|&j| j != i).map(|j| (x + j as f64) / (own + j as f64)).product()
    })
}

/// The filter at work: what is on its way to the output.
#[derive(Debug, Clone)]
pub(super) struct LinearState {
    filter: LinearPhase,
    step_s: f64,
    /// Ring of what clicks leave at the samples to come and half a step before each, the present one at `now`.
    clicks: Vec<[Complex; 2]>,
    now: usize,
    /// What clicks left at the sample before.
    before: Complex,
    convolution: Convolution,
    /// What the impulses given together leave, the present one at `place`.
    driven: Vec<Complex>,
    place: usize,
    /// The last of these, the latest first, without the present one.
    recent: [Complex; NODES - 1],
    /// What stands for the envelope so many parts of a step ago.
    weights: Vec<Weights>,
}

/// Weights in the envelope between samples.
#[derive(Debug, Clone, Copy)]
struct Weights {
    /// Of what impulses given together leave now and left at the samples before.
    driven: [f64; NODES],
    /// Of what clicks leave now, left half a step ago and a step ago.
    clicks: [f64; 3],
}

impl Weights {
    fn before(steps: f64) -> Self {
        Self { driven: interpolation(-steps), clicks: interpolation(-2.0 * steps) }
    }
}

impl LinearState {
    pub(super) fn advance(&mut self) {
        self.recent.copy_within(..NODES - 2, 1);
        self.recent[0] = self.present();
        self.place += 1;
        self.before = self.clicks[self.now][0];
        self.clicks[self.now] = [Complex::default(); 2];
        self.now = if self.now + 1 == self.clicks.len() { 0 } else { self.now + 1 };
    }

    /// What the impulses given together leave now.
    fn present(&self) -> Complex {
        self.driven.get(self.place).copied().unwrap_or_default()
    }

    pub(super) fn wants(&self) -> Option<usize> {
        (self.place + 1 >= self.driven.len()).then(|| self.convolution.block())
    }

    pub(super) fn drive(&mut self, impulses: &[Complex]) {
        // The present one stays in front.
        let present = self.present();
        self.driven = self.convolution.next(impulses);
        self.driven.insert(0, present);
        self.place = 0;
    }

    pub(super) fn add_impulse(&mut self, strength: Complex, age_s: f64) {
        let mut response = self.filter.samples(age_s - 0.5 * self.step_s, 0.5 * self.step_s, 2 * self.clicks.len());
        let (later, sooner) = self.clicks.split_at_mut(self.now);
        for [at, half_before] in sooner.iter_mut().chain(later) {
            *half_before += strength * response.next().unwrap_or_default();
            *at += strength * response.next().unwrap_or_default();
        }
    }

    pub(super) fn output(&self) -> Complex {
        self.clicks[self.now][0] + self.present()
    }

    pub(super) fn output_before(&self, parts: usize) -> Complex {
        let Weights { driven: [now, before @ ..], clicks: [a, b, c] } = self.weights[parts];
        let [at, half_before] = self.clicks[self.now];
        let mut sum = self.present() * now + at * a + half_before * b + self.before * c;
        for (z, weight) in self.recent.iter().zip(before) {
            sum += z * weight;
        }
        sum
    }

    /// What [`LinearState::output_before`] holds too much of a click of strength 1 that came within the last step.
    pub(super) fn premature(&self, age_s: f64, parts: usize) -> f64 {
        let ago_s = self.step_s * parts as f64 / PARTS as f64;
        let [at, half_before, _] = self.weights[parts].clicks;
        let response = |time_s: f64| self.filter.impulse_response(time_s);
        at * response(age_s) + half_before * response(age_s - 0.5 * self.step_s) - response(age_s - ago_s)
    }
}
