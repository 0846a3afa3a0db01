//! The watch without a command line: block sizes, breaks, changes, and that its memory stays bounded.

mod cli_common;

use cli_common::{RATE_HZ, clicks};
use gaptone::watch::{Change, Changed, Glance, Options, State, Watch};

const SAMPLE_RATE_HZ: u32 = 16_000;

fn at(time_s: f64) -> usize {
    (time_s * f64::from(SAMPLE_RATE_HZ)) as usize
}

/// Glances each second, the audio pushed in blocks.
fn glances(watch: &mut Watch, samples: &[f32], block: usize) -> Vec<Glance> {
    samples
        .chunks(at(1.0))
        .map(|second| {
            second.chunks(block).for_each(|part| watch.push(part));
            watch.glance()
        })
        .collect()
}

fn changes(all: &[Glance]) -> Vec<Change> {
    all.iter().flat_map(|glance| glance.changes.iter().copied()).collect()
}

#[test]
fn no_block_size_changes_a_bit() {
    let mut samples = clicks(9.0, SAMPLE_RATE_HZ);
    samples[at(4.0)..at(6.0)].fill(0.0);
    let of = |block| glances(&mut Watch::new(SAMPLE_RATE_HZ, Options::default()), &samples, block);
    let (small, large) = (of(7), of(at(1.0)));
    assert_eq!(small, large);
}

#[test]
fn lost_audio_is_a_break_and_no_missed_click() {
    let samples = clicks(12.0, SAMPLE_RATE_HZ);
    let mut watch = Watch::new(SAMPLE_RATE_HZ, Options::default());
    let mut all = glances(&mut watch, &samples[..at(6.0)], 480);
    // A third of a second of audio is lost, and nobody knows how much.
    watch.interrupt();
    all.extend(glances(&mut watch, &samples[at(6.333)..], 480));
    assert_eq!(changes(&all).iter().filter(|c| matches!(c.what, Changed::AudioLost)).count(), 1);
    assert!(all.iter().all(|glance| glance.reading.firings.missed == 0), "{all:?}");
    let whole = watch.finish().reading;
    assert_eq!(whole.firings.missed, 0);
    let rate = whole.firing_rate_hz.expect("a rate");
    assert!((rate.value - RATE_HZ).abs() < 4.0 * rate.u, "{rate:?}");
}

#[test]
fn the_past_is_forgotten_when_the_setting_changes() {
    let samples = clicks(12.0, SAMPLE_RATE_HZ);
    // The second half played by a quarter faster.
    let fast: Vec<f32> = (0..at(4.8)).map(|n| samples[at(6.0) + n * 5 / 4]).collect();
    let all = glances(&mut Watch::new(SAMPLE_RATE_HZ, Options::default()), &[&samples[..at(6.0)], &fast].concat(), 480);
    let step = changes(&all).into_iter().find(|c| matches!(c.what, Changed::Rate { .. })).expect("a step");
    // The first clicks behind it may be off the rhythm that was known.
    assert!((step.time_s - 6.0).abs() < 0.2 && step.noticed_s < 8.0, "{step:?}");
    let last = all.last().expect("glances").reading.firing_rate_hz.expect("a rate");
    assert!((last.value / (1.25 * RATE_HZ) - 1.0).abs() < 3e-3, "{last:?}");
}

#[test]
fn a_reset_begins_anew() {
    let samples = clicks(8.0, SAMPLE_RATE_HZ);
    let mut watch = Watch::new(SAMPLE_RATE_HZ, Options::default());
    glances(&mut watch, &samples[..at(4.0)], 480);
    watch.reset();
    let all = glances(&mut watch, &samples[at(4.0)..], 480);
    assert!(all.iter().filter_map(|glance| glance.since_s).all(|since_s| since_s >= 4.0));
    assert_eq!(all.last().map(|glance| glance.state), Some(State::Firing));
    let whole = watch.finish().reading;
    assert!((380..=401).contains(&whole.firings.on_rhythm), "{:?}", whole.firings);
}

/// Memory of this process, MiB.
#[cfg(target_os = "linux")]
fn resident_mib() -> f64 {
    let text = std::fs::read_to_string("/proc/self/statm").expect("Linux tells it");
    let pages: f64 = text.split(' ').nth(1).and_then(|pages| pages.parse().ok()).expect("a number");
    pages * 4096.0 / (1024.0 * 1024.0)
}

/// Six hours with firing, silence and lost audio; takes minutes.
#[cfg(target_os = "linux")]
#[test]
#[ignore = "takes minutes"]
fn memory_stays_flat_over_six_hours() {
    let firing = clicks(600.0, SAMPLE_RATE_HZ);
    let silence = vec![0.0; at(60.0)];
    let mut watch = Watch::new(SAMPLE_RATE_HZ, Options::default());
    let mut after = Vec::new();
    for _ in 0..33 {
        glances(&mut watch, &firing, 480);
        watch.interrupt();
        glances(&mut watch, &silence, 480);
        after.push(resident_mib());
    }
    println!("MiB after each 11 minutes: {after:.0?}");
    assert!(after[32] - after[2] < 4.0, "{after:?}");
}
