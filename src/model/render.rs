//! From firings to audio: the receiver fed with clicks, down to samples of a recorder.
//!
//! The output comes in blocks of any size with bounded memory; the size of the blocks changes no bit of it. Sample n stands for
//! the time n/rate from the start of the clip; a click of firing time t peaks at t + [`Renderer::delay_s`].

use super::receiver::{
    Chain, Channel, Decimator, DetectorKind, HumSource, ReceiverError, ReceiverSettings, Recorder, RecorderSettings,
    oversampling, within,
};
use crate::bench::Bench;
use crate::firing::{EventKind, Firing};
use serde::{Deserialize, Serialize};
use std::iter::Peekable;

/// Peak of a typical click, or of whatever else is loudest: −6 dB of full scale.
pub const DEFAULT_PEAK: f64 = 0.5;
/// Longest run-in before the clip starts, s.
const LONGEST_RUN_IN_S: f64 = 5.0;
/// Longest stretch that is listened to before the level is set, s.
const LONGEST_PROBE_S: f64 = 2.0;
/// Shortest such stretch, s: long enough for a rare coincidence of overlapping clicks.
const SHORTEST_PROBE_S: f64 = 1.0;
/// Seed of that stretch: the level does not hang on the seed of the clip.
const PROBE_SEED: u64 = 1;

/// Sample rates, Hz.
const LEAST_RATE_HZ: f64 = 4000.0;
const GREATEST_RATE_HZ: f64 = 768_000.0;
/// Lengths of a clip, s: from a millisecond to a day, whose firings still fit into the memory of an ordinary machine.
const SHORTEST_S: f64 = 1e-3;
const LONGEST_S: f64 = 86_400.0;

/// How the recording level is set.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Level {
    /// So that the loudest peak of a short trial, with regular clicks, reaches this part of full scale.
    Peak(f64),
    /// So that one isolated click without noise, carrier and AGC reaches this part of full scale; above 1 it clips.
    PerClick(f64),
}

/// Settings of a clip.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct RenderSettings {
    /// The receiver.
    pub receiver: ReceiverSettings,
    /// Output rate, Hz.
    pub sample_rate_hz: u32,
    /// Length of the clip, s.
    pub duration_s: f64,
    /// Seed of phases, noise and programme.
    pub seed: u64,
    /// Recording level.
    pub level: Level,
    /// The recorder.
    pub recorder: RecorderSettings,
    /// Firing voltage whose click has peak 1, V.
    pub reference_voltage_v: f64,
    /// Firing rate for which the level is set, Hz; 0 for isolated clicks.
    pub expected_rate_hz: f64,
}

impl RenderSettings {
    /// A clip of `duration_s` at 48 kHz with the level at [`DEFAULT_PEAK`], a silent recorder and a reference of 1 V.
    #[must_use]
    pub fn new(receiver: ReceiverSettings, duration_s: f64, seed: u64) -> Self {
        Self {
            receiver,
            sample_rate_hz: 48_000,
            duration_s,
            seed,
            level: Level::Peak(DEFAULT_PEAK),
            recorder: RecorderSettings::default(),
            reference_voltage_v: 1.0,
            expected_rate_hz: 0.0,
        }
    }

    /// A clip through the receiver and recorder of a bench.
    ///
    /// # Errors
    /// If what the bench describes cannot be built.
    pub fn from_bench(bench: &Bench, duration_s: f64, seed: u64) -> Result<Self, ReceiverError> {
        let mut settings = Self::new(ReceiverSettings::from_bench(bench)?, duration_s, seed);
        settings.recorder = RecorderSettings::from_bench(bench);
        if let Some(rate) = bench.receiver.recorder_rate {
            within("recorder rate", rate.value, "Hz", LEAST_RATE_HZ, GREATEST_RATE_HZ)?;
            settings.sample_rate_hz = rate.value.round() as u32;
        }
        match (bench.receiver.recorder_level, bench.receiver.click_level) {
            (_, Some(click)) => settings.level = Level::PerClick(click.value),
            (Some(peak), None) => settings.level = Level::Peak(peak.value),
            (None, None) => {}
        }
        settings.check()?;
        Ok(settings)
    }

    /// The same with the reference voltage and the expected rate of a list of firings (those on the rhythm).
    #[must_use]
    pub fn for_firings(mut self, firings: &[Firing]) -> Self {
        let regular = || firings.iter().filter(|f| f.kind != EventKind::Extra);
        let count = regular().count() as f64;
        if count > 0.0 {
            self.reference_voltage_v = regular().map(|f| f.voltage_v).sum::<f64>() / count;
        }
        if let (Some(first), Some(last)) = (regular().next(), regular().next_back())
            && last.time_s > first.time_s
        {
            self.expected_rate_hz = (count - 1.0) / (last.time_s - first.time_s);
        }
        self
    }

    /// Checks every setting.
    ///
    /// # Errors
    /// Names the first setting that is out of range.
    pub fn check(&self) -> Result<(), ReceiverError> {
        self.receiver.check()?;
        let sample_rate_hz = f64::from(self.sample_rate_hz);
        within("sample rate", sample_rate_hz, "Hz", LEAST_RATE_HZ, GREATEST_RATE_HZ)?;
        within("bandwidth", self.receiver.bandwidth_hz, "Hz", 0.0, sample_rate_hz)?;
        within("clip length", self.duration_s, "s", SHORTEST_S, LONGEST_S)?;
        let (Level::Peak(level) | Level::PerClick(level)) = self.level;
        within("level", level, "of full scale", 1e-5, 1000.0)?;
        self.recorder.check()?;
        within("reference voltage", self.reference_voltage_v, "V", 1e-9, 1e9)?;
        within("expected rate", self.expected_rate_hz, "Hz", 0.0, 1e6)
    }

    /// Samples of the clip.
    #[must_use]
    pub fn samples(&self) -> u64 {
        (self.duration_s * f64::from(self.sample_rate_hz)).round() as u64
    }
}

/// A clip in the making: an iterator over its samples, and over blocks by [`Renderer::fill`].
#[derive(Debug, Clone)]
pub struct Renderer<I: Iterator<Item = Firing>> {
    firings: Peekable<I>,
    chain: Chain,
    decimator: Decimator,
    hum: Option<HumSource>,
    recorder: Recorder,
    reference_voltage_v: f64,
    scale: f64,
    click: IsolatedClick,
    next: u64,
    samples: u64,
}

impl<I: Iterator<Item = Firing>> Renderer<I> {
    /// Prepares a clip of firings that come in order of time. Missed ones are not heard.
    ///
    /// # Errors
    /// If a setting is out of range.
    pub fn new(settings: &RenderSettings, firings: impl IntoIterator<IntoIter = I>) -> Result<Self, ReceiverError> {
        settings.check()?;
        let receiver = &settings.receiver;
        let output_rate_hz = f64::from(settings.sample_rate_hz);
        let factor = oversampling(receiver, output_rate_hz);
        let rate_hz = output_rate_hz * factor as f64;
        let click = IsolatedClick::of(receiver, rate_hz, factor);
        let scale = match settings.level {
            Level::PerClick(part) => part / click.peak,
            Level::Peak(part) => part / loudest(settings, rate_hz, click.peak),
        };
        let hum = receiver.hum.map(|mut hum| {
            hum.amplitude *= click.peak;
            HumSource::new(hum, output_rate_hz)
        });
        let recorder = Recorder::new(settings.recorder, output_rate_hz, settings.seed);
        let run_in = (run_in_s(receiver) * output_rate_hz).ceil() as i64;
        let chain = Chain::new(receiver, rate_hz, -run_in * factor as i64, settings.seed);
        let mut renderer = Self {
            firings: firings.into_iter().peekable(),
            decimator: Decimator::new(factor, |cycles| chain.to_give_back(cycles)),
            chain,
            hum,
            recorder,
            reference_voltage_v: settings.reference_voltage_v,
            scale: if receiver.inverted { -scale } else { scale },
            click,
            next: 0,
            samples: settings.samples(),
        };
        // Everything before time 0, and the internal samples that belong to the first output sample but its own.
        for _ in 0..run_in * factor as i64 - (factor as i64 - 1) {
            renderer.step();
        }
        Ok(renderer)
    }

    /// Time from a firing to the peak of its click in the audio, s.
    #[must_use]
    pub fn delay_s(&self) -> f64 {
        self.click.delay_s
    }

    /// Peak of an isolated click of the reference voltage without noise, carrier and AGC, in full scale (before clipping).
    #[must_use]
    pub fn click_full_scale(&self) -> f64 {
        self.click.peak * self.scale.abs()
    }

    /// Samples that are still to come.
    #[must_use]
    pub fn remaining(&self) -> u64 {
        self.samples - self.next
    }

    /// Fills the block from the front and returns how many samples it holds: fewer than its length only at the end of the clip.
    pub fn fill(&mut self, block: &mut [f32]) -> usize {
        let count = self.remaining().min(block.len() as u64) as usize;
        for sample in &mut block[..count] {
            *sample = self.sample();
        }
        count
    }

    /// One internal step.
    #[inline]
    fn step(&mut self) {
        let now_s = self.chain.advance();
        // Not `next_if`, which takes the firing out and puts it back at every step.
        while self.firings.peek().is_some_and(|firing| firing.time_s <= now_s) {
            let Some(firing) = self.firings.next() else { break };
            let heard = if firing.kind == EventKind::Missed { 0.0 } else { firing.voltage_v };
            self.chain.click(firing.time_s, heard / self.reference_voltage_v);
        }
        let audio = self.chain.audio();
        self.decimator.push(audio);
    }

    fn sample(&mut self) -> f32 {
        for _ in 0..self.decimator.factor() {
            self.step();
        }
        let mut audio = self.decimator.output();
        if let Some(hum) = &self.hum {
            audio += hum.at(self.next);
        }
        let written = self.recorder.write(audio * self.scale, self.next);
        self.next += 1;
        written as f32
    }
}

impl<I: Iterator<Item = Firing>> Iterator for Renderer<I> {
    type Item = f32;

    fn next(&mut self) -> Option<f32> {
        (self.remaining() > 0).then(|| self.sample())
    }
}

/// One click alone.
#[derive(Debug, Clone, Copy, PartialEq)]
struct IsolatedClick {
    /// Time from the firing to the peak of the audio, s.
    delay_s: f64,
    /// Height of that peak for a click of envelope peak 1.
    peak: f64,
}

impl IsolatedClick {
    /// Sends one click through the bare chain and finds the peak between the internal samples by a parabola.
    fn of(receiver: &ReceiverSettings, rate_hz: f64, factor: usize) -> Self {
        let bare = bare(receiver);
        let mut chain = Chain::new(&bare, rate_hz, 0, 0);
        let mut decimator = Decimator::new(factor, |cycles| chain.to_give_back(cycles));
        let length = (run_in_s(&bare) * rate_hz) as usize + 2 * decimator.delay() as usize + 16;
        let mut audio = Vec::with_capacity(length);
        for k in 0..length {
            chain.advance();
            if k == 0 {
                chain.click(0.0, 1.0);
            }
            decimator.push(chain.audio());
            audio.push(decimator.output());
        }
        let top = (1..length - 1).max_by(|&i, &j| audio[i].total_cmp(&audio[j])).unwrap_or(1);
        let (before, at, after) = (audio[top - 1], audio[top], audio[top + 1]);
        let bend = before - 2.0 * at + after;
        let shift = if bend < 0.0 { 0.5 * (before - after) / bend } else { 0.0 };
        Self { delay_s: (top as f64 + shift) / rate_hz, peak: at - 0.25 * (before - after) * shift }
    }
}

/// The receiver without anything that is not the click's own way. A click alone leaves a frequency discriminator silent and in
/// a measuring detector it is a slow swell, so these are timed and scaled as if the envelope were heard.
fn bare(receiver: &ReceiverSettings) -> ReceiverSettings {
    let mut bare = ReceiverSettings { noise: 0.0, carrier: None, agc: None, hum: None, ..receiver.clone() };
    if !matches!(bare.detector.kind, DetectorKind::Envelope | DetectorKind::SquareLaw) {
        bare.detector.kind = DetectorKind::Envelope;
    }
    bare
}

/// Time after which the receiver has forgotten being switched on, s.
fn run_in_s(receiver: &ReceiverSettings) -> f64 {
    let channel = Channel::new(receiver.selectivity, receiver.bandwidth_hz).memory_s();
    let low_cut = if receiver.audio_band.low_hz > 0.0 { 5.0 / receiver.audio_band.low_hz } else { 0.0 };
    let detector = 16.0 * receiver.detector.discharge_s.max(receiver.detector.charge_s);
    let agc = receiver.agc.map_or(0.0, |agc| 5.0 * agc.decay_s.max(agc.attack_s));
    (channel + low_cut + detector + agc).min(LONGEST_RUN_IN_S)
}

/// Loudest audio of a trial with regular clicks at the expected rate (at least one click).
fn loudest(settings: &RenderSettings, rate_hz: f64, click_peak: f64) -> f64 {
    let receiver = &settings.receiver;
    let period_s = if settings.expected_rate_hz > 0.0 { 1.0 / settings.expected_rate_hz } else { f64::INFINITY };
    let run_in = (run_in_s(receiver) * rate_hz).ceil() as i64;
    let trial = ((8.0 * period_s).clamp(SHORTEST_PROBE_S, LONGEST_PROBE_S) * rate_hz) as i64;
    let mut chain = Chain::new(receiver, rate_hz, -run_in, PROBE_SEED);
    // A train that has been going on since the receiver was switched on, with a click soon after time 0.
    let mut next_click_s = if period_s.is_finite() { -(run_in_s(receiver) / period_s).floor() * period_s } else { 0.0 };
    let mut loudest = 0.0f64;
    for k in -run_in..trial {
        let now_s = chain.advance();
        while next_click_s <= now_s {
            chain.click(next_click_s, 1.0);
            next_click_s += period_s;
        }
        let audio = chain.audio();
        if k >= 0 {
            loudest = loudest.max(audio.abs());
        }
    }
    let hum = receiver.hum.map_or(0.0, |hum| hum.amplitude * (1.0 + hum.buzz)) * click_peak;
    loudest + hum
}

#[cfg(test)]
mod brute_force;
