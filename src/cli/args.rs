//! The command line, defined once: help, usage errors and shell completions come from here.

mod help;
mod itself;
mod page;
mod trend;
mod watch;

pub use help::definition;
pub use itself::{AbilitiesArguments, CompletionsArguments, ManualArguments};
pub use page::{EvidenceArguments, PageArguments};
pub use trend::TrendArguments;
pub use watch::WatchArguments;

use super::files::SampleFormat;
use crate::audio::ChannelChoice;
use crate::trend::Moment;
use clap::{Args, Parser, Subcommand};

const EXAMPLES: &str = "\
Examples:
  gaptone measure run.wav                          rate and jitter of a recording
  gaptone measure run.wav --bench bench.toml       and the voltage at which the gap fires
  gaptone measure run.wav --report run.html        and a page with the evidence
  gaptone predict --bench bench.toml               what a bench will sound like, before power
  gaptone render --bench bench.toml -o clip.wav    a clip with known truth
  gaptone measure run.wav --bench bench.toml --log gap.jsonl; gaptone trend gap.jsonl
  arecord -q -f S16_LE -r 48000 | gaptone watch -   the gap while it runs
  arecord -f S16_LE -r 48000 -d 10 | gaptone measure -";

/// Longest clip, s.
const LONGEST_CLIP_S: f64 = 86_400.0;

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
    /// Time constant and gap voltage from recordings at several supply settings
    Calibrate(CalibrateArguments),
    /// What a bench will do and sound like, before power
    Predict(PredictArguments),
    /// A clip of a bench with known truth
    Render(RenderArguments),
    /// Whether a gap has changed, by the log of its measurements
    Trend(TrendArguments),
    /// The gap while it runs: what it is doing now, and what has changed
    Watch(WatchArguments),
    /// What this build can read, write and play, and which devices it sees
    Abilities(AbilitiesArguments),
    /// Completions of commands and options for a shell, on standard output
    Completions(CompletionsArguments),
    /// Manual pages, one for the program and one for each command
    Manual(ManualArguments),
}

/// Arguments of `measure`.
#[derive(Debug, Args)]
#[command(after_help = "\
With several recordings the exit status is 1 if one of them could not be read, else 3 if one
of them holds nothing that can be measured, else 0. In JSON a recording that could not be read
stands in its place with its error.
WAV, FLAC, Ogg Vorbis, MP3, M4A (AAC, ALAC), AIFF and CAF can be read.")]
pub struct MeasureArguments {
    /// Recordings to measure; - is a recording on standard input
    #[arg(required_unless_present = "from_report", value_name = "RECORDING")]
    pub recordings: Vec<String>,

    /// Description of the bench (TOML); without it there is no voltage
    #[arg(long, value_name = "FILE")]
    pub bench: Option<String>,

    /// Supply voltage instead of the bench's, such as 9.2kV or "9.2 kV ± 1 %"; without a tolerance it keeps the
    /// bench's
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

    /// Truth file of a rendered clip: tell how far the figures are from it, in intervals (one recording only)
    #[arg(long, value_name = "FILE")]
    pub truth: Option<String>,

    /// Tell what the uncertainty of the voltage consists of, input by input
    #[arg(long, requires = "bench")]
    pub budget: bool,

    /// Tell whether two runs differ: second less first, with intervals (two recordings)
    #[arg(long, conflicts_with_all = ["truth", "events"])]
    pub difference: bool,

    /// Write every click to a CSV file (one recording only)
    #[arg(long, value_name = "FILE")]
    pub events: Option<String>,

    /// Tell on standard error how the verdict came about
    #[arg(long)]
    pub explain: bool,

    /// Page and pictures
    #[command(flatten)]
    pub evidence: EvidenceArguments,

    /// Where the measurements are logged
    #[command(flatten)]
    pub log: LogArguments,
}

/// Options of `measure` for its log.
#[derive(Debug, Args)]
#[command(next_help_heading = "Log")]
pub struct LogArguments {
    /// Append each measurement to a log, a line of JSON each, for `gaptone trend`
    #[arg(long, value_name = "FILE")]
    pub log: Option<String>,

    /// When it was recorded, such as 2026-11-30T14:05Z [default: now]
    #[arg(long, value_name = "TIME", requires = "log")]
    pub at: Option<Moment>,

    /// Hours that the gap has fired so far, by its hour meter
    #[arg(long, value_name = "HOURS", requires = "log", value_parser = hours)]
    pub hour_meter: Option<f64>,

    /// Temperature at the gap instead of the bench's, such as "21 °C"
    #[arg(long, value_name = "TEMPERATURE", requires = "log", allow_hyphen_values = true)]
    pub temperature: Option<String>,

    /// Air pressure at the gap (not reduced to sea level) instead of the bench's, such as "1002 hPa"
    #[arg(long, value_name = "PRESSURE", requires = "log")]
    pub pressure: Option<String>,

    /// Relative humidity instead of the bench's, such as "45 %"
    #[arg(long, value_name = "HUMIDITY", requires = "log")]
    pub humidity: Option<String>,
}

/// Arguments of `calibrate`.
#[derive(Debug, Args)]
#[command(after_help = "\
Three settings or more, from little above the least at which the gap fires to twice that; two are
possible, but nothing checks them. A tolerance behind the supply is that of its reading alone; an
error that all readings share is the tolerance of supply.voltage in the bench.
A recording that holds no rhythm is left out if three others remain.")]
pub struct CalibrateArguments {
    /// Recordings, each with its supply setting behind an @, such as a.wav@9.2kV or "a.wav@9.2 kV ± 0.3 %"
    #[arg(required = true, value_name = "RECORDING@SUPPLY")]
    pub recordings: Vec<String>,

    /// Description of the bench (TOML): residual voltage, conduction time, leakage, tolerance of the supply meter
    #[arg(long, value_name = "FILE")]
    pub bench: Option<String>,

    /// Fit the residual voltage too
    #[arg(long)]
    pub residual: bool,

    /// One recording, named without a supply, whose supply was ramped: its log, CSV with the header time_s,supply_v
    #[arg(long, value_name = "FILE")]
    pub supply_log: Option<String>,

    /// Write the bench with the result in it, comments kept; FILE may be the bench itself
    #[arg(long, value_name = "FILE")]
    pub write_bench: Option<String>,

    /// Channel to analyse: left, right, mix or a number from 1 [default: the one with the clearest clicks]
    #[arg(long, value_name = "CHANNEL")]
    pub channel: Option<ChannelChoice>,

    /// Write the result as JSON, in SI units
    #[arg(long)]
    pub json: bool,

    /// Page and picture
    #[command(flatten)]
    pub page: PageArguments,
}

/// Arguments of `predict`.
#[derive(Debug, Args)]
pub struct PredictArguments {
    /// Description of the bench (TOML)
    #[arg(long, value_name = "FILE")]
    pub bench: String,

    /// Supply setting, such as 9.2kV, or a range of them, such as 6kV..12kV
    #[arg(long, value_name = "VOLTAGE", conflicts_with = "target")]
    pub supply: Option<String>,

    /// Settings in a range
    #[arg(long, value_name = "N", default_value_t = 7, value_parser = clap::value_parser!(u16).range(2..=1000))]
    pub settings: u16,

    /// Firing rate or note for which to find the supply setting, such as 440Hz or A4
    #[arg(long, value_name = "RATE")]
    pub target: Option<String>,

    /// Write the prediction as JSON, in SI units
    #[arg(long)]
    pub json: bool,

    /// Write what it will sound like to a WAV or FLAC file
    #[arg(long, value_name = "FILE")]
    pub clip: Option<String>,

    /// Play what it will sound like
    #[cfg(feature = "sound-card")]
    #[arg(long)]
    pub play: bool,

    /// Length of the clip, in seconds
    #[arg(long, value_name = "SECONDS", default_value = "5", value_parser = duration)]
    pub seconds: f64,

    /// Page and picture
    #[command(flatten)]
    pub page: PageArguments,
}

/// Arguments of `render`.
#[derive(Debug, Args)]
#[command(after_help = "\
The same bench, seed and version give the same firings. The samples may differ in their last bits from
machine to machine, for the elementary functions do.")]
pub struct RenderArguments {
    /// Description of the bench (TOML)
    #[arg(long, value_name = "FILE", required_unless_present = "series")]
    pub bench: Option<String>,

    /// Description of a series of clips (TOML); an interrupted series goes on where it stopped
    #[arg(long, value_name = "FILE", conflicts_with_all = ["bench", "supply", "seconds", "sample_rate", "bits",
        "switch_on", "truth", "loudness", "fade", "marker", "under"])]
    pub series: Option<String>,

    /// Clip to write, named .wav or .flac; - is a WAV on standard output. Of a series: the folder for its clips
    #[arg(short, long, value_name = "FILE")]
    pub output: String,

    /// Supply voltage instead of the bench's, such as 9.2kV
    #[arg(long, value_name = "VOLTAGE")]
    pub supply: Option<String>,

    /// Length of the clip, in seconds
    #[arg(long, value_name = "SECONDS", default_value = "10", value_parser = duration)]
    pub seconds: f64,

    /// Seed of everything that is drawn at random [default: 1]; of a series: instead of that of its defaults
    #[arg(long, value_name = "N")]
    pub seed: Option<u64>,

    /// Samples per second [default: those of the bench's recorder, else 48000]
    #[arg(long, value_name = "HZ")]
    pub sample_rate: Option<u32>,

    /// Bits of a sample
    #[arg(long, value_name = "BITS", value_enum, default_value_t)]
    pub bits: SampleFormat,

    /// Start with the supply being switched on, instead of a gap that runs already
    #[arg(long)]
    pub switch_on: bool,

    /// Loudness to bring the clip to, as far as a true peak of -1 dBTP allows, such as -23
    #[arg(long, value_name = "LUFS", allow_negative_numbers = true)]
    pub loudness: Option<f64>,

    /// Fade in and out, in seconds
    #[arg(long, value_name = "SECONDS", default_value = "0", value_parser = seconds)]
    pub fade: f64,

    /// A second channel with a tick where each click peaks
    #[arg(long)]
    pub marker: bool,

    /// Recording to be heard on the bench's carrier, over and over
    #[arg(long, value_name = "RECORDING")]
    pub under: Option<String>,

    /// Write every firing and the figures that came out as JSON
    #[arg(long, value_name = "FILE")]
    pub truth: Option<String>,

    /// Play the clip
    #[cfg(feature = "sound-card")]
    #[arg(long)]
    pub play: bool,
}

/// Reads a length in seconds.
fn duration(text: &str) -> Result<f64, String> {
    match seconds(text) {
        Ok(value) if value > 0.0 && value <= LONGEST_CLIP_S => Ok(value),
        _ => Err(format!("write a length in seconds, above 0 and up to {LONGEST_CLIP_S}, such as 10")),
    }
}

/// Reads a count of hours; `h` may stand behind it.
fn hours(text: &str) -> Result<f64, String> {
    match text.trim().trim_end_matches('h').trim_end().parse::<f64>() {
        Ok(value) if value.is_finite() && value >= 0.0 => Ok(value),
        _ => Err("write hours, 0 or more, such as 1250.5".to_owned()),
    }
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
