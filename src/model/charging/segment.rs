//! One stretch of charging with a constant law: dv/dt = slew − decay·v.

use super::Ripple;

/// A linear stretch of charging. A resistor gives `slew = V/(RC)` and `decay = 1/(RC)`; a current gives `slew = I/C` and
/// a decay only through leakage.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Segment {
    /// Rate of rise at 0 V, V/s.
    pub slew_v_per_s: f64,
    /// Reciprocal time constant, 1/s.
    pub decay_per_s: f64,
}

impl Segment {
    /// Rate of rise at `v`, V/s.
    pub fn rate(&self, v: f64) -> f64 {
        self.slew_v_per_s - self.decay_per_s * v
    }

    /// Voltage that it tends to, V; infinite for a ramp.
    pub fn reach_v(&self) -> f64 {
        if self.decay_per_s > 0.0 { self.slew_v_per_s / self.decay_per_s } else { f64::INFINITY }
    }

    /// Voltage after `t` seconds from `v0`. Written with expm1, so that a weak leakage passes over into a ramp.
    pub fn after(&self, v0: f64, t: f64) -> f64 {
        let x = self.decay_per_s * t;
        let mean_share = if x < 1e-12 { 1.0 } else { -(-x).exp_m1() / x };
        v0 + self.rate(v0) * t * mean_share
    }

    /// Time from `v0` up to `v`, s; none if it does not get there.
    pub fn time(&self, v0: f64, v: f64) -> Option<f64> {
        let rate = self.rate(v0);
        if v <= v0 {
            return (v == v0).then_some(0.0);
        }
        if rate <= 0.0 {
            return None;
        }
        let ramp = (v - v0) / rate;
        let x = self.decay_per_s * ramp;
        if x < 1e-12 {
            return Some(ramp * (1.0 + 0.5 * x));
        }
        (x < 1.0).then(|| -(-x).ln_1p() / self.decay_per_s)
    }

    /// Voltage after `t` seconds from `v0` with a ripple on the source: the sum of the settled sine and a decaying
    /// transient, which is the exact solution of the linear equation.
    pub fn after_with(&self, ripple: &Ripple, v0: f64, start_s: f64, t: f64) -> f64 {
        let k = self.decay_per_s;
        let omega = std::f64::consts::TAU * ripple.frequency_hz;
        // A·sin(φ − lag) with A·cos(lag) and A·sin(lag) in the place of amplitude and lag.
        let scale = self.slew_v_per_s * ripple.fraction / (k * k + omega * omega);
        let settled = |time_s: f64| {
            let (sine, cosine) = ripple.phase_at(time_s).sin_cos();
            scale * (k * sine - omega * cosine)
        };
        let transient = -settled(start_s) * (-k * t).exp();
        self.after(v0, t) + settled(start_s + t) + transient
    }

    /// Amplitude of the settled sine on the capacitor, V.
    pub fn swing_v(&self, ripple: &Ripple) -> f64 {
        let omega = std::f64::consts::TAU * ripple.frequency_hz;
        self.slew_v_per_s * ripple.fraction / self.decay_per_s.hypot(omega)
    }

    /// Rate of rise at `v` and time `time_s` with a ripple on the source, V/s.
    pub fn rate_with(&self, ripple: &Ripple, v: f64, time_s: f64) -> f64 {
        self.slew_v_per_s * ripple.factor_at(time_s) - self.decay_per_s * v
    }
}
