//! The measurement as one object: what the JSON holds and every other output shows.

use crate::estimate::Estimate;
use crate::rhythm::Reading;
use crate::uncertainty::Budget;
use serde::{Deserialize, Serialize};

/// Name of the format, in every measurement.
pub const FORMAT: &str = "gaptone.measurement/1";

/// What was read.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Recording {
    /// File name as given, `-` for standard input.
    pub file: String,
    /// Duration that was analysed, s.
    pub duration_s: f64,
    /// Sample rate, Hz.
    pub sample_rate_hz: u32,
    /// Channels in the file.
    pub channels: u16,
    /// Channel that was analysed: `left`, `right`, `mix` or its number from 1.
    pub channel: String,
    /// Start of the analysed part in the file, s.
    pub from_s: f64,
}

/// One measurement: the recording, what the audio says, and the voltage that a bench implies.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Measurement {
    /// Always [`FORMAT`].
    pub format: String,
    /// What was read.
    pub recording: Recording,
    /// What the audio says.
    #[serde(flatten)]
    pub reading: Reading,
    /// Mean voltage across the gap at breakdown, V; absent without a bench.
    pub gap_voltage_v: Option<Estimate>,
    /// Its standard deviation from firing to firing, V.
    pub gap_voltage_spread_v: Option<Estimate>,
    /// Uncertainty budgets, if they were asked for: gap voltage, its spread, the spacing that it implies.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub budget: Vec<Budget>,
}
