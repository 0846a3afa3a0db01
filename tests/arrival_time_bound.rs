//! Click times against the Cramér–Rao bound of the arrival time of a known pulse in white Gaussian noise:
//! σ_t² ≥ σ²/Σ s'(t_n)² (Woodward 1953, Van Trees 1968, Kay 1993; from memory, confirmed by a maximum-likelihood simulation).

use gaptone::firing::{EventKind, Firing};
use gaptone::measure::{Measurer, Options};
use gaptone::model::clip::Clip;
use gaptone::model::random::Random;
use gaptone::model::receiver::ReceiverSettings;
use gaptone::model::render::{Level, RenderSettings};
use gaptone::model::truth::TrainTruth;

const SAMPLE_RATE_HZ: f64 = 48_000.0;
/// Clicks measured; the rms of so many errors scatters by 1/√2000 = 2.2 %.
const CLICKS: usize = 1000;
/// Three standard deviations of that scatter: what sampling may put below the bound.
const SAMPLING: f64 = 0.067;
/// A good estimator stays within this of the bound above 25 dB of 2E/N₀ (common practice).
const GOOD: f64 = 1.5;

/// Standard deviation that the bound allows, s, for the slope of a pulse in units a second at the samples.
fn bound_s(noise: f64, slope: impl Iterator<Item = f64>) -> f64 {
    noise / slope.map(|s| s * s).sum::<f64>().sqrt()
}

/// The pulse of the worked example, (t/τ)·exp(1 − t/τ): peak 1 at τ.
fn pulse(t_s: f64, tau_s: f64) -> f64 {
    if t_s <= 0.0 { 0.0 } else { t_s / tau_s * (1.0 - t_s / tau_s).exp() }
}

fn pulse_slope(t_s: f64, tau_s: f64) -> f64 {
    if t_s <= 0.0 { 0.0 } else { (1.0 - t_s / tau_s) / tau_s * (1.0 - t_s / tau_s).exp() }
}

/// The bound for that pulse, s.
fn pulse_bound_s(noise: f64, tau_s: f64) -> f64 {
    bound_s(noise, (0..960).map(|n| pulse_slope(f64::from(n) / SAMPLE_RATE_HZ, tau_s)))
}

/// Firing times about 10 ms apart with a jitter of 1 %, s.
fn times(seed: u64) -> Vec<f64> {
    let mut random = Random::seeded(seed);
    let mut time_s = 3e-3;
    (0..CLICKS)
        .map(|_| {
            let now = time_s;
            time_s += 10e-3 * (1.0 + 0.01 * random.normal());
            now
        })
        .collect()
}

/// Standard deviation of the errors of click times, s, about their constant delay.
fn timing_error_s(samples: &[f32], times: &[f64]) -> f64 {
    let mut measurer = Measurer::new(SAMPLE_RATE_HZ as u32, Options::default());
    measurer.push(samples);
    let outcome = measurer.finish();
    let found: Vec<f64> =
        outcome.events.iter().filter(|event| event.kind == EventKind::Firing).map(|event| event.time_s).collect();
    assert_eq!(found.len(), times.len(), "every click is found, and nothing else");
    let errors: Vec<f64> = found.iter().zip(times).map(|(a, b)| a - b).collect();
    let mean = errors.iter().sum::<f64>() / errors.len() as f64;
    (errors.iter().map(|e| (e - mean).powi(2)).sum::<f64>() / (errors.len() - 1) as f64).sqrt()
}

#[test]
fn the_bound_of_the_worked_example_is_5_4224_microseconds() {
    // τ = 1 ms, noise 0.05, 48 kHz: 5.4224 µs (evaluated independently, in time and in frequency).
    let bound = pulse_bound_s(0.05, 1e-3);
    assert!((1e6 * bound - 5.4224).abs() < 0.0002, "{bound}");
}

/// Error over bound for pulses in white noise.
fn pulses_over_bound(noise: f64, tau_s: f64) -> f64 {
    let times = times(3);
    let mut random = Random::seeded(4);
    let mut samples: Vec<f64> =
        (0..(SAMPLE_RATE_HZ * (times[CLICKS - 1] + 0.02)) as usize).map(|_| noise * random.normal()).collect();
    for &time_s in &times {
        let first = (time_s * SAMPLE_RATE_HZ) as usize;
        for (n, sample) in samples.iter_mut().enumerate().skip(first).take(960) {
            *sample += pulse(n as f64 / SAMPLE_RATE_HZ - time_s, tau_s);
        }
    }
    // Peaks at −6 dB of full scale.
    let samples: Vec<f32> = samples.into_iter().map(|sample| (0.5 * sample) as f32).collect();
    ratio(timing_error_s(&samples, &times), pulse_bound_s(noise, tau_s))
}

#[test]
fn pulses_as_short_as_a_click_are_timed_near_the_bound_and_not_below() {
    // τ = 0.2 ms: as steep as a click behind a channel of 6 kHz. (The worked example's pulse of 1 ms is no click: no receiver
    // passes the low frequencies that it consists of.)
    let ratio = pulses_over_bound(0.05, 0.2e-3);
    assert!((1.0 - SAMPLING..GOOD).contains(&ratio), "{ratio}");
}

#[test]
fn clicks_of_the_receiver_are_timed_near_the_bound_and_not_below() {
    // The noise is the recorder's: white in the audio, as the bound has it.
    const NOISE: f64 = 0.01;
    let at = |time_s: f64| Firing { time_s, voltage_v: 5000.0, kind: EventKind::Firing };
    let times = times(5);
    let clip = |firings: Vec<Firing>, noise: f64, duration_s: f64| {
        let receiver = ReceiverSettings { noise: 0.0, ..ReceiverSettings::default() };
        let mut settings = RenderSettings::new(receiver, duration_s, 6);
        settings.recorder.noise = noise;
        settings.level = Level::PerClick(0.5);
        Clip::new(settings, vec![TrainTruth::of(firings, &[])]).expect("a clip").renderer.collect::<Vec<f32>>()
    };
    // The slope of a click, from one without noise.
    let alone = clip(vec![at(0.02)], 0.0, 0.1);
    let slope = alone.windows(3).map(|w| f64::from(0.5 * (w[2] - w[0])) * SAMPLE_RATE_HZ);
    let bound = bound_s(NOISE, slope);
    let samples = clip(times.iter().map(|&time_s| at(time_s)).collect(), NOISE, times[CLICKS - 1] + 0.02);
    let ratio = ratio(timing_error_s(&samples, &times), bound);
    assert!((1.0 - SAMPLING..GOOD).contains(&ratio), "{ratio}");
}

fn ratio(found_s: f64, bound_s: f64) -> f64 {
    println!("timing error {:.3} µs, bound {:.3} µs, ratio {:.3}", 1e6 * found_s, 1e6 * bound_s, found_s / bound_s);
    found_s / bound_s
}
