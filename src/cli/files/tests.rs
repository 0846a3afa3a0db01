use super::*;
use crate::audio::Source;
use std::fs;
use std::path::PathBuf;

const SAMPLE_RATE_HZ: u32 = 48_000;

/// Everything a reader gives: samples in their places (lost ones as 9), notes, the reader itself.
fn read_all(path: &std::path::Path) -> (Vec<f32>, Vec<String>, Recording) {
    let mut recording = open(path.to_str().expect("UTF-8")).expect("a recording that can be opened");
    let (mut all, mut block) = (Vec::new(), Vec::new());
    while let Some(at) = recording.next(&mut block).expect("it can be read") {
        all.resize(at.position as usize * usize::from(recording.channels()), 9.0);
        all.extend_from_slice(&block);
    }
    (all, recording.notes(), recording)
}

/// A WAV file of one chunk `fmt ` and one chunk `data`, with lengths as given.
fn wav(format: &[u8], data: &[u8], stated_data_bytes: u32) -> Vec<u8> {
    let mut bytes = b"RIFF".to_vec();
    let riff = stated_data_bytes.saturating_add(20 + format.len() as u32);
    bytes.extend_from_slice(&riff.to_le_bytes());
    bytes.extend_from_slice(b"WAVEfmt ");
    bytes.extend_from_slice(&(format.len() as u32).to_le_bytes());
    bytes.extend_from_slice(format);
    bytes.extend_from_slice(b"data");
    bytes.extend_from_slice(&stated_data_bytes.to_le_bytes());
    bytes.extend_from_slice(data);
    bytes
}

fn plain_format(tag: u16, channels: u16, bits: u16) -> Vec<u8> {
    let frame = channels * bits / 8;
    let mut bytes = Vec::new();
    bytes.extend_from_slice(&tag.to_le_bytes());
    bytes.extend_from_slice(&channels.to_le_bytes());
    bytes.extend_from_slice(&SAMPLE_RATE_HZ.to_le_bytes());
    bytes.extend_from_slice(&(SAMPLE_RATE_HZ * u32::from(frame)).to_le_bytes());
    bytes.extend_from_slice(&frame.to_le_bytes());
    bytes.extend_from_slice(&bits.to_le_bytes());
    bytes
}

fn extensible_format(tag: u16, channels: u16, bits: u16, valid_bits: u16) -> Vec<u8> {
    let mut bytes = plain_format(0xfffe, channels, bits);
    bytes.extend_from_slice(&22_u16.to_le_bytes());
    bytes.extend_from_slice(&valid_bits.to_le_bytes());
    bytes.extend_from_slice(&[0; 4]);
    bytes.extend_from_slice(&tag.to_le_bytes());
    bytes.extend_from_slice(&[0, 0, 0, 0, 0x10, 0, 0x80, 0, 0, 0xaa, 0, 0x38, 0x9b, 0x71]);
    bytes
}

struct Folder(tempfile::TempDir);

impl Folder {
    fn new() -> Self {
        Self(tempfile::tempdir().expect("a temporary folder"))
    }

    fn file(&self, name: &str, bytes: &[u8]) -> PathBuf {
        let path = self.0.path().join(name);
        fs::write(&path, bytes).expect("written");
        path
    }
}

/// Eighths of full scale: exact in every width from 8 bits up.
const EIGHTHS: [i8; 9] = [0, 1, -1, 4, -4, 7, -7, 3, -8];

fn eighths() -> Vec<f32> {
    EIGHTHS.iter().map(|&eighth| f32::from(eighth) / 8.0).collect()
}

fn integers(bits: u32) -> Vec<u8> {
    let bytes_of = |&eighth: &i8| {
        let value = i64::from(eighth) << (bits - 4);
        let stored = if bits == 8 { value + 128 } else { value };
        stored.to_le_bytes()[..bits as usize / 8].to_vec()
    };
    EIGHTHS.iter().flat_map(bytes_of).collect()
}

#[test]
fn every_width_of_sample_gives_the_same_samples() {
    let folder = Folder::new();
    let mut cases: Vec<(String, Vec<u8>, Vec<u8>)> = Vec::new();
    for bits in [8, 16, 24, 32] {
        cases.push((format!("plain {bits}"), plain_format(1, 1, bits), integers(u32::from(bits))));
        cases.push((format!("extensible {bits}"), extensible_format(1, 1, bits, bits), integers(u32::from(bits))));
    }
    cases.push(("20 of 24".into(), extensible_format(1, 1, 24, 20), integers(24)));
    let single: Vec<u8> = eighths().iter().flat_map(|sample| sample.to_le_bytes()).collect();
    let double: Vec<u8> = eighths().iter().flat_map(|&sample| f64::from(sample).to_le_bytes()).collect();
    cases.push(("float 32".into(), plain_format(3, 1, 32), single.clone()));
    cases.push(("float 64".into(), plain_format(3, 1, 64), double));
    cases.push(("extensible float".into(), extensible_format(3, 1, 32, 32), single));
    for (name, format, data) in cases {
        let path = folder.file("a.wav", &wav(&format, &data, data.len() as u32));
        let (samples, notes, recording) = read_all(&path);
        assert_eq!(samples, eighths(), "{name}");
        assert!(notes.is_empty(), "{name}: {notes:?}");
        assert_eq!((recording.sample_rate_hz(), recording.channels()), (SAMPLE_RATE_HZ, 1), "{name}");
    }
}

#[test]
fn full_scale_follows_the_width() {
    let folder = Folder::new();
    let path = folder.file("a.wav", &wav(&plain_format(1, 1, 8), &integers(8), 9));
    assert_eq!(read_all(&path).2.full_scale(), 127.0 / 128.0);
    let path = folder.file("b.wav", &wav(&plain_format(1, 1, 16), &integers(16), 18));
    assert_eq!(read_all(&path).2.full_scale(), 32_767.0 / 32_768.0);
}

#[test]
fn samples_of_several_channels_come_interleaved() {
    let folder = Folder::new();
    let data: Vec<u8> = (0..9_i16).flat_map(|k| (k << 10).to_le_bytes()).collect();
    let path = folder.file("a.wav", &wav(&plain_format(1, 3, 16), &data, 18));
    let (samples, _, recording) = read_all(&path);
    assert_eq!(recording.channels(), 3);
    assert_eq!(samples, (0..9).map(|k| k as f32 / 32.0).collect::<Vec<_>>());
}

#[test]
fn values_that_are_not_numbers_reach_the_intake_as_they_are() {
    let folder = Folder::new();
    let data: Vec<u8> = [f32::NAN, f32::INFINITY, 2.5, -3.0].iter().flat_map(|sample| sample.to_le_bytes()).collect();
    let (samples, _, _) = read_all(&folder.file("a.wav", &wav(&plain_format(3, 1, 32), &data, 16)));
    assert!(samples[0].is_nan());
    assert_eq!(samples[1..], [f32::INFINITY, 2.5, -3.0]);
}

fn long_data(frames: i32) -> Vec<u8> {
    (0..frames).flat_map(|k| ((k % 1000) as i16).to_le_bytes()).collect()
}

#[test]
fn a_streaming_wav_is_read_to_its_end() {
    let folder = Folder::new();
    let data = long_data(5000);
    let (samples, notes, _) = read_all(&folder.file("a.wav", &wav(&plain_format(1, 1, 16), &data, u32::MAX)));
    assert_eq!(samples.len(), 5000);
    assert_eq!(samples[4999], 999.0 / 32_768.0);
    assert!(notes.is_empty(), "{notes:?}");
}

#[test]
fn a_cut_wav_gives_what_is_there_and_says_so() {
    let folder = Folder::new();
    let bytes = wav(&plain_format(1, 1, 16), &long_data(24_000), 96_000);
    let (samples, notes, _) = read_all(&folder.file("a.wav", &bytes));
    assert_eq!(samples.len(), 24_000);
    assert_eq!(notes, ["the recording is cut off: the header promises 1.00 s, 0.50 s are there"]);
}

#[test]
fn a_wav_left_by_a_crashed_recorder_is_read_to_its_end() {
    let folder = Folder::new();
    for riff in [0_u32, 36, u32::MAX] {
        let mut bytes = wav(&plain_format(1, 1, 16), &long_data(5000), 0);
        bytes[4..8].copy_from_slice(&riff.to_le_bytes());
        let (samples, notes, _) = read_all(&folder.file("a.wav", &bytes));
        assert_eq!(samples.len(), 5000);
        assert_eq!(notes, ["the header states no length; everything behind it was read"]);
    }
}

#[test]
fn a_wav_of_no_samples_is_an_empty_recording() {
    let folder = Folder::new();
    let (samples, notes, recording) = read_all(&folder.file("a.wav", &wav(&plain_format(1, 2, 16), &[], 0)));
    assert!(samples.is_empty() && notes.is_empty());
    assert_eq!((recording.sample_rate_hz(), recording.channels()), (SAMPLE_RATE_HZ, 2));
}

#[test]
fn a_chunk_behind_the_samples_is_not_heard() {
    let folder = Folder::new();
    let mut bytes = wav(&plain_format(1, 1, 16), &long_data(100), 200);
    bytes.extend_from_slice(b"LIST\x04\0\0\0INFO");
    assert_eq!(read_all(&folder.file("a.wav", &bytes)).0.len(), 100);
}

#[test]
fn chunks_before_the_samples_are_skipped_with_their_padding() {
    let folder = Folder::new();
    let plain = wav(&plain_format(1, 1, 16), &long_data(100), 200);
    let mut bytes = plain[..12].to_vec();
    bytes.extend_from_slice(b"junk\x03\0\0\0abc\0");
    bytes.extend_from_slice(&plain[12..]);
    assert_eq!(read_all(&folder.file("a.wav", &bytes)).0.len(), 100);
}

#[test]
fn a_head_that_claims_gigabytes_takes_no_memory_and_fails_clearly() {
    let folder = Folder::new();
    let mut bytes = b"RIFF\0\0\0\0WAVEfmt \xf0\xff\xff\xff".to_vec();
    bytes.extend_from_slice(&[0; 64]);
    let error = open(folder.file("a.wav", &bytes).to_str().expect("UTF-8")).err().expect("no recording");
    assert_eq!(error.to_string(), "the WAV head is cut off before the first sample");
}

#[test]
fn impossible_formats_are_refused_with_what_would_be_right() {
    let folder = Folder::new();
    let told = |format: Vec<u8>| {
        let path = folder.file("a.wav", &wav(&format, &long_data(100), 200));
        open(path.to_str().expect("UTF-8")).err().expect("no recording").to_string()
    };
    assert!(told(plain_format(1, 0, 16)).contains("0 channels"));
    assert!(told(plain_format(3, 1, 16)).contains("32 or 64 in floating point"));
    assert!(told(plain_format(0x55, 1, 16)).contains("coding 0x0055"));
    let mut slow = plain_format(1, 1, 16);
    slow[4..8].copy_from_slice(&10_u32.to_le_bytes());
    assert!(told(slow).contains("between 1000 Hz and 4000000 Hz"));
}

/// Writes a mono clip without tags.
fn write_mono(
    name: &str,
    samples: impl IntoIterator<Item = f32>,
    sample_rate_hz: u32,
    format: SampleFormat,
) -> Result<(), FileError> {
    write_frames(name, samples, &ClipFacts { channels: 1, sample_rate_hz, format, ..ClipFacts::default() })
}

fn clip(folder: &Folder, name: &str, format: SampleFormat) -> (Vec<f32>, PathBuf) {
    let samples: Vec<f32> = (0..96_000).map(|k| ((k % 977) as f32 / 977.0 - 0.5) * 0.9).collect();
    let path = folder.0.path().join(name);
    write_mono(path.to_str().expect("UTF-8"), samples.iter().copied(), SAMPLE_RATE_HZ, format).expect("written");
    (samples, path)
}

#[test]
fn what_is_written_is_read_back_within_half_a_step() {
    let folder = Folder::new();
    for (name, format, half_step) in [
        ("a.wav", SampleFormat::Int16, 0.5 / 32_768.0),
        ("b.wav", SampleFormat::Int24, 0.5 / 8_388_608.0),
        ("c.wav", SampleFormat::Float32, 0.0),
        ("a.flac", SampleFormat::Int16, 0.5 / 32_768.0),
        ("b.flac", SampleFormat::Int24, 0.5 / 8_388_608.0),
    ] {
        let (samples, path) = clip(&folder, name, format);
        let (back, notes, recording) = read_all(&path);
        assert_eq!(back.len(), samples.len(), "{name}");
        assert_eq!(recording.sample_rate_hz(), SAMPLE_RATE_HZ);
        // A float holds 24 bits, so the comparison itself may round by one part in 2^24.
        let error = samples.iter().zip(&back).map(|(a, b)| (a - b).abs()).fold(0.0, f32::max);
        assert!(error <= half_step + f32::EPSILON / 4.0, "{name}: {error}");
        assert!(notes.is_empty(), "{name}: {notes:?}");
    }
}

#[test]
fn samples_beyond_full_scale_are_cut_when_written() {
    let folder = Folder::new();
    let path = folder.0.path().join("a.wav");
    write_mono(path.to_str().expect("UTF-8"), [2.0, -2.0, 1.0], 8000, SampleFormat::Int16).expect("written");
    assert_eq!(read_all(&path).0, [32_767.0 / 32_768.0, -1.0, 32_767.0 / 32_768.0]);
}

#[test]
fn a_flac_with_one_flipped_byte_keeps_every_later_sample_in_its_place() {
    let folder = Folder::new();
    let (_, path) = clip(&folder, "a.flac", SampleFormat::Int16);
    let (whole, _, _) = read_all(&path);
    let mut bytes = fs::read(&path).expect("read");
    let middle = bytes.len() / 2;
    bytes[middle] ^= 0xff;
    let (damaged, _, _) = read_all(&folder.file("b.flac", &bytes));
    assert_eq!(damaged.len(), whole.len());
    let lost = damaged.iter().filter(|&&sample| sample == 9.0).count();
    assert!((1..=8192).contains(&lost), "{lost} samples lost");
    assert!(damaged.iter().zip(&whole).all(|(&after, &before)| after == 9.0 || after == before));
}

#[test]
fn a_cut_flac_gives_what_is_there_and_says_so() {
    let folder = Folder::new();
    let (_, path) = clip(&folder, "a.flac", SampleFormat::Int16);
    let (whole, _, _) = read_all(&path);
    let bytes = fs::read(&path).expect("read");
    let (cut, notes, _) = read_all(&folder.file("b.flac", &bytes[..bytes.len() / 2]));
    assert!(cut.len() > whole.len() / 3 && cut.len() < whole.len() * 2 / 3, "{}", cut.len());
    assert_eq!(cut[..], whole[..cut.len()]);
    assert!(notes[0].starts_with("the recording is cut off: the header promises 2.00 s, "), "{notes:?}");
}

#[test]
fn a_clip_must_be_named_as_a_kind_that_can_be_written() {
    let error = write_mono("a.ogg", [0.0], 8000, SampleFormat::Int16).expect_err("no kind").to_string();
    assert_eq!(error, "the name of a clip must end in .wav or .flac");
    let error = write_mono("a.flac", [0.0], 8000, SampleFormat::Float32).expect_err("no float").to_string();
    assert!(error.contains("16 or 24 bits"), "{error}");
}
