//! What a rendered clip holds: every firing, the settings, and the figures that an ideal reader would find.

use super::render::RenderSettings;
use crate::firing::{EventKind, Firing};
use serde::{Deserialize, Serialize};

/// Name of the format, in every truth.
pub const FORMAT: &str = "gaptone.truth/1";

/// The truth of a clip.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Truth {
    /// Always [`FORMAT`].
    pub format: String,
    /// Version of the program that made the clip.
    pub version: String,
    /// What the clip shows.
    pub title: Option<String>,
    /// Seed of everything that was drawn.
    pub seed: u64,
    /// A click of firing time t peaks at t plus this in the audio, s.
    pub receiver_delay_s: f64,
    /// Peak of an isolated click of the reference voltage, in full scale.
    pub click_full_scale: f64,
    /// Settings of receiver and recorder, defaults filled in.
    pub settings: RenderSettings,
    /// Figures of the firings as they came out; none where fewer than three are on the rhythm.
    pub realised: Option<Realised>,
    /// Text of the bench file.
    pub bench: Option<String>,
    /// Every firing of the train with the largest clicks.
    pub firings: Vec<Firing>,
    /// Weaker trains.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub other_trains: Vec<TrainTruth>,
}

/// A weaker train.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct TrainTruth {
    /// Its figures.
    pub realised: Option<Realised>,
    /// Its firings.
    pub firings: Vec<Firing>,
}

impl TrainTruth {
    /// The truth of a train.
    #[must_use]
    pub fn new(firings: Vec<Firing>) -> Self {
        Self { realised: Realised::of(&firings), firings }
    }
}

impl Truth {
    /// The truth of a clip of one train; title, bench text and weaker trains are the caller's to add.
    #[must_use]
    pub fn new(settings: RenderSettings, firings: Vec<Firing>, receiver_delay_s: f64, click_full_scale: f64) -> Self {
        Self {
            format: FORMAT.to_owned(),
            version: env!("CARGO_PKG_VERSION").to_owned(),
            title: None,
            seed: settings.seed,
            receiver_delay_s,
            click_full_scale,
            settings,
            realised: Realised::of(&firings),
            bench: None,
            firings,
            other_trains: Vec::new(),
        }
    }
}

/// Figures of a train, heard or not; extra strikes are left out.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Realised {
    /// Firings on the rhythm, missed ones among them.
    pub firings: u64,
    /// How many of them are not heard.
    pub missed: u64,
    /// Extra strikes beside them.
    pub extra: u64,
    /// (n − 1)/(last − first), Hz.
    pub firing_rate_hz: f64,
    /// Mean period, s.
    pub period_s: f64,
    /// Standard deviation of the periods about a straight line through them, s.
    pub period_jitter_s: f64,
    /// Standard deviation of the difference of neighbouring periods, s.
    pub cycle_jitter_s: f64,
    /// Relative change of the rate per second, 1/s, from the straight line at its middle.
    pub drift_per_s: f64,
    /// Mean firing voltage, V.
    pub gap_voltage_v: f64,
    /// Its standard deviation from firing to firing, V.
    pub gap_voltage_spread_v: f64,
}

impl Realised {
    /// The figures of a list of firings in order of time; none where fewer than four are on the rhythm.
    #[must_use]
    pub fn of(firings: &[Firing]) -> Option<Self> {
        let count = |kind| firings.iter().filter(|f| f.kind == kind).count() as u64;
        let regular: Vec<&Firing> = firings.iter().filter(|f| f.kind != EventKind::Extra).collect();
        if regular.len() < 4 {
            return None;
        }
        let periods: Vec<f64> = regular.windows(2).map(|pair| pair[1].time_s - pair[0].time_s).collect();
        let middles: Vec<f64> = regular.windows(2).map(|pair| 0.5 * (pair[1].time_s + pair[0].time_s)).collect();
        let voltages: Vec<f64> = regular.iter().map(|f| f.voltage_v).collect();
        let differences: Vec<f64> = periods.windows(2).map(|pair| pair[1] - pair[0]).collect();
        let (period_s, _) = moments(&periods);
        let (gap_voltage_v, gap_voltage_spread_v) = moments(&voltages);
        let (slope, period_jitter_s) = straight_line(&middles, &periods);
        Some(Self {
            firings: regular.len() as u64,
            missed: count(EventKind::Missed),
            extra: count(EventKind::Extra),
            firing_rate_hz: 1.0 / period_s,
            period_s,
            period_jitter_s,
            cycle_jitter_s: moments(&differences).1,
            drift_per_s: -slope / period_s,
            gap_voltage_v,
            gap_voltage_spread_v,
        })
    }
}

/// Mean and standard deviation (n − 1).
fn moments(values: &[f64]) -> (f64, f64) {
    let n = values.len() as f64;
    let mean = values.iter().sum::<f64>() / n;
    let squares: f64 = values.iter().map(|v| (v - mean).powi(2)).sum();
    (mean, (squares / (n - 1.0)).sqrt())
}

/// Slope of the least-squares line and standard deviation about it (n − 2).
fn straight_line(x: &[f64], y: &[f64]) -> (f64, f64) {
    let n = x.len() as f64;
    let (mean_x, mean_y) = (x.iter().sum::<f64>() / n, y.iter().sum::<f64>() / n);
    let (mut xx, mut xy) = (0.0, 0.0);
    for (x, y) in x.iter().zip(y) {
        xx += (x - mean_x).powi(2);
        xy += (x - mean_x) * (y - mean_y);
    }
    let slope = if xx > 0.0 { xy / xx } else { 0.0 };
    let squares: f64 = x.iter().zip(y).map(|(x, y)| (y - mean_y - slope * (x - mean_x)).powi(2)).sum();
    (slope, (squares / (n - 2.0)).sqrt())
}
