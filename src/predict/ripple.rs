//! What the ripple of the supply makes of a setting: locks, beats, and the error of a voltage read from the rate.

use super::figures::{self, charging};
use super::setting::Setting;
use crate::bench::{Bench, si, signed};
use crate::model::charging::{Circuit, Strength};
use crate::model::firings::GapLaw;
use crate::model::locking::{Lock, PhaseMap, Rippled, lock_range, pattern_range};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Most periods of the ripple in one period of the gap for which the lock is looked for.
const MOST_CYCLES: f64 = 200.0;
/// Distance from a lock, in widths of it, within which it is told.
const NEAR: f64 = 4.0;

/// A pattern of firings in step with the ripple.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct LockedPattern {
    /// Firings in the pattern.
    pub firings: u32,
    /// Periods of the ripple that it takes.
    pub cycles: u32,
    /// Firing rate in the lock, Hz.
    pub firing_rate_hz: f64,
}

/// A range of settings over which the gap is locked.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct LockRange {
    /// Firing rate in the lock, Hz.
    pub firing_rate_hz: f64,
    /// Lowest supply voltage of the lock, V.
    pub low_supply_v: f64,
    /// Highest supply voltage of the lock, V.
    pub high_supply_v: f64,
    /// Greatest error of a gap voltage read from the rate within the lock, as a fraction: at its ends, where it has either sign.
    pub largest_voltage_error: f64,
}

/// What the ripple makes of a setting.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct RippleForecast {
    /// Frequency of the ripple, Hz.
    pub frequency_hz: f64,
    /// Its peak, as a fraction of the supply voltage.
    pub fraction: f64,
    /// Standard deviation of the periods in step with the ripple, s; 0 in a lock of one firing.
    pub period_sd_s: f64,
    /// Shortest period, s.
    pub shortest_period_s: f64,
    /// Longest period, s.
    pub longest_period_s: f64,
    /// The lock, if the setting is in one.
    pub locked: Option<LockedPattern>,
    /// The range of the lock in which the setting is (in a table only of those of one firing), or of the lock of one firing to
    /// which it is near.
    pub lock: Option<LockRange>,
    /// True if the spread of the gap is wider than the lock in which the setting is, as far as its range is known: the gap then
    /// slips in and out of it.
    pub slips: bool,
    /// Frequency at which the periods beat outside of a lock, Hz.
    pub beat_hz: Option<f64>,
    /// Error of a gap voltage that is read from the mean rate here, as a fraction.
    pub voltage_error: Option<f64>,
}

/// Locks of one firing that were found, by ripple periods per firing, for one bench.
pub(super) type Locks = BTreeMap<u32, Option<LockRange>>;

impl Setting<'_> {
    /// The settled firing under ripple, the mean lag in it; none without ripple or without firing.
    pub(super) fn rippled(&self) -> Option<Rippled> {
        let circuit = self.charging.as_ref()?.circuit.with_pause(self.lag_s());
        PhaseMap::new(&circuit, strength(self.bench, self.gap_v()?, self.parts.residual_v))?.settled().ok()
    }

    /// What the ripple makes of the setting. `locks` keeps what does not depend on the setting; the range of a pattern of
    /// several firings is looked for only if `thorough`.
    pub(super) fn ripple_forecast(
        &self,
        rippled: &Rippled,
        thorough: bool,
        locks: &mut Locks,
    ) -> Option<RippleForecast> {
        let circuit = self.charging.as_ref()?.circuit.with_pause(self.lag_s());
        let ripple = circuit.ripple()?;
        let (gap_v, supply_v) = (self.gap_v()?, self.supply_v()?);
        let mean_s = rippled.mean_period_s;
        let locked = rippled.lock.map(|lock| LockedPattern {
            firings: lock.firings,
            cycles: lock.cycles,
            firing_rate_hz: ripple.frequency_hz * f64::from(lock.firings) / f64::from(lock.cycles),
        });
        // The nearest ratio of whole numbers sets the beat: n firings in one period or one firing in n periods.
        let (rate_hz, f) = (1.0 / mean_s, ripple.frequency_hz);
        let beat = if rate_hz > f { (rate_hz / f).round() * f - rate_hz } else { (f / rate_hz).round() * rate_hz - f };
        let smooth = circuit.with_ripple(None);
        let lock = match locked.filter(|locked| thorough && locked.firings > 1) {
            Some(locked) => rippled.lock.and_then(|lock| self.pattern(gap_v, lock, locked.firing_rate_hz, supply_v)),
            None => self.single_lock(gap_v, mean_s, ripple.frequency_hz, supply_v, locks),
        };
        let spread = self.bench.gap.spread.map_or(0.0, |spread| spread.value);
        let slips = locked.is_some() && lock.is_some_and(|lock| spread > lock.largest_voltage_error);
        Some(RippleForecast {
            slips,
            frequency_hz: f,
            fraction: ripple.fraction,
            period_sd_s: rippled.period_sd_s,
            shortest_period_s: rippled.shortest_s,
            longest_period_s: rippled.longest_s,
            locked,
            lock,
            beat_hz: locked.is_none().then_some(beat.abs()),
            voltage_error: smooth.gap_voltage_v(mean_s).ok().map(|implied_v| implied_v / gap_v - 1.0),
        })
    }

    fn lagging_circuit(&self, supply_v: f64) -> Option<Circuit> {
        charging(self.bench, Some(supply_v)).ok().map(|charging| charging.circuit.with_pause(self.lag_s()))
    }

    /// The lock of one firing in which a setting of this mean period is, or to which it is near.
    fn single_lock(
        &self,
        gap_v: f64,
        mean_s: f64,
        frequency_hz: f64,
        supply_v: f64,
        locks: &mut Locks,
    ) -> Option<LockRange> {
        let cycles = (mean_s * frequency_hz).round();
        let cycles = (1.0..=MOST_CYCLES).contains(&cycles).then_some(cycles as u32)?;
        let lock = *locks.entry(cycles).or_insert_with(|| self.lock(gap_v, cycles, frequency_hz, supply_v));
        lock.filter(|lock| {
            let reach_v = NEAR * (lock.high_supply_v - lock.low_supply_v);
            (lock.low_supply_v - reach_v..lock.high_supply_v + reach_v).contains(&supply_v)
        })
    }

    /// The range of a pattern of several firings.
    fn pattern(&self, gap_v: f64, lock: Lock, firing_rate_hz: f64, supply_v: f64) -> Option<LockRange> {
        let circuit_at = |supply_v: f64| self.lagging_circuit(supply_v);
        let strength = strength(self.bench, gap_v, self.parts.residual_v);
        let (low_supply_v, high_supply_v) = pattern_range(&circuit_at, strength, lock, supply_v)?;
        let error = |supply_v: f64| {
            let smooth = self.lagging_circuit(supply_v)?.with_ripple(None);
            Some((smooth.gap_voltage_v(1.0 / firing_rate_hz).ok()? / gap_v - 1.0).abs())
        };
        let largest_voltage_error = error(low_supply_v)?.max(error(high_supply_v)?);
        Some(LockRange { firing_rate_hz, low_supply_v, high_supply_v, largest_voltage_error })
    }

    fn lock(&self, gap_v: f64, cycles: u32, frequency_hz: f64, near_v: f64) -> Option<LockRange> {
        let circuit_at = |supply_v: f64| self.lagging_circuit(supply_v);
        let (low_supply_v, high_supply_v) = lock_range(&circuit_at, gap_v, cycles, near_v)?;
        let period_s = f64::from(cycles) / frequency_hz;
        let swing = |supply_v: f64| circuit_at(supply_v).map_or(0.0, |circuit| circuit.ripple_swing_v(period_s));
        Some(LockRange {
            firing_rate_hz: frequency_hz / f64::from(cycles),
            low_supply_v,
            high_supply_v,
            largest_voltage_error: swing(low_supply_v).max(swing(high_supply_v)) / gap_v,
        })
    }
}

fn strength(bench: &Bench, gap_v: f64, residual_v: f64) -> Strength {
    GapLaw::from_bench(bench, gap_v).strength(gap_v, residual_v)
}

/// Mean period, s, with the ripple where there is one. What the curvature of the charging law adds counts only outside of the
/// locks; in a lock the ripple sets the mean.
pub(super) fn rippled_period(bench: &Bench, supply_v: Option<f64>, gap_v: f64) -> Option<f64> {
    let charging = figures::charging(bench, supply_v).ok()?;
    let lag_s = bench.gap.statistical_lag.map_or(0.0, |lag| lag.value);
    let circuit = charging.circuit.with_pause(lag_s);
    let Some(map) = PhaseMap::new(&circuit, strength(bench, gap_v, charging.parts.residual_v)) else {
        return figures::mean_period(bench, supply_v, gap_v);
    };
    let rippled = map.settled().ok()?;
    let both = figures::mean_period(bench, supply_v, gap_v).zip(figures::period(bench, supply_v, gap_v));
    Some(mean_with_curvature(&rippled, both.map_or(0.0, |(mean_s, period_s)| mean_s - period_s)))
}

/// Mean period under ripple with what the curvature of the charging law adds outside of the locks of one firing, s. (A pattern of
/// several firings is so narrow that a gap that scatters is not held by it.)
pub(super) fn mean_with_curvature(rippled: &Rippled, curvature_s: f64) -> f64 {
    rippled.mean_period_s + if rippled.lock.is_some_and(|lock| lock.firings == 1) { 0.0 } else { curvature_s }
}

impl RippleForecast {
    /// In sentences.
    #[must_use]
    pub fn words(&self) -> Vec<String> {
        let mut said = Vec::new();
        let percent = |fraction: f64| format!("{} %", signed(100.0 * fraction, 2));
        if let Some(lock) = &self.lock {
            said.push(format!(
                "locks to {} between {} and {} of the supply ({} wide): the rate stands at {} there, and a voltage read from it would be \
                 off by up to ± {:.2} % at the ends",
                si(self.frequency_hz, "Hz", 4),
                si(lock.low_supply_v, "V", 4),
                si(lock.high_supply_v, "V", 4),
                si(lock.high_supply_v - lock.low_supply_v, "V", 2),
                si(lock.firing_rate_hz, "/s", 5),
                100.0 * lock.largest_voltage_error
            ));
        }
        let error = self.voltage_error.map_or_else(String::new, |error| {
            format!("; a voltage read from the rate is off by {} here", percent(error))
        });
        said.push(match (&self.locked, self.beat_hz) {
            (Some(locked), _) => {
                let count =
                    |n: u32, one: &str, more: &str| if n == 1 { format!("one {one}") } else { format!("{n} {more}") };
                let slips = if self.slips {
                    "; the spread of the gap is wider than that, so it slips in and out of the lock"
                } else {
                    ""
                };
                format!(
                    "locked: {} in {} of the ripple{error}{slips}",
                    count(locked.firings, "firing", "firings"),
                    count(locked.cycles, "period", "periods")
                )
            }
            (None, beat) => format!(
                "not locked: the periods swing between {} and {} with the ripple, beating at {}{error}",
                si(self.shortest_period_s, "s", 4),
                si(self.longest_period_s, "s", 4),
                si(beat.unwrap_or(0.0), "Hz", 3)
            ),
        });
        said
    }
}
