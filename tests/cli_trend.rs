//! `measure --log` and `trend` through the program.

mod cli_common;
mod trend_help;

use cli_common::{Folder, clicks, gaptone, json, stderr};
use serde_json::Value;
use std::path::Path;
use std::process::{Command, Stdio};
use trend_help::Gap;

const BENCH: &str = "title = \"invented\"\nsupply.voltage = \"9.2 kV ± 0.5 %\"\ncharging.time_constant = \"12 ms\"\n\
                     gap.electrodes = \"spheres\"\ngap.diameter = \"25 mm\"\nair.temperature = \"21 °C\"\nair.pressure = \"1002 hPa (u 1 hPa)\"\n";

/// A folder with a short recording and a bench.
fn folder() -> Folder {
    let folder = Folder::new();
    folder.wav("a.wav", &clicks(0.5, 16_000), 1, 16_000, 16);
    folder.file("bench.toml", BENCH.as_bytes());
    folder
}

/// Entries as a log.
fn log_text(entries: &[gaptone::trend::Entry]) -> String {
    entries.iter().map(|entry| serde_json::to_string(entry).expect("JSON") + "\n").collect()
}

fn run(folder: &Folder, arguments: &[&str]) -> std::process::Output {
    gaptone().current_dir(folder.0.path()).args(arguments).output().expect("it runs")
}

fn lines(path: &Path) -> Vec<Value> {
    let text = std::fs::read_to_string(path).expect("a log");
    text.lines().map(|line| serde_json::from_str(line).unwrap_or_else(|error| panic!("{error}: {line}"))).collect()
}

#[test]
fn a_measurement_leaves_a_line_with_its_figures_bench_and_weather() {
    let folder = folder();
    let options =
        ["--bench", "bench.toml", "--log", "gap.jsonl", "--at", "2026-03-04T05:06+01:00", "--hour-meter", "12.5"];
    let weather = ["--temperature", "-3 °C", "--humidity", "40 % ± 5 %"];
    let output = run(&folder, &[&["measure", "a.wav", "--json"], &options[..], &weather].concat());
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let entry = &lines(&folder.path("gap.jsonl"))[0];
    let measured = json(&output);
    assert_eq!(entry["format"], "gaptone.log/1");
    assert_eq!(entry["time"], "2026-03-04T04:06:00Z");
    for key in ["verdict", "firings", "firing_rate_hz", "period_jitter_s", "gap_voltage_v", "gap_voltage_spread_v"] {
        assert_eq!(entry[key], measured[key], "{key}");
    }
    assert_eq!(entry["file"], "a.wav");
    assert_eq!(entry["hour_meter_h"], 12.5);
    assert_eq!(entry["bench"]["electrodes"], "spheres");
    assert_eq!(entry["bench"]["supply_v"], 9200.0);
    let value = |of: &Value| of.as_f64().expect("a number");
    assert!((value(&entry["air"]["temperature_k"]["value"]) - 270.15).abs() < 1e-9);
    assert!((value(&entry["air"]["humidity"]["u"]) - 0.05 / 3f64.sqrt()).abs() < 1e-9);
    assert!((value(&entry["air"]["pressure_pa"]["u"]) - 100.0).abs() < 1e-9, "from the bench");
    assert!((value(&entry["firing_time_s"]) - 0.48).abs() < 0.03, "{entry}");
}

#[test]
fn eight_processes_that_append_at_once_lose_no_line() {
    let folder = folder();
    let children: Vec<_> = (0..8)
        .map(|writer| {
            // Twelve recordings each; the name of the writer is in the path.
            let name = format!("w{writer}.wav");
            std::fs::copy(folder.path("a.wav"), folder.path(&name)).expect("copied");
            Command::new(assert_cmd::cargo::cargo_bin!("gaptone"))
                .current_dir(folder.0.path())
                .arg("measure")
                .args(vec![name; 12])
                .args(["--log", "gap.jsonl"])
                .stdout(Stdio::null())
                .spawn()
                .expect("it starts")
        })
        .collect();
    for mut child in children {
        assert!(child.wait().expect("it ends").success());
    }
    let entries = lines(&folder.path("gap.jsonl"));
    for writer in 0..8 {
        let of_writer = entries.iter().filter(|entry| entry["file"] == format!("w{writer}.wav")).count();
        assert_eq!(of_writer, 12);
    }
    assert_eq!(entries.len(), 96);
}

#[test]
fn a_kill_at_any_time_loses_at_most_the_line_in_flight_and_the_next_run_says_so() {
    const ROUNDS: u64 = 8;
    let folder = folder();
    let log = folder.path("gap.jsonl");
    let length = || std::fs::metadata(&log).map_or(0, |facts| facts.len());
    for round in 0..ROUNDS {
        let before = length();
        let mut child = Command::new(assert_cmd::cargo::cargo_bin!("gaptone"))
            .current_dir(folder.0.path())
            .arg("measure")
            .args(["a.wav"; 200])
            .args(["--log", "gap.jsonl"])
            .stdout(Stdio::null())
            .spawn()
            .expect("it starts");
        // As soon as it writes, and then a little later each round.
        while length() == before && child.try_wait().expect("its status").is_none() {
            std::thread::sleep(std::time::Duration::from_millis(1));
        }
        std::thread::sleep(std::time::Duration::from_micros(700 * round));
        // SIGKILL on Unix.
        child.kill().expect("killed");
        child.wait().expect("it ends");
    }
    let text = std::fs::read_to_string(&log).unwrap_or_default();
    let whole: Vec<&str> = text.split_inclusive('\n').filter(|line| line.ends_with('\n')).collect();
    let broken = whole.iter().filter(|line| serde_json::from_str::<Value>(line).is_err()).count();
    // A kill in the middle of a write is rare; each round can cut one line at most.
    assert!(broken as u64 <= ROUNDS && whole.len() as u64 >= ROUNDS, "{broken} of {}", whole.len());
    // What a kill in the middle of a write leaves behind, made by hand.
    let kept = whole.len() - broken;
    std::fs::write(&log, text.clone() + "{\"format\":\"gaptone.log/1\",\"time\":\"2026-0").expect("written");
    let output = run(&folder, &["measure", "a.wav", "--log", "gap.jsonl"]);
    assert_eq!(output.status.code(), Some(0));
    assert!(
        stderr(&output).contains("gap.jsonl: its last line had been cut off by a run that was stopped"),
        "{}",
        stderr(&output)
    );
    let output = run(&folder, &["trend", "gap.jsonl", "--json"]);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let trend = json(&output);
    assert_eq!(trend["entries"], kept + 1);
    let notes = trend["notes"].to_string();
    assert!(notes.contains("cut off by a run that was stopped while it wrote; nothing else is lost"), "{notes}");
}

#[test]
fn the_history_is_shown_as_text_json_and_csv_and_ends_with_what_to_do() {
    let folder = folder();
    let gap = Gap { scatter: 0.005, step: Some((30, 0.03)), ..Gap::default() };
    folder.file("gap.jsonl", log_text(&gap.entries(45, 3)).as_bytes());
    let output = run(&folder, &["trend", "gap.jsonl"]);
    let text = String::from_utf8(output.stdout).expect("UTF-8");
    for part in [
        "45 entries of \"invented\"",
        "limits",
        "moving range",
        "step",
        "slope",
        "air",
        "implied spacing",
        "caution: kilovolts",
    ] {
        assert!(text.contains(part), "{part}: {text}");
    }
    let last = text.rsplit("\n\n").next().expect("an end").split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(last.starts_with("out of limits since 2026-") && last.contains("look for worn"), "{text}");
    let trend = json(&run(&folder, &["trend", "gap.jsonl", "--json"]));
    assert_eq!((&trend["format"], &trend["state"]), (&"gaptone.trend/1".into(), &"out_of_limits".into()));
    assert_eq!(trend["points"].as_array().map(Vec::len), Some(45));
    let back: gaptone::trend::Trend = serde_json::from_value(trend).expect("the type of the library");
    assert_eq!(back.advice, last);
    let csv = String::from_utf8(run(&folder, &["trend", "gap.jsonl", "--csv"]).stdout).expect("UTF-8");
    let fields = gaptone::report::TREND_HEADER.split(',').count();
    assert_eq!(csv.lines().next(), Some(gaptone::report::TREND_HEADER));
    assert_eq!(csv.lines().count(), 46);
    assert!(csv.lines().all(|line| line.split(',').count() == fields), "{csv}");
}

#[test]
fn lines_of_a_newer_version_are_kept_skipped_and_noted() {
    let folder = folder();
    let mut text = log_text(&Gap::default().entries(12, 4));
    text += "{\"format\":\"gaptone.log/2\",\"time\":{\"tai\":1}}\n";
    folder.file("gap.jsonl", text.as_bytes());
    run(&folder, &["measure", "a.wav", "--bench", "bench.toml", "--log", "gap.jsonl"]);
    let now = std::fs::read_to_string(folder.path("gap.jsonl")).expect("a log");
    assert!(now.starts_with(&text), "what was there stays");
    let trend = json(&run(&folder, &["trend", "gap.jsonl", "--json"]));
    assert_eq!(trend["entries"], 13);
    assert!(
        trend["notes"][0].as_str().is_some_and(|note| note.contains("line 13 of a newer version (gaptone.log/2)")),
        "{trend}"
    );
}

#[test]
fn bad_input_gets_one_clear_line() {
    let folder = folder();
    folder.file("empty.jsonl", b"");
    folder.file("foreign.jsonl", b"time,voltage\n1,2\n");
    folder.file("binary.jsonl", &[0xff, 0xfe, 0, b'\n', 0x80]);
    folder.file("gap.jsonl", log_text(&Gap::default().entries(12, 4)).as_bytes());
    let cases: [(&[&str], i32, &str); 12] = [
        (&["trend", "no.jsonl"], 1, "no.jsonl: no such file"),
        (&["trend", "."], 1, ".: is a directory"),
        (&["trend", "empty.jsonl"], 1, "empty.jsonl: holds no entry (the file is empty)"),
        (&["trend", "foreign.jsonl"], 1, "2 lines, the first is line 1, that is no entry"),
        (&["trend", "binary.jsonl"], 1, "holds no entry"),
        (&["trend", "gap.jsonl", "--title", "nobody"], 2, "no entry can be charted"),
        (&["trend", "gap.jsonl", "--limits", "5kV"], 2, "--limits: `5kV` is not a range"),
        (&["trend", "gap.jsonl", "--limits", "7.3kV..6.9kV"], 2, "runs from high to low"),
        (&["trend", "gap.jsonl", "--since", "last week"], 2, "write it as 2026-11-30"),
        (&["measure", "a.wav", "--log", "no/gap.jsonl"], 1, "no/gap.jsonl: cannot be written: there is no such folder"),
        (
            &["measure", "a.wav", "--log", "new.jsonl", "--pressure", "1002 kPa"],
            2,
            "--pressure: 1002 kPa is no weather",
        ),
        (&["measure", "a.wav", "--log", "new.jsonl", "--temperature", "21"], 2, "--temperature: `21` has no unit"),
    ];
    for (arguments, status, message) in cases {
        let output = run(&folder, arguments);
        assert_eq!(output.status.code(), Some(status), "{arguments:?}: {}", stderr(&output));
        let told = stderr(&output);
        assert!(told.contains(message), "{arguments:?}: {told}");
        // clap adds a pointer to --help behind an empty line.
        assert_eq!(told.lines().take_while(|line| !line.is_empty()).count(), 1, "{told}");
        assert!(output.stdout.is_empty());
    }
    assert!(!folder.path("new.jsonl").exists(), "nothing is left behind");
}

/// Writes a log of 100 000 entries for a look at the time; run with --ignored, the folder in GAPTONE_BIG_LOG.
#[test]
#[ignore = "writes a large file"]
fn a_log_of_100_000_entries() {
    let Ok(place) = std::env::var("GAPTONE_BIG_LOG") else { return };
    let gap = Gap { weather: trend_help::Weather::Changing, hours_each: 0.01, ..Gap::default() };
    std::fs::write(place, log_text(&gap.entries(100_000, 1))).expect("written");
}
