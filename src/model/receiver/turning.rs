//! A sine without a sine in each step: a unit vector that turns by the same angle.

use super::Complex;
use std::f64::consts::TAU;

/// A unit vector that turns by the same angle in each step.
#[derive(Debug, Clone)]
pub(super) struct Turning {
    now: Complex,
    turn: Complex,
}

impl Turning {
    /// From a unit vector on, at a frequency in Hz, stepped by `step_s`.
    pub(super) fn new(start: Complex, frequency_hz: f64, step_s: f64) -> Self {
        Self { now: start, turn: Complex::from_polar(1.0, TAU * frequency_hz * step_s) }
    }

    /// The vector of this step.
    #[inline]
    pub(super) fn next(&mut self) -> Complex {
        let now = self.now;
        let next = now * self.turn;
        // One Newton step of the reciprocal root keeps the length at 1.
        self.now = next * (1.5 - 0.5 * next.norm_sqr());
        now
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_minute_of_turning_stays_on_the_sine() {
        let (rate_hz, frequency_hz) = (48_000.0, 50.0);
        let mut turning = Turning::new(Complex::from(1.0), frequency_hz, 1.0 / rate_hz);
        for k in 0..2_880_000u32 {
            let at = turning.next();
            if k % 1000 == 0 {
                let exact = Complex::from_polar(1.0, TAU * (f64::from(k) * frequency_hz / rate_hz).fract());
                assert!((at - exact).norm() < 1e-9, "{k}: {at} {exact}");
            }
        }
    }
}
