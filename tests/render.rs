//! The renderer as a whole: what a listener would check.

use gaptone::firing::{EventKind, Firing};
use gaptone::model::receiver::{
    AgcLaw, AgcSettings, AudioBand, AudioFilter, Carrier, Channel, DetectorSettings, Hum, Programme, ReceiverSettings,
};
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
fn nothing_is_heard_without_firings_noise_and_hum() {
    let audio = render(&RenderSettings::new(quiet(), 0.2, 2), &[]);
    assert!(audio.iter().all(|&x| x == 0.0));
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

// Measurement of thirty consumer receivers (NRSC study, quoted in the trade press): −3 dB at 2450 Hz, −10 dB at 4100 Hz, and
// another statement of −3 dB at 2.6 kHz; the band accepted is 2.0..3.0 and 3.5..5 kHz.
#[test]
fn a_seven_kilohertz_channel_with_an_open_audio_stage_sounds_like_a_consumer_receiver() {
    let band = AudioBand { low_hz: 120.0, low_poles: 2, high_hz: 4800.0, high_poles: 2 };
    let channel = Channel::new(gaptone::model::receiver::Selectivity::default(), 7000.0);
    let filter = AudioFilter::new(band, 96_000.0);
    let falls_below = |db: f64| {
        (200..8000)
            .map(f64::from)
            .find(|&f| -20.0 * (channel.gain(f).norm() * filter.gain(f, 96_000.0).norm()).log10() > db)
            .unwrap()
    };
    let (three, ten) = (falls_below(3.0), falls_below(10.0));
    assert!((2000.0..3000.0).contains(&three), "{three}");
    assert!((3500.0..5000.0).contains(&ten), "{ten}");
}

#[test]
fn a_receiver_that_cannot_be_built_is_named_with_its_limits() {
    let mut settings = RenderSettings::new(ReceiverSettings { bandwidth_hz: -1.0, ..quiet() }, 1.0, 1);
    let error = Renderer::new(&settings, []).unwrap_err().to_string();
    assert_eq!(error, "receiver bandwidth = -1 Hz is outside 100 .. 200000 Hz");
    settings.receiver = quiet();
    settings.duration_s = f64::NAN;
    assert!(Renderer::new(&settings, []).is_err());
    settings.duration_s = 1.0;
    settings.sample_rate_hz = 100;
    assert!(Renderer::new(&settings, []).is_err());
}

#[test]
fn a_bench_sets_the_receiver_and_what_it_leaves_open_is_the_documented_default() {
    let bare = ReceiverSettings::from_bench(&gaptone::bench::parse("", "b").unwrap()).unwrap();
    assert_eq!(bare, ReceiverSettings::default());
    let text = r#"
[tank]
frequency = "1.8 MHz"
quality = 12

[receiver]
tuned = "1.81 MHz"
bandwidth = "9 kHz"
audio_band = "200 Hz .. 3 kHz"
noise = "-20 dB"
carrier = "1.5"
carrier_offset = "-400 Hz"
hum = "30 %"
hum_frequency = "60 Hz"
"#;
    let settings = ReceiverSettings::from_bench(&gaptone::bench::parse(text, "b").unwrap()).unwrap();
    assert_eq!(settings.bandwidth_hz, 9000.0);
    assert_eq!((settings.audio_band.low_hz, settings.audio_band.high_hz), (200.0, 3000.0));
    assert!((settings.noise - 0.1).abs() < 1e-12);
    assert_eq!(settings.carrier, Some(Carrier { amplitude: 1.5, offset_hz: -400.0, programme: None }));
    let hum = settings.hum.unwrap();
    assert!((hum.amplitude - 0.3).abs() < 1e-12 && hum.frequency_hz == 60.0);
    assert_eq!(settings.burst.unwrap().1, 1.81e6);
    let too_narrow = gaptone::bench::parse("[receiver]\nbandwidth = \"1 Hz\"\n", "b").unwrap();
    assert!(ReceiverSettings::from_bench(&too_narrow).is_err());
}

// Burst theory: the click grows with the voltage and with the impulse bandwidth.
#[test]
fn the_click_in_volts_is_proportional_to_firing_voltage_and_bandwidth() {
    let bench = gaptone::bench::parse("[tank]\nfrequency = \"1 MHz\"\nquality = 10\n", "b").unwrap();
    let mut settings = ReceiverSettings::from_bench(&bench).unwrap();
    let peak = settings.click_peak_v(5000.0).unwrap();
    assert!((settings.click_peak_v(10_000.0).unwrap() / peak - 2.0).abs() < 1e-9);
    settings.bandwidth_hz *= 2.0;
    assert!((settings.click_peak_v(5000.0).unwrap() / peak - 2.0).abs() < 1e-6);
    settings.burst = None;
    assert_eq!(settings.click_peak_v(5000.0), None);
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
