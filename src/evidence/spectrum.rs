//! The spectrum of the audio over the whole recording.

use super::short;
use realfft::{RealFftPlanner, RealToComplex};
use serde::{Deserialize, Serialize};
use std::sync::Arc;

/// Lines of the audio, in columns of equal ratio.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Spectrum {
    /// Distance of the lines that the transform tells apart, Hz.
    pub resolution_hz: f64,
    /// Pieces of about a second that are averaged, and those that were heard.
    pub pieces: (u32, u32),
    /// Frequency of the highest line of each column, Hz, and its power against a sine of full scale, dB.
    pub peaks: Vec<(f64, f64)>,
}

/// Columns over the whole range.
const COLUMNS: usize = 480;
/// Lowest frequency shown, Hz.
const LOWEST_HZ: f64 = 10.0;
/// Floor, dB: nothing below says anything.
const FLOOR_DB: f64 = -160.0;
/// Pieces that are all taken, and every how manyth of those that come later: more would cost time and tell nothing new.
const ALL_PIECES: u32 = 40;
const LATER: u32 = 4;
/// Shortest transform.
const SHORTEST: usize = 1024;

/// Adds the power of Hann-windowed pieces of about a second.
pub(super) struct Meter {
    size: usize,
    held: Vec<f32>,
    power: Vec<f64>,
    pieces: u32,
    heard: u32,
    work: Option<(Arc<dyn RealToComplex<f32>>, Vec<f32>)>,
}

fn window(size: usize) -> Vec<f32> {
    (0..size).map(|k| (0.5 - 0.5 * (std::f64::consts::TAU * k as f64 / size as f64).cos()) as f32).collect()
}

impl Meter {
    pub fn new(rate_hz: f64) -> Self {
        let size = (rate_hz.max(1.0) as usize).next_power_of_two().max(SHORTEST);
        Self { size, held: Vec::new(), power: Vec::new(), pieces: 0, heard: 0, work: None }
    }

    pub fn push(&mut self, samples: &[f32]) {
        let mut rest = samples;
        while !rest.is_empty() {
            let (now, later) = rest.split_at((self.size - self.held.len()).min(rest.len()));
            self.held.extend_from_slice(now);
            rest = later;
            if self.held.len() == self.size {
                if self.heard < ALL_PIECES || self.heard.is_multiple_of(LATER) {
                    self.add();
                }
                self.held.clear();
                self.heard += 1;
            }
        }
    }

    fn add(&mut self) {
        let size = self.size;
        let (plan, window) =
            self.work.get_or_insert_with(|| (RealFftPlanner::new().plan_fft_forward(size), window(size)));
        let mean = self.held.iter().sum::<f32>() / self.held.len() as f32;
        let mut block: Vec<f32> = self.held.iter().zip(window.iter()).map(|(s, w)| (s - mean) * w).collect();
        block.resize(size, 0.0);
        let mut lines = plan.make_output_vec();
        self.held.clear();
        // The lengths fit, which is all that can go wrong.
        if plan.process(&mut block, &mut lines).is_ok() {
            self.power.resize(lines.len(), 0.0);
            self.power.iter_mut().zip(&lines).for_each(|(p, line)| *p += f64::from(line.norm_sqr()));
            self.pieces += 1;
        }
    }

    pub fn finish(mut self, rate_hz: f64) -> Option<Spectrum> {
        if self.pieces == 0 {
            if self.held.len() < SHORTEST {
                return None;
            }
            // A recording shorter than a piece is taken as far as its greatest power of two.
            self.size = 1 << self.held.len().ilog2();
            self.held.truncate(self.size);
            self.work = None;
            self.add();
        }
        let resolution_hz = rate_hz / self.size as f64;
        // A sine of amplitude 1 gives a quarter of the square of the sum of the window, which is half the size.
        let full = (0.25 * self.size as f64).powi(2) * f64::from(self.pieces);
        let ratio = (0.5 * rate_hz / LOWEST_HZ).ln();
        let mut peaks: Vec<(usize, f64, f64)> = Vec::new();
        for (k, power) in self.power.iter().enumerate() {
            let frequency_hz = k as f64 * resolution_hz;
            if frequency_hz < LOWEST_HZ {
                continue;
            }
            let column = ((frequency_hz / LOWEST_HZ).ln() / ratio * COLUMNS as f64) as usize;
            let level_db = (10.0 * (power / full).log10()).max(FLOOR_DB);
            match peaks.last_mut() {
                Some(last) if last.0 == column => {
                    if level_db > last.2 {
                        *last = (column, frequency_hz, level_db);
                    }
                }
                _ => peaks.push((column, frequency_hz, level_db)),
            }
        }
        let peaks = peaks.into_iter().map(|(_, f, db)| (short(f, 6), short(db, 4))).collect();
        Some(Spectrum {
            resolution_hz: short(resolution_hz, 6),
            pieces: (self.pieces, self.heard.max(self.pieces)),
            peaks,
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_sine_of_half_scale_stands_at_minus_6_db_at_its_frequency() {
        let rate_hz = 48_000.0;
        let frequency_hz = 440.0 * rate_hz / 65_536.0;
        let samples: Vec<f32> = (0..150_000)
            .map(|k| (0.5 * (std::f64::consts::TAU * frequency_hz * f64::from(k) / rate_hz).sin()) as f32)
            .collect();
        let mut meter = Meter::new(rate_hz);
        samples.chunks(1000).for_each(|block| meter.push(block));
        let spectrum = meter.finish(rate_hz).expect("long enough");
        let top = spectrum.peaks.iter().max_by(|a, b| a.1.total_cmp(&b.1)).expect("lines");
        assert!((top.0 / frequency_hz - 1.0).abs() < 1e-4, "{top:?}");
        assert!((top.1 + 6.02).abs() < 0.05, "{top:?}");
    }
}
