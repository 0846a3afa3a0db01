//! The exact instant of breakdown where no closed form exists: ripple on the supply, and a gap that is still recovering.
//!
//! Time goes in steps short against the ripple and the recovery. Within a step the voltage is an exact solution of the
//! linear equation; the step only serves to bracket the first crossing and the change between current limit and resistor.

use super::segment::Segment;
use super::{Circuit, NoFiring};
use crate::model::root::bracketed;

/// Steps in one ripple period.
const STEPS_PER_RIPPLE: f64 = 32.0;
/// Steps in one recovery time constant.
const STEPS_PER_RECOVERY: f64 = 16.0;
/// Time constants after which a recovery or a charging transient is over: e⁻⁴⁰ is below the resolution of a number.
const SETTLED: f64 = 40.0;

/// What the gap withstands, `t` seconds after it stopped conducting: settled·(1 − depth·exp(−t/recovery)).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Strength {
    /// Breakdown voltage of the recovered gap, V.
    pub settled_v: f64,
    /// Share that is lacking right after a spark, 0..1.
    pub depth: f64,
    /// Time constant of recovery, s; 0 for a gap that recovers at once.
    pub recovery_s: f64,
}

impl Strength {
    /// A gap that withstands `settled_v` at once.
    #[must_use]
    pub fn settled(settled_v: f64) -> Self {
        Self { settled_v, depth: 0.0, recovery_s: 0.0 }
    }

    fn recovers(&self) -> bool {
        self.depth > 0.0 && self.recovery_s > 0.0
    }

    /// Breakdown voltage after `t` seconds, V.
    #[must_use]
    pub fn at(&self, t: f64) -> f64 {
        if self.recovers() {
            self.settled_v * (1.0 - self.depth * (-t / self.recovery_s).exp())
        } else {
            self.settled_v
        }
    }

    fn slope(&self, t: f64) -> f64 {
        if self.recovers() { self.settled_v * self.depth / self.recovery_s * (-t / self.recovery_s).exp() } else { 0.0 }
    }
}

/// One stretch under one law: from `v` at `from_s` of charging time.
#[derive(Clone, Copy)]
struct Stretch<'a> {
    circuit: &'a Circuit,
    segment: Segment,
    rippled: bool,
    start_s: f64,
    v: f64,
    from_s: f64,
}

impl Stretch<'_> {
    fn voltage(&self, t: f64) -> f64 {
        let dt = t - self.from_s;
        match self.circuit.ripple {
            Some(ripple) if self.rippled => self.segment.after_with(&ripple, self.v, self.start_s + self.from_s, dt),
            _ => self.segment.after(self.v, dt),
        }
    }

    fn rate(&self, t: f64) -> f64 {
        let v = self.voltage(t);
        match self.circuit.ripple {
            Some(ripple) if self.rippled => self.segment.rate_with(&ripple, v, self.start_s + t),
            _ => self.segment.rate(v),
        }
    }

    /// First instant up to `end` at which the voltage reaches the strength.
    fn crossing(&self, strength: &Strength, end: f64) -> Option<f64> {
        let excess = |t: f64| self.voltage(t) - strength.at(t);
        let growth = |t: f64| self.rate(t) - strength.slope(t);
        if excess(self.from_s) >= 0.0 {
            return Some(self.from_s);
        }
        if excess(end) >= 0.0 {
            return Some(bracketed(self.from_s, end, excess));
        }
        // A crest inside the step may still touch the strength.
        if growth(self.from_s) > 0.0 && growth(end) < 0.0 {
            let crest = bracketed(self.from_s, end, growth);
            if excess(crest) >= 0.0 {
                return Some(bracketed(self.from_s, crest, excess));
            }
        }
        None
    }
}

impl Circuit {
    fn stretch(&self, v: f64, start_s: f64, from_s: f64) -> Stretch<'_> {
        let limited = self.limit_margin(v, start_s + from_s) > 0.0;
        let segment = match self.limit {
            Some(limit) if limited => limit.segment,
            _ => self.charge,
        };
        Stretch { circuit: self, segment, rippled: !limited, start_s, v, from_s }
    }

    /// How far the voltage is below the knee of the current limit, V; negative without a limit.
    fn limit_margin(&self, v: f64, time_s: f64) -> f64 {
        let Some(limit) = self.limit else { return -1.0 };
        let factor = self.ripple.map_or(1.0, |ripple| ripple.factor_at(time_s));
        limit.supply_v * factor - limit.drop_v - v
    }

    /// Shortens a step so that it ends where the current limit comes or goes.
    fn step_end(&self, stretch: &Stretch, end: f64) -> f64 {
        if self.limit.is_none() {
            return end;
        }
        let margin = |t: f64| self.limit_margin(stretch.voltage(t), stretch.start_s + t);
        if (margin(stretch.from_s) > 0.0) == (margin(end) > 0.0) {
            return end;
        }
        let knee = bracketed(stretch.from_s, end, margin);
        // At least a sliver of the step, or the walk would stand still on the knee.
        knee.max(stretch.from_s + 1e-9 * (end - stretch.from_s))
    }

    /// Charging time from `v0` to the breakdown of a gap of the given strength, s. Charging starts at `start_s`, which
    /// sets the phase of the ripple; the gap stopped conducting at the same instant.
    ///
    /// # Errors
    /// [`NoFiring`] if the capacitor never gets there. A capacitor that stands above the strength already gives 0.
    pub fn time_to_breakdown_s(&self, v0: f64, start_s: f64, strength: &Strength) -> Result<f64, NoFiring> {
        if v0 >= strength.at(0.0) {
            return Ok(0.0);
        }
        let reach_v = self.crest_v();
        let beyond = NoFiring::OutOfReach { gap_v: strength.settled_v, reach_v };
        if strength.settled_v >= reach_v && !strength.recovers() {
            return Err(beyond);
        }
        if self.ripple.is_none() && !strength.recovers() {
            return self.charging_time(v0, strength.settled_v).ok_or(beyond);
        }
        let crossing = self.walk(v0, start_s, strength);
        // A current source stops at its ceiling; a gap that it has not fired on the way up only grows stronger.
        let allowed = |t: &f64| self.ceiling_v.is_none_or(|ceiling| strength.at(*t) < ceiling);
        crossing.filter(allowed).ok_or(beyond)
    }

    /// Charging time after which the capacitor can no longer rise.
    fn horizon_s(&self, v0: f64, settled_v: f64) -> f64 {
        let limited = self
            .limit
            .map_or(0.0, |limit| limit.segment.time(v0, settled_v).unwrap_or(SETTLED / limit.segment.decay_per_s));
        let periods = self.ripple.map_or(0.0, |ripple| 2.0 / ripple.frequency_hz);
        limited + SETTLED / self.charge.decay_per_s + periods
    }

    /// Charging time during which the voltage cannot reach the strength: the ripple moves it by at most twice its settled
    /// swing from where it would be without. Spares the walk most of a long charge.
    fn quiet_s(&self, v0: f64, strength: &Strength) -> f64 {
        let Some(ripple) = self.ripple.filter(|_| self.limit.is_none() && !strength.recovers()) else { return 0.0 };
        let below_v = strength.settled_v - 2.0 * self.charge.swing_v(&ripple);
        if below_v <= v0 { 0.0 } else { self.charge.time(v0, below_v).unwrap_or(0.0) }
    }

    fn walk(&self, v0: f64, start_s: f64, strength: &Strength) -> Option<f64> {
        let recovered_s = if strength.recovers() { SETTLED * strength.recovery_s } else { 0.0 };
        let ripple_step = self.ripple.map(|ripple| 1.0 / (STEPS_PER_RIPPLE * ripple.frequency_hz));
        let horizon = recovered_s + self.horizon_s(v0, strength.settled_v);
        let mut t = self.quiet_s(v0, strength);
        let mut v = self.stretch(v0, start_s, 0.0).voltage(t);
        while t <= horizon {
            let mut step = ripple_step.unwrap_or(f64::INFINITY);
            if t < recovered_s {
                step = step.min(strength.recovery_s / STEPS_PER_RECOVERY);
            } else if ripple_step.is_none() {
                return self.charging_time(v, strength.settled_v).map(|rest| t + rest);
            }
            let stretch = self.stretch(v, start_s, t);
            let end = self.step_end(&stretch, t + step);
            if let Some(crossing) = stretch.crossing(strength, end) {
                return Some(crossing);
            }
            if end <= t {
                return None;
            }
            v = stretch.voltage(end);
            t = end;
        }
        None
    }

    /// Voltage `t` seconds after charging started at `start_s` from `v0`, V.
    #[must_use]
    pub fn voltage_after(&self, v0: f64, start_s: f64, t: f64) -> f64 {
        let Some(ripple) = self.ripple else { return self.charged(v0, t) };
        if self.limit.is_none() {
            return self.charge.after_with(&ripple, v0, start_s, t);
        }
        let step = 1.0 / (STEPS_PER_RIPPLE * ripple.frequency_hz);
        let mut v = v0;
        let mut now = 0.0;
        while now < t {
            let stretch = self.stretch(v, start_s, now);
            let end = self.step_end(&stretch, (now + step).min(t));
            v = stretch.voltage(end);
            if end <= now {
                break;
            }
            now = end;
        }
        v
    }
}
