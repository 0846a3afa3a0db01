//! The integral over the posterior's grid: finer cells between the nodes by interpolation, scales at each, and quantiles of what
//! they weigh.

use super::noise::NoiseRange;
use super::posterior::{Cell, MEMORIES, MEMORY_STEP, NONE, Posterior, PosteriorGrid, SHARES, memory, share};
use crate::estimate::{COVERAGE_95, Estimate};

/// Weight of negative memory in the prior, against positive: a gap that alternates is rare, and negative memory is what timing
/// noise looks like where its prediction is too low.
const NEGATIVE: f64 = 0.05;
/// Finer memories and shares between them for the integral: as many as the posterior's width asks for, within these.
const FINE: (usize, usize) = (8, 32);
/// Nats below the best node within which the space between nodes is looked at, and below the best cell within which cells
/// count: what lies beyond weighs a hundred-thousandth.
const NODE_REACH: f64 = 30.0;
const CELL_REACH: f64 = 12.0;
/// Scales about the residual one, and their reach in standard deviations of ln s²: half a standard deviation apart, where the
/// trapezoid rule is exact to 1e-8 for a normal law.
const SCALES: usize = 17;
const SCALE_REACH: f64 = 4.0;
/// Bins of a quantity's logarithm, between its extremes.
const BINS: usize = 4096;
impl PosteriorGrid {
    /// The posterior near its maximum, as weights of cells and scales.
    pub(super) fn weigh(&self, noise: Option<NoiseRange>) -> Weighted {
        let noise = noise.map(NoiseRange::ln);
        let ln_prior = |ln_noise: f64| noise.map_or(0.0, |n| n.ln_prior(ln_noise));
        let mut cells = self.fine_cells();
        for c in &mut cells {
            c.ln_scale = c.cell.ln_rest - self.freedom.ln();
            c.ln_noise = 0.5 * (c.ln_scale + c.u.ln());
            c.ln += ln_prior(c.ln_noise);
        }
        let top = cells.iter().map(|c| c.ln).fold(f64::NEG_INFINITY, f64::max);
        cells.retain(|c| c.ln > top - CELL_REACH);
        let reach = SCALE_REACH * (2.0 / self.freedom).sqrt();
        let step: [f64; SCALES] = std::array::from_fn(|k| reach * (2.0 * k as f64 / (SCALES - 1) as f64 - 1.0));
        // −½(ν ln s² + S/s²) about its maximum at s² = S/ν.
        let ln_likelihood = step.map(|d| -0.5 * self.freedom * (d + (-d).exp() - 1.0));
        let mut weights: Vec<[f64; SCALES]> = cells
            .iter()
            .map(|c| {
                std::array::from_fn(|k| {
                    let prior = ln_prior(c.ln_noise + 0.5 * step[k]) - ln_prior(c.ln_noise);
                    (c.ln - top + ln_likelihood[k] + prior).exp()
                })
            })
            .collect();
        let total: f64 = weights.iter().flatten().sum();
        weights.iter_mut().flatten().for_each(|w| *w /= total);
        Weighted { cells, step, weights }
    }

    /// The cells of a finer grid near the maximum, each with the log of its profile likelihood and prior (of memory and share).
    fn fine_cells(&self) -> Vec<FineCell> {
        let fine = ((MEMORY_STEP * self.freedom.sqrt()) as usize).clamp(FINE.0, FINE.1);
        let rows: Vec<Vec<Option<LnCell>>> =
            self.cells.chunks(SHARES).map(|row| row.iter().map(Cell::ln).collect()).collect();
        let columns: Vec<(f64, Vec<Option<LnCell>>)> = (0..=(SHARES - 1) * fine)
            .map(|f| f as f64 / fine as f64)
            .map(|place| (place, rows.iter().map(|row| between(row, place)).collect()))
            .collect();
        let profile = |c: &LnCell| -0.5 * (self.freedom * c.ln_rest + c.ln_det);
        let top = columns.iter().flat_map(|(_, c)| c.iter().flatten()).map(profile).fold(f64::NEG_INFINITY, f64::max);
        let places: Vec<Vec<Place>> = (0..MEMORIES - 1)
            .map(|r| (0..fine).map(|f| Place::new(r as f64 + (f as f64 + 0.5) / fine as f64, fine)).collect())
            .collect();
        let none = Place { place: NONE as f64, rho: 0.0, ln_weight: 0.5f64.ln() };
        let mut cells = Vec::new();
        for (place, column) in &columns {
            let u = share(*place);
            let ln_share = 0.5 * (u * (1.0 - u)).ln();
            let value: Vec<f64> = column.iter().map(|c| c.as_ref().map_or(f64::NEG_INFINITY, profile)).collect();
            let best = (0..MEMORIES).max_by(|&a, &b| value[a].total_cmp(&value[b])).unwrap_or(NONE);
            let mut push = |at: &Place, cell: LnCell| {
                let ln = profile(&cell) + at.ln_weight + ln_share;
                cells.push(FineCell { ln, u, rho: at.rho, ln_scale: 0.0, ln_noise: 0.0, cell });
            };
            if let Some(cell) = column[NONE] {
                push(&none, cell);
            }
            for r in 0..MEMORIES - 1 {
                let near = best.abs_diff(r) <= 2 || value[r].max(value[r + 1]) > top - NODE_REACH;
                for at in places[r].iter().filter(|_| near) {
                    if let Some(cell) = between(column, at.place) {
                        push(at, cell);
                    }
                }
            }
        }
        cells
    }
}

/// A memory between the nodes.
struct Place {
    place: f64,
    rho: f64,
    /// Log of the prior's weight.
    ln_weight: f64,
}

impl Place {
    fn new(place: f64, fine: usize) -> Self {
        let rho = memory(place);
        Self { place, rho, ln_weight: (memory_density(rho) * MEMORY_STEP / fine as f64).ln() }
    }
}

/// Prior density of artanh ρ beside the half that lies on no memory: flat in ρ over the positive range and thin over the
/// negative one.
fn memory_density(rho: f64) -> f64 {
    let most = memory((MEMORIES - 1) as f64);
    let total = most - NEGATIVE * memory(0.0);
    0.5 / total * if rho < 0.0 { NEGATIVE } else { 1.0 } * (1.0 - rho * rho)
}

/// Cubic interpolation along a row of nodes; none where one that is needed is missing.
fn between(row: &[Option<LnCell>], place: f64) -> Option<LnCell> {
    let i = (place as usize).min(row.len() - 2);
    let a = place - i as f64;
    if a == 0.0 {
        return row[i];
    }
    let at = |d: usize| row[(i + d).saturating_sub(1).min(row.len() - 1)];
    let (y0, y1, y2, y3) = (at(0)?, at(1)?, at(2)?, at(3)?);
    let cubic = |f: fn(&LnCell) -> f64| {
        let (y0, y1, y2, y3) = (f(&y0), f(&y1), f(&y2), f(&y3));
        y1 + 0.5 * a * (y2 - y0 + a * (2.0 * y0 - 5.0 * y1 + 4.0 * y2 - y3 + a * (3.0 * (y1 - y2) + y3 - y0)))
    };
    Some(LnCell {
        ln_rest: cubic(|c| c.ln_rest),
        ln_det: cubic(|c| c.ln_det),
        period_s: cubic(|c| c.period_s),
        ln_period_variance: cubic(|c| c.ln_period_variance),
    })
}

/// A cell in the form that is interpolated.
#[derive(Debug, Clone, Copy)]
struct LnCell {
    ln_rest: f64,
    ln_det: f64,
    period_s: f64,
    ln_period_variance: f64,
}

impl Cell {
    fn ln(&self) -> Option<LnCell> {
        self.live.then(|| LnCell {
            ln_rest: self.rest.ln(),
            ln_det: self.ln_det,
            period_s: self.period_s,
            ln_period_variance: self.period_variance.ln(),
        })
    }
}

/// A cell of the finer grid.
struct FineCell {
    /// Log of its profile likelihood and prior.
    ln: f64,
    u: f64,
    rho: f64,
    /// ln s² of the residual sum.
    ln_scale: f64,
    /// Log of its timing noise.
    ln_noise: f64,
    cell: LnCell,
}

/// The posterior: the weight of each cell at each scale.
pub(super) struct Weighted {
    cells: Vec<FineCell>,
    step: [f64; SCALES],
    weights: Vec<[f64; SCALES]>,
}

impl Weighted {
    /// Mean of a quantity of the cell and of s².
    fn mean(&self, f: impl Fn(&FineCell, f64) -> f64) -> f64 {
        let factor = self.step.map(f64::exp);
        self.cells
            .iter()
            .zip(&self.weights)
            .map(|(c, w)| {
                let scale = c.ln_scale.exp();
                w.iter().zip(&factor).map(|(w, d)| w * f(c, scale * d)).sum::<f64>()
            })
            .sum()
    }

    /// Median and central 95 % of a standard deviation whose square is s² times a factor of the cell, given by its logarithm;
    /// the standard uncertainty is a quarter of the interval.
    fn quantiles(&self, ln_factor: impl Fn(&FineCell) -> f64, widen: f64) -> Estimate {
        let middle: Vec<f64> = self.cells.iter().map(|c| c.ln_scale + ln_factor(c)).collect();
        let low = middle.iter().copied().fold(f64::INFINITY, f64::min) + self.step[0];
        let high = middle.iter().copied().fold(f64::NEG_INFINITY, f64::max) + self.step[SCALES - 1];
        let per_bin = ((high - low) / BINS as f64).max(1e-12);
        let mut sums = vec![0.0f64; BINS + 1];
        for (m, weights) in middle.iter().zip(&self.weights) {
            for (d, w) in self.step.iter().zip(weights) {
                sums[(((m + d - low) / per_bin) as usize).min(BINS)] += w;
            }
        }
        let at = |q: f64| {
            let mut sum = 0.0;
            for (bin, w) in sums.iter().enumerate() {
                if sum + w >= q {
                    return (0.5 * (low + per_bin * (bin as f64 + (q - sum) / w))).exp();
                }
                sum += w;
            }
            (0.5 * high).exp()
        };
        let value = at(0.5).max(1e-15);
        let low = value * (at(0.025).max(1e-15) / value).powf(widen);
        let high = value * (at(0.975).max(1e-15) / value).powf(widen);
        Estimate { value, u: (high - low) / (2.0 * COVERAGE_95), low, high }
    }

    /// Figures of the posterior.
    pub(super) fn summary(&self, freedom: f64, excess: f64) -> Posterior {
        let widen = (1.0 + 0.5 * excess.max(0.0)).sqrt();
        let period = self.mean(|c, _| c.cell.period_s);
        let variance =
            self.mean(|c, scale| scale * c.cell.ln_period_variance.exp() + (c.cell.period_s - period).powi(2));
        Posterior {
            jitter_s: self.quantiles(|c| (1.0 - c.u).ln(), widen),
            timing_noise_s: self.quantiles(|c| c.u.ln(), 1.0),
            cycle_jitter_s: self.quantiles(|c| (2.0 * (1.0 - c.rho) * (1.0 - c.u)).ln(), widen),
            memory: self.mean(|c, _| c.rho),
            memory_probability: self.mean(|c, _| if c.rho == 0.0 { 0.0 } else { 1.0 }),
            period_s: (period, variance.sqrt()),
            long_run_variance_s2: self.mean(|c, scale| scale * (1.0 - c.u) * (1.0 + c.rho) / (1.0 - c.rho)),
            freedom,
        }
    }
}
