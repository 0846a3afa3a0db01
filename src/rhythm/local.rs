//! The period that is expected at each candidate, from the chain that was found.

use super::order::{interpolate, median, reflect, running_median};
use super::path::Chain;
use crate::clicks::Candidates;

/// Half width of the running median and of the smoothing window, steps.
const LOCAL_HALF: usize = 15;

/// Expected period at every candidate: running median over 31 steps of the chain, then a Hann mean of the held values.
#[must_use]
pub fn local_period(c: &Candidates, chain: &Chain, fallback_s: f64) -> Vec<f64> {
    let mut when = Vec::new();
    let mut period = Vec::new();
    for (w, &k) in chain.index.windows(2).zip(&chain.steps[1..]) {
        if k > 0 {
            when.push(0.5 * (c.time_s[w[0]] + c.time_s[w[1]]));
            period.push((c.time_s[w[1]] - c.time_s[w[0]]) / k as f64);
        }
    }
    if period.len() < 4 {
        return vec![fallback_s; c.len()];
    }
    let smooth =
        if period.len() > 2 * LOCAL_HALF { smooth_periods(&period) } else { vec![median(&period); period.len()] };
    interpolate(&c.time_s, &when, &smooth)
}

fn smooth_periods(period: &[f64]) -> Vec<f64> {
    let mid = running_median(period, LOCAL_HALF);
    let spread = 1.5 * median(&period.iter().zip(&mid).map(|(x, m)| (x - m).abs()).collect::<Vec<_>>());
    let held: Vec<f64> = period
        .iter()
        .zip(&mid)
        .map(|(x, m)| {
            let reach = 3.0 * (spread + 1e-9 * m);
            x.clamp(m - reach, m + reach)
        })
        .collect();
    let width = 2 * LOCAL_HALF + 1;
    let weight: Vec<f64> =
        (0..width).map(|i| 0.5 - 0.5 * (std::f64::consts::TAU * (i + 1) as f64 / (width + 1) as f64).cos()).collect();
    let total: f64 = weight.iter().sum();
    let reach = LOCAL_HALF as isize;
    let extended: Vec<f64> = (-reach..held.len() as isize + reach).map(|i| held[reflect(i, held.len())]).collect();
    extended.windows(width).map(|near| near.iter().zip(&weight).map(|(x, w)| w * x).sum::<f64>() / total).collect()
}
