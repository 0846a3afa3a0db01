//! `gaptone watch` on files and pipes: its lines, its log, its limits, what it says of wrong input.

mod cli_common;

use cli_common::{Folder, RATE_HZ, clicks, gaptone, stderr};
use serde_json::Value;
use std::process::Output;

fn lines(output: &Output) -> Vec<Value> {
    let text = String::from_utf8(output.stdout.clone()).expect("UTF-8");
    text.lines().map(|line| serde_json::from_str(line).expect("a line of JSON")).collect()
}

fn number(of: &Value, path: &str) -> f64 {
    of.pointer(path).and_then(Value::as_f64).unwrap_or_else(|| panic!("{path} in {of}"))
}

/// Glances with a rate: how many hold the truth, and the median relative error.
fn rates(all: &[Value]) -> (usize, usize, f64) {
    let told: Vec<&Value> =
        all.iter().filter(|line| line["state"] == "firing" && !line["firing_rate_hz"].is_null()).collect();
    let holds = |line: &&&Value| {
        (number(line, "/firing_rate_hz/low")..=number(line, "/firing_rate_hz/high")).contains(&RATE_HZ)
    };
    let mut errors: Vec<f64> =
        told.iter().map(|line| (number(line, "/firing_rate_hz/value") / RATE_HZ - 1.0).abs()).collect();
    errors.sort_by(f64::total_cmp);
    (told.iter().filter(holds).count(), told.len(), errors[errors.len() / 2])
}

#[test]
fn a_line_a_second_with_the_rate_and_at_the_end_what_measure_says() {
    let folder = Folder::new();
    for (rate_hz, name) in [(8_000, "8k.wav"), (48_000, "48k.wav"), (96_000, "96k.wav")] {
        let path = folder.wav(name, &clicks(16.0, rate_hz), 1, rate_hz, 16);
        let output =
            gaptone().args(["watch", path.to_str().expect("UTF-8"), "--every", "1s"]).output().expect("it runs");
        assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
        let all = lines(&output);
        let (last, glances) = all.split_last().expect("lines");
        assert_eq!(glances.len(), 16, "{name}");
        for (k, glance) in glances.iter().enumerate() {
            assert_eq!(glance["format"], "gaptone.watch/1");
            assert!((number(glance, "/time_s") - (k + 1) as f64).abs() < 1e-9);
        }
        let (holds, told, median) = rates(glances);
        assert!(told >= 15 && holds * 100 >= 93 * told && median < 2e-3, "{name}: {holds} of {told}, {median}");
        // The whole is what `measure` makes of the same audio, within a tenth of its uncertainty.
        let (_, measured, _) = cli_common::measure(&path, &["--json"]);
        let measured: Value = serde_json::from_str(&measured).expect("JSON");
        assert_eq!(last["format"], "gaptone.measurement/1");
        for figure in ["firing_rate_hz", "period_jitter_s"] {
            let of = |line: &Value| number(line, &format!("/{figure}/value"));
            let u = number(&measured, &format!("/{figure}/u"));
            assert!((of(last) - of(&measured)).abs() <= 0.1 * u, "{name} {figure}: {last} {measured}");
        }
    }
}

#[test]
fn a_stream_of_unknown_length_and_one_that_is_cut_are_watched_to_their_end() {
    let folder = Folder::new();
    let path = folder.wav("run.wav", &clicks(5.0, 16_000), 1, 16_000, 16);
    let mut bytes = std::fs::read(path).expect("written");
    // As a program writes it that does not know the length: RIFF and data chunk of 0xFFFFFFFF; cut in the middle of a frame.
    bytes[4..8].copy_from_slice(&u32::MAX.to_le_bytes());
    bytes[40..44].copy_from_slice(&u32::MAX.to_le_bytes());
    bytes.truncate(bytes.len() - 1);
    let output = gaptone().args(["watch", "-", "--every", "0.5"]).write_stdin(bytes.clone()).output().expect("it runs");
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    // 5 s less a frame: nine whole halves.
    assert_eq!(lines(&output).len(), 9 + 1);
    let raw = bytes.split_off(44);
    let output = gaptone().args(["watch", "-", "--raw", "s16le:16000:1"]).write_stdin(raw).output().expect("it runs");
    let all = lines(&output);
    assert_eq!(all.len(), 4 + 1);
    let (holds, told, _) = rates(&all[..4]);
    assert!(told >= 3 && holds + 1 >= told, "{holds} of {told}");
}

#[test]
fn a_limit_is_told_and_can_end_the_watch() {
    let folder = Folder::new();
    let path = folder.wav("run.wav", &clicks(8.0, 16_000), 1, 16_000, 16);
    let run = |limit: &str, stop: &[&str]| {
        gaptone().args(["watch", path.to_str().expect("UTF-8"), "--limit", limit]).args(stop).output().expect("it runs")
    };
    let right = run("rate 99..101 Hz", &["--stop-on-limit"]);
    assert_eq!(right.status.code(), Some(0), "{}", stderr(&right));
    assert!(
        lines(&right).iter().all(|line| line.get("alarms").is_none_or(|alarms| alarms == &Value::Array(Vec::new())))
    );
    let told = run("rate 110..120 Hz", &[]);
    assert_eq!(told.status.code(), Some(0));
    let alarms = |line: &&Value| line.pointer("/alarms/0/of").is_some_and(|of| of == "rate");
    assert!(lines(&told).iter().filter(alarms).count() >= 7);
    let ended = run("rate 110..120 Hz", &["--stop-on-limit"]);
    assert_eq!(ended.status.code(), Some(4));
    assert!(lines(&ended).len() <= 3, "it ends with the first alarm");
}

#[test]
fn the_log_can_be_read_by_trend_and_the_audio_that_is_kept_is_the_audio_that_came() {
    let folder = Folder::new();
    let samples = clicks(12.0, 16_000);
    let path = folder.wav("run.wav", &samples, 1, 16_000, 16);
    let output = gaptone()
        .current_dir(folder.0.path())
        .args([
            "watch",
            path.to_str().expect("UTF-8"),
            "--log",
            "gap.jsonl",
            "--log-every",
            "3s",
            "--record",
            "kept.wav",
        ])
        .output()
        .expect("it runs");
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let log = std::fs::read_to_string(folder.path("gap.jsonl")).expect("a log");
    assert!((3..=4).contains(&log.lines().count()), "{log}");
    let trend =
        gaptone().current_dir(folder.0.path()).args(["trend", "gap.jsonl", "--json"]).output().expect("it runs");
    assert_eq!(trend.status.code(), Some(0), "{}", stderr(&trend));
    let of = |name| -> Vec<i32> {
        let mut reader = hound::WavReader::open(folder.path(name)).expect("a WAV file");
        let shift = 24 - reader.spec().bits_per_sample;
        reader.samples::<i32>().map(|x| x.expect("a sample") << shift).collect()
    };
    assert_eq!(of("kept.wav"), of("run.wav"));
}

#[test]
fn a_gap_that_stops_is_told_within_a_second_and_no_gap_ends_with_status_3() {
    let folder = Folder::new();
    let mut samples = clicks(8.0, 16_000);
    // The gap stops at 5 s; its noise goes on.
    let noise: Vec<f32> = samples.iter().take(64).copied().collect();
    (5 * 16_000..samples.len()).for_each(|n| samples[n] = noise[n % 48]);
    let path = folder.wav("stops.wav", &samples, 1, 16_000, 16);
    let output = gaptone().args(["watch", path.to_str().expect("UTF-8"), "--every", "0.25"]).output().expect("it runs");
    let all = lines(&output);
    let at = |time_s: f64| all.iter().find(|line| (number(line, "/time_s") - time_s).abs() < 1e-9).expect("a line");
    assert_eq!(at(4.75)["state"], "firing");
    assert_eq!(at(6.0)["state"], "not_firing");
    let silent = folder.wav("none.wav", &vec![0.0; 16_000 * 3], 1, 16_000, 16);
    let output = gaptone().args(["watch", silent.to_str().expect("UTF-8")]).output().expect("it runs");
    assert_eq!(output.status.code(), Some(3));
}

#[test]
fn wrong_input_is_told_in_one_line_that_says_what_would_be_right() {
    let folder = Folder::new();
    let path = folder.wav("run.wav", &clicks(1.0, 16_000), 1, 16_000, 16);
    let path = path.to_str().expect("UTF-8");
    for (arguments, says, status) in [
        (vec![path, "--raw", "s16be:48000:1"], "s16le", 2),
        (vec![path, "--limit", "speed 1..2"], "rate", 2),
        (vec![path, "--limit", "rate 450..430"], "lower one comes first", 2),
        (vec![path, "--limit", "rate 430..450", "--limit", "rate 460.."], "contradict", 2),
        (vec![path, "--limit", "voltage 3..4 kV"], "--bench", 2),
        (vec![path, "--every", "0"], "0.1", 2),
        (vec!["nowhere.wav"], "nowhere.wav", 1),
        (vec![path, "--record", "/nowhere/kept.wav"], "/nowhere/kept.wav", 1),
        (vec![path, "--log", "/nowhere/gap.jsonl"], "/nowhere/gap.jsonl", 1),
    ] {
        let output = gaptone().arg("watch").args(&arguments).output().expect("it runs");
        assert_eq!(output.status.code(), Some(status), "{arguments:?}: {}", stderr(&output));
        assert!(stderr(&output).contains(says), "{arguments:?}: {}", stderr(&output));
    }
}

#[test]
fn a_reader_that_goes_away_ends_the_watch_quietly() {
    let folder = Folder::new();
    let path = folder.wav("run.wav", &clicks(20.0, 16_000), 1, 16_000, 16);
    let program = assert_cmd::cargo::cargo_bin!("gaptone");
    let mut child = std::process::Command::new(program)
        .args(["watch", path.to_str().expect("UTF-8"), "--every", "0.1"])
        .stdout(std::process::Stdio::piped())
        .stderr(std::process::Stdio::piped())
        .spawn()
        .expect("it runs");
    drop(child.stdout.take());
    let output = child.wait_with_output().expect("it ends");
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
    assert!(output.stderr.is_empty());
}
