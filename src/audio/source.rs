//! Where samples come from.

/// Why samples could not be had.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum AudioError {
    /// The source failed; the text says how and what would be right.
    #[error("{0}")]
    Read(String),
    /// A channel was asked for that the recording does not have.
    #[error("there is no channel {asked}; the recording has {channels}")]
    NoChannel {
        /// Channel asked for, counted from 1.
        asked: u16,
        /// Channels there are.
        channels: u16,
    },
    /// The source states a format that no recording has.
    #[error("{channels} channels at {sample_rate_hz} Hz cannot be a recording")]
    Format {
        /// Channels stated.
        channels: u16,
        /// Sample rate stated, Hz.
        sample_rate_hz: u32,
    },
}

/// What stands in a block of samples.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Block {
    /// Frames in it (a frame is one sample of each channel).
    pub frames: usize,
    /// Frame number of its first frame, counted from the start of the recording with lost frames included.
    /// A block that starts later than the one before it ended follows a loss.
    pub position: u64,
}

/// A source of samples: a file, a device, or samples made up for a test.
pub trait Source {
    /// Sample rate, Hz.
    fn sample_rate_hz(&self) -> u32;

    /// Channels.
    fn channels(&self) -> u16;

    /// Largest sample that the format can hold: `1 − 2^(1−bits)` for integers, 1 for floating point.
    fn full_scale(&self) -> f32 {
        1.0
    }

    /// Replaces the content of `block` with the next interleaved samples; `None` at the end.
    ///
    /// # Errors
    /// [`AudioError::Read`] if the source fails in a way that leaves nothing to go on with.
    fn next(&mut self, block: &mut Vec<f32>) -> Result<Option<Block>, AudioError>;

    /// What the person should know about the reading, complete once the end was reached.
    fn notes(&self) -> Vec<String> {
        Vec::new()
    }

    /// Losses of unknown length so far; each lies before the block that was handed out last.
    fn breaks(&self) -> u64 {
        0
    }
}

impl<S: Source + ?Sized> Source for Box<S> {
    fn sample_rate_hz(&self) -> u32 {
        (**self).sample_rate_hz()
    }

    fn channels(&self) -> u16 {
        (**self).channels()
    }

    fn full_scale(&self) -> f32 {
        (**self).full_scale()
    }

    fn next(&mut self, block: &mut Vec<f32>) -> Result<Option<Block>, AudioError> {
        (**self).next(block)
    }

    fn notes(&self) -> Vec<String> {
        (**self).notes()
    }

    fn breaks(&self) -> u64 {
        (**self).breaks()
    }
}

/// Samples in memory as a source.
#[derive(Debug, Clone)]
pub struct Memory {
    samples: Vec<f32>,
    channels: u16,
    sample_rate_hz: u32,
    block_frames: usize,
    read_frames: usize,
}

impl Memory {
    /// Interleaved `samples`, handed out in blocks of `block_frames`.
    #[must_use]
    pub fn new(samples: Vec<f32>, channels: u16, sample_rate_hz: u32, block_frames: usize) -> Self {
        Self { samples, channels: channels.max(1), sample_rate_hz, block_frames: block_frames.max(1), read_frames: 0 }
    }
}

impl Source for Memory {
    fn sample_rate_hz(&self) -> u32 {
        self.sample_rate_hz
    }

    fn channels(&self) -> u16 {
        self.channels
    }

    fn next(&mut self, block: &mut Vec<f32>) -> Result<Option<Block>, AudioError> {
        let width = usize::from(self.channels);
        let frames = (self.samples.len() / width - self.read_frames).min(self.block_frames);
        block.clear();
        if frames == 0 {
            return Ok(None);
        }
        let first = self.read_frames * width;
        block.extend_from_slice(&self.samples[first..first + frames * width]);
        let position = self.read_frames as u64;
        self.read_frames += frames;
        Ok(Some(Block { frames, position }))
    }
}
