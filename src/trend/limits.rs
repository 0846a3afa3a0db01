//! The individuals and moving-range chart.
//!
//! Source: NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.2 (individuals control charts): σ is the mean moving range of
//! neighbours over d2 = 1.128, the limits are the mean ± 3σ, the moving range stays below D4 = 3.267 times its mean.
//! With few entries mean and σ are themselves uncertain, and ± 3σ would cry wolf: the 3 is replaced by the factor of Student's
//! distribution with the same chance for one further entry, and tends to 3.

use serde::{Deserialize, Serialize};
use statrs::distribution::{ContinuousCDF, StudentsT};

/// Mean range of two normal values over their standard deviation.
pub const D2: f64 = 1.128;
/// Upper limit of a moving range over its mean.
pub const D4: f64 = 3.267;
/// Chance of a normal value beyond + 3σ.
const TAIL: f64 = 1.349_898_031_630_094_5e-3;
/// Degrees of freedom that σ from m entries is worth at these limits, a + b·(m − 1): fitted to 200 000 simulated stretches each of
/// 8 to 100 entries, where it gives the chance of 3σ within 3 %.
const FREEDOM: (f64, f64) = (0.9, 0.685);

/// Limits of the chart, in the unit of the figure.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Limits {
    /// Entries from which they come; 0 for stated ones.
    pub entries: usize,
    /// Centre line.
    pub centre: f64,
    /// Standard deviation from entry to entry, from moving ranges.
    pub sigma: f64,
    /// Lower limit.
    pub low: f64,
    /// Upper limit.
    pub high: f64,
    /// Mean moving range.
    pub moving_range: f64,
    /// Upper limit of a moving range.
    pub moving_range_high: f64,
}

impl Limits {
    /// Limits of a first stretch; at least two values.
    #[must_use]
    pub fn of(stretch: &[f64]) -> Self {
        let n = stretch.len() as f64;
        let centre = stretch.iter().sum::<f64>() / n;
        let ranges: f64 = stretch.windows(2).map(|pair| (pair[1] - pair[0]).abs()).sum();
        let moving_range = ranges / (n - 1.0).max(1.0);
        let sigma = moving_range / D2;
        let half = factor(stretch.len()) * sigma;
        Self {
            entries: stretch.len(),
            centre,
            sigma,
            low: centre - half,
            high: centre + half,
            moving_range,
            moving_range_high: D4 * moving_range,
        }
    }

    /// The same with stated limits; the centre is midway.
    #[must_use]
    pub fn stated(self, low: f64, high: f64) -> Self {
        Self { entries: 0, centre: 0.5 * (low + high), low, high, ..self }
    }

    /// On which side a value lies: −1, 0 or 1.
    #[must_use]
    pub fn side(&self, value: f64) -> i8 {
        i8::from(value > self.high) - i8::from(value < self.low)
    }
}

/// Half the distance of the limits in σ for m entries.
#[must_use]
pub fn factor(m: usize) -> f64 {
    let m = m as f64;
    let freedom = FREEDOM.0 + FREEDOM.1 * (m - 1.0);
    // One further entry scatters about a mean that is itself uncertain by σ/√m.
    let widening = (1.0 + 1.0 / m).sqrt();
    StudentsT::new(0.0, 1.0, freedom).map_or(3.0, |t| t.inverse_cdf(1.0 - TAIL)) * widening
}

#[cfg(test)]
mod tests {
    use super::*;

    /// NIST/SEMATECH e-Handbook, 6.3.2.2: flow rates of ten batches (from memory; the sums were worked by hand).
    const FLOW: [f64; 10] = [49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1];

    #[test]
    fn the_flow_rates_of_the_handbook_give_its_mean_and_its_moving_range() {
        let limits = Limits::of(&FLOW);
        assert!((limits.centre - 50.81).abs() < 1e-9);
        assert!((limits.moving_range - 1.8778).abs() < 5e-5);
        // Its limits for a known σ: 55.8041 and 45.8159.
        assert!((limits.centre + 3.0 * limits.sigma - 55.8041).abs() < 5e-4);
        assert!((limits.centre - 3.0 * limits.sigma - 45.8159).abs() < 5e-4);
        // Ten entries are few: the limits for the next one lie farther out.
        assert!(limits.high > 55.8041 && limits.low < 45.8159);
        assert!(FLOW.iter().all(|value| limits.side(*value) == 0));
    }

    #[test]
    fn the_factor_falls_to_three_with_many_entries() {
        assert!((factor(10_000) - 3.0).abs() < 3e-3, "{}", factor(10_000));
        assert!(factor(8) > factor(20) && factor(20) > factor(100) && factor(100) > 3.0);
    }

    #[test]
    fn stated_limits_stand_as_they_are() {
        let limits = Limits::of(&FLOW).stated(48.0, 53.0);
        assert_eq!((limits.entries, limits.centre, limits.side(47.6), limits.side(53.6)), (0, 50.5, -1, 1));
    }
}
