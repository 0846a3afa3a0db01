//! `gaptone trend`: what the history of a gap says.

use super::args::TrendArguments;
use super::exit::{Exit, Failure, say};
use super::{files, log, page};
use crate::bench::{self, Dimension};
use crate::trend::{Charted, Options, Trend, analyse};
use crate::{pictures, report};

/// Entries on a page or a picture, about: more make no difference to the eye, and a page must stay small enough to be mailed.
const MOST_SHOWN: usize = 2000;

/// Runs the command.
///
/// # Errors
/// A log that cannot be read or holds no entry; limits that are none.
pub(super) fn run(arguments: &TrendArguments) -> Result<Exit, Failure> {
    for place in arguments.page.places() {
        files::check_writable(place).map_err(|error| Failure::file(place, &error))?;
    }
    let charted = arguments.chart.map(Charted::from);
    let limits =
        arguments.limits.as_deref().map(|text| limits(text, charted.unwrap_or(Charted::GapVoltage))).transpose()?;
    let options = Options {
        charted,
        title: arguments.title.clone(),
        since: arguments.since,
        reference: arguments.reference.map(usize::from),
        limits,
    };
    let mut contents = log::read(&arguments.log)?;
    let mut trend = analyse(&contents.entries, &options);
    if trend.points.is_empty() {
        let why = trend.notes.first().map_or("none is left by --title and --since".to_owned(), Clone::clone);
        return Err(Failure::usage(format!("{}: no entry can be charted ({why})", arguments.log)));
    }
    contents.notes.append(&mut trend.notes);
    trend.notes = contents.notes;
    let shown = trend.shortened(MOST_SHOWN);
    page::put(
        &arguments.page,
        || page::written(crate::page::trend(&arguments.log, &shown)),
        || pictures::trend(&shown),
    )?;
    say(&put(arguments, &trend)?)?;
    Ok(Exit::Done)
}

fn put(arguments: &TrendArguments, trend: &Trend) -> Result<String, Failure> {
    let cannot = |what: &str, error: String| {
        Failure::Told(Exit::File, format!("the trend cannot be written as {what}: {error}"))
    };
    if arguments.json {
        let text = serde_json::to_string_pretty(trend).map_err(|error| cannot("JSON", error.to_string()))?;
        return Ok(text + "\n");
    }
    if arguments.csv {
        let mut bytes = Vec::new();
        report::write_trend_csv(&mut bytes, trend).map_err(|error| cannot("CSV", error.to_string()))?;
        return String::from_utf8(bytes).map_err(|error| cannot("CSV", error.to_string()));
    }
    Ok(report::trend_text(&arguments.log, trend))
}

/// Stated limits in the unit of what is charted.
fn limits(text: &str, charted: Charted) -> Result<(f64, f64), Failure> {
    let dimension = match charted {
        Charted::GapVoltage => Dimension::Voltage,
        Charted::FiringRate => Dimension::Frequency,
        Charted::Jitter | Charted::Missed => Dimension::Fraction,
    };
    let (low, high) =
        bench::parse_range(text, dimension).map_err(|error| Failure::usage(format!("--limits: {error}")))?;
    Ok((low.value, high.value))
}
