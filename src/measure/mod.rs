//! From audio to what it says: joins [`crate::clicks`] and [`crate::rhythm`] in one streaming pass.
//!
//! Samples are pushed in blocks of any size. Once a train is learnt it is followed through short windows, each analysed and
//! forgotten; only sums are kept. A recording shorter than the first window is analysed as one piece, and so is each minute in which
//! nothing was learnt.

pub(crate) mod accumulate;
pub(crate) mod acquire;
#[cfg(test)]
mod bound_tests;
mod hypothesis;
pub(crate) mod irregular;
mod learn;
mod model;
mod multiples;
mod overlap;
mod refine;
mod slips;
mod times;
pub(crate) mod train;
mod trains;
pub(crate) mod window;

use crate::clicks::filter::FilterBank;
use crate::estimate::Estimate;
use crate::firing::Event;
use crate::rhythm::{FiringCounts, Reading, Verdict};
use accumulate::Accumulator;
use acquire::{Hint, Known};
use std::ops::Range;
use train::Train;
use window::Window;

/// Window in which a train is first looked for, window in which a slow one or none is, and window through which a known one is
/// followed, s.
const FIRST_S: f64 = 12.0;
const WHOLE_S: f64 = 60.0;
const FOLLOW_S: f64 = 12.0;
/// This much more is held than a window takes: no recording ends in a window too short to say anything.
const MORE: f64 = 1.25;
/// Audio on both sides of a followed window that is analysed with it: s at least, periods, s at most. Filters and rhythm need it; the
/// clicks in it belong to the neighbours.
const MARGIN_S: (f64, f64, f64) = (0.1, 4.0, 2.0);
/// Events come at most this much later than their audio is pushed, blocks of a second or less taken, s.
pub const LATEST_S: f64 = MORE * WHOLE_S + 2.0 * MARGIN_S.2 + 1.0;

/// How to measure.
#[derive(Debug, Clone, Default)]
pub struct Options {
    /// Collect the lines of [`Outcome::explanation`].
    pub explain: bool,
}

/// What came out.
#[derive(Debug, Clone)]
pub struct Outcome {
    /// The figures.
    pub reading: Reading,
    /// Events not yet taken by [`Measurer::take_events`], in the order of time.
    pub events: Vec<Event>,
    /// How the answer came about, if asked for.
    pub explanation: Vec<String>,
}

/// The analyzer: push mono samples, then finish.
pub struct Measurer {
    bank: FilterBank,
    rate_hz: f64,
    options: Options,
    stage: Stage,
    /// Samples held, the number of the first of them in the recording, and how many of them lie before the first not yet analysed.
    held: Vec<f32>,
    held_from: u64,
    done: usize,
    sums: Accumulator,
    trains: usize,
    refused: Option<&'static str>,
    loose_clicks: u64,
    loose_time_s: f64,
    events: Vec<Event>,
    explanation: Vec<String>,
}

/// How far the search has come.
enum Stage {
    /// Nothing was tried yet.
    New,
    /// Nothing is known but what an earlier look has found.
    Searching(Hint),
    /// A train is known.
    Following(Known),
}

impl Stage {
    /// Length of a window, s.
    fn window_s(&self) -> f64 {
        match self {
            Self::New => FIRST_S,
            Self::Following(known) if known.is_quick() => FOLLOW_S,
            Self::Searching(_) | Self::Following(_) => WHOLE_S,
        }
    }

    /// Audio needed on both sides of a window, s.
    fn margin_s(&self) -> f64 {
        match self {
            Self::Following(known) => known.periods_s(MARGIN_S.1).clamp(MARGIN_S.0, MARGIN_S.2),
            Self::New | Self::Searching(_) => 0.0,
        }
    }
}

impl Measurer {
    /// An analyzer for a sample rate in Hz.
    #[must_use]
    pub fn new(sample_rate_hz: u32, options: Options) -> Self {
        Self {
            bank: FilterBank::new(),
            rate_hz: f64::from(sample_rate_hz.max(1)),
            options,
            stage: Stage::New,
            held: Vec::new(),
            held_from: 0,
            done: 0,
            sums: Accumulator::default(),
            trains: 0,
            refused: None,
            loose_clicks: 0,
            loose_time_s: 0.0,
            events: Vec::new(),
            explanation: Vec::new(),
        }
    }

    /// Takes mono samples in units of full scale.
    pub fn push(&mut self, mono: &[f32]) {
        let mut rest = mono;
        while !rest.is_empty() {
            let most = self.done + self.samples(MORE * self.stage.window_s() + self.stage.margin_s());
            if self.held.len() >= most {
                self.analyse(self.samples(self.stage.window_s()));
                continue;
            }
            let (now, later) = rest.split_at((most - self.held.len()).min(rest.len()));
            self.held.extend_from_slice(now);
            rest = later;
        }
    }

    fn samples(&self, time_s: f64) -> usize {
        (time_s * self.rate_hz) as usize
    }

    /// Events found so far and not yet taken, in the order of time.
    pub fn take_events(&mut self) -> Vec<Event> {
        std::mem::take(&mut self.events)
    }

    /// Says that audio was lost here, nobody knows how much: what was heard so far is analysed, and nothing is counted across.
    pub fn interrupt(&mut self) {
        if matches!(self.stage, Stage::New) {
            self.stage = Stage::Searching(Hint::default());
        }
        self.analyse(self.held.len() - self.done);
        self.held_from += self.held.len() as u64;
        self.held.clear();
        self.done = 0;
        self.sums.interrupt();
    }

    /// Analyses what is held and gives the result.
    #[must_use]
    pub fn finish(mut self) -> Outcome {
        if matches!(self.stage, Stage::New) {
            self.stage = Stage::Searching(Hint::default());
        }
        self.analyse(self.held.len() - self.done);
        let reading = match self.sums.reading() {
            Some(mut reading) if self.trains > 0 => {
                reading.reason = reason(&reading);
                reading.firings.extra += self.loose_clicks;
                reading
            }
            _ if self.loose_clicks > 0 => clicks_alone(self.loose_clicks, self.loose_time_s),
            _ => nothing(self.refused.unwrap_or("there is no audio to analyse")),
        };
        Outcome { reading, events: self.events, explanation: self.explanation }
    }

    /// Analyses the next `count` samples that are held.
    fn analyse(&mut self, count: usize) {
        if count == 0 {
            return;
        }
        let mut explanation = Vec::new();
        let from_s = (self.held_from + self.done as u64) as f64 / self.rate_hz;
        explanation.push(format!("window from {from_s:.1} s, {:.1} s long", count as f64 / self.rate_hz));
        match &mut self.stage {
            Stage::New => {
                let window = Window::new(&self.bank, &self.held[..count], self.rate_hz);
                let known = acquire::first(&window, &mut explanation);
                self.stage = known.map_or_else(Stage::Searching, Stage::Following);
            }
            Stage::Searching(hint) => {
                let hint = std::mem::take(hint);
                self.search(count, hint, &mut explanation);
                self.forget(count);
            }
            Stage::Following(_) => {
                if !self.follow(count, &mut explanation) {
                    explanation.push("the train is lost: looking anew".into());
                    self.search(count, Hint::default(), &mut explanation);
                }
                self.forget(count);
            }
        }
        if self.options.explain {
            self.explanation.append(&mut explanation);
        }
    }

    /// Looks for a train in the next `count` samples from nothing.
    fn search(&mut self, count: usize, hint: Hint, explanation: &mut Vec<String>) {
        let window = Window::new(&self.bank, &self.held[self.done..self.done + count], self.rate_hz);
        match acquire::train(&window, hint, explanation) {
            Ok((train, known)) => {
                self.stage = Stage::Following(known);
                self.take(train, self.done, 0.0..f64::INFINITY);
            }
            Err(why) => {
                self.refused = Some(why);
                if let Some(clicks) = irregular::clicks(&window) {
                    self.loose_clicks += clicks.len() as u64;
                    self.loose_time_s += window.duration_s();
                    explanation.push(format!("{} clicks without a rhythm", clicks.len()));
                    let from_s = (self.held_from + self.done as u64) as f64 / self.rate_hz;
                    self.events
                        .extend(clicks.into_iter().map(|click| Event { time_s: from_s + click.time_s, ..click }));
                }
            }
        }
    }

    /// Follows the known train through the next `count` samples, with what is held on both sides; false if it is not there.
    fn follow(&mut self, count: usize, explanation: &mut Vec<String>) -> bool {
        let margin = self.samples(self.stage.margin_s());
        let Stage::Following(known) = &mut self.stage else { return false };
        let to = self.held.len().min(self.done + count + margin);
        let window = Window::new(&self.bank, &self.held[..to], self.rate_hz);
        let Some(train) = known.follow(&window, explanation) else { return false };
        let own_s = self.done as f64 / self.rate_hz..(self.done + count) as f64 / self.rate_hz;
        self.take(train, 0, own_s);
        true
    }

    /// Takes the part of a train that lies within `own_s` (s from sample `at` of those held).
    fn take(&mut self, train: Train, at: usize, own_s: Range<f64>) {
        let Some(mut train) = train.within(&own_s) else { return };
        train.shift((self.held_from + at as u64) as f64 / self.rate_hz);
        self.sums.add(&train);
        self.trains += 1;
        self.events.extend(train.events(train.noise.map_or(0.05 * train.period_s, |noise| noise.most_s)));
    }

    /// Forgets `count` samples but for the margin that the next window needs.
    fn forget(&mut self, count: usize) {
        self.done += count;
        let before = self.done.saturating_sub(self.samples(self.stage.margin_s()));
        self.held_from += before as u64;
        self.held.drain(..before);
        self.done -= before;
    }
}

/// The verdict in a sentence.
pub(crate) fn reason(reading: &Reading) -> String {
    let jitter = reading.period_jitter_s.map_or(0.0, |j| j.value) / reading.period_s.map_or(1.0, |p| p.value);
    match reading.verdict {
        Verdict::Steady => {
            format!("the gap fires on a steady rhythm; single periods scatter by {:.2} %", 100.0 * jitter)
        }
        _ => format!("the gap keeps a rhythm but loosely; single periods scatter by {:.1} %", 100.0 * jitter),
    }
}

/// Clicks without a rhythm: the mean count rate, with the statistics of independent arrivals.
pub(crate) fn clicks_alone(count: u64, duration_s: f64) -> Reading {
    let n = count as f64;
    Reading {
        verdict: Verdict::Irregular,
        reason: "clicks are heard, but they keep no rhythm: static, or a gap that fires by chance".into(),
        firings: FiringCounts { on_rhythm: 0, missed: 0, extra: count },
        firing_rate_hz: Some(Estimate::normal(n / duration_s, n.sqrt() / duration_s)),
        ..Reading::none(String::new())
    }
}

fn nothing(why: &str) -> Reading {
    Reading::none(format!("no gap is heard: {why}"))
}
