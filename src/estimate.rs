//! A figure with its uncertainty.

use serde::{Deserialize, Serialize};

/// A measured figure: value, standard uncertainty and 95 % coverage interval, all in the unit of the figure.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Estimate {
    /// Best estimate.
    pub value: f64,
    /// Standard uncertainty (JCGM 100, 2.3.1).
    pub u: f64,
    /// Lower end of the 95 % coverage interval.
    pub low: f64,
    /// Upper end of the 95 % coverage interval.
    pub high: f64,
}

/// Coverage factor of a 95 % interval of a normal distribution.
pub const COVERAGE_95: f64 = 1.959_963_984_540_054;

impl Estimate {
    /// A figure with a symmetric normal interval.
    #[must_use]
    pub fn normal(value: f64, u: f64) -> Self {
        Self { value, u, low: value - COVERAGE_95 * u, high: value + COVERAGE_95 * u }
    }

    /// The same figure in another unit: everything times a positive `factor`.
    #[must_use]
    pub fn scaled(self, factor: f64) -> Self {
        Self { value: self.value * factor, u: self.u * factor, low: self.low * factor, high: self.high * factor }
    }

    /// The reciprocal (rate of a period): the interval ends change places.
    #[must_use]
    pub fn reciprocal(self) -> Self {
        Self {
            value: 1.0 / self.value,
            u: self.u / (self.value * self.value),
            low: 1.0 / self.high,
            high: 1.0 / self.low,
        }
    }

    /// True if all four numbers are finite.
    #[must_use]
    pub fn is_finite(&self) -> bool {
        self.value.is_finite() && self.u.is_finite() && self.low.is_finite() && self.high.is_finite()
    }
}
