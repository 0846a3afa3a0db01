//! Audio from a source on a thread of its own, so that keys and the clock are looked after while no audio comes.

use crate::audio::{AudioError, ChannelChoice, Heard, Intake, Source, Span};
use std::sync::mpsc::{Receiver, SyncSender, sync_channel};
use std::time::{Duration, Instant};

/// Pieces that wait at most; a source that can wait does so then.
const WAITING: usize = 16;
/// Longest piece, s: what is shown follows the audio this closely.
const LONGEST_S: f64 = 0.05;

/// What comes.
pub(super) enum Piece {
    /// Mono samples, and how many of them were clipped.
    Audio { mono: Vec<f32>, clipped: u64 },
    /// Audio was lost before the next samples.
    Break,
    /// Something a person has to be told; nothing if empty.
    #[cfg(feature = "sound-card")]
    Told(String),
    /// The source has ended; what was heard if anybody still listened, or why it failed.
    End(Result<Option<Heard>, AudioError>),
}

/// A source that is being read.
pub(super) struct Feed {
    pub pieces: Receiver<Piece>,
    pub sample_rate_hz: u32,
    pub channels: u16,
}

/// How a source is read.
#[derive(Debug, Clone, Copy)]
pub(super) struct Way {
    pub channel: ChannelChoice,
    /// At its own pace.
    pub pace: bool,
    /// Held back while the clearest channel is found, s.
    pub listen_s: f64,
}

impl Feed {
    /// Starts to read.
    ///
    /// # Errors
    /// Those of [`Intake::new`].
    pub fn start(source: impl Source + Send + 'static, way: Way) -> Result<Self, AudioError> {
        Self::start_with(|_| source, way)
    }

    /// The same for a source that has messages of its own to send.
    ///
    /// # Errors
    /// Those of [`Intake::new`].
    pub fn start_with<S: Source + Send + 'static>(
        source: impl FnOnce(SyncSender<Piece>) -> S,
        way: Way,
    ) -> Result<Self, AudioError> {
        let (sender, pieces) = sync_channel(WAITING);
        let source = source(sender.clone());
        let intake = Intake::new(source, way.channel, Span::default())?.listening_for(way.listen_s);
        let (sample_rate_hz, channels) = (intake.sample_rate_hz(), intake.channels());
        std::thread::spawn(move || {
            let ended = read(intake, way.pace, &sender);
            // Nobody listens any more: nothing is left to tell.
            let _ = sender.send(Piece::End(ended));
        });
        Ok(Self { pieces, sample_rate_hz, channels })
    }
}

fn read<S: Source>(mut intake: Intake<S>, pace: bool, sender: &SyncSender<Piece>) -> Result<Option<Heard>, AudioError> {
    let rate_hz = f64::from(intake.sample_rate_hz());
    let longest = ((LONGEST_S * rate_hz) as usize).max(1);
    let began = Instant::now();
    let (mut frames, mut clipped, mut breaks) = (0u64, 0, 0);
    let mut mono = Vec::new();
    while intake.next(&mut mono)? {
        if intake.breaks() > breaks {
            breaks = intake.breaks();
            if sender.send(Piece::Break).is_err() {
                return Ok(None);
            }
        }
        for part in mono.chunks(longest) {
            frames += part.len() as u64;
            if pace {
                let due = Duration::from_secs_f64(frames as f64 / rate_hz);
                std::thread::sleep(due.saturating_sub(began.elapsed()));
            }
            let new = intake.clipped_frames() - clipped;
            clipped += new;
            if sender.send(Piece::Audio { mono: part.to_vec(), clipped: new }).is_err() {
                return Ok(None);
            }
        }
    }
    Ok(Some(intake.finish()))
}
