//! Runs that are killed at any moment, full disks and folders that cannot be written: nothing half written stands under a final name,
//! a log stays readable, a series goes on.

#![cfg(unix)]

mod cli_common;

use cli_common::{Folder, clicks};
use gaptone::model::random::Random;
use std::fs;
use std::path::Path;
use std::process::{Command, Output, Stdio};
use std::time::{Duration, Instant};

/// Kills of each command, one in each equal part of the time that a whole run takes.
const KILLS: u32 = 25;

fn program(folder: &Path, arguments: &[&str]) -> Command {
    let mut command = Command::new(assert_cmd::cargo::cargo_bin!("gaptone"));
    command.current_dir(folder).args(arguments);
    command
}

fn whole(folder: &Path, arguments: &[&str]) -> Output {
    let output = program(folder, arguments).output().expect("it runs");
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    output
}

/// Runs the command to its end once and then kills it at moments spread over that time.
fn kill_often(folder: &Path, arguments: &[&str], mut look: impl FnMut(u32)) {
    let start = Instant::now();
    whole(folder, arguments);
    let length = start.elapsed();
    let mut random = Random::seeded(9);
    for round in 0..KILLS {
        let mut child =
            program(folder, arguments).stdout(Stdio::null()).stderr(Stdio::null()).spawn().expect("it starts");
        let part = (f64::from(round) + random.uniform()) / f64::from(KILLS);
        std::thread::sleep(Duration::from_secs_f64(part * length.as_secs_f64()));
        // SIGKILL; a run that has ended already is no failure.
        child.kill().expect("killed, or at its end");
        child.wait().expect("it ends");
        look(round);
    }
}

const MEASURE: [&str; 8] =
    ["measure", "a.wav", "--log", "gap.jsonl", "--report", "page.html", "--events", "clicks.csv"];

#[test]
fn a_measurement_killed_at_any_moment_leaves_whole_files_and_a_log_that_can_be_read() {
    let folder = Folder::new();
    folder.wav("a.wav", &clicks(8.0, 48_000), 1, 48_000, 16);
    whole(folder.0.path(), &MEASURE);
    let events = fs::read(folder.path("clicks.csv")).expect("read");
    let mut found = [0; 2];
    kill_often(folder.0.path(), &MEASURE, |round| {
        if let Ok(now) = fs::read(folder.path("clicks.csv")) {
            assert!(now == events, "round {round}: the events are not whole");
            found[0] += 1;
            fs::remove_file(folder.path("clicks.csv")).expect("removed");
        }
        if let Ok(page) = fs::read_to_string(folder.path("page.html")) {
            assert!(page.trim_end().ends_with("</html>"), "round {round}: the page is not whole");
            found[1] += 1;
            fs::remove_file(folder.path("page.html")).expect("removed");
        }
    });
    eprintln!("{found:?} of {KILLS} kills found events and page written");
    let output = whole(folder.0.path(), &MEASURE);
    assert!(output.stdout.starts_with(b"a.wav"));
    whole(folder.0.path(), &["trend", "gap.jsonl"]);
    let left: Vec<_> = fs::read_dir(folder.0.path()).expect("read").map(|e| e.expect("entry").file_name()).collect();
    assert_eq!(left.len(), 4, "what killed runs left beside the files has gone: {left:?}");
}

const WATCH: [&str; 9] =
    ["watch", "a.wav", "--every", "0.1", "--log", "gap.jsonl", "--log-every", "0.1", "--record=kept.wav"];

#[test]
fn a_watch_killed_at_any_moment_keeps_its_audio_and_a_log_that_can_be_read() {
    let folder = Folder::new();
    folder.wav("a.wav", &clicks(20.0, 48_000), 1, 48_000, 16);
    let samples = |name: &str| -> Option<Vec<i32>> {
        let mut reader = hound::WavReader::open(folder.path(name)).ok()?;
        let shift = 24 - reader.spec().bits_per_sample;
        Some(reader.samples::<i32>().map(|x| x.expect("the samples that its head states") << shift).collect())
    };
    let heard = samples("a.wav").expect("written");
    let mut kept = Vec::new();
    kill_often(folder.0.path(), &WATCH, |round| {
        // Killed before it had begun its file, it has left none, or an empty one.
        let now = samples("kept.wav").unwrap_or_default();
        assert!(now == heard[..now.len()], "round {round}: {} samples are not those heard", now.len());
        kept.push(now.len());
        let _ = fs::remove_file(folder.path("kept.wav"));
    });
    assert!(kept.iter().any(|&count| count > 0 && count < heard.len()), "{kept:?}");
    whole(folder.0.path(), &["trend", "gap.jsonl"]);
}

const BENCH: &str = include_str!("data/series-bench.toml");
const SERIES: &str = "
title = \"Killed\"
[defaults]
bench = \"bench.toml\"
seconds = \"0.5 s\"
[[clip]]
name = \"supply\"
vary = \"supply.voltage\"
over = [\"8 kV\", \"8.5 kV\", \"9 kV\"]
";

#[test]
fn a_series_killed_at_any_moment_has_whole_clips_only_and_ends_as_one_that_ran_through() {
    let arguments = ["render", "--series", "series.toml", "-o", "clips"];
    let [undisturbed, killed] = [Folder::new(), Folder::new()];
    for folder in [&undisturbed, &killed] {
        folder.file("bench.toml", BENCH.as_bytes());
        folder.file("series.toml", SERIES.as_bytes());
    }
    whole(undisturbed.0.path(), &arguments);
    let of_whole = undisturbed.path("clips");
    let clips = killed.path("clips");
    let same = |name: &std::ffi::OsStr| fs::read(clips.join(name)).ok() == fs::read(of_whole.join(name)).ok();
    kill_often(killed.0.path(), &arguments, |round| {
        for entry in fs::read_dir(&clips).into_iter().flatten() {
            let name = entry.expect("an entry").file_name();
            let text = name.to_string_lossy().into_owned();
            // A half-written file has a name of its own; index and page grow with the series.
            let final_name = of_whole.join(&name).exists();
            if final_name && text.ends_with(".wav") {
                assert!(same(&name), "round {round}: {text} is not whole");
            } else if final_name && text.ends_with(".json") {
                let content = fs::read_to_string(clips.join(&name)).expect("read");
                serde_json::from_str::<serde_json::Value>(&content)
                    .unwrap_or_else(|e| panic!("round {round}: {text}: {e}"));
            }
        }
        // Every other round goes on where the last one stopped.
        if round % 2 == 0 {
            let _ = fs::remove_dir_all(&clips);
        }
    });
    whole(killed.0.path(), &arguments);
    for entry in fs::read_dir(&of_whole).expect("read") {
        let name = entry.expect("an entry").file_name();
        assert!(name.to_string_lossy().ends_with(".html") || same(&name), "{name:?}");
    }
}

/// A small file system of its own, where the system lets it be made (Linux, root).
struct SmallDisk(Folder);

impl SmallDisk {
    fn new(options: &str) -> Option<Self> {
        let disk = Self(Folder::new());
        let mount = |how: &str| {
            let status = Command::new("mount").args(["-t", "tmpfs", "-o", how, "tmpfs"]).arg(disk.0.0.path()).output();
            status.is_ok_and(|output| output.status.success())
        };
        if mount(options) {
            return Some(disk);
        }
        eprintln!("no file system of a test's own can be mounted here: skipped");
        None
    }

    fn path(&self) -> &Path {
        self.0.0.path()
    }
}

impl Drop for SmallDisk {
    fn drop(&mut self) {
        // If it was never mounted there is nothing to take away.
        let _ = Command::new("umount").arg(self.path()).output();
    }
}

/// Runs the command and expects one line, exit status 1 and nothing under the final names.
fn assert_told(folder: &Folder, disk: &Path, arguments: &[String], left: usize) {
    let words: Vec<&str> = arguments.iter().map(String::as_str).collect();
    let output = program(folder.0.path(), &words).output().expect("it runs");
    let told = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(1), "{arguments:?}: {told}");
    assert_eq!(told.lines().count(), 1, "{arguments:?}: {told}");
    let files: Vec<_> = fs::read_dir(disk).expect("read").map(|e| e.expect("entry").file_name()).collect();
    assert_eq!(files.len(), left, "{arguments:?} left {files:?}");
}

fn commands(disk: &Path) -> Vec<Vec<String>> {
    let on = |name: &str| disk.join(name).to_string_lossy().into_owned();
    let list = |words: &[&str]| words.iter().map(|&word| word.to_owned()).collect::<Vec<String>>();
    vec![
        list(&["measure", "a.wav", "--events", &on("clicks.csv")]),
        list(&["measure", "a.wav", "--report", &on("page.html")]),
        list(&["render", "--bench", "bench.toml", "--seconds", "2", "-o", &on("clip.wav")]),
        list(&["render", "--bench", "bench.toml", "--seconds", "2", "-o", &on("clip.flac")]),
    ]
}

fn with_a_recording() -> Folder {
    let folder = Folder::new();
    folder.wav("a.wav", &clicks(8.0, 48_000), 1, 48_000, 16);
    folder.file("bench.toml", BENCH.as_bytes());
    folder
}

#[test]
fn a_full_disk_is_told_in_one_line_and_holds_no_half_file() {
    let Some(disk) = SmallDisk::new("size=8k") else { return };
    let folder = with_a_recording();
    for arguments in commands(disk.path()) {
        assert_told(&folder, disk.path(), &arguments, 0);
    }
    // A log that is full keeps its lines and gets no half one.
    let log = disk.path().join("gap.jsonl");
    let arguments = ["measure", "a.wav", "--log", log.to_str().expect("UTF-8")];
    let mut lines = 0;
    for _ in 0..20 {
        let output = program(folder.0.path(), &arguments).output().expect("it runs");
        let text = fs::read_to_string(&log).expect("read");
        if !output.status.success() {
            assert_eq!(output.status.code(), Some(1));
            break;
        }
        lines += 1;
        assert_eq!(text.lines().count(), lines);
    }
    assert!((1..20).contains(&lines), "{lines} lines");
    whole(folder.0.path(), &["trend", log.to_str().expect("UTF-8")]);
}

#[test]
fn a_folder_that_cannot_be_written_is_told_before_anything_is_done() {
    let Some(disk) = SmallDisk::new("ro") else { return };
    let folder = with_a_recording();
    for arguments in commands(disk.path()) {
        assert_told(&folder, disk.path(), &arguments, 0);
    }
}
