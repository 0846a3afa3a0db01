//! One case read by the analyzer and held against its truth.

use crate::case::{Answer, Case, Truth};
use crate::volts::{self, VoltageErrors};
use gaptone::estimate::{COVERAGE_95, Estimate};
use gaptone::measure::{Measurer, Options};
use gaptone::rhythm::{Reading, Verdict};
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::time::Instant;

/// Samples handed over at a time, as a sound card would.
const BLOCK: usize = 4096;

/// Errors of a reading of a gap; relative, and none where the reading has no figure.
#[derive(Clone, Copy)]
pub struct Errors {
    /// Rate against the realised rate.
    pub rate: f64,
    /// Jitter against the realised jitter.
    pub jitter: Option<f64>,
    /// The rate's interval holds the rate of the process.
    pub rate_covered: bool,
    /// The jitter's interval holds the jitter of the process.
    pub jitter_covered: Option<bool>,
    /// Width of the rate's interval over what the number of firings allows.
    pub rate_width: f64,
    /// The same for the jitter.
    pub jitter_width: Option<f64>,
    /// Of the gap voltage, where a circuit is behind the firings and a voltage came out.
    pub voltage: Option<VoltageErrors>,
}

/// Outcome of one case.
pub enum Outcome {
    /// A gap, and figures for it.
    Read(Errors),
    /// A gap, and no figure.
    Refused,
    /// The analyzer panicked.
    Crashed,
    /// No gap: true if a figure came out that should not.
    NoGap(bool),
    /// Another rhythm: true if a figure came out.
    OtherRhythm(bool),
}

/// A scored case.
pub struct Score {
    /// Kind.
    pub kind: &'static str,
    /// Seed.
    pub seed: u64,
    /// What came out.
    pub outcome: Outcome,
    /// Time to analyse, s, and length of the recording, s.
    pub cost_s: (f64, f64),
    /// Truth and reading in one line.
    pub line: String,
}

/// Reads a case and scores it; `explain`: with how the analyzer came to its answer.
pub fn score(case: &Case, explain: bool) -> Score {
    let started = Instant::now();
    let read = catch_unwind(AssertUnwindSafe(|| {
        let mut measurer = Measurer::new(case.sample_rate_hz, Options { explain });
        case.samples.chunks(BLOCK).for_each(|block| measurer.push(block));
        measurer.finish()
    }));
    let cost_s = (started.elapsed().as_secs_f64(), case.duration_s());
    let Ok(result) = read else {
        return Score { kind: case.kind, seed: case.seed, outcome: Outcome::Crashed, cost_s, line: String::new() };
    };
    let reading = &result.reading;
    let told = reading.firing_rate_hz.is_some();
    let outcome = match &case.answer {
        Answer::Gap(truth) => match reading.firing_rate_hz {
            Some(rate) => {
                let voltage = truth.circuit.and_then(|c| volts::errors(&c, &result.events, reading));
                Outcome::Read(Errors { voltage, ..errors(truth, rate, reading.period_jitter_s) })
            }
            None => Outcome::Refused,
        },
        Answer::Nothing => Outcome::NoGap(told),
        Answer::NoRhythm => Outcome::NoGap(told && reading.verdict != Verdict::Irregular),
        Answer::OtherRhythm => Outcome::OtherRhythm(told),
    };
    let mut line = line(case, reading);
    for step in &result.explanation {
        line += &format!("\n    {step}");
    }
    Score { kind: case.kind, seed: case.seed, outcome, cost_s, line }
}

fn errors(truth: &Truth, rate: Estimate, jitter: Option<Estimate>) -> Errors {
    let n = truth.times_s.len().max(4) as f64;
    let process_hz = truth.process_period_s.map_or(truth.rate_hz, |p| 1.0 / p);
    let holds = |e: &Estimate, value: f64| e.low <= value && value <= e.high;
    let width = |e: &Estimate| (e.high - e.low) / (2.0 * COVERAGE_95) / e.value;
    Errors {
        rate: rate.value / truth.rate_hz - 1.0,
        jitter: jitter.map(|j| j.value / truth.jitter_s - 1.0),
        rate_covered: holds(&rate, process_hz),
        jitter_covered: jitter.and_then(|j| truth.process_jitter_s.map(|p| holds(&j, p))),
        rate_width: width(&rate) / (truth.jitter_s * truth.rate_hz / n.sqrt()),
        jitter_width: jitter.map(|j| width(&j) * (2.0 * n).sqrt()),
        voltage: None,
    }
}

fn line(case: &Case, reading: &Reading) -> String {
    let mut text = format!("{} Hz {:.1} s", case.sample_rate_hz, case.duration_s());
    if let Answer::Gap(truth) = &case.answer {
        let jitter = 100.0 * truth.jitter_s * truth.rate_hz;
        text += &format!("; true {:.4} /s {jitter:.3} %", truth.rate_hz);
    }
    match (reading.firing_rate_hz, reading.period_jitter_s) {
        (Some(rate), Some(jitter)) => {
            text += &format!("; read {:.4} /s {:.3} %", rate.value, 100.0 * jitter.value * rate.value);
        }
        (Some(rate), None) => text += &format!("; read {:.4} /s", rate.value),
        _ => {}
    }
    format!("{text}; {:?}: {}", reading.verdict, reading.reason)
}
