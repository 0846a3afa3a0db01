//! Options for pages and pictures.

use clap::Args;

/// Options of the commands that draw one picture.
#[derive(Debug, Args)]
#[command(next_help_heading = "Pages and pictures")]
pub struct PageArguments {
    /// Write a page with figures, picture and what they rest on: one HTML file to be mailed, printed and kept
    #[arg(long, value_name = "FILE")]
    pub report: Option<String>,

    /// Draw the picture alone to an SVG file
    #[arg(long, value_name = "FILE")]
    pub plot: Option<String>,
}

impl PageArguments {
    /// The files that are to be written.
    pub fn places(&self) -> impl Iterator<Item = &str> {
        [&self.report, &self.plot].into_iter().flatten().map(String::as_str)
    }
}

/// Options of `measure` for its page and pictures.
#[derive(Debug, Args)]
#[command(next_help_heading = "Pages and pictures")]
pub struct EvidenceArguments {
    /// Write a page with the answer and its evidence: one HTML file to be mailed, printed and kept
    #[arg(long, value_name = "FILE")]
    pub report: Option<String>,

    /// Put the recordings into the page, to be played there
    #[arg(long, requires = "report")]
    pub with_audio: bool,

    /// Draw one picture of the evidence to an SVG file (one recording only): periods, or of the KIND click, excerpts,
    /// recording, distribution, growth, spectrum, sizes, budget; may be given several times
    #[arg(long, value_name = "[KIND=]FILE")]
    pub plot: Vec<String>,

    /// Read a page written by --report instead of recordings, and put its figures out again
    #[arg(long, value_name = "FILE", conflicts_with_all = ["recordings", "bench", "supply", "channel", "from", "to", "truth",
        "budget", "difference", "events", "explain", "log", "with_audio"])]
    pub from_report: Option<String>,
}
