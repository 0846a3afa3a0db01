//! The renderer as a whole: what a listener would check.

mod clicks;
mod described;
mod effects;

use gaptone::firing::{EventKind, Firing};
use gaptone::model::receiver::{AgcLaw, AgcSettings, Carrier, DetectorSettings, Hum, Programme, ReceiverSettings};
use gaptone::model::render::{Level, RenderSettings, Renderer};

fn firing(time_s: f64, voltage_v: f64) -> Firing {
    Firing { time_s, voltage_v, kind: EventKind::Firing }
}

/// Firings with a small, known unsteadiness.
fn train(rate_hz: f64, duration_s: f64) -> Vec<Firing> {
    let count = (rate_hz * duration_s) as i32;
    (0..count)
        .map(|k| firing((f64::from(k) + 0.3 + 0.01 * (1.7 * f64::from(k)).sin()) / rate_hz, 7000.0 + f64::from(k % 7)))
        .collect()
}

fn quiet() -> ReceiverSettings {
    ReceiverSettings { noise: 0.0, ..ReceiverSettings::default() }
}

fn render(settings: &RenderSettings, firings: &[Firing]) -> Vec<f32> {
    Renderer::new(settings, firings.iter().copied()).unwrap().collect()
}

fn rms(samples: &[f32]) -> f64 {
    (samples.iter().map(|&x| f64::from(x).powi(2)).sum::<f64>() / samples.len() as f64).sqrt()
}

/// Amplitude of a line, over whole numbers of cycles.
fn line(samples: &[f32], frequency_hz: f64, rate_hz: f64) -> f64 {
    let turn = std::f64::consts::TAU * frequency_hz / rate_hz;
    let (re, im) = samples.iter().enumerate().fold((0.0, 0.0), |(re, im), (n, &x)| {
        let angle = turn * n as f64;
        (re + f64::from(x) * angle.cos(), im + f64::from(x) * angle.sin())
    });
    2.0 * f64::hypot(re, im) / samples.len() as f64
}

/// Everything switched on.
fn busy() -> ReceiverSettings {
    ReceiverSettings {
        noise: 0.05,
        carrier: Some(Carrier { amplitude: 0.7, offset_hz: 150.0, programme: Some(Programme::Speech { depth: 0.8 }) }),
        agc: Some(AgcSettings { law: AgcLaw::Forward, attack_s: 2e-3, decay_s: 0.1, ..AgcSettings::default() }),
        detector: DetectorSettings { charge_s: 1e-6, discharge_s: 50e-6, ..DetectorSettings::default() },
        hum: Some(Hum { amplitude: 0.2, frequency_hz: 50.0, buzz: 0.5 }),
        inverted: true,
        ..ReceiverSettings::default()
    }
}

#[test]
fn the_size_of_the_blocks_changes_no_bit() {
    let firings = train(437.0, 1.0);
    let mut settings = RenderSettings::new(busy(), 1.0, 5).for_firings(&firings);
    settings.recorder.noise = 1e-3;
    let whole = render(&settings, &firings);
    assert_eq!(whole.len(), 48_000);
    for size in [1, 7, 480, 4096, 100_000] {
        let mut renderer = Renderer::new(&settings, firings.iter().copied()).unwrap();
        let mut pieces = Vec::new();
        let mut block = vec![0.0f32; size];
        loop {
            let count = renderer.fill(&mut block);
            pieces.extend_from_slice(&block[..count]);
            if count < size {
                break;
            }
        }
        assert_eq!(renderer.remaining(), 0);
        assert!(
            whole.iter().zip(&pieces).all(|(a, b)| a.to_bits() == b.to_bits()) && whole.len() == pieces.len(),
            "{size}"
        );
    }
}

#[test]
fn the_same_seed_gives_the_same_clip_and_another_seed_another() {
    let firings = train(110.0, 0.5);
    let settings = |seed| RenderSettings::new(busy(), 0.5, seed).for_firings(&firings);
    assert_eq!(render(&settings(3), &firings), render(&settings(3), &firings));
    assert_ne!(render(&settings(3), &firings), render(&settings(4), &firings));
}

#[test]
fn another_internal_rate_gives_the_same_audio() {
    // Twice 48 kHz against twice 192 kHz inside: each with its own sections, its own means and its own decimator.
    let firings = train(2600.0, 0.5);
    let receiver = quiet();
    let mut settings = RenderSettings::new(receiver, 0.5, 9).for_firings(&firings);
    settings.level = Level::PerClick(0.5);
    let slow = Renderer::new(&settings, firings.iter().copied()).unwrap();
    settings.sample_rate_hz = 192_000;
    let fast = Renderer::new(&settings, firings.iter().copied()).unwrap();
    let lag = (slow.delay_s() - fast.delay_s()) * 192_000.0;
    let (slow, fast): (Vec<f32>, Vec<f32>) = (slow.collect(), fast.collect());
    let (mut difference, mut power) = (0.0, 0.0);
    for (n, &got) in slow.iter().enumerate().skip(100) {
        let place = 4.0 * n as f64 - lag;
        let (at, x) = (place.floor() as usize, place.fract());
        // The cubic through four neighbours.
        let [a, b, c, d] = [at - 1, at, at + 1, at + 2].map(|k| f64::from(fast[k]));
        let other = b + 0.5 * x * (c - a + x * (2.0 * a - 5.0 * b + 4.0 * c - d + x * (3.0 * (b - c) + d - a)));
        difference += (f64::from(got) - other).powi(2);
        power += other * other;
    }
    // The delay is that of the peak by a parabola: good to some thousandths of an internal step.
    assert!((difference / power).sqrt() < 0.002, "{}", (difference / power).sqrt());
}

#[test]
fn nothing_is_heard_without_firings_noise_and_hum() {
    let audio = render(&RenderSettings::new(quiet(), 0.2, 2), &[]);
    assert!(audio.iter().all(|&x| x == 0.0));
}
