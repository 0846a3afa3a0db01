//! The posterior of jitter, timing noise and memory on a grid, from any number of blocks of clicks.
//!
//! For memory ρ and share u = σ_e²/(σ_e² + σ_T²) a block gives a residual sum S, a determinant L and degrees of freedom ν; the
//! log likelihood of the scale s² = σ_e² + σ_T² is −½(ν ln s² + S/s² + L). S, L and ν add over blocks, so the state does not
//! grow with the recording. The prior is flat in σ_T and σ_e, log-normal about the timing noise that the audio's noise
//! predicts, and holds half its weight at no memory. The whole posterior is used, not its maximum: near σ_e ≫ σ_T or with
//! memory under timing noise the maximum is lucky and its curvature says nothing.

use super::noise::NoiseRange;
use super::whiten::{Block, LANES, Pass};
use crate::estimate::Estimate;

/// Memories on the grid: artanh ρ from −0.6 in equal steps (ρ from −0.54 to 0.976).
pub(super) const MEMORIES: usize = 15;
pub(super) const MEMORY_STEP: f64 = 0.2;
/// Index of no memory.
pub(super) const NONE: usize = 3;
/// Shares on the grid: logit from −8 to 8.
pub(super) const SHARES: usize = 41;
const LOGIT_MOST: f64 = 8.0;
/// Clicks of a first block from which far-off cells are ruled out, step of the coarse look, and nats below the best.
const SCREEN_FROM: usize = 300;
const SCREEN_STEP: usize = 5;
const SCREEN_OUT: f64 = 18.0;
/// Least centre of the prior of the timing noise, in units of the least on the grid.
const LEAST_NOISE_SHARE: f64 = 1.5;
/// Sums over blocks on the grid of memory and share.
#[derive(Debug, Clone)]
pub struct PosteriorGrid {
    pub(super) freedom: f64,
    blocks: usize,
    pub(super) cells: Vec<Cell>,
}

#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Cell {
    /// False if the first block ruled it out.
    pub(super) live: bool,
    pub(super) rest: f64,
    pub(super) ln_det: f64,
    /// Of the last block: period and its variance at unit scale.
    pub(super) period_s: f64,
    pub(super) period_variance: f64,
}

/// What the posterior says.
#[derive(Debug, Clone, Copy)]
pub struct Posterior {
    /// The gap's own period jitter, s.
    pub jitter_s: Estimate,
    /// Timing noise of clicks, s.
    pub timing_noise_s: Estimate,
    /// Standard deviation of the difference of neighbouring periods, s.
    pub cycle_jitter_s: Estimate,
    /// Mean memory.
    pub memory: f64,
    /// Probability that there is memory.
    pub memory_probability: f64,
    /// Period of a single block, and its standard uncertainty, s.
    pub period_s: (f64, f64),
    /// Variance of the mean of N periods times N: σ_T²·(1 + ρ)/(1 − ρ), posterior mean, s².
    pub long_run_variance_s2: f64,
    /// Degrees of freedom.
    pub freedom: f64,
}

impl Default for PosteriorGrid {
    fn default() -> Self {
        Self { freedom: 0.0, blocks: 0, cells: vec![Cell { live: true, ..Cell::default() }; MEMORIES * SHARES] }
    }
}

/// Share at a place on the grid.
pub(super) fn share(i: f64) -> f64 {
    let logit = -LOGIT_MOST + 2.0 * LOGIT_MOST * i / (SHARES - 1) as f64;
    1.0 / (1.0 + (-logit).exp())
}

/// Memory at a place on the grid.
pub(super) fn memory(i: f64) -> f64 {
    if i == NONE as f64 { 0.0 } else { (MEMORY_STEP * (i - NONE as f64)).tanh() }
}

/// A pass for each of a row of shares.
fn passes<'a>(block: &'a Block, shares: &'a [f64], rho: f64) -> impl Iterator<Item = Pass> + 'a {
    shares.chunks(LANES).flat_map(move |chunk| {
        let lanes = std::array::from_fn(|l| chunk[l.min(chunk.len() - 1)]);
        block.passes(lanes, [rho; LANES]).into_iter().take(chunk.len())
    })
}

impl PosteriorGrid {
    /// Adds a block: click times (s) with firing numbers, ascending. Blocks of under five clicks say nothing and are left out.
    pub fn add(&mut self, time_s: &[f64], number: &[i64]) {
        if time_s.len() < 5 {
            return;
        }
        let block = Block::new(time_s, number);
        if self.blocks == 0 && time_s.len() >= SCREEN_FROM {
            self.screen(&block);
        }
        for r in 0..MEMORIES {
            let live: Vec<usize> = (r * SHARES..(r + 1) * SHARES).filter(|&c| self.cells[c].live).collect();
            let shares: Vec<f64> = live.iter().map(|c| share((c - r * SHARES) as f64)).collect();
            for (&c, pass) in live.iter().zip(passes(&block, &shares, memory(r as f64))) {
                let cell = &mut self.cells[c];
                cell.rest += pass.rest;
                cell.ln_det += pass.ln_det;
                cell.period_s = pass.beta[0] / block.span;
                cell.period_variance = pass.mean_variance / (block.span * block.span);
            }
        }
        self.freedom += block.freedom();
        self.blocks += 1;
        if self.freedom >= SCREEN_FROM as f64 {
            self.prune();
        }
    }

    /// Rules out cells far below the best of those that are left: later blocks are spent where something is to be told.
    fn prune(&mut self) {
        let ln = |c: &Cell| if c.live { -0.5 * (self.freedom * c.rest.ln() + c.ln_det) } else { f64::NEG_INFINITY };
        let values: Vec<f64> = self.cells.iter().map(ln).collect();
        let top = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        for r in 0..MEMORIES {
            for s in 0..SHARES {
                let rows = r.saturating_sub(2)..(r + 3).min(MEMORIES);
                let shares = s.saturating_sub(2)..(s + 3).min(SHARES);
                let mut near = rows.flat_map(|r| values[r * SHARES..][shares.clone()].iter());
                self.cells[r * SHARES + s].live &= near.any(|v| *v > top - SCREEN_OUT);
            }
        }
    }

    /// Rules out cells that lie far below the best on a coarse grid: most of the time goes where something is to be told.
    fn screen(&mut self, block: &Block) {
        let coarse: Vec<f64> = (0..SHARES).step_by(SCREEN_STEP).map(|s| share(s as f64)).collect();
        let ln = |pass: Pass| -0.5 * (block.freedom() * pass.rest.ln() + pass.ln_det);
        let table: Vec<Vec<f64>> =
            (0..MEMORIES).map(|r| passes(block, &coarse, memory(r as f64)).map(ln).collect()).collect();
        let top = table.iter().flatten().copied().fold(f64::NEG_INFINITY, f64::max);
        for r in 0..MEMORIES {
            for s in 0..SHARES {
                let (left, right) = (s / SCREEN_STEP, s.div_ceil(SCREEN_STEP));
                // One coarse cell more on each side, and two memories: the interpolation of the fine grid reaches there.
                let shares = left.saturating_sub(1)..(right + 2).min(coarse.len());
                let rows = &table[r.saturating_sub(2)..(r + 3).min(MEMORIES)];
                self.cells[r * SHARES + s].live =
                    rows.iter().any(|row| row[shares.clone()].iter().any(|v| *v > top - SCREEN_OUT));
            }
        }
    }

    /// Degrees of freedom gathered.
    #[must_use]
    pub fn freedom(&self) -> f64 {
        self.freedom
    }

    /// Evaluates the posterior. `noise` is where the audio lets the timing noise be expected, if known; `excess` the excess
    /// kurtosis of the periods (widens the interval of the jitter by √(1 + κ/2)).
    #[must_use]
    pub fn posterior(&self, noise: Option<NoiseRange>, excess: f64) -> Option<Posterior> {
        if self.freedom < 2.0 {
            return None;
        }
        // The grid ends at a share of 3e-4: a prior beyond it would pull the scale instead of the share.
        let smallest = self.cells.iter().filter(|c| c.live).map(|c| c.rest).fold(f64::INFINITY, f64::min);
        let least = LEAST_NOISE_SHARE * (smallest / self.freedom * share(0.0)).sqrt();
        let weighted = self.weigh(noise.map(|n| n.at_least(least)));
        Some(weighted.summary(self.freedom, excess))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::rngs::Xoshiro256PlusPlus;
    use rand::{Rng, SeedableRng};

    fn normal(rng: &mut impl Rng) -> f64 {
        // Sum of twelve uniforms: near enough to normal for a test of variances.
        (0..12).map(|_| rng.next_u64() as f64 / u64::MAX as f64).sum::<f64>() - 6.0
    }

    fn train(n: usize, jitter: f64, noise: f64, rho: f64, seed: u64) -> (Vec<f64>, Vec<i64>) {
        let mut rng = Xoshiro256PlusPlus::seed_from_u64(seed);
        let (mut s, mut a) = (0.0, jitter * normal(&mut rng));
        let times = (0..n)
            .map(|_| {
                a = rho * a + (1.0 - rho * rho).sqrt() * jitter * normal(&mut rng);
                s += 1.0 + a;
                s + noise * normal(&mut rng)
            })
            .collect();
        (times, (0..n as i64).collect())
    }

    #[test]
    fn jitter_and_timing_noise_are_told_apart() {
        for (jitter, noise) in [(0.01, 0.001), (0.01, 0.01), (0.01, 0.05)] {
            let mut inside = 0;
            for seed in 0..40 {
                let (t, n) = train(400, jitter, noise, 0.0, seed);
                let mut grid = PosteriorGrid::default();
                grid.add(&t, &n);
                let p = grid.posterior(Some(NoiseRange::of(noise)), 0.0).unwrap();
                inside += usize::from((p.jitter_s.low..p.jitter_s.high).contains(&jitter));
            }
            // 95 % of 40 with a binomial spread of 1.4: at least 34.
            assert!(inside >= 34, "jitter {jitter} noise {noise}: {inside} of 40");
        }
    }

    #[test]
    fn memory_is_found_and_widens_the_mean() {
        let (t, n) = train(2000, 0.01, 0.002, 0.8, 3);
        let mut grid = PosteriorGrid::default();
        grid.add(&t, &n);
        let p = grid.posterior(None, 0.0).unwrap();
        assert!(p.memory_probability > 0.99 && (0.7..0.9).contains(&p.memory), "{p:?}");
        // Long-run variance: σ²(1 + ρ)/(1 − ρ) = 9 σ².
        assert!((p.long_run_variance_s2 / 9e-4 - 1.0).abs() < 0.5, "{p:?}");
    }

    #[test]
    fn the_interval_holds_the_jitter_under_memory() {
        for rho in [0.5, 0.88] {
            let mut inside = 0;
            for seed in 0..40 {
                let (t, n) = train(2500, 0.02, 0.001, rho, 100 + seed);
                let mut grid = PosteriorGrid::default();
                grid.add(&t, &n);
                let p = grid.posterior(Some(NoiseRange::of(0.001)), 0.0).unwrap();
                inside += usize::from((p.jitter_s.low..p.jitter_s.high).contains(&0.02));
            }
            // As above.
            assert!(inside >= 34, "memory {rho}: {inside} of 40");
        }
    }

    #[test]
    fn blocks_add_up() {
        let (t, n) = train(1200, 0.02, 0.01, 0.0, 9);
        let mut grid = PosteriorGrid::default();
        for part in 0..3 {
            grid.add(&t[part * 400..(part + 1) * 400], &n[part * 400..(part + 1) * 400]);
        }
        let p = grid.posterior(None, 0.0).unwrap();
        assert!((p.jitter_s.value / 0.02 - 1.0).abs() < 0.12, "{p:?}");
        assert_eq!(p.freedom, 3.0 * 397.0);
    }
}
