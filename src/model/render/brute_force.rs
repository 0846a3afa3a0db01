//! The whole receiver against a plain one that is stepped through time at 64 times the output rate, on random benches.
//!
//! The plain one shares the draws (phases of clicks and carrier, impulses of the noise) and nothing else: circuits one after the
//! other by Runge's and Kutta's method, detectors and gain control by small steps of their equations, audio filters as textbook
//! sections at the high rate, and a long windowed sinc down to the output rate.

mod plain;
mod stages;

use super::*;
use crate::model::random::Random;
use crate::model::receiver::{AgcLaw, AgcSettings, AudioBand, Band, Carrier, DetectorSettings, Programme, Selectivity};
use plain::Plain;

/// Inaudible and below 16-bit rounding: the bound set for the event-driven chain.
const BOUND_DB: f64 = -80.0;
/// A diode that begins to conduct and ceases to inside a step leaves bends that 16 pieces do not resolve to the last.
const DIODE_BOUND_DB: f64 = -75.0;
/// The worst of forty benches a detector, without and with a diode: gain control that a strong carrier holds down, and a slow diode
/// behind three poles at many clicks a second.
const WORST_DB: [f64; 2] = [-74.0, -69.0];
/// Random benches a detector.
const CASES: u64 = 6;
const SECONDS: f64 = 0.05;
/// The same for the slow instrument of a measuring receiver, s.
const MEASURING_S: f64 = 0.3;
/// Samples after which a discriminator has forgotten the noise before the carrier came.
const SETTLED: usize = 240;

fn pick<T: Copy>(random: &mut Random, list: &[T]) -> T {
    list[(random.uniform() * list.len() as f64) as usize]
}

fn between(random: &mut Random, low: f64, high: f64) -> f64 {
    low + (high - low) * random.uniform()
}

fn selectivity(least_order: u8, flat: bool, random: &mut Random) -> Selectivity {
    let count = between(random, f64::from(least_order), 6.99) as u8;
    // The flat filter rises too steeply for a discriminator.
    match (random.uniform() * if flat { 4.0 } else { 3.0 }) as u8 {
        0 => Selectivity::CoupledPairs { pairs: count.div_ceil(2) },
        1 => Selectivity::Butterworth { poles: count },
        2 => Selectivity::Synchronous { circuits: count },
        _ => Selectivity::Flat { edge_percent: 20 + 5 * count },
    }
}

fn measures(kind: DetectorKind) -> bool {
    matches!(kind, DetectorKind::QuasiPeak(_) | DetectorKind::Average(_))
}

/// Any receiver with a detector of the given kind.
fn receiver(kind: DetectorKind, timed: bool, random: &mut Random) -> ReceiverSettings {
    let bandwidth_hz = between(random, 2e3, 12e3);
    // A discriminator without a carrier well above the clicks hears on which side of zero the envelope passes; and with fewer than
    // four poles a click makes the frequency jump, which is heard in full only at an infinite rate.
    // Behind a low cut nothing but rounding is left of an instrument's reading.
    let frequency = kind == DetectorKind::Frequency;
    let depth = if frequency { 0.2 } else { 0.6 };
    let programme = Programme::Tone { frequency_hz: between(random, 200.0, 1500.0), depth };
    let amplitude = if frequency { 3.0 } else { pick(random, &[0.0, 0.3, 0.8, 2.0]) };
    let carrier = Carrier {
        amplitude,
        offset_hz: between(random, -0.25, 0.25) * bandwidth_hz,
        programme: (random.uniform() < 0.5).then_some(programme),
    };
    let law = pick(random, &[AgcLaw::Forward, AgcLaw::Feedback, AgcLaw::LevelDependent]);
    let agc = AgcSettings { law, attack_s: 1e-3, decay_s: 10e-3, threshold: 0.3, margin: 0.0, greatest_gain: 1.0 };
    ReceiverSettings {
        // With two poles it turns at every impulse of the noise, and a diode hears each turn: 68 dB.
        selectivity: selectivity(
            if frequency {
                4
            } else if timed {
                3
            } else {
                2
            },
            !frequency,
            random,
        ),
        bandwidth_hz,
        noise: pick(random, &[0.0, 0.05]),
        carrier: (amplitude > 0.0).then_some(carrier),
        agc: (random.uniform() < 0.4).then_some(agc),
        detector: DetectorSettings {
            kind,
            charge_s: if timed { pick(random, &[0.0, 2e-6, 10e-6]) } else { 0.0 },
            discharge_s: if timed { between(random, 30e-6, 200e-6) } else { 0.0 },
        },
        audio_band: AudioBand {
            low_hz: if measures(kind) { 0.0 } else { pick(random, &[0.0, 120.0, 300.0]) },
            low_poles: pick(random, &[1, 2]),
            high_hz: between(random, 1.5e3, 5e3),
            high_poles: between(random, 1.0, 8.99) as u8,
        },
        de_emphasis_s: pick(random, &[0.0, 75e-6]),
        ..ReceiverSettings::default()
    }
}

fn firings(rate_hz: f64, duration_s: f64, random: &mut Random) -> Vec<Firing> {
    let (mut time_s, mut all) = (0.3e-3, Vec::new());
    while time_s < duration_s - 1e-3 {
        let voltage_v = between(random, 0.7, 1.3);
        all.push(Firing { time_s, voltage_v, kind: EventKind::Firing });
        time_s += (1.0 + 0.1 * random.normal()).max(0.1) / rate_hz;
    }
    all
}

/// Largest difference against the largest audio, dB.
fn difference_db(receiver: ReceiverSettings, firings: &[Firing], duration_s: f64, seed: u64) -> f64 {
    let mut settings = RenderSettings::new(receiver, duration_s, seed);
    settings.level = Level::PerClick(0.02);
    let renderer = Renderer::new(&settings, firings.iter().copied()).unwrap();
    let plain = Plain::new(&settings.receiver, renderer.decimator.factor(), run_in_s(&settings.receiver), seed);
    let delay = renderer.decimator.delay() + 0.5;
    let expected = plain.audio(firings, renderer.samples as usize, delay);
    let scale = renderer.scale;
    let expected: Vec<f64> = expected.into_iter().map(|audio| audio * scale).collect();
    let difference: Vec<f64> = renderer.zip(&expected).map(|(got, expected)| f64::from(got) - expected).collect();
    let largest = |audio: &[f64]| audio[SETTLED..].iter().fold(0.0f64, |top, x| top.max(x.abs()));
    20.0 * (largest(&kept(&difference)) / largest(&expected)).log10()
}

/// What lies in the band that the decimator keeps, up to 0.4 of the output rate.
fn kept(audio: &[f64]) -> Vec<f64> {
    const REACH: i64 = 40;
    let tap = |k: i64| {
        let (t, x) = (std::f64::consts::PI * k as f64, k as f64 / REACH as f64);
        let sinc = if k == 0 { 0.76 } else { (0.76 * t).sin() / t };
        sinc * (0.5 + 0.5 * (std::f64::consts::PI * x).cos())
    };
    let at = |n: i64| usize::try_from(n).ok().and_then(|n| audio.get(n)).copied().unwrap_or_default();
    (0..audio.len() as i64).map(|n| (-REACH..=REACH).map(|k| tap(k) * at(n + k)).sum()).collect()
}

/// Differences on random benches, the largest last.
fn differences(kind: DetectorKind, timed: bool, seeds: std::ops::Range<u64>) -> Vec<(f64, String)> {
    let mut all: Vec<(f64, String)> = seeds
        .map(|seed| {
            let mut random = Random::seeded(seed);
            let receiver = receiver(kind, timed, &mut random);
            let fastest = if kind == DetectorKind::Frequency { 0.25 } else { 0.8 };
            let rate_hz = between(&mut random, 50.0, fastest * receiver.bandwidth_hz);
            let duration_s = if measures(kind) { MEASURING_S } else { SECONDS };
            let fired = firings(rate_hz, duration_s, &mut random);
            let said = format!("seed {seed}, {rate_hz:.0} /s, {receiver:?}");
            (difference_db(receiver, &fired, duration_s, seed), said)
        })
        .collect();
    all.sort_by(|a, b| a.0.total_cmp(&b.0));
    all
}

/// The benches of a detector that are further off than a bound allows.
fn beyond(bound: f64, kind: DetectorKind, timed: bool, seeds: std::ops::Range<u64>) -> Vec<(f64, String)> {
    let mut all = differences(kind, timed, seeds);
    for (db, said) in &all {
        eprintln!("{db:7.1} dB: {said}");
    }
    all.retain(|(db, _)| db.is_nan() || *db >= bound);
    all
}

/// Every detector, and whether with a diode that has time constants.
const DETECTORS: [(DetectorKind, bool); 8] = [
    (DetectorKind::Envelope, false),
    (DetectorKind::SquareLaw, false),
    (DetectorKind::Synchronous, false),
    (DetectorKind::Frequency, false),
    (DetectorKind::Envelope, true),
    (DetectorKind::SquareLaw, true),
    (DetectorKind::QuasiPeak(Band::B), false),
    (DetectorKind::Average(Band::B), false),
];

#[test]
fn every_detector_behind_random_channels_and_before_random_audio_bands_is_that_of_brute_force() {
    for (kind, timed) in DETECTORS {
        let beyond = beyond(if timed { DIODE_BOUND_DB } else { BOUND_DB }, kind, timed, 0..CASES);
        assert!(beyond.is_empty(), "{beyond:#?}");
    }
}

/// On more benches, with figures; run with --ignored --nocapture.
#[test]
#[ignore = "takes minutes"]
fn many_benches_beside_brute_force() {
    let all = DETECTORS.iter();
    let beyond: Vec<_> =
        all.flat_map(|&(kind, timed)| beyond(WORST_DB[usize::from(timed)], kind, timed, 100..140)).collect();
    assert!(beyond.is_empty(), "{beyond:#?}");
}
