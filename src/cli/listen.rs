//! One recording through the analyzer: what `measure` and `calibrate` have in common.

use super::exit::Failure;
use super::files::{self, FileError};
use super::progress::Progress;
use crate::audio::{AudioError, ChannelChoice, Heard, Intake, Span};
use crate::firing::Event;
use crate::measure::{Measurer, Options, Outcome};
use crate::report::Recording;
use crate::rhythm::Reading;

/// How recordings are heard.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Listener {
    pub channel: ChannelChoice,
    pub span: Span,
    pub explain: bool,
}

/// What comes out of a recording as it is heard: audio first, the events in it later.
#[derive(Debug, Clone, Copy)]
pub(super) enum Piece<'a> {
    /// Mono samples and their rate, Hz.
    Audio(&'a [f32], u32),
    /// An event at its time in the file.
    Event(Event),
}

/// What was heard.
pub(super) struct HeardRecording {
    pub recording: Recording,
    pub reading: Reading,
    pub explanation: Vec<String>,
}

impl Listener {
    /// Reads a recording to its end; `take` gets audio and events as they come.
    ///
    /// # Errors
    /// A recording that cannot be read, or what `take` fails with.
    pub fn listen(
        &self,
        name: &str,
        progress: &Progress,
        take: &mut dyn FnMut(Piece<'_>) -> Result<(), Failure>,
    ) -> Result<HeardRecording, Failure> {
        let source = files::open(name).map_err(|error| Failure::file(name, &error))?;
        let told = |error: AudioError| Failure::file(name, &FileError::Broken(error.to_string()));
        let mut intake = Intake::new(source, self.channel, self.span).map_err(told)?;
        let (sample_rate_hz, channels) = (intake.sample_rate_hz(), intake.channels());
        let mut measurer = Measurer::new(sample_rate_hz, Options { explain: self.explain });
        // The analyzer counts from the first sample it hears; a person counts from the start of the file.
        let from_s = self.span.from_s;
        let in_file = |event: Event| Piece::Event(Event { time_s: event.time_s + from_s, ..event });
        let mut mono = Vec::new();
        while intake.next(&mut mono).map_err(told)? {
            take(Piece::Audio(&mono, sample_rate_hz))?;
            measurer.push(&mono);
            measurer.take_events().into_iter().try_for_each(|event| take(in_file(event)))?;
            progress.heard(mono.len() as f64 / f64::from(sample_rate_hz));
        }
        let heard = intake.finish();
        let Outcome { mut reading, events, explanation } = measurer.finish();
        events.into_iter().try_for_each(|event| take(in_file(event)))?;
        for stretch in &mut reading.stretches {
            (stretch.from_s, stretch.to_s) = (stretch.from_s + from_s, stretch.to_s + from_s);
        }
        reading.notes.splice(0..0, notes_of(&heard, self.span));
        let recording = Recording {
            file: name.to_owned(),
            duration_s: heard.duration_s,
            sample_rate_hz,
            channels,
            channel: heard.channel,
            from_s,
        };
        Ok(HeardRecording { recording, reading, explanation })
    }
}

fn notes_of(heard: &Heard, span: Span) -> Vec<String> {
    let mut notes = heard.notes.clone();
    if heard.frames == 0 && span.from_s > 0.0 {
        notes.push(format!("the recording ends before {} s, where the analysis was to start", span.from_s));
    }
    notes
}
