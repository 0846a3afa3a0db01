//! Writing mono clips as WAV or FLAC. Full scale is ±1; samples beyond are cut.

use super::write::write_atomically;
use super::{FileError, STANDARD_STREAM};
use flacenc::component::BitRepr;
use flacenc::error::Verify;
use std::io::{self, Cursor, Seek, Write};

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
    fn bits(self) -> u16 {
        match self {
            Self::Int16 => 16,
            Self::Int24 => 24,
            Self::Float32 => 32,
        }
    }

    /// The nearest integer sample.
    fn quantize(self, sample: f32) -> i32 {
        let full_scale = 2f64.powi(i32::from(self.bits()) - 1);
        (f64::from(sample) * full_scale).round().clamp(-full_scale, full_scale - 1.0) as i32
    }
}

/// Writes a mono clip: FLAC if the name ends in `.flac`, WAV if it ends in `.wav` or is `-` (standard output). A WAV
/// file is written as the samples come; the others are made in memory.
///
/// # Errors
/// [`FileError`] for another ending, a format that the file cannot hold, or a place that cannot be written.
pub fn write_clip(
    name: &str,
    samples: impl IntoIterator<Item = f32>,
    sample_rate_hz: u32,
    format: SampleFormat,
) -> Result<(), FileError> {
    match name.rsplit_once('.').map(|(_, extension)| extension.to_ascii_lowercase()).as_deref() {
        Some("wav") => write_atomically(name, |out| write_wav(out, samples, sample_rate_hz, format)),
        Some("flac") if format == SampleFormat::Float32 => {
            Err(FileError::Broken("FLAC holds no floating point; choose 16 or 24 bits, or WAV".to_owned()))
        }
        Some("flac") => {
            let bytes = flac_bytes(samples, sample_rate_hz, format).map_err(FileError::Broken)?;
            write_atomically(name, |out| out.write_all(&bytes))
        }
        _ if name == STANDARD_STREAM => {
            let mut bytes = Cursor::new(Vec::new());
            write_wav(&mut bytes, samples, sample_rate_hz, format)
                .and_then(|()| io::stdout().lock().write_all(bytes.get_ref()))
                .map_err(|error| FileError::from_io("writing", error))
        }
        _ => Err(FileError::Broken("the name of a clip must end in .wav or .flac".to_owned())),
    }
}

fn write_wav(
    out: impl Write + Seek,
    samples: impl IntoIterator<Item = f32>,
    sample_rate_hz: u32,
    format: SampleFormat,
) -> io::Result<()> {
    let sample_format =
        if format == SampleFormat::Float32 { hound::SampleFormat::Float } else { hound::SampleFormat::Int };
    let spec =
        hound::WavSpec { channels: 1, sample_rate: sample_rate_hz, bits_per_sample: format.bits(), sample_format };
    let in_io = |error| match error {
        hound::Error::IoError(error) => error,
        other => io::Error::other(other),
    };
    let mut writer = hound::WavWriter::new(out, spec).map_err(in_io)?;
    for sample in samples {
        match format {
            SampleFormat::Float32 => writer.write_sample(sample),
            _ => writer.write_sample(format.quantize(sample)),
        }
        .map_err(in_io)?;
    }
    // Errors of the last bytes show only here.
    writer.finalize().map_err(in_io)
}

fn flac_bytes(
    samples: impl IntoIterator<Item = f32>,
    sample_rate_hz: u32,
    format: SampleFormat,
) -> Result<Vec<u8>, String> {
    let told = |what: &str, error: &dyn std::fmt::Debug| format!("cannot be encoded as FLAC: {what} ({error:?})");
    let config = flacenc::config::Encoder::default().into_verified().map_err(|error| told("settings", &error.1))?;
    let integers: Vec<i32> = samples.into_iter().map(|sample| format.quantize(sample)).collect();
    let source =
        flacenc::source::MemSource::from_samples(&integers, 1, usize::from(format.bits()), sample_rate_hz as usize);
    let mut stream = flacenc::encode_with_fixed_block_size(&config, source, config.block_size)
        .map_err(|error| told("samples", &error))?;
    // The smallest block leaves the last one out (RFC 9639, 8.2); the encoder counts it, and readers then take the
    // stream for one of varying blocks.
    stream
        .stream_info_mut()
        .set_block_sizes(config.block_size, config.block_size)
        .map_err(|error| told("block size", &error))?;
    let mut sink = flacenc::bitsink::ByteSink::new();
    stream.write(&mut sink).map_err(|error| told("output", &error))?;
    Ok(sink.into_inner())
}
