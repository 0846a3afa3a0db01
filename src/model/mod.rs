//! The laws, forward: from a bench to firings, and from firings to the audio a receiver would give.

pub mod receiver;
pub mod render;
pub mod truth;
