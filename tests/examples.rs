//! Every example runs, and every bench file among them can be used.

mod cli_common;

use cli_common::{Folder, gaptone, stderr};
use std::collections::BTreeSet;
use std::path::{Path, PathBuf};
use std::process::Command;

fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

/// The built example. `cargo test` builds all of them; for a single test they are built here.
fn example(name: &str) -> PathBuf {
    let folder = assert_cmd::cargo::cargo_bin!("gaptone").parent().expect("a folder").join("examples");
    let path = folder.join(format!("{name}{}", std::env::consts::EXE_SUFFIX));
    if !path.is_file() {
        let mut build = Command::new(env!("CARGO"));
        build.args(["build", "--example", name]).current_dir(root());
        if !cfg!(debug_assertions) {
            build.arg("--release");
        }
        assert!(build.status().expect("cargo runs").success(), "{name} does not build");
    }
    path
}

/// Runs an example and gives what it printed.
fn run(name: &str, arguments: &[&str]) -> String {
    let output = Command::new(example(name)).args(arguments).current_dir(root()).output().expect("it starts");
    assert!(output.status.success(), "{name}: {}", stderr(&output));
    String::from_utf8_lossy(&output.stdout).into_owned()
}

/// Names of the examples in the order of the alphabet.
fn names() -> BTreeSet<String> {
    std::fs::read_dir(root().join("examples"))
        .expect("examples")
        .map(|entry| entry.expect("an entry").path())
        .filter(|path| path.extension().is_some_and(|ending| ending == "rs") || path.join("main.rs").is_file())
        .map(|path| path.file_stem().expect("a name").to_string_lossy().into_owned())
        .collect()
}

#[test]
fn no_example_is_left_out_here() {
    let tried = ["make_sounds", "proving", "read_rate", "render_clip", "supply_sweep"];
    assert_eq!(names(), tried.map(str::to_owned).into());
}

#[test]
fn read_rate_prints_the_rate_of_a_shipped_clip() {
    let said = run("read_rate", &["sounds/steady.wav"]);
    assert!(said.contains("rate   423.5"), "{said}");
}

#[test]
fn render_clip_writes_a_clip_of_a_bench() {
    let folder = Folder::new();
    let path = folder.path("clip.wav");
    let said = run("render_clip", &["examples/benches/fast-gap.toml", path.to_str().expect("UTF-8"), "0.5", "3"]);
    assert!(said.contains("firings"), "{said}");
    assert_eq!(hound::WavReader::open(path).expect("a WAV file").duration(), 24_000);
}

#[test]
fn make_sounds_makes_every_shipped_clip() {
    let folder = Folder::new();
    run("make_sounds", &[folder.0.path().to_str().expect("UTF-8")]);
    for entry in std::fs::read_dir(root().join("sounds")).expect("sounds") {
        let path = entry.expect("an entry").path();
        if path.extension().is_some_and(|ending| ending == "wav" || ending == "json") {
            let name = path.file_name().expect("a name").to_string_lossy().into_owned();
            assert!(folder.path(&name).is_file(), "{name} was not made");
        }
    }
}

#[test]
fn supply_sweep_measures_back_the_rates_of_its_series() {
    let folder = Folder::new();
    let said = run("supply_sweep", &["sounds/steady.toml", folder.0.path().to_str().expect("UTF-8"), "3", "2"]);
    let rows: Vec<&str> = said.lines().skip(1).collect();
    assert_eq!(rows.len(), 3, "{said}");
    for (k, row) in rows.iter().enumerate() {
        assert!(folder.path(&format!("sweep-{}.wav", k + 1)).is_file());
        let numbers: Vec<f64> = row.split_whitespace().filter_map(|word| word.parse().ok()).collect();
        let [_supply_v, truth_hz, measured_hz, ..] = numbers[..] else { panic!("{row}") };
        // What the program promises for a clean clip.
        assert!((measured_hz / truth_hz - 1.0).abs() < 0.005, "{row}");
    }
}

#[test]
fn proving_prints_its_table() {
    let said = run("proving", &["--kinds", "clean", "--seeds", "0..2"]);
    assert!(said.lines().any(|line| line.starts_with("clean ")), "{said}");
}

#[test]
fn every_bench_file_shipped_parses_and_predicts() {
    let mut files = 0;
    for folder in ["examples/benches", "sounds"] {
        for entry in std::fs::read_dir(root().join(folder)).expect("bench files") {
            let path = entry.expect("an entry").path();
            if path.extension().is_none_or(|ending| ending != "toml") {
                continue;
            }
            files += 1;
            let text = std::fs::read_to_string(&path).expect("a bench file");
            let bench = gaptone::bench::parse(&text, "bench").unwrap_or_else(|error| panic!("{error}"));
            assert!(text.to_lowercase().contains("invented"), "{} does not say that it is invented", path.display());
            if bench.gap.voltage.is_none() {
                continue;
            }
            let output = gaptone().args(["predict", "--json", "--bench"]).arg(&path).output().expect("it runs");
            assert_eq!(output.status.code(), Some(0), "{}: {}", path.display(), stderr(&output));
            let told: serde_json::Value = serde_json::from_slice(&output.stdout).expect("JSON");
            assert_eq!(told["fires"], true, "{}", path.display());
        }
    }
    assert!(files >= 10, "{files} bench files");
}
