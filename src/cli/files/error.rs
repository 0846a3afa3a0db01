//! What can be wrong with a file, each with what would be right.

use std::io;

/// The kinds of sound file that can be read, as told to the person.
pub(super) const READABLE: &str = "WAV, FLAC, Ogg Vorbis, MP3, M4A (AAC, ALAC), AIFF and CAF can be read";

/// Why a file cannot be used. The name of the file is put in front by the caller.
#[derive(Debug, thiserror::Error)]
pub enum FileError {
    /// Nothing there.
    #[error("no such file; check the name and the folder")]
    Missing,
    /// A directory.
    #[error("is a directory; name a file in it")]
    Directory,
    /// No bytes.
    #[error("the file is empty; a recording was expected")]
    Empty,
    /// No permission.
    #[error("permission denied; the file must be open to this user")]
    Denied,
    /// Not a sound file.
    #[error("{0}, not a sound file; {READABLE}")]
    NotSound(&'static str),
    /// A container that holds no audio.
    #[error("holds no audio; {READABLE}")]
    NoAudio,
    /// A coding that cannot be decoded.
    #[error("holds {0}, which cannot be decoded; {READABLE}")]
    Coding(String),
    /// A damaged or impossible header, or nothing that can be decoded.
    #[error("{0}")]
    Broken(String),
    /// The system failed.
    #[error("{doing} failed: {source}")]
    System {
        /// What was done: `reading`, `writing`.
        doing: &'static str,
        /// What the system said.
        source: io::Error,
    },
}

impl FileError {
    /// The error for what the system said while `doing`.
    #[must_use]
    pub fn from_io(doing: &'static str, source: io::Error) -> Self {
        match source.kind() {
            io::ErrorKind::NotFound => Self::Missing,
            io::ErrorKind::IsADirectory => Self::Directory,
            io::ErrorKind::PermissionDenied => Self::Denied,
            _ => Self::System { doing, source },
        }
    }
}
