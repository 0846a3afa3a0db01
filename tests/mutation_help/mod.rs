//! Mutations of files: what a bad disk, a cut transfer or a stranger's recorder makes of them.

#![allow(dead_code, reason = "each test program uses a part")]

use gaptone::audio::{ChannelChoice, Intake, Span};
use gaptone::cli::files::{ClipFacts, SampleFormat, open, write_frames};
use gaptone::measure::{Measurer, Options};
use gaptone::model::random::Random;
use std::path::Path;

/// Most mutations of one file.
const MOST_CHANGES: f64 = 4.0;
/// Longest stretch that is cut, repeated or spliced in, bytes.
const LONGEST: f64 = 2048.0;
/// Heads are what readers trust: so many mutations in ten fall into the first bytes.
const IN_HEAD: f64 = 0.4;
const HEAD: usize = 96;
/// Samples of a mutated file that are read at most: a head may promise hours that the decoder makes of nothing.
const MOST_SAMPLES: usize = 4_000_000;

fn below(random: &mut Random, count: usize) -> usize {
    ((random.uniform() * count as f64) as usize).min(count.saturating_sub(1))
}

/// A place in a file, often in its head.
fn place(random: &mut Random, length: usize) -> usize {
    if random.uniform() < IN_HEAD { below(random, length.min(HEAD)) } else { below(random, length) }
}

/// Flips bits, cuts, repeats, splices in a piece of another file, or writes an extreme number.
pub fn mutate(bytes: &[u8], other: &[u8], random: &mut Random) -> Vec<u8> {
    let mut changed = bytes.to_vec();
    for _ in 0..1 + below(random, MOST_CHANGES as usize) {
        if changed.is_empty() {
            break;
        }
        let at = place(random, changed.len());
        let end = (at + 1 + (random.uniform() * LONGEST) as usize).min(changed.len());
        match below(random, 6) {
            0 => changed[at] ^= 1 << below(random, 8),
            1 => changed.truncate(at),
            2 => drop(changed.drain(at..end)),
            3 => {
                let again = changed[at..end].to_vec();
                changed.splice(at..at, again);
            }
            4 => {
                let from = below(random, other.len());
                let to = (from + end - at).min(other.len());
                changed.splice(at..at, other[from..to].iter().copied());
            }
            _ => {
                let extreme = [0u8, 0xff, 0x7f, 0x80][below(random, 4)];
                let end = (at + 4).min(changed.len());
                changed[at..end].fill(extreme);
            }
        }
    }
    changed
}

/// A short recording of each kind that can be read: its ending and its bytes.
pub fn seeds(folder: &Path, samples: &[f32]) -> Vec<(&'static str, Vec<u8>)> {
    let facts = |format| ClipFacts { channels: 1, sample_rate_hz: 16_000, format, ..ClipFacts::default() };
    let written = |ending: &'static str, format| {
        let path = folder.join(format!("seed.{ending}"));
        write_frames(path.to_str().expect("UTF-8"), samples.iter().copied(), &facts(format)).expect("written");
        (ending, std::fs::read(path).expect("read"))
    };
    vec![
        written("wav", SampleFormat::Int16),
        written("wav", SampleFormat::Float32),
        written("flac", SampleFormat::Int16),
        ("mp3", include_bytes!("../data/audio/clicks.mp3").to_vec()),
        ("ogg", include_bytes!("../data/audio/clicks.ogg").to_vec()),
        ("m4a", include_bytes!("../data/audio/clicks.m4a").to_vec()),
        ("m4a", include_bytes!("../data/audio/clicks-alac.m4a").to_vec()),
        ("aiff", aiff(samples)),
        ("caf", caf(samples)),
    ]
}

fn chunk(name: &[u8; 4], content: &[u8]) -> Vec<u8> {
    [name.as_slice(), &(content.len() as u32).to_be_bytes(), content].concat()
}

fn big_endian(samples: &[f32]) -> Vec<u8> {
    samples.iter().flat_map(|x| ((x * 32_767.0) as i16).to_be_bytes()).collect()
}

/// AIFF of 16 bits at 16 kHz (the rate is a number of 80 bits: 2¹³ times 1.953125).
fn aiff(samples: &[f32]) -> Vec<u8> {
    let rate = [0x40, 0x0c, 0xfa, 0, 0, 0, 0, 0, 0, 0];
    let common = [&1u16.to_be_bytes()[..], &(samples.len() as u32).to_be_bytes(), &16u16.to_be_bytes(), &rate].concat();
    let sound = [&[0u8; 8][..], &big_endian(samples)].concat();
    let body = [b"AIFF".as_slice(), &chunk(b"COMM", &common), &chunk(b"SSND", &sound)].concat();
    chunk(b"FORM", &body)
}

/// CAF of 16 bits at 16 kHz.
fn caf(samples: &[f32]) -> Vec<u8> {
    let wide = |name: &[u8; 4], content: &[u8]| [name, &(content.len() as u64).to_be_bytes()[..], content].concat();
    let numbers: [u32; 5] = [0, 2, 1, 1, 16];
    let numbers: Vec<u8> = numbers.iter().flat_map(|n| n.to_be_bytes()).collect();
    let description = [&16_000f64.to_be_bytes()[..], b"lpcm", &numbers].concat();
    let data = [&[0u8; 4][..], &big_endian(samples)].concat();
    [&b"caff\0\x01\0\0"[..], &wide(b"desc", &description), &wide(b"data", &data)].concat()
}

/// Reads a file to its end, and measures it if asked to; true if it could be opened. Must not panic, hang or take much memory.
pub fn read(path: &Path, measured: bool) -> bool {
    let Ok(source) = open(path.to_str().expect("UTF-8")) else { return false };
    let Ok(mut intake) = Intake::new(source, ChannelChoice::default(), Span::default()) else { return true };
    let mut measurer = measured.then(|| Measurer::new(intake.sample_rate_hz(), Options::default()));
    let (mut mono, mut count) = (Vec::new(), 0);
    while count < MOST_SAMPLES && intake.next(&mut mono).unwrap_or(false) {
        count += mono.len();
        if let Some(measurer) = &mut measurer {
            measurer.push(&mono);
            measurer.take_events();
        }
    }
    intake.finish();
    if let Some(measurer) = measurer {
        let _ = measurer.finish();
    }
    true
}
