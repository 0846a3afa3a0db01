//! Options of `trend`.

use super::PageArguments;
use crate::trend::{Charted, Moment};
use clap::Args;

/// Arguments of `trend`.
#[derive(Debug, Args)]
#[command(after_help = "\
Limits come from the first entries: mean and mean moving range. After a repair begin a new
stretch with --since. Entries of several benches are told apart by the title of the bench.")]
pub struct TrendArguments {
    /// Log written by measure --log; - is standard input
    #[arg(value_name = "LOG")]
    pub log: String,

    /// What to chart [default: voltage; without any, rate]
    #[arg(long, value_name = "FIGURE", value_enum)]
    pub chart: Option<ChartArgument>,

    /// Chart the bench of this title [default: that of the last entry]
    #[arg(long, value_name = "TITLE")]
    pub title: Option<String>,

    /// Leave out what is older, such as 2026-11-30
    #[arg(long, value_name = "TIME")]
    pub since: Option<Moment>,

    /// Entries of the first stretch, from which the limits come [default: 20]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(8..))]
    pub reference: Option<u16>,

    /// Limits instead of those of the first stretch, such as 5.1kV..5.3kV
    #[arg(long, value_name = "LOW..HIGH")]
    pub limits: Option<String>,

    /// Write everything as JSON, in SI units
    #[arg(long, conflicts_with = "csv")]
    pub json: bool,

    /// Write the entries as CSV, in SI units
    #[arg(long)]
    pub csv: bool,

    /// Pages and pictures
    #[command(flatten)]
    pub page: PageArguments,
}

/// What `trend` charts.
#[derive(Debug, Clone, Copy, clap::ValueEnum)]
pub enum ChartArgument {
    /// Gap voltage in standard air
    Voltage,
    /// Firing rate
    Rate,
    /// Period jitter over the period
    Jitter,
    /// Share of missed firings
    Missed,
}

impl From<ChartArgument> for Charted {
    fn from(argument: ChartArgument) -> Self {
        match argument {
            ChartArgument::Voltage => Self::GapVoltage,
            ChartArgument::Rate => Self::FiringRate,
            ChartArgument::Jitter => Self::Jitter,
            ChartArgument::Missed => Self::Missed,
        }
    }
}
