//! Level, hum, recorder, carrier, gain control.

use crate::{busy, firing, line, quiet, render, rms, train};
use gaptone::firing::Firing;
use gaptone::model::receiver::{AgcLaw, AgcSettings, AudioFilter, Carrier, Channel, Hum, Programme, ReceiverSettings};
use gaptone::model::render::{Level, RenderSettings, Renderer};

#[test]
fn the_loudest_peak_is_near_6_db_below_full_scale_whatever_is_in_the_audio() {
    let carrier =
        |amplitude| Some(Carrier { amplitude, offset_hz: 0.0, programme: Some(Programme::Speech { depth: 0.9 }) });
    for (name, receiver, rate_hz) in [
        ("slow", ReceiverSettings::default(), 4.0),
        ("usual", ReceiverSettings::default(), 430.0),
        ("overlapping", ReceiverSettings::default(), 6000.0),
        ("busy", busy(), 110.0),
        ("station", ReceiverSettings { carrier: carrier(3.0), ..ReceiverSettings::default() }, 110.0),
        ("noisy", ReceiverSettings { noise: 0.5, ..ReceiverSettings::default() }, 110.0),
    ] {
        // A gap that has been running for a while: where it starts, the low cut has yet to take the mean away.
        let mut firings = train(rate_hz, 4.2);
        firings.iter_mut().for_each(|f| f.time_s -= 0.2);
        let audio = render(&RenderSettings::new(receiver, 4.0, 2).for_firings(&firings), &firings);
        let mut sizes: Vec<f32> = audio.iter().map(|x| x.abs()).collect();
        sizes.sort_by(f32::total_cmp);
        let (largest, at_99_99) = (sizes[sizes.len() - 1], sizes[sizes.len() * 9999 / 10_000]);
        assert!(at_99_99 > 0.3 && largest < 1.0, "{name}: {at_99_99} and {largest}");
    }
}

#[test]
fn too_high_a_level_clips_at_full_scale() {
    let firings = train(110.0, 0.5);
    let mut settings = RenderSettings::new(quiet(), 0.5, 2).for_firings(&firings);
    settings.level = Level::PerClick(3.0);
    let audio = render(&settings, &firings);
    assert!(audio.iter().filter(|&&x| x == 1.0).count() > 100);
    assert!(audio.iter().all(|x| x.abs() <= 1.0));
}

#[test]
fn hum_is_a_line_of_the_stated_size_against_a_click() {
    let hum = |buzz| ReceiverSettings { hum: Some(Hum { amplitude: 0.4, frequency_hz: 60.0, buzz }), ..quiet() };
    let mut settings = RenderSettings::new(hum(0.5), 1.0, 2);
    settings.level = Level::PerClick(0.5);
    let audio = render(&settings, &[]);
    assert!((line(&audio, 60.0, 48_000.0) - 0.2).abs() < 1e-6);
    assert!((line(&audio, 180.0, 48_000.0) - 0.2 * 0.5 / 3.0).abs() < 1e-6);
    settings.receiver = hum(0.0);
    assert!(line(&render(&settings, &[]), 180.0, 48_000.0) < 1e-6);
}

#[test]
fn recorder_noise_has_the_stated_size() {
    let mut settings = RenderSettings::new(quiet(), 2.0, 2);
    settings.recorder.noise = 0.01;
    let audio = render(&settings, &[]);
    // 96 000 draws: the rms is known to 1/√(2n) = 0.23 %.
    assert!((rms(&audio) / 0.01 - 1.0).abs() < 0.01, "{}", rms(&audio));
}

#[test]
fn a_strong_carrier_turns_noise_into_its_in_phase_part() {
    // Behind a linear detector σ of the audio is σ_complex/√2, less what the audio band takes.
    let receiver = ReceiverSettings {
        noise: 0.05,
        carrier: Some(Carrier { amplitude: 4.0, offset_hz: 0.0, programme: None }),
        ..ReceiverSettings::default()
    };
    let mut settings = RenderSettings::new(receiver.clone(), 4.0, 2);
    settings.level = Level::PerClick(0.5);
    let per_click = 0.5 / isolated_peak(&receiver);
    let channel = Channel::new(receiver.selectivity, receiver.bandwidth_hz);
    let filter = AudioFilter::new(receiver.audio_band, 96_000.0);
    let (mut passed, mut all) = (0.0f64, 0.0f64);
    for k in 0..4000 {
        let f = 5.0 * f64::from(k);
        let power = channel.gain(f).norm_sqr();
        passed += power * filter.gain(f, 96_000.0).norm_sqr();
        all += power;
    }
    let expected = per_click * 0.05 / 2f64.sqrt() * (passed / all).sqrt();
    let got = rms(&render(&settings, &[]));
    // About 4 s × 3 kHz independent values: 1 %.
    assert!((got / expected - 1.0).abs() < 0.03, "{got} against {expected}");
}

/// Audio peak of an isolated click of envelope peak 1, from a clip of one click.
fn isolated_peak(receiver: &ReceiverSettings) -> f64 {
    let bare = ReceiverSettings { noise: 0.0, carrier: None, ..receiver.clone() };
    let mut settings = RenderSettings::new(bare, 0.1, 1);
    settings.level = Level::PerClick(0.5);
    let low = Renderer::new(&settings, []).unwrap().click_full_scale();
    // A tone of depth m on a carrier A is a line of A·m times the same gain as the click's scale.
    settings.receiver.carrier = Some(Carrier {
        amplitude: 1.0,
        offset_hz: 0.0,
        programme: Some(Programme::Tone { frequency_hz: 1000.0, depth: 0.5 }),
    });
    settings.duration_s = 1.0;
    let audio = render(&settings, &[]);
    let channel = Channel::new(receiver.selectivity, receiver.bandwidth_hz);
    let filter = AudioFilter::new(receiver.audio_band, 96_000.0);
    let gain = channel.gain(1000.0).norm() * filter.gain(1000.0, 96_000.0).norm();
    low / (line(&audio, 1000.0, 48_000.0) / (0.5 * gain))
}

#[test]
fn under_a_carrier_clicks_flip_sign_with_their_random_phase() {
    let firings: Vec<Firing> = (0..200).map(|k| firing(0.02 + 0.011 * f64::from(k), 5000.0)).collect();
    let carrier = Some(Carrier { amplitude: 3.0, offset_hz: 0.0, programme: None });
    let mut settings = RenderSettings::new(ReceiverSettings { carrier, ..quiet() }, 2.3, 4).for_firings(&firings);
    settings.level = Level::PerClick(0.5);
    let renderer = Renderer::new(&settings, firings.iter().copied()).unwrap();
    let delay_s = renderer.delay_s();
    let audio: Vec<f32> = renderer.collect();
    let negative = firings.iter().filter(|f| audio[((f.time_s + delay_s) * 48_000.0).round() as usize] < 0.0).count();
    // Uniform phase: cos φ and a little of sin²φ; half of 200 ± 3 standard deviations of 7.
    assert!((72..=121).contains(&negative), "{negative} of 200");
}

#[test]
fn agc_turns_a_fast_train_down_and_a_slow_one_hardly() {
    let receiver = ReceiverSettings {
        agc: Some(AgcSettings {
            law: AgcLaw::Forward,
            attack_s: 2.6e-3,
            decay_s: 1.0,
            threshold: 0.1,
            margin: 0.0,
            greatest_gain: 1.0,
        }),
        ..quiet()
    };
    let settled = |rate_hz: f64| {
        let firings = train(rate_hz, 4.0);
        let mut settings = RenderSettings::new(receiver.clone(), 4.0, 1).for_firings(&firings);
        settings.level = Level::PerClick(0.5);
        let audio = render(&settings, &firings);
        f64::from(audio[144_000..].iter().copied().fold(0.0, f32::max))
    };
    let (slow, fast) = (settled(1.0), settled(200.0));
    assert!(slow > 0.4, "{slow}");
    assert!(fast < 0.2, "{fast}");
}
