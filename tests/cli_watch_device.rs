//! Watching a sound card without one: through the sound library's file device, as fast as it goes and in real time.

#![cfg(all(feature = "sound-card", target_os = "linux"))]

mod cli_common;

use cli_common::{Folder, RATE_HZ, clicks, gaptone, stderr};
use serde_json::Value;
use std::io::Write;
use std::process::Stdio;
use std::time::{Duration, Instant};

/// Configuration of the sound library whose default device reads a file.
const FROM_A_FILE: &str = "<confdir:alsa.conf>
pcm.bench_in {
  type file
  slave.pcm \"null\"
  file \"/dev/null\"
  infile { @func getenv vars [ HEARD ] default \"/dev/null\" }
  format \"raw\"
}
pcm.!default {
  type asym
  playback.pcm \"null\"
  capture.pcm \"bench_in\"
  hint { show on description \"file-backed test device\" }
}
";

/// One without a device.
const NOTHING: &str = "# no device\n";

const SAMPLE_RATE_HZ: u32 = 48_000;

/// Audio as the device gives it, of values that 24 bits hold: 32-bit floating point.
fn audio(duration_s: f64) -> (Vec<f32>, Vec<u8>) {
    let samples: Vec<f32> =
        clicks(duration_s, SAMPLE_RATE_HZ).iter().map(|x| (x * 8_388_608.0).round() / 8_388_608.0).collect();
    let bytes = samples.iter().flat_map(|x| x.to_le_bytes()).collect();
    (samples, bytes)
}

fn check_rates(text: &str) {
    let all: Vec<Value> = text.lines().map(|line| serde_json::from_str(line).expect("JSON")).collect();
    let rates: Vec<&Value> = all.iter().map(|line| &line["firing_rate_hz"]).filter(|rate| !rate.is_null()).collect();
    assert!(rates.len() >= 3, "{text}");
    for rate in rates {
        let of = |end: &str| rate[end].as_f64().expect("a number");
        // Twice the interval: a few intervals of 95 % are looked at, and each must hold.
        let (low, high) = (2.0 * of("low") - of("value"), 2.0 * of("high") - of("value"));
        assert!((low..=high).contains(&RATE_HZ), "{rate}");
    }
}

#[test]
fn what_the_device_gives_is_kept_to_the_bit_and_its_rate_is_right() {
    let folder = Folder::new();
    let (samples, bytes) = audio(4.0);
    let heard = folder.file("heard.raw", &bytes);
    let configuration = folder.file("sound.conf", FROM_A_FILE.as_bytes());
    let output = gaptone()
        .current_dir(folder.0.path())
        .args(["watch", "--device", "default", "--for", "4", "--record", "kept.wav"])
        .env("ALSA_CONFIG_PATH", configuration)
        .env("HEARD", heard)
        .output()
        .expect("it runs");
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    check_rates(&String::from_utf8_lossy(&output.stdout));
    let mut reader = hound::WavReader::open(folder.path("kept.wav")).expect("a WAV file");
    let kept: Vec<f32> = reader.samples::<i32>().map(|x| x.expect("a sample") as f32 / 8_388_608.0).collect();
    assert_eq!(kept, samples);
}

#[test]
fn a_device_in_real_time_is_followed_as_it_comes() {
    let folder = Folder::new();
    let (_, bytes) = audio(4.0);
    let heard = folder.path("heard.fifo");
    let made = std::process::Command::new("mkfifo").arg(&heard).status().is_ok_and(|status| status.success());
    if !made {
        println!("skipped: no named pipe can be made here");
        return;
    }
    let configuration = folder.file("sound.conf", FROM_A_FILE.as_bytes());
    let program = assert_cmd::cargo::cargo_bin!("gaptone");
    let child = std::process::Command::new(program)
        .args(["watch", "--device", "default", "--for", "3.5", "--every", "0.5"])
        .env("ALSA_CONFIG_PATH", configuration)
        .env("HEARD", &heard)
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("it runs");
    let mut pipe = std::fs::OpenOptions::new().write(true).open(&heard).expect("the device is opened");
    let began = Instant::now();
    // A tenth of a second at a time, at its own pace.
    for (k, part) in bytes.chunks(4 * SAMPLE_RATE_HZ as usize / 10).enumerate() {
        std::thread::sleep(Duration::from_millis(100 * k as u64).saturating_sub(began.elapsed()));
        // After its 3.5 s the program no longer reads.
        if pipe.write_all(part).is_err() {
            break;
        }
    }
    let output = child.wait_with_output().expect("it ends");
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
    check_rates(&String::from_utf8_lossy(&output.stdout));
}

#[test]
fn devices_are_listed_and_missing_ones_told_in_one_line() {
    let folder = Folder::new();
    let run = |arguments: &[&str], configuration: &str| {
        let configuration = folder.file("sound.conf", configuration.as_bytes());
        gaptone().arg("watch").args(arguments).env("ALSA_CONFIG_PATH", configuration).output().expect("it runs")
    };
    let listed = run(&["--list-devices"], FROM_A_FILE);
    assert_eq!(listed.status.code(), Some(0), "{}", stderr(&listed));
    assert!(String::from_utf8_lossy(&listed.stdout).contains("file-backed test device"));
    for (arguments, configuration, says) in [
        (["--device", "nonesuch"], FROM_A_FILE, "default"),
        (["--device", "default"], NOTHING, "a file can be watched instead"),
    ] {
        let output = run(&arguments, configuration);
        assert_eq!(output.status.code(), Some(1), "{arguments:?}");
        let said = stderr(&output);
        assert_eq!(said.lines().count(), 1, "{said}");
        assert!(said.starts_with("gaptone: ") && said.contains(says), "{said}");
    }
}
