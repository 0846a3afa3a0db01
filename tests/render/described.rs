//! Receivers as they are described, and those that cannot be built.

use crate::quiet;
use gaptone::model::receiver::{AudioBand, AudioFilter, Carrier, Channel, ReceiverSettings};
use gaptone::model::render::{RenderSettings, Renderer};

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
