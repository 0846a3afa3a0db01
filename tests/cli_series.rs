//! `render --series` as a user meets it: files, index, going on after an interruption, faults with their line.

use std::fs;
use std::path::Path;
use std::process::Output;

const BENCH: &str = concat!(include_str!("data/series-bench.toml"), "carrier = \"0.3\"\n");

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
            "index.html",
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
    let page = fs::read_to_string(clips.join("index.html")).expect("read");
    assert_eq!(page.matches("<audio controls").count(), 3);
    for file in ["./marked.flac", "./supply-01.wav", "./supply-02.json"] {
        assert!(page.contains(&format!("=\"{file}\"")), "{file}");
    }
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
fn a_series_that_was_killed_in_the_middle_ends_in_the_same_files_as_one_that_ran_through() {
    let series = "[defaults]\nbench = \"bench.toml\"\nseconds = \"20 s\"\n[[clip]]\nname = \"supply\"\n\
                  vary = \"supply.voltage\"\nover = \"8 kV .. 9 kV\"\nsteps = 5\n";
    let (whole, killed) = (tempfile::tempdir().expect("a folder"), tempfile::tempdir().expect("a folder"));
    assert_eq!(run(whole.path(), series).status.code(), Some(0));
    fs::write(killed.path().join("bench.toml"), BENCH).expect("written");
    fs::write(killed.path().join("series.toml"), series).expect("written");
    let mut child = std::process::Command::new(assert_cmd::cargo::cargo_bin!("gaptone"))
        .current_dir(killed.path())
        .args(["render", "--series", "series.toml", "-o", "clips"])
        .stdout(std::process::Stdio::null())
        .spawn()
        .expect("it starts");
    let clips = killed.path().join("clips");
    while !clips.join("supply-02.wav").exists() && child.try_wait().expect("its state").is_none() {
        std::thread::sleep(std::time::Duration::from_millis(2));
    }
    child.kill().expect("killed, or at its end");
    child.wait().expect("its end");
    let first = fs::read(clips.join("supply-01.wav")).expect("the first clip is whole");
    assert_eq!(first, fs::read(whole.path().join("clips/supply-01.wav")).expect("read"));
    let text = said(&run(killed.path(), series));
    assert!(text.contains("supply-01.wav: is there already"), "{text}");
    for name in names(&whole.path().join("clips")) {
        let [a, b] = [&whole, &killed].map(|folder| fs::read(folder.path().join("clips").join(&name)).expect("read"));
        assert!(a == b, "{name} differs");
    }
}

#[cfg(unix)]
#[test]
fn a_full_disk_ends_a_clip_and_a_series_with_one_line_and_without_half_a_file() {
    let folder = tempfile::tempdir().expect("a folder");
    assert_eq!(run(folder.path(), SERIES).status.code(), Some(0));
    fs::remove_dir_all(folder.path().join("clips")).expect("removed");
    let before = names(folder.path());
    // No file may grow beyond some kilobytes; the signal for it is ignored, so that the write fails as on a full disk.
    let limited = |arguments: &str| {
        std::process::Command::new("sh")
            .current_dir(folder.path())
            .args(["-c", &format!("trap '' XFSZ; ulimit -f 40; exec \"$0\" render {arguments}")])
            .arg(assert_cmd::cargo::cargo_bin!("gaptone"))
            .output()
            .expect("it runs")
    };
    for name in ["clip.wav", "clip.flac"] {
        let output = limited(&format!("--bench bench.toml -o {name} --seconds 5"));
        assert_eq!(output.status.code(), Some(1), "{}", said(&output));
        assert!(said(&output).contains(&format!("{name}: writing failed")), "{}", said(&output));
        assert_eq!(names(folder.path()), before, "{name}");
    }
    let output = limited("--series series.toml -o clips");
    assert_eq!(output.status.code(), Some(1), "{}", said(&output));
    assert!(said(&output).contains("writing failed"), "{}", said(&output));
    assert!(names(&folder.path().join("clips")).is_empty());
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
    assert!(text.contains("the gap in the clip was found") && text.contains("inside the 95 % interval"), "{text}");
    let output = measure(&["--truth", "supply-01.json", "--json"]);
    let json: serde_json::Value = serde_json::from_slice(&output.stdout).expect("JSON");
    assert_eq!(json["format"], "gaptone.measurement/1");
    assert_eq!(json["comparison"]["verdict_holds"], true);
    let off = json["comparison"]["figures"][0]["intervals"].as_f64().expect("a distance");
    assert!(off.abs() < 2.0, "{off}");
    // The truth of another clip is far off, and a file that is no truth is refused.
    let other = measure(&["--truth", "supply-02.json"]);
    assert!(said(&other).contains("OUTSIDE the 95 % interval"), "{}", said(&other));
    let wrong = measure(&["--truth", "index.json"]);
    assert_eq!(wrong.status.code(), Some(1));
    assert!(said(&wrong).contains("is no truth file"), "{}", said(&wrong));
}
