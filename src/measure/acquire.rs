//! From one conditioned window to a train or the reason why there is none.
//!
//! What the clicks look like, their period and the best way to time them are learnt on the most active few seconds (on the whole
//! window if those hold too few firings); the train is then followed through the whole window with what was learnt.

use super::hypothesis::{self, APART_S, DENSITY, Hypothesis};
use super::refine::{Finder, refine};
use super::times::{self, Timing};
use super::train::{Train, number};
use super::trains;
use super::window::{FIND_HIGH_PASS_HZ, Window};
use crate::clicks::candidates;
use crate::clicks::timing::Flatness;
use crate::rhythm::OtherTrain;
use crate::rhythm::fit::{Fit, Start};
use crate::rhythm::line::{self, LineTrain};
use crate::rhythm::phase;
use crate::rhythm::presence::coherence::LineCharacter;
use crate::rhythm::presence::{self, Heard};
use crate::rhythm::search::fit_whole;

/// Floors of the whitening tried in turn: deep first, shallow if nothing is found.
const FLOORS: [f64; 2] = [2e-3, 0.1];
/// Least share of full scale that is worth a look.
const SILENCE: f32 = 1e-4;
/// Shortest window worth a look, s.
const SHORTEST_S: f64 = 0.5;
/// Length of the part that is learnt from, s, and the firings and cover that it must hold to be enough.
const LEARN_S: f64 = 4.0;
const LEARN_FIRINGS: usize = 40;
const LEARN_COVER: f64 = 0.8;
/// A line is taken if its evidence is this many times the clicks', or their period this many times the line's.
const LINE_EVIDENCE: f64 = 2.0;
const LINE_PERIOD: f64 = 1.4;
/// Natural log of the ratio from which clicks count as larger.
const LARGER: f64 = 0.05;
/// Rate to which a train read by its line alone is raised for the judgement of the line, Hz.
const LINE_ONLY_HZ: f64 = 1_300.0;
/// Periods below which a line at the same rate is asked for its phase, s.
const PHASE_BELOW_S: f64 = 0.8e-3;

/// Looks for a train; lines of the explanation are appended. The error is the reason in words.
pub fn train(window: &Window, explanation: &mut Vec<String>) -> Result<Train, &'static str> {
    let peak = window.x.iter().fold(0.0f32, |m, v| m.max(v.abs()));
    if peak < SILENCE {
        return Err("the recording is silent");
    }
    if window.duration_s() < SHORTEST_S {
        return Err("the recording is shorter than half a second");
    }
    if window.duration_s() > 1.5 * LEARN_S {
        explanation.push(format!("learning on the most active {LEARN_S} s"));
        let part = window.most_active_part(LEARN_S);
        match learn(&part, FLOORS[0], explanation) {
            Ok(Learnt::Clicks(model)) if model.is_enough() => return follow(window, *model, explanation),
            Ok(Learnt::Line(line)) => return by_line(window, line.line.frequency_hz, explanation),
            _ => explanation.push("too few firings there: learning on the whole window".into()),
        }
    }
    let mut reason = "no clicks stand out";
    for floor in FLOORS {
        match learn(window, floor, explanation) {
            Ok(Learnt::Clicks(model)) => return Ok(model.into_train(window)),
            Ok(Learnt::Line(line)) => return by_line(window, line.line.frequency_hz, explanation),
            Err(why) => {
                explanation.push(format!("refused: {why}"));
                reason = why;
            }
        }
    }
    Err(reason)
}

/// What a part of the audio taught.
enum Learnt {
    Clicks(Box<Model>),
    Line(Box<LineTrain>),
}

/// Separate clicks: how they are found, how they are timed, and the train in the part learnt from.
struct Model {
    hypothesis: Hypothesis,
    finder: Finder,
    timing: Timing,
    overlaps: bool,
    others: Vec<OtherTrain>,
}

impl Model {
    fn is_enough(&self) -> bool {
        self.hypothesis.fit.chain.index.len() >= LEARN_FIRINGS && self.hypothesis.fit.cover > LEARN_COVER
    }

    /// The train of the window that was learnt from itself.
    fn into_train(self, window: &Window) -> Train {
        let flat = self.timing.reader.as_ref().map_or(&[][..], |(_, flatness)| window.flat(*flatness));
        let train = finish_train(window, &self.hypothesis, &self.timing, flat, self.overlaps);
        Train { others: self.others, ..train }
    }
}

fn learn(window: &Window, floor: f64, explanation: &mut Vec<String>) -> Result<Learnt, &'static str> {
    let whitened = window.through(&window.kernel(window.spectrum.whitening(FIND_HIGH_PASS_HZ, floor)));
    let clicks = hypothesis::best(window, &whitened, explanation);
    let line = best_line(window, explanation);
    if line.as_ref().is_some_and(|l| line_wins(l, clicks.as_ref())) {
        return line.map(|l| Learnt::Line(Box::new(l))).ok_or("no line stands out");
    }
    let Some(mut h) = clicks else { return Err("no clicks stand out") };
    let first_evidence = h.fit.evidence;
    let mut finder = refine(window, &whitened, floor, &mut h);
    h.fit.evidence = h.fit.evidence.max(first_evidence);
    let mut others = trains::beside(&h, window.duration_s());
    if let Some(larger) = largest(&h, &others) {
        // The figures are those of the train with the largest clicks, whichever was found first.
        let first = std::mem::replace(&mut h.fit, others.swap_remove(larger));
        explanation.push(format!(
            "a train of {:.3} ms has larger clicks than that of {:.3} ms",
            1e3 * h.fit.period_s,
            1e3 * first.period_s
        ));
        finder = refine(window, &whitened, floor, &mut h);
        others = trains::beside(&h, window.duration_s());
    }
    let mark = trains::median_mark(&h.candidates, &h.fit);
    let others: Vec<OtherTrain> = others.iter().filter_map(|f| trains::figures(&h.candidates, f, mark)).collect();
    for other in &others {
        explanation.push(format!(
            "beside it a train of {:.3} /s, {:.2} times as large",
            other.firing_rate_hz.value, other.relative_size
        ));
    }
    explanation.push(format!(
        "refined: period {:.5} ms, {} firings, evidence {:.0} nats",
        1e3 * h.fit.period_s,
        h.fit.chain.index.len(),
        h.fit.evidence
    ));
    check_presence(window, &h, explanation)?;
    let chain_times: Vec<f64> = h.fit.chain.index.iter().map(|&i| h.candidates.time_s[i]).collect();
    let (numbers, _) = number(&chain_times, &h.fit.chain.steps, h.fit.period_s);
    let timing = times::choose(window, &finder.whitened, &h, &numbers);
    explanation.push(format!(
        "times read with {}, expected timing noise {:.2} µs",
        timing.channel,
        1e6 * timing.noise_s
    ));
    let overlaps =
        h.fit.period_s < PHASE_BELOW_S && line.is_some_and(|l| (l.fit.period_s / h.fit.period_s - 1.0).abs() < 0.03);
    Ok(Learnt::Clicks(Box::new(Model { hypothesis: h, finder, timing, overlaps, others })))
}

/// Which of the other trains has clearly larger clicks than the hypothesis, if any.
fn largest(h: &Hypothesis, others: &[Fit]) -> Option<usize> {
    let own = trains::median_mark(&h.candidates, &h.fit) + LARGER;
    (0..others.len())
        .map(|i| (i, trains::median_mark(&h.candidates, &others[i])))
        .filter(|(_, m)| *m > own)
        .max_by(|a, b| a.1.total_cmp(&b.1))
        .map(|(i, _)| i)
}

fn check_presence(window: &Window, h: &Hypothesis, explanation: &mut Vec<String>) -> Result<(), &'static str> {
    let rate_hz = 1.0 / h.fit.period_s;
    let tones = presence::tones(&window.x, window.rate_hz, rate_hz);
    let times: Vec<f64> = h.fit.chain.index.iter().map(|&i| h.candidates.time_s[i]).collect();
    let high = window.through(&window.kernel(|f| ((f - 200.0) / 100.0).clamp(0.0, 1.0)));
    let character = presence::character::of_clicks(&high, window.rate_hz, &times);
    let heard = Heard::of(&h.fit, tones, character, line_character(window, rate_hz));
    explanation.push(heard.describe());
    heard.refusal().map_or(Ok(()), Err)
}

/// Rates from which a line at the rate is looked at, Hz.
const LINE_FROM_HZ: f64 = 300.0;

fn line_character(window: &Window, rate_hz: f64) -> Option<LineCharacter> {
    if rate_hz < LINE_FROM_HZ {
        return None;
    }
    presence::coherence::of_line(window.bank, &window.x, window.rate_hz, rate_hz)
}

/// Follows a train through a longer window than it was learnt from.
fn follow(window: &Window, model: Model, explanation: &mut Vec<String>) -> Result<Train, &'static str> {
    let Model { mut hypothesis, finder, timing, overlaps, others } = model;
    let mut output = Vec::new();
    candidates::matched_output(window.bank, &window.through(&finder.kernel), &hypothesis.shape, &mut output);
    let found = candidates::find(&output, window.rate_hz, if hypothesis.fast { 0.0 } else { APART_S });
    let start = Start::again(&hypothesis.fit);
    hypothesis.fit =
        fit_whole(&found, window.duration_s(), start, DENSITY).ok_or("the rhythm is lost after a few seconds")?;
    hypothesis.candidates = found;
    explanation.push(format!(
        "followed through the window: {} firings, evidence {:.0} nats, covers {:.0} %",
        hypothesis.fit.chain.index.len(),
        hypothesis.fit.evidence,
        100.0 * hypothesis.fit.cover
    ));
    let flat =
        timing.reader.as_ref().map_or_else(Vec::new, |(_, flatness)| window.through(&window.flattening(*flatness)));
    Ok(Train { others, ..finish_train(window, &hypothesis, &timing, &flat, overlaps) })
}

fn finish_train(window: &Window, h: &Hypothesis, timing: &Timing, flat: &[f32], overlaps: bool) -> Train {
    let found: Vec<f64> = h.fit.chain.index.iter().map(|&i| h.candidates.time_s[i]).collect();
    let time_s = timing.read(flat, &found);
    let mut train = Train::of_clicks(h, time_s, timing.noise_s, window.flat(Flatness::Plain), window.rate_hz);
    let scale = plain_scale(window);
    train.size.iter_mut().for_each(|s| *s *= scale);
    train.extra.iter_mut().for_each(|e| e.1 *= scale);
    if overlaps {
        let read = phase::read(window.bank, &window.x, window.rate_hz, 1.0 / h.fit.period_s);
        train.phase_jitter_s = read.map(|p| p.jitter_s);
    }
    train
}

/// The flattened signal for reading sizes is scaled by its gain: this takes it back to full scale.
fn plain_scale(window: &Window) -> f32 {
    let (high_pass_hz, floor) = Flatness::Plain.settings();
    let gain = window.spectrum.whitening(high_pass_hz, floor);
    (1.0 / gain(1_000.0).max(1e-30)) as f32
}

fn best_line(window: &Window, explanation: &mut Vec<String>) -> Option<LineTrain> {
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

fn line_wins(line: &LineTrain, clicks: Option<&Hypothesis>) -> bool {
    line.fit.cover > 0.6
        && line.fit.jitter < 0.15
        && clicks.is_none_or(|h| {
            LINE_EVIDENCE * h.fit.evidence < line.fit.evidence || h.fit.period_s > LINE_PERIOD * line.fit.period_s
        })
}

fn by_line(window: &Window, line_hz: f64, explanation: &mut Vec<String>) -> Result<Train, &'static str> {
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
        noise_s: None,
        phase_jitter_s: Some(read.jitter_s),
        period_s: line.fit.period_s,
        others: Vec::new(),
    })
}
