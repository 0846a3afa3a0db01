//! From one conditioned window to a train or the reason why there is none.

use super::hypothesis::{self, Hypothesis};
use super::refine::refine;
use super::times;
use super::train::{Train, number};
use super::window::Window;
use crate::clicks::timing::Flatness;
use crate::rhythm::line::{self, LineTrain};
use crate::rhythm::{phase, presence};

/// Floors of the whitening tried in turn: deep first, shallow if nothing is found.
const FLOORS: [f64; 2] = [2e-3, 0.1];
/// Least share of full scale that is worth a look.
const SILENCE: f32 = 1e-4;
/// Shortest window worth a look, s.
const SHORTEST_S: f64 = 0.5;
/// A line is taken if its evidence is this many times the clicks', or their period this many times the line's.
const LINE_EVIDENCE: f64 = 2.0;
const LINE_PERIOD: f64 = 1.4;
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
    let mut reason = "no clicks stand out";
    for floor in FLOORS {
        explanation.push(format!("whitened with a floor of {floor}"));
        match once(window, floor, explanation) {
            Ok(train) => return Ok(train),
            Err(why) => {
                explanation.push(format!("refused: {why}"));
                reason = why;
            }
        }
    }
    Err(reason)
}

fn once(window: &Window, floor: f64, explanation: &mut Vec<String>) -> Result<Train, &'static str> {
    let whitened = window.whitened(floor);
    let clicks = hypothesis::best(window, &whitened, explanation);
    let line = best_line(window, explanation);
    if let Some(line) = line.as_ref().filter(|l| line_wins(l, clicks.as_ref())) {
        return by_line(window, line, explanation);
    }
    let Some(mut h) = clicks else { return Err("no clicks stand out") };
    let first_evidence = h.fit.evidence;
    let x = refine(window, whitened, &mut h);
    explanation.push(format!(
        "refined: period {:.5} ms, {} firings, evidence {:.0} nats",
        1e3 * h.fit.period_s,
        h.fit.chain.index.len(),
        h.fit.evidence
    ));
    let chain_times: Vec<f64> = h.fit.chain.index.iter().map(|&i| h.candidates.time_s[i]).collect();
    let (numbers, stretches) = number(&chain_times, &h.fit.chain.steps, h.fit.period_s);
    let times = times::read(window, &x, &h, &numbers);
    explanation.push(format!("times read with {}, expected timing noise {:.2} µs", times.channel, 1e6 * times.noise_s));
    h.fit.evidence = h.fit.evidence.max(first_evidence);
    let rate_hz = 1.0 / h.fit.period_s;
    let tones = presence::tones(&window.x, window.rate_hz, rate_hz);
    explanation.push(format!(
        "energy: {:.0} % in tones foreign to the rate, {:.0} % outside the line at the rate, {:.0} % in six lines",
        100.0 * tones.foreign,
        100.0 * tones.outside,
        100.0 * tones.six
    ));
    if let Some(why) = presence::refuse(&h.fit, &tones, rate_hz, h.fit.jitter) {
        return Err(why);
    }
    let mut train = Train::of_clicks(&h, times, window.flat(Flatness::Plain), window.rate_hz, numbers, stretches);
    let scale = plain_scale(window);
    train.size.iter_mut().for_each(|s| *s *= scale);
    train.extra.iter_mut().for_each(|e| e.1 *= scale);
    if h.fit.period_s < PHASE_BELOW_S
        && let Some(line) = &line
        && (line.fit.period_s / h.fit.period_s - 1.0).abs() < 0.03
    {
        train.phase_jitter_s =
            phase::read(window.bank, &window.x, window.rate_hz, line.line.frequency_hz).map(|p| p.jitter_s);
    }
    Ok(train)
}

/// The flattened signal for reading sizes is scaled by its gain: this takes it back to full scale.
fn plain_scale(window: &Window) -> f32 {
    let gain = window.spectrum.whitening(Flatness::Plain.settings().0, Flatness::Plain.settings().1);
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

fn by_line(window: &Window, line: &LineTrain, explanation: &mut Vec<String>) -> Result<Train, &'static str> {
    let read = phase::read(window.bank, &window.x, window.rate_hz, line.line.frequency_hz)
        .ok_or("the stretch is too short to follow the line's phase")?;
    explanation.push(format!("clicks overlap: read by the line at {:.2} Hz", line.line.frequency_hz));
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
        evidence: line.fit.evidence,
    })
}
