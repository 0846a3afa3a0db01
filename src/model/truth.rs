//! What a rendered clip holds: every firing, the settings, and the figures that an ideal reader would find.

use super::finish::FinishTruth;
use super::firings::{GapLaw, Outage, Plan, Realised, Rhythm, Start};
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
    /// Name of the generator of random numbers.
    pub generator: String,
    /// Seed of phases, noise and programme; each train has its own.
    pub seed: u64,
    /// A click of firing time t peaks at t plus this in the audio, s.
    pub receiver_delay_s: f64,
    /// Peak of an isolated click of the reference voltage, in full scale.
    pub click_full_scale: f64,
    /// Settings of receiver and recorder, defaults filled in.
    pub settings: RenderSettings,
    /// Text of the bench file.
    pub bench: Option<String>,
    /// What was laid over that bench: keys and values, SI or as written.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub changes: Vec<(String, String)>,
    /// Level, fades and second channel of the file; none where the samples are as they came from the recorder.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub finish: Option<FinishTruth>,
    /// The trains, the one with the largest clicks first; none in a clip without a gap.
    pub trains: Vec<TrainTruth>,
}

impl Truth {
    /// The truth of a clip; title and bench text are the caller's to add.
    #[must_use]
    pub fn new(
        settings: RenderSettings,
        trains: Vec<TrainTruth>,
        receiver_delay_s: f64,
        click_full_scale: f64,
    ) -> Self {
        Self {
            format: FORMAT.to_owned(),
            version: env!("CARGO_PKG_VERSION").to_owned(),
            title: None,
            generator: "xoshiro256++".to_owned(),
            seed: settings.seed,
            receiver_delay_s,
            click_full_scale,
            settings,
            bench: None,
            changes: Vec::new(),
            finish: None,
            trains,
        }
    }
}

/// The truth of one train.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct TrainTruth {
    /// What it was drawn from.
    pub drawn: Option<Drawn>,
    /// Figures as they came out, over firings heard or not.
    pub realised: Realised,
    /// How many firings are not heard.
    pub missed: u64,
    /// Extra strikes beside the firings.
    pub extra: u64,
    /// Every event in the order of time.
    pub firings: Vec<Firing>,
}

impl TrainTruth {
    /// The truth of a list of firings in the order of time.
    #[must_use]
    pub fn of(firings: Vec<Firing>, outages: &[Outage]) -> Self {
        let count = |kind| firings.iter().filter(|f| f.kind == kind).count() as u64;
        Self {
            drawn: None,
            realised: Realised::of(&firings, outages),
            missed: count(EventKind::Missed),
            extra: count(EventKind::Extra),
            firings,
        }
    }

    /// The truth of the firings that a plan gave.
    #[must_use]
    pub fn of_plan(firings: Vec<Firing>, plan: &Plan) -> Self {
        Self { drawn: Some(Drawn::of(plan)), ..Self::of(firings, &plan.faults.outages) }
    }
}

/// What a train was drawn from.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Drawn {
    /// Seed of the train.
    pub seed: u64,
    /// True if the supply was switched on at time zero, false if the gap was running already.
    pub switched_on: bool,
    /// Mean voltage at breakdown at time zero, V.
    pub gap_voltage_v: f64,
    /// Scatter: of the voltage as a fraction for a gap on a bench, of the periods as a fraction for bare statistics.
    pub relative_scatter: f64,
    /// True if the scatter is that of the voltage.
    pub scatter_of_voltage: bool,
    /// Correlation of the scatter of neighbouring firings.
    pub memory: f64,
    /// Relative change per second of the voltage (bench) or of the rate (bare statistics), 1/s.
    pub drift_per_s: f64,
    /// Rate, Hz, where it was given as such.
    pub rate_hz: Option<f64>,
    /// Share of the firings that are not heard.
    pub missed: f64,
    /// Share of the firings followed by an extra strike.
    pub extra: f64,
}

impl Drawn {
    /// The settings of a plan.
    #[must_use]
    pub fn of(plan: &Plan) -> Self {
        let of_gap = |gap: &GapLaw| (gap.voltage_v, gap.spread, gap.memory, gap.drift_per_s, None);
        let (gap_voltage_v, relative_scatter, memory, drift_per_s, rate_hz) = match &plan.rhythm {
            Rhythm::Bench { gap, .. } => of_gap(gap),
            // The figures at time zero, as for a drift.
            Rhythm::Moving(moments) => moments.first().map_or((0.0, 0.0, 0.0, 0.0, None), |moment| of_gap(&moment.gap)),
            Rhythm::Bare(bare) => {
                (bare.voltage_v, bare.relative_jitter, bare.memory, bare.drift_per_s, Some(bare.rate_hz))
            }
        };
        Self {
            seed: plan.seed,
            switched_on: plan.start == Start::SwitchedOn,
            gap_voltage_v,
            relative_scatter,
            scatter_of_voltage: !matches!(plan.rhythm, Rhythm::Bare(_)),
            memory,
            drift_per_s,
            rate_hz,
            missed: plan.faults.missed,
            extra: plan.faults.extra,
        }
    }
}
