//! Trains read by the line at their rate: where clicks overlap, single ones are lost and the line is not.

use super::hypothesis::Hypothesis;
use super::train::{Train, number};
use super::window::Window;
use crate::rhythm::line::{self, LineTrain};
use crate::rhythm::phase;
use crate::rhythm::presence::coherence::{self, LineCharacter};
use crate::rhythm::presence::{self, Heard};

/// A line is taken if its evidence is this many times the clicks', or their period this many times the line's.
const LINE_EVIDENCE: f64 = 2.0;
const LINE_PERIOD: f64 = 1.4;
/// Evidence of separate clicks below which a slow line is looked at all the same, nats.
const LINE_ONLY_EVIDENCE: f64 = 60.0;
/// Rate to which a train read by its line alone is raised for the judgement of the line, Hz.
const LINE_ONLY_HZ: f64 = 1_300.0;
/// Periods below which a line at the same rate is asked for its phase, s.
pub const PHASE_BELOW_S: f64 = 0.8e-3;

/// Rates from which a line at the rate is looked at, Hz.
const LINE_FROM_HZ: f64 = 300.0;

/// What the line at a rate does, where it is fast enough to have one.
#[must_use]
pub fn line_character(window: &Window, rate_hz: f64) -> Option<LineCharacter> {
    if rate_hz < LINE_FROM_HZ {
        return None;
    }
    coherence::of_line(window.bank, &window.x, window.rate_hz, rate_hz)
}

/// The best rhythm of the cycles of a line, if one stands out; lines of the explanation are appended.
pub fn best_line(window: &Window, explanation: &mut Vec<String>) -> Option<LineTrain> {
    let mut best: Option<LineTrain> = None;
    for found in line::lines(&window.x, window.rate_hz).into_iter().take(3) {
        explanation.push(format!(
            "line at {:.1} Hz: {:.1} dB out, its fractions {:.1} dB, {:.2} of its energy below it",
            found.frequency_hz, found.prominence_db, found.fraction_db, found.low_energy
        ));
        if !found.may_be_a_rate() {
            continue;
        }
        if let Some(counted) = line::count(window.bank, &window.x, window.rate_hz, found) {
            explanation.push(format!(
                "its cycles: period {:.5} ms, {} firings, evidence {:.0} nats, scatter {:.2} %",
                1e3 * counted.fit.period_s,
                counted.fit.chain.index.len(),
                counted.fit.evidence,
                100.0 * counted.fit.jitter
            ));
            if best.as_ref().is_none_or(|b| counted.fit.evidence > b.fit.evidence) {
                best = Some(counted);
            }
        }
    }
    best
}

/// True if the line explains what is heard better than separate clicks.
#[must_use]
pub fn line_wins(line: &LineTrain, clicks: Option<&Hypothesis>) -> bool {
    // Slower than this clicks stand apart in any channel: a line is then the tone of a whistle, or clicks say it better.
    let overlaps = line.fit.period_s < PHASE_BELOW_S;
    line.fit.cover > 0.6
        && line.fit.jitter < 0.15
        && (overlaps
            || clicks.is_none_or(|h| is_within_clicks(line, h))
            || clicks.is_none_or(|h| h.fit.evidence < LINE_ONLY_EVIDENCE))
        && clicks.is_none_or(|h| {
            is_within_clicks(line, h)
                || LINE_EVIDENCE * h.fit.evidence < line.fit.evidence
                || h.fit.period_s > LINE_PERIOD * line.fit.period_s
        })
}

/// True if close maxima were counted several times a cycle of a line that explains more: the swings of overlapping clicks.
fn is_within_clicks(line: &LineTrain, h: &Hypothesis) -> bool {
    h.fast && line.fit.period_s > LINE_PERIOD * h.fit.period_s && line.fit.evidence > h.fit.evidence
}

/// A line with far more evidence at a multiple of the rate of the clicks: half of the clicks may be lost in noise.
#[must_use]
pub fn contradicts(line: &LineTrain, h: &Hypothesis) -> bool {
    let ratio = h.fit.period_s / line.fit.period_s;
    line.fit.cover > 0.6
        && line.fit.jitter < 0.15
        && line.fit.evidence > LINE_EVIDENCE * h.fit.evidence
        && ratio > LINE_PERIOD
        && (ratio - ratio.round()).abs() < 0.03
}

/// The train read by its line alone; lines of the explanation are appended. The error is the reason in words.
pub fn by_line(window: &Window, line_hz: f64, explanation: &mut Vec<String>) -> Result<Train, &'static str> {
    let found = line::describe_at(&window.x, window.rate_hz, line_hz);
    let line =
        line::count(window.bank, &window.x, window.rate_hz, found).ok_or("the line at the rate does not hold")?;
    let read = phase::read(window.bank, &window.x, window.rate_hz, 1.0 / line.fit.period_s)
        .ok_or("the stretch is too short to follow the line's phase")?;
    let tones = presence::tones(&window.x, window.rate_hz, line_hz);
    let mut heard = Heard::of(&line.fit, tones, None, line_character(window, line_hz));
    // Below the rate at which clicks must overlap they would have been found one by one: the line alone is not believed.
    heard.rate_hz = heard.rate_hz.max(LINE_ONLY_HZ);
    explanation.push(heard.describe());
    if let Some(why) = heard.refusal() {
        return Err(why);
    }
    explanation.push(format!("clicks overlap: read by the line at {line_hz:.2} Hz"));
    let relative = read.jitter_s.value / line.fit.period_s;
    if relative < 4e-4 || (line.amplitude_cv < 0.025 && relative < 2e-3) {
        return Err("the sound is a steady tone, not a train of clicks");
    }
    let time_s: Vec<f64> = line.fit.chain.index.iter().map(|&i| line.candidates.time_s[i]).collect();
    let (number, stretches) = number(&time_s, &line.fit.chain.steps, line.fit.period_s);
    Ok(Train {
        size: line.fit.chain.index.iter().map(|&i| line.candidates.mark[i].exp() as f32).collect(),
        time_s,
        number,
        stretches,
        extra: Vec::new(),
        noise: None,
        phase_jitter_s: Some(read.jitter_s),
        period_s: line.fit.period_s,
        others: Vec::new(),
        unexplained: 0,
    })
}
