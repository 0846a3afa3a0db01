//! Why there is no gap voltage.

use crate::bench::si;
use thiserror::Error;

/// A bench whose gap voltage cannot be computed.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum NoGapVoltage {
    /// A key is missing.
    #[error(
        "the bench does not give {0}: the breakdown voltage follows from gap.voltage, or from gap.electrodes with gap.spacing (and gap.diameter for spheres)"
    )]
    Missing(&'static str),
    /// The law does not hold there.
    #[error("{what} is {value}; the breakdown law holds from {low} to {high}: {instead}")]
    OutOfRange {
        /// Key or figure.
        what: &'static str,
        /// Its value.
        value: String,
        /// Low end of the range.
        low: String,
        /// High end of the range.
        high: String,
        /// What holds instead, or what to do.
        instead: &'static str,
    },
}

impl NoGapVoltage {
    pub(super) fn range(what: &'static str, value: f64, unit: &str, range: (f64, f64), instead: &'static str) -> Self {
        let text = |value: f64| si(value, unit, 3);
        Self::OutOfRange { what, value: text(value), low: text(range.0), high: text(range.1), instead }
    }
}
