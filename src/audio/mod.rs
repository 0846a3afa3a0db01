//! Samples on their way into the analyzer: where they come from, which channel is heard, what was wrong with them.
//!
//! [`Source`] hands out blocks of interleaved samples; [`Intake`] turns them into one mono stream: it fills lost
//! stretches with zeros, replaces what is not a number, counts clipping, picks or mixes channels and cuts out the
//! part of the recording that was asked for. Full scale is ±1; times are seconds from the start of the recording.
//! Nothing here knows where the samples come from.

mod channel;
mod clearness;
mod clipping;
mod intake;
mod source;

pub use channel::{ChannelChoice, ChannelError};
pub use clearness::{Clearness, clearest};
pub use clipping::ClipCounter;
pub use intake::{Heard, Intake, LISTEN_S, Span};
pub use source::{AudioError, Block, Memory, Source};
