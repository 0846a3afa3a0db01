//! What the ripple of the supply makes of a setting: locks, beats, and the error of a voltage read from the rate.

use super::figures::{self, charging};
use super::setting::Setting;
use crate::bench::{Bench, si};
use crate::model::charging::Strength;
use crate::model::firings::GapLaw;
use crate::model::locking::{PhaseMap, Rippled, lock_range};
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

/// A range of settings over which the gap locks with one firing in a whole number of ripple periods.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct LockRange {
    /// Firing rate in the lock, Hz.
    pub firing_rate_hz: f64,
    /// Lowest supply voltage of the lock, V.
    pub low_supply_v: f64,
    /// Highest supply voltage of the lock, V.
    pub high_supply_v: f64,
    /// Greatest error of a gap voltage read from the rate within the lock, as a fraction; either sign, at its ends.
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
    /// The lock of one firing in which the setting is, or to which it is near.
    pub lock: Option<LockRange>,
    /// Frequency at which the periods beat outside of a lock, Hz.
    pub beat_hz: Option<f64>,
    /// Error of a gap voltage that is read from the mean rate here, as a fraction.
    pub voltage_error: Option<f64>,
}

/// Locks that were found, by ripple periods per firing, for one bench.
pub(super) type Locks = BTreeMap<u32, Option<LockRange>>;

impl Setting<'_> {
    /// The settled firing under ripple; none without ripple or without firing.
    pub(super) fn rippled(&self) -> Option<Rippled> {
        let charging = self.charging.as_ref()?;
        PhaseMap::new(&charging.circuit, strength(self.bench, self.gap_v()?, self.parts.residual_v))?.settled().ok()
    }

    /// What the ripple makes of the setting. `locks` keeps what does not depend on the setting.
    pub(super) fn ripple_forecast(&self, rippled: &Rippled, locks: &mut Locks) -> Option<RippleForecast> {
        let circuit = self.charging.as_ref()?.circuit;
        let ripple = circuit.ripple()?;
        let (gap_v, supply_v) = (self.gap_v()?, self.supply_v()?);
        let mean_s = rippled.mean_period_s;
        let locked = rippled.lock.map(|lock| LockedPattern {
            firings: lock.firings,
            cycles: lock.cycles,
            firing_rate_hz: ripple.frequency_hz * f64::from(lock.firings) / f64::from(lock.cycles),
        });
        let cycles = (mean_s * ripple.frequency_hz).round();
        let lock = (1.0..=MOST_CYCLES).contains(&cycles).then_some(cycles as u32).and_then(|cycles| {
            *locks.entry(cycles).or_insert_with(|| self.lock(gap_v, cycles, ripple.frequency_hz, supply_v))
        });
        let near = |lock: &LockRange| {
            let reach_v = NEAR * (lock.high_supply_v - lock.low_supply_v);
            (lock.low_supply_v - reach_v..lock.high_supply_v + reach_v).contains(&supply_v)
        };
        // The nearest ratio of whole numbers sets the beat: n firings in one period or one firing in n periods.
        let (rate_hz, f) = (1.0 / mean_s, ripple.frequency_hz);
        let beat = if rate_hz > f { (rate_hz / f).round() * f - rate_hz } else { (f / rate_hz).round() * rate_hz - f };
        let smooth = circuit.with_ripple(None);
        Some(RippleForecast {
            frequency_hz: f,
            fraction: ripple.fraction,
            period_sd_s: rippled.period_sd_s,
            shortest_period_s: rippled.shortest_s,
            longest_period_s: rippled.longest_s,
            locked,
            lock: lock.filter(near),
            beat_hz: locked.is_none().then_some(beat.abs()),
            voltage_error: smooth.gap_voltage_v(mean_s).ok().map(|implied_v| implied_v / gap_v - 1.0),
        })
    }

    fn lock(&self, gap_v: f64, cycles: u32, frequency_hz: f64, near_v: f64) -> Option<LockRange> {
        let circuit_at = |supply_v: f64| charging(self.bench, Some(supply_v)).ok().map(|charging| charging.circuit);
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

/// Mean period under ripple, s: where there is no period without it.
pub(super) fn rippled_period(bench: &Bench, supply_v: Option<f64>, gap_v: f64) -> Option<f64> {
    let charging = figures::charging(bench, supply_v).ok()?;
    let map = PhaseMap::new(&charging.circuit, strength(bench, gap_v, charging.parts.residual_v))?;
    map.settled().ok().map(|rippled| rippled.mean_period_s)
}

impl RippleForecast {
    /// In sentences.
    #[must_use]
    pub fn words(&self) -> Vec<String> {
        let mut said = Vec::new();
        let percent = |fraction: f64| format!("{:+.2} %", 100.0 * fraction);
        if let Some(lock) = &self.lock {
            said.push(format!(
                "locks to {} between {} and {} of the supply: the rate stands at {} there, and a voltage read from it would be \
                 off by up to ± {:.2} %",
                si(self.frequency_hz, "Hz", 4),
                si(lock.low_supply_v, "V", 4),
                si(lock.high_supply_v, "V", 4),
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
                format!(
                    "locked: {} in {} of the ripple{error}",
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
