//! What a piece of audio teaches: what the clicks look like, their period, the trains there are, and the best way to time them.

use super::hypothesis::{self, Hypothesis, Reach};
use super::model::Model;
use super::refine::{Finder, refine};
use super::train::number;
use super::window::{FIND_HIGH_PASS_HZ, Window};
use super::{multiples, overlap, times, trains};
use crate::rhythm::fit::Fit;
use crate::rhythm::line::LineTrain;
use crate::rhythm::presence::{self, Heard};

/// Rounds of sorting trains by the size of their clicks.
const ROUNDS: usize = 3;

/// What was learnt.
pub enum Learnt {
    /// Separate clicks.
    Clicks(Box<Lesson>),
    /// A line at the rate of clicks that overlap.
    Line(Box<LineTrain>),
}

/// Separate clicks as they were learnt: the train in this very window, and the model to follow it elsewhere.
pub struct Lesson {
    /// The rhythm.
    pub hypothesis: Hypothesis,
    /// Trains beside it.
    pub others: Vec<Fit>,
    /// The way to follow it.
    pub model: Model,
}

/// Learns from a window, its spectrum flattened down to `floor`. The error is the reason in words why there is nothing to learn.
pub fn learn(window: &Window, floor: f64, reach: Reach, explanation: &mut Vec<String>) -> Result<Learnt, &'static str> {
    let whitened = whitened(window, floor);
    let clicks = hypothesis::best(window, &whitened, reach, explanation);
    let line = if reach.is_all() { overlap::best_line(window, explanation) } else { None };
    if line.as_ref().is_some_and(|l| overlap::line_wins(l, clicks.as_ref())) {
        return line.map(|l| Learnt::Line(Box::new(l))).ok_or("no line stands out");
    }
    if let (Some(l), Some(h)) = (&line, &clicks)
        && overlap::contradicts(l, h)
    {
        return Err("the clicks and the line at the rate tell different rates");
    }
    let Some(h) = clicks else { return Err("no clicks stand out") };
    let line_s = line.map(|l| l.fit.period_s);
    teach(window, &whitened, floor, h, line_s, explanation).map(|lesson| Learnt::Clicks(Box::new(lesson)))
}

/// Learns from a window in which a rhythm is known already.
pub fn learn_known(
    window: &Window,
    floor: f64,
    h: Hypothesis,
    explanation: &mut Vec<String>,
) -> Result<Lesson, &'static str> {
    let whitened = whitened(window, floor);
    teach(window, &whitened, floor, h, None, explanation)
}

fn whitened(window: &Window, floor: f64) -> Vec<f32> {
    window.through(&window.kernel(window.spectrum().whitening(FIND_HIGH_PASS_HZ, floor)))
}

/// What a hypothesis teaches; `line_s` is the period of a line that stands out beside it.
fn teach(
    window: &Window,
    whitened: &[f32],
    floor: f64,
    mut h: Hypothesis,
    line_s: Option<f64>,
    explanation: &mut Vec<String>,
) -> Result<Lesson, &'static str> {
    let (finder, others) = sort_out(window, whitened, floor, &mut h, explanation)?;
    check_presence(window, &h, explanation)?;
    let chain_times = h.fit.times_s(&h.candidates);
    let (numbers, _) = number(&chain_times, &h.fit.chain.steps, h.fit.period_s);
    let timing = times::choose(window, &finder.whitened, &h, &numbers);
    explanation.push(format!(
        "times read with {}, expected timing noise {:.2} to {:.2} µs",
        timing.channel,
        1e6 * timing.noise.least_s,
        1e6 * timing.noise.most_s
    ));
    let overlaps = h.fit.period_s < overlap::PHASE_BELOW_S
        && line_s.is_some_and(|line_s| (line_s / h.fit.period_s - 1.0).abs() < 0.03);
    let model = Model::new(window, &h, &others, &finder, timing, overlaps);
    Ok(Lesson { hypothesis: h, others, model })
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
        let joined = multiples::join(h, &others, duration_s, explanation);
        if joined {
            others = trains::beside(h, duration_s);
        }
        round += 1;
        if round == ROUNDS || (!joined && trains::largest(h, &others).is_none()) {
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
        "refined: period {:.5} ms, {} firings, evidence {:.0} nats; marks {:.2} ± {:.2} on it, {:.2} ± {:.2} off it",
        1e3 * h.fit.period_s,
        h.fit.chain.index.len(),
        h.fit.evidence,
        h.fit.marks.on.0,
        h.fit.marks.on.1,
        h.fit.marks.off.0,
        h.fit.marks.off.1
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
