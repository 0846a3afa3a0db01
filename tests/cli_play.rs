//! Playing without a sound card: through the sound library's file device, and with no device at all.

#![cfg(all(feature = "sound-card", target_os = "linux"))]

mod cli_common;

use cli_common::{Folder, gaptone, stderr};
use std::path::{Path, PathBuf};
use std::process::Output;

/// Configuration of the sound library whose default device writes what it is given to a file.
const TO_A_FILE: &str = "<confdir:alsa.conf>
pcm.!default {
  type file
  slave.pcm \"null\"
  file { @func getenv vars [ PLAYED ] default \"/dev/null\" }
  format \"raw\"
}
";

/// One without a device.
const NOTHING: &str = "# no device\n";

fn bench() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("sounds/steady.toml")
}

fn run(arguments: &[&str], folder: &Folder, configuration: &str) -> Output {
    let configuration = folder.file("sound.conf", configuration.as_bytes());
    let bench = bench();
    gaptone()
        .args(arguments)
        .args(["--bench", bench.to_str().expect("UTF-8"), "--seconds", "0.5", "--play"])
        .env("ALSA_CONFIG_PATH", configuration)
        .env("PLAYED", folder.path("played.raw"))
        .current_dir(folder.0.path())
        .output()
        .expect("the program runs")
}

#[test]
fn what_is_played_is_what_is_written() {
    let folder = Folder::new();
    let output = run(&["render", "-o", "clip.wav", "--bits", "float"], &folder, TO_A_FILE);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let mut reader = hound::WavReader::open(folder.path("clip.wav")).expect("a WAV file");
    let written: Vec<f32> = reader.samples::<f32>().map(|sample| sample.expect("a sample")).collect();
    let played: Vec<f32> = std::fs::read(folder.path("played.raw"))
        .expect("what was played")
        .chunks_exact(4)
        .map(|bytes| f32::from_le_bytes([bytes[0], bytes[1], bytes[2], bytes[3]]))
        .collect();
    // The device goes on asking after the end and gets silence.
    assert!(played.len() >= written.len(), "{} of {}", played.len(), written.len());
    assert_eq!(played[..written.len()], written);
    assert!(played[written.len()..].iter().all(|&sample| sample == 0.0));
}

#[test]
fn predict_plays_what_a_bench_will_sound_like() {
    let folder = Folder::new();
    let output = run(&["predict"], &folder, TO_A_FILE);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    // Half a second of 48 000 samples of 4 bytes.
    assert!(std::fs::metadata(folder.path("played.raw")).expect("what was played").len() >= 96_000);
}

#[test]
fn without_a_device_one_line_says_so_and_the_clip_is_still_written() {
    for command in [&["render", "-o", "clip.wav"][..], &["predict", "--clip", "clip.wav"]] {
        let folder = Folder::new();
        let output = run(command, &folder, NOTHING);
        assert_eq!(output.status.code(), Some(1), "{command:?}");
        let said = stderr(&output);
        assert_eq!(said.lines().count(), 1, "{said}");
        assert!(said.starts_with("gaptone: ") && said.contains("sound output"), "{said}");
        assert!(folder.path("clip.wav").is_file());
    }
}
