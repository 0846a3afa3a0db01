//! The best timing channel for the clicks on a rhythm, and the timing noise to expect there.

use super::hypothesis::Hypothesis;
use super::window::Window;
use crate::clicks::shape::pieces;
use crate::clicks::snippet::dot;
use crate::clicks::timing::{Channel, Flatness, Reader, channels};
use crate::rhythm::order::median;
use crate::rhythm::statistics::{NoiseRange, robust};

/// Clicks in a row by which channels are compared, and clicks of a first look after which only those stay whose scatter is within
/// this factor of the least.
const TRIAL: usize = 500;
const FIRST_TRIAL: usize = 120;
const STAYS: f64 = 1.3;
/// A channel must be better by this share to be preferred, and counts as near the best within this.
const BETTER: f64 = 0.99;
const NEAR: f64 = 1.1;
/// Timing noise that no reading goes under, s: interpolation between samples.
const LEAST_NOISE_S: f64 = 2e-7;

/// The way to read click times that scatters least, and the timing noise to expect of it.
pub struct Timing {
    /// The reader with its flattening, or none: the times as found.
    pub reader: Option<(Reader, Flatness)>,
    /// Timing noise to expect.
    pub noise: NoiseRange,
    /// Which channel, in words.
    pub channel: String,
}

impl Timing {
    /// Reads times (s) anew in a signal flattened for this reader.
    #[must_use]
    pub fn read(&self, flat: &[f32], time_s: &[f64]) -> Vec<f64> {
        match &self.reader {
            Some((reader, _)) => reader.read(flat, &reader.read(flat, time_s)),
            None => time_s.to_vec(),
        }
    }
}

/// Compares the channels on up to 500 clicks in a row of a hypothesis.
#[must_use]
pub fn choose(window: &Window, whitened: &[f32], h: &Hypothesis, number: &[i64]) -> Timing {
    let all: Vec<f64> = h.fit.chain.index.iter().map(|&i| h.candidates.time_s[i]).collect();
    let from = all.len().saturating_sub(TRIAL) / 2;
    let trial = from..(from + TRIAL).min(all.len());
    let (start, numbers) = (&all[trial.clone()], &number[trial]);
    let mut best = Trial {
        scatter: robust::scatter(start, numbers),
        reader: None,
        name: "as found".into(),
        times: start.to_vec(),
    };
    let mut tried: Vec<(f64, Vec<f64>)> = Vec::new();
    for channel in promising(window, start, numbers, h) {
        let Some((reader, times)) = read_by(window, channel, start, h) else { continue };
        let scatter = robust::scatter(&times, numbers);
        if scatter < BETTER * best.scatter {
            best = Trial {
                scatter,
                reader: Some((reader, channel.flatness)),
                name: channel.to_string(),
                times: times.clone(),
            };
        }
        tried.push((scatter, times));
    }
    let between: Vec<f64> = tried
        .iter()
        .filter(|(s, t)| *s < NEAR * best.scatter && *t != best.times)
        .map(|(_, t)| spread_of_difference(t, &best.times))
        .collect();
    // The best channel is no worse than its closest relative says.
    let between_s = between.iter().copied().fold(f64::INFINITY, f64::min);
    let (by_noise, by_misfit) = predicted_noise_s(window, whitened, h);
    let between_s = between_s.min(by_misfit);
    Timing {
        reader: best.reader,
        noise: NoiseRange {
            least_s: by_noise.hypot(LEAST_NOISE_S),
            most_s: by_noise.hypot(between_s).hypot(LEAST_NOISE_S),
        },
        channel: best.name,
    }
}

/// The channels that scatter little on a few clicks.
fn promising(window: &Window, start: &[f64], numbers: &[i64], h: &Hypothesis) -> Vec<Channel> {
    let all = channels(h.shape.signed);
    if start.len() < 2 * FIRST_TRIAL {
        return all;
    }
    let from = (start.len() - FIRST_TRIAL) / 2;
    let part = from..from + FIRST_TRIAL;
    let scatter = |channel: &Channel| {
        let (_, times) = read_by(window, *channel, &start[part.clone()], h)?;
        Some(robust::scatter(&times, &numbers[part.clone()]))
    };
    let scatters: Vec<Option<f64>> = all.iter().map(scatter).collect();
    let least = scatters.iter().flatten().copied().fold(f64::INFINITY, f64::min);
    let stays = |s: &Option<f64>| s.is_some_and(|s| s <= STAYS * least);
    all.into_iter().zip(&scatters).filter(|(_, s)| stays(s)).map(|(c, _)| c).collect()
}

struct Trial {
    scatter: f64,
    reader: Option<(Reader, Flatness)>,
    name: String,
    times: Vec<f64>,
}

/// Learns a channel's shape and reads the times in it, twice.
fn read_by(window: &Window, channel: Channel, start: &[f64], h: &Hypothesis) -> Option<(Reader, Vec<f64>)> {
    let x = window.flat(channel.flatness);
    let mut times = start.to_vec();
    let mut reader = None;
    for _ in 0..2 {
        let learnt = channel.learn(x, window.rate_hz, &times, h.fit.period_s, h.shape.signed)?;
        times = learnt.read(x, &times);
        reader = Some(learnt);
    }
    reader.map(|r| (r, times))
}

fn spread_of_difference(a: &[f64], b: &[f64]) -> f64 {
    let d: Vec<f64> = a.iter().zip(b).map(|(x, y)| x - y).collect();
    let centre = median(&d);
    1.4826 * median(&d.iter().map(|v| (v - centre).abs()).collect::<Vec<_>>())
}

/// Arrival-time bound for the median click (Woodward 1953: 1/(mark · slope of the unit shape)), and what the misfit of single
/// clicks to the shape would add.
fn predicted_noise_s(window: &Window, whitened: &[f32], h: &Hypothesis) -> (f64, f64) {
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
    (by_noise, by_misfit)
}
