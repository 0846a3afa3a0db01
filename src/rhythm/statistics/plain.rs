//! The posterior of the jitter by plain summation over a fine lattice, for tests alone: no screening, no interpolation, every
//! point's likelihood computed by a pass of its own.

use super::posterior::PosteriorGrid;
use super::whiten::Block;
use crate::model::random::Random;

/// Median and ends of the central 95 % of the jitter, s.
fn plain_posterior(time_s: &[f64], number: &[i64], noise_s: Option<f64>) -> [f64; 3] {
    let block = Block::new(time_s, number);
    let freedom = block.freedom();
    let most = (0.2 * 11.0f64).tanh();
    let least = (-0.6f64).tanh();
    // Half of the prior on no memory; the rest flat over the positive range, and a twentieth of that over the negative one.
    const MEMORIES: usize = 160;
    let width = (most - least) / MEMORIES as f64;
    let density = 0.5 / (most - 0.05 * least);
    let memories = (0..MEMORIES).map(|i| least + (i as f64 + 0.5) * width).map(|rho| {
        let weight = density * width * if rho < 0.0 { 0.05 } else { 1.0 };
        (rho, weight)
    });
    let memories: Vec<(f64, f64)> = std::iter::once((0.0, 0.5)).chain(memories).collect();
    let mut points: Vec<(f64, f64)> = Vec::new();
    for &(rho, prior) in &memories {
        for j in 0..=240 {
            let u = 1.0 / (1.0 + (8.0 - 16.0 * f64::from(j) / 240.0).exp());
            let pass = block.pass(u, rho);
            for k in -30..=30 {
                let scale = pass.rest / freedom * (f64::from(k) / 30.0 * 5.0 * (2.0 / freedom).sqrt()).exp();
                let mut ln = -0.5 * (freedom * scale.ln() + pass.rest / scale + pass.ln_det)
                    + prior.ln()
                    + 0.5 * (u * (1.0 - u)).ln();
                if let Some(noise_s) = noise_s {
                    let off = ((scale * u).sqrt() / noise_s).ln();
                    ln += if off < 0.0 {
                        -0.5 * (off / 0.7).powi(2)
                    } else {
                        ((-2.0 * off * off).exp() + if off < 3.5 { 0.03 } else { 1e-30 }).ln()
                    };
                }
                points.push(((scale * (1.0 - u)).sqrt(), ln));
            }
        }
    }
    let top = points.iter().map(|p| p.1).fold(f64::NEG_INFINITY, f64::max);
    points.iter_mut().for_each(|p| p.1 = (p.1 - top).exp());
    points.sort_by(|a, b| a.0.total_cmp(&b.0));
    let total: f64 = points.iter().map(|p| p.1).sum();
    [0.5, 0.025, 0.975].map(|q| {
        let mut sum = 0.0;
        let found = points.iter().find(|p| {
            sum += p.1;
            sum >= q * total
        });
        found.expect("weights add up").0
    })
}

#[test]
fn the_grid_gives_the_median_and_the_interval_of_plain_summation() {
    let mut random = Random::seeded(31);
    for (clicks, noise, memory, told) in
        [(60, 0.004, 0.0, true), (60, 0.01, 0.0, false), (350, 0.008, 0.0, true), (350, 0.002, 0.6, true)]
    {
        let (jitter, mut a, mut s): (f64, f64, f64) = (0.01, 0.0, 0.0);
        let time_s: Vec<f64> = (0..clicks)
            .map(|_| {
                a = memory * a + (1.0f64 - memory * memory).sqrt() * jitter * random.normal();
                s += 1.0 + a;
                s + noise * random.normal()
            })
            .collect();
        let number: Vec<i64> = (0..clicks).collect();
        let noise_s = told.then_some(noise);
        let mut grid = PosteriorGrid::default();
        grid.add(&time_s, &number);
        let fast = grid.posterior(noise_s.map(super::noise::NoiseRange::of), 0.0).expect("clicks enough").jitter_s;
        let plain = plain_posterior(&time_s, &number, noise_s);
        for (fast, plain) in [fast.value, fast.low, fast.high].into_iter().zip(plain) {
            // Steps of the two lattices, a third of a standard deviation of the scale at most; the interval is wide against that.
            assert!((fast / plain - 1.0).abs() < 0.02, "{clicks} clicks, memory {memory}: {fast} against {plain}");
        }
    }
}
