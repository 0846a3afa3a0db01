//! What a breakdown voltage depends on, as inputs of an uncertainty budget, and the spacing that a voltage implies.

use super::{GapGeometry, Level, level};
use crate::bench::{Bench, Electrodes, Quantity};
use crate::estimate::Estimate;
use crate::model::air::{Air, UNSTATED};
use crate::uncertainty::{Budget, Distribution, Input, Problem};

/// Place of the spacing among the inputs.
const SPACING: usize = 0;
/// Place of the accuracy of the law: a factor.
pub(super) const BAND: usize = 5;

/// Corrections of the spacing in one draw; each takes an error of the exponent down by about a factor of ten.
const CORRECTIONS: usize = 4;

/// Spacing, diameter, temperature, pressure, humidity, and the accuracy of the law as a factor.
pub(super) fn inputs(bench: &Bench, found: &Level) -> Vec<Input> {
    let air = Air::of_bench(&bench.air);
    let of = |name: &str, unit, stated: Option<Quantity>, value, unstated| match stated {
        Some(quantity) => Input { value, ..Input::of_quantity(name, unit, &quantity) },
        None => Input::new(name, unit, value, Distribution::Rectangular { half_width: unstated }),
    };
    let gap = &bench.gap;
    let spacing = gap.spacing.unwrap_or(Quantity::exact(0.0));
    let diameter = gap.diameter.unwrap_or(Quantity::exact(1.0));
    let weather = "read it beside the gap and write it into the bench file";
    vec![
        Input::of_quantity("spacing", "m", &spacing).reduced_by("measure the spacing with a gauge"),
        Input::of_quantity("diameter", "m", &diameter).reduced_by("measure the diameter"),
        of("air temperature", "K", bench.air.temperature, air.temperature_k, UNSTATED[0]).reduced_by(weather),
        of("air pressure", "Pa", bench.air.pressure, air.pressure_pa, UNSTATED[1]).reduced_by(weather),
        of("air humidity", "", bench.air.humidity, air.relative_humidity, UNSTATED[2]).reduced_by(weather),
        Input::new(
            format!("the law ({})", found.law.words()),
            "",
            1.0,
            Distribution::Rectangular { half_width: found.band },
        )
        .reduced_by("compare once with a rated divider"),
    ]
}

/// Breakdown voltage at a set of inputs, V; the factor of the law is left to the caller.
pub(super) fn level_of(bench: &Bench, electrodes: Electrodes, x: &[f64]) -> Option<f64> {
    let air = Air { temperature_k: x[2], pressure_pa: x[3], relative_humidity: x[4] };
    let diameter_m = bench.gap.diameter.map(|_| x[1]);
    level(electrodes, diameter_m, x[SPACING], &air).ok().map(|level| level.voltage_v)
}

/// The spacing at which the gap of a bench would break down at a measured voltage, with its budget. The stated spacing is not
/// used. None without electrodes, or where no law gives that voltage.
#[must_use]
pub fn implied_spacing(bench: &Bench, voltage: Estimate) -> Option<Budget> {
    let electrodes = bench.gap.electrodes?;
    let air = Air::of_bench(&bench.air);
    let diameter_m = bench.gap.diameter.map(|d| d.value);
    let implied = GapGeometry::new(electrodes, diameter_m)?.implied(voltage.value, &air)?;
    let (spacing_m, exponent) = (implied.spacing_m, implied.exponent);
    let found = level(electrodes, diameter_m, spacing_m, &air).ok()?;
    let mut inputs = inputs(bench, &found);
    // Its place now holds the voltage.
    inputs[SPACING] = Input::new("gap voltage", "V", voltage.value, Distribution::Normal { u: voltage.u })
        .reduced_by("look at the budget of the gap voltage");
    let model = move |x: &[f64]| {
        let mut at = x.to_vec();
        at[SPACING] = spacing_m;
        for _ in 0..CORRECTIONS {
            let voltage_v = level_of(bench, electrodes, &at)? * x[BAND];
            at[SPACING] *= (x[SPACING] / voltage_v).powf(1.0 / exponent);
        }
        Some(at[SPACING])
    };
    Problem::new(inputs, model).budget("implied_spacing_m", "implied spacing", "m")
}
