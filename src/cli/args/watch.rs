//! Arguments of `watch`.

use super::LogArguments;
use crate::audio::ChannelChoice;
use crate::cli::files::RawFormat;
use crate::watch::limit::Limit;
use clap::Args;

/// Arguments of `watch`.
#[derive(Debug, Args)]
#[command(after_help = "\
On a terminal the figures are shown as they change; keys: q quit, h hold, m mark, s supply, r reset.
Anywhere else there is one line of JSON for each interval (gaptone.watch/1), and at the end the
measurement of the whole (gaptone.measurement/1).

Limits: rate, jitter, voltage, missed, extra, silence, each with a range of which one end may be
left out: --limit 'rate 430..450 Hz' --limit 'missed ..5 %' --limit 'silence ..2 s'. An alarm is
given when the interval of a figure lies outside, or its value for three intervals in a row.

Examples:
  arecord -q -f S16_LE -r 48000 | gaptone watch -
  gaptone watch run.wav --pace                     as if it were heard now
  gaptone watch --raw s16le:48000:1 - < samples    samples without a header

Exit status: as of the other commands, and 4 if --stop-on-limit ended the watch.")]
pub struct WatchArguments {
    /// Recording to watch, - for standard input [default: the sound card, if this build has it]
    #[cfg_attr(feature = "sound-card", arg(required_unless_present_any = ["device", "list_devices"]))]
    #[arg(value_name = "RECORDING")]
    pub input: Option<String>,

    /// Listen to this device of the machine, `default` for its usual one
    #[cfg(feature = "sound-card")]
    #[arg(long, value_name = "NAME", conflicts_with_all = ["input", "raw", "pace"])]
    pub device: Option<String>,

    /// Tell which devices there are to listen to
    #[cfg(feature = "sound-card")]
    #[arg(long, conflicts_with_all = ["input", "device"])]
    pub list_devices: bool,

    /// The input is samples without a header, such as s16le:48000:1 (s16le, s24le, s32le, f32le; Hz; channels)
    #[arg(long, value_name = "FORMAT", requires = "input")]
    pub raw: Option<RawFormat>,

    /// Take a recording at its own pace, not as fast as it can be read
    #[arg(long)]
    pub pace: bool,

    /// Channel to listen to: left, right, mix or a number from 1 [default: the one with the clearest clicks at first]
    #[arg(long, value_name = "CHANNEL")]
    pub channel: Option<ChannelChoice>,

    /// Time between two lines
    #[arg(long, value_name = "SECONDS", default_value = "1s", value_parser = interval)]
    pub every: f64,

    /// End after so much audio
    #[arg(long = "for", value_name = "SECONDS", value_parser = super::duration)]
    pub length: Option<f64>,

    /// Description of the bench (TOML); without it there is no voltage
    #[arg(long, value_name = "FILE")]
    pub bench: Option<String>,

    /// Supply voltage instead of the bench's, such as 9.2kV or "9.2 kV ± 1 %"
    #[arg(long, value_name = "VOLTAGE", requires = "bench")]
    pub supply: Option<String>,

    /// A figure must stay within this range, such as 'rate 430..450 Hz'; may be given several times
    #[arg(long = "limit", value_name = "LIMIT")]
    pub limits: Vec<Limit>,

    /// End with exit status 4 when a limit is passed
    #[arg(long, requires = "limits")]
    pub stop_on_limit: bool,

    /// The sample clock is right within this share, such as 100ppm [default: 100ppm of a sound card, else exact]
    #[arg(long, value_name = "SHARE", value_parser = share)]
    pub clock: Option<f64>,

    /// Keep the audio in a WAV file, whole up to its last second whatever happens; a new file from 4 GB on
    #[arg(long, value_name = "FILE")]
    pub record: Option<String>,

    /// Lines of JSON on a terminal too
    #[arg(long)]
    pub json: bool,

    /// Time between two entries of the log
    #[arg(long, value_name = "SECONDS", requires = "log", default_value = "60s", value_parser = interval)]
    pub log_every: f64,

    /// Where the measurements are logged
    #[command(flatten)]
    pub log: LogArguments,
}

/// Reads the time between two lines.
fn interval(text: &str) -> Result<f64, String> {
    match super::seconds(text) {
        Ok(value) if (0.1..=3600.0).contains(&value) => Ok(value),
        _ => Err("write seconds from 0.1 to 3600, such as 1s".to_owned()),
    }
}

/// Reads a share such as `100ppm`, `0.01 %` or a bare number.
fn share(text: &str) -> Result<f64, String> {
    let text = text.trim();
    let (number, unit) = if let Some(number) = text.strip_suffix("ppm") {
        (number, 1e-6)
    } else if let Some(number) = text.strip_suffix('%') {
        (number, 1e-2)
    } else {
        (text, 1.0)
    };
    match number.trim().parse::<f64>() {
        Ok(value) if (0.0..=0.1).contains(&(value * unit)) => Ok(value * unit),
        _ => Err("write a share from 0 to 10 %, such as 100ppm".to_owned()),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn shares_and_intervals_are_read_with_their_units() {
        assert!((share("100ppm").expect("a share") - 1e-4).abs() < 1e-12);
        assert!((share("0.5 %").expect("a share") - 5e-3).abs() < 1e-12);
        assert!(share("3").is_err() && share("-1ppm").is_err() && share("ppm").is_err());
        assert_eq!(interval("2s"), Ok(2.0));
        assert!(interval("0.01").is_err());
    }
}
