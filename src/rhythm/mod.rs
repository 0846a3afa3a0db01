//! Which clicks belong to a rhythm, and what the rhythm's statistics are.

pub mod fit;
pub mod line;
mod local;
pub mod marks;
pub mod order;
pub mod pairs;
pub mod path;
pub mod phase;
#[cfg(test)]
mod plain;
pub mod presence;
mod reading;
pub mod search;
pub mod statistics;
mod unwrap;

pub use reading::{FiringCounts, MainsJitter, OtherTrain, Reading, Stretch, Verdict};

/// The mains line (Hz) of which a rate is a small multiple or fraction, within a relative distance.
#[must_use]
pub fn mains_multiple(rate_hz: f64, within: f64) -> Option<f64> {
    [100.0, 120.0, 50.0, 60.0].into_iter().find(|line_hz| {
        [1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 0.5, 1.0 / 3.0, 0.25]
            .iter()
            .any(|q| (rate_hz / (line_hz * q) - 1.0).abs() < within)
    })
}
