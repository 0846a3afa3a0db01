//! What a watch writes down: entries and marks of the log, the audio, the supply settings typed. A place that cannot be written any
//! more is told once and does not stop the watch.

use super::recorder::Recorder;
use crate::cli::args::WatchArguments;
use crate::cli::exit::{Exit, Failure};
use crate::cli::files::{self, FileError};
use crate::cli::log::Log;
use crate::report::{self, Measurement, Recording};
use crate::watch::{Glance, State};

/// Header of the supply settings, as `calibrate --supply-log` reads them.
const SUPPLY_HEADER: &str = "time_s,supply_v";

/// What is written down.
pub(super) struct Journal {
    log: Option<Log>,
    log_every_s: f64,
    logged_s: f64,
    recorder: Option<Recorder>,
    supply_place: Option<String>,
    recording: Recording,
    /// Messages that were told already.
    told: Vec<String>,
}

impl Journal {
    /// Checks and opens the places.
    ///
    /// # Errors
    /// Exit status 1 for a place that cannot be written.
    pub fn new(arguments: &WatchArguments, log: Option<Log>, recording: Recording) -> Result<Self, Failure> {
        let recorder = arguments
            .record
            .as_deref()
            .map(|place| Recorder::new(place, recording.sample_rate_hz).map_err(|error| Failure::file(place, &error)));
        Ok(Self {
            log,
            log_every_s: arguments.log_every,
            logged_s: 0.0,
            recorder: recorder.transpose()?,
            supply_place: arguments.record.as_ref().map(|place| format!("{place}.supply.csv")),
            recording,
            told: Vec::new(),
        })
    }

    /// Keeps audio; gives what a person has to be told.
    pub fn hear(&mut self, mono: &[f32]) -> Option<String> {
        let failed = self.recorder.as_mut()?.write(mono).err()?;
        // What was written stays; the rest would fail as well.
        self.recorder = None;
        Some(format!("the audio is kept no longer: {failed}"))
    }

    /// Logs a glance if it is time for it.
    pub fn glance(&mut self, glance: &Glance) -> Option<String> {
        if glance.time_s - self.logged_s < self.log_every_s || glance.state != State::Firing {
            return None;
        }
        self.logged_s = glance.time_s;
        let measurement = self.measurement(glance);
        let ended = self.log.as_ref()?.append(&measurement);
        self.once(ended)
    }

    fn measurement(&self, glance: &Glance) -> Measurement {
        let from_s = glance.since_s.unwrap_or(glance.time_s);
        let recording = Recording { duration_s: glance.time_s - from_s, from_s, ..self.recording.clone() };
        report::finite(Measurement {
            format: report::FORMAT.to_owned(),
            recording,
            reading: glance.reading.clone(),
            gap_voltage_v: glance.gap_voltage_v,
            gap_voltage_spread_v: glance.gap_voltage_spread_v,
            budget: Vec::new(),
        })
    }

    /// Writes a mark; a supply setting too where the audio is kept, so that `calibrate` can have it.
    pub fn mark(&mut self, time_s: f64, note: &str, supply_v: Option<f64>) -> Option<String> {
        let marked = self.log.as_mut().map_or(Ok(()), |log| log.mark(note, supply_v));
        let kept = match (&self.supply_place, supply_v) {
            (Some(place), Some(supply_v)) => {
                append_supply(place, time_s, supply_v).map_err(|error| Failure::file(place, &error))
            }
            _ => Ok(()),
        };
        let said = self.once(marked);
        let also = self.once(kept);
        said.or(also)
    }

    /// A failure in words, the first time.
    fn once(&mut self, ended: Result<(), Failure>) -> Option<String> {
        let Err(Failure::Told(_, message)) = ended else { return None };
        if self.told.contains(&message) {
            return None;
        }
        self.told.push(message.clone());
        Some(message)
    }

    /// Ends the files.
    ///
    /// # Errors
    /// Exit status 1 if something could not be written.
    pub fn close(mut self) -> Result<(), Failure> {
        if let Some(recorder) = &mut self.recorder {
            recorder.close().map_err(|error| Failure::Told(Exit::File, format!("the audio: {error}")))?;
        }
        if self.told.is_empty() { Ok(()) } else { Err(Failure::Told(Exit::File, self.told.join("; "))) }
    }
}

fn append_supply(place: &str, time_s: f64, supply_v: f64) -> Result<(), FileError> {
    if !std::path::Path::new(place).exists() {
        files::append_line(place, SUPPLY_HEADER)?;
    }
    files::append_line(place, &format!("{time_s:.3},{supply_v}")).map(|_| ())
}
