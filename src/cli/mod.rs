//! The command line: the only room that knows files, terminals and devices.
//!
//! Results go to standard output, everything else to standard error.

mod abilities;
mod args;
mod bench_file;
mod calibrate;
mod clip;
mod evidence;
mod exit;
pub mod files;
mod itself;
mod listen;
mod log;
mod measure;
mod page;
#[cfg(feature = "sound-card")]
mod play;
mod predict;
mod progress;
mod render;
mod render_series;
mod terminal;
mod trend;
mod watch;

use args::{Arguments, Command};
use clap::FromArgMatches;
use exit::Exit;
use std::process::ExitCode;

/// Runs the program with the arguments of the process.
#[must_use]
pub fn main() -> ExitCode {
    let parsed = args::definition().try_get_matches().and_then(|matches| Arguments::from_arg_matches(&matches));
    let arguments = match parsed {
        Ok(arguments) => arguments,
        Err(message) => {
            // Help asked for is printed to standard output and is no failure. A closed pipe is none either.
            let _ = message.print();
            return if message.use_stderr() { Exit::Usage.into() } else { Exit::Done.into() };
        }
    };
    let ended = match &arguments.command {
        Command::Measure(arguments) => measure::run(arguments),
        Command::Calibrate(arguments) => calibrate::run(arguments),
        Command::Predict(arguments) => predict::run(arguments),
        Command::Render(arguments) => render::run(arguments),
        Command::Trend(arguments) => trend::run(arguments),
        Command::Watch(arguments) => watch::run(arguments),
        Command::Abilities(arguments) => abilities::run(arguments),
        Command::Completions(arguments) => itself::completions(arguments),
        Command::Manual(arguments) => itself::manual(arguments),
    };
    ended.unwrap_or_else(exit::Failure::end).into()
}
