//! From audio to what it says: joins [`crate::clicks`] and [`crate::rhythm`] in one streaming pass.
//!
//! Samples are pushed in blocks of any size; a window of at most [`WINDOW_S`] is held, analysed and forgotten, and only sums
//! are kept. A recording shorter than a window is analysed as one piece.

mod accumulate;
mod acquire;
#[cfg(test)]
mod bound_tests;
mod hypothesis;
mod irregular;
mod multiples;
mod overlap;
mod refine;
mod times;
mod train;
mod trains;
mod window;

use crate::clicks::filter::FilterBank;
use crate::estimate::Estimate;
use crate::firing::Event;
use crate::rhythm::{FiringCounts, Reading, Verdict};
use accumulate::Accumulator;
use window::Window;

/// Longest window, s.
pub const WINDOW_S: f64 = 60.0;

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
    held: Vec<f32>,
    held_from: u64,
    sums: Accumulator,
    trains: usize,
    refused: Option<&'static str>,
    loose_clicks: u64,
    loose_time_s: f64,
    events: Vec<Event>,
    explanation: Vec<String>,
}

impl Measurer {
    /// An analyzer for a sample rate in Hz.
    #[must_use]
    pub fn new(sample_rate_hz: u32, options: Options) -> Self {
        Self {
            bank: FilterBank::new(),
            rate_hz: f64::from(sample_rate_hz.max(1)),
            options,
            held: Vec::new(),
            held_from: 0,
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
        let window = (WINDOW_S * self.rate_hz) as usize;
        let mut rest = mono;
        while !rest.is_empty() {
            // A quarter more is held than a window takes: no recording ends in a window too short to say anything.
            let most = window + window / 4;
            if self.held.len() == most {
                self.analyse_held(window);
            }
            let (now, later) = rest.split_at((most - self.held.len()).min(rest.len()));
            self.held.extend_from_slice(now);
            rest = later;
        }
    }

    /// Events found so far and not yet taken, in the order of time.
    pub fn take_events(&mut self) -> Vec<Event> {
        std::mem::take(&mut self.events)
    }

    /// Analyses what is held and gives the result.
    #[must_use]
    pub fn finish(mut self) -> Outcome {
        self.analyse_held(self.held.len());
        let reading = match self.sums.reading() {
            Some(mut reading) if self.trains > 0 => {
                reading.reason = reason(&reading);
                reading
            }
            _ if self.loose_clicks > 0 => clicks_alone(self.loose_clicks, self.loose_time_s),
            _ => nothing(self.refused.unwrap_or("there is no audio to analyse")),
        };
        Outcome { reading, events: self.events, explanation: self.explanation }
    }

    /// Analyses the first `count` samples held and forgets them.
    fn analyse_held(&mut self, count: usize) {
        if count == 0 {
            return;
        }
        let window = Window::new(&self.bank, &self.held[..count], self.rate_hz);
        let from_s = self.held_from as f64 / self.rate_hz;
        let mut explanation = Vec::new();
        match acquire::train(&window, &mut explanation) {
            Ok(mut train) => {
                train.shift(from_s);
                self.sums.add(&train);
                self.trains += 1;
                self.events.extend(train.events(train.noise_s.unwrap_or(0.05 * train.period_s)));
            }
            Err(why) => {
                self.refused = Some(why);
                if let Some(times) = irregular::clicks(&window) {
                    self.loose_clicks += times.len() as u64;
                    self.loose_time_s += window.duration_s();
                    explanation.push(format!("{} clicks without a rhythm", times.len()));
                }
            }
        }
        if self.options.explain {
            self.explanation.push(format!("window from {from_s:.1} s, {:.1} s long", window.duration_s()));
            self.explanation.append(&mut explanation);
        }
        self.held_from += count as u64;
        self.held.drain(..count);
    }
}

fn reason(reading: &Reading) -> String {
    let jitter = reading.period_jitter_s.map_or(0.0, |j| j.value) / reading.period_s.map_or(1.0, |p| p.value);
    match reading.verdict {
        Verdict::Steady => {
            format!("the gap fires on a steady rhythm; single periods scatter by {:.2} %", 100.0 * jitter)
        }
        _ => format!("the gap keeps a rhythm but loosely; single periods scatter by {:.1} %", 100.0 * jitter),
    }
}

/// Clicks without a rhythm: the mean count rate, with the statistics of independent arrivals.
fn clicks_alone(count: u64, duration_s: f64) -> Reading {
    let n = count as f64;
    Reading {
        verdict: Verdict::Irregular,
        reason: "clicks are heard, but they keep no rhythm: static, or a gap that fires by chance".into(),
        firings: FiringCounts { on_rhythm: 0, missed: 0, extra: count },
        firing_rate_hz: Some(Estimate::normal(n / duration_s, n.sqrt() / duration_s)),
        ..nothing("")
    }
}

fn nothing(why: &str) -> Reading {
    Reading {
        verdict: Verdict::None,
        reason: format!("no gap is heard: {why}"),
        firings: FiringCounts::default(),
        firing_rate_hz: None,
        period_s: None,
        period_jitter_s: None,
        cycle_jitter_s: None,
        mains_locked_jitter_s: None,
        drift_per_s: None,
        timing_noise_s: None,
        other_trains: Vec::new(),
        stretches: Vec::new(),
        notes: Vec::new(),
    }
}
