//! Has the rate changed? A generalised likelihood-ratio test over all instants (Basseville and Nikiforov 1993, section 2.4.3:
//! unknown mean after the change), with the long-run scatter of the periods estimated in a way that a change does not disturb.

use crate::rhythm::order::median;

/// Standard deviations from which a step is believed.
const BELIEVED: f64 = 7.0;
/// Smallest relative step.
const SMALLEST: f64 = 2e-3;
/// Fewest periods on each side.
const FEWEST: usize = 5;
/// Block lengths by which the long-run scatter is judged, and fewest blocks for it.
const BLOCKS: [usize; 3] = [4, 16, 64];
const FEWEST_BLOCKS: usize = 12;
/// A scatter judged by n blocks is taken larger by this over √n: it may have come out small.
const FEW_BLOCKS: f64 = 2.0;
/// The medians must move by this share of what the means do: one displaced click moves a mean alone.
const BY_MEDIAN: f64 = 0.4;
/// Least relative scatter of single periods: clocks have less.
const LEAST_SCATTER: f64 = 2e-4;
/// Blocks by which a step is told from a drift.
const SHAPES: usize = 40;

/// A step of the rate.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Step {
    /// Time of the first firing after it, s.
    pub time_s: f64,
    /// Rate before and after, Hz.
    pub rates_hz: (f64, f64),
}

/// Scatter of periods: of their mean over many, and what the errors of single times add to neighbouring ones, s².
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Scatter {
    /// Variance of one period as far as it adds up over many.
    pub long_run_s2: f64,
    /// Variance of the error of one time, at most.
    pub timing_s2: f64,
}

impl Scatter {
    /// The scatter of a train (ascending times in s with firing numbers); none if it is too short.
    #[must_use]
    pub fn of(time_s: &[f64], number: &[i64]) -> Option<Self> {
        if time_s.len() < FEWEST_BLOCKS {
            return None;
        }
        let single = block_variance(time_s, number, 1)?;
        let long: Vec<f64> = BLOCKS.iter().filter_map(|&length| block_variance(time_s, number, length)).collect();
        let long_run_s2 = long.iter().copied().reduce(f64::max).unwrap_or(single);
        let mean_s = (time_s[time_s.len() - 1] - time_s[0]) / (number[number.len() - 1] - number[0]) as f64;
        Some(Self { long_run_s2: long_run_s2.max((LEAST_SCATTER * mean_s).powi(2)), timing_s2: single / 3.0 })
    }

    /// Standard deviation of the mean of `periods`, squared.
    fn of_mean(self, periods: f64) -> f64 {
        self.long_run_s2 / periods + 2.0 * self.timing_s2 / periods.powi(2)
    }
}

/// Variance per period from the differences of neighbouring blocks' means: a step touches one of them, a drift moves all alike.
fn block_variance(time_s: &[f64], number: &[i64], length: usize) -> Option<f64> {
    let ends: Vec<usize> = (0..time_s.len()).step_by(length).collect();
    if ends.len() < FEWEST_BLOCKS + 1 {
        return None;
    }
    let means: Vec<f64> = ends.windows(2).map(|e| mean(time_s, number, e[0], e[1])).collect();
    let differences: Vec<f64> = means.windows(2).map(|m| m[1] - m[0]).collect();
    let middle = median(&differences);
    let sd = 1.4826 * median(&differences.iter().map(|d| (d - middle).abs()).collect::<Vec<_>>());
    let margin = 1.0 + FEW_BLOCKS / (means.len() as f64).sqrt();
    Some(0.5 * length as f64 * (margin * sd).powi(2))
}

fn mean(time_s: &[f64], number: &[i64], from: usize, to: usize) -> f64 {
    (time_s[to] - time_s[from]) / (number[to] - number[from]).max(1) as f64
}

/// Looks for a step in a train. `scatter` is what is known of it from before.
#[must_use]
pub fn find(time_s: &[f64], number: &[i64], scatter: Scatter) -> Option<Step> {
    let last = time_s.len().checked_sub(1).filter(|last| *last >= 2 * FEWEST)?;
    let count = |from: usize, to: usize| (number[to] - number[from]).max(1) as f64;
    let size = |k: usize| {
        let (before, after) = (count(0, k), count(k, last));
        let step = mean(time_s, number, k, last) - mean(time_s, number, 0, k);
        step.abs() / (scatter.of_mean(before) + scatter.of_mean(after)).sqrt()
    };
    let (at, z) = (FEWEST..=last - FEWEST).map(|k| (k, size(k))).max_by(|a, b| a.1.total_cmp(&b.1))?;
    let (before, after) = (mean(time_s, number, 0, at), mean(time_s, number, at, last));
    if z < BELIEVED || (after / before - 1.0).abs() < SMALLEST {
        return None;
    }
    let each = |from: usize, to: usize| -> Vec<f64> { (from..to).map(|i| mean(time_s, number, i, i + 1)).collect() };
    let by_median = median(&each(at, last)) - median(&each(0, at));
    if by_median / (after - before) < BY_MEDIAN || is_drift(time_s, number, at) {
        return None;
    }
    Some(Step { time_s: time_s[at], rates_hz: (1.0 / before, 1.0 / after) })
}

/// Compares a train with an earlier stretch of it; between them it was not followed.
#[must_use]
pub fn between(earlier: (&[f64], &[i64]), later: (&[f64], &[i64]), scatter: Scatter) -> Option<Step> {
    let whole = |(time_s, number): (&[f64], &[i64])| {
        let last = time_s.len().checked_sub(1).filter(|last| *last >= FEWEST)?;
        Some(((number[last] - number[0]) as f64, mean(time_s, number, 0, last)))
    };
    let ((n, before), (m, after)) = (whole(earlier)?, whole(later)?);
    let z = (after - before).abs() / (scatter.of_mean(n) + scatter.of_mean(m)).sqrt();
    (z >= BELIEVED && (after / before - 1.0).abs() >= SMALLEST)
        .then_some(Step { time_s: later.0[0], rates_hz: (1.0 / before, 1.0 / after) })
}

/// True if a straight line explains the periods better than a step at `at`.
fn is_drift(time_s: &[f64], number: &[i64], at: usize) -> bool {
    let last = time_s.len() - 1;
    let blocks = SHAPES.min(last / 2);
    let ends: Vec<usize> = (0..=blocks).map(|b| b * last / blocks).collect();
    let means: Vec<f64> = ends.windows(2).map(|e| mean(time_s, number, e[0], e[1])).collect();
    let n = means.len() as f64;
    let (centre, middle) = ((n - 1.0) / 2.0, means.iter().sum::<f64>() / n);
    let place = |i: usize| i as f64 - centre;
    let sxy: f64 = means.iter().enumerate().map(|(i, m)| place(i) * (m - middle)).sum();
    let sxx: f64 = (0..means.len()).map(|i| place(i).powi(2)).sum();
    let slope = sxy / sxx;
    let line: f64 = means.iter().enumerate().map(|(i, m)| (m - middle - slope * place(i)).powi(2)).sum();
    let (before, after) = (mean(time_s, number, 0, at), mean(time_s, number, at, last));
    let step: f64 = means
        .iter()
        .zip(ends.windows(2))
        .map(|(m, e)| {
            // A block across the step has its share of both.
            let share = ((at as f64 - e[0] as f64) / (e[1] - e[0]) as f64).clamp(0.0, 1.0);
            (m - share * before - (1.0 - share) * after).powi(2)
        })
        .sum();
    line < step
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::random::Random;

    /// Periods of 1 ms with `jitter` (relative, normal, memory `rho` from firing to firing), `factor` times as long from `at` on.
    fn train(seed: u64, count: usize, jitter: f64, rho: f64, at: usize, factor: f64) -> (Vec<f64>, Vec<i64>) {
        let mut random = Random::seeded(seed);
        let (mut t, mut deviation) = (0.0, 0.0);
        let times = (0..count)
            .map(|i| {
                deviation = rho * deviation + (1.0 - rho * rho).sqrt() * jitter * random.normal();
                t += 1e-3 * (1.0 + deviation) * if i >= at { factor } else { 1.0 };
                t
            })
            .collect();
        (times, (0..count as i64).collect())
    }

    #[test]
    fn a_steady_train_has_no_step_with_or_without_memory() {
        let mut found = 0;
        for seed in 0..200 {
            for rho in [0.0, 0.6, 0.9] {
                let (t, n) = train(seed, 1200, 0.02, rho, usize::MAX, 1.0);
                let scatter = Scatter::of(&t, &n).expect("long enough");
                found += usize::from(find(&t, &n, scatter).is_some());
            }
        }
        assert_eq!(found, 0);
    }

    #[test]
    fn a_step_is_found_where_it_is_and_a_drift_is_none() {
        for seed in 0..50 {
            let (t, n) = train(seed, 1200, 0.01, 0.0, 1100, 1.02);
            let (before, after) = (Scatter::of(&t[..1000], &n[..1000]).expect("long enough"), Scatter::of(&t, &n));
            // The step itself hardly changes what is thought of the scatter.
            let ratio = after.expect("long enough").long_run_s2 / before.long_run_s2;
            assert!((0.4..2.5).contains(&ratio), "{ratio}");
            let step = find(&t, &n, before).expect("two per cent in one per cent of jitter, a hundred times");
            assert!((step.time_s - t[1100]).abs() < 0.02, "{} {}", step.time_s, t[1100]);
            assert!((step.rates_hz.0 / step.rates_hz.1 - 1.02).abs() < 0.005);
            let drifting: Vec<f64> = t[..1000].iter().map(|t| t + 0.05 * t * t).collect();
            assert_eq!(find(&drifting, &n[..1000], before), None);
        }
    }

    #[test]
    fn one_displaced_click_is_no_step() {
        let (mut t, n) = train(3, 400, 0.002, 0.0, usize::MAX, 1.0);
        let scatter = Scatter::of(&t, &n).expect("long enough");
        t[394] += 3e-4;
        t[399] -= 3e-4;
        assert_eq!(find(&t, &n, scatter), None);
    }
}
