//! Trains whose clicks overlap: single clicks are lost in the channel, the line at the rate is not.
//!
//! The line's phase counts firings. The maxima of the real part of its analytic signal are candidates like clicks, so phase
//! slips become missed or extra ones; the jitter comes from the spectrum of its instantaneous frequency (see [`super::phase`]).

use super::fit::{FirstGains, Fit, Start, fit};
use crate::clicks::Candidates;
use crate::clicks::filter::FilterBank;
use crate::clicks::spectrum::{Spectrum, power_of_two_near, welch};
use rustfft::num_complex::Complex32;

/// Where lines are looked for, Hz.
const BAND_HZ: (f64, f64) = (650.0, 4000.0);
/// Least prominence of the line, and most of any of its fractions, dB.
const PROMINENCE_DB: f64 = 13.0;
const FRACTION_DB: f64 = 7.0;
/// Most energy below the line over the line's own.
const LOW_ENERGY: f64 = 0.6;
/// Standard deviation of the band's Gaussian, share of the line's frequency.
const BAND: f64 = 0.24;

/// A line in the spectrum.
#[derive(Debug, Clone, Copy)]
pub struct Line {
    /// Frequency, Hz.
    pub frequency_hz: f64,
    /// Height over its surroundings, dB.
    pub prominence_db: f64,
    /// Greatest height at 1/2, 1/3, 1/4, 2/3 and 3/4 of its frequency, dB.
    pub fraction_db: f64,
    /// Energy from 150 Hz to 0.85 of its frequency over the energy about it.
    pub low_energy: f64,
}

impl Line {
    /// True if it may be the rate of an overlapping train.
    #[must_use]
    pub fn may_be_a_rate(&self) -> bool {
        self.prominence_db >= PROMINENCE_DB && self.fraction_db <= FRACTION_DB && self.low_energy <= LOW_ENERGY
    }
}

/// The strongest lines of a window.
#[must_use]
pub fn lines(x: &[f32], rate_hz: f64) -> Vec<Line> {
    let Some(s) = smoothed(x, rate_hz) else { return Vec::new() };
    let (from, to) = (s.bin(BAND_HZ.0), s.bin(BAND_HZ.1.min(0.45 * rate_hz)));
    let mut peaks: Vec<usize> =
        (from.max(1)..to).filter(|&k| s.power[k] > s.power[k - 1] && s.power[k] >= s.power[k + 1]).collect();
    peaks.sort_by(|&a, &b| s.power[b].total_cmp(&s.power[a]));
    peaks.truncate(6);
    peaks.into_iter().map(|k| describe(&s, k as f64 * s.step_hz)).filter(|l| l.prominence_db >= 10.0).collect()
}

/// The line at a known frequency.
#[must_use]
pub fn describe_at(x: &[f32], rate_hz: f64, frequency_hz: f64) -> Line {
    smoothed(x, rate_hz).map_or(Line { frequency_hz, prominence_db: 0.0, fraction_db: 0.0, low_energy: 0.0 }, |s| {
        describe(&s, frequency_hz)
    })
}

fn smoothed(x: &[f32], rate_hz: f64) -> Option<Spectrum> {
    let segment = power_of_two_near(rate_hz / 8.0);
    if x.len() < 2 * segment {
        return None;
    }
    let mut s = welch(x, rate_hz, segment, true);
    let raw = s.power.clone();
    for k in 1..raw.len() - 1 {
        s.power[k] = 0.25 * raw[k - 1] + 0.5 * raw[k] + 0.25 * raw[k + 1];
    }
    Some(s)
}

fn describe(s: &Spectrum, f: f64) -> Line {
    let fraction_db =
        [0.5, 1.0 / 3.0, 0.25, 2.0 / 3.0, 0.75].iter().map(|q| prominence_db(s, f * q)).fold(f64::MIN, f64::max);
    Line {
        frequency_hz: f,
        prominence_db: prominence_db(s, f),
        fraction_db,
        low_energy: s.sum(150.0, 0.85 * f) / s.sum(0.93 * f, 1.07 * f).max(1e-300),
    }
}

/// Height of the greatest power within 1.2 % of a frequency over the median of its surroundings, dB.
fn prominence_db(s: &Spectrum, f: f64) -> f64 {
    let near = 0.012 * f + 2.0 * s.step_hz;
    let skirt = (0.05 * f).max(6.0 * s.step_hz);
    let mut top = 0.0f64;
    let mut around = Vec::new();
    for (k, &p) in s.power.iter().enumerate() {
        let off = (k as f64 * s.step_hz - f).abs();
        if off < near {
            top = top.max(p);
        }
        if off > skirt && off < 3.0 * skirt {
            around.push(p);
        }
    }
    if around.is_empty() || top == 0.0 {
        return -99.0;
    }
    10.0 * (top / (super::order::median(&around) + 1e-300)).log10()
}

/// A train found by its line.
#[derive(Debug, Clone)]
pub struct LineTrain {
    /// The line.
    pub line: Line,
    /// Cycles of the line as candidates, all of them.
    pub candidates: Candidates,
    /// The train among them.
    pub fit: Fit,
    /// Coefficient of variation of the line's amplitude.
    pub amplitude_cv: f64,
}

/// Counts the cycles of a line.
#[must_use]
pub fn count(bank: &FilterBank, x: &[f32], rate_hz: f64, line: Line) -> Option<LineTrain> {
    let f0 = line.frequency_hz;
    let mut z: Vec<Complex32> = Vec::new();
    let kernel = bank.kernel_of_gain(rate_hz, |f| (-0.5 * ((f - f0) / (BAND * f0)).powi(2)).exp());
    bank.apply_analytic(x, &kernel, &mut z);
    let candidates = maxima(&z, rate_hz);
    let start = Start { period_s: 1.0 / f0, jitter: 0.04, follow: 0.05, gains: FirstGains::Soft, rounds: 6 };
    let fit = fit(&candidates, x.len() as f64 / rate_hz, start)?;
    let n = z.len() as f64;
    let mean = z.iter().map(|v| f64::from(v.norm())).sum::<f64>() / n;
    let square = z.iter().map(|v| f64::from(v.norm_sqr())).sum::<f64>() / n;
    Some(LineTrain { line, candidates, fit, amplitude_cv: (square - mean * mean).max(0.0).sqrt() / mean.max(1e-30) })
}

fn maxima(z: &[Complex32], rate_hz: f64) -> Candidates {
    let mut c = Candidates::default();
    for i in 1..z.len().saturating_sub(1) {
        let (a, b, d) = (z[i - 1].re, z[i].re, z[i + 1].re);
        if b > a && b >= d && b > 0.0 {
            let bend = a - 2.0 * b + d;
            let shift = if bend < 0.0 { 0.5 * (a - d) / bend } else { 0.0 };
            c.time_s.push((i as f64 + f64::from(shift)) / rate_hz);
            c.mark.push(f64::from(z[i].norm()).max(1e-9).ln());
        }
    }
    c
}
