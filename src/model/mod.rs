//! The laws, and the way forward: from a bench to firings and to the audio a receiver would give.
//!
//! [`charging`] holds the charging law in both directions, [`random`] the portable random numbers, [`firings`]
//! makes trains of firings with known truth; [`receiver`] and [`render`] turn firings into audio, [`truth`] says what a
//! clip holds and [`clip`] joins them. [`finish`] sets loudness and channels, [`series`] makes the clips of a series.

pub mod charging;
pub mod clip;
pub mod finish;
pub mod firings;
pub mod random;
pub mod receiver;
pub mod render;
pub mod root;
pub mod series;
pub mod truth;
