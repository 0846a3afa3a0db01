//! The best timing channel for the clicks on a rhythm, and the timing noise to expect there.

use super::hypothesis::Hypothesis;
use super::window::Window;
use crate::clicks::shape::pieces;
use crate::clicks::snippet::dot;
use crate::clicks::timing::{Flatness, Reader, channels};
use crate::rhythm::fit::median;
use crate::rhythm::statistics::robust;

/// Clicks in a row by which channels are compared.
const TRIAL: usize = 500;
/// A channel must be better by this share to be preferred, and counts as near the best within this.
const BETTER: f64 = 0.99;
const NEAR: f64 = 1.1;
/// Timing noise that no reading goes under, s: interpolation between samples.
const LEAST_NOISE_S: f64 = 2e-7;

/// Click times read in the best channel.
pub struct Times {
    /// Times of the chain's clicks, s.
    pub time_s: Vec<f64>,
    /// Timing noise that the audio's noise predicts, s.
    pub noise_s: f64,
    /// Which channel.
    pub channel: String,
}

/// Reads the clicks of a hypothesis in the channel with the least scatter.
#[must_use]
pub fn read(window: &Window, whitened: &[f32], h: &Hypothesis, number: &[i64]) -> Times {
    let all: Vec<f64> = h.fit.chain.index.iter().map(|&i| h.candidates.time_s[i]).collect();
    let from = all.len().saturating_sub(TRIAL) / 2;
    let trial = from..(from + TRIAL).min(all.len());
    let (start, numbers) = (&all[trial.clone()], &number[trial]);
    let period_s = h.fit.period_s;
    let first = robust::scatter(start, numbers);
    let mut best: (f64, Option<(Reader, Flatness)>, String, Vec<f64>) =
        (first, None, "as found".into(), start.to_vec());
    let mut tried: Vec<(f64, Vec<f64>)> = Vec::new();
    for channel in channels(h.shape.signed) {
        let x = window.flat(channel.flatness);
        let mut times = start.to_vec();
        let mut reader = None;
        for _ in 0..2 {
            reader = channel.learn(x, window.rate_hz, &times, period_s, h.shape.signed);
            let Some(r) = &reader else { break };
            times = r.read(x, &times);
        }
        let Some(reader) = reader else { continue };
        let scatter = robust::scatter(&times, numbers);
        if scatter < BETTER * best.0 {
            best = (scatter, Some((reader, channel.flatness)), format!("{channel:?}"), times.clone());
        }
        tried.push((scatter, times));
    }
    let time_s = match &best.1 {
        Some((reader, flatness)) => {
            let x = window.flat(*flatness);
            reader.read(x, &reader.read(x, &all))
        }
        None => all.clone(),
    };
    let between: Vec<f64> = tried
        .iter()
        .filter(|(s, t)| *s < NEAR * best.0 && *t != best.3)
        .map(|(_, t)| spread_of_difference(t, &best.3))
        .collect();
    let between_s = if between.is_empty() { 0.02 * period_s } else { median(&between) };
    let predicted = predicted_noise_s(window, whitened, h);
    Times {
        time_s,
        noise_s: (predicted * predicted + between_s * between_s + LEAST_NOISE_S * LEAST_NOISE_S).sqrt(),
        channel: best.2,
    }
}

fn spread_of_difference(a: &[f64], b: &[f64]) -> f64 {
    let d: Vec<f64> = a.iter().zip(b).map(|(x, y)| x - y).collect();
    let centre = median(&d);
    1.4826 * median(&d.iter().map(|v| (v - centre).abs()).collect::<Vec<_>>())
}

/// Arrival-time bound for the median click (Woodward 1953: 1/(mark · slope of the unit shape)), with the misfit of single
/// clicks to the shape added.
fn predicted_noise_s(window: &Window, whitened: &[f32], h: &Hypothesis) -> f64 {
    let shape = &h.shape.vectors[0];
    let slope =
        (1..shape.len() - 1).map(|i| f64::from(0.5 * (shape[i + 1] - shape[i - 1])).powi(2)).sum::<f64>().sqrt()
            * window.rate_hz;
    let marks: Vec<f64> = h.fit.chain.index.iter().map(|&i| h.candidates.mark[i]).collect();
    let by_noise = 1.0 / (median(&marks).exp() * slope);
    let stride = h.fit.chain.index.len().div_ceil(TRIAL).max(1);
    let positions: Vec<f64> =
        h.fit.chain.index.iter().step_by(stride).map(|&i| h.candidates.time_s[i] * window.rate_hz).collect();
    let misfit: Vec<f64> = pieces(whitened, &positions, h.shape.centre)
        .iter()
        .map(|row| {
            let fitted: f32 = h.shape.vectors.iter().map(|v| dot(row, v).powi(2)).sum();
            let left = (dot(row, row) - fitted).max(0.0);
            f64::from((left / fitted.max(1e-30)).sqrt())
        })
        .collect();
    let freedom = (2.0 * slope / std::f64::consts::TAU * shape.len() as f64 / window.rate_hz - 2.0).max(3.0);
    let by_misfit = median(&misfit) / freedom.sqrt() / slope;
    by_noise.hypot(by_misfit)
}
