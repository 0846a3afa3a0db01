//! From a source to the one clean stream of samples that the analyzer hears.
//!
//! Lost frames become zeros in their right place, so that every later click keeps its time. A sample that is not a
//! number, or far beyond what any format holds, becomes zero. Both are counted and said in a note. Memory stays
//! bounded: one block, and while the clearest channel is being found the first seconds ([`LISTEN_S`] unless told otherwise).

use super::channel::Pick;
use super::{AudioError, ChannelChoice, Clearness, ClipCounter, Source, clearest};

/// How long to listen before the clearest channel is chosen, s.
pub const LISTEN_S: f64 = 10.0;

/// Most samples held while listening (64 MiB of them): bounds memory for many channels or a high sample rate.
const LISTEN_SAMPLES: usize = 1 << 24;

/// Most zeros handed out at once for a lost stretch.
const GAP_CHUNK: u64 = 1 << 14;

/// Largest believable sample: integer samples of 32 bits stored as unscaled floating point. Beyond it, squares and
/// sums in single precision lose their meaning.
const LARGEST: f32 = 2_147_483_648.0;

/// Lost stretches that are named one by one.
const NAMED_GAPS: usize = 5;

/// The part of a recording to hear.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Span {
    /// Start, s from the start of the recording.
    pub from_s: f64,
    /// End, s; the end of the recording if absent.
    pub to_s: Option<f64>,
}

/// What was heard, once the end is reached.
#[derive(Debug, Clone, PartialEq)]
pub struct Heard {
    /// Mono samples handed out.
    pub frames: u64,
    /// Their duration, s.
    pub duration_s: f64,
    /// The channel: `left`, `right`, `mix` or its number.
    pub channel: String,
    /// Frames clipped.
    pub clipped_frames: u64,
    /// Samples that were not numbers.
    pub not_numbers: u64,
    /// What the person should know about the audio.
    pub notes: Vec<String>,
}

/// Reads a [`Source`] and hands out clean mono blocks.
pub struct Intake<S> {
    source: S,
    channels: u16,
    sample_rate_hz: u32,
    pick: Option<Pick>,
    chosen_by_ear: bool,
    listen_s: f64,
    clips: ClipCounter,
    /// Frames to mix down next.
    block: Vec<f32>,
    /// Frames from the source that stand behind `zeros` lost ones.
    waiting: Vec<f32>,
    zeros: u64,
    /// Frame number of what [`Self::fetch`] brings next.
    position: u64,
    first: u64,
    end: u64,
    frames: u64,
    not_numbers: u64,
    gaps: u64,
    gap_frames: u64,
    named_gaps: Vec<(u64, u64)>,
}

impl<S: Source> Intake<S> {
    /// Prepares to hear `span` of `source`.
    ///
    /// # Errors
    /// [`AudioError::NoChannel`] for a channel that is not there, [`AudioError::Format`] for a source without
    /// channels or sample rate.
    pub fn new(source: S, choice: ChannelChoice, span: Span) -> Result<Self, AudioError> {
        let (channels, sample_rate_hz) = (source.channels(), source.sample_rate_hz());
        if channels == 0 || sample_rate_hz == 0 {
            return Err(AudioError::Format { channels, sample_rate_hz });
        }
        let pick = Pick::settled(choice, channels)?;
        let frame_at = |time_s: f64| (time_s * f64::from(sample_rate_hz)).round().max(0.0) as u64;
        let clips = clip_counter(pick, channels, source.full_scale());
        Ok(Self {
            source,
            channels,
            sample_rate_hz,
            pick,
            chosen_by_ear: pick.is_none(),
            listen_s: LISTEN_S,
            clips,
            block: Vec::new(),
            waiting: Vec::new(),
            zeros: 0,
            position: 0,
            first: frame_at(span.from_s),
            end: span.to_s.map_or(u64::MAX, frame_at),
            frames: 0,
            not_numbers: 0,
            gaps: 0,
            gap_frames: 0,
            named_gaps: Vec::new(),
        })
    }

    /// The same, but for so many seconds only is anything held back while the clearest channel is being found.
    #[must_use]
    pub fn listening_for(self, listen_s: f64) -> Self {
        Self { listen_s, ..self }
    }

    /// Losses of unknown length so far ([`Source::breaks`]).
    pub fn breaks(&self) -> u64 {
        self.source.breaks()
    }

    /// Frames clipped so far.
    pub fn clipped_frames(&self) -> u64 {
        self.clips.clipped()
    }

    /// Sample rate, Hz.
    pub fn sample_rate_hz(&self) -> u32 {
        self.sample_rate_hz
    }

    /// Channels of the source.
    pub fn channels(&self) -> u16 {
        self.channels
    }

    /// Replaces `mono` with the next samples; false at the end.
    ///
    /// # Errors
    /// Those of [`Source::next`].
    pub fn next(&mut self, mono: &mut Vec<f32>) -> Result<bool, AudioError> {
        mono.clear();
        let Some(pick) = self.pick else {
            return self.listen(mono);
        };
        if !self.pull()? {
            return Ok(false);
        }
        self.mix_down(pick, mono);
        Ok(true)
    }

    /// Holds the first seconds, chooses the channel and hands out what was held.
    fn listen(&mut self, mono: &mut Vec<f32>) -> Result<bool, AudioError> {
        let width = usize::from(self.channels);
        let wanted =
            ((self.listen_s * f64::from(self.sample_rate_hz)) as usize).saturating_mul(width).min(LISTEN_SAMPLES);
        let mut ears = vec![Clearness::new(self.sample_rate_hz); width];
        let mut held = Vec::new();
        while held.len() < wanted && self.pull()? {
            for frame in self.block.chunks_exact(width) {
                ears.iter_mut().zip(frame).for_each(|(ear, &sample)| ear.push(number_or_zero(sample)));
            }
            held.extend_from_slice(&self.block);
        }
        let pick = Pick::One(clearest(ears));
        self.pick = Some(pick);
        self.clips = clip_counter(self.pick, self.channels, self.source.full_scale());
        self.block = held;
        self.mix_down(pick, mono);
        Ok(!mono.is_empty())
    }

    /// Fills `self.block` with the next frames of the span; false at its end.
    fn pull(&mut self) -> Result<bool, AudioError> {
        let width = usize::from(self.channels);
        while self.position < self.end && self.fetch(width)? {
            let (start, length) = (self.position, (self.block.len() / width) as u64);
            self.position += length;
            let cut_front = self.first.saturating_sub(start).min(length);
            let cut_back = self.position.saturating_sub(self.end).min(length - cut_front);
            self.block.truncate((length - cut_back) as usize * width);
            self.block.drain(..cut_front as usize * width);
            if !self.block.is_empty() {
                return Ok(true);
            }
        }
        Ok(false)
    }

    /// Fills `self.block` with the frames that follow `self.position`: zeros for lost ones, then those of the source.
    fn fetch(&mut self, width: usize) -> Result<bool, AudioError> {
        if self.zeros == 0 && self.waiting.is_empty() {
            let Some(block) = self.source.next(&mut self.waiting)? else {
                return Ok(false);
            };
            self.zeros = block.position.saturating_sub(self.position);
            self.remember_gap();
        }
        if self.zeros > 0 {
            let zeros = self.zeros.min(GAP_CHUNK);
            self.zeros -= zeros;
            self.block.clear();
            self.block.resize(zeros as usize * width, 0.0);
        } else {
            std::mem::swap(&mut self.block, &mut self.waiting);
            self.waiting.clear();
        }
        Ok(true)
    }

    fn remember_gap(&mut self) {
        let (start, end) = (self.position.max(self.first), (self.position + self.zeros).min(self.end));
        if end > start {
            self.gaps += 1;
            self.gap_frames += end - start;
            if self.named_gaps.len() < NAMED_GAPS {
                self.named_gaps.push((start, end - start));
            }
        }
    }

    fn mix_down(&mut self, pick: Pick, mono: &mut Vec<f32>) {
        for frame in self.block.chunks_exact_mut(usize::from(self.channels)) {
            let heard = match pick {
                Pick::One(channel) => &mut frame[channel..=channel],
                Pick::Mix => &mut *frame,
            };
            for sample in heard.iter_mut() {
                if number_or_zero(*sample) != *sample {
                    self.not_numbers += 1;
                    *sample = 0.0;
                }
            }
            self.clips.push(heard);
            mono.push(pick.of(frame));
        }
        self.frames += mono.len() as u64;
    }

    /// What was heard: channel, counts and notes. To be called at the end.
    pub fn finish(self) -> Heard {
        let channel = self.pick.unwrap_or(Pick::One(0)).label(self.channels);
        let clipped_frames = self.clips.clipped();
        let mut notes = self.source.notes();
        notes.extend(self.gap_notes());
        if self.chosen_by_ear {
            notes.push(format!("of {} channels, {channel} was analysed: clicks are clearest there", self.channels));
        }
        if self.not_numbers > 0 {
            notes.push(format!("{} samples were not numbers and were taken as 0", self.not_numbers));
        }
        if clipped_frames > 0 {
            let percent = 100.0 * clipped_frames as f64 / self.frames.max(1) as f64;
            notes.push(format!("clipped {} of samples; turn the recording level down", percent_text(percent)));
        }
        let duration_s = self.frames as f64 / f64::from(self.sample_rate_hz);
        Heard { frames: self.frames, duration_s, channel, clipped_frames, not_numbers: self.not_numbers, notes }
    }

    fn gap_notes(&self) -> Vec<String> {
        let rate_hz = f64::from(self.sample_rate_hz);
        let mut notes: Vec<String> = self
            .named_gaps
            .iter()
            .map(|&(start, length)| {
                let (start_s, length_ms) = (start as f64 / rate_hz, 1e3 * length as f64 / rate_hz);
                format!(
                    "a stretch of {length_ms:.0} ms at {start_s:.2} s could not be decoded and was taken as silence"
                )
            })
            .collect();
        let unnamed = self.gaps - self.named_gaps.len() as u64;
        if unnamed > 0 {
            let together_s = self.gap_frames as f64 / rate_hz;
            notes.push(format!("{unnamed} more stretches could not be decoded; {together_s:.2} s are lost altogether"));
        }
        notes
    }
}

fn clip_counter(pick: Option<Pick>, channels: u16, full_scale: f32) -> ClipCounter {
    let heard = if pick == Some(Pick::Mix) { usize::from(channels) } else { 1 };
    ClipCounter::new(heard, full_scale)
}

fn number_or_zero(sample: f32) -> f32 {
    // NaN fails the comparison too.
    if sample.abs() <= LARGEST { sample } else { 0.0 }
}

fn percent_text(percent: f64) -> String {
    match percent {
        p if p < 0.01 => "less than 0.01 %".to_owned(),
        p if p < 1.0 => format!("{p:.2} %"),
        p => format!("{p:.1} %"),
    }
}

#[cfg(test)]
mod tests;
