//! `gaptone measure`: recordings to figures.
//!
//! Recordings are analysed in parallel, one per core at a time, so that memory is bounded by the cores; results come
//! out in the order of the arguments. A recording that cannot be read does not stop the others.

use super::args::MeasureArguments;
use super::exit::{Exit, Failure, say, tell};
use super::files::{self, FileError, STANDARD_STREAM};
use super::progress::Progress;
use crate::audio::{ChannelChoice, Heard, Intake, Span};
use crate::measure::{Measurer, Options, Outcome};
use crate::report::{self, Measurement, Recording, Report};
use crate::rhythm::Verdict;
use std::collections::BTreeMap;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::mpsc;

/// Runs the command.
///
/// # Errors
/// Wrong usage, a bench that cannot be used, a place for events that cannot be written.
pub(super) fn run(arguments: &MeasureArguments) -> Result<Exit, Failure> {
    let task = Task::new(arguments)?;
    let mut results = Results { json: arguments.json, ..Results::default() };
    let recordings = &arguments.recordings;
    let progress = Progress::new(recordings.len());
    let next = AtomicUsize::new(0);
    let cores = std::thread::available_parallelism().map_or(1, usize::from);
    let (sender, receiver) = mpsc::channel();
    std::thread::scope(|scope| {
        for _ in 0..cores.min(recordings.len()) {
            let (sender, next, task, progress) = (sender.clone(), &next, &task, &progress);
            scope.spawn(move || {
                loop {
                    let index = next.fetch_add(1, Ordering::Relaxed);
                    let Some(name) = recordings.get(index) else { return };
                    let result = task.measure(name, progress);
                    progress.done();
                    if sender.send((index, result)).is_err() {
                        return;
                    }
                }
            });
        }
        drop(sender);
        let ended = results.take_in_order(receiver, recordings, &progress);
        // Nobody reads on: the workers stop after the recording they are at.
        next.store(recordings.len(), Ordering::Relaxed);
        ended
    })?;
    results.finish()
}

/// One analysed recording.
struct Analysed {
    measurement: Measurement,
    explanation: Vec<String>,
}

/// What is to be done with each recording.
struct Task<'a> {
    channel: ChannelChoice,
    span: Span,
    events: Option<&'a str>,
    explain: bool,
}

impl<'a> Task<'a> {
    /// Checks everything that can be checked before any audio is read.
    fn new(arguments: &'a MeasureArguments) -> Result<Self, Failure> {
        let recordings = &arguments.recordings;
        let span = Span { from_s: arguments.from.unwrap_or(0.0), to_s: arguments.to };
        if span.to_s.is_some_and(|to_s| to_s <= span.from_s) {
            let message =
                format!("--to {} s lies before --from {} s; it must be later", span.to_s.unwrap_or(0.0), span.from_s);
            return Err(Failure::usage(message));
        }
        if recordings.iter().filter(|name| *name == STANDARD_STREAM).count() > 1 {
            return Err(Failure::usage("- is named more than once; standard input can be read only once"));
        }
        let events = arguments.events.as_deref();
        if let Some(place) = events {
            if recordings.len() > 1 {
                return Err(Failure::usage("--events takes the clicks of one recording; name a single one"));
            }
            files::check_writable(place).map_err(|error| Failure::file(place, &error))?;
        }
        Ok(Self { channel: arguments.channel.unwrap_or_default(), span, events, explain: arguments.explain })
    }

    fn measure(&self, name: &str, progress: &Progress) -> Result<Analysed, Failure> {
        let recording = files::open(name).map_err(|error| Failure::file(name, &error))?;
        let told = |error: crate::audio::AudioError| Failure::file(name, &FileError::Broken(error.to_string()));
        let mut intake = Intake::new(recording, self.channel, self.span).map_err(told)?;
        let sample_rate_hz = intake.sample_rate_hz();
        let channels = intake.channels();
        let mut measurer = Measurer::new(sample_rate_hz, Options { explain: self.explain });
        let mut mono = Vec::new();
        while intake.next(&mut mono).map_err(told)? {
            measurer.push(&mono);
            progress.heard(mono.len() as f64 / f64::from(sample_rate_hz));
        }
        let heard = intake.finish();
        let Outcome { mut reading, mut events, explanation } = measurer.finish();
        // The analyzer counts from the first sample it hears; a person, and the CSV, count from the start of the file.
        let from_s = self.span.from_s;
        events.iter_mut().for_each(|event| event.time_s += from_s);
        for stretch in &mut reading.stretches {
            (stretch.from_s, stretch.to_s) = (stretch.from_s + from_s, stretch.to_s + from_s);
        }
        let recording = Recording {
            file: name.to_owned(),
            duration_s: heard.duration_s,
            sample_rate_hz,
            channels,
            channel: heard.channel.clone(),
            from_s,
        };
        reading.notes.splice(0..0, notes_of(&heard, self.span));
        if let Some(place) = self.events {
            files::write_atomically(place, |out| report::write_events(out, &events, |_| None))
                .map_err(|error| Failure::file(place, &error))?;
        }
        let measurement = Measurement {
            format: report::FORMAT.to_owned(),
            recording,
            reading,
            gap_voltage_v: None,
            gap_voltage_spread_v: None,
        };
        let explanation = if self.explain { explanation } else { Vec::new() };
        Ok(Analysed { measurement: report::finite(measurement), explanation })
    }
}

fn notes_of(heard: &Heard, span: Span) -> Vec<String> {
    let mut notes = heard.notes.clone();
    if heard.frames == 0 && span.from_s > 0.0 {
        notes.push(format!("the recording ends before {} s, where the analysis was to start", span.from_s));
    }
    notes
}

/// Results as they come in, put out in the order of the arguments.
#[derive(Default)]
struct Results {
    json: bool,
    reports: Vec<Report>,
    texts: usize,
    failed: bool,
    not_measurable: bool,
}

impl Results {
    fn take_in_order(
        &mut self,
        receiver: mpsc::Receiver<(usize, Result<Analysed, Failure>)>,
        names: &[String],
        progress: &Progress,
    ) -> Result<(), Failure> {
        let mut early = BTreeMap::new();
        let mut turn = 0;
        for (index, result) in receiver {
            early.insert(index, result);
            while let Some(result) = early.remove(&turn) {
                progress.clear();
                self.take(&names[turn], result)?;
                turn += 1;
            }
        }
        progress.clear();
        Ok(())
    }

    fn take(&mut self, name: &str, result: Result<Analysed, Failure>) -> Result<(), Failure> {
        match result {
            Ok(Analysed { measurement, explanation }) => {
                explanation.iter().for_each(|line| tell(&format!("{name}: {line}")));
                self.not_measurable |= measurement.reading.verdict == Verdict::None;
                if self.json {
                    self.reports.push(Report::Measured(Box::new(measurement)));
                    return Ok(());
                }
                let gap = if self.texts > 0 { "\n" } else { "" };
                self.texts += 1;
                say(&format!("{gap}{}", report::measurement_text(&measurement)))
            }
            Err(Failure::Told(Exit::File, message)) => {
                self.failed = true;
                tell(&message);
                if self.json {
                    let error = message.strip_prefix(&format!("{name}: ")).unwrap_or(&message);
                    self.reports.push(Report::Failed(report::Failure::new(name, error)));
                }
                Ok(())
            }
            Err(other) => Err(other),
        }
    }

    fn finish(self) -> Result<Exit, Failure> {
        if self.json {
            let text = report::to_json(&self.reports)
                .map_err(|error| Failure::Told(Exit::File, format!("the result cannot be written as JSON: {error}")))?;
            say(&(text + "\n"))?;
        }
        Ok(match (self.failed, self.not_measurable) {
            (true, _) => Exit::File,
            (false, true) => Exit::NotMeasurable,
            (false, false) => Exit::Done,
        })
    }
}
