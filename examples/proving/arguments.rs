//! Arguments of the program.

use clap::Parser;
use std::path::PathBuf;

/// Makes recordings with known truth, reads each with the analyzer, and says how far off the readings are.
#[derive(Parser)]
#[command(name = "proving")]
pub struct Arguments {
    /// Kinds, separated by commas; `all`, `gap`, `no` for every kind, those with and those without a gap.
    #[arg(long, default_value = "all")]
    pub kinds: String,
    /// Seeds, first..after-last.
    #[arg(long, default_value = "0..8", value_parser = seeds)]
    pub seeds: (u64, u64),
    /// Threads.
    #[arg(long, default_value_t = 1)]
    pub threads: usize,
    /// A line a case, worst first.
    #[arg(long)]
    pub verbose: bool,
    /// With the line of a case, how the analyzer came to its answer.
    #[arg(long, requires = "verbose")]
    pub explain: bool,
    /// Read with the watch instead: its lines, second by second.
    #[arg(long, conflicts_with = "write")]
    pub watch: bool,
    /// How soon the watch notices changes of many sorts; `--kinds` names them instead.
    #[arg(long, conflicts_with_all = ["write", "watch"])]
    pub changes: bool,
    /// Write recordings and truth here instead of reading them.
    #[arg(long, value_name = "DIR")]
    pub write: Option<PathBuf>,
}

fn seeds(text: &str) -> Result<(u64, u64), String> {
    let wrong = || format!("`{text}`: seeds are FIRST..AFTER_LAST, such as 1000..1040");
    let (first, last) = text.split_once("..").ok_or_else(wrong)?;
    let bounds = (first.parse().map_err(|_| wrong())?, last.parse().map_err(|_| wrong())?);
    if bounds.0 < bounds.1 { Ok(bounds) } else { Err(wrong()) }
}
