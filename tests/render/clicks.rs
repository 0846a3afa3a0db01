//! Clicks: when, how large, how exact.

use crate::{firing, quiet, render};
use gaptone::firing::{EventKind, Firing};
use gaptone::model::render::{Level, RenderSettings, Renderer};

/// Time and height of the largest sample near an instant, between samples by a parabola.
fn peak_near(audio: &[f32], rate_hz: f64, time_s: f64) -> (f64, f64) {
    let middle = (time_s * rate_hz) as usize;
    let top = (middle.saturating_sub(60)..middle + 60).max_by(|&i, &j| audio[i].total_cmp(&audio[j])).unwrap();
    let [a, b, c] = [-1isize, 0, 1].map(|d| f64::from(audio[top.wrapping_add_signed(d)]));
    let shift = 0.5 * (a - c) / (a - 2.0 * b + c);
    ((top as f64 + shift) / rate_hz, b - 0.25 * (a - c) * shift)
}

#[test]
fn a_click_peaks_at_its_firing_time_plus_the_stated_delay_at_any_rate_and_instant() {
    /// A parabola through three samples of a click of seven is off by up to this part of a sample.
    const PARABOLA: f64 = 0.06;
    for sample_rate_hz in [24_000u32, 44_100, 48_000, 96_000] {
        let rate_hz = f64::from(sample_rate_hz);
        let firings: Vec<Firing> = (0..20).map(|k| firing(0.05 + 0.0451 * f64::from(k), 5000.0)).collect();
        let mut settings = RenderSettings::new(quiet(), 1.0, 1).for_firings(&firings);
        settings.sample_rate_hz = sample_rate_hz;
        settings.level = Level::PerClick(0.5);
        let renderer = Renderer::new(&settings, firings.iter().copied()).unwrap();
        let delay_s = renderer.delay_s();
        assert!((renderer.click_full_scale() - 0.5).abs() < 1e-12);
        let audio: Vec<f32> = renderer.collect();
        for f in &firings {
            let (time_s, height) = peak_near(&audio, rate_hz, f.time_s + delay_s);
            let late = (time_s - f.time_s - delay_s) * rate_hz;
            assert!(late.abs() < PARABOLA, "{sample_rate_hz} Hz: {late} samples late");
            assert!((height - 0.5).abs() < 0.01, "{height}");
        }
    }
}

#[test]
fn a_click_is_as_large_as_its_firing_voltage_and_a_missed_one_is_not_heard() {
    let mut firings: Vec<Firing> =
        (0..5).map(|k| firing(0.05 + 0.1 * f64::from(k), 1000.0 * f64::from(k + 1))).collect();
    firings[2].kind = EventKind::Missed;
    let mut settings = RenderSettings::new(quiet(), 0.6, 1);
    settings.reference_voltage_v = 5000.0;
    settings.level = Level::PerClick(0.5);
    let renderer = Renderer::new(&settings, firings.iter().copied()).unwrap();
    let delay_s = renderer.delay_s();
    let audio: Vec<f32> = renderer.collect();
    for (k, f) in firings.iter().enumerate() {
        let (_, height) = peak_near(&audio, 48_000.0, f.time_s + delay_s);
        let expected = if k == 2 { 0.0 } else { 0.1 * (k + 1) as f64 };
        assert!((height - expected).abs() < 0.005, "{k}: {height} against {expected}");
    }
}

/// Spectrum of a piece of audio, tapered at its ends.
fn spectrum(audio: &[f32]) -> Vec<rustfft::num_complex::Complex<f64>> {
    let mut buffer: Vec<_> = audio.iter().map(|&x| rustfft::num_complex::Complex::from(f64::from(x))).collect();
    rustfft::FftPlanner::new().plan_fft_forward(buffer.len()).process(&mut buffer);
    buffer
}

#[test]
fn a_click_at_any_instant_comes_back_from_a_matched_filter_within_a_thousandth_of_a_sample() {
    const SAMPLES: f64 = 1e-3;
    let at = |time_s: f64| {
        let mut settings = RenderSettings::new(quiet(), 0.2, 1);
        settings.level = Level::PerClick(0.9);
        settings.reference_voltage_v = 5000.0;
        spectrum(&render(&settings, &[firing(time_s, 5000.0)])[..8192])
    };
    let start_s = 0.05;
    let template = at(start_s);
    for shift in [0.0, 0.1, 0.25, 1.0 / 3.0, 0.5, 0.77, 0.999, 3.3] {
        let click = at(start_s + shift / 48_000.0);
        // The largest output of the filter matched to the template in white noise is where its slope is zero; near the truth
        // one step of Newton from the truth finds it: slope over bend of the cross-correlation.
        let (mut slope, mut bend) = (0.0, 0.0);
        for (k, (a, b)) in template.iter().zip(&click).enumerate().take(4096) {
            let omega = std::f64::consts::TAU * k as f64 / 8192.0;
            let turned = b * a.conj() * rustfft::num_complex::Complex::from_polar(1.0, omega * shift);
            slope += omega * turned.im;
            bend += omega * omega * turned.re;
        }
        assert!((slope / bend).abs() < SAMPLES, "{shift}: {} samples off", slope / bend);
    }
}
