//! `gaptone predict` from the outside: what is refused in one clear line, what is an answer, what is written.

mod cli_common;

use cli_common::{Folder, gaptone, json, measure, stderr};
use std::process::Output;

/// An invented bench without its gap.
const BENCH: &str = "supply.voltage = \"9 kV\"\ncharging.resistance = \"5 MΩ\"\ncharging.capacitance = \"1 nF\"\n";

const SPHERES: &str = "gap.electrodes = \"spheres\"\ngap.diameter = \"20 mm\"\ngap.spacing = \"1.5 mm\"\n";

fn predict(bench: &str, options: &[&str]) -> Output {
    let folder = Folder::new();
    let path = folder.file("bench.toml", bench.as_bytes());
    gaptone().args(["predict", "--bench"]).arg(path).args(options).output().expect("the program runs")
}

#[test]
fn what_cannot_be_is_refused_in_one_clear_line() {
    let spheres = |key: &str, value: &str| format!("{BENCH}{}", SPHERES.replace(key, value));
    let air = |line: &str| format!("{BENCH}{SPHERES}{line}\n");
    let cases: [(String, &[&str], &str); 10] = [
        (spheres("\"1.5 mm\"", "\"0 mm\""), &[], "gap.spacing is 0 mm; it must be above 0 m"),
        (
            spheres("\"20 mm\"", "\"400 mm\""),
            &[],
            "gap.diameter is 400 mm; the breakdown law holds from 2.00 mm to 250 mm",
        ),
        (spheres("\"1.5 mm\"", "\"25 mm\""), &[], "gap.spacing is 25.0 mm; the breakdown law holds"),
        (air("air.humidity = \"140 %\""), &[], "air.humidity is 140 %; it must be 0 % to 100 %"),
        (air("air.temperature = \"-300 °C\""), &[], "air.temperature is -300 °C; it must be above 0 K (-273.15 °C)"),
        (air("air.pressure = \"300 hPa\""), &[], "the relative air density is 0.29"),
        (air("supply.ripple = \"100 %\""), &[], "supply.ripple is 100 %"),
        (air(""), &["--target", "0.0001 Hz"], "no supply setting"),
        (air(""), &["--target", "H4"], "`H4` is neither a rate nor a note"),
        (air(""), &["--supply", "12kV..6kV"], "runs from high to low"),
    ];
    for (bench, options, words) in cases {
        let output = predict(&bench, options);
        let told = stderr(&output);
        assert_eq!(output.status.code(), Some(2), "{words}: {told}");
        assert!(output.stdout.is_empty());
        let line = told.lines().find(|line| line.contains(words));
        assert!(line.is_some(), "{words}: {told}");
    }
}

#[test]
fn a_gap_that_does_not_fire_is_an_answer() {
    let output = predict(&format!("{BENCH}{SPHERES}"), &["--supply", "5 kV", "--json"]);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let found = json(&output);
    assert_eq!(found["fires"], false);
    assert!(found["firing_rate_hz"].is_null());
    // IEC 60052: 6.4 kV at 1.5 mm.
    let least_v = found["least_supply_v"].as_f64().unwrap();
    assert!((least_v / 6400.0 - 1.0).abs() < 0.01, "{least_v}");
    assert!(found["reason"].as_str().unwrap().contains("needs a supply above 6.4"), "{found}");
}

#[test]
fn one_ohm_and_one_farad_are_an_arc_and_a_hazard() {
    let text = BENCH.replace("5 MΩ", "1 Ω").replace("1 nF", "1 F");
    let output = predict(&format!("{text}{SPHERES}"), &[]);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let shown = String::from_utf8_lossy(&output.stdout).into_owned();
    for part in ["a steady arc is likely", "HAZARD: exceeds 10 kJ", "9.0 kA"] {
        assert!(shown.contains(part), "{part}: {shown}");
    }
}

#[test]
fn a_note_is_a_target_and_the_prediction_for_it_has_that_note() {
    let output = predict(&format!("{BENCH}{SPHERES}"), &["--target", "A4", "--json"]);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let found = json(&output);
    assert!((found["firing_rate_hz"]["value"].as_f64().unwrap() / 440.0 - 1.0).abs() < 1e-9);
    assert_eq!(found["pitch"]["note"], "A4");
    assert_eq!(found["target"]["supply_v"]["value"], found["supply_v"]);
    let keys: Vec<&str> = found["target"]["alternatives"]
        .as_array()
        .unwrap()
        .iter()
        .map(|other| other["key"].as_str().unwrap())
        .collect();
    assert_eq!(keys, ["charging.resistance", "charging.capacitance", "gap.spacing"]);
    // And an alternative gives the same note at the supply of the bench.
    let r = found["target"]["alternatives"][0]["value"].as_f64().unwrap();
    let other = format!("{BENCH}{SPHERES}").replace("5 MΩ", &format!("{r} Ω"));
    let rate = json(&predict(&other, &["--json"]))["firing_rate_hz"]["value"].as_f64().unwrap();
    assert!((rate / 440.0 - 1.0).abs() < 1e-6, "{rate}");
}

#[test]
fn a_drawing_and_a_clip_are_written_for_a_gap_of_spheres() {
    let folder = Folder::new();
    let bench = folder.file("bench.toml", format!("{BENCH}{SPHERES}gap.spread = \"0.5 %\"\n").as_bytes());
    let (plot, clip) = (folder.path("plot.svg"), folder.path("clip.wav"));
    let output = gaptone()
        .args(["predict", "--json", "--bench"])
        .arg(&bench)
        .arg("--plot")
        .arg(&plot)
        .arg("--clip")
        .arg(&clip)
        .args(["--seconds", "4"])
        .output()
        .expect("the program runs");
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    assert!(std::fs::read_to_string(&plot).unwrap().starts_with("<svg"));
    // The tags say what it is, and the level is the usual one.
    let bytes = std::fs::read(&clip).unwrap();
    assert!(String::from_utf8_lossy(&bytes).contains("Synthetic: rendered from a description"));
    let samples: Vec<f32> = hound::WavReader::open(&clip)
        .unwrap()
        .samples::<i16>()
        .map(|sample| f32::from(sample.unwrap()) / 32_768.0)
        .collect();
    let (lufs, dbtp) = gaptone::model::finish::loudness(samples, 1, 48_000).unwrap();
    assert!(dbtp < -0.9 && ((lufs + 23.0).abs() < 0.1 || (dbtp + 1.0).abs() < 0.1), "{lufs} LUFS, {dbtp} dBTP");
    // What was predicted is what is heard.
    let predicted = json(&output)["firing_rate_hz"]["value"].as_f64().unwrap();
    let (status, stdout, _) = measure(&clip, &["--json"]);
    assert_eq!(status, 0, "{stdout}");
    let heard: serde_json::Value = serde_json::from_str(&stdout).unwrap();
    let rate = heard["firing_rate_hz"]["value"].as_f64().unwrap();
    assert!((rate / predicted - 1.0).abs() < 0.005, "{rate} {predicted}");
}

#[test]
fn a_range_makes_a_table_with_remarks() {
    let ripple = "supply.ripple = \"1 %\"\nsupply.ripple_frequency = \"100 Hz\"\ngap.spread = \"0.5 %\"\n";
    let output = predict(&format!("{BENCH}{SPHERES}{ripple}"), &["--supply", "6kV..14kV", "--settings", "40"]);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let shown = String::from_utf8_lossy(&output.stdout).into_owned();
    for part in
        ["does not fire", "it stops firing below 6.", "the ripple locks it at 100.00 /s between", "Hz/kV", "cents"]
    {
        assert!(shown.contains(part), "{part}: {shown}");
    }
}
