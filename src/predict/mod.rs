//! Before power: does the gap fire at this supply setting, how often, how steadily, what will it sound like, what is
//! stored on the capacitor.
//!
//! Works from what the bench states; a figure for which a key is missing is absent and a note names the key. Ripple and
//! recovery of the gap are not in the figures; notes say what they do. Everything in SI units.

mod hazard;
mod notes;
mod period;
mod pitch;
mod propagate;
mod target;
mod text;

pub use hazard::{BLED_V, CAUTIONS, bleed_time_s, charge_c, energy_j};
pub use pitch::{A4_HZ, Hearing, Pitch, pitch};
pub use target::{Sweep, supply_for_rate, sweep};
pub use text::text;

use crate::bench::{Bench, Quantity, Tolerance};
use crate::estimate::Estimate;
use period::Parts;
use propagate::{Propagated, propagate};
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// Name of the format, in every prediction.
pub const FORMAT: &str = "gaptone.prediction/1";

/// Why nothing can be predicted.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum PredictError {
    /// A supply setting that is no voltage.
    #[error("a supply voltage of {0} V is not possible; it must be above 0 V and finite")]
    Supply(f64),
    /// A range of settings with no extent.
    #[error(
        "a range of supply voltages needs at least two settings from low to high; given are {count} from {low} V to {high} V"
    )]
    Range {
        /// Low end, V.
        low: f64,
        /// High end, V.
        high: f64,
        /// Number of settings.
        count: usize,
    },
    /// A firing rate that is none.
    #[error("a firing rate of {0} Hz is not possible; it must be above 0 Hz and finite")]
    Rate(f64),
    /// The bench lacks what the question needs.
    #[error("the bench does not say enough for a supply setting: {0}")]
    Missing(String),
    /// No supply setting gives the rate.
    #[error(
        "no supply setting up to {most_v} V gives {rate_hz} firings a second; the bench reaches {low_hz:.4} to {high_hz:.4}"
    )]
    Unreachable {
        /// Rate asked for, Hz.
        rate_hz: f64,
        /// Least rate, Hz.
        low_hz: f64,
        /// Greatest rate, Hz.
        high_hz: f64,
        /// Greatest supply voltage that was tried, V.
        most_v: f64,
    },
}

/// What a bench will do at one supply setting. A figure that the bench does not allow is none, and a note says why.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Prediction {
    /// Always [`FORMAT`].
    pub format: String,
    /// Title of the bench.
    pub title: Option<String>,
    /// Supply setting, V.
    pub supply_v: Option<f64>,
    /// Whether the gap fires; none if the bench does not say enough.
    pub fires: Option<bool>,
    /// Why it fires or not, in one sentence.
    pub reason: String,
    /// Least supply voltage at which it fires, V.
    pub least_supply_v: Option<f64>,
    /// Firings per second.
    pub firing_rate_hz: Option<Estimate>,
    /// Time from one firing to the next, s.
    pub period_s: Option<Estimate>,
    /// Voltage across the gap at breakdown, V.
    pub gap_voltage_v: Option<Estimate>,
    /// Standard deviation of single periods from the spread of the gap, s.
    pub period_jitter_s: Option<Estimate>,
    /// Time from switching on with an empty capacitor to the first firing, s.
    pub first_firing_s: Option<f64>,
    /// Energy on the capacitor at the gap voltage, or at the voltage it reaches if the gap does not fire, J.
    pub stored_energy_j: Option<f64>,
    /// Time for the leakage to bleed it from there to 60 V, s; none if nothing bleeds it.
    pub bleed_time_s: Option<f64>,
    /// How the rate is heard.
    pub pitch: Option<Pitch>,
    /// Mean current out of the supply, A.
    pub supply_current_a: Option<f64>,
    /// Mean power out of the supply, W.
    pub supply_power_w: Option<f64>,
    /// What is stored at the highest voltage that the capacitor can take, against published thresholds.
    pub hazards: Vec<String>,
    /// Always shown.
    pub cautions: Vec<String>,
    /// What is missing, assumed or doubtful.
    pub notes: Vec<String>,
}

/// What the whole prediction works from.
struct Setting<'a> {
    bench: &'a Bench,
    parts: Parts,
    /// Supply voltage as set; its tolerance is that of `supply.voltage`, relative.
    supply: Option<Quantity>,
    gap: Option<Quantity>,
    /// Highest voltage of the capacitor if the gap never fires, V.
    reach_v: Option<f64>,
    fires: Option<bool>,
}

/// Predicts what a bench does at a supply voltage in V; without one at `supply.voltage` of the bench.
///
/// # Errors
/// [`PredictError::Supply`] if the setting is not a positive finite voltage. What the bench lacks is no error: the
/// figures that need it are absent and `notes` name the key.
pub fn predict(bench: &Bench, supply_v: Option<f64>) -> Result<Prediction, PredictError> {
    let setting = Setting::new(bench, supply_v)?;
    let charged = setting.propagated(period::period);
    let period_s = charged.map(Propagated::positive);
    let jitter = setting.propagated(propagate::jitter);
    let firing_rate_hz = period_s.map(Estimate::reciprocal);
    let figure = |figure: propagate::Figure| setting.figure(figure);
    let stored_v = setting.stored_v();
    let stored = setting.parts.capacitance_f.zip(stored_v);
    let supply_current_a = figure(period::mean_current);
    Ok(Prediction {
        format: FORMAT.to_owned(),
        title: bench.title.clone(),
        supply_v: setting.supply.map(|supply| supply.value),
        fires: setting.fires,
        reason: notes::reason(&setting),
        least_supply_v: setting.least_supply_v(),
        firing_rate_hz,
        period_s,
        gap_voltage_v: setting.gap.map(|gap| Estimate::normal(gap.value, gap.u())),
        period_jitter_s: jitter.map(Propagated::positive),
        first_firing_s: figure(period::first_firing),
        stored_energy_j: stored.map(|(c, v)| energy_j(c, v)),
        bleed_time_s: stored.zip(setting.parts.leakage_ohm).map(|((c, v), leakage)| bleed_time_s(leakage, c, v)),
        pitch: firing_rate_hz.and_then(|rate| pitch(rate.value)),
        supply_current_a,
        supply_power_w: supply_current_a.zip(setting.supply).map(|(current, supply)| current * supply.value),
        hazards: notes::hazards(&setting),
        cautions: CAUTIONS.map(str::to_owned).to_vec(),
        notes: notes::notes(&setting, charged),
    })
}

impl<'a> Setting<'a> {
    fn new(bench: &'a Bench, supply_v: Option<f64>) -> Result<Self, PredictError> {
        if let Some(volts) = supply_v
            && !(volts.is_finite() && volts > 0.0)
        {
            return Err(PredictError::Supply(volts));
        }
        let supply = supply_v.map(|volts| set_to(bench.supply.voltage, volts)).or(bench.supply.voltage);
        let parts = Parts::of(bench);
        let mut setting = Self { bench, parts, supply, gap: bench.gap.voltage, reach_v: None, fires: None };
        setting.reach_v = setting.drive_v().and_then(|volts| period::reach(bench, volts));
        setting.fires = setting.reach_v.zip(setting.gap).map(|(reach, gap)| gap.value < reach);
        Ok(setting)
    }

    /// The supply voltage for the charging law: a current source without a stated voltage has no ceiling.
    fn drive_v(&self) -> Option<f64> {
        let ideal = self.parts.current_a.map(|_| f64::INFINITY);
        self.supply.map(|supply| supply.value).or(ideal)
    }

    fn figure(&self, figure: propagate::Figure) -> Option<f64> {
        figure(self.bench, self.drive_v()?, self.gap?.value).filter(|value| value.is_finite())
    }

    fn propagated(&self, figure: propagate::Figure) -> Option<Propagated> {
        let supply = self.supply.or_else(|| self.drive_v().map(Quantity::exact))?;
        propagate(self.bench, supply, self.gap?, figure).filter(|found| found.value.is_finite() && found.u.is_finite())
    }

    /// Voltage at which the stored energy is stated, V.
    fn stored_v(&self) -> Option<f64> {
        match self.fires {
            Some(true) => self.gap.map(|gap| gap.value),
            Some(false) => self.reach_v,
            None => self.gap.map(|gap| gap.value).or(self.reach_v),
        }
        .filter(|volts| volts.is_finite())
    }

    /// Highest voltage that the capacitor can take, V: the gap may fail to fire.
    fn worst_v(&self) -> Option<f64> {
        let reach = self.reach_v.filter(|volts| volts.is_finite());
        match (reach, self.gap) {
            (Some(reach), Some(gap)) => Some(reach.max(gap.value)),
            (reach, gap) => reach.or(gap.map(|gap| gap.value)),
        }
    }

    /// Least supply voltage at which the gap fires, V; none if there is none or the bench does not say.
    fn least_supply_v(&self) -> Option<f64> {
        let gap_v = self.gap?.value;
        // The leakage divides the supply voltage; its current must be had at the gap voltage too.
        let divided = match (self.parts.current_a, self.parts.resistance_ohm, self.parts.leakage_ohm) {
            (None, Some(r), Some(leakage)) => gap_v * (r + leakage) / leakage,
            _ => gap_v,
        };
        let reach_v = period::reach(self.bench, 2.0 * divided)?;
        (reach_v > gap_v).then_some(divided)
    }
}

/// A quantity set to another value, with the same relative tolerance: the same meter reads it.
fn set_to(stated: Option<Quantity>, value: f64) -> Quantity {
    let Some(stated) = stated else { return Quantity::exact(value) };
    let scale = value / stated.value;
    let tolerance = match stated.tolerance {
        Tolerance::Exact => Tolerance::Exact,
        Tolerance::Limit(half_width) => Tolerance::Limit(half_width * scale),
        Tolerance::Standard(u) => Tolerance::Standard(u * scale),
    };
    Quantity { value, tolerance }
}

#[cfg(test)]
mod tests;
