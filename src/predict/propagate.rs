//! Uncertainty of a figure from the tolerances of the bench.
//!
//! Law of propagation for independent inputs with numerical sensitivities: each input is moved by ± its standard
//! uncertainty and half the change of the figure is its contribution (JCGM 100:2008, 5.1.3 note 2).

use super::figures::Figure;
use crate::bench::{Bench, Quantity};
use crate::estimate::{COVERAGE_95, Estimate};

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
const INPUTS: [Slot; 13] = [
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
    |bench| &mut bench.gap.statistical_lag,
    |bench| &mut bench.gap.recovery_time,
    |bench| &mut bench.gap.recovery_depth,
];

/// The figure at the values of the bench, with the uncertainty that the tolerances make.
pub(super) fn propagate(bench: &Bench, supply: Option<Quantity>, gap: Quantity, figure: Figure) -> Option<Propagated> {
    let supply_v = supply.map(|supply| supply.value);
    let value = figure(bench, supply_v, gap.value)?;
    let mut moved = vec![(gap.u(), [1.0, -1.0].map(|side| figure(bench, supply_v, gap.value + side * gap.u())))];
    if let Some(supply) = supply {
        let at = |side: f64| figure(bench, Some(supply.value + side * supply.u()), gap.value);
        moved.push((supply.u(), [1.0, -1.0].map(at)));
    }
    let mut other = bench.clone();
    for slot in INPUTS {
        let Some(input) = *slot(&mut other) else { continue };
        if input.u() == 0.0 {
            continue;
        }
        let ends = [1.0, -1.0].map(|side| {
            *slot(&mut other) = Some(Quantity::exact(input.value + side * input.u()));
            figure(&other, supply_v, gap.value)
        });
        *slot(&mut other) = Some(input);
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
