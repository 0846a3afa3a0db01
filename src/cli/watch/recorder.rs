//! Keeps the audio that is watched in WAV files that are whole at any time: the head is brought up to date each second.

use crate::cli::files::FileError;
use hound::{SampleFormat, WavSpec, WavWriter};
use std::fs::File;
use std::io::{self, BufWriter};
use std::path::{Path, PathBuf};

/// 24 bits hold what any sound card gives.
const BITS: u16 = 24;
const FULL: f32 = 8_388_607.0;
/// Most bytes of samples in a file: a WAV counts them in 32 bits.
const MOST_BYTES: u64 = 4_000_000_000;

/// The file that is being written.
pub(super) struct Recorder {
    place: PathBuf,
    part: u32,
    spec: WavSpec,
    writer: Option<WavWriter<BufWriter<File>>>,
    /// Samples in this file, samples since its head was brought up to date.
    samples: u64,
    fresh: u32,
}

impl Recorder {
    /// Begins a file.
    ///
    /// # Errors
    /// [`FileError`] if it cannot be written.
    pub fn new(place: &str, sample_rate_hz: u32) -> Result<Self, FileError> {
        let spec = WavSpec {
            channels: 1,
            sample_rate: sample_rate_hz,
            bits_per_sample: BITS,
            sample_format: SampleFormat::Int,
        };
        if Path::new(place).is_dir() {
            return Err(FileError::Directory);
        }
        let mut recorder = Self { place: place.into(), part: 1, spec, writer: None, samples: 0, fresh: 0 };
        recorder.open()?;
        Ok(recorder)
    }

    fn open(&mut self) -> Result<(), FileError> {
        let place = part_of(&self.place, self.part);
        let mut writer = WavWriter::create(place, self.spec).map_err(failed)?;
        writer.flush().map_err(failed)?;
        (self.writer, self.samples, self.fresh) = (Some(writer), 0, 0);
        Ok(())
    }

    /// Adds samples.
    ///
    /// # Errors
    /// [`FileError`]; what was written before stays readable.
    pub fn write(&mut self, mono: &[f32]) -> Result<(), FileError> {
        if (self.samples + mono.len() as u64) * u64::from(BITS / 8) > MOST_BYTES {
            self.close()?;
            self.part += 1;
            self.open()?;
        }
        let Some(writer) = &mut self.writer else { return Ok(()) };
        for x in mono {
            writer.write_sample((x * (FULL + 1.0)).round().clamp(-FULL - 1.0, FULL) as i32).map_err(failed)?;
        }
        self.samples += mono.len() as u64;
        self.fresh += mono.len() as u32;
        if self.fresh >= self.spec.sample_rate {
            self.fresh = 0;
            writer.flush().map_err(failed)?;
        }
        Ok(())
    }

    /// Ends the file.
    ///
    /// # Errors
    /// [`FileError`].
    pub fn close(&mut self) -> Result<(), FileError> {
        self.writer.take().map_or(Ok(()), |writer| writer.finalize().map_err(failed))
    }
}

fn failed(error: hound::Error) -> FileError {
    let error = match error {
        hound::Error::IoError(error) => error,
        other => io::Error::other(other.to_string()),
    };
    FileError::from_io("writing", error)
}

/// `run.wav`, `run-2.wav`, `run-3.wav` …
fn part_of(place: &Path, part: u32) -> PathBuf {
    if part == 1 {
        return place.to_owned();
    }
    let stem = place.file_stem().unwrap_or_default().to_string_lossy();
    let ending = place.extension().map(|ending| format!(".{}", ending.to_string_lossy())).unwrap_or_default();
    place.with_file_name(format!("{stem}-{part}{ending}"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_file_is_whole_up_to_its_last_second_without_being_closed() {
        let folder = tempfile::tempdir().expect("a folder");
        let place = folder.path().join("run.wav");
        let mut recorder = Recorder::new(place.to_str().expect("UTF-8"), 8000).expect("writable");
        let samples: Vec<f32> = (0..20_000).map(|n| ((n % 400) as f32 - 200.0) / 256.0).collect();
        samples.chunks(160).for_each(|part| recorder.write(part).expect("written"));
        // As after a kill: nothing is closed.
        std::mem::forget(recorder);
        let mut reader = hound::WavReader::open(&place).expect("a WAV file");
        let read: Vec<f32> = reader.samples::<i32>().map(|x| x.expect("a sample") as f32 / (FULL + 1.0)).collect();
        assert!((12_001..=20_000).contains(&read.len()), "{}", read.len());
        assert_eq!(read, samples[..read.len()]);
    }

    #[test]
    fn parts_are_numbered_behind_the_name() {
        assert_eq!(part_of(Path::new("a/run.wav"), 1), Path::new("a/run.wav"));
        assert_eq!(part_of(Path::new("a/run.wav"), 3), Path::new("a/run-3.wav"));
        assert_eq!(part_of(Path::new("run"), 2), Path::new("run-2"));
    }
}
