//! Writing clips as WAV or FLAC, with tags that say what they are. Full scale is ±1; samples beyond are cut.
//!
//! Tags: a LIST INFO chunk behind the samples of a WAV, Vorbis comments in a FLAC.

use super::flac::write_flac;
use super::write::write_atomically;
use super::{FileError, STANDARD_STREAM};
use dasp::Sample;
use dasp::sample::{FromSample, I24};
use std::io::{self, Cursor, Seek, SeekFrom, Write};

/// How samples are stored.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, clap::ValueEnum)]
pub enum SampleFormat {
    /// Integers of 16 bits.
    #[default]
    #[value(name = "16")]
    Int16,
    /// Integers of 24 bits.
    #[value(name = "24")]
    Int24,
    /// Floating point of 32 bits (WAV only).
    #[value(name = "float")]
    Float32,
}

impl SampleFormat {
    pub(super) fn bits(self) -> u16 {
        match self {
            Self::Int16 => 16,
            Self::Int24 => I24_BITS,
            Self::Float32 => 32,
        }
    }

    /// The nearest integer sample.
    pub(super) fn quantize(self, sample: f32) -> i32 {
        match self {
            Self::Int16 => i32::from(nearest::<i16>(sample, self.bits())),
            Self::Int24 | Self::Float32 => nearest::<I24>(sample, I24_BITS).inner(),
        }
    }
}

/// Bits of the type [`I24`].
const I24_BITS: u16 = 24;

/// The nearest sample of an integer type of so many bits; what is beyond full scale is cut. The conversion itself cuts
/// towards zero, so half a step is added first.
fn nearest<S: FromSample<f64>>(sample: f32, bits: u16) -> S {
    let step = 0.5f64.powi(i32::from(bits) - 1);
    let held = sample.to_sample::<f64>().clamp(-1.0, 1.0 - step);
    S::from_sample_(held + (0.5 * step).copysign(held))
}

/// What stands beside the samples of a clip.
#[derive(Debug, Clone, Default)]
pub struct ClipFacts {
    /// Channels; 0 counts as 1.
    pub channels: u16,
    /// Samples per second and channel, Hz.
    pub sample_rate_hz: u32,
    /// How samples are stored.
    pub format: SampleFormat,
    /// Title; none is left out.
    pub title: Option<String>,
    /// What it is; none is left out.
    pub comment: Option<String>,
}

impl ClipFacts {
    pub(super) fn width(&self) -> u16 {
        self.channels.max(1)
    }
}

/// Writes interleaved samples: FLAC if the name ends in `.flac`, WAV if it ends in `.wav` or is `-` (standard output). Files
/// are written as the samples come; standard output is made in memory first.
///
/// # Errors
/// [`FileError`] for another ending, a format that the file cannot hold, or a place that cannot be written.
pub fn write_frames(name: &str, samples: impl IntoIterator<Item = f32>, facts: &ClipFacts) -> Result<(), FileError> {
    match name.rsplit_once('.').map(|(_, extension)| extension.to_ascii_lowercase()).as_deref() {
        Some("wav") => write_atomically(name, |out| write_wav(out, samples, facts)),
        Some("flac") if facts.format == SampleFormat::Float32 => {
            Err(FileError::Broken("FLAC holds no floating point; choose 16 or 24 bits, or WAV".to_owned()))
        }
        Some("flac") => write_atomically(name, |out| write_flac(out, samples, facts)),
        _ if name == STANDARD_STREAM => {
            let mut bytes = Cursor::new(Vec::new());
            write_wav(&mut bytes, samples, facts)
                .and_then(|()| io::stdout().lock().write_all(bytes.get_ref()))
                .map_err(|error| FileError::from_io("writing", error))
        }
        _ => Err(FileError::Broken("the name of a clip must end in .wav or .flac".to_owned())),
    }
}

pub(super) fn write_wav(
    mut out: impl Write + Seek,
    samples: impl IntoIterator<Item = f32>,
    facts: &ClipFacts,
) -> io::Result<()> {
    let sample_format =
        if facts.format == SampleFormat::Float32 { hound::SampleFormat::Float } else { hound::SampleFormat::Int };
    let spec = hound::WavSpec {
        channels: facts.width(),
        sample_rate: facts.sample_rate_hz,
        bits_per_sample: facts.format.bits(),
        sample_format,
    };
    let in_io = |error| match error {
        hound::Error::IoError(error) => error,
        other => io::Error::other(other),
    };
    let mut writer = hound::WavWriter::new(&mut out, spec).map_err(in_io)?;
    for sample in samples {
        match facts.format {
            SampleFormat::Float32 => writer.write_sample(sample),
            _ => writer.write_sample(facts.format.quantize(sample)),
        }
        .map_err(in_io)?;
    }
    // Errors of the last bytes show only here.
    writer.finalize().map_err(in_io)?;
    append_tags(&mut out, facts)
}

/// Appends a LIST INFO chunk and corrects the length of the whole.
fn append_tags(out: &mut (impl Write + Seek), facts: &ClipFacts) -> io::Result<()> {
    let software = facts.comment.as_ref().map(|_| software());
    let tags = [(b"INAM", &facts.title), (b"ICMT", &facts.comment), (b"ISFT", &software)];
    let mut list = b"INFO".to_vec();
    for (id, text) in tags {
        let Some(text) = text else { continue };
        // A text ends in a zero; a chunk is filled up to an even length that its size does not count.
        let size = u32::try_from(text.len() + 1).map_err(io::Error::other)?;
        list.extend_from_slice(id);
        list.extend_from_slice(&size.to_le_bytes());
        list.extend_from_slice(text.as_bytes());
        list.resize(list.len() + 1 + (size % 2) as usize, 0);
    }
    if list.len() == 4 {
        return Ok(());
    }
    let end = out.seek(SeekFrom::End(0))?;
    // The samples of a mono 24-bit clip may be odd in number.
    if end % 2 == 1 {
        out.write_all(&[0])?;
    }
    out.write_all(b"LIST")?;
    out.write_all(&u32::try_from(list.len()).map_err(io::Error::other)?.to_le_bytes())?;
    out.write_all(&list)?;
    let total = out.stream_position()?;
    out.seek(SeekFrom::Start(4))?;
    out.write_all(&u32::try_from(total - 8).map_err(io::Error::other)?.to_le_bytes())?;
    out.seek(SeekFrom::Start(total))?;
    Ok(())
}

pub(super) fn software() -> String {
    format!("gaptone {}", env!("CARGO_PKG_VERSION"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn samples_go_to_the_nearest_step_and_full_scale_is_kept() {
        let step = 1.0 / 32_768.0;
        for (sample, stored) in [
            (0.0, 0),
            (0.49 * step, 0),
            (0.51 * step, 1),
            (-0.51 * step, -1),
            (1.0, 32_767),
            (7.0, 32_767),
            (-1.0, -32_768),
            (-7.0, -32_768),
        ] {
            assert_eq!(SampleFormat::Int16.quantize(sample), stored, "{sample}");
        }
        assert_eq!(SampleFormat::Int24.quantize(0.5), 1 << 22);
        assert_eq!(SampleFormat::Int24.quantize(1.0), (1 << 23) - 1);
        assert_eq!(SampleFormat::Int24.quantize(-2.0), -(1 << 23));
        assert_eq!(SampleFormat::Int24.quantize(f32::NAN), 0);
    }

    /// A disk with room for some bytes.
    struct Disk {
        bytes: Cursor<Vec<u8>>,
        room: u64,
    }

    impl Write for Disk {
        fn write(&mut self, data: &[u8]) -> io::Result<usize> {
            if self.bytes.position() + data.len() as u64 > self.room {
                return Err(io::Error::new(io::ErrorKind::StorageFull, "no space left"));
            }
            self.bytes.write(data)
        }

        fn flush(&mut self) -> io::Result<()> {
            Ok(())
        }
    }

    impl Seek for Disk {
        fn seek(&mut self, to: SeekFrom) -> io::Result<u64> {
            self.bytes.seek(to)
        }
    }

    fn facts(format: SampleFormat) -> ClipFacts {
        ClipFacts {
            channels: 1,
            sample_rate_hz: 8000,
            format,
            title: Some("Ünseen".to_owned()),
            comment: Some("Synthetic".to_owned()),
        }
    }

    #[test]
    fn a_full_disk_is_an_error_wherever_it_strikes() {
        let write = |room| {
            let disk = Disk { bytes: Cursor::new(Vec::new()), room };
            write_wav(disk, std::iter::repeat_n(0.25, 1001), &facts(SampleFormat::Int24))
        };
        let flac = |room| {
            let disk = Disk { bytes: Cursor::new(Vec::new()), room };
            let noise = (0..20_000u32).map(|k| (k.wrapping_mul(2_654_435_761) >> 16) as f32 / 65_536.0 - 0.5);
            write_flac(disk, noise, &facts(SampleFormat::Int16))
        };
        assert!(flac(100_000).is_ok());
        for room in [10, 60, 1000, 30_000] {
            assert_eq!(flac(room).expect_err("no room").kind(), io::ErrorKind::StorageFull, "{room}");
        }
        let needed = 44 + 3 * 1001 + 200;
        assert!(write(needed).is_ok());
        // In the head, among the samples, in their last bytes, in the tags.
        for room in [10, 1000, 44 + 3 * 1001 - 1, 44 + 3 * 1001 + 30] {
            assert_eq!(write(room).expect_err("no room").kind(), io::ErrorKind::StorageFull, "{room}");
        }
    }

    #[test]
    fn tags_stand_behind_the_samples_and_the_lengths_are_right() {
        for (format, count) in [(SampleFormat::Int24, 1001), (SampleFormat::Int16, 10), (SampleFormat::Float32, 7)] {
            let mut bytes = Cursor::new(Vec::new());
            write_wav(&mut bytes, std::iter::repeat_n(0.25, count), &facts(format)).expect("written");
            let bytes = bytes.into_inner();
            let word =
                |at: usize| u32::from_le_bytes([bytes[at], bytes[at + 1], bytes[at + 2], bytes[at + 3]]) as usize;
            assert_eq!(word(4) + 8, bytes.len());
            let mut at = 12;
            let mut chunks = Vec::new();
            while at < bytes.len() {
                chunks.push(bytes[at..at + 4].to_vec());
                at += 8 + word(at + 4).next_multiple_of(2);
            }
            assert_eq!(at, bytes.len());
            assert_eq!(chunks.last().map(Vec::as_slice), Some(&b"LIST"[..]));
            let text = String::from_utf8_lossy(&bytes);
            assert!(text.contains("Ünseen") && text.contains("Synthetic") && text.contains("gaptone "));
            let reader = hound::WavReader::new(Cursor::new(&bytes)).expect("a WAV file");
            assert_eq!(reader.duration() as usize, count);
        }
    }

    #[test]
    fn a_flac_keeps_its_tags_and_both_channels() {
        let folder = tempfile::tempdir().expect("a folder");
        let path = folder.path().join("a.flac");
        let name = path.to_str().expect("UTF-8");
        let facts = ClipFacts { channels: 2, ..facts(SampleFormat::Int16) };
        write_frames(name, (0..20_000).map(|n| if n % 2 == 0 { 0.5 } else { -0.25 }), &facts).expect("written");
        let bytes = std::fs::read(&path).expect("read");
        let text = String::from_utf8_lossy(&bytes);
        assert!(text.contains("TITLE=Ünseen") && text.contains("COMMENT=Synthetic"));
        let mut recording = super::super::open(name).expect("a recording");
        let mut block = Vec::new();
        use crate::audio::Source;
        assert_eq!(recording.channels(), 2);
        let read = recording.next(&mut block).expect("samples").expect("a block");
        assert!(read.frames > 0 && block[..2] == [0.5, -0.25]);
    }
}
