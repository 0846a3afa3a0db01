//! Opening a recording: a file of any kind that can be read, or a WAV and most other kinds on standard input.

use super::kind::{HEAD_BYTES, Kind, kind};
use super::wav_head::read_wav_head;
use super::{FileError, Recording, STANDARD_STREAM};
use std::fs::File;
use std::io::{Cursor, Read, Seek};
use symphonia::core::formats::FormatOptions;
use symphonia::core::formats::probe::Hint;
use symphonia::core::io::{MediaSource, MediaSourceStream, ReadOnlySource};
use symphonia::core::meta::MetadataOptions;

/// Anything that bytes come from.
type Bytes = Box<dyn Read + Send + Sync>;

/// What the head of a file says about its length.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Promise {
    /// Frames promised.
    pub frames: Option<u64>,
    /// A length of 0 is stated though samples follow.
    pub length_missing: bool,
}

/// Opens a recording; `-` is standard input.
///
/// # Errors
/// [`FileError`] if there is no such file or it is no recording that can be decoded.
pub fn open(name: &str) -> Result<Recording, FileError> {
    if name == STANDARD_STREAM {
        return open_stream(Box::new(std::io::stdin()), name, None);
    }
    let failed = |error| FileError::from_io("reading", error);
    let file = File::open(name).map_err(failed)?;
    let facts = file.metadata().map_err(failed)?;
    if facts.is_dir() {
        return Err(FileError::Directory);
    }
    if !facts.is_file() {
        return open_stream(Box::new(file), name, None);
    }
    let mut copy = file.try_clone().map_err(failed)?;
    let head = read_head(&mut copy)?;
    copy.rewind().map_err(failed)?;
    match kind(&head, name) {
        // A container may keep its table at the end, so it needs the file itself.
        Kind::Sound => probe(Box::new(file), Promise::default()),
        _ => open_stream(Box::new(file), name, Some(facts.len())),
    }
}

fn open_stream(mut input: Bytes, name: &str, file_bytes: Option<u64>) -> Result<Recording, FileError> {
    let head = read_head(&mut input)?;
    match kind(&head, name) {
        Kind::Other(looks) => Err(FileError::NotSound(looks)),
        Kind::Sound => {
            probe(read_only(Cursor::new(head).chain(input)), Promise::default()).map_err(|error| match error {
                FileError::Broken(what) => FileError::Broken(format!(
                    "{what}; a stream must be WAV, FLAC, Ogg Vorbis or MP3, others need a file"
                )),
                other => other,
            })
        }
        Kind::Wav => {
            let mut whole = Cursor::new(head).chain(input);
            let head = read_wav_head(&mut whole, file_bytes)?;
            let promise = Promise { frames: head.promised_frames, length_missing: head.length_missing };
            let samples = whole.take(head.data_bytes.unwrap_or(u64::MAX));
            probe(read_only(Cursor::new(head.bytes).chain(samples)), promise)
        }
    }
}

fn read_head(input: &mut impl Read) -> Result<Vec<u8>, FileError> {
    let mut head = Vec::new();
    input.take(HEAD_BYTES).read_to_end(&mut head).map_err(|error| FileError::from_io("reading", error))?;
    if head.is_empty() { Err(FileError::Empty) } else { Ok(head) }
}

fn read_only(input: impl Read + Send + Sync + 'static) -> Box<dyn MediaSource> {
    Box::new(ReadOnlySource::new(input))
}

fn probe(source: Box<dyn MediaSource>, promise: Promise) -> Result<Recording, FileError> {
    let stream = MediaSourceStream::new(source, Default::default());
    let reader = symphonia::default::get_probe()
        .probe(&Hint::new(), stream, FormatOptions::default(), MetadataOptions::default())
        .map_err(|error| FileError::Broken(format!("the head of the file cannot be read ({error})")))?;
    Recording::new(reader, promise)
}
