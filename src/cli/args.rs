//! The command line, defined once: help, usage errors and shell completions come from here.

use crate::audio::ChannelChoice;
use clap::{Args, Parser, Subcommand};

const EXAMPLES: &str = "\
Examples:
  gaptone measure run.wav                          rate and jitter of a recording
  gaptone measure run.wav --bench bench.toml       and the voltage at which the gap fires
  gaptone predict --bench bench.toml               what a bench will sound like, before power
  gaptone render --bench bench.toml -o clip.wav    a clip with known truth
  arecord -f S16_LE -r 48000 -d 10 | gaptone measure -

Exit status:
  0  done
  1  a file could not be read or written
  2  wrong usage or a wrong bench file
  3  a recording holds no firing that can be measured";

/// Firing rate, jitter and gap voltage of a relaxation-fired spark gap, from receiver audio.
///
/// Each firing of the gap is a click in an AM receiver; gaptone turns a recording of the clicks back into figures
/// with their uncertainty, and goes forward from the settings of a bench to the sound.
#[derive(Debug, Parser)]
#[command(name = "gaptone", version, after_help = EXAMPLES, max_term_width = 100)]
pub struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

/// The commands.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// Rate, jitter and, with a bench, gap voltage of recordings
    Measure(MeasureArguments),
}

/// Arguments of `measure`.
#[derive(Debug, Args)]
#[command(after_help = "\
With several recordings the exit status is 1 if one of them could not be read, else 3 if one
of them holds nothing that can be measured, else 0.
WAV, FLAC, Ogg Vorbis, MP3, M4A (AAC, ALAC), AIFF and CAF can be read.")]
pub struct MeasureArguments {
    /// Recordings to measure; - is a recording on standard input
    #[arg(required = true, value_name = "RECORDING")]
    pub recordings: Vec<String>,

    /// Description of the bench (TOML); without it there is no voltage
    #[arg(long, value_name = "FILE")]
    pub bench: Option<String>,

    /// Supply voltage of these recordings instead of the bench's, such as 9.2kV or "9.2 kV ± 1 %"
    #[arg(long, value_name = "VOLTAGE", requires = "bench")]
    pub supply: Option<String>,

    /// Channel to analyse: left, right, mix or a number from 1 [default: the one with the clearest clicks]
    #[arg(long, value_name = "CHANNEL")]
    pub channel: Option<ChannelChoice>,

    /// Analyse from this time on, in seconds
    #[arg(long, value_name = "SECONDS", value_parser = seconds, allow_negative_numbers = true)]
    pub from: Option<f64>,

    /// Analyse up to this time, in seconds
    #[arg(long, value_name = "SECONDS", value_parser = seconds, allow_negative_numbers = true)]
    pub to: Option<f64>,

    /// Write the result as JSON, in SI units: one object for one recording, an array for several
    #[arg(long)]
    pub json: bool,

    /// Write every click to a CSV file (one recording only)
    #[arg(long, value_name = "FILE")]
    pub events: Option<String>,

    /// Tell on standard error how the verdict came about
    #[arg(long)]
    pub explain: bool,
}

/// Reads a time in seconds; `s` may stand behind it.
fn seconds(text: &str) -> Result<f64, String> {
    match text.trim().trim_end_matches('s').trim_end().parse::<f64>() {
        Ok(value) if value.is_finite() && value >= 0.0 => Ok(value),
        _ => Err("write a time in seconds, 0 or more, such as 2.5".to_owned()),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_definitions_fit_together() {
        Arguments::command().debug_assert();
    }

    #[test]
    fn times_are_seconds_from_zero_up() {
        assert_eq!(seconds("2.5"), Ok(2.5));
        assert_eq!(seconds("2.5 s"), Ok(2.5));
        for wrong in ["-1", "nan", "inf", "2 min", ""] {
            assert!(seconds(wrong).is_err(), "{wrong}");
        }
    }
}
