//! Files that cannot be measured: one clear line each, and the exit status of the documentation.

mod cli_common;

use cli_common::{Folder, clicks, gaptone, json, measure, stderr};

const FILE: i32 = 1;
const USAGE: i32 = 2;
const NOT_MEASURABLE: i32 = 3;

/// The one line on standard error, without the program's name and the path of the folder.
fn complaint(folder: &Folder, name: &str) -> String {
    let (status, stdout, stderr) = measure(&folder.path(name), &[]);
    assert_eq!((status, stdout.as_str()), (FILE, ""), "{stderr}");
    assert_eq!(stderr.lines().count(), 1, "{stderr}");
    let prefix = format!("gaptone: {}: ", folder.path(name).display());
    stderr.trim_end().strip_prefix(&prefix).unwrap_or_else(|| panic!("{stderr}")).to_owned()
}

#[test]
fn a_missing_file_is_named() {
    assert_eq!(complaint(&Folder::new(), "gone.wav"), "no such file; check the name and the folder");
}

#[test]
fn an_empty_file_is_named() {
    let folder = Folder::new();
    folder.file("empty.wav", b"");
    assert_eq!(complaint(&folder, "empty.wav"), "the file is empty; a recording was expected");
}

#[test]
fn text_named_as_a_recording_is_told_with_what_can_be_read() {
    let folder = Folder::new();
    folder.file("notes.wav", b"supply 9.2 kV, gap 2.2 mm\n");
    let told = complaint(&folder, "notes.wav");
    assert_eq!(
        told,
        "this is text, not a sound file; WAV, FLAC, Ogg Vorbis, MP3, M4A (AAC, ALAC), AIFF and CAF can be read"
    );
}

#[test]
fn an_unknown_format_is_told_with_what_can_be_read() {
    let folder = Folder::new();
    folder.file("picture.wav", b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR");
    assert!(complaint(&folder, "picture.wav").contains("can be read"));
}

#[test]
fn a_directory_is_named() {
    let folder = Folder::new();
    std::fs::create_dir(folder.path("runs")).expect("a folder");
    assert_eq!(complaint(&folder, "runs"), "is a directory; name a file in it");
}

#[test]
fn a_head_without_samples_is_named() {
    let folder = Folder::new();
    let whole = std::fs::read(folder.wav("a.wav", &[0.0; 100], 1, 48_000, 16)).expect("read");
    folder.file("cut.wav", &whole[..30]);
    assert_eq!(complaint(&folder, "cut.wav"), "the WAV head is cut off before the first sample");
}

#[test]
fn a_channel_that_is_not_there_is_named() {
    let folder = Folder::new();
    let path = folder.wav("a.wav", &clicks(0.5, 48_000), 1, 48_000, 16);
    let (status, _, stderr) = measure(&path, &["--channel", "right"]);
    assert_eq!(status, FILE);
    assert!(stderr.contains("there is no channel 2; the recording has 1"), "{stderr}");
}

#[test]
fn a_place_for_events_that_cannot_be_written_is_told_before_anything_is_read() {
    let folder = Folder::new();
    let events = folder.path("nowhere/events.csv");
    // The recording is missing too: the place is complained about, so it was looked at first.
    let (status, _, stderr) = measure(&folder.path("gone.wav"), &["--events", events.to_str().expect("UTF-8")]);
    assert_eq!(status, FILE);
    assert_eq!(stderr, format!("gaptone: {}: cannot be written: there is no such folder\n", events.display()));
}

#[test]
fn one_bad_file_does_not_stop_the_others() {
    let folder = Folder::new();
    let good = folder.wav("good.wav", &clicks(2.0, 48_000), 1, 48_000, 16);
    let gone = folder.path("gone.wav");
    let output = gaptone().arg("measure").args([&good, &gone, &good]).arg("--json").output().expect("it runs");
    assert_eq!(output.status.code(), Some(FILE));
    let result = json(&output);
    assert_eq!(result.as_array().map(Vec::len), Some(3));
    assert_eq!(result[0]["verdict"], "steady");
    assert_eq!(result[1]["error"], "no such file; check the name and the folder");
    assert_eq!(result[1]["recording"]["file"], gone.to_str().expect("UTF-8"));
    assert_eq!(result[2], result[0]);
    assert_eq!(stderr(&output).lines().count(), 1);
}

#[test]
fn wrong_usage_has_its_own_exit_status() {
    let folder = Folder::new();
    let good = folder.wav("good.wav", &clicks(0.5, 48_000), 1, 48_000, 16);
    for (options, told) in [
        (&["--channel", "both"][..], "left, right, mix or a number from 1"),
        (&["--from", "-1"], "0 or more"),
        (&["--from", "3", "--to", "2"], "must be later"),
        (&["--supply", "9.2 kV"], "--bench"),
        (&["--no-such-option"], "--no-such-option"),
    ] {
        let (status, stdout, stderr) = measure(&good, options);
        assert_eq!((status, stdout.as_str()), (USAGE, ""), "{options:?}: {stderr}");
        assert!(stderr.contains(told), "{options:?}: {stderr}");
    }
    let twice = gaptone().args(["measure", "-", "-"]).output().expect("it runs");
    assert_eq!(twice.status.code(), Some(USAGE));
    let events = gaptone().arg("measure").args([&good, &good]).args(["--events", "a.csv"]).output().expect("it runs");
    assert_eq!(events.status.code(), Some(USAGE));
}

#[test]
fn recordings_that_hold_nothing_give_no_figures_and_exit_status_3() {
    let folder = Folder::new();
    let tone: Vec<f32> = (0..96_000).map(|k| 0.5 * (k as f32 * 0.05).sin()).collect();
    for (name, samples) in [
        ("no samples", vec![]),
        ("20 ms", clicks(0.02, 48_000)),
        ("all zero", vec![0.0; 96_000]),
        ("direct current only", vec![0.25; 96_000]),
        ("not a number at all", vec![f32::NAN; 48_000]),
        ("a tone", tone),
    ] {
        let path = folder.wav("a.wav", &samples, 1, 48_000, 0);
        let (status, stdout, stderr) = measure(&path, &["--json"]);
        assert_eq!(status, NOT_MEASURABLE, "{name}: {stderr}{stdout}");
        let result: serde_json::Value = serde_json::from_str(&stdout).expect("JSON");
        assert_eq!(result["verdict"], "none", "{name}");
        assert!(result["firing_rate_hz"].is_null() && result["period_jitter_s"].is_null(), "{name}");
        assert!(!result["reason"].as_str().unwrap_or("").is_empty(), "{name}");
    }
}
