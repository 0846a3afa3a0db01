//! The clips in `sounds/` are what their recipes give.

#[path = "../examples/make_sounds/recipes.rs"]
mod recipes;

use gaptone::model::truth::Truth;
use recipes::RECIPES;

/// Audio may differ in the last digits of `sin`, `exp` and `ln` from machine to machine, and is rounded to 16 bit.
const AUDIO: f32 = 1e-3;
/// A firing time goes through one logarithm whose last digit may differ from machine to machine, s.
const TIME_S: f64 = 1e-12;

#[test]
fn every_clip_and_its_truth_come_out_again_from_its_recipe() {
    for recipe in &RECIPES {
        let name = recipe.name;
        let path = recipes::directory().join(name);
        let clip = recipes::make(recipe).unwrap();
        let text = std::fs::read_to_string(path.with_extension("json")).unwrap();
        let committed: Truth = serde_json::from_str(&text).unwrap();
        assert_eq!(committed.settings, clip.truth.settings, "{name}");
        assert_eq!(committed.trains.len(), clip.truth.trains.len(), "{name}");
        for (old, new) in committed.trains.iter().zip(&clip.truth.trains) {
            assert_eq!(old.firings.len(), new.firings.len(), "{name}");
            for (old, new) in old.firings.iter().zip(&new.firings) {
                assert!((old.time_s - new.time_s).abs() <= TIME_S && old.kind == new.kind, "{name}: {old:?} {new:?}");
            }
        }
        let mut reader = hound::WavReader::open(path.with_extension("wav")).unwrap();
        assert_eq!(reader.spec().sample_rate, recipe.sample_rate_hz, "{name}");
        let file: Vec<f32> = reader.samples::<i16>().map(|sample| f32::from(sample.unwrap()) / 32_767.0).collect();
        let made: Vec<f32> = clip.renderer.collect();
        assert_eq!(file.len(), made.len(), "{name}");
        let worst = file.iter().zip(&made).map(|(a, b)| (a - b).abs()).fold(0.0, f32::max);
        assert!(worst < AUDIO, "{name}: {worst}");
    }
}

#[test]
fn the_clips_hold_what_their_names_say() {
    let truth = |name: &str| recipes::make(RECIPES.iter().find(|r| r.name == name).unwrap()).unwrap().truth;
    assert!(truth("no-gap").trains.is_empty());
    assert_eq!(truth("two-trains").trains.len(), 2);
    let missing = &truth("missing").trains[0];
    let share = missing.missed as f64 / missing.realised.firings as f64;
    assert!((0.05..0.12).contains(&share), "{share}");
    let fast = truth("fast-overlapping").trains[0].realised.firing_rate_hz.unwrap();
    assert!((2500.0..2700.0).contains(&fast), "{fast}");
    assert!(truth("hum").settings.receiver.hum.is_some());
    assert!(truth("carrier").settings.receiver.carrier.is_some());
}
