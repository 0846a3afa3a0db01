//! The head of a WAV file, read with suspicion and rewritten for the decoder.
//!
//! Recorders that crash, pipes and files over 4 GiB leave lengths of 0, 0xFFFFFFFF or nonsense in the head. Only the
//! format and the start of the samples are taken from it; a stated length only bounds the reading, so that chunks
//! behind the samples are not heard, and nothing is ever allocated by it.
//! Source: "Multimedia Programming Interface and Data Specifications 1.0" (IBM, Microsoft, 1991), WAVE;
//! "Multiple Channel Audio Data and WAVE Files" (Microsoft, 2001); EBU Tech 3306 (RF64).

use super::FileError;
use std::io::{self, Read};

const PCM: u16 = 1;
const ADPCM_MS: u16 = 2;
const FLOAT: u16 = 3;
const A_LAW: u16 = 6;
const MU_LAW: u16 = 7;
const ADPCM_IMA: u16 = 0x11;
const EXTENSIBLE: u16 = 0xfffe;

/// Length that says "not known".
const UNKNOWN: u32 = u32::MAX;

/// Largest format chunk that is kept; the largest that any readable coding needs has 50 bytes.
const FORMAT_BYTES: u64 = 128;

/// What the head of a WAV file says.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct WavHead {
    /// A head for the decoder: format as plain as it goes, length of the samples unknown.
    pub bytes: Vec<u8>,
    /// Bytes of samples to read, if that is known.
    pub data_bytes: Option<u64>,
    /// Frames that the head promises; none if it promises nothing.
    pub promised_frames: Option<u64>,
    /// True if the head states a length of 0 though samples follow.
    pub length_missing: bool,
}

/// Reads up to the first sample. `file_bytes` is the length of the whole file, if it has one.
pub(super) fn read_wav_head(input: &mut impl Read, file_bytes: Option<u64>) -> Result<WavHead, FileError> {
    let mut riff = [0; 12];
    read(input, &mut riff)?;
    let riff_length = u32_at(&riff, 4);
    let mut format = None;
    let mut long_data_length = None;
    let mut position = 12_u64;
    loop {
        let mut chunk = [0; 8];
        read(input, &mut chunk)?;
        let length = u32_at(&chunk, 4);
        position += 8;
        match &chunk[..4] {
            b"data" => {
                let format: Vec<u8> =
                    format.ok_or_else(|| FileError::Broken("the WAV head has no format chunk".to_owned()))?;
                let finished = file_bytes == Some(position) || file_bytes == Some(u64::from(riff_length) + 8);
                return head(&format, data_length(length, long_data_length, finished));
            }
            b"fmt " => format = Some(read_chunk(input, length)?),
            b"ds64" => long_data_length = read_chunk(input, length)?.get(8..16).map(u64_of),
            _ => skip(input, u64::from(length))?,
        }
        let padding = u64::from(length % 2);
        skip(input, padding)?;
        position += u64::from(length) + padding;
    }
}

/// What a stated length of the samples means.
enum DataLength {
    Stated(u64),
    Unknown,
    /// 0 in an unfinished file.
    Missing,
}

fn data_length(stated: u32, long: Option<u64>, finished: bool) -> DataLength {
    match (stated, long) {
        (UNKNOWN, Some(long)) if long > 0 => DataLength::Stated(long),
        (UNKNOWN, _) => DataLength::Unknown,
        (0, _) if !finished => DataLength::Missing,
        (bytes, _) => DataLength::Stated(u64::from(bytes)),
    }
}

fn head(format: &[u8], length: DataLength) -> Result<WavHead, FileError> {
    let (plain, frame_bytes) = plain_format(format)?;
    let mut bytes = b"RIFF\xff\xff\xff\xffWAVEfmt ".to_vec();
    bytes.extend_from_slice(&(plain.len() as u32).to_le_bytes());
    bytes.extend_from_slice(&plain);
    bytes.extend_from_slice(b"data\xff\xff\xff\xff");
    let (data_bytes, length_missing) = match length {
        DataLength::Stated(bytes) => (Some(bytes), false),
        DataLength::Unknown => (None, false),
        DataLength::Missing => (None, true),
    };
    let promised_frames = data_bytes.zip(frame_bytes).map(|(bytes, frame)| bytes / u64::from(frame));
    Ok(WavHead { bytes, data_bytes, promised_frames, length_missing })
}

/// The format chunk in its plainest form, and the bytes of a frame where each frame has as many.
fn plain_format(format: &[u8]) -> Result<(Vec<u8>, Option<u16>), FileError> {
    if format.len() < 16 {
        return Err(FileError::Broken("the WAV head has a format chunk that is too short".to_owned()));
    }
    let (stated_tag, channels, rate_hz) = (u16_at(format, 0), u16_at(format, 2), u32_at(format, 4));
    let (frame_bytes, bits) = (u16_at(format, 12), u16_at(format, 14));
    // An extensible format carries the plain tag in the first bytes of its sub-format.
    let tag = if stated_tag == EXTENSIBLE && format.len() >= 26 { u16_at(format, 24) } else { stated_tag };
    if channels == 0 || rate_hz == 0 {
        return Err(FileError::Broken(format!("the WAV head states {channels} channels at {rate_hz} Hz")));
    }
    if matches!(tag, ADPCM_MS | ADPCM_IMA) {
        return Ok((format.to_vec(), None));
    }
    // Samples stand left-justified in containers of whole bytes, so 20 valid bits in 3 bytes read as 24.
    let container =
        if frame_bytes > 0 && frame_bytes % channels == 0 { frame_bytes / channels } else { bits.div_ceil(8) };
    let possible = match tag {
        PCM => (1..=4).contains(&container),
        FLOAT => matches!(container, 4 | 8),
        A_LAW | MU_LAW => container == 1,
        _ => return Err(FileError::Coding(format!("WAV audio of coding {tag:#06x}"))),
    };
    if !possible {
        return Err(FileError::Broken(format!(
            "the WAV head states {bits} bits in {frame_bytes} bytes for {channels} channels; 8, 16, 24 or 32 bits per \
             sample, or 32 or 64 in floating point, can be read"
        )));
    }
    let frame_bytes = container.checked_mul(channels).ok_or_else(|| too_many(channels))?;
    let mut plain = Vec::with_capacity(18);
    for word in [tag, channels] {
        plain.extend_from_slice(&word.to_le_bytes());
    }
    plain.extend_from_slice(&rate_hz.to_le_bytes());
    plain.extend_from_slice(&rate_hz.wrapping_mul(u32::from(frame_bytes)).to_le_bytes());
    plain.extend_from_slice(&frame_bytes.to_le_bytes());
    plain.extend_from_slice(&(8 * container).to_le_bytes());
    if matches!(tag, A_LAW | MU_LAW) {
        plain.extend_from_slice(&[0, 0]);
    }
    Ok((plain, Some(frame_bytes)))
}

fn too_many(channels: u16) -> FileError {
    FileError::Broken(format!("the WAV head states {channels} channels; up to 26 can be read"))
}

fn read(input: &mut impl Read, bytes: &mut [u8]) -> Result<(), FileError> {
    input.read_exact(bytes).map_err(|error| match error.kind() {
        io::ErrorKind::UnexpectedEof => FileError::Broken("the WAV head is cut off before the first sample".to_owned()),
        _ => FileError::from_io("reading", error),
    })
}

/// Reads a chunk, keeping its first bytes.
fn read_chunk(input: &mut impl Read, length: u32) -> Result<Vec<u8>, FileError> {
    let kept = u64::from(length).min(FORMAT_BYTES);
    let mut bytes = vec![0; kept as usize];
    read(input, &mut bytes)?;
    skip(input, u64::from(length) - kept)?;
    Ok(bytes)
}

fn skip(input: &mut impl Read, bytes: u64) -> Result<(), FileError> {
    // A skip beyond the end shows at the next read.
    io::copy(&mut input.take(bytes), &mut io::sink()).map_err(|error| FileError::from_io("reading", error))?;
    Ok(())
}

fn u16_at(bytes: &[u8], offset: usize) -> u16 {
    u16::from_le_bytes([bytes[offset], bytes[offset + 1]])
}

fn u32_at(bytes: &[u8], offset: usize) -> u32 {
    u32::from(u16_at(bytes, offset)) | u32::from(u16_at(bytes, offset + 2)) << 16
}

fn u64_of(bytes: &[u8]) -> u64 {
    bytes.iter().rev().fold(0, |value, &byte| value << 8 | u64::from(byte))
}
