//! `gaptone render`: a clip with known truth from a bench.

use super::args::RenderArguments;
use super::bench_file;
use super::clip::{Order, clip};
use super::exit::{Exit, Failure, say};
use super::files::{self, STANDARD_STREAM};
use crate::model::firings::Start;
use crate::model::truth::Truth;
use std::io::Write;

/// Runs the command.
///
/// # Errors
/// A bench that cannot be used, a place that cannot be written.
pub(super) fn run(arguments: &RenderArguments) -> Result<Exit, Failure> {
    let output = arguments.output.as_str();
    for place in
        [Some(output), arguments.truth.as_deref()].into_iter().flatten().filter(|name| *name != STANDARD_STREAM)
    {
        files::check_writable(place).map_err(|error| Failure::file(place, &error))?;
    }
    let mut bench = bench_file::load(&arguments.bench)?;
    let supply = arguments.supply.as_deref().map(|text| bench_file::supply(text, &bench)).transpose()?;
    bench.supply.voltage = supply.or(bench.supply.voltage);
    let clip = clip(
        &bench,
        &Order {
            supply,
            start: if arguments.switch_on { Start::SwitchedOn } else { Start::Running },
            duration_s: arguments.seconds,
            sample_rate_hz: arguments.sample_rate,
            seed: arguments.seed,
        },
    )?;
    let mut truth = clip.truth;
    truth.title = bench.title;
    truth.bench = files::read_text(&arguments.bench).ok();
    files::write_clip(output, clip.renderer, arguments.sample_rate, arguments.bits)
        .map_err(|error| Failure::file(output, &error))?;
    if let Some(place) = &arguments.truth {
        files::write_atomically(place, |out| {
            serde_json::to_writer_pretty(&mut *out, &truth)?;
            out.write_all(b"\n")
        })
        .map_err(|error| Failure::file(place, &error))?;
    }
    if output != STANDARD_STREAM {
        say(&summary(output, arguments.seconds, &truth))?;
    }
    Ok(Exit::Done)
}

fn summary(output: &str, duration_s: f64, truth: &Truth) -> String {
    let realised = truth.trains.first().map(|train| train.realised);
    let figures = realised.and_then(|realised| {
        Some(format!(
            ", {} firings, {:.3} a second, jitter {:.2} µs",
            realised.firings,
            realised.firing_rate_hz?,
            1e6 * realised.period_jitter_s?
        ))
    });
    format!("{output}: {duration_s} s{}\n", figures.unwrap_or_default())
}
