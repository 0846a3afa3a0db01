//! What the clicks on a rhythm look like: short, alike, and standing clear of what lies between them.

use crate::clicks::shape::leading_vectors;
use crate::clicks::snippet::{dot, normalise, read};
use crate::rhythm::order::median;

/// Half width of the snippets, s.
const HALF_S: f64 = 0.8e-3;
/// Clicks looked at.
const CLICKS: usize = 200;
/// Half width of a click's core, s.
const CORE_S: f64 = 0.3e-3;
/// Farthest alignment, samples.
const SHIFT: isize = 3;

/// The character of clicks at given times.
#[derive(Debug, Clone, Copy)]
pub struct Character {
    /// Mean share of a snippet's energy in the two leading shapes: 1 for clicks that are all alike.
    pub alike: f64,
    /// Time between 10 and 90 % of the shape's energy, s.
    pub width_s: f64,
    /// Share of the shape's energy within ± 0.3 ms of its middle.
    pub core: f64,
    /// Matched output at the clicks over that a third of the way to the next one.
    pub clear: f64,
}

/// Looks at clicks at given times (s) in audio that is high-passed but not whitened.
#[must_use]
pub fn of_clicks(x: &[f32], rate_hz: f64, time_s: &[f64]) -> Option<Character> {
    let half = (HALF_S * rate_hz) as usize;
    let stride = time_s.len().div_ceil(CLICKS).max(1);
    let mut positions: Vec<f64> = time_s.iter().step_by(stride).map(|t| t * rate_hz).collect();
    if positions.len() < 6 {
        return None;
    }
    let mut vectors = Vec::new();
    let mut rows = Vec::new();
    for _ in 0..3 {
        rows = snippets(x, &positions, half);
        let mut unit = rows.clone();
        unit.iter_mut().for_each(|r| normalise(r));
        vectors = leading_vectors(&unit, None, 2);
        align(x, &mut positions, &vectors[0], half);
    }
    let alike = mean(rows.iter().map(|r| {
        let total = f64::from(dot(r, r)).max(1e-30);
        vectors.iter().map(|v| f64::from(dot(r, v)).powi(2)).sum::<f64>() / total
    }));
    let (width_s, core) = extent(&vectors[0], rate_hz);
    Some(Character { alike, width_s, core, clear: clearness(x, rate_hz, time_s, &vectors, half) })
}

fn snippets(x: &[f32], positions: &[f64], half: usize) -> Vec<Vec<f32>> {
    crate::clicks::shape::pieces(x, positions, half)
}

fn align(x: &[f32], positions: &mut [f64], shape: &[f32], half: usize) {
    let mut piece = vec![0.0; 2 * half + 1];
    for p in positions {
        let mut best = (f32::NEG_INFINITY, 0);
        for s in -SHIFT..=SHIFT {
            read(x, *p + s as f64, half, &mut piece);
            let m = dot(&piece, shape).abs();
            if m > best.0 {
                best = (m, s);
            }
        }
        *p += best.1 as f64;
    }
}

/// Width between 10 and 90 % of the energy (s), and the share within the core about its heaviest 0.1 ms.
fn extent(shape: &[f32], rate_hz: f64) -> (f64, f64) {
    let power: Vec<f64> = shape.iter().map(|v| f64::from(*v).powi(2)).collect();
    let total: f64 = power.iter().sum::<f64>().max(1e-30);
    let (mut sum, mut low, mut high) = (0.0, 0, power.len());
    for (i, p) in power.iter().enumerate() {
        sum += p / total;
        if sum < 0.1 {
            low = i + 1;
        }
        if sum < 0.9 {
            high = i + 1;
        }
    }
    let box_ = ((1e-4 * rate_hz) as usize).max(1);
    let heavy = (0..power.len().saturating_sub(box_))
        .max_by(|&a, &b| power[a..a + box_].iter().sum::<f64>().total_cmp(&power[b..b + box_].iter().sum::<f64>()))
        .unwrap_or(0)
        + box_ / 2;
    let reach = (CORE_S * rate_hz) as usize;
    let core: f64 = power[heavy.saturating_sub(reach)..(heavy + reach + 1).min(power.len())].iter().sum();
    ((high - low) as f64 / rate_hz, core / total)
}

fn clearness(x: &[f32], rate_hz: f64, time_s: &[f64], vectors: &[Vec<f32>], half: usize) -> f64 {
    let mut piece = vec![0.0; 2 * half + 1];
    let mut output = |t: f64| {
        read(x, t * rate_hz, half, &mut piece);
        f64::from(vectors.iter().map(|v| dot(&piece, v).powi(2)).sum::<f32>()).sqrt()
    };
    let stride = time_s.len().div_ceil(CLICKS).max(1);
    let pairs: Vec<_> = time_s.windows(2).step_by(stride).collect();
    let at: Vec<f64> = pairs.iter().map(|w| output(w[0])).collect();
    let between: Vec<f64> = pairs.iter().map(|w| output(w[0] + (w[1] - w[0]) / 3.0)).collect();
    median(&at) / median(&between).max(1e-30)
}

fn mean(values: impl Iterator<Item = f64>) -> f64 {
    let (sum, n) = values.fold((0.0, 0.0), |(s, n), v| (s + v, n + 1.0));
    if n > 0.0 { sum / n } else { 0.0 }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn short_equal_clicks_are_alike_and_clear() {
        let rate_hz = 48_000.0;
        let mut x = vec![0.0f32; 48_000];
        let times: Vec<f64> = (1..90).map(|n| 0.011 * f64::from(n)).collect();
        for t in &times {
            let at = (t * rate_hz) as usize;
            for k in 0..10 {
                x[at + k] += (-(k as f32) / 3.0).exp();
            }
        }
        x.iter_mut().enumerate().for_each(|(n, v)| *v += 0.001 * (n as f32 * 12.9898).sin());
        let c = of_clicks(&x, rate_hz, &times).unwrap();
        assert!(c.alike > 0.98 && c.core > 0.95 && c.width_s < 0.3e-3 && c.clear > 30.0, "{c:?}");
    }
}
