//! The plain receiver.

use super::stages::{REACH, audio_band, diode, down, gain_control, instrument, quasi_peak_b};
use crate::firing::Firing;
use crate::model::receiver::{
    Complex, DetectorKind, DetectorSettings, Draw, Programme, ReceiverSettings, Selectivity, Stream,
};
use std::f64::consts::{PI, TAU};

/// Fine samples for one output sample, at least.
const FINE: f64 = 64.0;

/// Poles of the low-pass equivalent by the textbook, rad/s.
fn poles(selectivity: Selectivity, bandwidth_hz: f64) -> Vec<Complex> {
    let edge = PI * bandwidth_hz;
    match selectivity {
        Selectivity::CoupledPairs { pairs } => {
            let w = edge / (2f64.sqrt() * (2f64.powf(2.0 / f64::from(pairs)) - 1.0).powf(0.25));
            (0..pairs).flat_map(|_| [Complex::new(-w, w), Complex::new(-w, -w)]).collect()
        }
        Selectivity::Butterworth { poles } => {
            let n = f64::from(poles);
            let corner = edge / 3f64.powf(0.5 / n);
            (0..poles).map(|k| Complex::from_polar(corner, PI * (0.5 + (f64::from(k) + 0.5) / n))).collect()
        }
        Selectivity::Synchronous { circuits } => {
            let rate = edge / (2f64.powf(2.0 / f64::from(circuits)) - 1.0).sqrt();
            vec![Complex::from(-rate); usize::from(circuits)]
        }
        Selectivity::Flat { .. } => Vec::new(),
    }
}

/// Response of the flat filter, unscaled: a sinc under a Hamming window of 3.3 reciprocal edges whose ends are
/// rounded off over 2 %.
fn flat_response(bandwidth_hz: f64, edge_percent: u8, time_s: f64) -> f64 {
    let length_s = 3.3 / (bandwidth_hz * f64::from(edge_percent) / 100.0);
    if !(0.0..=length_s).contains(&time_s) {
        return 0.0;
    }
    let x = PI * bandwidth_hz * (time_s - length_s / 2.0);
    let from_end = (time_s / length_s).min(1.0 - time_s / length_s);
    let ramp = if from_end < 0.02 { 0.5 - 0.5 * (PI * from_end / 0.02).cos() } else { 1.0 };
    (if x == 0.0 { 1.0 } else { x.sin() / x }) * (0.54 - 0.46 * (TAU * time_s / length_s).cos()) * ramp
}

/// The plain receiver, ready to run.
pub(super) struct Plain<'a> {
    settings: &'a ReceiverSettings,
    /// Internal samples of the other for an output sample, and fine samples for one of those.
    factor: usize,
    fine: usize,
    /// Seconds of a fine sample.
    step_s: f64,
    run_in: usize,
    seed: u64,
    poles: Vec<Complex>,
    /// Response to an impulse of strength 1 at the fine samples.
    response: Vec<Complex>,
}

impl<'a> Plain<'a> {
    pub(super) fn new(settings: &'a ReceiverSettings, factor: usize, run_in_s: f64, seed: u64) -> Self {
        let fine = (FINE / factor as f64 / 2.0).ceil() as usize * 2;
        let step_s = 1.0 / (48_000.0 * (factor * fine) as f64);
        let run_in = (run_in_s * 48_000.0).ceil() as usize * factor;
        let poles = poles(settings.selectivity, settings.bandwidth_hz);
        let mut plain = Self { settings, factor, fine, step_s, run_in, seed, poles, response: Vec::new() };
        plain.response = plain.impulse_response();
        plain
    }

    fn impulse_response(&self) -> Vec<Complex> {
        let count = (16.0 / (self.settings.bandwidth_hz * self.step_s)) as usize;
        if let Selectivity::Flat { edge_percent } = self.settings.selectivity {
            let b = self.settings.bandwidth_hz;
            let h: Vec<f64> = (0..count).map(|k| flat_response(b, edge_percent, k as f64 * self.step_s)).collect();
            let area: f64 = h.iter().sum::<f64>() * self.step_s;
            return h.iter().map(|h| Complex::from(h / area)).collect();
        }
        let mut x = vec![Complex::default(); self.poles.len()];
        x[0] = -self.poles[0];
        (0..count)
            .map(|_| {
                let now = x[x.len() - 1];
                self.circuits(&mut x, [Complex::default(); 3]);
                now
            })
            .collect()
    }

    /// One fine step of the cascade by Runge's and Kutta's method; the input at beginning, middle and end.
    fn circuits(&self, x: &mut [Complex], input: [Complex; 3]) {
        let slope = |x: &[Complex], u: Complex| -> Vec<Complex> {
            (0..x.len()).map(|i| self.poles[i] * (x[i] - if i > 0 { x[i - 1] } else { u })).collect()
        };
        let moved = |k: &[Complex], h: f64, x: &[Complex]| -> Vec<Complex> {
            x.iter().zip(k).map(|(x, k)| x + k * h).collect()
        };
        let h = self.step_s;
        let k1 = slope(x, input[0]);
        let k2 = slope(&moved(&k1, h / 2.0, x), input[1]);
        let k3 = slope(&moved(&k2, h / 2.0, x), input[1]);
        let k4 = slope(&moved(&k3, h, x), input[2]);
        for i in 0..x.len() {
            x[i] += (k1[i] + 2.0 * k2[i] + 2.0 * k3[i] + k4[i]) * (h / 6.0);
        }
    }

    /// Gain of the channel at an offset, from the sum over its response.
    fn gain(&self, offset_hz: f64) -> Complex {
        let first = 0.5 * self.response[0];
        let turn = |k: usize| Complex::from_polar(self.step_s, -TAU * offset_hz * k as f64 * self.step_s);
        (1..self.response.len()).map(|k| self.response[k] * turn(k)).sum::<Complex>() + first * self.step_s
    }

    /// Peak of the response, by a parabola.
    fn height(&self) -> f64 {
        let h: Vec<f64> = self.response.iter().map(|z| z.norm()).collect();
        let top = (1..h.len() - 1).max_by(|&i, &j| h[i].total_cmp(&h[j])).unwrap();
        let (a, b, c) = (h[top - 1], h[top], h[top + 1]);
        b + (a - c).powi(2) / (8.0 * (2.0 * b - a - c))
    }

    /// Complex envelope at every fine sample from the start of the run-in on.
    fn envelope(&self, firings: &[Firing], samples: usize) -> Vec<Complex> {
        let internal = self.run_in + samples * self.factor;
        let mut z = vec![Complex::default(); internal * self.fine + 1];
        self.add_clicks(firings, &mut z);
        self.add_noise(internal, &mut z);
        self.add_carrier(&mut z);
        z
    }

    fn add_clicks(&self, firings: &[Firing], z: &mut [Complex]) {
        let mut phases = Draw::new(self.seed, Stream::ClickPhase);
        let height = self.height();
        for firing in firings {
            let strength = phases.phase() * (firing.voltage_v / height);
            let place = firing.time_s / self.step_s + (self.run_in * self.fine) as f64;
            if let Selectivity::Flat { edge_percent } = self.settings.selectivity {
                let b = self.settings.bandwidth_hz;
                let middle = self.response.len() / 8;
                let scale = self.response[middle].re / flat_response(b, edge_percent, middle as f64 * self.step_s);
                for k in 0..self.response.len() {
                    let at = place.ceil() as usize + k;
                    let age_s = (at as f64 - place) * self.step_s;
                    if at < z.len() {
                        z[at] += strength * scale * flat_response(b, edge_percent, age_s);
                    }
                }
                continue;
            }
            // The cascade starts between two fine samples: a first step of another length.
            let first = place.ceil() - place;
            let mut x = vec![Complex::default(); self.poles.len()];
            x[0] = -self.poles[0] * strength;
            let short = Plain { step_s: self.step_s * first, poles: self.poles.clone(), response: Vec::new(), ..*self };
            short.circuits(&mut x, [Complex::default(); 3]);
            for at in place.ceil() as usize..(place.ceil() as usize + self.response.len()).min(z.len()) {
                z[at] += x[x.len() - 1];
                self.circuits(&mut x, [Complex::default(); 3]);
            }
        }
    }

    fn add_noise(&self, internal: usize, z: &mut [Complex]) {
        if self.settings.noise == 0.0 {
            return;
        }
        let energy = self.response.iter().map(Complex::norm_sqr).sum::<f64>() - 0.5 * self.response[0].norm_sqr();
        let strength = self.settings.noise / (energy / self.fine as f64).sqrt();
        let mut normals = Draw::new(self.seed, Stream::ChannelNoise).normals();
        for k in 0..internal {
            let impulse = normals.complex() * strength;
            for (z, h) in z[k * self.fine..].iter_mut().zip(&self.response) {
                *z += impulse * h;
            }
        }
    }

    /// The carrier as a continuous input of the circuits; of the flat filter as its lines.
    fn add_carrier(&self, z: &mut [Complex]) {
        let Some(carrier) = &self.settings.carrier else { return };
        let mut draw = Draw::new(self.seed, Stream::Carrier);
        let start = draw.phase();
        let tone = match carrier.programme {
            Some(Programme::Tone { frequency_hz, depth }) => Some((draw.phase(), frequency_hz, depth)),
            _ => None,
        };
        let turn = |f: f64, time_s: f64| Complex::from_polar(1.0, TAU * f * time_s);
        let strength = carrier.amplitude / self.gain(carrier.offset_hz).norm();
        if matches!(self.settings.selectivity, Selectivity::Flat { .. }) {
            let mut lines = vec![(start, carrier.offset_hz)];
            if let Some((phase, frequency_hz, depth)) = tone {
                // m·sin(ωt + φ) is two lines of half the depth.
                let half = phase * Complex::new(0.0, -0.5 * depth);
                lines.push((start * half, carrier.offset_hz + frequency_hz));
                lines.push((start * half.conj(), carrier.offset_hz - frequency_hz));
            }
            for (amplitude, f) in lines {
                // The gain grows from nothing while the filter fills.
                let (line, mut gain) = (amplitude * strength, Complex::default());
                for (k, z) in z.iter_mut().enumerate() {
                    let now = k as f64 * self.step_s;
                    *z += line * gain * turn(f, now);
                    gain += self.response.get(k).map_or(Complex::default(), |h| h * turn(-f, now) * self.step_s);
                }
            }
            return;
        }
        let input = |time_s: f64| {
            let modulation = tone.map_or(0.0, |(phase, f, depth)| depth * (phase * turn(f, time_s)).im);
            start * turn(carrier.offset_hz, time_s) * (strength * (1.0 + modulation))
        };
        let mut x = vec![Complex::default(); self.poles.len()];
        for (k, z) in z.iter_mut().enumerate() {
            *z += x[x.len() - 1];
            let at = |part: f64| input((k as f64 + part) * self.step_s);
            self.circuits(&mut x, [at(0.0), at(0.5), at(1.0)]);
        }
    }

    /// Audio at the output samples, delayed by so many internal samples.
    pub(super) fn audio(&self, firings: &[Firing], samples: usize, delay: f64) -> Vec<f64> {
        // The sinc looks as far ahead as back.
        let mut z = self.envelope(firings, samples + REACH);
        if let Some(agc) = self.settings.agc {
            gain_control(&mut z, agc, self.step_s);
        }
        let detected = self.detect(&z);
        let rate_hz = 1.0 / self.step_s;
        let filtered = audio_band(&detected, self.settings.audio_band, self.settings.de_emphasis_s, rate_hz);
        let ratio = self.factor * self.fine;
        (0..samples)
            .map(|n| {
                let internal = (self.run_in + n * self.factor) as f64 - delay;
                down(&filtered, internal * self.fine as f64, ratio)
            })
            .collect()
    }

    fn detect(&self, z: &[Complex]) -> Vec<f64> {
        let DetectorSettings { kind, charge_s, discharge_s } = self.settings.detector;
        let level = || z.iter().map(|z| z.norm()).collect::<Vec<f64>>();
        let diode = |level: Vec<f64>| match charge_s.max(discharge_s) > 0.0 {
            true => diode(&level, charge_s, discharge_s, self.step_s),
            false => level,
        };
        match kind {
            DetectorKind::Envelope => diode(level()),
            DetectorKind::SquareLaw => diode(z.iter().map(Complex::norm_sqr).collect()),
            DetectorKind::Synchronous => self.synchronous(z),
            DetectorKind::Frequency => {
                // Between two samples: the fine samples are shifted by half of one, which is made good by the mean of two.
                let turned =
                    |k: usize| (z[k] * z[k - 1].conj()).arg() / (PI * self.step_s * self.settings.bandwidth_hz);
                (0..z.len())
                    .map(|k| if k == 0 || k + 1 == z.len() { 0.0 } else { 0.5 * (turned(k) + turned(k + 1)) })
                    .collect()
            }
            DetectorKind::QuasiPeak(_) => instrument(&quasi_peak_b(&level(), self.step_s), self.step_s),
            DetectorKind::Average(_) => instrument(&level(), self.step_s),
        }
    }

    fn synchronous(&self, z: &[Complex]) -> Vec<f64> {
        let Some(carrier) = &self.settings.carrier else { return z.iter().map(|z| z.re).collect() };
        let gain = self.gain(carrier.offset_hz);
        let start = Draw::new(self.seed, Stream::Carrier).phase() * gain / gain.norm();
        let reference = |k: usize| start * Complex::from_polar(1.0, TAU * carrier.offset_hz * k as f64 * self.step_s);
        z.iter().enumerate().map(|(k, z)| (z * reference(k).conj()).re).collect()
    }
}
