//! The kinds of detector, and the envelope detector: a diode that charges a capacitor, which a resistor discharges.
//!
//! Without time constants it follows the envelope. A discharge that is slow against the modulation leaves the envelope on its
//! way down (diagonal clipping; a tone of depth m and angular frequency ω is followed while RC ≤ √(1 − m²)/(m·ω), common
//! practice). The envelope is held over one internal step, over which the step of the circuit is exact.

use super::weighting::Band;
use serde::{Deserialize, Serialize};

/// What turns the channel into audio.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", tag = "kind", content = "band")]
pub enum DetectorKind {
    /// The modulus of the complex envelope.
    #[default]
    Envelope,
    /// Its square.
    SquareLaw,
    /// The part in phase with the carrier, to which the detector is locked; without a carrier, with the tuned frequency.
    Synchronous,
    /// Limiter and frequency discriminator: an offset of half the bandwidth gives 1.
    Frequency,
    /// Quasi-peak detector and indicating instrument of CISPR 16-1-1. Behind the audio band little of it is left: it is there
    /// to see levels, with an open low end.
    QuasiPeak(Band),
    /// Linear average and the same instrument.
    Average(Band),
}

/// Kind and time constants of the detector.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
pub struct DetectorSettings {
    /// Kind.
    #[serde(flatten)]
    pub kind: DetectorKind,
    /// Time constant of charging through the diode, s; 0 follows at once. Of the envelope and square-law detectors.
    pub charge_s: f64,
    /// Time constant of discharge, s; 0 follows at once. Of the envelope and square-law detectors.
    pub discharge_s: f64,
}

/// A diode, capacitor and resistor at work.
#[derive(Debug, Clone, PartialEq)]
pub struct Detector {
    /// What remains of the difference after one step of charging.
    charge: f64,
    /// What remains of the voltage after one step of discharge.
    discharge: f64,
    voltage: f64,
}

impl Detector {
    /// A detector at rest, stepped by `step_s`.
    #[must_use]
    pub fn new(settings: DetectorSettings, step_s: f64) -> Self {
        Self {
            charge: remains(step_s, settings.charge_s),
            discharge: remains(step_s, settings.discharge_s),
            voltage: 0.0,
        }
    }

    /// Output for the envelope of this step.
    #[inline]
    pub fn step(&mut self, envelope: f64) -> f64 {
        self.voltage = if envelope > self.voltage {
            envelope + (self.voltage - envelope) * self.charge
        } else {
            (self.voltage * self.discharge).max(envelope)
        };
        self.voltage
    }
}

/// e^(−step/τ), and 0 for τ = 0.
pub(super) fn remains(step_s: f64, time_constant_s: f64) -> f64 {
    if time_constant_s > 0.0 { (-step_s / time_constant_s).exp() } else { 0.0 }
}
