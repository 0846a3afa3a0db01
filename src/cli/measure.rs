//! `gaptone measure`: recordings to figures.
//!
//! Recordings are analysed in parallel, one per core at a time, so that memory is bounded by the cores; results come
//! out in the order of the arguments. A recording that cannot be read does not stop the others.

use super::args::MeasureArguments;
use super::bench_file;
use super::evidence;
use super::exit::{Exit, Failure, say, tell};
use super::files::{self, FileError, STANDARD_STREAM};
use super::listen::{HeardRecording, Listener, Piece};
use super::log::Log;
use super::progress::Progress;
use super::terminal::Terminal;
use crate::audio::Span;
use crate::bench::{Bench, Quantity};
use crate::evidence::{Collector, Evidence};
use crate::firing::Event;
use crate::model::truth::Truth;
use crate::report::{self, Differences, Measurement, Report, WithTruth};
use crate::rhythm::Verdict;
use crate::uncertainty::Budget;
use crate::voltage::VoltageMeter;
use std::collections::BTreeMap;
use std::io::{self, Write};
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::mpsc;

/// Runs the command.
///
/// # Errors
/// Wrong usage, a bench that cannot be used, a place for events that cannot be written.
pub(super) fn run(arguments: &MeasureArguments) -> Result<Exit, Failure> {
    if let Some(page) = &arguments.evidence.from_report {
        return evidence::from_page(page, arguments);
    }
    let terminal = (!arguments.json).then(Terminal::of_standard_output).flatten();
    let order = evidence::Order::new(arguments)?;
    let (bench, supply) = bench(arguments)?;
    let log = Log::new(&arguments.log, bench.as_ref(), supply)?;
    let task = Task {
        evidence: order.is_some() || terminal.is_some(),
        hears: order.is_some(),
        ..Task::new(arguments, bench.as_ref(), supply)?
    };
    let mut results = Results {
        json: arguments.json,
        truth: truth(arguments)?,
        log,
        terminal,
        evidence: order,
        ..Results::default()
    };
    if arguments.difference {
        if arguments.recordings.len() != 2 {
            return Err(Failure::usage("--difference compares two recordings; name exactly two"));
        }
        results.difference = Some(task.voltage.clone());
    }
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
    /// The evidence, if it is wanted, with the budget of the gap voltage.
    evidence: Option<(Evidence, Vec<Budget>)>,
}

/// What is to be done with each recording.
struct Task<'a> {
    listener: Listener,
    events: Option<&'a str>,
    budget: bool,
    /// Evidence is collected; it holds audio too.
    evidence: bool,
    hears: bool,
    /// A voltmeter that has seen no event yet.
    voltage: Option<VoltageMeter>,
}

impl<'a> Task<'a> {
    /// Checks everything that can be checked before any audio is read.
    fn new(arguments: &'a MeasureArguments, bench: Option<&Bench>, supply: Option<Quantity>) -> Result<Self, Failure> {
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
        let told = |error| Failure::usage(format!("{}: {error}", arguments.bench.as_deref().unwrap_or_default()));
        let voltage = bench.map(|bench| VoltageMeter::new(bench, supply)).transpose().map_err(told)?;
        let voltage = if arguments.budget { voltage.map(VoltageMeter::with_all_budgets) } else { voltage };
        Ok(Self {
            listener: Listener { channel: arguments.channel.unwrap_or_default(), span, explain: arguments.explain },
            events,
            budget: arguments.budget,
            evidence: false,
            hears: false,
            voltage,
        })
    }

    /// Measures one recording and writes its events if they are wanted.
    fn measure(&self, name: &str, progress: &Progress) -> Result<Analysed, Failure> {
        let Some(place) = self.events else {
            return self.analyse(name, progress, &mut |_, _| Ok(()));
        };
        let mut analysed = None;
        let written = files::write_atomically(place, |out| {
            writeln!(out, "{}", report::EVENTS_HEADER)?;
            let result =
                self.analyse(name, progress, &mut |event, voltage_v| report::write_event(out, event, voltage_v));
            let failed = result.is_err();
            analysed = Some(result);
            // No file of events is left behind for a recording that could not be read.
            if failed { Err(io::Error::other("the recording was not measured")) } else { Ok(()) }
        });
        match (analysed, written) {
            (Some(Err(failure)), _) => Err(failure),
            (Some(Ok(analysed)), Ok(())) => Ok(analysed),
            (_, Err(error)) => Err(Failure::file(place, &error)),
            (None, Ok(())) => Err(Failure::Told(Exit::File, format!("{place}: nothing was written"))),
        }
    }

    fn analyse(&self, name: &str, progress: &Progress, sink: &mut Sink<'_>) -> Result<Analysed, Failure> {
        let mut voltage = self.voltage.clone();
        let mut collector = self.evidence.then(|| Collector::new(self.listener.span.from_s));
        let mut take = |piece: Piece<'_>| match (piece, &mut collector) {
            (Piece::Event(event), collector) => self.take(&event, voltage.as_mut(), collector.as_mut(), sink),
            (Piece::Audio(mono, rate_hz), Some(collector)) if self.hears => {
                collector.hear(mono, rate_hz);
                Ok(())
            }
            (Piece::Audio(..), _) => Ok(()),
        };
        let HeardRecording { recording, mut reading, mut explanation } =
            self.listener.listen(name, progress, &mut take)?;
        let voltage = voltage.map(|meter| meter.finish(&reading)).unwrap_or_default();
        reading.notes.extend(voltage.notes);
        explanation.extend(voltage.budgets.first().into_iter().flat_map(|budget| &budget.inputs).map(|line| {
            format!(
                "gap voltage: {} brings {:.1} V, {:.0} % of the variance",
                line.name,
                line.contribution,
                100.0 * line.share
            )
        }));
        let measurement = Measurement {
            format: report::FORMAT.to_owned(),
            recording,
            reading,
            gap_voltage_v: voltage.gap_voltage_v,
            gap_voltage_spread_v: voltage.gap_voltage_spread_v,
            budget: if self.budget { voltage.budgets.clone() } else { Vec::new() },
        };
        let explanation = if self.listener.explain { explanation } else { Vec::new() };
        let evidence = collector.map(|collector| (collector.finish(), voltage.budgets));
        Ok(Analysed { measurement: report::finite(measurement), explanation, evidence })
    }

    /// Hands an event on to the voltmeter, to the evidence and to its file.
    fn take(
        &self,
        event: &Event,
        voltage: Option<&mut VoltageMeter>,
        collector: Option<&mut Collector>,
        sink: &mut Sink<'_>,
    ) -> Result<(), Failure> {
        let voltage_v = voltage.and_then(|meter| {
            meter.push(event);
            event.period_s.and_then(|period_s| meter.gap_voltage_of(period_s))
        });
        if let Some(collector) = collector {
            collector.event(event, voltage_v);
        }
        sink(event, voltage_v).map_err(|error| {
            let place = self.events.unwrap_or("standard output");
            Failure::file(place, &FileError::from_io("writing", error))
        })
    }
}

/// Where events go, each with the gap voltage that it implies.
type Sink<'a> = dyn FnMut(&Event, Option<f64>) -> io::Result<()> + 'a;

/// The truth of a rendered clip, if the answer is to be compared with it.
fn truth(arguments: &MeasureArguments) -> Result<Option<Truth>, Failure> {
    let Some(name) = &arguments.truth else { return Ok(None) };
    if arguments.recordings.len() > 1 {
        return Err(Failure::usage("--truth belongs to one clip; name a single one"));
    }
    let file = std::fs::File::open(name).map_err(|error| Failure::file(name, &FileError::from_io("reading", error)))?;
    serde_json::from_reader(io::BufReader::new(file))
        .map(Some)
        .map_err(|error| Failure::Told(Exit::File, format!("{name}: is no truth file of a rendered clip ({error})")))
}

/// The bench, and the supply that stands for its own.
fn bench(arguments: &MeasureArguments) -> Result<(Option<Bench>, Option<Quantity>), Failure> {
    let Some(name) = &arguments.bench else { return Ok((None, None)) };
    let bench = bench_file::load(name)?;
    let supply = arguments.supply.as_deref().map(|text| bench_file::supply(text, &bench)).transpose()?;
    Ok((Some(bench), supply))
}

/// Results as they come in, put out in the order of the arguments.
#[derive(Default)]
struct Results {
    json: bool,
    truth: Option<Truth>,
    /// The two runs are to be compared; with the voltmeter of their bench.
    difference: Option<Option<VoltageMeter>>,
    runs: Vec<Measurement>,
    log: Option<Log>,
    terminal: Option<Terminal>,
    evidence: Option<evidence::Order>,
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
            Ok(Analysed { measurement, explanation, evidence }) => {
                explanation.iter().for_each(|line| tell(&format!("{name}: {line}")));
                self.not_measurable |= measurement.reading.verdict == Verdict::None;
                if let Some(Err(error)) = self.log.as_ref().map(|log| log.append(&measurement)) {
                    // The figures are shown all the same.
                    self.failed = true;
                    error.end();
                }
                let comparison = self.truth.as_ref().map(|truth| report::compare(&measurement, truth));
                if self.difference.is_some() {
                    self.runs.push(measurement.clone());
                }
                let drawn =
                    evidence.as_ref().and_then(|(evidence, _)| self.terminal.as_ref()?.picture(&measurement, evidence));
                if let (Some((evidence, budget)), Some(order)) = (evidence, &mut self.evidence) {
                    order.add(Measurement { budget, ..measurement.clone() }, evidence);
                }
                if self.json {
                    self.reports.push(match comparison {
                        None => Report::Measured(Box::new(measurement)),
                        Some(comparison) => Report::Compared(Box::new(WithTruth { measurement, comparison })),
                    });
                    return Ok(());
                }
                let gap = if self.texts > 0 { "\n" } else { "" };
                self.texts += 1;
                let compared = comparison.map(|comparison| report::comparison_text(&comparison)).unwrap_or_default();
                let drawn = drawn.unwrap_or_default();
                say(&format!("{gap}{}{drawn}{compared}", report::measurement_text(&measurement)))
            }
            Err(Failure::Told(Exit::File, message)) => {
                self.failed = true;
                tell(&message);
                let error = message.strip_prefix(&format!("{name}: ")).unwrap_or(&message);
                if let Some(order) = &mut self.evidence {
                    order.add_failure(name, error);
                }
                if self.json {
                    self.reports.push(Report::Failed(report::Failure::new(name, error)));
                }
                Ok(())
            }
            Err(other) => Err(other),
        }
    }

    /// The comparison of the two runs, if it was asked for and both were read.
    fn differences(&mut self) -> Option<Differences> {
        let meter = self.difference.take()?;
        let [first, second]: [Measurement; 2] = std::mem::take(&mut self.runs).try_into().ok()?;
        let run = |of: &Measurement| of.gap_voltage_v.map(|voltage| voltage.value);
        let voltage =
            meter.and_then(|meter| meter.difference((&first.reading, run(&first)?), (&second.reading, run(&second)?)));
        Some(report::differences(first, second, voltage))
    }

    fn finish(mut self) -> Result<Exit, Failure> {
        let not_json = |error| Failure::Told(Exit::File, format!("the result cannot be written as JSON: {error}"));
        match self.differences() {
            Some(found) if self.json => say(&(serde_json::to_string_pretty(&found).map_err(not_json)? + "\n"))?,
            Some(found) => say(&format!("\n{}", report::differences_text(&found)))?,
            None if self.json => say(&(report::to_json(&self.reports).map_err(not_json)? + "\n"))?,
            None => {}
        }
        if let Some(order) = self.evidence {
            order.finish()?;
        }
        Ok(match (self.failed, self.not_measurable) {
            (true, _) => Exit::File,
            (false, true) => Exit::NotMeasurable,
            (false, false) => Exit::Done,
        })
    }
}
