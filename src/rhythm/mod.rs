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

/// Relative distance from a mains multiple or fraction, and relative jitter, of a locked gap.
const LOCK_WITHIN: f64 = 5e-4;
const LOCK_JITTER: f64 = 3e-3;

/// The mains line (Hz) to which a gap of this rate and relative period jitter seems to be locked, if to any.
#[must_use]
pub fn locked_to(rate_hz: f64, jitter: f64) -> Option<f64> {
    if jitter > LOCK_JITTER { None } else { mains_multiple(rate_hz, LOCK_WITHIN) }
}
