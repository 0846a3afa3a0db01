//! A range of settings, and the setting that gives a rate.

use super::ripple::Locks;
use super::{FORMAT, PredictError, Prediction, Setting, figures, forecast, notes};
use crate::bench::Bench;
use serde::{Deserialize, Serialize};
use std::cmp::Ordering;

/// Highest supply voltage that is tried for a rate, V.
const MOST_SUPPLY_V: f64 = 1e6;

/// Predictions over a range of supply settings.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Sweep {
    /// Always [`FORMAT`].
    pub format: String,
    /// One prediction for each setting, from low to high.
    pub settings: Vec<Prediction>,
}

/// Predictions at `count` evenly spaced supply voltages from `low_v` to `high_v`.
///
/// # Errors
/// [`PredictError::Range`] if the range has no extent or fewer than two settings are asked for, and what [`predict`]
/// reports.
pub fn sweep(bench: &Bench, low_v: f64, high_v: f64, count: usize) -> Result<Sweep, PredictError> {
    if count < 2 || low_v.partial_cmp(&high_v) != Some(Ordering::Less) {
        return Err(PredictError::Range { low: low_v, high: high_v, count });
    }
    let step_v = (high_v - low_v) / (count - 1) as f64;
    let mut locks = Locks::new();
    let settings = (0..count)
        .map(|k| forecast(&Setting::new(bench, Some(low_v + step_v * k as f64))?, false, &mut locks))
        .collect::<Result<Vec<_>, _>>()?;
    Ok(Sweep { format: FORMAT.to_owned(), settings })
}

/// The supply voltage in V at which the bench fires at a rate in Hz.
///
/// # Errors
/// [`PredictError::Rate`] for a senseless rate, [`PredictError::Missing`] if the bench lacks a part,
/// [`PredictError::Unreachable`] if no setting gives the rate (a constant current, a current limit or the conduction
/// time bounds it).
pub fn supply_for_rate(bench: &Bench, rate_hz: f64) -> Result<f64, PredictError> {
    if !(rate_hz.is_finite() && rate_hz > 0.0) {
        return Err(PredictError::Rate(rate_hz));
    }
    // Any setting will do to ask for the least one.
    let setting = Setting::new(bench, Some(1.0))?;
    let (Some(least_v), Some(gap_v)) = (setting.least_supply_v(), setting.gap_v()) else {
        return Err(PredictError::Missing(notes::notes(&setting, None, None).join("; ")));
    };
    let rate = |supply_v: f64| figures::period(bench, Some(supply_v), gap_v).map_or(0.0, f64::recip);
    let (mut low_v, mut high_v) = (least_v, MOST_SUPPLY_V.max(least_v));
    if rate(high_v) < rate_hz || rate(just_above(least_v)) > rate_hz {
        let (low_hz, high_hz) = (rate(just_above(least_v)), rate(high_v));
        return Err(PredictError::Unreachable { rate_hz, low_hz, high_hz, most_v: high_v });
    }
    // The rate rises with the supply voltage, so halving ends at the last bit; 200 halvings are more than a double has.
    for _ in 0..200 {
        let middle = 0.5 * (low_v + high_v);
        if middle <= low_v || middle >= high_v {
            break;
        }
        if rate(middle) < rate_hz { low_v = middle } else { high_v = middle }
    }
    Ok(high_v)
}

/// A voltage a little above: the period at the least setting itself is infinite.
fn just_above(volts: f64) -> f64 {
    volts * (1.0 + 1e-12)
}
