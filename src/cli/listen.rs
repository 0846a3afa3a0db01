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

/// What was heard.
pub(super) struct HeardRecording {
    pub recording: Recording,
    pub reading: Reading,
    pub explanation: Vec<String>,
}

impl Listener {
    /// Reads a recording to its end; `take` gets every event as it comes, at its time in the file.
    ///
    /// # Errors
    /// A recording that cannot be read, or what `take` fails with.
    pub fn listen(
        &self,
        name: &str,
        progress: &Progress,
        take: &mut dyn FnMut(Event) -> Result<(), Failure>,
    ) -> Result<HeardRecording, Failure> {
        let source = files::open(name).map_err(|error| Failure::file(name, &error))?;
        let told = |error: AudioError| Failure::file(name, &FileError::Broken(error.to_string()));
        let mut intake = Intake::new(source, self.channel, self.span).map_err(told)?;
        let (sample_rate_hz, channels) = (intake.sample_rate_hz(), intake.channels());
        let mut measurer = Measurer::new(sample_rate_hz, Options { explain: self.explain });
        // The analyzer counts from the first sample it hears; a person counts from the start of the file.
        let from_s = self.span.from_s;
        let mut take_all = |events: Vec<Event>| {
            events.into_iter().try_for_each(|event| take(Event { time_s: event.time_s + from_s, ..event }))
        };
        let mut mono = Vec::new();
        while intake.next(&mut mono).map_err(told)? {
            measurer.push(&mono);
            take_all(measurer.take_events())?;
            progress.heard(mono.len() as f64 / f64::from(sample_rate_hz));
        }
        let heard = intake.finish();
        let Outcome { mut reading, events, explanation } = measurer.finish();
        take_all(events)?;
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
