//! How long the work takes: measuring ten seconds, rendering a minute, reading a bench. See `benches/README.md`.

mod common;

use common::{BLOCK, measure, transform};
use divan::Bencher;
use gaptone::bench::{self, Bench};
use gaptone::model::charging::Circuit;
use gaptone::model::clip::Clip;
use gaptone::model::firings::{Faults, GapLaw, Plan, Rhythm, Start, simulate};
use gaptone::model::receiver::ReceiverSettings;
use gaptone::model::render::RenderSettings;
use gaptone::model::truth::TrainTruth;
use std::time::{Duration, Instant};

/// Benches of the clips: a steady gap, one in much noise, one under a carrier, one whose clicks overlap.
const KINDS: [&str; 4] = ["steady", "noisy", "carrier", "fast-overlapping"];
const NORTH_BENCH: &str = include_str!("../examples/benches/north-bench.toml");

const SAMPLE_RATE_HZ: u32 = 48_000;
const CLIP_S: f64 = 10.0;

fn described(kind: &str) -> Bench {
    let text = match kind {
        "steady" => include_str!("../sounds/steady.toml"),
        "noisy" => include_str!("../sounds/noisy.toml"),
        "carrier" => include_str!("../sounds/carrier.toml"),
        _ => include_str!("../sounds/fast-overlapping.toml"),
    };
    bench::parse(text, kind).expect("a shipped bench")
}

/// A clip ready to be rendered.
fn clip(kind: &str, duration_s: f64) -> Clip {
    let bench = described(kind);
    let voltage_v = bench.gap.voltage.expect("a gap voltage").value;
    let circuit = Circuit::from_bench(&bench, None).expect("a circuit");
    let rhythm = Rhythm::Bench { circuit, gap: GapLaw::from_bench(&bench, voltage_v) };
    let plan = Plan { rhythm, faults: Faults::none(), start: Start::Running, duration_s, seed: 1 };
    let train = TrainTruth::of_plan(simulate(&plan).expect("a train").firings, &plan);
    let receiver = ReceiverSettings::from_bench(&bench).expect("a receiver");
    Clip::new(RenderSettings::new(receiver, duration_s, 1), vec![train]).expect("a clip")
}

/// A channel with noise and no gap.
fn nothing() -> Vec<f32> {
    let settings = RenderSettings::new(ReceiverSettings::default(), CLIP_S, 1);
    Clip::new(settings, Vec::new()).expect("a clip").renderer.collect()
}

fn samples(kind: &str) -> Vec<f32> {
    if kind == "no-gap" { nothing() } else { clip(kind, CLIP_S).renderer.collect() }
}

#[divan::bench(args = ["steady", "noisy", "carrier", "fast-overlapping", "no-gap"], sample_count = 10)]
fn measure_ten_seconds(bencher: Bencher, kind: &str) {
    let samples = samples(kind);
    bencher.bench(|| measure(&samples, SAMPLE_RATE_HZ));
}

#[divan::bench(sample_count = 20)]
fn one_transform_over_ten_seconds(bencher: Bencher) {
    let samples = samples("steady");
    bencher.bench(|| transform(&samples));
}

#[divan::bench(args = ["steady", "fast-overlapping"], sample_count = 3)]
fn render_a_minute(bencher: Bencher, kind: &str) {
    let clip = clip(kind, 60.0);
    bencher.bench(|| clip.renderer.clone().sum::<f32>());
}

#[divan::bench]
fn read_a_bench() -> Bench {
    bench::parse(divan::black_box(NORTH_BENCH), "north-bench.toml").expect("a shipped bench")
}

/// Least time of several goes.
fn least(mut work: impl FnMut()) -> Duration {
    const GOES: usize = 5;
    let time = |work: &mut dyn FnMut()| {
        let start = Instant::now();
        work();
        start.elapsed()
    };
    (0..GOES).map(|_| time(&mut work)).min().unwrap_or_default()
}

/// Measuring against one transform over the same samples, timed in turns: a figure that travels between machines.
fn print_ratios() {
    println!("\nmeasuring {CLIP_S} s at {SAMPLE_RATE_HZ} Hz over one real transform of it (blocks of {BLOCK}):");
    for kind in KINDS.iter().chain(&["no-gap"]) {
        let samples = samples(kind);
        let plain = least(|| {
            divan::black_box(transform(&samples));
        });
        let full = least(|| {
            divan::black_box(measure(&samples, SAMPLE_RATE_HZ));
        });
        let ratio = full.as_secs_f64() / plain.as_secs_f64();
        println!(
            "  {kind:<18} {:7.1} ms / {:5.2} ms = {ratio:6.1}",
            1e3 * full.as_secs_f64(),
            1e3 * plain.as_secs_f64()
        );
    }
}

fn main() {
    divan::main();
    // Not when benches are only listed or tried.
    if std::env::args().all(|argument| argument != "--list" && argument != "--test") {
        print_ratios();
    }
}
