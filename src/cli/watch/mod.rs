//! `gaptone watch`: the gap while it runs.
//!
//! A thread reads the source; this one analyses, shows, writes down and looks after the keys.

#[cfg(feature = "sound-card")]
mod device;
mod feed;
mod journal;
mod recorder;
mod screen;
mod session;
#[cfg(feature = "live-view")]
mod view;

use super::args::WatchArguments;
use super::bench_file;
use super::exit::{Exit, Failure};
use super::files::{self, FileError, STANDARD_STREAM};
use super::log::Log;
use crate::audio::AudioError;
use crate::bench::Bench;
use crate::report::Recording;
use crate::voltage::VoltageMeter;
use crate::watch::limit::{Limits, Quality};
use crate::watch::{Options, Watch};
use feed::{Feed, Way};
use journal::Journal;
use session::Session;
use std::io::IsTerminal;

/// Held back while the clearest channel is found: of a recording, of what is heard now, s.
const LISTEN_S: (f64, f64) = (crate::audio::LISTEN_S, 1.0);
/// Limit of error of a sound card's clock (common practice: crystals of ± 50 ppm, age and temperature).
#[cfg(feature = "sound-card")]
const CARD_CLOCK: f64 = 1e-4;

/// Runs the command.
///
/// # Errors
/// Wrong usage, a bench that cannot be used, a source that cannot be opened.
pub(super) fn run(arguments: &WatchArguments) -> Result<Exit, Failure> {
    #[cfg(feature = "sound-card")]
    if arguments.list_devices {
        return device::list();
    }
    let bench = arguments.bench.as_deref().map(bench_file::load).transpose()?;
    let supply = match (&arguments.supply, &bench) {
        (Some(text), Some(bench)) => Some(bench_file::supply(text, bench)?),
        _ => None,
    };
    let limits = Limits::new(arguments.limits.clone()).map_err(Failure::usage)?;
    if limits.any_of(Quality::Voltage) && bench.is_none() {
        return Err(Failure::usage("a limit of the voltage needs --bench: without a bench there is no voltage"));
    }
    let told = |error| Failure::usage(format!("{}: {error}", arguments.bench.as_deref().unwrap_or_default()));
    let meter = bench.as_ref().map(|bench| VoltageMeter::new(bench, supply)).transpose().map_err(told)?;
    let log = Log::new(&arguments.log, bench.as_ref(), supply)?;
    let (feed, name, clock) = open(arguments)?;
    let recording = Recording {
        file: name,
        sample_rate_hz: feed.sample_rate_hz,
        channels: feed.channels,
        channel: arguments.channel.map_or("1".to_owned(), |channel| channel.to_string()),
        ..Recording::default()
    };
    let journal = Journal::new(arguments, log, recording.clone())?;
    let watch = Watch::new(feed.sample_rate_hz, Options { meter, clock, limits });
    let session = Session::new(arguments, watch, journal, recording);
    run_session(session, &feed, arguments, bench.as_ref())
}

#[cfg(feature = "live-view")]
fn run_session(
    session: Session,
    feed: &Feed,
    arguments: &WatchArguments,
    bench: Option<&Bench>,
) -> Result<Exit, Failure> {
    if !arguments.json && std::io::stdout().is_terminal() && std::io::stdin().is_terminal() {
        return view::run(session, feed, bench);
    }
    session.run_in_lines(feed, is_plain(arguments))
}

#[cfg(not(feature = "live-view"))]
fn run_session(session: Session, feed: &Feed, arguments: &WatchArguments, _: Option<&Bench>) -> Result<Exit, Failure> {
    session.run_in_lines(feed, is_plain(arguments))
}

/// A person reads along: text instead of JSON.
fn is_plain(arguments: &WatchArguments) -> bool {
    !arguments.json && std::io::stdout().is_terminal()
}

/// Opens what is to be watched: the audio, its name, and how right its sample clock is.
fn open(arguments: &WatchArguments) -> Result<(Feed, String, f64), Failure> {
    #[cfg(feature = "sound-card")]
    if let Some(name) = &arguments.device {
        let way = Way { channel: arguments.channel.unwrap_or_default(), pace: false, listen_s: LISTEN_S.1 };
        let feed = device::open(name, way)?;
        return Ok((feed, name.clone(), arguments.clock.unwrap_or(CARD_CLOCK)));
    }
    let Some(name) = arguments.input.as_deref() else {
        let without =
            "name a recording, or - for standard input; this build has no sound card (cargo feature sound-card)";
        return Err(Failure::usage(without));
    };
    let now = arguments.pace || name == STANDARD_STREAM;
    let way = Way {
        channel: arguments.channel.unwrap_or_default(),
        pace: arguments.pace,
        listen_s: if now { LISTEN_S.1 } else { LISTEN_S.0 },
    };
    let told = |error: AudioError| Failure::file(name, &FileError::Broken(error.to_string()));
    let failed = |error: FileError| Failure::file(name, &error);
    let feed = match arguments.raw {
        Some(format) => Feed::start(files::open_raw(name, format).map_err(failed)?, way).map_err(told)?,
        None => Feed::start(files::open(name).map_err(failed)?, way).map_err(told)?,
    };
    Ok((feed, name.to_owned(), arguments.clock.unwrap_or(0.0)))
}
