//! Files and standard input: reading recordings of any common kind, writing results whole or not at all.

mod append;
mod decode;
mod encode;
mod error;
mod flac;
mod kind;
mod place;
mod raw;
mod stream;
mod wav_head;
mod write;

pub use append::{append_line, check_appendable};
pub use decode::open;
pub use encode::{ClipFacts, SampleFormat, write_frames};
pub use error::FileError;
pub use raw::{RawFormat, open_raw};
pub use stream::{Recording, can_decode};
pub use write::{check_writable, read_text, write_atomically};

/// Name that stands for standard input or output.
pub const STANDARD_STREAM: &str = "-";

#[cfg(test)]
mod tests;
