//! `gaptone calibrate`: recordings at several supply settings to time constant and gap voltage.

use super::args::CalibrateArguments;
use super::bench_file;
use super::exit::{Exit, Failure, say};
use super::files;
use super::listen::{Listener, Piece};
use super::page;
use super::progress::Progress;
use crate::bench::{self, Amendment, Bench, Dimension, Quantity, si};
use crate::calibrate::{Calibration, Known, Options, Setting, SizeMeter, SupplyLog, calibrate, ramp_settings};
use crate::estimate::Estimate;
use crate::firing::Event;
use crate::pictures;
use crate::report;
use std::io::Write;
use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};

/// Settings that must remain if a recording is refused.
const FEWEST: usize = 3;

/// Runs the command.
///
/// # Errors
/// Wrong usage, files that cannot be read, settings that determine nothing.
pub(super) fn run(arguments: &CalibrateArguments) -> Result<Exit, Failure> {
    let bench = arguments.bench.as_deref().map(bench_file::load).transpose()?.unwrap_or_default();
    for place in arguments.write_bench.as_deref().into_iter().chain(arguments.page.places()) {
        files::check_writable(place).map_err(|error| Failure::file(place, &error))?;
    }
    let listener = Listener { channel: arguments.channel.unwrap_or_default(), ..Listener::default() };
    let settings = match &arguments.supply_log {
        Some(log) => ramp(arguments, log, &listener)?,
        None => settings(arguments, &listener)?,
    };
    refused(&settings)?;
    let options = Options { residual: arguments.residual };
    let calibration = calibrate(&settings, &Known::from_bench(&bench), options)
        .map_err(|error| Failure::Told(Exit::NotMeasurable, format!("no calibration: {error}")))?;
    if let Some(place) = &arguments.write_bench {
        write_bench(place, arguments.bench.as_deref(), &calibration)?;
    }
    page::put(
        &arguments.page,
        || {
            let kept = arguments.bench.as_deref().map(page::kept_text).transpose()?;
            page::written(crate::page::calibration(&calibration, kept.as_ref()))
        },
        || pictures::calibration(&calibration),
    )?;
    if arguments.json {
        let text = serde_json::to_string_pretty(&calibration)
            .map_err(|error| Failure::Told(Exit::File, format!("the result cannot be written as JSON: {error}")))?;
        say(&(text + "\n"))?;
    } else {
        say(&report::calibration_text(&calibration, stated_time_constant(&bench)))?;
    }
    Ok(Exit::Done)
}

/// Writes the bench with the result in it; without a bench, a new one.
fn write_bench(place: &str, bench: Option<&str>, calibration: &Calibration) -> Result<(), Failure> {
    let text = match bench {
        Some(name) => files::read_text(name).map_err(|error| Failure::file(name, &error))?,
        None => String::new(),
    };
    let value = |estimate: Estimate, unit| format!("{} (u {})", si(estimate.value, unit, 6), si(estimate.u, unit, 3));
    let change = |section, key, text, replaces| Amendment { section, key, text, replaces };
    let tau = value(calibration.time_constant_s, "s");
    let mut changes = vec![
        change("charging", "time_constant", tau, &["resistance", "current"][..]),
        change("gap", "voltage", value(calibration.gap_voltage_v, "V"), &[]),
    ];
    if let Some(residual) = calibration.residual_voltage_v {
        changes.push(change("gap", "residual_voltage", value(residual, "V"), &[]));
    }
    let text = bench::amended(&text, bench.unwrap_or(place), &changes).map_err(Failure::usage)?;
    files::write_atomically(place, |out| out.write_all(text.as_bytes())).map_err(|error| Failure::file(place, &error))
}

/// Time constant that the bench states, by itself or by its parts, s.
fn stated_time_constant(bench: &Bench) -> Option<f64> {
    let charging = &bench.charging;
    let parts = || Some(charging.resistance?.value * charging.capacitance?.value);
    charging.time_constant.map(|quantity| quantity.value).or_else(parts)
}

/// A recording and its supply setting: `run.wav@9.2 kV ± 0.3 %` is split at the last `@`.
fn named(text: &str) -> Result<(&str, Quantity), Failure> {
    let Some((name, supply)) = text.rsplit_once('@').filter(|(name, _)| !name.is_empty()) else {
        return Err(Failure::usage(format!("{text}: write the supply setting behind an @, such as {text}@9.2kV")));
    };
    let supply = bench_file::quantity(text, supply, Dimension::Voltage)?;
    if supply.value <= 0.0 {
        return Err(Failure::usage(format!("{text}: the supply voltage must be above 0 V; leave its sign out")));
    }
    Ok((name, supply))
}

/// The settings of recordings at fixed supplies, read in parallel.
fn settings(arguments: &CalibrateArguments, listener: &Listener) -> Result<Vec<Setting>, Failure> {
    let jobs: Vec<(&str, Quantity)> = arguments.recordings.iter().map(|text| named(text)).collect::<Result<_, _>>()?;
    let progress = Progress::new(jobs.len());
    let (next, results) = (AtomicUsize::new(0), Mutex::new(Vec::new()));
    let cores = std::thread::available_parallelism().map_or(1, usize::from);
    std::thread::scope(|scope| {
        for _ in 0..cores.min(jobs.len()) {
            scope.spawn(|| {
                while let Some((name, supply)) = jobs.get(next.fetch_add(1, Ordering::Relaxed)) {
                    let result = one(name, *supply, listener, &progress);
                    progress.done();
                    if let Ok(mut results) = results.lock() {
                        results.push((*name, supply.value, result));
                    }
                }
            });
        }
    });
    progress.clear();
    let mut results = results.into_inner().unwrap_or_default();
    // As given: a file may stand at two supplies only by mistake, which the fit then finds.
    let place = |name: &str, supply_v: f64| jobs.iter().position(|job| job.0 == name && job.1.value == supply_v);
    results.sort_by_key(|(name, supply_v, _)| place(name, *supply_v));
    results.into_iter().map(|(_, _, result)| result).collect()
}

fn one(name: &str, supply: Quantity, listener: &Listener, progress: &Progress) -> Result<Setting, Failure> {
    let mut sizes = SizeMeter::default();
    let heard = listener.listen(name, progress, &mut |piece| {
        if let Piece::Event(event) = piece {
            sizes.push(&event);
        }
        Ok(())
    })?;
    Ok(Setting::of_reading(name, supply, &heard.reading, sizes.trend(&heard.reading)))
}

/// The settings that a ramp of the supply stands for.
fn ramp(arguments: &CalibrateArguments, log: &str, listener: &Listener) -> Result<Vec<Setting>, Failure> {
    let [name] = arguments.recordings.as_slice() else {
        return Err(Failure::usage("--supply-log belongs to one recording; name a single one, without @ and supply"));
    };
    let text = files::read_text(log).map_err(|error| Failure::file(log, &error))?;
    let log_of_supply = SupplyLog::parse(&text).map_err(|error| Failure::usage(format!("{log}: {error}")))?;
    let progress = Progress::new(1);
    let mut events: Vec<Event> = Vec::new();
    let heard = listener.listen(name, &progress, &mut |piece| {
        if let Piece::Event(event) = piece {
            events.push(event);
        }
        Ok(())
    })?;
    progress.clear();
    let settings = ramp_settings(name, &events, &log_of_supply);
    if settings.len() < FEWEST {
        let message = format!(
            "{name}: {} stretches of the log hold firings enough, {FEWEST} are needed ({})",
            settings.len(),
            heard.reading.reason
        );
        return Err(Failure::Told(Exit::NotMeasurable, message));
    }
    Ok(settings)
}

/// Ends if recordings were refused and too few remain.
fn refused(settings: &[Setting]) -> Result<(), Failure> {
    let out: Vec<String> = settings
        .iter()
        .filter_map(|setting| setting.left_out.as_ref().map(|reason| format!("{}: {reason}", setting.name)))
        .collect();
    if out.is_empty() || settings.len() - out.len() >= FEWEST {
        return Ok(());
    }
    let message = format!(
        "no calibration: {} of {} recordings remain, and {FEWEST} are needed when others are refused ({})",
        settings.len() - out.len(),
        settings.len(),
        out.join("; ")
    );
    Err(Failure::Told(Exit::NotMeasurable, message))
}
