//! `gaptone render`: a clip with known truth from a bench, or a series of them.

use super::args::RenderArguments;
use super::bench_file;
use super::clip::{Order, clip};
use super::exit::{Exit, Failure, say};
use super::files::{self, ClipFacts, STANDARD_STREAM};
use super::render_series;
use crate::audio::Source;
use crate::model::finish::{FinishSettings, FinishTruth, Finished, Layout, LevelSetBy};
use crate::model::firings::Start;
use crate::model::receiver::{Programme, Sound};
use crate::model::truth::Truth;
use std::io::Write;

/// Depth of modulation with a sound from the command line.
const UNDER_DEPTH: f64 = 0.8;
/// Longest stretch of a sound that is put on a carrier, s; longer ones are repeated from there.
const LONGEST_SOUND_S: f64 = 600.0;

/// Runs the command.
///
/// # Errors
/// A bench that cannot be used, a place that cannot be written.
pub(super) fn run(arguments: &RenderArguments) -> Result<Exit, Failure> {
    match (&arguments.series, &arguments.bench) {
        (Some(series), _) => render_series::run(series, &arguments.output, arguments.seed),
        (None, Some(bench)) => run_bench(bench, arguments),
        (None, None) => Err(Failure::usage("render needs --bench or --series")),
    }
}

fn run_bench(bench_name: &str, arguments: &RenderArguments) -> Result<Exit, Failure> {
    let output = arguments.output.as_str();
    for place in
        [Some(output), arguments.truth.as_deref()].into_iter().flatten().filter(|name| *name != STANDARD_STREAM)
    {
        files::check_writable(place).map_err(|error| Failure::file(place, &error))?;
    }
    let mut bench = bench_file::load(bench_name)?;
    let supply = arguments.supply.as_deref().map(|text| bench_file::supply(text, &bench)).transpose()?;
    bench.supply.voltage = supply.or(bench.supply.voltage);
    let order = Order {
        supply,
        start: if arguments.switch_on { Start::SwitchedOn } else { Start::Running },
        duration_s: arguments.seconds,
        sample_rate_hz: arguments.sample_rate,
        seed: arguments.seed.unwrap_or(1),
        programme: arguments.under.as_deref().map(|name| programme(name, UNDER_DEPTH)).transpose()?,
    };
    let mut clip = clip(&bench, &order)?;
    clip.truth.title = bench.title;
    clip.truth.bench = files::read_text(bench_name).ok();
    let finish = FinishSettings {
        loudness_lufs: arguments.loudness,
        fade_s: arguments.fade,
        layout: if arguments.marker { Layout::Marker } else { Layout::Mono },
        ..FinishSettings::default()
    };
    #[cfg(feature = "sound-card")]
    let aloud: Option<Vec<f32>> = arguments.play.then(|| clip.renderer.clone().collect());
    let (finished, truth) = Finished::new(clip, finish).map_err(Failure::usage)?;
    let facts = ClipFacts { format: arguments.bits, ..facts(&finished, &truth) };
    files::write_frames(output, finished, &facts).map_err(|error| Failure::file(output, &error))?;
    if let Some(place) = &arguments.truth {
        write_truth(place, &truth)?;
    }
    if output != STANDARD_STREAM {
        say(&summary(output, &truth))?;
    }
    #[cfg(feature = "sound-card")]
    if let Some(samples) = aloud {
        super::play::play(samples, truth.settings.sample_rate_hz)
            .map_err(|error| Failure::Told(Exit::File, error.to_string()))?;
    }
    Ok(Exit::Done)
}

/// What stands beside the samples of a finished clip: that it is synthetic, and how to make it again.
pub(super) fn facts(finished: &Finished, truth: &Truth) -> ClipFacts {
    ClipFacts {
        channels: finished.channels(),
        sample_rate_hz: truth.settings.sample_rate_hz,
        title: truth.title.clone(),
        comment: Some(format!("Synthetic: rendered from a description, nothing was recorded. Seed {}.", truth.seed)),
        ..ClipFacts::default()
    }
}

/// Writes a truth file.
pub(super) fn write_truth(place: &str, truth: &Truth) -> Result<(), Failure> {
    files::write_atomically(place, |out| {
        serde_json::to_writer_pretty(&mut *out, truth)?;
        out.write_all(b"\n")
    })
    .map_err(|error| Failure::file(place, &error))
}

/// The programme that a recording makes on a carrier: its first channel.
pub(super) fn programme(name: &str, depth: f64) -> Result<Programme, Failure> {
    let mut recording = files::open(name).map_err(|error| Failure::file(name, &error))?;
    let (rate_hz, channels) = (recording.sample_rate_hz(), usize::from(recording.channels().max(1)));
    let longest = (LONGEST_SOUND_S * f64::from(rate_hz)) as usize;
    let (mut samples, mut block) = (Vec::new(), Vec::new());
    while samples.len() < longest {
        let read = recording.next(&mut block).map_err(|error| Failure::Told(Exit::File, format!("{name}: {error}")))?;
        if read.is_none() {
            break;
        }
        samples.extend(block.iter().step_by(channels).map(|x| if x.is_finite() { *x } else { 0.0 }));
    }
    let sound = Sound { samples: samples.into(), sample_rate_hz: f64::from(rate_hz) };
    Ok(Programme::Sound { depth, sound: Some(sound) })
}

/// A line about a clip.
pub(super) fn summary(output: &str, truth: &Truth) -> String {
    let realised = truth.trains.first().map(|train| train.realised);
    let figures = realised.and_then(|realised| {
        Some(format!(
            ", {} firings, {:.3} a second, jitter {:.2} µs",
            realised.firings,
            realised.firing_rate_hz?,
            1e6 * realised.period_jitter_s?
        ))
    });
    let level = truth.finish.as_ref().map(level).unwrap_or_default();
    format!("{output}: {} s{}{level}\n", truth.settings.duration_s, figures.unwrap_or_default())
}

/// What the loudness came to, where one was aimed at.
fn level(finish: &FinishTruth) -> String {
    let lufs = finish.loudness_lufs.map_or("too short for a loudness".to_owned(), |lufs| format!("{lufs:.1} LUFS"));
    match finish.level_set_by {
        LevelSetBy::Recorder => String::new(),
        LevelSetBy::Loudness => format!(", {lufs}"),
        LevelSetBy::TruePeak => {
            format!(", {lufs}: the true peak of {} dBTP stands in the way of more", finish.settings.true_peak_dbtp)
        }
    }
}
