//! Recordings of every kind through the program: the same clicks, the same figures.

mod cli_common;

use cli_common::{Folder, RATE_HZ, clicks, gaptone, json, measure};
use serde_json::Value;
use std::path::Path;

/// The statistics of 200 periods with a jitter of 0.5 % allow 0.04 % (one standard deviation); ten of these.
const RATE_TOLERANCE: f64 = 0.004;

fn measured(path: &Path, options: &[&str]) -> Value {
    let (status, stdout, stderr) = measure(path, &[&["--json"], options].concat());
    assert_eq!(status, 0, "{stdout}{stderr}");
    serde_json::from_str(&stdout).expect("JSON")
}

fn assert_rate(result: &Value, what: &str) {
    let rate_hz = result["firing_rate_hz"]["value"].as_f64().unwrap_or_else(|| panic!("{what}: {result}"));
    assert!((rate_hz / RATE_HZ - 1.0).abs() < RATE_TOLERANCE, "{what}: {rate_hz} /s");
}

fn has_note(result: &Value, start: &str) -> bool {
    let notes = result["notes"].as_array().cloned().unwrap_or_default();
    notes.iter().any(|note| note.as_str().is_some_and(|note| note.starts_with(start)))
}

#[test]
fn every_width_and_rate_of_sample_gives_the_rate() {
    let folder = Folder::new();
    for (rate_hz, bits) in
        [(8000, 16), (48_000, 8), (48_000, 16), (44_100, 24), (48_000, 32), (48_000, 0), (192_000, 16)]
    {
        let path = folder.wav("a.wav", &clicks(3.0, rate_hz), 1, rate_hz, bits);
        let result = measured(&path, &[]);
        assert_rate(&result, &format!("{rate_hz} Hz, {bits} bits"));
        assert_eq!(result["recording"]["sample_rate_hz"], rate_hz);
        assert_eq!(result["recording"]["duration_s"], 3.0);
    }
}

#[test]
fn compressed_recordings_are_read() {
    for name in ["clicks.ogg", "clicks.mp3", "clicks.m4a", "clicks-alac.m4a"] {
        let path = Path::new("tests/data/audio").join(name);
        let (_, stdout, stderr) = measure(&path, &["--json"]);
        let result: Value = serde_json::from_str(&stdout).unwrap_or_else(|_| panic!("{name}: {stderr}"));
        let duration_s = result["recording"]["duration_s"].as_f64().expect("a duration");
        // The clicks stand 25 ms apart; a sample of 62.5 µs at either end of 37 periods is 0.014 %.
        let rate_hz = result["firing_rate_hz"]["value"].as_f64().unwrap_or_else(|| panic!("{name}: {result}"));
        assert!((rate_hz / 40.0 - 1.0).abs() < 1.4e-4, "{name}: {rate_hz} /s");
        // An encoder without a table of its padding adds up to two frames of 1024 samples.
        assert!((1.5..1.5 + 2.0 * 1024.0 / 16_000.0).contains(&duration_s), "{name}: {duration_s} s");
        assert!(!has_note(&result, "a stretch"), "{name}: {result}");
        assert!(!has_note(&result, "the recording is cut off"), "{name}: {result}");
    }
}

#[test]
fn standard_input_gives_the_same_as_the_file_whatever_length_its_head_states() {
    let folder = Folder::new();
    let path = folder.wav("a.wav", &clicks(2.0, 48_000), 1, 48_000, 16);
    let from_file = measured(&path, &[]);
    let mut bytes = std::fs::read(&path).expect("read");
    for length in [bytes.len() as u32 - 44, u32::MAX, 0] {
        bytes[40..44].copy_from_slice(&length.to_le_bytes());
        let output = gaptone().args(["measure", "-", "--json"]).write_stdin(bytes.clone()).output().expect("it runs");
        assert_eq!(output.status.code(), Some(0));
        let result = json(&output);
        assert_eq!(result["firing_rate_hz"], from_file["firing_rate_hz"], "length {length}");
        assert_eq!(result["recording"]["file"], "-");
    }
}

#[test]
fn a_kind_that_needs_a_file_is_told_so_on_standard_input() {
    let bytes = std::fs::read("tests/data/audio/clicks.m4a").expect("the recording");
    let output = gaptone().args(["measure", "-"]).write_stdin(bytes).output().expect("it runs");
    assert_eq!(output.status.code(), Some(1));
    let told = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(told.contains("a stream must be WAV, FLAC, Ogg Vorbis or MP3, others need a file"), "{told}");
}

#[test]
fn a_streaming_wav_file_gives_the_same_as_a_finished_one() {
    let folder = Folder::new();
    let path = folder.wav("a.wav", &clicks(2.0, 48_000), 1, 48_000, 16);
    let finished = measured(&path, &[]);
    let mut bytes = std::fs::read(&path).expect("read");
    bytes[4..8].fill(0xff);
    bytes[40..44].fill(0xff);
    let streaming = measured(&folder.file("b.wav", &bytes), &[]);
    assert_eq!(streaming["firing_rate_hz"], finished["firing_rate_hz"]);
    assert_eq!(streaming["notes"], finished["notes"]);
}

#[test]
fn a_cut_wav_is_measured_as_far_as_it_goes_and_says_so() {
    let folder = Folder::new();
    let path = folder.wav("a.wav", &clicks(4.0, 48_000), 1, 48_000, 16);
    let bytes = std::fs::read(&path).expect("read");
    let result = measured(&folder.file("cut.wav", &bytes[..bytes.len() / 2]), &[]);
    assert_rate(&result, "cut");
    assert!(has_note(&result, "the recording is cut off: the header promises 4.00 s, 2.00 s are there"), "{result}");
}

#[test]
fn damaged_samples_do_not_hide_the_rate_and_are_said() {
    let folder = Folder::new();
    let mut samples = clicks(3.0, 48_000);
    for k in (1000..samples.len()).step_by(5000) {
        samples[k] = if k % 2 == 0 { f32::NAN } else { f32::INFINITY };
    }
    let result = measured(&folder.wav("a.wav", &samples, 1, 48_000, 0), &[]);
    assert_rate(&result, "damaged");
    assert!(has_note(&result, "29 samples were not numbers"), "{result}");
}

#[test]
fn the_channel_with_the_clicks_is_found_and_can_be_chosen() {
    let folder = Folder::new();
    let tone = (0..144_000).map(|k| 0.3 * (k as f32 * 0.02).sin());
    let stereo: Vec<f32> = tone.zip(clicks(3.0, 48_000)).flat_map(|(left, right)| [left, right]).collect();
    let path = folder.wav("a.wav", &stereo, 2, 48_000, 16);
    let found = measured(&path, &[]);
    assert_rate(&found, "found");
    assert_eq!(found["recording"]["channel"], "right");
    assert!(has_note(&found, "of 2 channels, right was analysed"), "{found}");
    let chosen = measured(&path, &["--channel", "2"]);
    assert_eq!(chosen["firing_rate_hz"], found["firing_rate_hz"]);
    let (status, _, _) = measure(&path, &["--channel", "left"]);
    assert_eq!(status, 3);
}

#[test]
fn a_part_of_a_recording_is_measured_by_itself() {
    let folder = Folder::new();
    let mut samples = vec![0.0; 48_000];
    samples.extend(clicks(3.0, 48_000));
    samples.extend(vec![0.0; 48_000]);
    let path = folder.wav("a.wav", &samples, 1, 48_000, 16);
    let result = measured(&path, &["--from", "1", "--to", "4"]);
    assert_rate(&result, "part");
    assert_eq!(result["recording"]["from_s"], 1.0);
    assert_eq!(result["recording"]["duration_s"], 3.0);
    let (status, stdout, _) = measure(&path, &["--from", "10"]);
    assert_eq!(status, 3);
    assert!(stdout.contains("the recording ends before 10 s"), "{stdout}");
}

#[test]
fn events_are_written_with_times_in_the_recording() {
    let folder = Folder::new();
    let path = folder.wav("a.wav", &clicks(3.0, 48_000), 1, 48_000, 16);
    let events = folder.path("events.csv");
    let result = measured(&path, &["--from", "1", "--events", events.to_str().expect("UTF-8")]);
    let text = std::fs::read_to_string(&events).expect("the events");
    let mut lines = text.lines();
    assert_eq!(lines.next(), Some("time_s,kind,size,timing_u_s,period_s,gap_voltage_v"));
    let rows: Vec<Vec<&str>> = lines.map(|line| line.split(',').collect()).collect();
    let firings = rows.iter().filter(|row| row[1] == "firing").count() as u64;
    assert_eq!(Some(firings), result["firings"]["on_rhythm"].as_u64());
    let times_s: Vec<f64> = rows.iter().map(|row| row[0].parse().expect("a time")).collect();
    assert!(times_s.windows(2).all(|pair| pair[0] < pair[1]));
    assert!((1.0..1.02).contains(&times_s[0]), "{}", times_s[0]);
    assert!(rows.iter().all(|row| row.len() == 6));
}

#[test]
fn results_come_in_the_order_of_the_arguments() {
    let folder = Folder::new();
    let long = folder.wav("long.wav", &clicks(6.0, 48_000), 1, 48_000, 16);
    let short = folder.wav("short.wav", &clicks(1.0, 48_000), 1, 48_000, 16);
    let output = gaptone().arg("measure").args([&long, &short, &long, &short]).output().expect("it runs");
    let text = String::from_utf8_lossy(&output.stdout);
    let order: Vec<bool> =
        text.lines().filter(|line| line.contains(".wav:")).map(|line| line.contains("long.wav")).collect();
    assert_eq!(order, [true, false, true, false]);
}

#[test]
fn a_reader_that_goes_away_is_no_failure() {
    let folder = Folder::new();
    let path = folder.wav("a.wav", &clicks(1.0, 48_000), 1, 48_000, 16);
    let mut child = std::process::Command::new(assert_cmd::cargo::cargo_bin!("gaptone"))
        .arg("measure")
        .args([&path, &path])
        .stdout(std::process::Stdio::piped())
        .stderr(std::process::Stdio::piped())
        .spawn()
        .expect("it starts");
    drop(child.stdout.take());
    let output = child.wait_with_output().expect("it ends");
    assert_eq!(output.status.code(), Some(0));
    assert!(output.stderr.is_empty(), "{}", String::from_utf8_lossy(&output.stderr));
}

#[test]
fn nothing_but_errors_is_written_to_standard_error_off_a_terminal() {
    let folder = Folder::new();
    let path = folder.wav("a.wav", &clicks(2.0, 48_000), 1, 48_000, 16);
    let (status, stdout, stderr) = measure(&path, &[]);
    assert_eq!((status, stderr.as_str()), (0, ""));
    assert!(stdout.contains("firing rate"), "{stdout}");
}

#[test]
fn help_tells_commands_exit_statuses_and_an_example() {
    let output = gaptone().arg("--help").output().expect("it runs");
    assert_eq!(output.status.code(), Some(0));
    let text = String::from_utf8_lossy(&output.stdout);
    for part in ["measure", "Exit status:", "gaptone measure run.wav"] {
        assert!(text.contains(part), "{part}");
    }
}
