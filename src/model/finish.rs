//! The last step before a file: loudness, true peak, fades and a second channel that marks the firings.
//!
//! Loudness by ITU-R BS.1770 and EBU R 128 (crate `ebur128`), of the gap's channel alone, as one channel: played from two speakers
//! it is 3 LU louder. A train of clicks has a large crest factor, so the true peak often stands in the way of the loudness that is
//! aimed at; the level is then as high as the peak allows, and the truth says so.

use super::clip::Clip;
use super::render::Renderer;
use super::truth::Truth;
use crate::firing::{EventKind, Firing};
use ebur128::{EbuR128, Mode};
use serde::{Deserialize, Serialize};
use std::f64::consts::{PI, TAU};
use thiserror::Error;

/// What stands in the file beside the gap.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Layout {
    /// Nothing: one channel.
    #[default]
    Mono,
    /// On the right a short tick where each click peaks: of 2 kHz for a firing, 1 kHz for one that is not heard, 4 kHz for an
    /// extra strike.
    Marker,
}

/// How a clip is finished.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct FinishSettings {
    /// Loudness aimed at, LUFS; none leaves the level as it is.
    pub loudness_lufs: Option<f64>,
    /// Greatest true peak, dBTP.
    pub true_peak_dbtp: f64,
    /// Length of the fades in and out, s.
    pub fade_s: f64,
    /// Channels.
    pub layout: Layout,
}

impl Default for FinishSettings {
    /// EBU R 128: −23 LUFS, −1 dBTP; fades short enough not to be heard as such.
    fn default() -> Self {
        Self { loudness_lufs: Some(-23.0), true_peak_dbtp: -1.0, fade_s: 0.02, layout: Layout::Mono }
    }
}

/// What set the level.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum LevelSetBy {
    /// The level as it came from the recorder.
    Recorder,
    /// The loudness aimed at.
    Loudness,
    /// The true peak: the clip is quieter than aimed at.
    TruePeak,
}

/// What the finish came to.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct FinishTruth {
    /// The settings.
    pub settings: FinishSettings,
    /// Gain that was given, dB.
    pub gain_db: f64,
    /// Loudness of the gap's channel as one channel, LUFS; none if it is silent or shorter than 0.4 s.
    pub loudness_lufs: Option<f64>,
    /// True peak, dBTP; none if it is silent.
    pub true_peak_dbtp: Option<f64>,
    /// What set the level.
    pub level_set_by: LevelSetBy,
}

/// A clip that cannot be finished.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum FinishError {
    /// A setting out of range.
    #[error("{what} of {value} {unit} is outside {low} .. {high} {unit}")]
    Range {
        /// Which setting.
        what: &'static str,
        /// Its value.
        value: f64,
        /// Its unit.
        unit: &'static str,
        /// Least allowed.
        low: f64,
        /// Greatest allowed.
        high: f64,
    },
    /// The loudness meter refused.
    #[error("the loudness cannot be measured ({0}); set it to off")]
    Meter(#[from] ebur128::Error),
}

/// Integrated loudness in LUFS and true peak in dBTP of interleaved samples; minus infinity where there is too little.
///
/// # Errors
/// A sample rate or a number of channels that the meter does not take.
pub fn loudness(
    samples: impl IntoIterator<Item = f32>,
    channels: u32,
    sample_rate_hz: u32,
) -> Result<(f64, f64), FinishError> {
    let mut meter = EbuR128::new(channels, sample_rate_hz, Mode::I | Mode::TRUE_PEAK)?;
    let mut block = Vec::with_capacity(4096);
    let mut samples = samples.into_iter();
    loop {
        block.clear();
        block.extend(samples.by_ref().take(4096 / channels as usize * channels as usize));
        if block.is_empty() {
            break;
        }
        meter.add_frames_f32(&block)?;
    }
    let peak = (0..channels).map(|c| meter.true_peak(c)).try_fold(0.0f64, |top, peak| peak.map(|p| top.max(p)))?;
    Ok((meter.loudness_global()?, 20.0 * peak.log10()))
}

type Samples = Renderer<std::vec::IntoIter<Firing>>;

/// A finished clip: an iterator over its interleaved samples.
#[derive(Debug, Clone)]
pub struct Finished {
    renderer: Samples,
    gain: f64,
    fade: f64,
    total: u64,
    next: u64,
    marker: Option<Marker>,
    /// The marker's sample that follows the gap's.
    pending: Option<f32>,
}

impl Finished {
    /// Finishes a clip and completes its truth. Where a loudness is aimed at the clip is rendered twice: once to measure it.
    ///
    /// # Errors
    /// A setting out of range.
    pub fn new(clip: Clip, settings: FinishSettings) -> Result<(Self, Truth), FinishError> {
        within("loudness", settings.loudness_lufs.unwrap_or(0.0), "LUFS", -70.0, 0.0)?;
        within("true peak", settings.true_peak_dbtp, "dBTP", -60.0, 0.0)?;
        within("fade", settings.fade_s, "s", 0.0, 60.0)?;
        let (mut truth, renderer) = (clip.truth, clip.renderer);
        let total = renderer.remaining();
        let rate_hz = truth.settings.sample_rate_hz;
        let fade = (settings.fade_s * f64::from(rate_hz)).min(0.5 * total as f64);
        let mut finished = Self { renderer, gain: 1.0, fade, total, next: 0, marker: None, pending: None };
        let (lufs, dbtp) = match settings.loudness_lufs {
            Some(_) => loudness(finished.clone(), 1, rate_hz)?,
            None => (f64::NAN, f64::NAN),
        };
        let (gain_db, level_set_by) = gain(settings, lufs, dbtp);
        finished.gain = 10f64.powf(gain_db / 20.0);
        if settings.layout == Layout::Marker {
            finished.marker = Some(Marker::new(&truth));
        }
        truth.click_full_scale *= finished.gain;
        truth.finish = Some(FinishTruth {
            settings,
            gain_db,
            loudness_lufs: Some(lufs + gain_db).filter(|lufs| lufs.is_finite()),
            true_peak_dbtp: Some(dbtp + gain_db).filter(|dbtp| dbtp.is_finite()),
            level_set_by,
        });
        Ok((finished, truth))
    }

    /// Channels of the samples.
    #[must_use]
    pub fn channels(&self) -> u16 {
        if self.marker.is_some() { 2 } else { 1 }
    }

    fn faded(&self, sample: f32) -> f32 {
        let ends_in = (self.total - self.next) as f64 - 0.5;
        let near = (self.next as f64 + 0.5).min(ends_in);
        let fade = if near < self.fade { 0.5 - 0.5 * (PI * near / self.fade).cos() } else { 1.0 };
        (f64::from(sample) * fade * self.gain) as f32
    }
}

impl Iterator for Finished {
    type Item = f32;

    fn next(&mut self) -> Option<f32> {
        if let Some(pending) = self.pending.take() {
            return Some(pending);
        }
        let sample = self.renderer.next()?;
        let sample = self.faded(sample);
        if let Some(marker) = &mut self.marker {
            self.pending = Some(marker.at(self.next));
        }
        self.next += 1;
        Some(sample)
    }
}

/// Gain in dB that loudness and peak ask for, and which of them decides.
fn gain(settings: FinishSettings, lufs: f64, dbtp: f64) -> (f64, LevelSetBy) {
    let Some(target) = settings.loudness_lufs.filter(|_| dbtp.is_finite()) else {
        return (0.0, LevelSetBy::Recorder);
    };
    let room = settings.true_peak_dbtp - dbtp;
    // Too short or too quiet for a loudness: as loud as the peak allows.
    if lufs.is_finite() && target - lufs <= room {
        (target - lufs, LevelSetBy::Loudness)
    } else {
        (room, LevelSetBy::TruePeak)
    }
}

fn within(what: &'static str, value: f64, unit: &'static str, low: f64, high: f64) -> Result<(), FinishError> {
    if value >= low && value <= high { Ok(()) } else { Err(FinishError::Range { what, value, unit, low, high }) }
}

/// Peak of a tick.
const TICK: f64 = 0.25;
/// Half the length of a tick, s.
const HALF_TICK_S: f64 = 0.75e-3;

/// The second channel.
#[derive(Debug, Clone)]
struct Marker {
    rate_hz: f64,
    /// Time of the peak of each tick, s, in order, and its frequency, Hz.
    ticks: Vec<(f64, f64)>,
    /// First tick that is not over.
    first: usize,
}

impl Marker {
    fn new(truth: &Truth) -> Self {
        let frequency_hz = |kind| match kind {
            EventKind::Firing => 2000.0,
            EventKind::Missed => 1000.0,
            EventKind::Extra => 4000.0,
        };
        let firings = truth.trains.iter().flat_map(|train| &train.firings);
        let mut ticks: Vec<(f64, f64)> =
            firings.map(|f| (f.time_s + truth.receiver_delay_s, frequency_hz(f.kind))).collect();
        ticks.sort_by(|a, b| a.0.total_cmp(&b.0));
        Self { rate_hz: f64::from(truth.settings.sample_rate_hz), ticks, first: 0 }
    }

    fn at(&mut self, sample: u64) -> f32 {
        let now_s = sample as f64 / self.rate_hz;
        while self.ticks.get(self.first).is_some_and(|tick| tick.0 + HALF_TICK_S <= now_s) {
            self.first += 1;
        }
        let sounding = self.ticks[self.first..].iter().take_while(|tick| tick.0 - HALF_TICK_S < now_s);
        let sum: f64 = sounding
            .map(|&(time_s, frequency_hz)| {
                let t = now_s - time_s;
                TICK * (0.5 + 0.5 * (PI * t / HALF_TICK_S).cos()) * (TAU * frequency_hz * t).cos()
            })
            .sum();
        sum.clamp(-1.0, 1.0) as f32
    }
}
