//! Loudness, true peak, fades and the marker of a finished clip.

use gaptone::firing::{EventKind, Firing};
use gaptone::model::clip::Clip;
use gaptone::model::finish::{FinishSettings, Finished, Layout, LevelSetBy, loudness};
use gaptone::model::receiver::ReceiverSettings;
use gaptone::model::render::RenderSettings;
use gaptone::model::truth::{TrainTruth, Truth};
use std::f64::consts::TAU;

/// Tolerance of EBU Tech 3341 (from memory).
const METER_LU: f64 = 0.1;

/// In-phase stereo sines of 1 kHz: (seconds, peak in dBFS).
fn stereo(segments: &[(f64, f64)]) -> impl Iterator<Item = f32> {
    let samples: Vec<f32> = segments
        .iter()
        .flat_map(|&(seconds, dbfs)| {
            let peak = 10f64.powf(dbfs / 20.0);
            (0..(seconds * 48_000.0) as usize).map(move |n| (peak * (TAU * 1000.0 * n as f64 / 48_000.0).sin()) as f32)
        })
        .flat_map(|x| [x, x])
        .collect();
    samples.into_iter()
}

// EBU Tech 3341 (November 2023), table 1, cases 1 to 3.
#[test]
fn the_meter_reads_the_test_signals_of_the_broadcasting_union() {
    for (segments, expected) in [
        (&[(20.0, -23.0)][..], -23.0),
        (&[(20.0, -33.0)][..], -33.0),
        (&[(10.0, -36.0), (60.0, -23.0), (10.0, -36.0)][..], -23.0),
    ] {
        let (lufs, _) = loudness(stereo(segments), 2, 48_000).unwrap();
        assert!((lufs - expected).abs() <= METER_LU, "{lufs} against {expected}");
    }
    // BS.1770: one channel alone reads 3.01 LU less than two.
    let one = stereo(&[(20.0, -23.0)]).step_by(2);
    let (lufs, dbtp) = loudness(one, 1, 48_000).unwrap();
    assert!((lufs + 26.0).abs() <= METER_LU, "{lufs}");
    assert!((dbtp + 23.0).abs() < 0.1, "{dbtp}");
}

fn clip(rate_hz: f64, duration_s: f64, noise: f64) -> Clip {
    let at = |k: i32| (f64::from(k) + 0.4 + 0.02 * (2.3 * f64::from(k)).sin()) / rate_hz;
    let kind = |k: i32| if k % 10 == 3 { EventKind::Missed } else { EventKind::Firing };
    let firings: Vec<Firing> = (0..(rate_hz * duration_s) as i32)
        .map(|k| Firing { time_s: at(k), voltage_v: 5000.0, kind: kind(k) })
        .collect();
    let receiver = ReceiverSettings { noise, ..ReceiverSettings::default() };
    let trains = if firings.is_empty() { vec![] } else { vec![TrainTruth::of(firings, &[])] };
    Clip::new(RenderSettings::new(receiver, duration_s, 4), trains).unwrap()
}

fn finish(clip: Clip, settings: FinishSettings) -> (Vec<f32>, Truth) {
    let (finished, truth) = Finished::new(clip, settings).unwrap();
    (finished.collect(), truth)
}

#[test]
fn a_clip_measures_the_loudness_aimed_at_where_the_peak_allows() {
    for target in [-30.0, -23.0] {
        let settings = FinishSettings { loudness_lufs: Some(target), ..FinishSettings::default() };
        let (audio, truth) = finish(clip(300.0, 3.0, 0.03), settings);
        let (lufs, dbtp) = loudness(audio, 1, 48_000).unwrap();
        assert!((lufs - target).abs() < 0.1, "{lufs}");
        let said = truth.finish.unwrap();
        assert_eq!(said.level_set_by, LevelSetBy::Loudness);
        assert!((said.true_peak_dbtp.unwrap() - dbtp).abs() < 0.01 && dbtp <= -1.0, "{dbtp}");
    }
}

#[test]
fn the_true_peak_stands_in_the_way_of_more_and_the_truth_says_so() {
    // Rare clicks have a large crest factor.
    let settings = FinishSettings { loudness_lufs: Some(-16.0), ..FinishSettings::default() };
    let (audio, truth) = finish(clip(15.0, 4.0, 0.0), settings);
    let (lufs, dbtp) = loudness(audio, 1, 48_000).unwrap();
    let said = truth.finish.unwrap();
    assert_eq!(said.level_set_by, LevelSetBy::TruePeak);
    assert!((dbtp + 1.0).abs() < 0.05, "{dbtp}");
    assert!(lufs < -17.0 && (said.loudness_lufs.unwrap() - lufs).abs() < 0.05, "{lufs}");
    // The level of a click in the truth is that of the file.
    assert!((20.0 * truth.click_full_scale.log10() - dbtp).abs() < 0.5, "{}", truth.click_full_scale);
}

#[test]
fn a_clip_too_short_for_a_loudness_goes_by_its_peak_and_silence_stays_silence() {
    let (audio, truth) = finish(clip(300.0, 0.2, 0.0), FinishSettings::default());
    assert_eq!(truth.finish.unwrap().level_set_by, LevelSetBy::TruePeak);
    assert!(audio.iter().any(|x| x.abs() > 0.8));
    let (audio, truth) = finish(clip(300.0, 0.001, 0.0), FinishSettings::default());
    assert!(audio.iter().all(|x| x.is_finite()) && truth.click_full_scale.is_finite());
    let (silent, truth) = finish(clip(0.1, 1.0, 0.0), FinishSettings::default());
    assert!(silent.iter().all(|x| *x == 0.0));
    assert_eq!(truth.finish.unwrap().loudness_lufs, None);
}

#[test]
fn fades_begin_and_end_in_silence_and_leave_the_middle_alone() {
    let settings = |fade_s| FinishSettings { loudness_lufs: None, fade_s, ..FinishSettings::default() };
    let (plain, _) = finish(clip(300.0, 1.0, 0.2), settings(0.0));
    let (faded, _) = finish(clip(300.0, 1.0, 0.2), settings(0.1));
    assert!(faded[..5].iter().chain(&faded[47_995..]).all(|x| x.abs() < 1e-5));
    assert_eq!(plain[5000..43_000], faded[5000..43_000]);
    // Half of the way: half of the amplitude.
    assert!((faded[2400] / plain[2400] - 0.5).abs() < 0.01);
}

#[test]
fn the_marker_ticks_where_each_click_peaks_and_tells_what_it_is() {
    let made = clip(20.0, 2.0, 0.0);
    let delay_s = made.truth.receiver_delay_s;
    let settings = FinishSettings { layout: Layout::Marker, fade_s: 0.0, ..FinishSettings::default() };
    let (audio, truth) = finish(made, settings);
    assert_eq!(audio.len(), 2 * 96_000);
    let right: Vec<f64> = audio.iter().skip(1).step_by(2).map(|&x| f64::from(x)).collect();
    for firing in &truth.trains[0].firings {
        let place = (firing.time_s + delay_s) * 48_000.0;
        let (middle, reach) = (place.round() as usize, 40);
        let Some(near) = right.get(middle - reach..middle + reach) else { continue };
        let top = (0..near.len()).max_by(|&i, &j| near[i].total_cmp(&near[j])).unwrap();
        assert!((top as f64 - (place - (middle - reach) as f64)).abs() <= 0.6, "{firing:?}");
        assert!((near[top] - 0.25).abs() < 0.01);
        // A quarter of a millisecond from its middle a tick of 2 kHz is at its trough and one of 1 kHz passes zero.
        let quarter_ms = right[middle + 12];
        assert_eq!(quarter_ms < -0.1, firing.kind == EventKind::Firing, "{firing:?} {quarter_ms}");
    }
}
