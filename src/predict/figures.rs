//! Plain figures of a setting from the charging law: period, first firing, reach, mean current and losses.
//!
//! Each is a function of the bench, the supply voltage and the gap voltage, so that one routine can propagate the
//! tolerances of every input through all of them. Units: V, s, A, W. Ripple and scatter are not in them.

use crate::bench::Bench;
use crate::model::charging::{Circuit, MissingPart, Parts, Strength};
use crate::model::firings::GapLaw;

/// A figure of a bench at a supply voltage (none for a current source without a stated voltage) and a gap voltage; none
/// if there is none (no firing).
pub(super) type Figure = fn(&Bench, Option<f64>, f64) -> Option<f64>;

/// The charging circuit with the parts that it is made of.
#[derive(Debug, Clone, Copy)]
pub(super) struct Charging {
    pub(super) parts: Parts,
    pub(super) circuit: Circuit,
}

/// The parts of a bench as far as they can be used: with a time constant alone neither leakage nor current limit can
/// act, and a ripple without a frequency cannot either. Notes say so.
pub(super) fn parts(bench: &Bench, supply_v: Option<f64>) -> Parts {
    let mut parts = Parts::from_bench(bench, None).unwrap_or_else(|_| {
        let mut smooth = bench.clone();
        smooth.supply.ripple = None;
        // Without a ripple nothing is refused.
        Parts::from_bench(&smooth, None).unwrap_or_default()
    });
    parts.supply_v = supply_v;
    if parts.current_a.is_none() && parts.resistance_ohm.is_none() && parts.capacitance_f.is_none() {
        parts.leakage_ohm = None;
        parts.current_limit_a = None;
    }
    parts
}

/// The charging circuit of a bench.
pub(super) fn charging(bench: &Bench, supply_v: Option<f64>) -> Result<Charging, MissingPart> {
    let parts = parts(bench, supply_v);
    Ok(Charging { circuit: parts.circuit()?, parts })
}

fn circuit(bench: &Bench, supply_v: Option<f64>) -> Option<Circuit> {
    charging(bench, supply_v).ok().map(|charging| charging.circuit)
}

/// Capacitance with that of the gap, F.
pub(super) fn capacitance_f(parts: &Parts) -> Option<f64> {
    parts.capacitance_f.map(|c| c + parts.stray_f)
}

/// Charging resistance, stated or from the time constant, Ω.
pub(super) fn resistance_ohm(parts: &Parts) -> Option<f64> {
    parts.resistance_ohm.or_else(|| Some(parts.time_constant_s? / parts.capacitance_f?))
}

/// What the supply can push through the gap while it conducts, A.
pub(super) fn short_circuit_a(parts: &Parts) -> Option<f64> {
    let free = parts.current_a.or_else(|| Some(parts.supply_v? / resistance_ohm(parts)?))?;
    Some(parts.current_limit_a.map_or(free, |limit| free.min(limit)))
}

/// Mean time from one firing to the next, s: with the recovery of the gap and the mean statistical lag.
pub(super) fn period(bench: &Bench, supply_v: Option<f64>, gap_v: f64) -> Option<f64> {
    let circuit = circuit(bench, supply_v)?;
    let law = GapLaw::from_bench(bench, gap_v);
    let to_threshold = match law.recovery {
        None => circuit.period_s(gap_v).ok()?,
        Some(_) => {
            let residual_v = circuit.residual_v();
            let strength = law.strength(gap_v, residual_v);
            let charging = circuit.with_ripple(None).time_to_breakdown_s(residual_v, 0.0, &strength).ok()?;
            if charging == 0.0 {
                return None;
            }
            circuit.conduction_s() + charging
        }
    };
    Some(to_threshold + law.statistical_lag_s)
}

/// Time from switching on with an empty capacitor to the first firing, s.
pub(super) fn first_firing(bench: &Bench, supply_v: Option<f64>, gap_v: f64) -> Option<f64> {
    let circuit = circuit(bench, supply_v)?;
    // No first firing is stated for a gap that could not go on.
    circuit.period_s(gap_v).ok()?;
    let lag_s = bench.gap.statistical_lag.map_or(0.0, |lag| lag.value);
    circuit.first_firing_s(gap_v).ok().map(|time| time + lag_s)
}

/// Means over one period.
#[derive(Debug, Clone, Copy)]
pub(super) struct Means {
    /// Current out of the supply, A.
    pub(super) supply_a: f64,
    /// Power in the charging resistor, W; none where there is none.
    pub(super) resistor_w: Option<f64>,
}

/// Half steps of the quadrature over one stretch of charging: the current is a smooth exponential of at most some ten
/// time constants, which this resolves to 1e-5.
const STEPS: usize = 64;

/// Mean current and losses over a period: what charges the capacitor, what leaks, and what flows through the gap while it
/// conducts (its own voltage neglected).
pub(super) fn means(charging: &Charging, gap_v: f64) -> Option<Means> {
    let Charging { parts, circuit } = charging;
    let smooth = circuit.with_ripple(None);
    let period_s = smooth.period_s(gap_v).ok()?;
    if parts.current_a.is_some() {
        return short_circuit_a(parts).map(|supply_a| Means { supply_a, resistor_w: None });
    }
    let (supply_v, r) = (parts.supply_v?, resistance_ohm(parts)?);
    let limit = parts.current_limit_a.unwrap_or(f64::INFINITY);
    let current = |t: f64| ((supply_v - smooth.voltage_after(smooth.residual_v(), 0.0, t)) / r).min(limit);
    let charge_s = period_s - smooth.conduction_s();
    let knee_s = smooth
        .knee_v()
        .filter(|knee| (smooth.residual_v()..gap_v).contains(knee))
        .and_then(|knee| smooth.time_to_breakdown_s(smooth.residual_v(), 0.0, &Strength::settled(knee)).ok())
        .unwrap_or(0.0);
    let over = |f: &dyn Fn(f64) -> f64| simpson(0.0, knee_s, f) + simpson(knee_s, charge_s, f);
    let shorted = (supply_v / r).min(limit);
    let conducting = smooth.conduction_s();
    let charge_c = over(&current) + shorted * conducting;
    let loss_j = r * (over(&|t| current(t).powi(2)) + shorted * shorted * conducting);
    Some(Means { supply_a: charge_c / period_s, resistor_w: Some(loss_j / period_s) })
}

/// Simpson's rule.
fn simpson(from: f64, to: f64, f: &dyn Fn(f64) -> f64) -> f64 {
    if to <= from {
        return 0.0;
    }
    let step = (to - from) / STEPS as f64;
    let inner: f64 = (1..STEPS).map(|k| f(from + step * k as f64) * if k % 2 == 1 { 4.0 } else { 2.0 }).sum();
    (f(from) + inner + f(to)) * step / 3.0
}

/// Mean period of a gap that scatters, s: the charging law is curved, so that the mean of the periods lies above the period
/// of the mean voltage by half of d²T/dVb² times the variance. Near the edge of firing, where the scattered voltages are out
/// of reach, no more of the spread counts than half of what is left to the reach.
pub(super) fn mean_period(bench: &Bench, supply_v: Option<f64>, gap_v: f64) -> Option<f64> {
    let centre = period(bench, supply_v, gap_v)?;
    let spread = bench.gap.spread.map_or(0.0, |spread| spread.value);
    if spread == 0.0 {
        return Some(centre);
    }
    let left = circuit(bench, supply_v)?.reach_v() / gap_v - 1.0;
    let step = if left > 0.0 { spread.min(0.5 * left) } else { spread };
    let ends = [1.0 + step, 1.0 - step].map(|part| period(bench, supply_v, gap_v * part));
    match ends {
        [Some(above), Some(below)] => Some(centre + 0.5 * (above + below - 2.0 * centre)),
        _ => Some(centre),
    }
}

/// Points and weights of the five-point Gauss–Hermite rule for a standard normal variable (Abramowitz & Stegun, table 25.10):
/// exact up to the ninth power.
const NORMAL_RULE: [(f64, f64); 5] = [
    (-2.856_970_013_872_806, 0.011_257_411_327_720_69),
    (-1.355_626_179_974_266, 0.222_075_922_005_612_6),
    (0.0, 0.533_333_333_333_333_3),
    (1.355_626_179_974_266, 0.222_075_922_005_612_6),
    (2.856_970_013_872_806, 0.011_257_411_327_720_69),
];

/// Standard deviation of single periods that the spread of the gap makes, s: that of the period over normally distributed
/// gap voltages, σ_T = σ_Vb/(dv/dt) in the first order. Where some of them are out of reach, half the change between one
/// spread below and one above. Memory from firing to firing does not change it.
pub(super) fn spread_jitter(bench: &Bench, supply_v: Option<f64>, gap_v: f64) -> Option<f64> {
    let spread = bench.gap.spread?.value;
    let centre = period(bench, supply_v, gap_v)?;
    let at = |z: f64| period(bench, supply_v, gap_v * (1.0 + spread * z)).map(|found| found - centre);
    let points: Option<Vec<(f64, f64)>> = NORMAL_RULE.iter().map(|(z, weight)| Some((at(*z)?, *weight))).collect();
    if let Some(points) = points {
        let mean: f64 = points.iter().map(|(change, weight)| change * weight).sum();
        return Some(points.iter().map(|(change, weight)| (change - mean).powi(2) * weight).sum::<f64>().sqrt());
    }
    match [at(1.0), at(-1.0)] {
        [Some(above), Some(below)] => Some((above - below) / 2.0),
        [None, Some(below)] => Some(-below),
        [Some(above), None] => Some(above),
        [None, None] => None,
    }
}
