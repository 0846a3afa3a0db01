//! Detectors, gain control, recorder and the keys of a bench that set them.

use gaptone::bench::parse;
use gaptone::firing::{EventKind, Firing};
use gaptone::model::receiver::{
    Agc, AgcLaw, AgcSettings, AudioBand, Band, Carrier, Complex, Demodulator, DetectorKind, DetectorSettings, DropOuts,
    Programme, ReceiverSettings, Selectivity, Sound,
};
use gaptone::model::render::{Level, RenderSettings, Renderer};
use std::f64::consts::TAU;

const RATE_HZ: f64 = 96_000.0;

fn detector(kind: DetectorKind) -> Demodulator {
    let settings = DetectorSettings { kind, ..DetectorSettings::default() };
    Demodulator::new(settings, 6000.0, 1.0 / RATE_HZ)
}

fn unit() -> Complex {
    Complex::from(1.0)
}

#[test]
fn a_square_law_detector_gives_the_square_and_a_synchronous_one_the_part_in_phase() {
    let z = Complex::from_polar(0.6, 1.1);
    // The first step leads there from zero.
    let second = |kind, reference| {
        let mut detector = detector(kind);
        detector.step(z, reference);
        detector.step(z, reference)
    };
    assert!((second(DetectorKind::Envelope, unit()) - 0.6).abs() < 1e-15);
    assert!((second(DetectorKind::SquareLaw, unit()) - 0.36).abs() < 1e-15);
    let reference = Complex::from_polar(1.0, 0.8);
    assert!((second(DetectorKind::Synchronous, reference) - 0.6 * 0.3f64.cos()).abs() < 1e-15);
}

#[test]
fn a_discriminator_reads_the_offset_over_half_the_bandwidth_whatever_the_level() {
    for level in [0.01, 1.0, 30.0] {
        let mut fm = detector(DetectorKind::Frequency);
        let turning = |k: i32| Complex::from_polar(level, TAU * -1500.0 * f64::from(k) / RATE_HZ);
        let last = (0..10).map(|k| fm.step(turning(k), unit())).last().unwrap();
        assert!((last + 0.5).abs() < 1e-12, "{last}");
    }
}

fn firings(rate_hz: f64, duration_s: f64) -> Vec<Firing> {
    let at = |k: i32| (f64::from(k) + 0.4 + 0.02 * (2.3 * f64::from(k)).sin()) / rate_hz;
    (0..(rate_hz * duration_s) as i32)
        .map(|k| Firing { time_s: at(k), voltage_v: 5000.0, kind: EventKind::Firing })
        .collect()
}

fn under_a_carrier(kind: DetectorKind, amplitude: f64) -> ReceiverSettings {
    ReceiverSettings {
        noise: 0.0,
        carrier: Some(Carrier { amplitude, offset_hz: 900.0, programme: None }),
        detector: DetectorSettings { kind, ..DetectorSettings::default() },
        ..ReceiverSettings::default()
    }
}

fn render(settings: &RenderSettings, firings: &[Firing]) -> Vec<f32> {
    Renderer::new(settings, firings.iter().copied()).unwrap().collect()
}

#[test]
fn a_synchronous_detector_gives_clicks_by_the_cosine_of_their_phase_whatever_the_carrier() {
    let firings = firings(40.0, 3.0);
    let clicks = |amplitude: f64| {
        let receiver = under_a_carrier(DetectorKind::Synchronous, amplitude);
        let mut settings = RenderSettings::new(receiver, 3.1, 4).for_firings(&firings);
        settings.level = Level::PerClick(0.5);
        let renderer = Renderer::new(&settings, firings.iter().copied()).unwrap();
        let delay_s = renderer.delay_s();
        let audio: Vec<f32> = renderer.collect();
        let at = |f: &Firing| f64::from(audio[((f.time_s + delay_s) * 48_000.0).round() as usize]) / 0.5;
        firings.iter().map(at).collect::<Vec<f64>>()
    };
    let (weak, strong) = (clicks(0.1), clicks(10.0));
    for (a, b) in weak.iter().zip(&strong) {
        // Half a sample beside the peak costs 2 %; the images of the carrier's impulses grow with the carrier.
        assert!((a - b).abs() < 0.01 && a.abs() < 1.02, "{a} {b}");
    }
    // Cosine of a uniform phase: mean square 1/2; 120 draws give ± 0.03.
    let square = strong.iter().map(|x| x * x).sum::<f64>() / strong.len() as f64;
    assert!((square - 0.5).abs() < 0.1, "{square}");
}

#[test]
fn under_a_strong_carrier_clicks_turn_the_phase_and_a_discriminator_hears_both_signs() {
    let firings = firings(40.0, 3.0);
    let mut settings = RenderSettings::new(under_a_carrier(DetectorKind::Frequency, 3.0), 3.1, 4).for_firings(&firings);
    settings.level = Level::Peak(0.5);
    let renderer = Renderer::new(&settings, firings.iter().copied()).unwrap();
    let delay_s = renderer.delay_s();
    let audio: Vec<f32> = renderer.collect();
    // The frequency swings one way before the peak of the click and the other way behind it; which comes first is chance.
    let swing = |f: &Firing| {
        let middle = ((f.time_s + delay_s) * 48_000.0).round() as usize;
        let sum = |range: std::ops::Range<usize>| audio[range].iter().map(|&x| f64::from(x)).sum::<f64>();
        (sum(middle - 8..middle), sum(middle + 1..middle + 9))
    };
    let swings: Vec<_> = firings.iter().map(swing).collect();
    let apart = swings.iter().filter(|(a, b)| a * b < 0.0).count();
    assert!(apart > swings.len() * 8 / 10, "{apart} of {}", swings.len());
    let rising = swings.iter().filter(|(a, _)| *a > 0.0).count();
    assert!((40..=80).contains(&rising), "{rising} of {}", swings.len());
}

#[test]
fn every_law_of_gain_control_settles_where_the_output_is_at_the_threshold() {
    for law in [AgcLaw::Forward, AgcLaw::Feedback, AgcLaw::LevelDependent] {
        for level in [0.8, 3.0] {
            let settings =
                AgcSettings { law, attack_s: 2e-3, decay_s: 0.05, threshold: 0.4, margin: 0.0, greatest_gain: 10.0 };
            let mut agc = Agc::new(settings, 1.0 / RATE_HZ);
            let gain = (0..96_000).map(|_| agc.gain(level)).last().unwrap();
            assert!((gain * level - 0.4).abs() < 1e-3, "{law:?} {level}: {gain}");
            let silent = (0..960_000).map(|_| agc.gain(1e-9)).last().unwrap();
            assert!(silent <= 10.0 && (silent > 7.0), "{law:?}: {silent}");
        }
    }
}

#[test]
fn a_loop_with_fixed_time_constants_takes_its_attack_time_and_the_other_less_as_the_level_rises() {
    let time_to = |law, level: f64| {
        let settings =
            AgcSettings { law, attack_s: 10e-3, decay_s: 1.0, threshold: 0.1, margin: 0.0, greatest_gain: 1.0 };
        let mut agc = Agc::new(settings, 1.0 / RATE_HZ);
        let end = 0.1 / level;
        let aim = end + (1.0 - end) * (-1f64).exp();
        (0..).find(|_| agc.gain(level) <= aim).map(|k| f64::from(k) / RATE_HZ).unwrap()
    };
    for level in [1.0, 5.0] {
        assert!((time_to(AgcLaw::Feedback, level) - 10e-3).abs() < 1e-4);
        assert!((time_to(AgcLaw::LevelDependent, level) - 10e-3 / level).abs() < 1e-4);
    }
}

#[test]
fn the_recorder_rounds_to_its_bits_and_drops_out_as_often_as_it_should() {
    let firings = firings(430.0, 20.0);
    let mut settings = RenderSettings::new(ReceiverSettings::default(), 20.0, 8).for_firings(&firings);
    settings.recorder.bits = Some(8);
    settings.sample_rate_hz = 8000;
    let audio = render(&settings, &firings);
    assert!(audio.iter().all(|x| (x * 128.0).fract() == 0.0 && *x <= 127.0 / 128.0));
    let zeros = |settings: &RenderSettings| render(settings, &firings).iter().filter(|x| **x == 0.0).count();
    settings.recorder.bits = None;
    assert!(zeros(&settings) < 10);
    settings.recorder.drop_outs = Some(DropOuts { rate_hz: 5.0, length_s: 0.05 });
    let lost = zeros(&settings) as f64 / 160_000.0;
    // One cycle is a wait of 0.2 s on average and 0.05 s of loss; 80 of them: 0.2 ± 0.018.
    assert!((lost - 0.2).abs() < 0.06, "{lost}");
}

#[test]
fn de_emphasis_takes_three_decibel_at_its_corner() {
    let filter = gaptone::model::receiver::AudioFilter::new(
        AudioBand { low_hz: 0.0, low_poles: 1, high_hz: 20_000.0, high_poles: 8 },
        RATE_HZ,
    );
    let (plain, behind) = (filter.clone(), filter.with_de_emphasis(75e-6, RATE_HZ));
    let corner_hz = 1.0 / (TAU * 75e-6);
    let ratio = behind.gain(corner_hz, RATE_HZ).norm() / plain.gain(corner_hz, RATE_HZ).norm();
    assert!((ratio - 0.5f64.sqrt()).abs() < 1e-9, "{ratio}");
}

#[test]
fn a_carrier_takes_on_a_sound_of_any_scale_and_rate() {
    let samples: Vec<f32> = (0..4410).map(|n| 0.01 * (TAU as f32 * 400.0 * n as f32 / 44_100.0).sin()).collect();
    let programme = |programme| Carrier { amplitude: 1.0, offset_hz: 0.0, programme: Some(programme) };
    let receiver = |carrier| ReceiverSettings { noise: 0.0, carrier: Some(carrier), ..ReceiverSettings::default() };
    let rms = |carrier| {
        let mut settings = RenderSettings::new(receiver(carrier), 1.0, 2);
        settings.level = Level::PerClick(0.3);
        let audio = render(&settings, &[]);
        (audio[24_000..].iter().map(|&x| f64::from(x).powi(2)).sum::<f64>() / 24_000.0).sqrt()
    };
    let sound = Sound { samples: samples.into(), sample_rate_hz: 44_100.0 };
    let of_sound = rms(programme(Programme::Sound { depth: 0.5, sound: Some(sound) }));
    let of_tone = rms(programme(Programme::Tone { frequency_hz: 400.0, depth: 0.5 }));
    assert!((of_sound / of_tone - 1.0).abs() < 0.01, "{of_sound} {of_tone}");
    assert!(rms(programme(Programme::Sound { depth: 0.5, sound: None })) < 1e-4);
}

const EVERYTHING: &str = r#"
[receiver]
bandwidth = "9 kHz"
selectivity = "butterworth"
filter_order = 5
audio_band = "50 Hz .. 3 kHz"
audio_low_poles = 1
audio_high_poles = 3
de_emphasis = "75 us"
noise = "-20 dB"
carrier = "2"
carrier_offset = "-300 Hz"
programme = "tone"
programme_frequency = "440 Hz"
programme_depth = "40 %"
detector = "square law"
detector_charge = "2 us"
detector_discharge = "80 us"
agc = "level dependent"
agc_attack = "1 ms"
agc_decay = "2 s"
agc_threshold = "-20 dB"
agc_margin = "25 %"
agc_gain = "20 dB"
hum = "10 %"
hum_frequency = "60 Hz"
hum_buzz = "25 %"
polarity = "inverted"
click_level = "150 %"
recorder_noise = "-60 dB"
recorder_rate = "16 kHz"
recorder_bits = 12
dropout_rate = "0.25 Hz"
dropout_time = "30 ms"
"#;

#[test]
fn every_key_of_the_receiver_sets_its_part() {
    let settings = RenderSettings::from_bench(&parse(EVERYTHING, "bench").unwrap(), 2.0, 1).unwrap();
    let receiver = &settings.receiver;
    assert_eq!(receiver.selectivity, Selectivity::Butterworth { poles: 5 });
    assert_eq!(receiver.audio_band, AudioBand { low_hz: 50.0, low_poles: 1, high_hz: 3000.0, high_poles: 3 });
    assert_eq!((receiver.bandwidth_hz, receiver.de_emphasis_s), (9000.0, 75e-6));
    let programme = Some(Programme::Tone { frequency_hz: 440.0, depth: 0.4 });
    assert_eq!(receiver.carrier, Some(Carrier { amplitude: 2.0, offset_hz: -300.0, programme }));
    assert_eq!(
        receiver.detector,
        DetectorSettings { kind: DetectorKind::SquareLaw, charge_s: 2e-6, discharge_s: 80e-6 }
    );
    let agc = receiver.agc.unwrap();
    assert_eq!((agc.law, agc.attack_s, agc.decay_s), (AgcLaw::LevelDependent, 1e-3, 2.0));
    assert_eq!(agc.margin, 0.25);
    assert!((agc.threshold - 0.1).abs() < 1e-12 && (agc.greatest_gain - 10.0).abs() < 1e-12);
    let hum = receiver.hum.unwrap();
    assert_eq!((hum.amplitude, hum.frequency_hz, hum.buzz), (0.1, 60.0, 0.25));
    assert!(receiver.inverted);
    assert_eq!(settings.level, Level::PerClick(1.5));
    assert_eq!((settings.sample_rate_hz, settings.recorder.bits), (16_000, Some(12)));
    assert!((settings.recorder.noise - 1e-3).abs() < 1e-15);
    assert_eq!(settings.recorder.drop_outs, Some(DropOuts { rate_hz: 0.25, length_s: 0.03 }));
    let text = serde_json::to_string(&settings).unwrap();
    assert_eq!(serde_json::from_str::<RenderSettings>(&text).unwrap(), settings, "survives the truth");
}

#[test]
fn words_of_the_detector_and_what_is_left_out_have_their_meaning() {
    let of = |line: &str| {
        let bench = parse(&format!("[receiver]\n{line}\n"), "bench").unwrap();
        RenderSettings::from_bench(&bench, 1.0, 1).unwrap().receiver
    };
    for (word, kind) in [
        ("envelope", DetectorKind::Envelope),
        ("square law", DetectorKind::SquareLaw),
        ("synchronous", DetectorKind::Synchronous),
        ("fm", DetectorKind::Frequency),
        ("quasi-peak A", DetectorKind::QuasiPeak(Band::A)),
        ("quasi-peak B", DetectorKind::QuasiPeak(Band::B)),
        ("average A", DetectorKind::Average(Band::A)),
        ("average B", DetectorKind::Average(Band::B)),
    ] {
        let receiver = of(&format!("detector = \"{word}\""));
        assert_eq!(receiver.detector.kind, kind);
        let settings = RenderSettings::new(receiver, 0.2, 3);
        assert!(render(&settings, &firings(100.0, 0.2)).iter().all(|x| x.is_finite()), "{word}");
    }
    assert_eq!(of(""), ReceiverSettings::default());
    assert_eq!(of("agc_decay = \"1 s\"").agc.map(|agc| agc.law), Some(AgcLaw::Feedback));
    assert_eq!(of("agc = \"off\"\nagc_decay = \"1 s\"").agc, None);
    assert_eq!(of("selectivity = \"gaussian\"").selectivity, Selectivity::gaussian());
    let speech = of("carrier = \"1\"\nprogramme_depth = \"70 %\"").carrier.unwrap().programme;
    assert_eq!(speech, Some(Programme::Speech { depth: 0.7 }));
}

#[test]
fn a_receiver_that_cannot_be_built_is_refused_with_its_limits() {
    let error = |text: &str| {
        let bench = parse(&format!("[receiver]\n{text}\n"), "bench").map_err(|error| error.to_string())?;
        RenderSettings::from_bench(&bench, 1.0, 1).map_err(|error| error.to_string())
    };
    let said = error("bandwidth = \"50 kHz\"").unwrap_err();
    assert_eq!(said, "receiver bandwidth = 50000 Hz is outside 0 .. 48000 Hz");
    assert!(error("recorder_rate = \"1 kHz\"").unwrap_err().contains("recorder rate = 1000 Hz is outside 4000"));
    assert!(error("recorder_bits = 2.5").unwrap_err().contains("a whole number from 1 to 24"));
    assert!(error("detector = \"envelop\"").unwrap_err().contains("did you mean `envelope`?"));
    assert!(error("agc = \"fast\"").unwrap_err().contains("off, forward, feedback or level dependent"));
    assert!(error("audio_band = \"3 kHz .. 100 Hz\"").unwrap_err().contains("from high to low"));
    assert!(error("click_level = \"90 %\"\nrecorder_level = \"-3 dB\"").unwrap_err().contains("keep one"));
    assert!(
        error("programme = \"tone\"\ncarrier = \"1\"\nprogramme_frequency = \"1 MHz\"")
            .unwrap_err()
            .contains("outside")
    );
}

#[test]
fn a_clip_of_no_length_and_one_of_a_week_are_refused() {
    for (duration_s, said) in [(0.0, "clip length = 0 s"), (604_800.0, "clip length = 604800 s")] {
        let settings = RenderSettings::new(ReceiverSettings::default(), duration_s, 1);
        let error = Renderer::new(&settings, []).unwrap_err().to_string();
        assert!(error.contains(said) && error.contains(".. 86400 s"), "{error}");
    }
}

#[test]
fn the_handbook_has_a_row_for_every_key_of_the_receiver() {
    // The message of an unknown key lists all of them.
    let said = parse("[receiver]\nzzzz = 1\n", "bench").unwrap_err().fault.to_string();
    let keys: Vec<&str> = said.split("allowed are ").nth(1).unwrap().split(", ").collect();
    assert!(keys.len() > 30, "{said}");
    for key in keys {
        assert!(include_str!("../examples/receiver.md").contains(&format!("| `{key}` |")), "{key}");
    }
}
