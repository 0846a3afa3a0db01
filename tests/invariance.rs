//! What must not change a figure: loudness, polarity, direct current, sample rate, where the recording begins and how it is cut,
//! silence around it, the order of channels, the size of the blocks.

mod cli_common;

use gaptone::audio::{ChannelChoice, Intake, Memory, Span};
use gaptone::estimate::Estimate;
use gaptone::measure::{Measurer, Options};
use gaptone::model::random::Random;
use gaptone::rhythm::Reading;
use std::f64::consts::PI;

const RATE_HZ: u32 = 48_000;
const SECONDS: f64 = 3.0;

fn reading(samples: &[f32], rate_hz: u32) -> Reading {
    let mut measurer = Measurer::new(rate_hz, Options::default());
    samples.chunks(4096).for_each(|block| measurer.push(block));
    measurer.finish().reading
}

/// The recording of all these tests.
fn recording() -> Vec<f32> {
    cli_common::clicks(SECONDS, RATE_HZ)
}

/// Inside the interval of the other, whose ends are taken as they are.
fn holds(interval: &Estimate, value: f64) -> bool {
    interval.low <= value && value <= interval.high
}

fn assert_same(what: &str, changed: &Reading, plain: &Reading) {
    let figures =
        |reading: &Reading| [reading.firing_rate_hz, reading.period_jitter_s].map(|figure| figure.expect(what));
    for (now, before) in figures(changed).iter().zip(figures(plain)) {
        assert!(holds(&before, now.value), "{what}: {now:?} against {before:?}");
    }
    assert_eq!(changed.verdict, plain.verdict, "{what}");
}

#[test]
fn loudness_polarity_and_direct_current_leave_the_figures() {
    let samples = recording();
    let plain = reading(&samples, RATE_HZ);
    for gain in [1e-3, 0.03, -1.0, -0.2, 1.7] {
        let changed: Vec<f32> = samples.iter().map(|x| gain * x).collect();
        assert_same(&format!("gain {gain}"), &reading(&changed, RATE_HZ), &plain);
    }
    for offset in [-0.3, 0.02, 0.4] {
        let changed: Vec<f32> = samples.iter().map(|x| x + offset).collect();
        assert_same(&format!("direct current {offset}"), &reading(&changed, RATE_HZ), &plain);
    }
}

/// The same sound at another rate: a sinc under a Blackman window over 32 samples each way.
fn resampled(samples: &[f32], from_hz: u32, to_hz: u32) -> Vec<f32> {
    const REACH: i64 = 32;
    let pace = f64::from(from_hz) / f64::from(to_hz);
    let cut = 0.94 * pace.recip().min(1.0);
    let at = |place: f64| -> f32 {
        let first = place.floor() as i64;
        let sum: f64 = (first - REACH + 1..=first + REACH)
            .filter_map(|n| {
                let sample = usize::try_from(n).ok().and_then(|n| samples.get(n))?;
                let x = place - n as f64;
                let (t, w) = (PI * cut * x, PI * x / REACH as f64);
                let sinc = if x == 0.0 { cut } else { cut * t.sin() / t };
                Some(f64::from(*sample) * sinc * (0.42 + 0.5 * w.cos() + 0.08 * (2.0 * w).cos()))
            })
            .sum();
        sum as f32
    };
    (0..(samples.len() as f64 / pace) as usize).map(|n| at(n as f64 * pace)).collect()
}

#[test]
fn another_sample_rate_leaves_the_figures() {
    let samples = recording();
    let plain = reading(&samples, RATE_HZ);
    for rate_hz in [32_000, 44_100, 96_000] {
        assert_same(&format!("{rate_hz} Hz"), &reading(&resampled(&samples, RATE_HZ, rate_hz), rate_hz), &plain);
    }
}

#[test]
fn a_shift_in_time_and_silence_around_leave_the_figures() {
    let samples = recording();
    let plain = reading(&samples, RATE_HZ);
    assert_same("137 samples later", &reading(&samples[137..], RATE_HZ), &plain);
    assert_same("from the middle of a click on", &reading(&samples[4_995..], RATE_HZ), &plain);
    for silence in [1_000, 48_000, 150_001] {
        let before = [vec![0.0; silence], samples.clone()].concat();
        assert_same(&format!("{silence} zeros before"), &reading(&before, RATE_HZ), &plain);
        let after = [samples.clone(), vec![0.0; silence]].concat();
        assert_same(&format!("{silence} zeros after"), &reading(&after, RATE_HZ), &plain);
    }
    let mut random = Random::seeded(3);
    let noise: Vec<f32> = (0..100_000).map(|_| 0.004 * (random.uniform() as f32 - 0.5)).collect();
    assert_same("noise before", &reading(&[noise, samples.clone()].concat(), RATE_HZ), &plain);
}

/// Two runs with a silence between them, measured apart and together: each figure of the whole is inside both intervals.
#[test]
fn a_recording_may_be_cut_at_a_silence() {
    let samples = recording();
    let half = samples.len() / 2;
    let (first, second) = samples.split_at(half);
    let whole = reading(&[first, &vec![0.0; 70_000], second].concat(), RATE_HZ);
    assert_same("together against the whole without silence", &whole, &reading(&samples, RATE_HZ));
    for part in [first, second] {
        let part = reading(part, RATE_HZ);
        let (rate, of_whole) = (part.firing_rate_hz.expect("a rate"), whole.firing_rate_hz.expect("a rate"));
        assert!(holds(&rate, of_whole.value), "{rate:?} against {of_whole:?}");
    }
}

fn heard(interleaved: Vec<f32>, channels: u16) -> Reading {
    let source = Memory::new(interleaved, channels, RATE_HZ, 4096);
    let mut intake = Intake::new(source, ChannelChoice::default(), Span::default()).expect("a source");
    let mut measurer = Measurer::new(RATE_HZ, Options::default());
    let mut mono = Vec::new();
    while intake.next(&mut mono).expect("read") {
        measurer.push(&mono);
    }
    measurer.finish().reading
}

#[test]
fn the_order_of_channels_leaves_the_figures() {
    let samples = recording();
    let plain = reading(&samples, RATE_HZ);
    let mut random = Random::seeded(5);
    let mut other = || 0.01 * (random.uniform() as f32 - 0.5);
    let left: Vec<f32> = samples.iter().flat_map(|x| [*x, other()]).collect();
    let right: Vec<f32> = left.chunks(2).flat_map(|pair| [pair[1], pair[0]]).collect();
    let (left, right) = (heard(left, 2), heard(right, 2));
    assert_same("left", &left, &plain);
    assert_same("right", &right, &left);
}

#[test]
fn the_size_of_the_blocks_changes_no_bit() {
    let samples = recording();
    let plain = format!("{:?}", reading(&samples, RATE_HZ));
    for size in [1, 997, 48_000, samples.len()] {
        let mut measurer = Measurer::new(RATE_HZ, Options::default());
        samples.chunks(size).for_each(|block| measurer.push(block));
        assert_eq!(format!("{:?}", measurer.finish().reading), plain, "blocks of {size}");
    }
}
