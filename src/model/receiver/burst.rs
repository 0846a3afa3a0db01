//! The damped wave of one spark, as the receiver sees it.
//!
//! The tank's current rings as e^(−at)·sin ω₀t with a = π·f₀/Q: hundreds of kilohertz wide, so a channel of a few kilohertz sees
//! only its spectrum at the tuned frequency and takes the burst for an impulse. Its carrier phase is random from firing to
//! firing, because the jitter of the gap is many carrier cycles.
//!
//! Units: frequencies in Hz, spectra in V·s (V/Hz) for a ring that starts with `volts`.

use super::Complex;
use serde::{Deserialize, Serialize};
use std::f64::consts::{PI, TAU};
use thiserror::Error;

/// A ring that does not describe a tank.
#[derive(Debug, Clone, Copy, PartialEq, Error)]
pub enum BurstError {
    /// Frequency out of range.
    #[error("tank frequency {0} Hz is not a positive number")]
    Frequency(f64),
    /// Quality out of range.
    #[error("tank quality {0} does not ring; it must be above 0.5")]
    Quality(f64),
}

/// Frequency and damping of the ring.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Burst {
    frequency_hz: f64,
    quality: f64,
}

impl Burst {
    /// A ring of frequency f₀ in Hz and quality factor Q.
    ///
    /// # Errors
    /// If the frequency is not positive or Q is not above 1/2.
    pub fn new(frequency_hz: f64, quality: f64) -> Result<Self, BurstError> {
        if !(frequency_hz > 0.0 && frequency_hz.is_finite()) {
            return Err(BurstError::Frequency(frequency_hz));
        }
        if !(quality > 0.5 && quality.is_finite()) {
            return Err(BurstError::Quality(quality));
        }
        Ok(Self { frequency_hz, quality })
    }

    /// Ring frequency, Hz.
    #[must_use]
    pub fn frequency_hz(&self) -> f64 {
        self.frequency_hz
    }

    /// Decay rate a = π·f₀/Q, 1/s.
    #[must_use]
    pub fn decay_rate(&self) -> f64 {
        PI * self.frequency_hz / self.quality
    }

    /// Spectrum of V₀·e^(−at)·sin ω₀t at a frequency, V·s: V₀·ω₀/((a + jω)² + ω₀²).
    #[must_use]
    pub fn spectrum(&self, frequency_hz: f64, volts: f64) -> Complex {
        let ring = TAU * self.frequency_hz;
        let s = Complex::new(self.decay_rate(), TAU * frequency_hz);
        volts * ring / (s * s + ring * ring)
    }

    /// Strength of the impulse that stands for the burst in the complex envelope at the tuned frequency, V·s: twice the modulus
    /// of the spectrum, V₀/a on tune. Times the impulse bandwidth of the channel it is the peak of the click in volts.
    #[must_use]
    pub fn strength(&self, tuned_hz: f64, volts: f64) -> f64 {
        2.0 * self.spectrum(tuned_hz, volts).norm()
    }
}
