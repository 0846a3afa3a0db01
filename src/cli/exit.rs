//! How the program ends.

use super::files::FileError;
use std::io::{self, Write};
use std::process::ExitCode;

/// Exit status.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Exit {
    /// Done.
    Done = 0,
    /// A file could not be read or written.
    File = 1,
    /// Wrong usage or a wrong bench file.
    Usage = 2,
    /// The recording holds no firing that can be measured.
    NotMeasurable = 3,
    /// A watch was ended by a limit.
    Limit = 4,
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        Self::from(exit as u8)
    }
}

/// What ends a command early.
#[derive(Debug)]
pub enum Failure {
    /// A message for the person and the exit status.
    Told(Exit, String),
    /// The reader of standard output has gone: nothing is left to do, and nothing went wrong.
    PipeClosed,
}

impl Failure {
    /// A file that cannot be used.
    #[must_use]
    pub fn file(name: &str, error: &FileError) -> Self {
        Self::Told(Exit::File, format!("{name}: {error}"))
    }

    /// Wrong usage or a wrong bench.
    #[must_use]
    pub fn usage(message: impl ToString) -> Self {
        Self::Told(Exit::Usage, message.to_string())
    }

    /// Tells the person and gives the exit status.
    pub fn end(self) -> Exit {
        match self {
            Self::Told(exit, message) => {
                tell(&message);
                exit
            }
            Self::PipeClosed => Exit::Done,
        }
    }
}

/// A line on standard error.
pub fn tell(message: &str) {
    // If standard error is gone there is nobody to tell.
    let _ = writeln!(io::stderr().lock(), "gaptone: {message}");
}

/// Writes text to standard output.
///
/// # Errors
/// [`Failure::PipeClosed`] if its reader has gone; exit status 1 if it cannot be written, as on a full disk.
pub fn say(text: &str) -> Result<(), Failure> {
    let mut out = io::stdout().lock();
    out.write_all(text.as_bytes()).and_then(|()| out.flush()).map_err(|error| match error.kind() {
        io::ErrorKind::BrokenPipe => Failure::PipeClosed,
        _ => Failure::file("standard output", &FileError::from_io("writing", error)),
    })
}
