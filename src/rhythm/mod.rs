//! Which clicks belong to a rhythm, and what the rhythm's statistics are.

pub mod fit;
pub mod line;
pub mod marks;
pub mod pairs;
pub mod path;
pub mod phase;
pub mod presence;
mod reading;
pub mod search;
pub mod statistics;

pub use reading::{FiringCounts, MainsJitter, OtherTrain, Reading, Stretch, Verdict};
