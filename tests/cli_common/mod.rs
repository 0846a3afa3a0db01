//! What the tests of the command line share: the program, a folder, recordings made on the spot.

#![allow(dead_code, reason = "each test program uses a part")]

use assert_cmd::Command;
use rand::rngs::Xoshiro256PlusPlus;
use rand::{RngExt, SeedableRng};
use std::fs;
use std::path::{Path, PathBuf};

/// Rate of the made-up train, Hz.
pub const RATE_HZ: f64 = 100.0;

/// The program.
pub fn gaptone() -> Command {
    assert_cmd::cargo::cargo_bin_cmd!("gaptone")
}

/// A temporary folder with files in it.
pub struct Folder(pub tempfile::TempDir);

impl Folder {
    pub fn new() -> Self {
        Self(tempfile::tempdir().expect("a temporary folder"))
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    pub fn file(&self, name: &str, bytes: &[u8]) -> PathBuf {
        let path = self.path(name);
        fs::write(&path, bytes).expect("a file can be written");
        path
    }

    pub fn wav(&self, name: &str, samples: &[f32], channels: u16, rate_hz: u32, bits: u16) -> PathBuf {
        let path = self.path(name);
        let float = bits == 0;
        let spec = hound::WavSpec {
            channels,
            sample_rate: rate_hz,
            bits_per_sample: if float { 32 } else { bits },
            sample_format: if float { hound::SampleFormat::Float } else { hound::SampleFormat::Int },
        };
        let mut writer = hound::WavWriter::create(&path, spec).expect("a WAV file can be written");
        for &sample in samples {
            if float {
                writer.write_sample(sample).expect("written");
            } else {
                let full_scale = f64::from(1_u32 << (bits - 1));
                let value = (f64::from(sample) * full_scale).round().clamp(-full_scale, full_scale - 1.0);
                writer.write_sample(value as i32).expect("written");
            }
        }
        writer.finalize().expect("written");
        path
    }
}

/// Clicks at [`RATE_HZ`] with a jitter of 0.5 % (uniform) in a little noise; one seed for all tests.
pub fn clicks(duration_s: f64, sample_rate_hz: u32) -> Vec<f32> {
    let rate_hz = f64::from(sample_rate_hz);
    let mut rng = Xoshiro256PlusPlus::seed_from_u64(1);
    let mut samples: Vec<f32> =
        (0..(duration_s * rate_hz) as usize).map(|_| 0.004 * (rng.random::<f32>() - 0.5)).collect();
    let mut time_s = 0.004;
    while time_s < duration_s {
        add_click(&mut samples, time_s * rate_hz, rate_hz);
        // Uniform between ±√3·σ has the standard deviation σ.
        time_s += (1.0 + 0.005 * 3_f64.sqrt() * (2.0 * rng.random::<f64>() - 1.0)) / RATE_HZ;
    }
    samples
}

/// A decaying cosine of 1 kHz that starts at `at` samples.
fn add_click(samples: &mut [f32], at: f64, rate_hz: f64) {
    let first = at.ceil() as usize;
    let last = (first + (0.003 * rate_hz) as usize).min(samples.len());
    for (k, sample) in samples.iter_mut().enumerate().take(last).skip(first) {
        let t = (k as f64 - at) / rate_hz;
        *sample += (0.5 * (-t / 0.0004).exp() * (std::f64::consts::TAU * 1000.0 * t).cos()) as f32;
    }
}

/// Standard output as JSON.
pub fn json(output: &std::process::Output) -> serde_json::Value {
    serde_json::from_slice(&output.stdout).expect("standard output holds JSON")
}

/// Standard error as text.
pub fn stderr(output: &std::process::Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

/// Runs `gaptone measure` on a file and gives exit status, standard output and standard error.
pub fn measure(path: &Path, options: &[&str]) -> (i32, String, String) {
    let output = gaptone().arg("measure").arg(path).args(options).output().expect("the program runs");
    (output.status.code().expect("no signal"), String::from_utf8_lossy(&output.stdout).into_owned(), stderr(&output))
}
