//! From samples to candidate clicks: conditioning, the click's own shape, matched filter, marks and sub-sample times.
//!
//! In: one window of mono samples (units of full scale, any rate). Out: candidates (time in seconds from the start of the
//! window, mark = natural log of the filter output over its robust noise scale), and click times re-read in the channel that
//! scatters least. Nothing here knows of rhythms; [`crate::rhythm`] decides which candidates are firings.

pub mod candidates;
pub mod filter;
#[cfg(test)]
mod plain;
pub mod resample;
pub mod shape;
pub mod snippet;
pub mod spectrum;
pub mod timing;

pub use candidates::{Candidates, Marks};
pub use shape::Shape;
