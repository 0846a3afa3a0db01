//! The laws, and the way forward: from a bench to firings and to the audio a receiver would give.
//!
//! [`breakdown`] gives the gap voltage of electrodes in [`air`], [`charging`] holds the charging law in both directions,
//! [`locking`] what a ripple makes of it, [`multiplier`] how much ripple a cascade has, [`ring`] the damped wave of a spark, [`random`] the portable random numbers, [`firings`]
//! makes trains of firings with known truth; [`receiver`] and [`render`] turn firings into audio, [`truth`] says what a
//! clip holds and [`clip`] joins them. [`finish`] sets loudness and channels, [`series`] makes the clips of a series.

pub mod air;
pub mod breakdown;
pub mod charging;
pub mod clip;
pub mod finish;
pub mod firings;
pub mod locking;
pub mod multiplier;
pub mod random;
pub mod receiver;
pub mod render;
pub mod ring;
pub mod root;
pub mod series;
pub mod truth;
