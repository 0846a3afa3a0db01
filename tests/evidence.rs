//! The evidence of an hour stays small and hides no extreme.

mod svg_help;

use gaptone::evidence::Collector;
use gaptone::firing::{Event, EventKind};
use gaptone::page::{KeptRecording, MeasurementReport, REPORT_FORMAT, measurement};
use gaptone::pictures::{Measured, of_kind};
use gaptone::plot::Medium;
use gaptone::report::{Measurement, finite};
use gaptone::rhythm::Verdict;

/// Firings per second and length of the hour.
const RATE_HZ: f64 = 400.0;
const HOUR_S: f64 = 3600.0;
/// Low, so that an hour of samples passes in a second or two.
const SAMPLE_RATE_HZ: u32 = 4000;

/// A period that is far off, and when.
const ODD_S: f64 = 4.4e-3;
const ODD_AT: u64 = 777_777;

/// Figures such as a measurement of this train gives.
fn figures() -> Measurement {
    let text = format!(
        "{{\"format\": \"gaptone.measurement/1\", \"recording\": {{\"file\": \"hour.wav\", \"duration_s\": {HOUR_S}, \"sample_rate_hz\": \
         {SAMPLE_RATE_HZ}, \"channels\": 1, \"channel\": \"1\", \"from_s\": 0.0}}, \"verdict\": \"steady\", \"reason\": \"made up\", \"firings\": \
         {{\"on_rhythm\": 1440000, \"missed\": 0, \"extra\": 0}}, \"firing_rate_hz\": {{\"value\": 400.0, \"u\": 0.001, \"low\": 399.998, \
         \"high\": 400.002}}, \"period_s\": {{\"value\": 0.0025, \"u\": 1e-8, \"low\": 0.00249998, \"high\": 0.00250002}}, \"period_jitter_s\": \
         {{\"value\": 1e-5, \"u\": 1e-7, \"low\": 9.8e-6, \"high\": 1.02e-5}}, \"cycle_jitter_s\": null, \"mains_locked_jitter_s\": null, \
         \"drift_per_s\": null, \"timing_noise_s\": null, \"other_trains\": [], \"stretches\": [{{\"from_s\": 0.0, \"to_s\": {HOUR_S}}}], \
         \"notes\": [], \"gap_voltage_v\": null, \"gap_voltage_spread_v\": null}}"
    );
    finite(serde_json::from_str(&text).expect("a measurement"))
}

#[test]
fn an_hour_makes_a_page_under_2_mb_that_shows_its_one_odd_period_and_its_one_loud_sample() {
    let mut collector = Collector::new(0.0);
    let window = 60 * SAMPLE_RATE_HZ as usize;
    let (mut time_s, mut number) = (0.0, 0u64);
    for minute in 0..60usize {
        let mut audio: Vec<f32> = (0..window).map(|k| 0.2 * ((k % 10) as f32 - 4.5) / 4.5).collect();
        if minute == 33 {
            audio[12_345] = 0.9;
        }
        audio.chunks(4096).for_each(|block| collector.hear(block, SAMPLE_RATE_HZ));
        while time_s < 60.0 * (minute + 1) as f64 {
            // A regular wobble of about the jitter stands in for chance.
            let wobble_s = 1.4e-5 * ((number * number % 1009) as f64).sin();
            let period_s = if number == ODD_AT { ODD_S } else { 1.0 / RATE_HZ + wobble_s };
            let period_s = (number > 0).then_some(period_s);
            collector.event(&Event { time_s, kind: EventKind::Firing, size: 0.2, timing_u_s: 1e-6, period_s }, None);
            number += 1;
            time_s = number as f64 / RATE_HZ;
        }
    }
    let evidence = collector.finish();
    let measurement_of = figures();
    assert_eq!(measurement_of.reading.verdict, Verdict::Steady);
    let measured = Measured { measurement: &measurement_of, evidence: &evidence, bench: None };
    let panel = |kind: &str| svg_help::panels(&of_kind(kind, measured).expect("evidence").svg(Medium::File)).remove(0);
    let periods = panel("periods");
    // A stroke is drawn as M x low V high: its upper end is the extreme.
    let course = &periods.series("course").path;
    let highest = course.split('V').skip(1).map(|end| {
        let end = end.split('M').next().expect("a stroke");
        periods.y.value(end.parse().expect("a number"))
    });
    let highest = highest.fold(0.0, f64::max);
    assert!((highest - ODD_S).abs() <= periods.y.grain(ODD_S), "{highest}");
    let recording = panel("recording");
    let loudest = recording
        .series("audio")
        .path
        .split('V')
        .skip(1)
        .map(|end| recording.y.value(end.split('M').next().expect("a stroke").parse().expect("a number")));
    assert!((loudest.fold(0.0, f64::max) - 0.9).abs() <= recording.y.grain(0.9));
    let report = MeasurementReport {
        format: REPORT_FORMAT.to_owned(),
        program: "test".to_owned(),
        made: "2026-01-01T00:00:00Z".to_owned(),
        bench: None,
        options: vec![],
        recordings: vec![KeptRecording {
            file: "hour.wav".to_owned(),
            error: None,
            measurement: Some(measurement_of),
            evidence: Some(evidence),
        }],
    };
    let page = measurement(&report, &[]).expect("a page");
    assert!(page.len() < 2_000_000, "{} bytes", page.len());
    assert!(page.contains("so none that is far off is hidden"), "the page says that it thins");
    let text = |report: &MeasurementReport| serde_json::to_string(report).expect("JSON");
    // Not assert_eq, which would print both.
    assert!(text(&gaptone::page::extract(&page).expect("our page")) == text(&report));
}
