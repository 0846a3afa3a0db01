//! The charging law, in both directions: from the gap voltage to the period and from the period to the gap voltage.
//!
//! A supply charges a capacitor through a resistor (or with a constant current, or with a current limit and then
//! through a resistor) from the residual voltage Vr. With V∞ and τ of the Thevenin source of supply, resistor and
//! leakage, v(t) = V∞ − (V∞ − Vr)·exp(−t/τ); the gap breaks down at Vb and the period is
//!
//! T = t_c + τ·ln((V∞ − Vr)/(V∞ − Vb)), t_c the time for which the gap conducts,
//!
//! or t_c + C·(Vb − Vr)/I with a constant current (textbook circuit theory of the relaxation oscillator). It does not fire
//! when Vb ≥ V∞. The rate of rise at breakdown, dv/dt, is the slope dVb/dT of the inverse, so no numerical derivative is
//! needed.
//!
//! Units: V, s, Ω, F, A, Hz. Assumes that the discharge is short against the period and that the residual voltage is the
//! same after every spark.

mod crossing;
mod error;
mod parts;
mod ripple;
mod segment;

pub use crossing::Strength;
pub use error::{MissingPart, NoFiring, NoVoltage};
pub use parts::Parts;
pub use ripple::Ripple;

use crate::bench::{Bench, Quantity};
use segment::Segment;

/// Time constants beyond which a period is not inverted. The voltage then stands within e⁻¹² = 6e-6 of its final value;
/// no supply is steady enough for a gap to fire there by a rhythm.
pub const LONGEST_PERIOD_TIME_CONSTANTS: f64 = 12.0;

/// The part of the charging during which the supply is in current limit.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Limit {
    segment: Segment,
    supply_v: f64,
    /// Voltage across the charging resistor at the limit, V.
    drop_v: f64,
}

impl Limit {
    /// Capacitor voltage at which the limit ends, V.
    fn knee_v(&self) -> f64 {
        self.supply_v - self.drop_v
    }
}

/// A charging circuit with a gap across its capacitor.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Circuit {
    charge: Segment,
    limit: Option<Limit>,
    /// Voltage of a current source's supply, V.
    ceiling_v: Option<f64>,
    residual_v: f64,
    conduction_s: f64,
    ripple: Option<Ripple>,
}

impl Circuit {
    /// The circuit of a bench. `supply` stands in for `supply.voltage`.
    ///
    /// Needs `charging.current` with `charging.capacitance`, or `supply.voltage` with two of `charging.resistance`,
    /// `charging.capacitance` and `charging.time_constant` or with the last alone; takes `charging.leakage`,
    /// `supply.current_limit`, `supply.ripple`, `supply.ripple_frequency`, `gap.residual_voltage`,
    /// `gap.conduction_time` and `gap.stray_capacitance` where they are given.
    ///
    /// # Errors
    /// [`MissingPart`] names the keys that are needed.
    pub fn from_bench(bench: &Bench, supply: Option<Quantity>) -> Result<Self, MissingPart> {
        Parts::from_bench(bench, supply)?.circuit()
    }

    /// Voltage left on the capacitor after a spark, V.
    #[must_use]
    pub fn residual_v(&self) -> f64 {
        self.residual_v
    }

    /// Time for which the gap conducts, s.
    #[must_use]
    pub fn conduction_s(&self) -> f64 {
        self.conduction_s
    }

    /// Ripple of the supply, if it reaches the capacitor.
    #[must_use]
    pub fn ripple(&self) -> Option<Ripple> {
        self.ripple
    }

    /// The same circuit with another ripple, or with none.
    #[must_use]
    pub fn with_ripple(self, ripple: Option<Ripple>) -> Self {
        Self { ripple, ..self }
    }

    /// The same circuit with a longer pause between two charges, s: a lag between threshold and breakdown counts like the
    /// time for which the gap conducts, for in neither does the capacitor charge towards the next firing.
    #[must_use]
    pub fn with_pause(self, more_s: f64) -> Self {
        Self { conduction_s: self.conduction_s + more_s, ..self }
    }

    /// Time constant of the charging with leakage, s; infinite for a pure ramp.
    #[must_use]
    pub fn time_constant_s(&self) -> f64 {
        1.0 / self.charge.decay_per_s
    }

    /// Voltage up to which the supply is in current limit, V.
    #[must_use]
    pub fn knee_v(&self) -> Option<f64> {
        self.limit.map(|limit| limit.knee_v())
    }

    /// Highest voltage of the capacitor without ripple, V; infinite for an ideal current source.
    #[must_use]
    pub fn reach_v(&self) -> f64 {
        let free = match self.limit {
            Some(limit) if limit.segment.reach_v() < limit.knee_v() => limit.segment.reach_v(),
            _ => self.charge.reach_v(),
        };
        self.ceiling_v.map_or(free, |ceiling| free.min(ceiling))
    }

    /// Highest voltage of the capacitor with ripple, V.
    #[must_use]
    pub fn crest_v(&self) -> f64 {
        self.reach_v() + self.ripple.map_or(0.0, |ripple| self.charge.swing_v(&ripple))
    }

    /// The segment that acts at `v`, without ripple.
    fn segment_at(&self, v: f64) -> Segment {
        match self.limit {
            Some(limit) if v < limit.knee_v() => limit.segment,
            _ => self.charge,
        }
    }

    /// Rate of rise of the capacitor voltage at `v`, V/s: also dVb/dT of the inverse law.
    #[must_use]
    pub fn slope_v_per_s(&self, v: f64) -> f64 {
        self.segment_at(v).rate(v)
    }

    /// Second derivative of the voltage with time at `v`, V/s²: also d²Vb/dT² of the inverse law.
    #[must_use]
    pub fn curvature_v_per_s2(&self, v: f64) -> f64 {
        let segment = self.segment_at(v);
        -segment.decay_per_s * segment.rate(v)
    }

    /// Voltage after `t` seconds from `v0`, without ripple.
    fn charged(&self, v0: f64, t: f64) -> f64 {
        let free = match self.limit {
            Some(limit) if v0 < limit.knee_v() => match limit.segment.time(v0, limit.knee_v()) {
                Some(knee_s) if knee_s < t => self.charge.after(limit.knee_v(), t - knee_s),
                _ => limit.segment.after(v0, t),
            },
            _ => self.charge.after(v0, t),
        };
        self.ceiling_v.map_or(free, |ceiling| free.min(ceiling.max(v0)))
    }

    /// Time from `v0` to `v`, s, without ripple; none if it does not get there.
    fn charging_time(&self, v0: f64, v: f64) -> Option<f64> {
        if self.ceiling_v.is_some_and(|ceiling| v >= ceiling) {
            return None;
        }
        match self.limit {
            Some(limit) if v0 < limit.knee_v() => {
                let limited = limit.segment.time(v0, v.min(limit.knee_v()))?;
                if v <= limit.knee_v() { Some(limited) } else { Some(limited + self.charge.time(limit.knee_v(), v)?) }
            }
            _ => self.charge.time(v0, v),
        }
    }

    /// Period of a gap that breaks down at `gap_v`, s; ripple left out.
    ///
    /// # Errors
    /// [`NoFiring`] if the capacitor does not reach `gap_v`, or already stands above it after a spark.
    pub fn period_s(&self, gap_v: f64) -> Result<f64, NoFiring> {
        let residual_v = self.residual_v;
        if gap_v <= residual_v {
            return Err(NoFiring::BelowResidual { gap_v, residual_v });
        }
        let time = self.charging_time(residual_v, gap_v).filter(|time| time.is_finite());
        time.map(|time| self.conduction_s + time).ok_or(NoFiring::OutOfReach { gap_v, reach_v: self.reach_v() })
    }

    /// Time from switching on (capacitor at 0 V) to the first firing, s; ripple left out.
    ///
    /// # Errors
    /// [`NoFiring`] if the capacitor does not reach `gap_v`.
    pub fn first_firing_s(&self, gap_v: f64) -> Result<f64, NoFiring> {
        let time = self.charging_time(0.0, gap_v).filter(|time| time.is_finite());
        time.ok_or(NoFiring::OutOfReach { gap_v, reach_v: self.reach_v() })
    }

    /// Gap voltage that a period implies, V: the inverse of [`Self::period_s`]; ripple left out.
    ///
    /// # Errors
    /// [`NoVoltage`] if no gap voltage gives that period.
    pub fn gap_voltage_v(&self, period_s: f64) -> Result<f64, NoVoltage> {
        let t = period_s - self.conduction_s;
        if t.is_nan() || t <= 0.0 {
            return Err(NoVoltage::TooShort { period_s, conduction_s: self.conduction_s });
        }
        let residual_v = self.residual_v;
        if self.slope_v_per_s(residual_v) <= 0.0 {
            return Err(NoVoltage::DoesNotCharge { residual_v, reach_v: self.reach_v() });
        }
        let open = Self { ceiling_v: None, ..*self };
        let voltage_v = open.charged(residual_v, t);
        // Time since the knee counts, because before it the voltage is far from its end.
        let left = open.slope_v_per_s(voltage_v) / open.slope_v_per_s(residual_v);
        if left.is_nan() || left <= (-LONGEST_PERIOD_TIME_CONSTANTS).exp() {
            return Err(NoVoltage::TooLong { period_s, time_constants: period_s / self.time_constant_s() });
        }
        match self.ceiling_v {
            Some(ceiling_v) if voltage_v >= ceiling_v => Err(NoVoltage::AboveSupply { period_s, voltage_v, ceiling_v }),
            _ => Ok(voltage_v),
        }
    }

    /// Amplitude, over all phases of the ripple, of the voltage reached after a fixed period, V.
    ///
    /// The settled sine A at the end less what of it is left of the start: |A·(exp(iωt) − exp(−t/τ))|.
    #[must_use]
    pub fn ripple_swing_v(&self, period_s: f64) -> f64 {
        let Some(ripple) = self.ripple else { return 0.0 };
        let t = (period_s - self.conduction_s).max(0.0);
        let angle = std::f64::consts::TAU * (ripple.frequency_hz * t).fract();
        let start = (-self.charge.decay_per_s * t).exp();
        self.charge.swing_v(&ripple) * (angle.cos() - start).hypot(angle.sin())
    }
}
