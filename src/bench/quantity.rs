//! A quantity: value in SI units, with its tolerance.

/// How well a quantity is known. Amounts are absolute, in the unit of the quantity.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Tolerance {
    /// Taken as exact.
    Exact,
    /// Anywhere within ± the amount with equal probability (rectangular, JCGM 100 4.3.7).
    Limit(f64),
    /// Standard uncertainty.
    Standard(f64),
}

/// A quantity in SI units.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Quantity {
    /// Value, SI.
    pub value: f64,
    /// How well it is known.
    pub tolerance: Tolerance,
}

impl Quantity {
    /// An exact quantity.
    #[must_use]
    pub fn exact(value: f64) -> Self {
        Self { value, tolerance: Tolerance::Exact }
    }

    /// Standard uncertainty, same unit.
    #[must_use]
    pub fn u(&self) -> f64 {
        match self.tolerance {
            Tolerance::Exact => 0.0,
            Tolerance::Limit(half_width) => half_width / 3f64.sqrt(),
            Tolerance::Standard(u) => u,
        }
    }

    /// Greatest distance from the value that a limit allows, same unit; zero if there is no limit.
    #[must_use]
    pub fn limit(&self) -> f64 {
        match self.tolerance {
            Tolerance::Limit(half_width) => half_width,
            Tolerance::Exact | Tolerance::Standard(_) => 0.0,
        }
    }
}
