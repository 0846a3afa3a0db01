//! Clicks without a rhythm: static, a worn gap that fires by chance.

use super::window::Window;
use crate::firing::{Event, EventKind};
use crate::rhythm::order::median;
use crate::rhythm::presence::character;
use rustfft::num_complex::Complex32;

/// Blocks by whose peaks the typical height is judged, s.
const BLOCK_S: f64 = 0.35;
/// A click reaches this share of the typical height, and is this far from the next, s.
const HEIGHT: f32 = 0.4;
const APART_S: f64 = 0.8e-3;
/// Fewest clicks.
const FEWEST: usize = 20;
/// Mean of 2·|d' − d|/(d' + d) over neighbouring intervals: 1 for independent arrivals. A rhythm of which clicks are lost has
/// less, bursts have more; of neither a mean count rate would say much.
const VARIATION: (f64, f64) = (0.8, 1.2);
/// Character of clicks (stricter than for a rhythm: nothing else speaks for them).
const ALIKE: f64 = 0.8;
const CORE: f64 = 0.66;
const WIDTH_S: f64 = 0.6e-3;
const CLEAR: f64 = 4.0;

/// The clicks in a window in which no rhythm was found, as extra ones; none if what stands out does not look like clicks.
#[must_use]
pub fn clicks(window: &Window) -> Option<Vec<Event>> {
    let kernel = window.kernel(|f| ((f - 200.0) / 100.0).clamp(0.0, 1.0));
    let high = window.through(&kernel);
    let mut analytic: Vec<Complex32> = Vec::new();
    window.bank.apply_analytic(&window.x, &kernel, &mut analytic);
    let envelope: Vec<f32> = analytic.iter().map(|z| z.norm()).collect();
    let block = (BLOCK_S * window.rate_hz) as usize;
    let peaks: Vec<f64> = envelope.chunks(block).map(|c| f64::from(c.iter().copied().fold(0.0f32, f32::max))).collect();
    let threshold = HEIGHT * median(&peaks) as f32;
    let found = above(&envelope, threshold, (APART_S * window.rate_hz) as usize);
    let times: Vec<f64> = found.iter().map(|(at, _)| *at as f64 / window.rate_hz).collect();
    if times.len() < FEWEST || threshold <= 0.0 || !(VARIATION.0..VARIATION.1).contains(&local_variation(&times)) {
        return None;
    }
    let c = character::of_clicks(&high, window.rate_hz, &times)?;
    let clicks = c.alike >= ALIKE && c.core >= CORE && c.width_s <= WIDTH_S && c.clear >= CLEAR;
    // The top of an envelope may be anywhere in the width of the click.
    let event = |((_, size), time_s): (&(usize, f32), f64)| Event {
        time_s,
        kind: EventKind::Extra,
        size: f64::from(*size),
        timing_u_s: c.width_s / 12f64.sqrt(),
        period_s: None,
    };
    clicks.then(|| found.iter().zip(times).map(event).collect())
}

fn local_variation(times: &[f64]) -> f64 {
    let d: Vec<f64> = times.windows(2).map(|w| w[1] - w[0]).collect();
    d.windows(2).map(|w| 2.0 * (w[1] - w[0]).abs() / (w[1] + w[0])).sum::<f64>() / (d.len() - 1).max(1) as f64
}

/// Place and size of the largest value of each run above a threshold; runs nearer than `apart` samples are one.
fn above(x: &[f32], threshold: f32, apart: usize) -> Vec<(usize, f32)> {
    let mut found = Vec::new();
    let mut current: Option<(usize, f32, usize)> = None;
    for (i, &v) in x.iter().enumerate() {
        if v > threshold {
            current = match current {
                Some((at, top, _)) => Some(if v > top { (i, v, i) } else { (at, top, i) }),
                None => Some((i, v, i)),
            };
        } else if let Some((at, top, last)) = current
            && i - last > apart
        {
            found.push((at, top));
            current = None;
        }
    }
    found.extend(current.map(|(at, top, _)| (at, top)));
    found
}
