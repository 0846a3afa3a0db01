//! Measuring against real time for every kind of recording of the proving ground, and against one pass of plain transforms over the same
//! samples, timed in turns. A table, not a test: see `README.md` beside this file.
#![allow(dead_code, reason = "the proving ground's modules hold more than a benchmark needs")]

#[path = "../examples/proving/case.rs"]
mod case;
#[path = "../examples/proving/channel.rs"]
mod channel;
#[path = "../examples/proving/circuit.rs"]
mod circuit;
#[path = "../examples/proving/codec.rs"]
mod codec;
#[path = "../examples/proving/filters.rs"]
mod filters;
#[path = "../examples/proving/firings.rs"]
mod firings;
#[path = "../examples/proving/kernel.rs"]
mod kernel;
#[path = "../examples/proving/kinds/mod.rs"]
mod kinds;
#[path = "../examples/proving/random.rs"]
mod random;
#[path = "../examples/proving/receiver.rs"]
mod receiver;
#[path = "../examples/proving/recorder.rs"]
mod recorder;
#[path = "../examples/proving/scene.rs"]
mod scene;
#[path = "../examples/proving/sounds/mod.rs"]
mod sounds;
#[path = "../examples/proving/volts.rs"]
mod volts;

mod common;

use case::Case;
use common::{measure, transform};
use std::hint::black_box;
use std::time::Instant;

/// Recordings of a kind, and goes of each: the least time counts.
const SEEDS: std::ops::Range<u64> = 500..503;
const GOES: usize = 3;
/// Length of a recording, s: shorter ones are repeated up to it, longer ones cut.
const CLIP_S: f64 = 10.0;

fn least_s(mut work: impl FnMut()) -> f64 {
    let time = |work: &mut dyn FnMut()| {
        let start = Instant::now();
        work();
        start.elapsed().as_secs_f64()
    };
    (0..GOES).map(|_| time(&mut work)).fold(f64::INFINITY, f64::min)
}

/// Ten seconds of a case.
fn ten_seconds(case: &Case) -> Vec<f32> {
    let count = (CLIP_S * f64::from(case.sample_rate_hz)) as usize;
    case.samples.iter().copied().cycle().take(count).collect()
}

fn main() {
    if std::env::args().any(|argument| argument == "--list" || argument == "--test") {
        return;
    }
    let wanted: Vec<String> = std::env::args().skip(1).filter(|argument| !argument.starts_with('-')).collect();
    println!("{:<12} {:>10} {:>12} {:>14}", "kind", "ms per s", "x real time", "transforms");
    for kind in kinds::KINDS.iter().filter(|k| wanted.is_empty() || wanted.iter().any(|w| w == k.name)) {
        let (mut full_s, mut plain_s, mut audio_s) = (0.0, 0.0, 0.0);
        for seed in SEEDS {
            let case = Case::make(kind, seed);
            let samples = ten_seconds(&case);
            full_s += least_s(|| {
                black_box(measure(&samples, case.sample_rate_hz));
            });
            plain_s += least_s(|| {
                black_box(transform(&samples));
            });
            audio_s += samples.len() as f64 / f64::from(case.sample_rate_hz);
        }
        let (per_s, ratio) = (1e3 * full_s / audio_s, full_s / plain_s);
        println!("{:<12} {per_s:>10.2} {:>12.0} {ratio:>14.1}", kind.name, 1e3 / per_s);
    }
}
