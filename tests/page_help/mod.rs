//! What the tests of pages and pictures share.
#![allow(dead_code, reason = "each test program uses a part")]

use crate::cli_common::{Folder, clicks, gaptone, stderr};
use std::process::Output;

/// An invented bench.
pub const BENCH: &str = "title = \"invented\"\nsupply.voltage = \"9.2 kV ± 1 %\"\ncharging.resistance = \"1.2 MΩ ± 1 %\"\n\
                     charging.capacitance = \"6.8 nF ± 5 %\"\n";

/// A folder with a recording and the bench.
pub fn folder() -> Folder {
    let folder = Folder::new();
    folder.wav("run.wav", &clicks(3.0, 16_000), 1, 16_000, 16);
    folder.file("bench.toml", BENCH.as_bytes());
    folder
}

/// Runs the program in the folder.
pub fn run(folder: &Folder, arguments: &[&str]) -> Output {
    gaptone().current_dir(folder.0.path()).args(arguments).output().expect("it runs")
}

/// Runs the program, which has to end well.
pub fn done(folder: &Folder, arguments: &[&str]) -> Output {
    let output = run(folder, arguments);
    assert_eq!(output.status.code(), Some(0), "{arguments:?}: {}", stderr(&output));
    output
}

/// The text of a file in the folder.
pub fn text(folder: &Folder, name: &str) -> String {
    std::fs::read_to_string(folder.path(name)).unwrap_or_else(|error| panic!("{name}: {error}"))
}
