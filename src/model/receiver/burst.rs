//! The damped wave of one spark, as the receiver sees it.
//!
//! The tank's current rings as e^(−at)·sin ω₁t: hundreds of kilohertz wide, so a channel of a few kilohertz sees only its
//! spectrum at the tuned frequency and takes the burst for an impulse. Its carrier phase is random from firing to firing,
//! because the jitter of the gap is many carrier cycles.
//!
//! With the natural frequency f₀ and the quality Q the decay rate is a = π·f₀/Q and the ring frequency f₁ = f₀·√(1 − 1/(4Q²));
//! neighbouring peaks of the same sign fall by the logarithmic decrement λ with Q = ½·√(1 + (2π/λ)²) (textbook).
//!
//! Units: frequencies in Hz, spectra in V·s (V/Hz) for a ring that starts with `volts`.

use super::Complex;
use serde::{Deserialize, Serialize};
use std::f64::consts::{PI, TAU};
use thiserror::Error;

/// A tank that does not ring.
#[derive(Debug, Clone, Copy, PartialEq, Error)]
pub enum BurstError {
    /// Frequency out of range.
    #[error("its frequency of {0} Hz is not a positive number")]
    Frequency(f64),
    /// Quality out of range.
    #[error("its quality of {0} does not ring; it must be above 0.5")]
    Quality(f64),
    /// Peaks that do not fall.
    #[error("its peaks must be at least two, of one sign and falling from the first to the last")]
    Peaks,
}

/// Frequency and damping of the ring.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Burst {
    ring_hz: f64,
    decay_per_s: f64,
}

impl Burst {
    /// The ring of a tank of natural frequency f₀ in Hz and quality factor Q.
    ///
    /// # Errors
    /// If the frequency is not positive or Q is not above 1/2.
    pub fn new(natural_hz: f64, quality: f64) -> Result<Self, BurstError> {
        if !(quality > 0.5 && quality.is_finite()) {
            return Err(BurstError::Quality(quality));
        }
        Self::ringing(natural_hz * (1.0 - 0.25 / (quality * quality)).sqrt(), PI * natural_hz / quality)
    }

    /// A ring of a frequency in Hz that decays with a rate in 1/s.
    ///
    /// # Errors
    /// If either is not a positive number.
    pub fn ringing(ring_hz: f64, decay_per_s: f64) -> Result<Self, BurstError> {
        if !(ring_hz > 0.0 && ring_hz.is_finite()) {
            return Err(BurstError::Frequency(ring_hz));
        }
        if !(decay_per_s > 0.0 && decay_per_s.is_finite()) {
            return Err(BurstError::Quality(PI * ring_hz / decay_per_s));
        }
        Ok(Self { ring_hz, decay_per_s })
    }

    /// Ring frequency f₁, Hz.
    #[must_use]
    pub fn ring_hz(&self) -> f64 {
        self.ring_hz
    }

    /// Decay rate a, 1/s.
    #[must_use]
    pub fn decay_per_s(&self) -> f64 {
        self.decay_per_s
    }

    /// Quality factor Q = ½·√(1 + (2π/λ)²).
    #[must_use]
    pub fn quality(&self) -> f64 {
        0.5 * f64::hypot(1.0, TAU * self.ring_hz / self.decay_per_s)
    }

    /// Spectrum of V₀·e^(−at)·sin ω₁t at a frequency, V·s: V₀·ω₁/((a + jω)² + ω₁²).
    #[must_use]
    pub fn spectrum(&self, frequency_hz: f64, volts: f64) -> Complex {
        let ring = TAU * self.ring_hz;
        let s = Complex::new(self.decay_per_s, TAU * frequency_hz);
        volts * ring / (s * s + ring * ring)
    }

    /// Strength of the impulse that stands for the burst in the complex envelope at the tuned frequency, V·s: twice the modulus
    /// of the spectrum, V₀/a on tune. Times the impulse bandwidth of the channel it is the peak of the click in volts.
    #[must_use]
    pub fn strength(&self, tuned_hz: f64, volts: f64) -> f64 {
        2.0 * self.spectrum(tuned_hz, volts).norm()
    }
}

/// Logarithmic decrement of neighbouring peaks of the same sign: the slope of the least-squares line through their logarithms
/// against their number. None unless at least two are given, of one sign, and the line falls.
#[must_use]
pub fn decrement(peaks: &[f64]) -> Option<f64> {
    let sign = peaks.first()?.signum();
    if peaks.len() < 2 || peaks.iter().any(|peak| !(peak * sign > 0.0 && peak.is_finite())) {
        return None;
    }
    let middle = 0.5 * (peaks.len() - 1) as f64;
    let (mut products, mut squares) = (0.0, 0.0);
    for (k, peak) in peaks.iter().enumerate() {
        let x = k as f64 - middle;
        products += x * (peak * sign).ln();
        squares += x * x;
    }
    let decrement = -products / squares;
    (decrement > 0.0).then_some(decrement)
}
