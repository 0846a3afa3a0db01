//! `gaptone predict`: what a bench will do, before power.

use super::args::PredictArguments;
use super::bench_file;
use super::clip::{Order, clip};
use super::exit::{Exit, Failure, say};
use super::files;
use super::page;
use super::render::facts;
use crate::bench::{self, Bench, Dimension, Quantity};
use crate::model::finish::{FinishSettings, Finished};
use crate::model::firings::Start;
use crate::pictures;
use crate::predict::{self, Prediction, Sweep, Target, parse_target, predict, sweep, target};
use serde::Serialize;

/// Sample rate of a clip to listen to, Hz.
const CLIP_RATE_HZ: u32 = 48_000;

/// Settings of the drawing around one setting.
const PLOT_SETTINGS: usize = 121;

/// What is asked.
enum Question {
    /// One setting, V; that of the bench if absent.
    Setting(Option<f64>),
    /// A range of settings, V.
    Range(f64, f64),
    /// The setting that gives a rate.
    Target(Target),
}

/// Runs the command.
///
/// # Errors
/// Wrong usage, a bench that cannot be used, a place for clip or drawing that cannot be written.
pub(super) fn run(arguments: &PredictArguments) -> Result<Exit, Failure> {
    for place in arguments.clip.as_deref().into_iter().chain(arguments.page.places()) {
        files::check_writable(place).map_err(|error| Failure::file(place, &error))?;
    }
    let mut bench = bench_file::load(&arguments.bench)?;
    match question(arguments, &mut bench)? {
        Question::Range(low_v, high_v) => {
            let count = usize::from(arguments.settings);
            let table = sweep(&bench, low_v, high_v, count).map_err(Failure::usage)?;
            put_out(arguments.json, &table, || predict::sweep_text(&table))?;
            draw(arguments, &bench, (low_v, high_v), None, Some(&table))?;
        }
        Question::Setting(supply_v) => one(arguments, &bench, supply_v, None)?,
        Question::Target(target) => one(arguments, &bench, Some(target.supply_v.value), Some(target))?,
    }
    Ok(Exit::Done)
}

/// One setting: figures, drawing, sound.
fn one(
    arguments: &PredictArguments,
    bench: &Bench,
    supply_v: Option<f64>,
    target: Option<Target>,
) -> Result<(), Failure> {
    let mut prediction = predict(bench, supply_v).map_err(Failure::usage)?;
    prediction.target = target;
    put_out(arguments.json, &prediction, || predict::text(&prediction))?;
    if arguments.page.places().next().is_some() {
        let Some(centre_v) = prediction.supply_v else {
            return Err(Failure::usage("--plot and --report need supply.voltage in the bench, or --supply"));
        };
        let low_v = prediction.least_supply_v.map_or(0.5 * centre_v, |least_v| 0.9 * least_v.min(centre_v));
        draw(arguments, bench, (low_v, 2.0 * centre_v), Some(&prediction), None)?;
    }
    listen(arguments, bench, supply_v)
}

/// Draws a range of settings and writes the page, as asked.
fn draw(
    arguments: &PredictArguments,
    bench: &Bench,
    (low_v, high_v): (f64, f64),
    present: Option<&Prediction>,
    table: Option<&Sweep>,
) -> Result<(), Failure> {
    if arguments.page.places().next().is_none() {
        return Ok(());
    }
    let count = PLOT_SETTINGS.max(usize::from(arguments.settings));
    let fine = sweep(bench, low_v, high_v, count).map_err(Failure::usage)?;
    page::put(
        &arguments.page,
        || {
            let kept = page::kept_text(&arguments.bench)?;
            page::written(crate::page::prediction(present, table, Some(&fine), &kept))
        },
        || pictures::prediction(&fine, present),
    )
}

fn question(arguments: &PredictArguments, bench: &mut Bench) -> Result<Question, Failure> {
    if let Some(text) = &arguments.target {
        let rate_hz = parse_target(text).map_err(|error| Failure::usage(format!("--target: {error}")))?;
        return target(bench, rate_hz).map(Question::Target).map_err(Failure::usage);
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
        Some(text) => {
            // With the tolerance that the setting has of its own, if it has one.
            bench.supply.voltage = Some(bench_file::supply(text, bench)?);
            Ok(Question::Setting(None))
        }
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

/// Writes the clip, at the usual loudness and with what it is in its tags, and plays it, as asked.
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
    let mut clip = clip(bench, &order)?;
    clip.truth.title.clone_from(&bench.title);
    let (finished, truth) = Finished::new(clip, FinishSettings::default()).map_err(Failure::usage)?;
    if let Some(place) = &arguments.clip {
        files::write_frames(place, finished.clone(), &facts(&finished, &truth))
            .map_err(|error| Failure::file(place, &error))?;
    }
    #[cfg(feature = "sound-card")]
    if arguments.play {
        super::play::play(finished.collect(), CLIP_RATE_HZ)
            .map_err(|error| Failure::Told(Exit::File, error.to_string()))?;
    }
    Ok(())
}
