//! Log files: one line of JSON for each measurement.

use super::args::LogArguments;
use super::bench_file;
use super::exit::{Exit, Failure, tell};
use super::files::{self, FileError, STANDARD_STREAM};
use crate::bench::{Bench, Dimension, Quantity};
use crate::report::Measurement;
use crate::trend::entry::Known;
use crate::trend::{Entry, LOG_FAMILY, LOG_FORMAT, LoggedBench, Moment, Weather};
use serde::{Deserialize, Serialize};
use std::io::Read;
use std::time::{SystemTime, UNIX_EPOCH};

/// Name of the format of a mark.
const MARK_FORMAT: &str = "gaptone.mark/1";

/// A mark between the entries of a log.
#[derive(Serialize)]
struct Mark<'a> {
    format: &'static str,
    time: Moment,
    note: &'a str,
    #[serde(skip_serializing_if = "Option::is_none")]
    supply_v: Option<f64>,
}

/// Where measurements are logged, and what goes with them.
pub(super) struct Log {
    place: String,
    time: Option<Moment>,
    hour_meter_h: Option<f64>,
    bench: Option<LoggedBench>,
    air: Weather,
}

impl Log {
    /// Checks everything before any audio is read. None if no log is asked for.
    ///
    /// # Errors
    /// A place that cannot be written, weather that is none.
    pub fn new(
        arguments: &LogArguments,
        bench: Option<&Bench>,
        supply: Option<Quantity>,
    ) -> Result<Option<Self>, Failure> {
        let Some(place) = &arguments.log else { return Ok(None) };
        files::check_appendable(place).map_err(|error| Failure::file(place, &error))?;
        let logged = bench.map(|bench| LoggedBench {
            title: bench.title.clone(),
            supply_v: supply.or(bench.supply.voltage).map(|supply| supply.value),
            electrodes: bench.gap.electrodes,
            diameter_m: bench.gap.diameter.map(|diameter| diameter.value),
        });
        let air = weather(arguments, bench)?;
        Ok(Some(Self {
            place: place.clone(),
            time: arguments.at,
            hour_meter_h: arguments.hour_meter,
            bench: logged,
            air,
        }))
    }

    /// Appends a measurement.
    ///
    /// # Errors
    /// Exit status 1 if it cannot be written.
    pub fn append(&self, measurement: &Measurement) -> Result<(), Failure> {
        let reading = &measurement.reading;
        let stretches: f64 = reading.stretches.iter().map(|stretch| stretch.to_s - stretch.from_s).sum();
        let entry = Entry {
            format: LOG_FORMAT.to_owned(),
            time: self.time.unwrap_or_else(now),
            file: measurement.recording.file.clone(),
            verdict: reading.verdict,
            firings: reading.firings,
            firing_time_s: stretches,
            hour_meter_h: self.hour_meter_h,
            firing_rate_hz: reading.firing_rate_hz,
            period_jitter_s: reading.period_jitter_s,
            gap_voltage_v: measurement.gap_voltage_v,
            gap_voltage_spread_v: measurement.gap_voltage_spread_v,
            bench: self.bench.clone(),
            air: self.air,
        };
        self.append_entry(&entry)
    }

    /// Appends a mark: something that a person did at the bench, with the supply that is set from now on.
    ///
    /// # Errors
    /// Exit status 1 if it cannot be written.
    pub fn mark(&mut self, note: &str, supply_v: Option<f64>) -> Result<(), Failure> {
        if let (Some(bench), Some(_)) = (&mut self.bench, supply_v) {
            bench.supply_v = supply_v;
        }
        let time = self.time.unwrap_or_else(now);
        self.append_entry(&Mark { format: MARK_FORMAT, time, note, supply_v })
    }

    fn append_entry(&self, entry: &impl Serialize) -> Result<(), Failure> {
        let line = serde_json::to_string(entry)
            .map_err(|error| Failure::Told(Exit::File, format!("the log entry cannot be written as JSON: {error}")))?;
        if files::append_line(&self.place, &line).map_err(|error| Failure::file(&self.place, &error))? {
            let place = &self.place;
            tell(&format!(
                "{place}: its last line had been cut off by a run that was stopped while it wrote; all others are whole"
            ));
        }
        Ok(())
    }
}

/// The weather: of the options, else of the bench.
fn weather(arguments: &LogArguments, bench: Option<&Bench>) -> Result<Weather, Failure> {
    let known =
        |option: &str, text: &Option<String>, dimension: Dimension, stated: Option<Quantity>, range: (f64, f64)| {
            let quantity = match text {
                Some(text) => Some(bench_file::quantity(option, text, dimension)?),
                None => stated,
            };
            if let (Some(text), Some(quantity)) = (text, &quantity)
                && !(range.0..=range.1).contains(&quantity.value)
            {
                return Err(Failure::usage(format!("{option}: {text} is no weather; look at value and unit")));
            }
            Ok(quantity.map(|quantity| Known { value: quantity.value, u: quantity.u() }))
        };
    let air = bench.map(|bench| bench.air.clone()).unwrap_or_default();
    Ok(Weather {
        temperature_k: known(
            "--temperature",
            &arguments.temperature,
            Dimension::Temperature,
            air.temperature,
            (200.0, 350.0),
        )?,
        pressure_pa: known("--pressure", &arguments.pressure, Dimension::Pressure, air.pressure, (3e4, 2e5))?,
        humidity: known("--humidity", &arguments.humidity, Dimension::Fraction, air.humidity, (0.0, 1.0))?,
    })
}

/// The present moment, by the machine's clock.
pub(super) fn now() -> Moment {
    // A clock before 1970 is a clock that was not set.
    Moment(SystemTime::now().duration_since(UNIX_EPOCH).map_or(0, |since| since.as_secs() as i64))
}

/// What a log holds.
#[derive(Default)]
pub(super) struct Contents {
    /// Entries, in the order of the file.
    pub entries: Vec<Entry>,
    /// Lines that were left out, and why.
    pub notes: Vec<String>,
}

/// What every line of ours begins with.
const BEGINNING: &str = "{\"format\":\"gaptone.log/1\",";

/// Just enough of a line to tell what it is.
#[derive(Deserialize)]
struct Kind {
    format: String,
}

/// Why a line is no entry.
enum Fault {
    Newer(String),
    Foreign,
    Cut,
}

/// Reads a log.
///
/// # Errors
/// Exit status 1 if the file cannot be read, or if it holds no entry.
pub(super) fn read(name: &str) -> Result<Contents, Failure> {
    let failed = |error| Failure::file(name, &FileError::from_io("reading", error));
    let bytes = if name == STANDARD_STREAM {
        let mut bytes = Vec::new();
        std::io::stdin().lock().read_to_end(&mut bytes).map_err(failed)?;
        bytes
    } else {
        std::fs::read(name).map_err(failed)?
    };
    let contents = parse(&bytes);
    if contents.entries.is_empty() {
        let why = contents.notes.first().map_or("the file is empty".to_owned(), Clone::clone);
        let right = "a log as written by measure --log was expected";
        return Err(Failure::Told(Exit::File, format!("{name}: holds no entry ({why}); {right}")));
    }
    Ok(contents)
}

/// One piece of a log.
#[derive(Default)]
struct Piece {
    entries: Vec<Entry>,
    faults: Vec<(usize, Fault)>,
    lines: usize,
}

/// Reads the lines of a log, on all cores.
fn parse(bytes: &[u8]) -> Contents {
    let cores = std::thread::available_parallelism().map_or(1, usize::from);
    let pieces = pieces(bytes, cores);
    let read: Vec<Piece> = std::thread::scope(|scope| {
        let workers: Vec<_> = pieces.iter().map(|piece| scope.spawn(|| parse_piece(piece))).collect();
        workers.into_iter().map(|worker| worker.join().unwrap_or_default()).collect()
    });
    let mut entries = Vec::new();
    let mut faults = Vec::new();
    let mut before = 0;
    for piece in read {
        entries.extend(piece.entries);
        faults.extend(piece.faults.into_iter().map(|(line, fault)| (before + line, fault)));
        before += piece.lines;
    }
    Contents { entries, notes: notes(&faults) }
}

/// Pieces of about equal size that end with a line.
fn pieces(bytes: &[u8], count: usize) -> Vec<&[u8]> {
    let size = bytes.len() / count.max(1) + 1;
    let mut rest = bytes;
    let mut found = Vec::new();
    while rest.len() > size {
        let Some(end) = rest[size..].iter().position(|byte| *byte == b'\n') else { break };
        let (piece, later) = rest.split_at(size + end + 1);
        found.push(piece);
        rest = later;
    }
    found.push(rest);
    found
}

fn parse_piece(bytes: &[u8]) -> Piece {
    let mut piece = Piece::default();
    for line in bytes.split_inclusive(|byte| *byte == b'\n') {
        piece.lines += 1;
        let line = line.trim_ascii();
        if line.is_empty() {
            continue;
        }
        match serde_json::from_slice::<Entry>(line) {
            Ok(entry) if entry.format == LOG_FORMAT => piece.entries.push(entry),
            _ => piece.faults.extend(fault(line).map(|fault| (piece.lines, fault))),
        }
    }
    piece
}

/// Why a line is no entry; a mark is none, and right where it is.
fn fault(line: &[u8]) -> Option<Fault> {
    Some(match serde_json::from_slice::<Kind>(line) {
        Ok(kind) if kind.format == MARK_FORMAT => return None,
        Ok(kind) if kind.format.starts_with(LOG_FAMILY) && kind.format != LOG_FORMAT => Fault::Newer(kind.format),
        Ok(_) => Fault::Foreign,
        // A cut in the middle of a number is no end of the text to the parser.
        Err(error) if error.is_eof() || line.starts_with(BEGINNING.as_bytes()) => Fault::Cut,
        Err(_) => Fault::Foreign,
    })
}

/// One note for each kind of line that was left out.
fn notes(faults: &[(usize, Fault)]) -> Vec<String> {
    let lines = |which: &dyn Fn(&Fault) -> bool| -> Option<String> {
        let at: Vec<usize> = faults.iter().filter(|(_, fault)| which(fault)).map(|(line, _)| *line).collect();
        let first = at.first()?;
        Some(if at.len() == 1 {
            format!("line {first}")
        } else {
            format!("{} lines, the first is line {first},", at.len())
        })
    };
    let mut notes = Vec::new();
    if let Some(at) = lines(&|fault| matches!(fault, Fault::Newer(_))) {
        let format = faults
            .iter()
            .find_map(|(_, fault)| if let Fault::Newer(name) = fault { Some(name.as_str()) } else { None });
        let format: String = format.unwrap_or_default().chars().filter(|c| !c.is_control()).take(40).collect();
        notes.push(format!(
            "left out: {at} of a newer version ({format}); it stays in the log, a newer gaptone reads it"
        ));
    }
    if let Some(at) = lines(&|fault| matches!(fault, Fault::Cut)) {
        notes.push(format!("left out: {at} cut off by a run that was stopped while it wrote; nothing else is lost"));
    }
    if let Some(at) = lines(&|fault| matches!(fault, Fault::Foreign)) {
        notes.push(format!("left out: {at} that is no entry of a log ({LOG_FORMAT})"));
    }
    notes
}

#[cfg(test)]
mod tests {
    use super::*;

    fn line(number: usize) -> String {
        format!(
            r#"{{"format":"gaptone.log/1","time":"2026-01-01T00:00:{:02}Z","file":"{number}.wav","verdict":"steady","firings":{{"on_rhythm":10,"missed":0,"extra":0}},"firing_time_s":1.0,"firing_rate_hz":null,"period_jitter_s":null,"gap_voltage_v":null,"gap_voltage_spread_v":null}}"#,
            number % 60
        )
    }

    #[test]
    fn a_log_cut_at_any_byte_loses_at_most_its_last_line() {
        let text: String = (0..3).map(|k| line(k) + "\n").collect();
        let whole = text.len() - line(2).len() - 1;
        for end in whole..=text.len() {
            let contents = parse(&text.as_bytes()[..end]);
            let is_whole = end >= text.len() - 1;
            assert_eq!(contents.entries.len(), if is_whole { 3 } else { 2 }, "{end}");
            assert_eq!(contents.notes.len(), usize::from(!is_whole && end > whole), "{end}: {:?}", contents.notes);
            assert!(contents.notes.iter().all(|note| note.contains("line 3 cut off")), "{:?}", contents.notes);
            // The same after the next writer has closed the line.
            let closed = [&text.as_bytes()[..end], b"\n"].concat();
            assert_eq!(parse(&closed).notes, contents.notes, "{end}");
        }
    }

    #[test]
    fn lines_of_other_kinds_are_told_with_their_place() {
        let newer = line(1).replace("log/1", "log/2");
        let text = [line(0).as_str(), &newer, "", "no JSON at all", r#"{"format":"other"}"#, &line(5)].join("\n");
        let contents = parse(text.as_bytes());
        assert_eq!(contents.entries.len(), 2);
        assert_eq!(
            contents.notes,
            [
                "left out: line 2 of a newer version (gaptone.log/2); it stays in the log, a newer gaptone reads it",
                "left out: 2 lines, the first is line 4, that is no entry of a log (gaptone.log/1)"
            ]
        );
    }

    #[test]
    fn however_a_log_is_divided_every_line_is_read_once() {
        let text: String = (0..50).map(|k| line(k) + "\n").collect();
        for count in 1..60 {
            let pieces = pieces(text.as_bytes(), count);
            assert_eq!(pieces.concat(), text.as_bytes());
            let entries: usize = pieces.iter().map(|piece| parse_piece(piece).entries.len()).sum();
            assert_eq!(entries, 50);
        }
    }
}
