//! From the parts of a bench to a [`Circuit`].

use super::segment::Segment;
use super::{Circuit, Limit, MissingPart, Ripple};
use crate::bench::{Bench, Quantity};

/// The parts of a charging circuit in SI units; what is absent is `None` or zero.
///
/// Either `current_a` with `capacitance_f`, or `supply_v` with two of `resistance_ohm`, `capacitance_f` and
/// `time_constant_s`, or `supply_v` with `time_constant_s` alone. A stated time constant is that of the circuit as it
/// stands: the gap's stray capacitance is in it already and is not added again.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Parts {
    /// Open-circuit voltage of the supply, V.
    pub supply_v: Option<f64>,
    /// Charging resistance, Ω.
    pub resistance_ohm: Option<f64>,
    /// Current of a constant-current supply, A. Its voltage is then only the ceiling.
    pub current_a: Option<f64>,
    /// Time constant R·C without leakage, s.
    pub time_constant_s: Option<f64>,
    /// Capacitance, F.
    pub capacitance_f: Option<f64>,
    /// Resistance across the capacitor, Ω.
    pub leakage_ohm: Option<f64>,
    /// Greatest current of the supply, A.
    pub current_limit_a: Option<f64>,
    /// Capacitance of the gap, F; added to the capacitance.
    pub stray_f: f64,
    /// Voltage left on the capacitor after a spark, V, either sign.
    pub residual_v: f64,
    /// Time for which the gap conducts, s.
    pub conduction_s: f64,
    /// Ripple of the supply voltage.
    pub ripple: Option<Ripple>,
}

const CHARGING_KEYS: &str = "charging.resistance and charging.capacitance, or charging.time_constant";

fn missing(key: &'static str, purpose: &'static str) -> MissingPart {
    MissingPart { key, purpose }
}

impl Parts {
    /// The parts that a bench states. `supply` stands in for `supply.voltage`.
    ///
    /// # Errors
    /// [`MissingPart`] if a ripple is stated without its frequency.
    pub fn from_bench(bench: &Bench, supply: Option<Quantity>) -> Result<Self, MissingPart> {
        let value = |quantity: Option<Quantity>| quantity.map(|q| q.value);
        let ripple = match (bench.supply.ripple, bench.supply.ripple_frequency) {
            (Some(fraction), _) if fraction.value == 0.0 => None,
            (Some(fraction), Some(frequency)) => {
                Some(Ripple { fraction: fraction.value, frequency_hz: frequency.value, phase_rad: 0.0 })
            }
            (Some(_), None) => return Err(missing("supply.ripple_frequency", "a ripple needs its frequency")),
            (None, _) => None,
        };
        Ok(Self {
            supply_v: value(supply.or(bench.supply.voltage)),
            resistance_ohm: value(bench.charging.resistance),
            current_a: value(bench.charging.current),
            time_constant_s: value(bench.charging.time_constant),
            capacitance_f: value(bench.charging.capacitance),
            leakage_ohm: value(bench.charging.leakage),
            current_limit_a: value(bench.supply.current_limit),
            stray_f: value(bench.gap.stray_capacitance).unwrap_or(0.0),
            residual_v: value(bench.gap.residual_voltage).unwrap_or(0.0),
            conduction_s: value(bench.gap.conduction_time).unwrap_or(0.0),
            ripple,
        })
    }

    /// Time constant R·C and, where it is known, the resistance.
    fn time_constant(&self) -> Result<(f64, Option<f64>), MissingPart> {
        match (self.time_constant_s, self.resistance_ohm, self.capacitance_f) {
            (Some(rc), Some(r), _) => Ok((rc, Some(r))),
            (Some(rc), None, c) => Ok((rc, c.map(|c| rc / c))),
            (None, Some(r), Some(c)) => Ok((r * (c + self.stray_f), Some(r))),
            (None, None, None) => Err(missing(CHARGING_KEYS, "they set how fast the capacitor charges")),
            (None, None, Some(_)) => {
                Err(missing("charging.resistance or charging.current", "it sets how fast the capacitor charges"))
            }
            (None, Some(_), None) => Err(missing("charging.capacitance", "it sets how fast the capacitor charges")),
        }
    }

    fn current_circuit(&self, current_a: f64) -> Result<Circuit, MissingPart> {
        let capacitance = match (self.capacitance_f, self.time_constant_s, self.resistance_ohm) {
            (Some(c), _, _) => c + self.stray_f,
            (None, Some(rc), Some(r)) => rc / r,
            _ => return Err(missing("charging.capacitance", "the charging current needs it")),
        };
        let current = self.current_limit_a.map_or(current_a, |limit| current_a.min(limit));
        let charge = Segment {
            slew_v_per_s: current / capacitance,
            decay_per_s: self.leakage_ohm.map_or(0.0, |leakage| 1.0 / (leakage * capacitance)),
        };
        // The ripple of a supply that regulates its current does not reach the capacitor.
        Ok(Circuit { charge, limit: None, ceiling_v: self.supply_v, ..self.frame(charge) })
    }

    fn resistor_circuit(&self) -> Result<Circuit, MissingPart> {
        let (rc, resistance) = self.time_constant()?;
        let supply_v = self.supply_v.ok_or(missing("supply.voltage", "the capacitor charges towards it"))?;
        let need_resistance = |purpose| {
            resistance.ok_or(missing("charging.resistance or charging.capacitance beside the time constant", purpose))
        };
        let load = match self.leakage_ohm {
            Some(leakage) => need_resistance("the leakage divides the supply voltage with it")? / leakage,
            None => 0.0,
        };
        let charge = Segment { slew_v_per_s: supply_v / rc, decay_per_s: (1.0 + load) / rc };
        let limit = match self.current_limit_a {
            Some(limit_a) => {
                let drop_v = limit_a * need_resistance("the current limit acts through it")?;
                let segment = Segment { slew_v_per_s: drop_v / rc, decay_per_s: load / rc };
                Some(Limit { segment, supply_v, drop_v })
            }
            None => None,
        };
        Ok(Circuit { limit, ripple: self.ripple, ..self.frame(charge) })
    }

    fn frame(&self, charge: Segment) -> Circuit {
        Circuit {
            charge,
            limit: None,
            ceiling_v: None,
            residual_v: self.residual_v,
            conduction_s: self.conduction_s,
            ripple: None,
        }
    }

    /// The circuit of these parts.
    ///
    /// # Errors
    /// [`MissingPart`] names what is missing.
    pub fn circuit(&self) -> Result<Circuit, MissingPart> {
        match self.current_a {
            Some(current_a) => self.current_circuit(current_a),
            None => self.resistor_circuit(),
        }
    }
}
