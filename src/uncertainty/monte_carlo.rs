//! Propagation of distributions by Monte Carlo with the adaptive procedure of JCGM 101:2008, 7.9.

use super::{Distribution, Problem};
use crate::model::random::Random;

/// Share of draws that may fall where the model has no answer; above it there is no result.
const FEW: f64 = 0.01;

/// Which of the intervals that hold the probability.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Interval {
    /// Equal probability outside on both sides.
    Symmetric,
    /// The shortest (JCGM 101, 5.3.4).
    Shortest,
}

/// How to draw.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct MonteCarlo {
    /// Coverage probability.
    pub probability: f64,
    /// Significant digits of the standard uncertainty to which the result must stand.
    pub digits: i32,
    /// Kind of interval.
    pub interval: Interval,
    /// Draws after which it ends even if the result does not stand yet.
    pub most_draws: usize,
    /// Seed: the same inputs give the same result.
    pub seed: u64,
}

impl Default for MonteCarlo {
    fn default() -> Self {
        Self {
            probability: 0.95,
            digits: 2,
            interval: Interval::Symmetric,
            // Two digits of a nearly normal result stand after 1.14 million draws at the latest, which is when u begins with 99.
            most_draws: 1_200_000,
            seed: 0x0067_6170_746f_6e65,
        }
    }
}

/// What came out.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Propagated {
    /// Mean of the draws.
    pub value: f64,
    /// Their standard deviation.
    pub u: f64,
    /// Lower end of the interval.
    pub low: f64,
    /// Upper end.
    pub high: f64,
    /// How many draws.
    pub draws: usize,
    /// Numerical tolerance that the four figures had to meet.
    pub tolerance: f64,
    /// True if they met it.
    pub stands: bool,
}

/// Numerical tolerance of a standard uncertainty with so many significant digits: half a unit of the last (JCGM 101, 7.9.2).
#[must_use]
pub fn tolerance(u: f64, digits: i32) -> f64 {
    if !(u > 0.0 && u.is_finite()) {
        return 0.0;
    }
    let last = u.log10().floor() as i32 - (digits - 1);
    // 0.0996 is 0.10 to two digits: rounding may carry into a new place.
    let carried = (u / 10f64.powi(last)).round() >= 10f64.powi(digits);
    0.5 * 10f64.powi(last + i32::from(carried))
}

/// Mean, standard deviation and interval ends of draws.
type Figures = [f64; 4];

fn figures(values: &mut [f64], probability: f64, kind: Interval) -> Figures {
    let n = values.len();
    let mean = values.iter().sum::<f64>() / n as f64;
    let u = (values.iter().map(|y| (y - mean).powi(2)).sum::<f64>() / (n - 1) as f64).sqrt();
    let held = (((n as f64) * probability).round() as usize).clamp(1, n - 1);
    let (low, high) = match kind {
        Interval::Symmetric => {
            // Selecting two places takes a fraction of the time of sorting.
            let first = (n - held) / 2;
            let (_, low, above) = values.select_nth_unstable_by(first, f64::total_cmp);
            let low = *low;
            (low, *above.select_nth_unstable_by(held - 1, f64::total_cmp).1)
        }
        Interval::Shortest => {
            values.sort_unstable_by(f64::total_cmp);
            let width = |first: &usize| values[first + held] - values[*first];
            let first = (0..n - held).min_by(|a, b| width(a).total_cmp(&width(b))).unwrap_or(0);
            (values[first], values[first + held])
        }
    };
    [mean, u, low, high]
}

/// Lower triangle L with L·Lᵀ the matrix (Cholesky); a direction without variance stays zero.
fn lower_triangle(matrix: &[Vec<f64>]) -> Vec<Vec<f64>> {
    let n = matrix.len();
    let mut lower = vec![vec![0.0; n]; n];
    for i in 0..n {
        for j in 0..=i {
            let rest = matrix[i][j] - (0..j).map(|k| lower[i][k] * lower[j][k]).sum::<f64>();
            lower[i][j] = if i == j {
                rest.max(0.0).sqrt()
            } else if lower[j][j] > 0.0 {
                rest / lower[j][j]
            } else {
                0.0
            };
        }
    }
    lower
}

/// Blocks of draws and the figures of each.
struct Blocks {
    values: Vec<f64>,
    figures: Vec<Figures>,
}

impl Blocks {
    /// True if no figure's mean over the blocks is uncertain by more than the tolerance (two standard deviations).
    fn stand(&self, tolerance: f64) -> bool {
        let h = self.figures.len() as f64;
        (0..4).all(|which| {
            let mean = self.figures.iter().map(|f| f[which]).sum::<f64>() / h;
            let square = self.figures.iter().map(|f| (f[which] - mean).powi(2)).sum::<f64>() / (h * (h - 1.0));
            2.0 * square.sqrt() <= tolerance
        })
    }

    /// Standard deviation of all draws: that within the blocks and that between their means.
    fn u(&self) -> f64 {
        let h = self.figures.len() as f64;
        let mean = self.figures.iter().map(|f| f[0]).sum::<f64>() / h;
        (self.figures.iter().map(|f| f[1] * f[1] + (f[0] - mean).powi(2)).sum::<f64>() / h).sqrt()
    }
}

impl Problem<'_> {
    /// One draw of all inputs.
    fn draw(&self, lower: Option<&Vec<Vec<f64>>>, random: &mut Random, scores: &mut [f64], inputs: &mut [f64]) {
        if lower.is_some() {
            scores.iter_mut().for_each(|score| *score = random.normal());
        }
        for (i, input) in self.inputs.iter().enumerate() {
            inputs[i] = input.value
                + match (lower, input.distribution) {
                    (Some(lower), Distribution::Normal { u }) => {
                        u * (0..=i).map(|k| lower[i][k] * scores[k]).sum::<f64>()
                    }
                    _ => input.distribution.draw(random),
                };
        }
    }

    /// Propagates the distributions; none if the model has no answer for one draw in a hundred.
    #[must_use]
    pub fn monte_carlo(&self, how: &MonteCarlo) -> Option<Propagated> {
        let block = ((100.0 / (1.0 - how.probability)).ceil() as usize).max(10_000);
        let lower = self.correlation.as_ref().map(|matrix| lower_triangle(matrix));
        let mut random = Random::seeded(how.seed);
        let n = self.inputs.len();
        let (mut scores, mut inputs) = (vec![0.0; n], vec![0.0; n]);
        let mut blocks = Blocks { values: Vec::new(), figures: Vec::new() };
        let mut drawn = 0;
        loop {
            let start = blocks.values.len();
            for _ in 0..block {
                self.draw(lower.as_ref(), &mut random, &mut scores, &mut inputs);
                blocks.values.extend((self.model)(&inputs).filter(|y| y.is_finite()));
            }
            drawn += block;
            if (blocks.values.len() as f64) < (1.0 - FEW) * drawn as f64 {
                return None;
            }
            let figures_of_block = figures(&mut blocks.values[start..], how.probability, how.interval);
            blocks.figures.push(figures_of_block);
            if blocks.figures.len() < 2 {
                continue;
            }
            let tolerance = tolerance(blocks.u(), how.digits);
            let stands = blocks.stand(tolerance);
            if stands || drawn + block > how.most_draws {
                let [value, u, low, high] = figures(&mut blocks.values, how.probability, how.interval);
                return Some(Propagated { value, u, low, high, draws: drawn, tolerance, stands });
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_tolerance_is_half_a_unit_of_the_last_digit_shown() {
        // JCGM 101, 7.9.2, examples: 0.000 35 g to two digits 0.000 005 g; 2 K to one digit 0.5 K.
        for (u, digits, expected) in [(0.000_35, 2, 0.000_005), (2.0, 1, 0.5), (0.099_6, 2, 0.005), (45.0, 2, 0.5)] {
            assert!((tolerance(u, digits) / expected - 1.0).abs() < 1e-9, "{u} {digits}: {}", tolerance(u, digits));
        }
        assert_eq!(tolerance(0.0, 2), 0.0);
    }

    #[test]
    fn a_full_correlation_leaves_no_direction_of_its_own() {
        let lower = lower_triangle(&[vec![1.0, 1.0], vec![1.0, 1.0]]);
        assert_eq!(lower, [vec![1.0, 0.0], vec![1.0, 0.0]]);
    }
}
