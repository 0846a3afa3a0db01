//! `gaptone predict`: what a bench will do, before power.

use super::args::PredictArguments;
use super::bench_file;
use super::clip::{Order, clip};
use super::exit::{Exit, Failure, say};
use super::files::{self, SampleFormat};
use crate::bench::{self, Bench, Dimension, Quantity};
use crate::model::firings::Start;
use crate::predict::{self, predict, supply_for_rate, sweep};
use crate::report;
use serde::Serialize;

/// Sample rate of a clip to listen to, Hz.
const CLIP_RATE_HZ: u32 = 48_000;

/// What is asked.
enum Question {
    /// One setting, V; that of the bench if absent.
    Setting(Option<f64>),
    /// A range of settings, V.
    Range(f64, f64),
}

/// Runs the command.
///
/// # Errors
/// Wrong usage, a bench that cannot be used, a place for the clip that cannot be written.
pub(super) fn run(arguments: &PredictArguments) -> Result<Exit, Failure> {
    if let Some(place) = &arguments.clip {
        files::check_writable(place).map_err(|error| Failure::file(place, &error))?;
    }
    let bench = bench_file::load(&arguments.bench)?;
    match question(arguments, &bench)? {
        Question::Range(low_v, high_v) => {
            let sweep = sweep(&bench, low_v, high_v, usize::from(arguments.settings)).map_err(Failure::usage)?;
            put_out(arguments.json, &sweep, || report::sweep_text(&sweep))?;
        }
        Question::Setting(supply_v) => {
            let prediction = predict(&bench, supply_v).map_err(Failure::usage)?;
            put_out(arguments.json, &prediction, || predict::text(&prediction))?;
            listen(arguments, &bench, supply_v)?;
        }
    }
    Ok(Exit::Done)
}

fn question(arguments: &PredictArguments, bench: &Bench) -> Result<Question, Failure> {
    if let Some(text) = &arguments.target {
        let rate = bench_file::quantity("--target", text, Dimension::Frequency)?;
        return supply_for_rate(bench, rate.value).map(|volts| Question::Setting(Some(volts))).map_err(Failure::usage);
    }
    match &arguments.supply {
        Some(text) if text.contains("..") => {
            let (low, high) = bench::parse_range(text, Dimension::Voltage)
                .map_err(|error| Failure::usage(format!("--supply: {error}")))?;
            if wants_sound(arguments) {
                return Err(Failure::usage("a clip needs one supply setting; give --supply a single voltage"));
            }
            Ok(Question::Range(low.value, high.value))
        }
        Some(text) => Ok(Question::Setting(Some(bench_file::supply(text, bench)?.value))),
        None => Ok(Question::Setting(None)),
    }
}

fn put_out(json: bool, object: &impl Serialize, text: impl FnOnce() -> String) -> Result<(), Failure> {
    if !json {
        return say(&text());
    }
    let text = serde_json::to_string_pretty(object)
        .map_err(|error| Failure::Told(Exit::File, format!("the prediction cannot be written as JSON: {error}")))?;
    say(&(text + "\n"))
}

#[cfg(feature = "sound-card")]
fn wants_sound(arguments: &PredictArguments) -> bool {
    arguments.clip.is_some() || arguments.play
}

#[cfg(not(feature = "sound-card"))]
fn wants_sound(arguments: &PredictArguments) -> bool {
    arguments.clip.is_some()
}

/// Writes the clip and plays it, as asked.
fn listen(arguments: &PredictArguments, bench: &Bench, supply_v: Option<f64>) -> Result<(), Failure> {
    if !wants_sound(arguments) {
        return Ok(());
    }
    let order = Order {
        supply: supply_v.map(Quantity::exact),
        start: Start::Running,
        duration_s: arguments.seconds,
        sample_rate_hz: Some(CLIP_RATE_HZ),
        seed: 1,
        programme: None,
    };
    let clip = clip(bench, &order)?;
    if let Some(place) = &arguments.clip {
        files::write_clip(place, clip.renderer.clone(), CLIP_RATE_HZ, SampleFormat::Int16)
            .map_err(|error| Failure::file(place, &error))?;
    }
    #[cfg(feature = "sound-card")]
    if arguments.play {
        super::play::play(clip.renderer.collect(), CLIP_RATE_HZ)
            .map_err(|error| Failure::Told(Exit::File, error.to_string()))?;
    }
    Ok(())
}
