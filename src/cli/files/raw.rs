//! Samples without a header.

use super::{FileError, STANDARD_STREAM};
use crate::audio::{AudioError, Block, Source};
use std::fs::File;
use std::io::{ErrorKind, Read};
use std::str::FromStr;

/// How a sample is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Coding {
    S16,
    S24,
    S32,
    F32,
}

/// What has to be known of samples without a header.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct RawFormat {
    coding: Coding,
    /// Samples per second, Hz.
    pub sample_rate_hz: u32,
    /// Channels.
    pub channels: u16,
}

impl FromStr for RawFormat {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let parts: Vec<&str> = text.split(':').map(str::trim).collect();
        let [coding, rate, channels] = parts[..] else {
            return Err("write coding, sample rate and channels, such as s16le:48000:1".to_owned());
        };
        let coding = match coding.to_ascii_lowercase().as_str() {
            "s16le" => Coding::S16,
            "s24le" => Coding::S24,
            "s32le" => Coding::S32,
            "f32le" => Coding::F32,
            other => {
                return Err(format!("'{other}' is no coding that is known here; s16le, s24le, s32le and f32le are"));
            }
        };
        let sample_rate_hz = rate.parse().ok().filter(|hz| (1000..=4_000_000).contains(hz));
        let sample_rate_hz = sample_rate_hz.ok_or_else(|| format!("'{rate}' is no sample rate, 1000 to 4000000 Hz"))?;
        let channels = channels.parse().ok().filter(|count| (1..=64).contains(count));
        let channels = channels.ok_or_else(|| format!("'{}' is no count of channels, 1 to 64", parts[2]))?;
        Ok(Self { coding, sample_rate_hz, channels })
    }
}

impl Coding {
    fn bytes(self) -> usize {
        match self {
            Self::S16 => 2,
            Self::S24 => 3,
            Self::S32 | Self::F32 => 4,
        }
    }

    /// A sample in units of full scale.
    fn sample(self, b: &[u8]) -> f32 {
        match self {
            Self::S16 => f32::from(i16::from_le_bytes([b[0], b[1]])) / 32_768.0,
            // Upper bytes first, so that the sign is in its place.
            Self::S24 => (i32::from_le_bytes([0, b[0], b[1], b[2]]) >> 8) as f32 / 8_388_608.0,
            Self::S32 => (f64::from(i32::from_le_bytes([b[0], b[1], b[2], b[3]])) / 2_147_483_648.0) as f32,
            Self::F32 => f32::from_le_bytes([b[0], b[1], b[2], b[3]]),
        }
    }
}

/// Frames read at once, s.
const BLOCK_S: f64 = 0.02;

/// Samples without a header as they are read.
pub struct RawSource {
    input: Box<dyn Read + Send>,
    format: RawFormat,
    bytes: Vec<u8>,
    /// Bytes at the front of `bytes` that belong to the next frame.
    rest: usize,
    frames: u64,
}

/// Opens samples without a header; `-` is standard input.
///
/// # Errors
/// [`FileError`] if there is no such file.
pub fn open_raw(name: &str, format: RawFormat) -> Result<RawSource, FileError> {
    let input: Box<dyn Read + Send> = if name == STANDARD_STREAM {
        Box::new(std::io::stdin())
    } else {
        let file = File::open(name).map_err(|error| FileError::from_io("reading", error))?;
        if file.metadata().is_ok_and(|facts| facts.is_dir()) {
            return Err(FileError::Directory);
        }
        Box::new(file)
    };
    Ok(RawSource { input, format, bytes: Vec::new(), rest: 0, frames: 0 })
}

impl Source for RawSource {
    fn sample_rate_hz(&self) -> u32 {
        self.format.sample_rate_hz
    }

    fn channels(&self) -> u16 {
        self.format.channels
    }

    fn full_scale(&self) -> f32 {
        match self.format.coding {
            Coding::S16 => 1.0 - 1.0 / 32_768.0,
            Coding::S24 => 1.0 - 1.0 / 8_388_608.0,
            Coding::S32 | Coding::F32 => 1.0,
        }
    }

    fn next(&mut self, block: &mut Vec<f32>) -> Result<Option<Block>, AudioError> {
        let frame = self.format.coding.bytes() * usize::from(self.format.channels);
        let wanted = ((BLOCK_S * f64::from(self.format.sample_rate_hz)) as usize).max(1) * frame;
        self.bytes.resize(wanted, 0);
        block.clear();
        // A pipe gives what it has: less than a frame is no end.
        while self.rest < frame {
            match self.input.read(&mut self.bytes[self.rest..]) {
                // A cut frame at the end is left out.
                Ok(0) => return Ok(None),
                Ok(read) => self.rest += read,
                Err(error) if error.kind() == ErrorKind::Interrupted => {}
                Err(error) => return Err(AudioError::Read(format!("reading failed: {error}"))),
            }
        }
        let whole = self.rest - self.rest % frame;
        let coding = self.format.coding;
        block.extend(self.bytes[..whole].chunks_exact(coding.bytes()).map(|bytes| coding.sample(bytes)));
        self.bytes.copy_within(whole..self.rest, 0);
        self.rest -= whole;
        let frames = whole / frame;
        let position = self.frames;
        self.frames += frames as u64;
        Ok(Some(Block { frames, position }))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Gives its bytes a few at a time.
    struct Drip(Vec<u8>, usize);

    impl Read for Drip {
        fn read(&mut self, buffer: &mut [u8]) -> std::io::Result<usize> {
            let count = 5.min(buffer.len()).min(self.0.len() - self.1);
            buffer[..count].copy_from_slice(&self.0[self.1..self.1 + count]);
            self.1 += count;
            Ok(count)
        }
    }

    #[test]
    fn samples_of_every_coding_are_read_however_they_drip_in() {
        for (text, bytes, value) in [
            ("s16le:8000:2", vec![0x00, 0xC0], -0.5),
            ("s24le:8000:2", vec![0x00, 0x00, 0x40], 0.5),
            ("s32le:8000:2", vec![0, 0, 0, 0xA0], -0.75),
            ("f32le:8000:2", 0.25f32.to_le_bytes().to_vec(), 0.25),
        ] {
            let format: RawFormat = text.parse().expect("a format");
            // Nine samples: the last frame of two channels is cut.
            let input = Box::new(Drip(bytes.repeat(9), 0));
            let mut source = RawSource { input, format, bytes: Vec::new(), rest: 0, frames: 0 };
            let (mut all, mut block) = (Vec::new(), Vec::new());
            while let Some(read) = source.next(&mut block).expect("no error") {
                assert_eq!(read.position as usize * 2, all.len());
                all.extend_from_slice(&block);
            }
            assert_eq!(all, vec![value; 8], "{text}");
        }
    }

    #[test]
    fn a_wrong_format_says_what_would_be_right() {
        for wrong in ["s16le", "s16be:48000:1", "s16le:0:1", "s16le:48000:0", "s16le:48000:1:2", "s16le:many:1"] {
            assert!(wrong.parse::<RawFormat>().is_err(), "{wrong}");
        }
    }
}
