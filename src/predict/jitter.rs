//! How steadily a setting fires: by formula where one exists, and by simulated firings beside it.
//!
//! First order, with the rate of rise dv/dt at breakdown: σ_T = σ_Vb/(dv/dt) from the spread of the gap; the statistical lag is
//! exponential and adds its mean to the period and as much to the standard deviation (von Laue 1925), while the voltage
//! rises on. A gap that has not recovered fires early, with the slope of the recovery taken off dv/dt. Memory ρ changes
//! only neighbours: σ of their difference is √2·σ·√(1 − ρ). In a lock with slope s of the phase map a disturbance dies out
//! as sᵏ and single periods scatter by √(2/(1 + s)) times as much. Units: s.

use super::setting::Setting;
use crate::model::firings::{Faults, GapLaw, Plan, Realised, Rhythm, Start, simulate};
use crate::model::locking::Rippled;
use serde::{Deserialize, Serialize};

/// Simulated periods.
const PERIODS: f64 = 4000.0;
/// Simulated periods where every one of them takes a walk through the recovery.
const PERIODS_RECOVERING: f64 = 800.0;
/// Most periods of the ripple that are simulated, and the least number of firings all the same.
const RIPPLES: f64 = 6000.0;
const LEAST_PERIODS: f64 = 100.0;
/// Seed of the simulation: any will do, and the same bench gives the same figures.
const SEED: u64 = 1;

/// Scatter of the periods at one setting.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct JitterForecast {
    /// From the spread of the gap, by formula, s.
    pub spread_s: Option<f64>,
    /// From the statistical lag, by formula, s.
    pub lag_s: f64,
    /// In step with the ripple, from the phase map, s.
    pub ripple_s: f64,
    /// Standard deviation of single periods, by formula (at the edge of firing from the simulated ones), s.
    pub total_s: f64,
    /// Standard deviation of the difference of neighbouring periods, by formula, ripple left out, s.
    pub cycle_to_cycle_s: f64,
    /// Simulated firings; absent in a table of settings.
    pub simulated: Option<Simulated>,
}

/// Figures of simulated firings.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Simulated {
    /// Number of periods.
    pub periods: usize,
    /// Mean period, s.
    pub period_s: f64,
    /// Standard deviation of single periods about a straight line, s.
    pub period_jitter_s: f64,
    /// Standard deviation of the difference of neighbouring periods, s.
    pub cycle_to_cycle_s: f64,
    /// Mean voltage at breakdown, V.
    pub firing_voltage_v: f64,
    /// Skewness of the periods.
    pub skewness: f64,
    /// Below this lie 5 % of the periods, s.
    pub quantile_05_s: f64,
    /// Below this lie 95 % of the periods, s.
    pub quantile_95_s: f64,
}

impl Setting<'_> {
    /// Scatter of the periods; none if the bench says nothing about it or the gap does not fire. `spread_s` is that of the
    /// spread alone.
    pub(super) fn jitter_forecast(
        &self,
        spread_s: Option<f64>,
        rippled: Option<&Rippled>,
        thorough: bool,
    ) -> Option<JitterForecast> {
        let law = GapLaw::from_bench(self.bench, self.gap_v()?);
        let lag_s = law.statistical_lag_s;
        if spread_s.is_none() && lag_s == 0.0 && rippled.is_none() {
            return None;
        }
        let simulated = if thorough { self.simulated(&law) } else { None };
        if spread_s.is_none() && law.spread > 0.0 {
            // At the edge of firing the charging law has no slope to divide by; only simulated firings tell.
            let simulated = simulated?;
            return Some(JitterForecast {
                spread_s,
                lag_s,
                ripple_s: rippled.map_or(0.0, |rippled| rippled.period_sd_s),
                total_s: simulated.period_jitter_s,
                cycle_to_cycle_s: simulated.cycle_to_cycle_s,
                simulated: Some(simulated),
            });
        }
        let spread = spread_s.unwrap_or(0.0);
        let single = spread.hypot(lag_s);
        let slope = rippled.and_then(|rippled| rippled.lock?.slope);
        let in_lock = slope.map_or(1.0, |slope| (2.0 / (1.0 + slope)).sqrt());
        let ripple_s = rippled.map_or(0.0, |rippled| rippled.period_sd_s);
        let neighbours = (2.0 * (spread * spread * (1.0 - law.memory) + lag_s * lag_s)).sqrt();
        Some(JitterForecast {
            spread_s,
            lag_s,
            ripple_s,
            total_s: (single * in_lock).hypot(ripple_s),
            cycle_to_cycle_s: neighbours,
            simulated,
        })
    }

    fn simulated(&self, law: &GapLaw) -> Option<Simulated> {
        let circuit = self.charging.as_ref()?.circuit;
        let about_s = self.figure(super::figures::period).or_else(|| self.figure(super::ripple::rippled_period))?;
        let mut periods = if law.recovery.is_some() { PERIODS_RECOVERING } else { PERIODS };
        if let Some(ripple) = circuit.ripple() {
            // Every period may take a walk through all of its ripple.
            periods = periods.min(RIPPLES / (about_s * ripple.frequency_hz)).max(LEAST_PERIODS);
        }
        let plan = Plan {
            rhythm: Rhythm::Bench { circuit, gap: *law },
            faults: Faults::none(),
            start: Start::Running,
            duration_s: periods * about_s,
            seed: SEED,
        };
        let firings = simulate(&plan).ok()?.firings;
        // The first firings may still settle into a lock.
        let settled = &firings[firings.len() / 20..];
        let realised = Realised::of(settled, &[]);
        let mut periods: Vec<f64> = settled.windows(2).map(|pair| pair[1].time_s - pair[0].time_s).collect();
        periods.sort_by(f64::total_cmp);
        let quantile = |share: f64| periods.get((share * (periods.len() - 1) as f64).round() as usize).copied();
        let (mean, sd) = (realised.period_s?, realised.period_jitter_s?);
        let third: f64 = periods.iter().map(|period| (period - mean).powi(3)).sum::<f64>() / periods.len() as f64;
        Some(Simulated {
            periods: periods.len(),
            period_s: mean,
            period_jitter_s: sd,
            cycle_to_cycle_s: realised.cycle_jitter_s?,
            firing_voltage_v: realised.gap_voltage_v?,
            skewness: if sd > 1e-9 * mean { third / sd.powi(3) } else { 0.0 },
            quantile_05_s: quantile(0.05)?,
            quantile_95_s: quantile(0.95)?,
        })
    }
}
