//! Before power: does the gap fire at this supply setting, how often, how steadily, what will it sound like, what is
//! stored on the capacitor.
//!
//! Works from what the bench states; a figure for which a key is missing is absent and a note names the key. Everything in
//! SI units.

mod burst;
mod figures;
mod hazard;
mod jitter;
mod notes;
mod pitch;
mod propagate;
mod remarks;
mod ripple;
mod setting;
mod target;
mod text;

pub use burst::{BurstForecast, ModeForecast, PeakReadings};
pub use hazard::{BLED_V, CAUTIONS, bleed_time_s, charge_c, energy_j};
pub use jitter::{JitterForecast, Simulated};
pub use pitch::{A4_HZ, Hearing, NotATarget, Pitch, parse_target, pitch};
pub use ripple::{LockRange, LockedPattern, RippleForecast};
pub use target::{Alternative, Sweep, Target, supply_for_rate, sweep, target};
pub use text::{figure_rows, lists, sweep_text, text};

use crate::bench::{Bench, si};
use crate::estimate::Estimate;
use crate::model::breakdown::{GapVoltage, NoGapVoltage};
use propagate::Propagated;
use serde::{Deserialize, Serialize};
use setting::Setting;
use thiserror::Error;

/// Name of the format, in every prediction.
pub const FORMAT: &str = "gaptone.prediction/1";

/// Why nothing can be predicted.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum PredictError {
    /// A supply setting that is no voltage.
    #[error("a supply voltage of {0} V is not possible; it must be above 0 V and finite")]
    Supply(f64),
    /// The breakdown law does not hold for this gap.
    #[error(transparent)]
    Gap(#[from] NoGapVoltage),
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
        "no supply setting up to {} gives {rate_hz} firings a second; the bench reaches {} to {}",
        si(*most_v, "V", 4),
        si(*low_hz, "", 4),
        si(*high_hz, "", 4)
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
    /// Standard deviation of single periods, s: spread of the gap, statistical lag and ripple together.
    pub period_jitter_s: Option<Estimate>,
    /// Time from switching on with an empty capacitor to the first firing, s.
    pub first_firing_s: Option<f64>,
    /// Energy on the capacitor at the gap voltage, or at the voltage it reaches if the gap does not fire, J.
    pub stored_energy_j: Option<f64>,
    /// Time for the leakage to bleed it from there to 60 V, s; none if nothing bleeds it.
    pub bleed_time_s: Option<f64>,
    /// How the rate is heard.
    pub pitch: Option<Pitch>,
    /// Pitch at the low and at the high end of the interval of the rate.
    pub pitch_band: Option<(Pitch, Pitch)>,
    /// What a volt of supply does to the rate, Hz/V; ripple left out.
    pub slope_hz_per_v: Option<f64>,
    /// Mean current out of the supply, A.
    pub supply_current_a: Option<f64>,
    /// Mean power out of the supply, W.
    pub supply_power_w: Option<f64>,
    /// Mean power in the charging resistor, W.
    pub resistor_power_w: Option<f64>,
    /// Greatest voltage across the charging resistor, V.
    pub resistor_voltage_v: Option<f64>,
    /// Share of the time for which the gap conducts.
    pub duty: Option<f64>,
    /// Parts of the jitter, and simulated firings beside the formulas.
    pub jitter: Option<JitterForecast>,
    /// Relative change of the rate per second that the drift of the gap makes, 1/s.
    pub rate_drift_per_s: Option<f64>,
    /// What the ripple of the supply does.
    pub ripple: Option<RippleForecast>,
    /// The ring of every spark.
    pub burst: Option<BurstForecast>,
    /// Where the gap voltage comes from, with its budget.
    pub gap: Option<GapVoltage>,
    /// How to get the rate that was asked for, if one was.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub target: Option<Target>,
    /// What is stored at the highest voltage that the capacitor can take, against published thresholds.
    pub hazards: Vec<String>,
    /// Always shown.
    pub cautions: Vec<String>,
    /// What is missing, assumed or doubtful.
    pub notes: Vec<String>,
}

/// Predicts what a bench does at a supply voltage in V; without one at `supply.voltage` of the bench.
///
/// # Errors
/// [`PredictError::Supply`] if the setting is not a positive finite voltage. What the bench lacks is no error: the
/// figures that need it are absent and `notes` name the key.
pub fn predict(bench: &Bench, supply_v: Option<f64>) -> Result<Prediction, PredictError> {
    forecast(&Setting::new(bench, supply_v)?, true, &mut ripple::Locks::new())
}

/// The prediction of a setting. Without `thorough` no firings are simulated; `locks` keeps the locks of a bench from one
/// setting to the next.
fn forecast(setting: &Setting<'_>, thorough: bool, locks: &mut ripple::Locks) -> Result<Prediction, PredictError> {
    let bench = setting.bench;
    let rippled = setting.rippled();
    let smooth = setting.propagated(figures::mean_period);
    let curvature_s = setting.curvature_s();
    // At the edge of firing there is a period only with the ripple.
    let charged = smooth.or_else(|| setting.propagated_at_edge(ripple::rippled_period)).map(|charged| {
        let mean_s = rippled.map_or(charged.value, |rippled| ripple::mean_with_curvature(&rippled, curvature_s));
        Propagated { value: mean_s, ..charged }
    });
    let period_s = charged.map(Propagated::positive);
    let spread = setting.propagated(figures::spread_jitter);
    let jitter =
        charged.and_then(|_| setting.jitter_forecast(spread.map(|spread| spread.value), rippled.as_ref(), thorough));
    let firing_rate_hz = period_s.map(Estimate::reciprocal);
    let stored = figures::capacitance_f(&setting.parts).zip(setting.stored_v());
    let means = setting.means();
    let supply_current_a = means.map(|means| means.supply_a);
    let mut notes = notes::notes(setting, charged, jitter.as_ref());
    let burst = setting.burst_forecast().unwrap_or_else(|refused| {
        notes.push(refused);
        None
    });
    Ok(Prediction {
        format: FORMAT.to_owned(),
        title: bench.title.clone(),
        supply_v: setting.supply.map(|supply| supply.value),
        fires: setting.fires,
        reason: notes::reason(setting),
        least_supply_v: setting.least_supply_v(),
        firing_rate_hz,
        period_s,
        gap_voltage_v: setting.gap.as_ref().map(|gap| Estimate::normal(gap.voltage_v, gap.u_v)),
        period_jitter_s: jitter.as_ref().map(|jitter| jitter_estimate(jitter, spread)),
        first_firing_s: setting.figure(figures::first_firing),
        stored_energy_j: stored.map(|(c, v)| energy_j(c, v)),
        bleed_time_s: stored.zip(setting.parts.leakage_ohm).map(|((c, v), leakage)| bleed_time_s(leakage, c, v)),
        pitch: firing_rate_hz.and_then(|rate| pitch(rate.value)),
        pitch_band: firing_rate_hz.and_then(|rate| pitch(rate.low).zip(pitch(rate.high))),
        slope_hz_per_v: setting.slope_hz_per_v(),
        supply_current_a,
        supply_power_w: supply_current_a.zip(setting.supply).map(|(current, supply)| current * supply.value),
        resistor_power_w: means.and_then(|means| means.resistor_w),
        resistor_voltage_v: setting.resistor_voltage_v(),
        duty: period_s.zip(bench.gap.conduction_time).map(|(period, conducting)| conducting.value / period.value),
        target: None,
        hazards: notes::hazards(setting),
        cautions: CAUTIONS.map(str::to_owned).to_vec(),
        notes,
        ripple: rippled.and_then(|rippled| setting.ripple_forecast(&rippled, thorough, locks)),
        rate_drift_per_s: setting.rate_drift_per_s(),
        jitter,
        burst,
        gap: setting.gap.clone(),
    })
}

/// The whole scatter of the periods, with the relative uncertainty of its part from the spread.
fn jitter_estimate(jitter: &JitterForecast, spread: Option<Propagated>) -> Estimate {
    let share = spread.map_or(0.0, |spread| if spread.value > 0.0 { spread.u / spread.value } else { 0.0 });
    Propagated { value: jitter.total_s, u: share * jitter.total_s, at_the_edge: false }.positive()
}

#[cfg(test)]
mod tests;
