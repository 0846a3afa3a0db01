//! The envelope detector: a diode that charges a capacitor, which a resistor discharges.
//!
//! Without time constants it follows the envelope. A discharge that is slow against the modulation leaves the envelope on its
//! way down (diagonal clipping; a tone of depth m and angular frequency ω is followed while RC ≤ √(1 − m²)/(m·ω), common
//! practice). The envelope is held over one internal step, over which the step of the circuit is exact.

use serde::{Deserialize, Serialize};

/// Time constants of the detector.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
pub struct DetectorSettings {
    /// Time constant of charging through the diode, s; 0 follows at once.
    pub charge_s: f64,
    /// Time constant of discharge, s; 0 follows at once.
    pub discharge_s: f64,
}

/// A detector at work.
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
