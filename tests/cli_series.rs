//! `render --series` as a user meets it: files, index, going on after an interruption, faults with their line.

use std::fs;
use std::path::Path;
use std::process::Output;

const BENCH: &str = "
[supply]
voltage = \"9 kV\"
[charging]
resistance = \"1.2 MΩ\"
capacitance = \"4.7 nF\"
[gap]
voltage = \"6.2 kV\"
spread = \"0.5 %\"
[receiver]
carrier = \"0.3\"
";

const SERIES: &str = "
title = \"Three\"
[defaults]
bench = \"bench.toml\"
seconds = \"1 s\"
[[clip]]
name = \"supply\"
vary = \"supply.voltage\"
over = [\"8 kV\", \"9 kV\"]
[[clip]]
name = \"marked\"
layout = \"marker\"
format = \"flac 24\"
";

fn run(folder: &Path, series: &str) -> Output {
    fs::write(folder.join("bench.toml"), BENCH).expect("written");
    fs::write(folder.join("series.toml"), series).expect("written");
    assert_cmd::Command::cargo_bin("gaptone")
        .expect("the program")
        .current_dir(folder)
        .args(["render", "--series", "series.toml", "-o", "clips"])
        .output()
        .expect("it runs")
}

fn names(folder: &Path) -> Vec<String> {
    let mut names: Vec<String> = fs::read_dir(folder)
        .expect("a folder")
        .map(|entry| entry.expect("an entry").file_name().to_string_lossy().into_owned())
        .collect();
    names.sort();
    names
}

fn said(output: &Output) -> String {
    format!("{}{}", String::from_utf8_lossy(&output.stdout), String::from_utf8_lossy(&output.stderr))
}

#[test]
fn a_series_writes_every_clip_with_its_truth_and_an_index() {
    let folder = tempfile::tempdir().expect("a folder");
    let output = run(folder.path(), SERIES);
    assert_eq!(output.status.code(), Some(0), "{}", said(&output));
    let clips = folder.path().join("clips");
    assert_eq!(
        names(&clips),
        [
            "index.json",
            "marked.flac",
            "marked.json",
            "supply-01.json",
            "supply-01.wav",
            "supply-02.json",
            "supply-02.wav"
        ]
    );
    let index: serde_json::Value =
        serde_json::from_str(&fs::read_to_string(clips.join("index.json")).expect("read")).expect("JSON");
    assert_eq!(index["format"], "gaptone.series/1");
    assert_eq!(index["clips"].as_array().expect("a list").len(), 3);
    assert_eq!(index["clips"][1]["changes"][0][1], "9000 V");
    assert!(index["clips"][0]["realised"]["firing_rate_hz"].as_f64().expect("a rate") > 50.0);
    let truth = fs::read_to_string(clips.join("marked.json")).expect("read");
    assert!(truth.contains("gaptone.truth/1") && truth.contains("\"layout\": \"marker\""));
}

#[test]
fn an_interrupted_series_goes_on_where_it_stopped_and_a_changed_clip_is_made_anew() {
    let folder = tempfile::tempdir().expect("a folder");
    run(folder.path(), SERIES);
    let clips = folder.path().join("clips");
    let before = fs::read(clips.join("supply-02.wav")).expect("read");
    fs::remove_file(clips.join("supply-02.wav")).expect("removed");
    let output = run(folder.path(), SERIES);
    let text = said(&output);
    assert_eq!(text.matches("is there already").count(), 2, "{text}");
    assert_eq!(fs::read(clips.join("supply-02.wav")).expect("made anew"), before);
    // Without an index nothing is known, and with a changed clip only that one is another.
    let changed = SERIES.replace("\"flac 24\"", "\"flac 24\"\nfaults = { missed = \"20 %\" }");
    let text = said(&run(folder.path(), &changed));
    assert_eq!(text.matches("is there already").count(), 2, "{text}");
    fs::remove_file(clips.join("index.json")).expect("removed");
    assert!(!said(&run(folder.path(), &changed)).contains("is there already"));
}

#[test]
fn one_bad_clip_is_told_with_its_line_and_nothing_is_written() {
    let folder = tempfile::tempdir().expect("a folder");
    let output = run(folder.path(), &SERIES.replace("\"8 kV\"", "\"8 mA\""));
    assert_eq!(output.status.code(), Some(2));
    assert!(said(&output).contains("series.toml line 9"), "{}", said(&output));
    // A supply that does not reach the gap shows only with the bench.
    let output = run(folder.path(), &SERIES.replace("\"8 kV\"", "\"5 kV\""));
    assert_eq!(output.status.code(), Some(2));
    assert!(said(&output).contains("series.toml line 6, clip supply-01"), "{}", said(&output));
    let output = run(folder.path(), &SERIES.replace("bench.toml", "lost.toml"));
    assert_eq!(output.status.code(), Some(1));
    assert!(said(&output).contains("lost.toml"), "{}", said(&output));
    assert!(!folder.path().join("clips").exists());
}

#[test]
fn a_recording_can_be_heard_under_the_gap_and_the_loudness_asked_for() {
    let folder = tempfile::tempdir().expect("a folder");
    run(folder.path(), SERIES);
    let output = assert_cmd::Command::cargo_bin("gaptone")
        .expect("the program")
        .current_dir(folder.path())
        .args([
            "render",
            "--bench",
            "bench.toml",
            "-o",
            "under.wav",
            "--seconds",
            "2",
            "--under",
            "clips/supply-01.wav",
        ])
        .args(["--loudness", "-26", "--fade", "0.05", "--marker", "--truth", "under.json"])
        .output()
        .expect("it runs");
    assert_eq!(output.status.code(), Some(0), "{}", said(&output));
    assert!(said(&output).contains("-26.0 LUFS"), "{}", said(&output));
    let truth = fs::read_to_string(folder.path().join("under.json")).expect("read");
    assert!(truth.contains("\"kind\": \"sound\""));
    let clash = assert_cmd::Command::cargo_bin("gaptone")
        .expect("the program")
        .args(["render", "--series", "s.toml", "--bench", "b.toml", "-o", "x"])
        .output()
        .expect("it runs");
    assert_eq!(clash.status.code(), Some(2));
}

#[test]
fn a_measurement_is_compared_with_the_truth_of_its_clip() {
    let folder = tempfile::tempdir().expect("a folder");
    let series = SERIES.replace("\"1 s\"", "\"4 s\"");
    run(folder.path(), &series);
    let measure = |options: &[&str]| {
        assert_cmd::Command::cargo_bin("gaptone")
            .expect("the program")
            .current_dir(folder.path().join("clips"))
            .args(["measure", "supply-01.wav"])
            .args(options)
            .output()
            .expect("it runs")
    };
    let text = said(&measure(&["--truth", "supply-01.json"]));
    assert!(text.contains("the gap in the clip was found") && text.contains("covered"), "{text}");
    let output = measure(&["--truth", "supply-01.json", "--json"]);
    let json: serde_json::Value = serde_json::from_slice(&output.stdout).expect("JSON");
    assert_eq!(json["format"], "gaptone.measurement/1");
    assert_eq!(json["comparison"]["verdict_holds"], true);
    let off = json["comparison"]["figures"][0]["intervals"].as_f64().expect("a distance");
    assert!(off.abs() < 2.0, "{off}");
    // The truth of another clip is far off, and a file that is no truth is refused.
    let other = measure(&["--truth", "supply-02.json"]);
    assert!(said(&other).contains("NOT covered"), "{}", said(&other));
    let wrong = measure(&["--truth", "index.json"]);
    assert_eq!(wrong.status.code(), Some(1));
    assert!(said(&wrong).contains("is no truth file"), "{}", said(&wrong));
}
