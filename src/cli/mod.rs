//! The command line: the only room that knows files, terminals and devices.

pub mod files;

/// Runs the program with the arguments of the process.
pub fn main() -> std::process::ExitCode {
    std::process::ExitCode::SUCCESS
}
