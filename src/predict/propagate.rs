//! Uncertainty of a figure from the tolerances of the bench.
//!
//! Law of propagation for independent inputs with numerical sensitivities: each input is moved by ± its standard
//! uncertainty and half the change of the figure is its contribution (JCGM 100:2008, 5.1.3 note 2).

use super::period;
use crate::bench::{Bench, Quantity};
use crate::estimate::{COVERAGE_95, Estimate};

/// A figure of a bench at a supply voltage and a gap voltage; none if there is none (no firing).
pub(super) type Figure = fn(&Bench, f64, f64) -> Option<f64>;

/// A figure with its standard uncertainty.
#[derive(Debug, Clone, Copy)]
pub(super) struct Propagated {
    pub(super) value: f64,
    pub(super) u: f64,
    /// Within one standard uncertainty of some input there is no firing any more.
    pub(super) at_the_edge: bool,
}

type Slot = fn(&mut Bench) -> &mut Option<Quantity>;

/// Every input beside supply and gap voltage.
const INPUTS: [Slot; 10] = [
    |bench| &mut bench.charging.resistance,
    |bench| &mut bench.charging.current,
    |bench| &mut bench.charging.time_constant,
    |bench| &mut bench.charging.capacitance,
    |bench| &mut bench.charging.leakage,
    |bench| &mut bench.supply.current_limit,
    |bench| &mut bench.gap.residual_voltage,
    |bench| &mut bench.gap.conduction_time,
    |bench| &mut bench.gap.stray_capacitance,
    |bench| &mut bench.gap.spread,
];

/// The figure at the values of the bench, with the uncertainty that the tolerances make.
pub(super) fn propagate(bench: &Bench, supply: Quantity, gap: Quantity, figure: Figure) -> Option<Propagated> {
    let value = figure(bench, supply.value, gap.value)?;
    let mut moved = vec![
        (supply.u(), [1.0, -1.0].map(|side| figure(bench, supply.value + side * supply.u(), gap.value))),
        (gap.u(), [1.0, -1.0].map(|side| figure(bench, supply.value, gap.value + side * gap.u()))),
    ];
    for slot in INPUTS {
        let mut other = bench.clone();
        let Some(input) = *slot(&mut other) else { continue };
        let ends = [1.0, -1.0].map(|side| {
            *slot(&mut other) = Some(Quantity::exact(input.value + side * input.u()));
            figure(&other, supply.value, gap.value)
        });
        moved.push((input.u(), ends));
    }
    let mut variance = 0.0;
    let mut at_the_edge = false;
    for (_, ends) in moved.into_iter().filter(|(u, _)| *u > 0.0) {
        let change = match ends {
            [Some(above), Some(below)] => (above - below) / 2.0,
            [Some(end), None] | [None, Some(end)] => end - value,
            [None, None] => 0.0,
        };
        at_the_edge |= ends.iter().any(Option::is_none);
        variance += change * change;
    }
    Some(Propagated { value, u: variance.sqrt(), at_the_edge })
}

impl Propagated {
    /// The figure as an estimate that stays positive: the interval is symmetric in the logarithm, because most inputs
    /// multiply; for small uncertainties that is the normal interval.
    pub(super) fn positive(self) -> Estimate {
        if self.value <= 0.0 {
            return Estimate::normal(self.value, self.u);
        }
        let factor = (COVERAGE_95 * self.u / self.value).exp();
        Estimate { value: self.value, u: self.u, low: self.value / factor, high: self.value * factor }
    }
}

/// Standard deviation of single periods that the spread of the gap makes, s: half the change of the period between one
/// spread below and one above, the first order σ_T = σ_Vb/(dv/dt) where the spread is small. Memory from firing to
/// firing does not change it.
pub(super) fn jitter(bench: &Bench, supply_v: f64, gap_v: f64) -> Option<f64> {
    let spread = bench.gap.spread?.value;
    let centre = period::period(bench, supply_v, gap_v)?;
    let ends = [1.0 + spread, 1.0 - spread].map(|part| period::period(bench, supply_v, gap_v * part));
    match ends {
        [Some(above), Some(below)] => Some((above - below) / 2.0),
        [None, Some(below)] => Some(centre - below),
        [Some(above), None] => Some(above - centre),
        [None, None] => None,
    }
}
