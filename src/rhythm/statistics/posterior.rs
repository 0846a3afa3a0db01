//! The posterior of jitter, timing noise and memory on a grid, from any number of blocks of clicks.
//!
//! For memory ρ and share u = σ_e²/(σ_e² + σ_T²) a block gives a residual sum S, a determinant L and degrees of freedom ν; the
//! log likelihood of the scale s² = σ_e² + σ_T² is −½(ν ln s² + S/s² + L). S, L and ν add over blocks, so the state does not
//! grow with the recording. The prior is flat in σ_T and σ_e, log-normal about the timing noise that the audio's noise
//! predicts, and holds half its weight at no memory. The whole posterior is used, not its maximum: near σ_e ≫ σ_T or with
//! memory under timing noise the maximum is lucky and its curvature says nothing.

use super::whiten::Block;
use crate::estimate::{COVERAGE_95, Estimate};

/// Memories on the grid.
const MEMORY: [f64; 15] = [-0.6, -0.4, -0.2, 0.0, 0.15, 0.3, 0.4, 0.5, 0.6, 0.7, 0.78, 0.85, 0.9, 0.94, 0.97];
/// Index of no memory.
const NONE: usize = 3;
/// Weight of negative memory in the prior, against positive: a gap that alternates is rare, and negative memory is what timing
/// noise looks like where its prediction is too low.
const NEGATIVE: f64 = 0.15;
/// Shares on the grid: logit from −8 to 8.
const SHARES: usize = 41;
const LOGIT_MOST: f64 = 8.0;
/// Clicks of a first block from which far-off cells are ruled out, step of the coarse look, and nats below the best.
const SCREEN_FROM: usize = 300;
const SCREEN_STEP: usize = 5;
const SCREEN_OUT: f64 = 18.0;
/// Finer shares between them for the integral.
const FINE: usize = 8;
/// Scales about the residual one, and their reach in standard deviations of ln s².
const SCALES: usize = 41;
const SCALE_REACH: f64 = 4.5;
/// Least centre of the prior of the timing noise, in units of the least on the grid.
const LEAST_NOISE_SHARE: f64 = 1.5;
/// Log standard deviation of the prior of the timing noise below and above the prediction, which is rather too high.
const NOISE_PRIOR_LN_SD: (f64, f64) = (0.7, 0.5);

/// Sums over blocks on the grid of memory and share.
#[derive(Debug, Clone)]
pub struct PosteriorGrid {
    freedom: f64,
    blocks: usize,
    cells: Vec<Cell>,
}

#[derive(Debug, Clone, Copy, Default)]
struct Cell {
    /// False if the first block ruled it out.
    live: bool,
    rest: f64,
    ln_det: f64,
    /// Of the last block: period and its variance at unit scale.
    period_s: f64,
    period_variance: f64,
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
        Self { freedom: 0.0, blocks: 0, cells: vec![Cell { live: true, ..Cell::default() }; MEMORY.len() * SHARES] }
    }
}

fn share(i: f64) -> f64 {
    let logit = -LOGIT_MOST + 2.0 * LOGIT_MOST * i / (SHARES - 1) as f64;
    1.0 / (1.0 + (-logit).exp())
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
        for (r, &rho) in MEMORY.iter().enumerate() {
            for s in 0..SHARES {
                let cell = &mut self.cells[r * SHARES + s];
                if !cell.live {
                    continue;
                }
                let pass = block.pass(share(s as f64), rho);
                cell.rest += pass.rest;
                cell.ln_det += pass.ln_det;
                cell.period_s = pass.beta[0] / block.span;
                cell.period_variance = pass.mean_variance / (block.span * block.span);
            }
        }
        self.freedom += block.freedom();
        self.blocks += 1;
    }

    /// Rules out cells that lie far below the best on a coarse grid: most of the time goes where something is to be told.
    fn screen(&mut self, block: &Block) {
        let coarse: Vec<usize> = (0..SHARES).step_by(SCREEN_STEP).collect();
        let ln = |rho: f64, s: usize| {
            let pass = block.pass(share(s as f64), rho);
            -0.5 * (block.freedom() * pass.rest.ln() + pass.ln_det)
        };
        let table: Vec<Vec<f64>> = MEMORY.iter().map(|&rho| coarse.iter().map(|&s| ln(rho, s)).collect()).collect();
        let top = table.iter().flatten().copied().fold(f64::NEG_INFINITY, f64::max);
        for (r, row) in table.iter().enumerate() {
            for s in 0..SHARES {
                let (left, right) = (s / SCREEN_STEP, s.div_ceil(SCREEN_STEP));
                // One coarse cell more on each side: the interpolation of the fine grid reaches there.
                let near = &row[left.saturating_sub(1)..(right + 2).min(row.len())];
                self.cells[r * SHARES + s].live = near.iter().any(|v| *v > top - SCREEN_OUT);
            }
        }
    }

    /// Degrees of freedom gathered.
    #[must_use]
    pub fn freedom(&self) -> f64 {
        self.freedom
    }

    /// Evaluates the posterior. `noise_s` is the timing noise that the audio's noise predicts, if known; `excess` the excess
    /// kurtosis of the periods (widens the interval of the jitter by √(1 + κ/2)).
    #[must_use]
    pub fn posterior(&self, noise_s: Option<f64>, excess: f64) -> Option<Posterior> {
        if self.freedom < 2.0 {
            return None;
        }
        // The grid ends at a share of 3e-4: a prior beyond it would pull the scale instead of the share.
        let smallest = self.cells.iter().filter(|c| c.live).map(|c| c.rest).fold(f64::INFINITY, f64::min);
        let least = LEAST_NOISE_SHARE * (smallest / self.freedom * share(0.0)).sqrt();
        let weighted = self.weigh(noise_s.map(|n| n.max(least)));
        Some(weighted.summary(self.freedom, excess))
    }

    fn weigh(&self, noise_s: Option<f64>) -> Weighted {
        let prior = memory_prior();
        let mut all = Vec::with_capacity(MEMORY.len() * SHARES * FINE * SCALES);
        let reach = SCALE_REACH * (2.0 / self.freedom).sqrt();
        let mut top = f64::NEG_INFINITY;
        for (r, &rho) in MEMORY.iter().enumerate() {
            for f in 0..=(SHARES - 1) * FINE {
                let place = f as f64 / FINE as f64;
                let Some(cell) = self.between(r, place) else { continue };
                let u = share(place);
                let ln_share = prior[r].ln() + 0.5 * (u * (1.0 - u)).ln();
                for k in 0..SCALES {
                    let scale = cell.rest / self.freedom * (reach * (2.0 * k as f64 / (SCALES - 1) as f64 - 1.0)).exp();
                    let mut ln = -0.5 * (self.freedom * scale.ln() + cell.rest / scale + cell.ln_det) + ln_share;
                    if let Some(noise) = noise_s {
                        let off = 0.5 * (scale * u).ln() - noise.ln();
                        let z = off / if off < 0.0 { NOISE_PRIOR_LN_SD.0 } else { NOISE_PRIOR_LN_SD.1 };
                        ln -= 0.5 * z * z;
                    }
                    top = top.max(ln);
                    all.push(Point {
                        ln,
                        scale,
                        u,
                        rho,
                        period_s: cell.period_s,
                        period_variance: cell.period_variance,
                    });
                }
            }
        }
        // Points that weigh nothing are dropped: the sorts that follow are short.
        all.retain(|p| p.ln > top - 20.0);
        all.iter_mut().for_each(|p| p.ln = (p.ln - top).exp());
        let total: f64 = all.iter().map(|p| p.ln).sum();
        all.iter_mut().for_each(|p| p.ln /= total);
        Weighted { points: all }
    }

    /// Cubic interpolation of ln S and L between shares; none where a cell was ruled out.
    fn between(&self, r: usize, place: f64) -> Option<Cell> {
        let row = &self.cells[r * SHARES..(r + 1) * SHARES];
        let i = (place as usize).min(SHARES - 2);
        let a = place - i as f64;
        let needed = &row[i.saturating_sub(1)..(i + 3).min(SHARES)];
        if needed.iter().any(|c| !c.live) {
            return None;
        }
        if a == 0.0 {
            return Some(row[i]);
        }
        let at = |d: isize| &row[(i as isize + d).clamp(0, SHARES as isize - 1) as usize];
        let cubic = |f: &dyn Fn(&Cell) -> f64| {
            let (y0, y1, y2, y3) = (f(at(-1)), f(at(0)), f(at(1)), f(at(2)));
            y1 + 0.5 * a * (y2 - y0 + a * (2.0 * y0 - 5.0 * y1 + 4.0 * y2 - y3 + a * (3.0 * (y1 - y2) + y3 - y0)))
        };
        Some(Cell {
            live: true,
            rest: cubic(&|c| c.rest.ln()).exp(),
            ln_det: cubic(&|c| c.ln_det),
            period_s: cubic(&|c| c.period_s),
            period_variance: cubic(&|c| c.period_variance.ln()).exp(),
        })
    }
}

/// Half at no memory, the rest spread evenly over the positive range and thinly over the negative one.
fn memory_prior() -> [f64; MEMORY.len()] {
    let mut width = [0.0; MEMORY.len()];
    for (i, w) in width.iter_mut().enumerate() {
        let left = MEMORY[i.saturating_sub(1)];
        let right = MEMORY[(i + 1).min(MEMORY.len() - 1)];
        *w = (right - left) * if MEMORY[i] < 0.0 { NEGATIVE } else { 1.0 };
    }
    let total: f64 = width.iter().sum();
    width.iter_mut().for_each(|w| *w *= 0.5 / total);
    width[NONE] += 0.5;
    width
}

struct Point {
    /// Log weight, then weight.
    ln: f64,
    scale: f64,
    u: f64,
    rho: f64,
    period_s: f64,
    period_variance: f64,
}

struct Weighted {
    points: Vec<Point>,
}

impl Weighted {
    fn mean(&self, f: impl Fn(&Point) -> f64) -> f64 {
        self.points.iter().map(|p| p.ln * f(p)).sum()
    }

    /// Median and central 95 % of a positive quantity; the standard uncertainty is a quarter of the interval on its log scale.
    fn quantiles(&self, f: impl Fn(&Point) -> f64, widen: f64) -> Estimate {
        let mut pairs: Vec<(f64, f64)> = self.points.iter().map(|p| (f(p), p.ln)).collect();
        pairs.sort_by(|a, b| a.0.total_cmp(&b.0));
        let at = |q: f64| {
            let mut sum = 0.0;
            for &(x, w) in &pairs {
                if sum + w >= q {
                    return x;
                }
                sum += w;
            }
            pairs[pairs.len() - 1].0
        };
        let value = at(0.5).max(1e-15);
        let low = value * (at(0.025).max(1e-15) / value).powf(widen);
        let high = value * (at(0.975).max(1e-15) / value).powf(widen);
        Estimate { value, u: (high - low) / (2.0 * COVERAGE_95), low, high }
    }

    fn summary(&self, freedom: f64, excess: f64) -> Posterior {
        let widen = (1.0 + 0.5 * excess.max(0.0)).sqrt();
        let period = self.mean(|p| p.period_s);
        let variance = self.mean(|p| p.scale * p.period_variance + (p.period_s - period).powi(2));
        Posterior {
            jitter_s: self.quantiles(|p| (p.scale * (1.0 - p.u)).sqrt(), widen),
            timing_noise_s: self.quantiles(|p| (p.scale * p.u).sqrt(), 1.0),
            cycle_jitter_s: self.quantiles(|p| (2.0 * (1.0 - p.rho) * p.scale * (1.0 - p.u)).sqrt(), widen),
            memory: self.mean(|p| p.rho),
            memory_probability: self.mean(|p| if p.rho == 0.0 { 0.0 } else { 1.0 }),
            period_s: (period, variance.sqrt()),
            long_run_variance_s2: self.mean(|p| p.scale * (1.0 - p.u) * (1.0 + p.rho) / (1.0 - p.rho)),
            freedom,
        }
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
                let p = grid.posterior(Some(noise), 0.0).unwrap();
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
