//! From one conditioned window to a train or the reason why there is none.
//!
//! What the clicks look like, their period and the best way to time them are learnt on the most active few seconds (on the whole
//! window if those hold too few firings); the train is then followed through the whole window with what was learnt.

use super::hypothesis::{self, Hypothesis, apart_s};
use super::refine::{Finder, refine};
use super::times::{self, Timing};
use super::train::{Train, number};
use super::window::{FIND_HIGH_PASS_HZ, Window};
use super::{multiples, overlap, trains};
use crate::clicks::candidates;
use crate::clicks::timing::Flatness;
use crate::rhythm::fit::Fit;
use crate::rhythm::line::LineTrain;
use crate::rhythm::phase;
use crate::rhythm::presence::{self, Heard};

/// Floors of the whitening tried in turn: deep first, shallow if nothing is found.
const FLOORS: [f64; 2] = [2e-3, 0.1];
/// Least share of full scale that is worth a look.
const SILENCE: f32 = 1e-4;
/// Shortest window worth a look, s.
const SHORTEST_S: f64 = 0.5;
/// Length of the part that is learnt from, s, and the firings and cover that it must hold to be enough; it may be silent
/// between with many firings, or with a few that each bring much evidence (nats).
const LEARN_S: f64 = 4.0;
const LEARN_FIRINGS: usize = 40;
const LEARN_COVER: f64 = 0.8;
const MANY_FIRINGS: usize = 150;
const FEW_FIRINGS: usize = 25;
const SOLID_EVIDENCE: f64 = 2.0;
/// A followed train that leaves more equal clicks than this beside it, per firing, has lost its rhythm.
const MOST_STRAYS: f64 = 0.3;
/// Rounds of sorting trains by the size of their clicks.
const ROUNDS: usize = 3;

/// Looks for a train; lines of the explanation are appended. The error is the reason in words.
pub fn train(window: &Window, explanation: &mut Vec<String>) -> Result<Train, &'static str> {
    let peak = window.x.iter().fold(0.0f32, |m, v| m.max(v.abs()));
    if peak < SILENCE {
        return Err("the recording is silent");
    }
    if window.duration_s() < SHORTEST_S {
        return Err("the recording is shorter than half a second");
    }
    let mut expected_s = None;
    if window.duration_s() > 1.5 * LEARN_S {
        explanation.push(format!("learning on the most active {LEARN_S} s"));
        let part = window.most_active_part(LEARN_S);
        match learn(&part, FLOORS[0], None, explanation) {
            Ok(Learnt::Clicks(model)) if model.is_enough() => match follow(window, *model, explanation) {
                Some(train) => return Ok(train),
                None => explanation.push("the rhythm is lost there: learning on the whole window".into()),
            },
            Ok(Learnt::Line(line)) => return overlap::by_line(window, line.line.frequency_hz, explanation),
            found => {
                if let Ok(Learnt::Clicks(model)) = found {
                    expected_s = Some(model.hypothesis.fit.period_s);
                }
                explanation.push("too few firings there: learning on the whole window".into());
            }
        }
    }
    let mut reason = "no clicks stand out";
    for floor in FLOORS {
        match learn(window, floor, expected_s, explanation) {
            Ok(Learnt::Clicks(model)) => return Ok(model.into_train(window)),
            Ok(Learnt::Line(line)) => return overlap::by_line(window, line.line.frequency_hz, explanation),
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

/// Separate clicks: how they are found, how they are timed, and the trains in the part learnt from.
struct Model {
    hypothesis: Hypothesis,
    finder: Finder,
    timing: Timing,
    overlaps: bool,
    others: Vec<Fit>,
}

impl Model {
    fn is_enough(&self) -> bool {
        let fit = &self.hypothesis.fit;
        let firings = fit.chain.index.len();
        let solid =
            firings >= MANY_FIRINGS || (firings >= FEW_FIRINGS && fit.evidence > SOLID_EVIDENCE * firings as f64);
        (firings >= LEARN_FIRINGS && fit.cover > LEARN_COVER) || (solid && fit.fills_its_time())
    }

    /// The train of the window that was learnt from itself.
    fn into_train(self, window: &Window) -> Train {
        let flat = self.timing.reader.as_ref().map_or(&[][..], |(_, flatness)| window.flat(*flatness));
        finish_train(window, &self.hypothesis, &self.others, &self.timing, flat, self.overlaps)
    }
}

fn learn(
    window: &Window,
    floor: f64,
    expected_s: Option<f64>,
    explanation: &mut Vec<String>,
) -> Result<Learnt, &'static str> {
    let whitened = window.through(&window.kernel(window.spectrum.whitening(FIND_HIGH_PASS_HZ, floor)));
    let clicks = hypothesis::best(window, &whitened, expected_s, explanation);
    let line = overlap::best_line(window, explanation);
    if line.as_ref().is_some_and(|l| overlap::line_wins(l, clicks.as_ref())) {
        return line.map(|l| Learnt::Line(Box::new(l))).ok_or("no line stands out");
    }
    if let (Some(l), Some(h)) = (&line, &clicks)
        && overlap::contradicts(l, h)
    {
        return Err("the clicks and the line at the rate tell different rates");
    }
    let Some(mut h) = clicks else { return Err("no clicks stand out") };
    let (finder, others) = sort_out(window, &whitened, floor, &mut h, explanation)?;
    check_presence(window, &h, explanation)?;
    let chain_times = h.fit.times_s(&h.candidates);
    let (numbers, _) = number(&chain_times, &h.fit.chain.steps, h.fit.period_s);
    let timing = times::choose(window, &finder.whitened, &h, &numbers);
    explanation.push(format!(
        "times read with {}, expected timing noise {:.2} µs",
        timing.channel,
        1e6 * timing.noise_s
    ));
    let overlaps = h.fit.period_s < overlap::PHASE_BELOW_S
        && line.is_some_and(|l| (l.fit.period_s / h.fit.period_s - 1.0).abs() < 0.03);
    Ok(Learnt::Clicks(Box::new(Model { hypothesis: h, finder, timing, overlaps, others })))
}

/// Refines a hypothesis and tells the trains that are heard apart; afterwards the hypothesis is the train with the largest
/// clicks, whichever was found first. The other trains are returned with the way clicks are found.
fn sort_out(
    window: &Window,
    whitened: &[f32],
    floor: f64,
    h: &mut Hypothesis,
    explanation: &mut Vec<String>,
) -> Result<(Finder, Vec<Fit>), &'static str> {
    let duration_s = window.duration_s();
    let mut others = trains::beside(h, duration_s);
    let mut finder;
    let mut round = 0;
    loop {
        if let Some(larger) = trains::largest(h, &others) {
            let smaller = std::mem::replace(&mut h.fit, others[larger].clone());
            explanation.push(format!(
                "a train of {:.3} ms has larger clicks than that of {:.3} ms",
                1e3 * h.fit.period_s,
                1e3 * smaller.period_s
            ));
            others[larger] = smaller;
        }
        let evidence = h.fit.evidence;
        finder = refine(window, whitened, floor, h, &trains::times_of(&h.candidates, &others));
        h.fit.evidence = h.fit.evidence.max(evidence);
        multiples::settle(h, duration_s, explanation)?;
        others = trains::beside(h, duration_s);
        round += 1;
        if round == ROUNDS || trains::largest(h, &others).is_none() {
            break;
        }
    }
    for other in trains::figures_of(h, &others) {
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
    Ok((finder, others))
}

fn check_presence(window: &Window, h: &Hypothesis, explanation: &mut Vec<String>) -> Result<(), &'static str> {
    let rate_hz = 1.0 / h.fit.period_s;
    let tones = presence::tones(&window.x, window.rate_hz, rate_hz);
    let times = h.fit.times_s(&h.candidates);
    let high = window.through(&window.kernel(|f| ((f - 200.0) / 100.0).clamp(0.0, 1.0)));
    let character = presence::character::of_clicks(&high, window.rate_hz, &times);
    let heard = Heard::of(&h.fit, tones, character, overlap::line_character(window, rate_hz));
    explanation.push(heard.describe());
    heard.refusal().map_or(Ok(()), Err)
}

/// Follows a train through a longer window than it was learnt from; none if it is lost.
fn follow(window: &Window, model: Model, explanation: &mut Vec<String>) -> Option<Train> {
    let Model { mut hypothesis, finder, timing, overlaps, others } = model;
    let mut output = Vec::new();
    candidates::matched_output(window.bank, &window.through(&finder.kernel), &hypothesis.shape, &mut output);
    let apart = apart_s(&hypothesis.shape, window.rate_hz, hypothesis.fit.period_s, hypothesis.fast);
    let found = candidates::find(&output, window.rate_hz, apart).over(hypothesis.candidates.scale);
    let (fit, others) = trains::follow(&found, window.duration_s(), &hypothesis.fit, &others)?;
    hypothesis.fit = fit;
    hypothesis.candidates = found;
    explanation.push(format!(
        "followed through the window: {} firings, evidence {:.0} nats, covers {:.0} %",
        hypothesis.fit.chain.index.len(),
        hypothesis.fit.evidence,
        100.0 * hypothesis.fit.cover
    ));
    let flat =
        timing.reader.as_ref().map_or_else(Vec::new, |(_, flatness)| window.through(&window.flattening(*flatness)));
    let train = finish_train(window, &hypothesis, &others, &timing, &flat, overlaps);
    let strays = train.extra.len() as f64 / train.time_s.len() as f64;
    (strays < MOST_STRAYS).then_some(train)
}

fn finish_train(
    window: &Window,
    h: &Hypothesis,
    others: &[Fit],
    timing: &Timing,
    flat: &[f32],
    overlaps: bool,
) -> Train {
    let time_s = timing.read(flat, &h.fit.times_s(&h.candidates));
    let mut train = Train::of_clicks(h, others, time_s, timing.noise_s, window.flat(Flatness::Plain), window.rate_hz);
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
