//! One watch from its first sample to its last: cuts the audio at the intervals, and hands each glance to whoever shows it.

use super::feed::{Feed, Piece};
use super::journal::Journal;
use super::screen;
use crate::audio::AudioError;
#[cfg(feature = "live-view")]
use crate::bench::{Bench, Quantity};
use crate::cli::args::WatchArguments;
use crate::cli::exit::{Exit, Failure, say, tell};
use crate::cli::files::FileError;
use crate::report::{self, Measurement, Recording};
use crate::rhythm::Verdict;
#[cfg(feature = "live-view")]
use crate::voltage::VoltageMeter;
use crate::watch::{Glance, Summary, Watch};

/// A watch that is running.
pub(super) struct Session {
    watch: Watch,
    journal: Journal,
    recording: Recording,
    /// Time between glances, and end, in samples.
    every: u64,
    end: u64,
    samples: u64,
    next: u64,
    glances: u64,
    every_s: f64,
    stop_on_limit: bool,
    limited: bool,
    notes: Vec<String>,
}

/// What is to be shown after a piece of audio.
pub(super) struct News {
    pub glances: Vec<Glance>,
    /// What a person has to be told.
    pub told: Vec<String>,
    pub ended: bool,
}

impl Session {
    pub fn new(arguments: &WatchArguments, watch: Watch, journal: Journal, recording: Recording) -> Self {
        let rate_hz = f64::from(recording.sample_rate_hz);
        let samples = |time_s: f64| ((time_s * rate_hz).round() as u64).max(1);
        let every = samples(arguments.every);
        Self {
            watch,
            journal,
            every,
            end: arguments.length.map_or(u64::MAX, samples),
            samples: 0,
            next: every,
            glances: 0,
            every_s: arguments.every,
            stop_on_limit: arguments.stop_on_limit,
            limited: false,
            notes: Vec::new(),
            recording,
        }
    }

    /// Takes what comes from the source.
    ///
    /// # Errors
    /// A source that fails.
    pub fn take(&mut self, piece: Piece) -> Result<News, Failure> {
        let mut news = News { glances: Vec::new(), told: Vec::new(), ended: false };
        match piece {
            Piece::Audio { mono, clipped } => {
                self.watch.add_clipped(clipped);
                self.hear(&mono, &mut news);
            }
            Piece::Break => self.watch.interrupt(),
            #[cfg(feature = "sound-card")]
            Piece::Told(message) => news.told.extend(Some(message).filter(|message| !message.is_empty())),
            Piece::End(Ok(heard)) => {
                if let Some(heard) = heard {
                    self.notes = heard.notes;
                    self.recording.channel = heard.channel;
                }
                news.ended = true;
            }
            Piece::End(Err(error)) => return Err(self.failed(&error)),
        }
        Ok(news)
    }

    fn failed(&self, error: &AudioError) -> Failure {
        Failure::file(&self.recording.file, &FileError::Broken(error.to_string()))
    }

    fn hear(&mut self, mut mono: &[f32], news: &mut News) {
        while !mono.is_empty() && !news.ended {
            let wanted = (self.next.min(self.end) - self.samples).min(mono.len() as u64) as usize;
            let (now, later) = mono.split_at(wanted);
            self.watch.push(now);
            news.told.extend(self.journal.hear(now));
            self.samples += wanted as u64;
            mono = later;
            if self.samples == self.next {
                self.glances += 1;
                // Counted in intervals: no rounding adds up.
                self.next = (((self.glances + 1) as f64 * self.every_s * f64::from(self.recording.sample_rate_hz))
                    .round() as u64)
                    .max(self.next + 1);
                let glance = self.watch.glance();
                news.told.extend(self.journal.glance(&glance));
                if self.stop_on_limit && !glance.alarms.is_empty() {
                    self.limited = true;
                    news.ended = true;
                }
                news.glances.push(glance);
            }
            news.ended |= self.samples >= self.end;
        }
    }

    /// What is watched.
    #[cfg(feature = "live-view")]
    pub fn name(&self) -> &str {
        &self.recording.file
    }

    /// Time between two glances, s.
    #[cfg(feature = "live-view")]
    pub fn every_s(&self) -> f64 {
        self.every as f64 / f64::from(self.recording.sample_rate_hz)
    }

    /// Writes a mark; gives what a person has to be told.
    #[cfg(feature = "live-view")]
    pub fn mark(&mut self, note: &str) -> Option<String> {
        self.journal.mark(self.watch.time_s(), note, None)
    }

    /// Another setting of the supply.
    ///
    /// # Errors
    /// The reason in words why the bench has no voltage at this supply.
    #[cfg(feature = "live-view")]
    pub fn set_supply(&mut self, bench: Option<&Bench>, supply: Quantity) -> Result<Option<String>, String> {
        let meter = bench.map(|bench| VoltageMeter::new(bench, Some(supply))).transpose();
        self.watch.set_meter(meter.map_err(|error| error.to_string())?);
        Ok(self.journal.mark(self.watch.time_s(), "supply set", Some(supply.value)))
    }

    /// Forgets the past.
    #[cfg(feature = "live-view")]
    pub fn reset(&mut self) {
        self.watch.reset();
    }

    /// Ends the watch: what the whole came to, and the exit status.
    ///
    /// # Errors
    /// Something that was to be written down could not be.
    pub fn finish(self) -> Result<(Measurement, Exit), Failure> {
        let end_s = self.watch.time_s();
        let Summary { from_s, mut reading, gap_voltage_v: (gap_voltage_v, gap_voltage_spread_v) } = self.watch.finish();
        reading.notes.splice(0..0, self.notes);
        let exit = match (self.limited, reading.verdict) {
            (true, _) => Exit::Limit,
            (false, Verdict::None) => Exit::NotMeasurable,
            (false, _) => Exit::Done,
        };
        let whole = report::finite(Measurement {
            format: report::FORMAT.to_owned(),
            recording: Recording { duration_s: end_s - from_s, from_s, ..self.recording },
            reading,
            gap_voltage_v,
            gap_voltage_spread_v,
            budget: Vec::new(),
        });
        self.journal.close()?;
        Ok((whole, exit))
    }

    /// A line for each interval on standard output, of JSON or, for a person, of text.
    ///
    /// # Errors
    /// A source that fails, standard output that cannot be written.
    pub fn run_in_lines(mut self, feed: &Feed, plain: bool) -> Result<Exit, Failure> {
        for piece in &feed.pieces {
            let news = self.take(piece)?;
            news.told.iter().for_each(|message| tell(message));
            for glance in &news.glances {
                let line = if plain { screen::line(glance) } else { json(glance)? };
                say(&format!("{line}\n"))?;
            }
            if news.ended {
                break;
            }
        }
        let (whole, exit) = self.finish()?;
        say(&if plain { report::measurement_text(&whole) } else { format!("{}\n", json(&whole)?) })?;
        Ok(exit)
    }
}

fn json(value: &impl serde::Serialize) -> Result<String, Failure> {
    serde_json::to_string(value)
        .map_err(|error| Failure::Told(Exit::File, format!("the result cannot be written as JSON: {error}")))
}
