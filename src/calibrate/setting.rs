//! One recording at one supply setting, and what a bench says beforehand.

use super::law::{Point, Residual};
use super::sizes::SizeTrend;
use crate::bench::{Bench, Quantity};
use crate::estimate::Estimate;
use crate::rhythm::{Reading, Verdict};

/// Relative standard uncertainty of a supply reading without a tolerance: that of a panel meter read with care.
pub const ASSUMED_READING_U: f64 = 0.003;

/// Least relative standard uncertainty of a period: clocks of recorders are no better.
const CLOCK_U: f64 = 2e-5;

/// A recording at a supply setting.
#[derive(Debug, Clone, PartialEq)]
pub struct Setting {
    /// File, or stretch of a file.
    pub name: String,
    /// Supply reading with the tolerance that is its own, independent of the other settings; what all readings share
    /// belongs into the bench.
    pub supply: Quantity,
    /// Firings per second; none if the recording has no rhythm.
    pub firing_rate_hz: Option<Estimate>,
    /// Mean period, s; 0 if there is none.
    pub period: Estimate,
    /// Standard deviation of the periods, s.
    pub scatter_s: f64,
    /// How click sizes go with the periods, where it can be told.
    pub size: Option<SizeTrend>,
    /// Why it cannot be used, if it cannot.
    pub left_out: Option<String>,
}

impl Setting {
    /// A setting from the reading of its recording.
    #[must_use]
    pub fn of_reading(name: &str, supply: Quantity, reading: &Reading, size: Option<SizeTrend>) -> Self {
        let rhythm = matches!(reading.verdict, Verdict::Steady | Verdict::Unsteady);
        let period = reading.period_s.filter(|period| rhythm && period.is_finite() && period.value > 0.0);
        let jitter_s = reading.period_jitter_s.filter(Estimate::is_finite).map_or(0.0, |jitter| jitter.value);
        Self {
            name: name.to_owned(),
            supply,
            firing_rate_hz: reading.firing_rate_hz.filter(|_| period.is_some()),
            period: period.unwrap_or(Estimate::normal(0.0, 0.0)),
            scatter_s: jitter_s,
            size,
            left_out: period.is_none().then(|| format!("no rhythm to use: {}", reading.reason)),
        }
    }

    /// A recording that could not be used at all.
    #[must_use]
    pub fn refused(name: &str, supply: Quantity, reason: &str) -> Self {
        Self {
            name: name.to_owned(),
            supply,
            firing_rate_hz: None,
            period: Estimate::normal(0.0, 0.0),
            scatter_s: 0.0,
            size: None,
            left_out: Some(reason.to_owned()),
        }
    }
}

/// What is known before the fit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Known {
    /// Residual voltage, if it is stated.
    pub residual: Option<Quantity>,
    /// Time for which the gap conducts.
    pub conduction: Quantity,
    /// Time constant of the gap's recovery, if it is stated, s.
    pub recovery_s: Option<f64>,
    /// Relative standard uncertainty that all supply readings share.
    pub scale_u: f64,
    /// Voltage that the capacitor tends to over the supply voltage: below 1 with a leakage.
    pub reach: f64,
    /// Frequency of the supply's ripple, if it is stated, Hz.
    pub ripple_hz: Option<f64>,
}

impl Default for Known {
    fn default() -> Self {
        Self {
            residual: None,
            conduction: Quantity::exact(0.0),
            recovery_s: None,
            scale_u: 0.0,
            reach: 1.0,
            ripple_hz: None,
        }
    }
}

impl Known {
    /// What a bench says.
    #[must_use]
    pub fn from_bench(bench: &Bench) -> Self {
        let supply = bench.supply.voltage.filter(|supply| supply.value != 0.0);
        let load = match (bench.charging.resistance, bench.charging.leakage) {
            (Some(resistance), Some(leakage)) => resistance.value / leakage.value,
            _ => 0.0,
        };
        Self {
            residual: bench.gap.residual_voltage,
            conduction: bench.gap.conduction_time.unwrap_or(Quantity::exact(0.0)),
            recovery_s: bench.gap.recovery_time.map(|time| time.value),
            scale_u: supply.map_or(0.0, |supply| supply.u() / supply.value.abs()),
            reach: 1.0 / (1.0 + load),
            ripple_hz: bench.supply.ripple_frequency.map(|frequency| frequency.value),
        }
    }

    /// R·C over the time constant in force: a leakage shortens the latter as it lowers the reach.
    pub(super) fn without_leakage(&self) -> f64 {
        1.0 / self.reach
    }

    pub(super) fn residual(&self, asked: bool) -> Residual {
        match self.residual {
            _ if asked => Residual::Free,
            Some(stated) if stated.u() > 0.0 => Residual::Stated(stated.value, stated.u()),
            Some(stated) => Residual::Fixed(stated.value),
            None => Residual::Fixed(0.0),
        }
    }

    pub(super) fn point(&self, setting: &Setting) -> Point {
        let supply = setting.supply;
        let reading_u = if supply.u() > 0.0 { supply.u() } else { ASSUMED_READING_U * supply.value };
        Point {
            supply_v: self.reach * supply.value,
            supply_u_v: self.reach * reading_u,
            charging_s: setting.period.value - self.conduction.value,
            charging_u_s: setting.period.u.hypot(CLOCK_U * setting.period.value),
            scatter_s: setting.scatter_s,
        }
    }
}
