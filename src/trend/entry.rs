//! One entry of a log: what a measurement leaves behind for later comparison.

use super::date::Moment;
use crate::bench::Electrodes;
use crate::estimate::Estimate;
use crate::model::air::{Air, UNSTATED};
use crate::rhythm::{FiringCounts, Verdict};
use serde::{Deserialize, Serialize};

/// Name of the format, in every line of a log.
pub const LOG_FORMAT: &str = "gaptone.log/1";

/// What the names of this and of every later format begin with; the version follows.
pub const LOG_FAMILY: &str = "gaptone.log/";

/// Seconds of an hour.
pub const HOUR_S: f64 = 3600.0;

/// A reading with its standard uncertainty, both in the unit that the name of its field carries.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Known {
    /// Value.
    pub value: f64,
    /// Standard uncertainty.
    #[serde(default)]
    pub u: f64,
}

/// Weather at the gap; what was not read is absent.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
pub struct Weather {
    /// Temperature, K.
    pub temperature_k: Option<Known>,
    /// Pressure, Pa.
    pub pressure_pa: Option<Known>,
    /// Relative humidity, 0..1.
    pub humidity: Option<Known>,
}

impl Weather {
    /// True if at least temperature and pressure, which set the density, are known.
    #[must_use]
    pub fn gives_density(&self) -> bool {
        self.temperature_k.is_some() && self.pressure_pa.is_some()
    }

    /// As a state of the air; what was not read is that of standard air.
    #[must_use]
    pub fn air(&self) -> Air {
        let standard = Air::default();
        let or = |known: Option<Known>, value: f64| known.map_or(value, |known| known.value);
        Air {
            temperature_k: or(self.temperature_k, standard.temperature_k),
            pressure_pa: or(self.pressure_pa, standard.pressure_pa),
            relative_humidity: or(self.humidity, standard.relative_humidity),
        }
    }

    /// Relative standard uncertainty that the weather brings to a breakdown voltage: temperature and pressure through the
    /// density, humidity by 0.2 % for each g/m³ (IEC 60052) where it counts. What was not read is anywhere within the limits
    /// of a heated room near sea level.
    #[must_use]
    pub fn relative_u(&self, humidity_counts: bool) -> f64 {
        let air = self.air();
        let u = |known: Option<Known>, limit: f64| known.map_or(limit / 3f64.sqrt(), |known| known.u);
        let temperature = u(self.temperature_k, UNSTATED[0]) / air.temperature_k;
        let pressure = u(self.pressure_pa, UNSTATED[1]) / air.pressure_pa;
        let grams = air.absolute_humidity_g_per_m3() / air.relative_humidity.max(0.01);
        let humidity = if humidity_counts { 0.002 * grams * u(self.humidity, UNSTATED[2]) } else { 0.0 };
        temperature.hypot(pressure).hypot(humidity)
    }
}

/// What of the bench an entry must remember.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct LoggedBench {
    /// Title of the bench.
    pub title: Option<String>,
    /// Supply setting, V.
    pub supply_v: Option<f64>,
    /// Shape of the electrodes.
    pub electrodes: Option<Electrodes>,
    /// Their diameter, m.
    pub diameter_m: Option<f64>,
}

/// One entry of a log; a line of JSON.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Entry {
    /// Always [`LOG_FORMAT`].
    pub format: String,
    /// When it was measured, or recorded if that was said.
    pub time: Moment,
    /// Name of the recording.
    pub file: String,
    /// What was heard.
    pub verdict: Verdict,
    /// Counts.
    pub firings: FiringCounts,
    /// For how long the gap fired in the recording, s.
    pub firing_time_s: f64,
    /// Hours that the gap had fired by then, where an hour meter or a note says so.
    #[serde(default)]
    pub hour_meter_h: Option<f64>,
    /// Firings per second.
    pub firing_rate_hz: Option<Estimate>,
    /// Standard deviation of single periods, s.
    pub period_jitter_s: Option<Estimate>,
    /// Gap voltage, V, in the air of the day.
    pub gap_voltage_v: Option<Estimate>,
    /// Its standard deviation from firing to firing, V.
    pub gap_voltage_spread_v: Option<Estimate>,
    /// The bench; absent if none was given.
    #[serde(default)]
    pub bench: Option<LoggedBench>,
    /// The weather.
    #[serde(default)]
    pub air: Weather,
}

impl Entry {
    /// Title of its bench; empty without one.
    #[must_use]
    pub fn title(&self) -> &str {
        self.bench.as_ref().and_then(|bench| bench.title.as_deref()).unwrap_or_default()
    }

    /// Share of the firings that the audio does not show; none without a rhythm.
    #[must_use]
    pub fn missed_share(&self) -> Option<f64> {
        let all = self.firings.on_rhythm + self.firings.missed;
        (self.firings.on_rhythm > 0).then(|| self.firings.missed as f64 / all as f64)
    }

    /// Period jitter as a share of the period.
    #[must_use]
    pub fn relative_jitter(&self) -> Option<f64> {
        Some(self.period_jitter_s?.value * self.firing_rate_hz?.value)
    }
}
