//! What a calibration gives: also the object of its JSON.

use super::setting::Setting;
use crate::bench::si;
use crate::estimate::Estimate;
use serde::{Deserialize, Serialize};

/// Name of the format, in every calibration.
pub const CALIBRATION_FORMAT: &str = "gaptone.calibration/1";

/// Why there is no calibration.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum NoCalibration {
    /// Not enough settings.
    #[error(
        "{usable} of the settings can be used; a calibration needs recordings with a rhythm at {needed} supply settings at \
         least (as many as it has to find parameters), better at one more"
    )]
    TooFew {
        /// How many can be used.
        usable: usize,
        /// How many there have to be.
        needed: usize,
    },
    /// All supplies are the same.
    #[error(
        "the supplies lie between {} and {}, which is as good as equal; record at settings that differ by 10 % or more",
        si(*.lowest_v, "V", 4),
        si(*.highest_v, "V", 4)
    )]
    EqualSupplies {
        /// Lowest, V.
        lowest_v: f64,
        /// Highest, V.
        highest_v: f64,
    },
    /// A period is shorter than the conduction time.
    #[error("{name}: the period is shorter than gap.conduction_time; correct it in the bench file")]
    WithinConduction {
        /// The recording.
        name: String,
    },
    /// The settings do not tell the parameters apart.
    #[error(
        "the settings do not determine time constant and gap voltage: no charging law through a resistor fits them; a constant \
         current, a current limit or wrong labels do that, or settings too close together"
    )]
    Undetermined,
}

/// Gap voltage that falls with the rate.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Recovery {
    /// Share of its strength that the gap lacks right after a spark.
    pub depth: Estimate,
    /// Time constant of the recovery as the bench states it, s.
    pub time_s: f64,
}

/// What leaving a setting out changes: with it over without it, less one.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Influence {
    /// Of the time constant.
    pub time_constant: f64,
    /// Of the gap voltage.
    pub gap_voltage: f64,
}

/// Slope of the click sizes against the periods, over what the charging law demands.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct ClickSizes {
    /// 1 if they agree.
    pub ratio: f64,
    /// Standard uncertainty.
    pub u: f64,
}

/// The further setting that would help most.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct NextSetting {
    /// Supply voltage, V.
    pub supply_v: f64,
    /// Standard uncertainty of the time constant with it, s.
    pub time_constant_u_s: f64,
    /// Standard uncertainty of the gap voltage with it, without the meter's scale, V.
    pub gap_voltage_u_v: f64,
}

/// A point of the fitted law.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct LawPoint {
    /// Firings per second.
    pub firing_rate_hz: f64,
    /// Supply voltage that the law demands for them, V.
    pub supply_v: f64,
    /// Standard uncertainty of that by the fit, without the meter's scale, V.
    pub u_v: f64,
}

/// One setting in the result.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct SettingResult {
    /// Recording, or stretch of it.
    pub file: String,
    /// Supply reading, V.
    pub supply_v: f64,
    /// Firings per second.
    pub firing_rate_hz: Option<Estimate>,
    /// True if the fit uses it.
    pub used: bool,
    /// (Reading − law)/standard uncertainty.
    pub residual: Option<f64>,
    /// Supply voltage that its period stands for by the law, V.
    pub implied_supply_v: Option<f64>,
    /// What leaving it out changes; none if too few would remain.
    pub influence: Option<Influence>,
    /// How its click sizes follow the voltage; none where they scatter too much to tell.
    pub click_size: Option<ClickSizes>,
    /// Why it is not used.
    pub left_out: Option<String>,
}

impl SettingResult {
    pub(super) fn unused(setting: &Setting) -> Self {
        Self {
            file: setting.name.clone(),
            supply_v: setting.supply.value,
            firing_rate_hz: setting.firing_rate_hz,
            used: false,
            residual: None,
            implied_supply_v: None,
            influence: None,
            click_size: None,
            left_out: setting.left_out.clone(),
        }
    }
}

/// Time constant and gap voltage from several settings.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Calibration {
    /// Always [`CALIBRATION_FORMAT`].
    pub format: String,
    /// Time constant R·C, without leakage, s.
    pub time_constant_s: Estimate,
    /// Mean voltage across the gap at breakdown, V; the scale of the supply meter is in its uncertainty as far as a bench
    /// states it.
    pub gap_voltage_v: Estimate,
    /// Residual voltage, where it was fitted, V.
    pub residual_voltage_v: Option<Estimate>,
    /// Recovery of the gap, where the settings demand it.
    pub recovery: Option<Recovery>,
    /// Correlation of time constant and gap voltage.
    pub correlation: f64,
    /// The settings in the order given.
    pub settings: Vec<SettingResult>,
    /// The fitted law over the rates of the settings, from low to high rates.
    pub law: Vec<LawPoint>,
    /// Weighted sum of squares.
    pub chi_square: f64,
    /// Settings used less parameters fitted.
    pub degrees_of_freedom: usize,
    /// Probability of a chi-square as large or larger; none without degrees of freedom.
    pub chi_square_probability: Option<f64>,
    /// Relative standard uncertainty of the supply meter's scale that the gap voltage carries.
    pub supply_scale_u: f64,
    /// The further setting that would help most.
    pub next_setting: Option<NextSetting>,
    /// What a person should know.
    pub notes: Vec<String>,
}
