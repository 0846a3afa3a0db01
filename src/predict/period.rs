//! Period, first firing and mean current of a setting, by the closed forms of the charging circuit.
//!
//! dv/dt = a − b·v while a supply charges the capacitor through a resistor (a = Vs/RC, b = 1/RC + 1/R_L·C with the
//! leakage R_L) or with a constant current (a = I/C, b = 1/R_L·C), so from v₀ to v₁ it takes ln((a − b·v₀)/(a −
//! b·v₁))/b, or (v₁ − v₀)/a without any decay (textbook circuit theory of the relaxation oscillator). A current limit
//! puts a piece of the second kind before one of the first. Units: V, s, Ω, F, A. Ripple, recovery and scatter are not
//! in it.

use crate::bench::{Bench, Quantity};

/// Values of the charging circuit; the stray capacitance of the gap is in the capacitance.
#[derive(Debug, Clone, Copy)]
pub(super) struct Parts {
    pub(super) capacitance_f: Option<f64>,
    pub(super) resistance_ohm: Option<f64>,
    pub(super) current_a: Option<f64>,
    pub(super) leakage_ohm: Option<f64>,
    time_constant_s: Option<f64>,
    limit_a: Option<f64>,
}

impl Parts {
    pub(super) fn of(bench: &Bench) -> Self {
        let value = |quantity: Option<Quantity>| quantity.map(|quantity| quantity.value);
        let charging = &bench.charging;
        let stated_f = value(charging.capacitance);
        let time_constant_s = value(charging.time_constant);
        let implied_ohm = time_constant_s.zip(stated_f).map(|(tau, c)| tau / c);
        Self {
            capacitance_f: stated_f.map(|c| c + value(bench.gap.stray_capacitance).unwrap_or(0.0)),
            resistance_ohm: value(charging.resistance).or(implied_ohm),
            current_a: value(charging.current),
            leakage_ohm: value(charging.leakage),
            time_constant_s,
            limit_a: value(bench.supply.current_limit),
        }
    }

    /// What the supply can push through the gap while it conducts, A.
    pub(super) fn short_circuit_a(&self, supply_v: f64) -> Option<f64> {
        self.current_a.or_else(|| {
            let free = supply_v / self.resistance_ohm?;
            Some(self.limit_a.map_or(free, |limit| free.min(limit)))
        })
    }
}

/// dv/dt = `rise` − `decay`·v.
#[derive(Debug, Clone, Copy)]
struct Segment {
    rise: f64,
    decay: f64,
}

impl Segment {
    fn reach_v(self) -> f64 {
        if self.decay > 0.0 { self.rise / self.decay } else { f64::INFINITY }
    }

    fn time_s(self, from_v: f64, to_v: f64) -> f64 {
        let driven = (to_v - from_v) / (self.rise - self.decay * to_v);
        // ln(1 + x)/b, which stays exact where b is small.
        if self.decay > 0.0 { (self.decay * driven).ln_1p() / self.decay } else { driven }
    }
}

/// The pieces of the charging curve.
struct Circuit {
    /// Up to the knee the supply is in current limit.
    limited: Option<(Segment, f64)>,
    free: Segment,
    /// No more than this, V.
    ceiling_v: f64,
}

impl Circuit {
    fn of(parts: &Parts, supply_v: f64) -> Option<Self> {
        let leak_per_s = |c: f64| parts.leakage_ohm.map_or(0.0, |leakage| 1.0 / (leakage * c));
        let ramp = |current: f64, c: f64| Segment { rise: current / c, decay: leak_per_s(c) };
        if let Some(current) = parts.current_a {
            let free = ramp(current, parts.capacitance_f?);
            return Some(Self { limited: None, free, ceiling_v: supply_v });
        }
        let (Some(r), Some(c)) = (parts.resistance_ohm, parts.capacitance_f) else {
            let tau = parts.time_constant_s?;
            let free = Segment { rise: supply_v / tau, decay: 1.0 / tau };
            return Some(Self { limited: None, free, ceiling_v: supply_v });
        };
        let free = Segment { rise: supply_v / (r * c), decay: 1.0 / (r * c) + leak_per_s(c) };
        let limited = parts.limit_a.map(|limit| (ramp(limit, c), supply_v - limit * r));
        Some(Self { limited, free, ceiling_v: supply_v })
    }

    fn reach_v(&self) -> f64 {
        let reach = match self.limited {
            Some((segment, knee)) if segment.reach_v() < knee => segment.reach_v(),
            _ => self.free.reach_v(),
        };
        reach.min(self.ceiling_v)
    }

    /// Times in current limit and without it, and the voltage between; none if `to_v` is not reached.
    fn times(&self, from_v: f64, to_v: f64) -> Option<(f64, f64, f64)> {
        if to_v >= self.reach_v() || to_v <= from_v {
            return None;
        }
        match self.limited {
            Some((segment, knee)) if knee > from_v => {
                let between = knee.min(to_v);
                let rest = if to_v > knee { self.free.time_s(between, to_v) } else { 0.0 };
                Some((segment.time_s(from_v, between), rest, between))
            }
            _ => Some((0.0, self.free.time_s(from_v, to_v), from_v)),
        }
    }
}

fn residual_v(bench: &Bench) -> f64 {
    bench.gap.residual_voltage.map_or(0.0, |residual| residual.value)
}

fn conduction_s(bench: &Bench) -> f64 {
    bench.gap.conduction_time.map_or(0.0, |time| time.value)
}

/// Time from one firing to the next, s; none if the gap does not fire or the bench lacks a part.
pub(super) fn period(bench: &Bench, supply_v: f64, gap_v: f64) -> Option<f64> {
    let circuit = Circuit::of(&Parts::of(bench), supply_v)?;
    let (limited_s, free_s, _) = circuit.times(residual_v(bench), gap_v)?;
    Some(conduction_s(bench) + limited_s + free_s)
}

/// Time from switching on with an empty capacitor to the first firing, s.
pub(super) fn first_firing(bench: &Bench, supply_v: f64, gap_v: f64) -> Option<f64> {
    let (limited_s, free_s, _) = Circuit::of(&Parts::of(bench), supply_v)?.times(0.0, gap_v)?;
    Some(limited_s + free_s)
}

/// Voltage that the capacitor would reach if the gap never fired, V.
pub(super) fn reach(bench: &Bench, supply_v: f64) -> Option<f64> {
    Circuit::of(&Parts::of(bench), supply_v).map(|circuit| circuit.reach_v())
}

/// Mean current out of the supply over a period, A: what charges the capacitor, what leaks, and what flows through the
/// gap while it conducts (its own voltage neglected).
pub(super) fn mean_current(bench: &Bench, supply_v: f64, gap_v: f64) -> Option<f64> {
    let parts = Parts::of(bench);
    if let Some(current) = parts.current_a {
        return Some(current);
    }
    let circuit = Circuit::of(&parts, supply_v)?;
    let r = parts.resistance_ohm?;
    let (limited_s, free_s, between) = circuit.times(residual_v(bench), gap_v)?;
    // ∫v dt from dv/dt = a − b·v.
    let volt_seconds = (circuit.free.rise * free_s - (gap_v - between)) / circuit.free.decay;
    let free_c = if free_s > 0.0 { (supply_v * free_s - volt_seconds) / r } else { 0.0 };
    let limited_c = parts.limit_a.unwrap_or(0.0) * limited_s;
    let conducting_c = parts.short_circuit_a(supply_v).unwrap_or(0.0) * conduction_s(bench);
    Some((free_c + limited_c + conducting_c) / (limited_s + free_s + conduction_s(bench)))
}
