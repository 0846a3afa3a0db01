//! When a step happened: the change point with its interval.
//!
//! Values before and after have means of their own and one scatter, none of them known. With flat priors for the means, for
//! ln σ and for the place, the probability that the change lies after the first τ of n values is proportional to
//! (τ·(n − τ))^(−1/2)·S(τ)^(−(n − 2)/2), S the sum of squares about the two means (Smith 1975, from memory). The interval is the
//! range of the most probable places that together hold 95 %.

use super::regression::two_sided_95;
use crate::estimate::Estimate;

/// Probability that the interval holds.
const COVERAGE: f64 = 0.95;

/// A step in a series.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Step {
    /// Number of values before it; the value at this index is the first after it.
    pub at: usize,
    /// Least and greatest `at` of the 95 % interval.
    pub interval: (usize, usize),
    /// Mean before it.
    pub before: f64,
    /// Mean after it.
    pub after: f64,
    /// Mean after less mean before.
    pub difference: Estimate,
    /// Sum of squares about the two means.
    pub squares: f64,
}

/// The most probable place of a single step. None for fewer than four values, or if they do not scatter.
#[must_use]
pub fn step(values: &[f64]) -> Option<Step> {
    let n = values.len();
    if n < 4 {
        return None;
    }
    let count = n as f64;
    let mean = values.iter().sum::<f64>() / count;
    let total: f64 = values.iter().map(|value| (value - mean).powi(2)).sum();
    if !(total > 0.0 && total.is_finite()) {
        return None;
    }
    let mut sum = 0.0;
    let mut log_probability = Vec::with_capacity(n - 1);
    let mut squares_at = Vec::with_capacity(n - 1);
    for (index, value) in values[..n - 1].iter().enumerate() {
        sum += value - mean;
        let tau = (index + 1) as f64;
        let split = tau * (count - tau);
        // About two means: the total less what the two means take up. Rounding must not leave nothing.
        let squares = (total - sum * sum * count / split).max(1e-12 * total);
        log_probability.push(-0.5 * split.ln() - 0.5 * (count - 2.0) * squares.ln());
        squares_at.push(squares);
    }
    let best = (0..n - 1).max_by(|a, b| log_probability[*a].total_cmp(&log_probability[*b]))?;
    let at = best + 1;
    let interval = most_probable(&log_probability, log_probability[best]);
    let before = values[..at].iter().sum::<f64>() / at as f64;
    let after = values[at..].iter().sum::<f64>() / (n - at) as f64;
    let squares = squares_at[best];
    let freedom = count - 2.0;
    let u = (squares / freedom * (1.0 / at as f64 + 1.0 / (n - at) as f64)).sqrt();
    let half = two_sided_95(freedom) * u;
    let value = after - before;
    let difference = Estimate { value, u, low: value - half, high: value + half };
    Some(Step { at, interval: (interval.0 + 1, interval.1 + 1), before, after, difference, squares })
}

/// Standard uncertainties that the best step of `count` values without one exceeds with the given probability. The best of many
/// places looks like a step by chance, and the more so the longer the series.
///
/// Vostrikova 1981 (from memory), for the largest standardised difference over all places: P = x·φ(x)·(T − T/x² + 4/x²) with
/// φ the normal density and T = 2·ln((1 − h)/h), h the share of the series that a side has at least.
#[must_use]
pub fn clear(count: usize, probability: f64) -> f64 {
    let h = 1.0 / (count as f64).max(4.0);
    let t = 2.0 * ((1.0 - h) / h).ln();
    let chance = |x: f64| x * (-0.5 * x * x).exp() / std::f64::consts::TAU.sqrt() * (t - t / (x * x) + 4.0 / (x * x));
    let (mut low, mut high) = (2.0, 8.0);
    while high - low > 1e-6 {
        let middle = 0.5 * (low + high);
        if chance(middle) > probability { low = middle } else { high = middle }
    }
    // Student's distribution of short series has heavier tails than the normal one that the formula is for.
    high * (1.0 + (high * high + 1.0) / (4.0 * (count as f64 - 2.0).max(1.0)))
}

/// First and last index of the most probable places that together hold the coverage.
fn most_probable(log_probability: &[f64], best: f64) -> (usize, usize) {
    let mut places: Vec<(usize, f64)> =
        log_probability.iter().enumerate().map(|(place, log)| (place, (log - best).exp())).collect();
    let total: f64 = places.iter().map(|place| place.1).sum();
    // What adds nothing to the sum need not be sorted.
    places.retain(|place| place.1 > 1e-9);
    places.sort_by(|a, b| b.1.total_cmp(&a.1));
    let mut held = 0.0;
    let mut range = (places[0].0, places[0].0);
    for (place, probability) in places {
        if held >= COVERAGE * total {
            break;
        }
        held += probability;
        range = (range.0.min(place), range.1.max(place));
    }
    range
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::random::Random;

    #[test]
    fn a_clear_step_is_found_where_it_is() {
        let values: Vec<f64> = (0..40).map(|k| f64::from(k % 3) * 0.1 + if k < 25 { 5.0 } else { 6.0 }).collect();
        let found = step(&values).unwrap();
        assert_eq!((found.at, found.interval), (25, (25, 25)));
        assert!((found.difference.value - 1.0).abs() < 0.05);
        assert!(found.difference.low < 1.0 && 1.0 < found.difference.high);
    }

    #[test]
    fn the_interval_holds_the_change_in_95_of_100_series() {
        // 1000 series of 60 with a step of 0.8 to 3 σ after 10 to 50: a rate of 95 % has a standard deviation of 0.7 %.
        const SERIES: u32 = 1000;
        let mut random = Random::seeded(11);
        let mut held = 0;
        for _ in 0..SERIES {
            let at = 10 + (40.0 * random.uniform()) as usize;
            let size = 0.8 + 2.2 * random.uniform();
            let values: Vec<f64> = (0..60).map(|k| random.normal() + if k >= at { size } else { 0.0 }).collect();
            let found = step(&values).unwrap();
            held += u32::from((found.interval.0..=found.interval.1).contains(&at));
        }
        let share = f64::from(held) / f64::from(SERIES);
        assert!((0.93..=0.99).contains(&share), "{share}");
    }

    #[test]
    fn what_does_not_scatter_has_no_step() {
        assert_eq!(step(&[1.0; 10]), None);
        assert_eq!(step(&[1.0, 2.0, 3.0]), None);
    }
}
