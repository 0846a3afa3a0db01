//! A range of settings, the setting that gives a rate, and the other parts that would give it.

use super::figures::{self, Figure};
use super::propagate::propagate;
use super::ripple::{Locks, rippled_period};
use super::{FORMAT, PredictError, Prediction, Setting, forecast, notes};
use crate::bench::{Bench, Quantity};
use crate::estimate::Estimate;
use crate::model::root::bracketed;
use serde::{Deserialize, Serialize};
use std::cmp::Ordering;

/// Highest supply voltage that is tried for a rate, V.
const MOST_SUPPLY_V: f64 = 1e6;
/// Largest factor by which another part is changed.
const MOST_FACTOR: f64 = 1000.0;
/// Least number of settings that is worth a thread of its own.
const LEAST_STRETCH: usize = 16;
/// First reach of the search around the answer without ripple, in the logarithm.
const HELD_REACH: f64 = 1e-3;
/// Halvings of that search.
const HALVINGS: usize = 44;
/// Relative difference of rates that are the same: the mean of a beat is that good.
const HELD: f64 = 1e-9;
/// Least extent of a lock, as a share of the setting, that is told.
const LEAST_LOCK: f64 = 1e-6;
/// Steps of the search for such a factor, on either side.
const FACTOR_STEPS: i32 = 60;

/// Predictions over a range of supply settings.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Sweep {
    /// Always [`FORMAT`].
    pub format: String,
    /// One prediction for each setting, from low to high.
    pub settings: Vec<Prediction>,
    /// What changes along the range: where firing stops, where clicks overlap, where the pitch is lost, locks.
    pub remarks: Vec<String>,
}

/// Predictions at `count` evenly spaced supply voltages from `low_v` to `high_v`.
///
/// # Errors
/// [`PredictError::Range`] if the range has no extent or fewer than two settings are asked for, and what [`super::predict`]
/// reports.
pub fn sweep(bench: &Bench, low_v: f64, high_v: f64, count: usize) -> Result<Sweep, PredictError> {
    if count < 2 || low_v.partial_cmp(&high_v) != Some(Ordering::Less) {
        return Err(PredictError::Range { low: low_v, high: high_v, count });
    }
    let step_v = (high_v - low_v) / (count - 1) as f64;
    let supplies: Vec<f64> = (0..count).map(|k| low_v + step_v * k as f64).collect();
    let (settings, locks) = in_parallel(bench, &supplies)?;
    let remarks = super::remarks::remarks(bench, &settings, &locks);
    Ok(Sweep { format: FORMAT.to_owned(), settings, remarks })
}

/// Predictions at all settings with the locks met on the way, a stretch of the range on each core.
fn in_parallel(bench: &Bench, supplies: &[f64]) -> Result<(Vec<Prediction>, Locks), PredictError> {
    let cores = std::thread::available_parallelism().map_or(1, usize::from);
    let stretch = supplies.len().div_ceil(cores).max(LEAST_STRETCH);
    let one = |supplies: &[f64]| {
        let mut locks = Locks::new();
        let forecast_at = |supply_v: &f64| forecast(&Setting::new(bench, Some(*supply_v))?, false, &mut locks);
        let settings = supplies.iter().map(forecast_at).collect::<Result<Vec<_>, PredictError>>()?;
        Ok((settings, locks))
    };
    let parts: Vec<Result<(Vec<Prediction>, Locks), PredictError>> = std::thread::scope(|scope| {
        let workers: Vec<_> = supplies.chunks(stretch).map(|supplies| scope.spawn(move || one(supplies))).collect();
        let joined = |worker: std::thread::ScopedJoinHandle<'_, _>| {
            worker.join().unwrap_or_else(|panic| std::panic::resume_unwind(panic))
        };
        workers.into_iter().map(joined).collect()
    });
    let (mut settings, mut locks) = (Vec::new(), Locks::new());
    for part in parts {
        let (some, met) = part?;
        settings.extend(some);
        locks.extend(met);
    }
    Ok((settings, locks))
}

/// The supply voltage in V at which the bench fires at a rate in Hz; where the ripple holds the rate over a range, its middle.
///
/// # Errors
/// [`PredictError::Rate`] for a senseless rate, [`PredictError::Missing`] if the bench lacks a part,
/// [`PredictError::Unreachable`] if no setting gives the rate (a constant current, a current limit or the conduction
/// time bounds it).
pub fn supply_for_rate(bench: &Bench, rate_hz: f64) -> Result<f64, PredictError> {
    supplies_for_rate(bench, rate_hz).map(|(low_v, high_v)| 0.5 * (low_v + high_v))
}

/// Lowest and highest supply voltage of that rate, V; the same where no lock holds it.
fn supplies_for_rate(bench: &Bench, rate_hz: f64) -> Result<(f64, f64), PredictError> {
    if !(rate_hz.is_finite() && rate_hz > 0.0) {
        return Err(PredictError::Rate(rate_hz));
    }
    // Any setting will do to ask for the least one; crests of a ripple do not count here.
    let mut smooth = bench.clone();
    smooth.supply.ripple = None;
    let setting = Setting::new(&smooth, Some(1.0))?;
    let (Some(least_v), Some(gap_v)) = (setting.least_supply_v(), setting.gap_v()) else {
        return Err(PredictError::Missing(notes::missing(&setting).join("; ")));
    };
    let rate = |supply_v: f64| figures::mean_period(&smooth, Some(supply_v), gap_v).map_or(0.0, f64::recip);
    // A gap that has not recovered fires below the least setting too; that is not what is asked for.
    let (low_v, high_v) = (just_above(least_v), MOST_SUPPLY_V.max(2.0 * least_v));
    let (low_hz, high_hz) = (rate(low_v), rate(high_v));
    let unreachable = PredictError::Unreachable { rate_hz, low_hz, high_hz, most_v: high_v };
    if high_hz < rate_hz || low_hz > rate_hz {
        return Err(unreachable);
    }
    // In the logarithm of how far above the least setting, where the rate is a tame function.
    let at = |x: f64| least_v + x.exp();
    let found =
        at(bracketed((low_v - least_v).ln(), (high_v - least_v).ln(), |x| (rate(at(x)).max(1e-300) / rate_hz).ln()));
    if bench.supply.ripple.is_none_or(|ripple| ripple.value == 0.0) {
        return Ok((found, found));
    }
    let rippled = |supply_v: f64| rippled_period(bench, Some(supply_v), gap_v).map_or(0.0, f64::recip);
    let ends = held(&|x| (rippled(found * x.exp()) / rate_hz).ln()).ok_or(unreachable)?;
    Ok((found * ends.0.exp(), found * ends.1.exp()))
}

/// The range around zero over which a function that never falls is zero: a point, or the extent of a lock. None if it
/// does not change its sign within a factor of about e.
fn held(excess: &dyn Fn(f64) -> f64) -> Option<(f64, f64)> {
    let mut reach = HELD_REACH;
    while excess(-reach) >= 0.0 || excess(reach) <= 0.0 {
        reach *= 2.0;
        if reach > 1.0 {
            return None;
        }
    }
    let edge = |beyond: &dyn Fn(f64) -> bool| {
        let (mut low, mut high) = (-reach, reach);
        for _ in 0..HALVINGS {
            let middle = 0.5 * (low + high);
            if beyond(excess(middle)) { high = middle } else { low = middle }
        }
        0.5 * (low + high)
    };
    Some((edge(&|excess| excess >= -HELD), edge(&|excess| excess > HELD)))
}

/// A voltage a little above: the period at the least setting itself is infinite.
fn just_above(volts: f64) -> f64 {
    volts * (1.0 + 1e-12)
}

/// Another part that would give the rate at the stated supply voltage.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Alternative {
    /// Key of the bench file.
    pub key: String,
    /// Its value now, SI.
    pub now: f64,
    /// The value that gives the rate, SI.
    pub value: f64,
    /// SI unit.
    pub unit: String,
}

/// How to get a firing rate.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Target {
    /// Rate that is wanted, Hz.
    pub firing_rate_hz: f64,
    /// Supply voltage that gives it, V; its uncertainty is that of all parts but the supply.
    pub supply_v: Estimate,
    /// Settings over which the ripple holds the gap at this rate, V; none where it does not lock there.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub locked_supply_v: Option<(f64, f64)>,
    /// Supply voltage for one cent of pitch, V; ripple left out.
    pub supply_per_cent_v: f64,
    /// Other parts that would give it at the supply voltage of the bench.
    pub alternatives: Vec<Alternative>,
}

/// The supply voltage for a firing rate in Hz with its tolerance, and the other parts that would give it.
///
/// # Errors
/// As [`supply_for_rate`].
pub fn target(bench: &Bench, rate_hz: f64) -> Result<Target, PredictError> {
    let (low_v, high_v) = supplies_for_rate(bench, rate_hz)?;
    let supply_v = 0.5 * (low_v + high_v);
    let setting = Setting::new(bench, Some(supply_v))?;
    let gap = setting.gap.as_ref().map(|gap| gap.quantity());
    let slope = setting.slope_hz_per_v().unwrap_or(f64::INFINITY);
    let period = gap.and_then(|gap| propagate(bench, Some(Quantity::exact(supply_v)), gap, figures::mean_period));
    let u_v = period.map_or(0.0, |period| period.u * rate_hz * rate_hz / slope);
    Ok(Target {
        firing_rate_hz: rate_hz,
        supply_v: Estimate::normal(supply_v, u_v),
        locked_supply_v: (high_v - low_v > LEAST_LOCK * supply_v).then_some((low_v, high_v)),
        supply_per_cent_v: rate_hz * std::f64::consts::LN_2 / 1200.0 / slope,
        alternatives: alternatives(bench, rate_hz),
    })
}

type Slot = fn(&mut Bench) -> &mut Option<Quantity>;

/// Parts that can be changed: key, unit, place.
const PARTS: [(&str, &str, Slot); 6] = [
    ("charging.resistance", "Ω", |bench| &mut bench.charging.resistance),
    ("charging.time_constant", "s", |bench| &mut bench.charging.time_constant),
    ("charging.current", "A", |bench| &mut bench.charging.current),
    ("charging.capacitance", "F", |bench| &mut bench.charging.capacitance),
    ("gap.spacing", "m", |bench| &mut bench.gap.spacing),
    ("gap.voltage", "V", |bench| &mut bench.gap.voltage),
];

fn alternatives(bench: &Bench, rate_hz: f64) -> Vec<Alternative> {
    let supply_v = bench.supply.voltage.map(|supply| supply.value);
    if supply_v.is_none() && bench.charging.current.is_none() {
        return Vec::new();
    }
    let mut found = Vec::new();
    for (key, unit, slot) in PARTS {
        // A stated gap voltage hides the spacing.
        let hidden = key == "gap.spacing" && bench.gap.voltage.is_some();
        let mut other = bench.clone();
        let Some(now) = (*slot(&mut other)).filter(|_| !hidden) else { continue };
        let rate = |factor: f64, period: Figure| {
            let mut other = bench.clone();
            *slot(&mut other) = Some(Quantity::exact(now.value * factor));
            let gap_v = crate::model::breakdown::gap_voltage(&other).ok()?.voltage_v;
            period(&other, supply_v, gap_v).map(f64::recip)
        };
        let smooth = |factor: f64| rate(factor, figures::mean_period);
        let factor = factor_for(rate_hz, &smooth).and_then(|factor| {
            if bench.supply.ripple.is_none_or(|ripple| ripple.value == 0.0) {
                return Some(factor);
            }
            // The rate falls as most parts grow.
            let side = if smooth(factor * 1.001)? > smooth(factor * 0.999)? { 1.0 } else { -1.0 };
            let rippled = |x: f64| rate(factor * (side * x).exp(), rippled_period).unwrap_or(0.0);
            let ends = held(&|x| (rippled(x) / rate_hz).ln())?;
            Some(factor * (side * 0.5 * (ends.0 + ends.1)).exp())
        });
        if let Some(factor) = factor {
            found.push(Alternative {
                key: key.to_owned(),
                now: now.value,
                value: now.value * factor,
                unit: unit.to_owned(),
            });
        }
    }
    found
}

/// The factor nearest to one at which a rate passes the wanted one.
fn factor_for(rate_hz: f64, rate: &dyn Fn(f64) -> Option<f64>) -> Option<f64> {
    let step = MOST_FACTOR.ln() / f64::from(FACTOR_STEPS);
    let excess = |x: f64| rate(x.exp()).map_or(f64::NAN, |found| (found / rate_hz).ln());
    let mut bracket: Option<(f64, f64)> = None;
    for k in 0..FACTOR_STEPS {
        for side in [1.0, -1.0] {
            let (from, to) = (side * step * f64::from(k), side * step * f64::from(k + 1));
            let (at_from, at_to) = (excess(from), excess(to));
            if bracket.is_none() && at_from * at_to <= 0.0 {
                bracket = Some((from, to));
            }
        }
        if bracket.is_some() {
            break;
        }
    }
    bracket.map(|(from, to)| bracketed(from, to, excess).exp())
}
