//! Quasi-peak and average weighting of a measuring receiver (CISPR 16-1-1; the constants from memory of the standard and of
//! its informative annex on the theoretical receiver).
//!
//! The quasi-peak detector is a half-wave rectifier of source resistance S that charges a capacitor C with a bleed R. While the
//! envelope A is above the voltage U the diode conducts for the angle ±θ of each IF cycle, cos θ = U/A, and
//! dU/dt = A·(sin θ − θ·cos θ)/(π·S·C) − U/(R·C); otherwise only the bleed acts. R·C is the discharge time constant. S·C is
//! such that a sine applied suddenly reaches 1 − 1/e of its final voltage in the charge time constant. An ordinary R-C charge
//! with the same time reads too little at low repetition rates and is outside the tolerances of the standard.
//!
//! The indicating instrument is critically damped: two equal lags. Readings are relative to the steady reading of a sine
//! whose envelope is 1. Times in s.

use super::detector::remains;
use super::passage::{PARTS, Passage, halves};
use super::selectivity::Selectivity;
use super::{Channel, Complex};
use serde::{Deserialize, Serialize};
use std::f64::consts::PI;

/// A frequency band of CISPR 16-1-1 with its own constants.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Band {
    /// 9 to 150 kHz.
    A,
    /// 0.15 to 30 MHz.
    B,
    /// 30 to 1000 MHz (bands C and D).
    C,
}

impl Band {
    /// 6 dB bandwidth of its receiver, Hz.
    #[must_use]
    pub fn bandwidth_hz(self) -> f64 {
        match self {
            Self::A => 200.0,
            Self::B => 9000.0,
            Self::C => 120_000.0,
        }
    }

    /// Charge time constant of the quasi-peak detector, s.
    #[must_use]
    pub fn charge_s(self) -> f64 {
        match self {
            Self::A => 45e-3,
            Self::B | Self::C => 1e-3,
        }
    }

    /// Discharge time constant, s.
    #[must_use]
    pub fn discharge_s(self) -> f64 {
        match self {
            Self::A => 0.5,
            Self::B => 0.16,
            Self::C => 0.55,
        }
    }

    /// Time constant of the critically damped instrument, s.
    #[must_use]
    pub fn instrument_s(self) -> f64 {
        match self {
            Self::A | Self::B => 0.16,
            Self::C => 0.1,
        }
    }

    /// Charge time constant over S·C: makes a sudden sine reach 63 % of its final voltage in the charge time constant
    /// (solved numerically from the equation above).
    fn charge_over_source(self) -> f64 {
        match self {
            Self::A => 2.975,
            Self::B => 3.937,
            Self::C => 4.070,
        }
    }
}

/// Growth of the voltage by charging, in units of the envelope over S·C, for the ratio of voltage and envelope.
fn conduction(ratio: f64) -> f64 {
    if ratio >= 1.0 {
        return 0.0;
    }
    let angle = ratio.acos();
    ((1.0 - ratio * ratio).sqrt() - angle * ratio) / PI
}

/// Voltage of the quasi-peak detector under a steady envelope of 1, by bisection of charge against bleed.
fn steady(source_s: f64, discharge_s: f64) -> f64 {
    let (mut low, mut high) = (0.0, 1.0);
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        if conduction(middle) / source_s > middle / discharge_s { low = middle } else { high = middle }
    }
    0.5 * (low + high)
}

/// Pieces of a step in which the diode conducts.
const PIECES: usize = 8;

/// The quasi-peak detector at work; its voltage is in units of its steady voltage under an envelope of 1.
#[derive(Debug, Clone, PartialEq)]
pub struct QuasiPeak {
    step_s: f64,
    source_s: f64,
    discharge_s: f64,
    bleed: f64,
    scale: f64,
    voltage: f64,
    before: f64,
}

impl QuasiPeak {
    /// A detector at rest, stepped by `step_s`, which must be short against the rise of the envelope.
    #[must_use]
    pub fn new(band: Band, step_s: f64) -> Self {
        let source_s = band.charge_s() / band.charge_over_source();
        let discharge_s = band.discharge_s();
        Self {
            step_s,
            source_s,
            discharge_s,
            bleed: remains(step_s, discharge_s),
            scale: 1.0 / steady(source_s, discharge_s),
            voltage: 0.0,
            before: 0.0,
        }
    }

    fn slope(&self, envelope: f64, voltage: f64) -> f64 {
        let charge = if envelope > voltage { envelope * conduction(voltage / envelope) / self.source_s } else { 0.0 };
        charge - voltage / self.discharge_s
    }

    /// Voltage at the end of a step at which the envelope has come to `envelope`, along a straight line.
    pub fn step(&mut self, envelope: f64) -> f64 {
        let from = std::mem::replace(&mut self.before, envelope);
        self.stretch(self.step_s, [from, 0.5 * (from + envelope), envelope]);
        self.voltage * self.scale
    }

    /// Mean voltage over a step of the envelope.
    pub(super) fn passage<F: Fn(usize) -> Complex>(&mut self, passage: &Passage<'_, F>) -> f64 {
        let [from, middle, to] = halves(&passage.lengths);
        let before = self.voltage;
        if from.max(middle).max(to) <= self.bleed * self.voltage {
            self.voltage *= self.bleed;
        } else {
            // The diode conducts for a few steps of each click; where it begins and ends the charge is far from a parabola.
            let at = |half: usize| passage.at(half * PARTS / (2 * PIECES)).norm();
            for piece in 0..PIECES {
                self.stretch(self.step_s / PIECES as f64, [at(2 * piece), at(2 * piece + 1), at(2 * piece + 2)]);
            }
        }
        0.5 * (before + self.voltage) * self.scale
    }

    /// A stretch over which the envelope goes through three equidistant values, by Runge and Kutta's third-order rule.
    fn stretch(&mut self, h: f64, [from, middle, to]: [f64; 3]) {
        let u = self.voltage;
        let k1 = self.slope(from, u);
        let k2 = self.slope(middle, u + 0.5 * h * k1);
        let k3 = self.slope(to, u + h * (2.0 * k2 - k1));
        self.voltage = (u + h * (k1 + 4.0 * k2 + k3) / 6.0).max(0.0);
    }
}

/// The critically damped instrument at work.
#[derive(Debug, Clone, PartialEq)]
pub struct Instrument {
    remains: f64,
    lags: [f64; 2],
}

impl Instrument {
    /// An instrument at rest, stepped by `step_s`.
    #[must_use]
    pub fn new(band: Band, step_s: f64) -> Self {
        Self { remains: remains(step_s, band.instrument_s()), lags: [0.0; 2] }
    }

    /// Reading at the end of a step over which the input is held.
    #[inline]
    pub fn step(&mut self, input: f64) -> f64 {
        self.lags[0] = input + (self.lags[0] - input) * self.remains;
        self.lags[1] = self.lags[0] + (self.lags[1] - self.lags[0]) * self.remains;
        self.lags[1]
    }

    /// Mean reading over such a step.
    pub(super) fn mean(&mut self, input: f64) -> f64 {
        let before = self.lags[1];
        0.5 * (before + self.step(input))
    }
}

/// Which reading is taken.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Weighting {
    /// Greatest envelope.
    Peak,
    /// Quasi-peak.
    QuasiPeak,
    /// Average.
    Average,
}

/// Internal steps for one reciprocal bandwidth.
const STEPS: f64 = 40.0;
/// Pulses farther apart than this many instrument and discharge time constants do not know of each other.
const ISOLATED: f64 = 12.0;

/// Steady reading of a band's theoretical receiver for pulses of equal phase that come `rate_hz` times a second, or for one
/// pulse alone: relative to the steady reading of a sine whose envelope is the peak of one pulse behind the selectivity.
#[must_use]
pub fn reading(band: Band, weighting: Weighting, rate_hz: Option<f64>) -> f64 {
    let bandwidth_hz = band.bandwidth_hz();
    let step_s = 1.0 / (STEPS * bandwidth_hz);
    let channel = Channel::new(Selectivity::CoupledPairs { pairs: 2 }, bandwidth_hz);
    let strength = Complex::from(1.0 / channel.impulse_peak().1);
    let mut state = channel.state(step_s);
    let mut detector = QuasiPeak::new(band, step_s);
    let mut instrument = Instrument::new(band, step_s);
    let settling_s = ISOLATED * band.instrument_s().max(band.discharge_s() / 2.0);
    let period_s = rate_hz.map_or(f64::INFINITY, |rate_hz| 1.0 / rate_hz);
    // The reading is the greatest over the last stretch, in which at least one pulse falls.
    let stretch_s = if period_s.is_finite() { 2.0 * period_s } else { settling_s };
    let total_s = if period_s.is_finite() { settling_s + stretch_s } else { settling_s };
    let (mut next_s, mut greatest, mut now_s) = (0.0, 0.0f64, 0.0);
    for k in 0..(total_s / step_s) as u64 {
        now_s += step_s;
        state.advance();
        while next_s <= now_s {
            state.add_impulse(strength, now_s - next_s);
            next_s += period_s;
        }
        let envelope = state.output().norm();
        let shown = match weighting {
            Weighting::Peak => envelope,
            Weighting::QuasiPeak => instrument.step(detector.step(envelope)),
            Weighting::Average => instrument.step(envelope),
        };
        if now_s > total_s - stretch_s {
            greatest = greatest.max(shown);
        }
        if k % 4096 == 0 {
            state.settle();
        }
    }
    greatest
}
