//! Which clicks belong to a rhythm, and what the rhythm's statistics are.

mod reading;

pub use reading::{FiringCounts, MainsJitter, OtherTrain, Reading, Stretch, Verdict};
