//! Band-limited interpolation: a windowed sinc, for putting impulses between samples and for changing the rate.

use rustfft::num_complex::Complex64;
use std::f64::consts::{PI, TAU};

/// Windowed sinc at a distance of `x` samples, zero beyond `half` samples; four-term Blackman–Harris window.
fn windowed_sinc(x: f64, half: f64) -> f64 {
    if x.abs() >= half {
        return 0.0;
    }
    let sinc = if x.abs() < 1e-9 { 1.0 } else { (PI * x).sin() / (PI * x) };
    let a = TAU * (0.5 + 0.5 * x / half);
    sinc * (0.358_75 - 0.488_29 * a.cos() + 0.141_28 * (2.0 * a).cos() - 0.011_68 * (3.0 * a).cos())
}

/// Half width of the impulse laid down, samples. At 192 kHz it is flat far beyond any channel.
const PLACE_HALF: usize = 16;
/// Table steps a sample; with linear interpolation the error stays below 1e-5.
const PLACE_STEPS: usize = 512;

/// Lays band-limited impulses of unit area at exact times.
pub struct Placer {
    table: Vec<f64>,
}

impl Placer {
    /// Prepares the table.
    pub fn new() -> Self {
        let half = PLACE_HALF as f64;
        let count = 2 * PLACE_HALF * PLACE_STEPS + 2;
        Self { table: (0..count).map(|i| windowed_sinc(i as f64 / PLACE_STEPS as f64 - half, half)).collect() }
    }

    /// Adds an impulse of the given strength at `position` samples; parts beyond the ends are lost.
    pub fn add(&self, line: &mut [Complex64], position: f64, strength: Complex64) {
        let first = (position - PLACE_HALF as f64).ceil() as i64;
        let offset = (first as f64 - position + PLACE_HALF as f64) * PLACE_STEPS as f64;
        let (start, rest) = (offset as usize, offset.fract());
        for k in 0..2 * PLACE_HALF {
            let index = start + k * PLACE_STEPS;
            let Some(next) = self.table.get(index + 1) else { break };
            let value = self.table[index] * (1.0 - rest) + next * rest;
            let at = first + k as i64;
            if at >= 0 && (at as usize) < line.len() {
                line[at as usize] += strength * value;
            }
        }
    }
}

/// Zero crossings on each side of the rate changer's kernel.
const RESAMPLE_CROSSINGS: f64 = 28.0;
/// Cut-off of the rate changer relative to half the lower rate.
const RESAMPLE_CUT: f64 = 0.93;

/// Changes the sample rate by a windowed sinc evaluated at the exact output instants.
pub fn resample(input: &[f64], from_hz: u32, to_hz: u32) -> Vec<f64> {
    let ratio = f64::from(from_hz) / f64::from(to_hz);
    let cut = RESAMPLE_CUT * (1.0 / ratio).min(1.0);
    let half = RESAMPLE_CROSSINGS / cut;
    let phases = (to_hz / greatest_common_divisor(from_hz, to_hz)) as usize;
    let taps: Vec<Vec<f64>> = (0..phases)
        .map(|p| {
            let rest = (p as f64 * ratio).fract();
            let reach = half.ceil() as i64;
            (-reach..=reach).map(|k| cut * windowed_sinc((k as f64 - rest) * cut, RESAMPLE_CROSSINGS)).collect()
        })
        .collect();
    let reach = half.ceil() as i64;
    let count = (input.len() as f64 / ratio) as usize;
    (0..count)
        .map(|n| {
            let base = (n as u64 * u64::from(from_hz) / u64::from(to_hz)) as i64 - reach;
            dot(input, base, &taps[n % phases])
        })
        .collect()
}

/// Sum of taps times input from index `base`, zero beyond the ends.
fn dot(input: &[f64], base: i64, taps: &[f64]) -> f64 {
    let skip = (-base).max(0) as usize;
    let start = base.max(0) as usize;
    if skip >= taps.len() || start >= input.len() {
        return 0.0;
    }
    input[start..].iter().zip(&taps[skip..]).map(|(x, w)| x * w).sum()
}

fn greatest_common_divisor(a: u32, b: u32) -> u32 {
    if b == 0 { a } else { greatest_common_divisor(b, a % b) }
}
