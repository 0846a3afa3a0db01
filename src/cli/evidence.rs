//! `gaptone measure --report`, `--plot` and `--from-report`: the evidence of measurements to its files, and back.

use super::args::MeasureArguments;
use super::exit::{Exit, Failure, say};
use super::files::{self, FileError, STANDARD_STREAM};
use super::{bench_file, log, page};
use crate::bench::Bench;
use crate::evidence::Evidence;
use crate::page::{KeptRecording, MeasurementReport, REPORT_FORMAT, Sound, extract};
use crate::pictures::{self, Measured};
use crate::plot::Medium;
use crate::report::{self, Measurement, Report};
use crate::rhythm::Verdict;

/// Kind of picture that is drawn where none is named.
const USUAL_KIND: &str = "periods";
/// Longest recording that is put into a page, bytes: a browser must hold it, written in a third more.
const LONGEST_SOUND: u64 = 64 << 20;
/// Longest page that is read back, bytes.
const LONGEST_PAGE: u64 = 1 << 30;

/// What is to be written of the evidence.
pub(super) struct Order {
    report: Option<String>,
    /// Kinds with their places.
    plots: Vec<(String, String)>,
    with_audio: bool,
    bench: Option<Bench>,
    kept: MeasurementReport,
}

impl Order {
    /// The order of the command line; none if no evidence is wanted. Everything that can be wrong shows here.
    pub fn new(arguments: &MeasureArguments) -> Result<Option<Self>, Failure> {
        let wanted = &arguments.evidence;
        if wanted.report.is_none() && wanted.plot.is_empty() {
            return Ok(None);
        }
        if !wanted.plot.is_empty() && arguments.recordings.len() > 1 {
            return Err(Failure::usage("--plot draws the evidence of one recording; name a single one"));
        }
        let plots = wanted.plot.iter().map(|text| plot(text)).collect::<Result<Vec<_>, _>>()?;
        let places = wanted.report.iter().chain(plots.iter().map(|(_, place)| place));
        for place in places {
            files::check_writable(place).map_err(|error| Failure::file(place, &error))?;
        }
        if wanted.with_audio {
            arguments.recordings.iter().try_for_each(|name| check_sound(name))?;
        }
        let options = [
            ("supply", arguments.supply.clone()),
            ("channel", arguments.channel.as_ref().map(ToString::to_string)),
            ("from", arguments.from.map(|s| format!("{s} s"))),
            ("to", arguments.to.map(|s| format!("{s} s"))),
        ];
        let options = options.into_iter().filter_map(|(name, value)| Some((name.to_owned(), value?))).collect();
        Ok(Some(Self {
            report: wanted.report.clone(),
            plots,
            with_audio: wanted.with_audio,
            bench: arguments.bench.as_deref().map(bench_file::load).transpose()?,
            kept: MeasurementReport {
                format: REPORT_FORMAT.to_owned(),
                program: format!("gaptone {}", env!("CARGO_PKG_VERSION")),
                made: log::now().to_string(),
                bench: arguments.bench.as_deref().map(page::kept_text).transpose()?,
                options,
                recordings: Vec::new(),
            },
        }))
    }

    /// Takes a measured recording.
    pub fn add(&mut self, measurement: Measurement, evidence: Evidence) {
        let file = measurement.recording.file.clone();
        let recording = KeptRecording { file, error: None, measurement: Some(measurement), evidence: Some(evidence) };
        self.kept.recordings.push(recording);
    }

    /// Takes a recording that could not be read.
    pub fn add_failure(&mut self, file: &str, error: &str) {
        let error = Some(error.to_owned());
        self.kept.recordings.push(KeptRecording { file: file.to_owned(), error, measurement: None, evidence: None });
    }

    /// Writes page and pictures.
    pub fn finish(self) -> Result<(), Failure> {
        if let Some(place) = &self.report {
            let sounds = if self.with_audio {
                self.kept.recordings.iter().map(|recording| sound(&recording.file)).collect()
            } else {
                Vec::new()
            };
            page::write(place, &page::written(crate::page::measurement(&self.kept, &sounds))?)?;
        }
        for (kind, place) in &self.plots {
            let Some((measurement, evidence)) =
                self.kept.recordings.first().and_then(|kept| kept.measurement.as_ref().zip(kept.evidence.as_ref()))
            else {
                continue;
            };
            let measured = Measured { measurement, evidence, bench: self.bench.as_ref() };
            let picture = pictures::of_kind(kind, measured).ok_or_else(|| {
                let why = &measurement.reading.reason;
                Failure::Told(Exit::NotMeasurable, format!("{place}: there is nothing to draw of the {kind} ({why})"))
            })?;
            page::write(place, &picture.svg(Medium::File))?;
        }
        Ok(())
    }
}

/// A kind and a place: `KIND=FILE`, or a file alone.
fn plot(text: &str) -> Result<(String, String), Failure> {
    let Some((kind, place)) = text.split_once('=') else { return Ok((USUAL_KIND.to_owned(), text.to_owned())) };
    if pictures::KINDS.contains(&kind) && !place.is_empty() {
        return Ok((kind.to_owned(), place.to_owned()));
    }
    Err(Failure::usage(format!(
        "--plot {text}: {kind} is no kind of picture; write one of {} before the =, and a file behind it",
        pictures::KINDS.join(", ")
    )))
}

fn check_sound(name: &str) -> Result<(), Failure> {
    if name == STANDARD_STREAM {
        return Err(Failure::usage(
            "--with-audio needs recordings in files; standard input is gone once it is measured",
        ));
    }
    // A file that is not there is told when it is measured.
    let bytes = std::fs::metadata(name).map_or(0, |facts| facts.len());
    if bytes > LONGEST_SOUND {
        let limit = LONGEST_SOUND >> 20;
        return Err(Failure::usage(format!("{name}: is too large for --with-audio; up to {limit} MiB go into a page")));
    }
    Ok(())
}

/// The bytes of a recording; none if it could not be read, which is told elsewhere.
fn sound(name: &str) -> Option<Sound> {
    let bytes = std::fs::read(name).ok()?;
    let at = |offset: usize, mark: &[u8]| bytes.get(offset..offset + mark.len()) == Some(mark);
    let media_type = if at(0, b"RIFF") {
        "audio/wav"
    } else if at(0, b"fLaC") {
        "audio/flac"
    } else if at(0, b"OggS") {
        "audio/ogg"
    } else if at(4, b"ftyp") {
        "audio/mp4"
    } else if at(0, b"FORM") {
        "audio/aiff"
    } else if at(0, b"caff") {
        "audio/x-caf"
    } else {
        "audio/mpeg"
    };
    Some(Sound { media_type, bytes })
}

/// Puts the figures of a page out again, and draws them anew if asked.
pub(super) fn from_page(name: &str, arguments: &MeasureArguments) -> Result<Exit, Failure> {
    let kept =
        extract(&read_page(name)?).map_err(|error| Failure::file(name, &FileError::Broken(error.to_string())))?;
    let figures = |recording: &KeptRecording| match &recording.measurement {
        // The budget was not asked for where the figures alone are put out.
        Some(measurement) => Report::Measured(Box::new(Measurement { budget: Vec::new(), ..measurement.clone() })),
        None => {
            Report::Failed(report::Failure::new(&recording.file, recording.error.as_deref().unwrap_or("was not read")))
        }
    };
    let reports: Vec<Report> = kept.recordings.iter().map(figures).collect();
    if arguments.json {
        let text = report::to_json(&reports).map_err(|error| Failure::Told(Exit::File, error.to_string()))?;
        say(&(text + "\n"))?;
    } else {
        let texts: Vec<String> = reports.iter().map(text_of).collect();
        say(&texts.join("\n"))?;
    }
    let verdicts: Vec<Option<Verdict>> =
        kept.recordings.iter().map(|one| one.measurement.as_ref().map(|m| m.reading.verdict)).collect();
    if let Some(order) = Order::new(arguments)? {
        if !order.plots.is_empty() && kept.recordings.len() > 1 {
            return Err(Failure::usage("--plot draws the evidence of one recording; this page holds several"));
        }
        let bench = kept.bench.as_ref().and_then(|text| crate::bench::parse(&text.text, &text.file).ok());
        Order { bench, kept, ..order }.finish()?;
    }
    Ok(if verdicts.contains(&None) {
        Exit::File
    } else if verdicts.contains(&Some(Verdict::None)) {
        Exit::NotMeasurable
    } else {
        Exit::Done
    })
}

fn text_of(report: &Report) -> String {
    match report {
        Report::Measured(measurement) => report::measurement_text(measurement),
        Report::Compared(both) => report::measurement_text(&both.measurement),
        Report::Failed(failure) => format!("{failure}\n"),
    }
}

fn read_page(name: &str) -> Result<String, Failure> {
    let failed = |error| Failure::file(name, &FileError::from_io("reading", error));
    let facts = std::fs::metadata(name).map_err(failed)?;
    if facts.is_dir() {
        return Err(Failure::file(name, &FileError::Directory));
    }
    let no_page = |why: &str| {
        Failure::file(name, &FileError::Broken(format!("{why}; a page written by measure --report was expected")))
    };
    if facts.len() > LONGEST_PAGE {
        return Err(no_page("is too large"));
    }
    String::from_utf8(std::fs::read(name).map_err(failed)?).map_err(|_| no_page("is no text in UTF-8"))
}
