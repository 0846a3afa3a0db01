//! Ripple of the supply.

/// A sine on the supply voltage: V(t) = V·(1 + fraction·sin(2π·frequency·t + phase)).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Ripple {
    /// Peak, as a fraction of the supply voltage.
    pub fraction: f64,
    /// Frequency, Hz.
    pub frequency_hz: f64,
    /// Phase at time zero, rad.
    pub phase_rad: f64,
}

impl Ripple {
    /// Phase at a time, rad. Whole turns are taken off first, so that long times keep their precision.
    #[must_use]
    pub fn phase_at(&self, time_s: f64) -> f64 {
        std::f64::consts::TAU * (self.frequency_hz * time_s).fract() + self.phase_rad
    }

    /// Supply voltage at a time over its mean.
    #[must_use]
    pub fn factor_at(&self, time_s: f64) -> f64 {
        1.0 + self.fraction * self.phase_at(time_s).sin()
    }
}
