//! Slow obvious versions of the fast steps of this room, for tests alone. Constants are typed again from the page that derives the
//! likelihood, so that page and code cannot part unseen.

use super::pairs::at_lag;
use super::path::{Law, best_chain};
use crate::model::random::Random;
use rustfft::num_complex::Complex64;
use std::f64::consts::TAU;

/// Log density of a step over k periods: Gaussian, or gamma above a jitter of 0.12, and nowhere below 2·10⁻³/T.
fn ln_step(length: f64, k: f64, period: f64, jitter: f64) -> f64 {
    let ln = if jitter > 0.12 {
        let (shape, scale) = (k / jitter.powi(2), jitter.powi(2) * period);
        (shape - 1.0) * length.ln() - length / scale - statrs::function::gamma::ln_gamma(shape) - shape * scale.ln()
    } else {
        let sd = jitter * period * k.sqrt();
        -0.5 * ((length - k * period) / sd).powi(2) - sd.ln() - 0.5 * TAU.ln()
    };
    ln.max((2e-3 / period).ln())
}

/// The best of all chains through a small set of candidates: each subset is scored in turn.
fn best_of_all(time_s: &[f64], gain: &[f64], period: &[f64], law: Law) -> f64 {
    let step = |j: usize, i: usize| -> f64 {
        let (length, t) = (time_s[i] - time_s[j], period[j]);
        let ratio = length / t;
        let nearest = (ratio + 0.5).floor().max(1.0);
        // A loose train may also have one long period where two fit better.
        let fewest = if law.jitter > 0.12 && nearest > 1.0 { nearest - 1.0 } else { nearest };
        let over = |k: f64| ln_step(length, k, t, law.jitter) + (k - 1.0) * law.missed.ln() + (1.0 - law.missed).ln();
        let reach = ((1.0 - 5.0 * law.jitter - 0.1).max(0.08)..4.5).contains(&ratio);
        let direct = if reach { over(fewest).max(over(nearest)) } else { f64::NEG_INFINITY };
        // Beginning anew costs a first click and 12 nats.
        direct.max(-12.0 - period[i].ln())
    };
    (1u32..1 << time_s.len())
        .map(|set| {
            let chain: Vec<usize> = (0..time_s.len()).filter(|i| set >> i & 1 == 1).collect();
            let steps: f64 = chain.windows(2).map(|w| step(w[0], w[1])).sum();
            steps - period[chain[0]].ln() + chain.iter().map(|&i| gain[i]).sum::<f64>()
        })
        .fold(f64::NEG_INFINITY, f64::max)
}

#[test]
fn the_best_chain_is_the_best_of_all_for_tight_and_loose_trains_and_changing_periods() {
    let mut random = Random::seeded(21);
    for case in 0..60 {
        let mut time_s: Vec<f64> = (0..11).map(|_| 8.0 * random.uniform()).collect();
        time_s.sort_by(f64::total_cmp);
        let gain: Vec<f64> = (0..11).map(|_| 8.0 * random.uniform() - 3.0).collect();
        let period: Vec<f64> = (0..11).map(|i| 0.9 + 0.02 * f64::from(i)).collect();
        for jitter in [0.02, 0.1, 0.2, 0.35] {
            let law = Law { jitter, missed: 0.1, follow: 0.0, longest: super::path::MOST_PERIODS };
            let (fast, plain) =
                (best_chain(&time_s, &gain, &period, law).score, best_of_all(&time_s, &gain, &period, law));
            assert!((fast - plain).abs() < 1e-9, "case {case}, jitter {jitter}: {fast} against {plain}");
        }
    }
}

#[test]
fn pairs_at_a_lag_are_those_of_a_double_loop() {
    let mut random = Random::seeded(22);
    let mut times: Vec<f64> = (0..300).map(|_| 3.0 * random.uniform()).collect();
    times.sort_by(f64::total_cmp);
    for (lag, half_width) in [(0.01, 1e-3), (0.1, 5e-3), (0.731, 2e-2), (2.9, 0.2)] {
        let (mut count, mut transform) = (0, Complex64::default());
        for &earlier in &times {
            for &later in times.iter().filter(|&&t| t > earlier && (t - earlier - lag).abs() <= half_width) {
                count += 1;
                transform += Complex64::from_polar(1.0, TAU * later / lag);
            }
        }
        let fast = at_lag(&times, lag, half_width);
        assert_eq!(fast.count, count);
        assert!((fast.transform - transform).norm() < 1e-9 * (1.0 + count as f64));
    }
}
