//! Click times read again in the channel that scatters least.
//!
//! A filter that finds clicks best does not time them best: whitening that buries hum also rings, long shapes overlap, a
//! carrier needs two shapes. The gap's own jitter is the same in every channel, so the channel with the least scatter of
//! periods has the least timing noise. Each channel is a whitening, a window about the click and a number of shape vectors.

use super::shape::{leading_vectors, median_shape};
use super::snippet::{dot, normalise, read};

/// How much the spectrum is flattened before times are read.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Flatness {
    /// Fully whitened.
    White,
    /// Half way.
    Half,
    /// As it is.
    Plain,
}

impl Flatness {
    /// All of them.
    pub const ALL: [Self; 3] = [Self::White, Self::Half, Self::Plain];

    /// High-pass (Hz) and floor of the whitening gain.
    #[must_use]
    pub fn settings(self) -> (f64, f64) {
        match self {
            Self::White => (250.0, 3e-3),
            Self::Half => (250.0, 0.1),
            Self::Plain => (150.0, 10.0),
        }
    }
}

/// One way to read click times.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Channel {
    /// Flattening.
    pub flatness: Flatness,
    /// Window about the click, s.
    pub window_s: (f64, f64),
    /// Shape vectors.
    pub vectors: usize,
}

impl std::fmt::Display for Channel {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let flatness = match self.flatness {
            Flatness::White => "fully",
            Flatness::Half => "half",
            Flatness::Plain => "hardly",
        };
        let (from, to) = (1e3 * self.window_s.0, 1e3 * self.window_s.1);
        let shapes = if self.vectors == 1 { "shape" } else { "shapes" };
        write!(f, "{} {shapes} from {from:+.2} to {to:+.2} ms, spectrum {flatness} flattened", self.vectors)
    }
}

/// Windows tried: middle, leading edge, long, short.
const MIDDLE: (f64, f64) = (-0.35e-3, 0.35e-3);
const LEADING: (f64, f64) = (-0.45e-3, 0.05e-3);
const LONG: (f64, f64) = (-0.5e-3, 1.0e-3);
const SHORT: (f64, f64) = (-0.15e-3, 0.15e-3);

/// The channels tried for signed (one shape) or unsigned (two shapes) clicks.
#[must_use]
pub fn channels(signed: bool) -> Vec<Channel> {
    let base = if signed { 1 } else { 2 };
    let mut all = Vec::new();
    for vectors in [base, base + 1] {
        all.extend(Flatness::ALL.map(|flatness| Channel { flatness, window_s: MIDDLE, vectors }));
    }
    for flatness in Flatness::ALL {
        for window_s in [LEADING, LONG, SHORT] {
            all.push(Channel { flatness, window_s, vectors: base });
        }
    }
    let odd = if signed { 3 } else { 1 };
    all.extend(Flatness::ALL.map(|flatness| Channel { flatness, window_s: MIDDLE, vectors: odd }));
    all.extend(Flatness::ALL.map(|flatness| Channel { flatness, window_s: LONG, vectors: if signed { 2 } else { 3 } }));
    all
}

/// Most clicks a shape is learnt from.
const LEARN_FROM: usize = 200;
/// Farthest that a time may move, s and periods.
const REACH_S: f64 = 0.12e-3;
const REACH_PERIODS: f64 = 0.2;
/// A time that ends farther off than this keeps its old value, s and periods.
const TRUST_S: f64 = 0.3e-3;
const TRUST_PERIODS: f64 = 0.35;

/// A channel that has learnt its shape.
#[derive(Debug, Clone)]
pub struct Reader {
    vectors: Vec<Vec<f32>>,
    centre: usize,
    signed: bool,
    reach: f64,
    trust_s: f64,
    rate_hz: f64,
}

impl Channel {
    /// Learns the channel's shape from clicks at given times in `x` (already flattened); none if the window is too short.
    #[must_use]
    pub fn learn(&self, x: &[f32], rate_hz: f64, time_s: &[f64], period_s: f64, signed: bool) -> Option<Reader> {
        let from = (self.window_s.0.max(-0.6 * period_s) * rate_hz) as isize;
        let to = (self.window_s.1.min(0.6 * period_s) * rate_hz) as isize;
        if to - from < 4 || time_s.len() < 4 {
            return None;
        }
        let centre = (-from) as usize;
        let length = (to - from + 1) as usize;
        let stride = time_s.len().div_ceil(LEARN_FROM);
        let rows: Vec<Vec<f32>> = time_s
            .iter()
            .step_by(stride)
            .map(|t| {
                let mut row = vec![0.0; length];
                read(x, t * rate_hz, centre, &mut row);
                normalise(&mut row);
                row
            })
            .collect();
        let signed = signed && self.vectors == 1;
        let vectors = if signed { vec![median_shape(&rows)] } else { leading_vectors(&rows, None, self.vectors) };
        Some(Reader {
            vectors,
            centre,
            signed,
            reach: REACH_S.min(REACH_PERIODS * period_s) * rate_hz,
            trust_s: TRUST_S.min(TRUST_PERIODS * period_s),
            rate_hz,
        })
    }
}

impl Reader {
    /// Reads the times anew: the local maximum of the match next to each time, to a fraction of a sample. The common shift of
    /// all clicks is taken out, so that channels can be compared.
    #[must_use]
    pub fn read(&self, x: &[f32], time_s: &[f64]) -> Vec<f64> {
        let reach = self.reach as usize + 2;
        let mut output = vec![0.0f32; 2 * reach + 1];
        let raw: Vec<f64> = time_s.iter().map(|&t| self.read_one(x, t, reach, &mut output)).collect();
        let shift = median_of(raw.iter().zip(time_s).map(|(a, b)| a - b));
        raw.iter()
            .zip(time_s)
            .map(|(new, old)| if (new - shift - old).abs() < self.trust_s { new - shift } else { *old })
            .collect()
    }

    fn read_one(&self, x: &[f32], time_s: f64, reach: usize, output: &mut [f32]) -> f64 {
        let at = (time_s * self.rate_hz).round() as isize;
        self.match_about(x, at, reach, output);
        let mut best = (0, f32::NEG_INFINITY);
        for (k, &v) in output.iter().enumerate() {
            let z = (k as f32 - reach as f32) / (0.8 * reach as f32);
            let weighted = v * (-0.5 * z * z).exp();
            if weighted > best.1 {
                best = (k, weighted);
            }
        }
        // The weight leans towards the old time: climb to the true local maximum.
        let mut k = best.0.clamp(1, output.len() - 2);
        for _ in 0..6 {
            k = if output[k + 1] > output[k] {
                k + 1
            } else if output[k - 1] > output[k] {
                k - 1
            } else {
                break;
            }
            .clamp(1, output.len() - 2);
        }
        let (a, b, c) = (output[k - 1], output[k], output[k + 1]);
        let bend = a - 2.0 * b + c;
        let shift = if bend < 0.0 { (0.5 * (a - c) / bend).clamp(-1.0, 1.0) } else { 0.0 };
        (at as f64 + k as f64 - reach as f64 + f64::from(shift)) / self.rate_hz
    }

    fn match_about(&self, x: &[f32], at: isize, reach: usize, output: &mut [f32]) {
        let length = self.vectors[0].len();
        let first = at - reach as isize - self.centre as isize;
        let total = length + 2 * reach;
        let mut edge;
        let part = if first >= 0 && first as usize + total <= x.len() {
            &x[first as usize..first as usize + total]
        } else {
            edge = vec![0.0f32; total];
            for (i, e) in edge.iter_mut().enumerate() {
                let k = first + i as isize;
                if k >= 0 && (k as usize) < x.len() {
                    *e = x[k as usize];
                }
            }
            &edge[..]
        };
        for (k, o) in output.iter_mut().enumerate() {
            let piece = &part[k..k + length];
            *o = if self.signed {
                dot(piece, &self.vectors[0])
            } else {
                self.vectors.iter().map(|v| dot(piece, v).powi(2)).sum::<f32>().sqrt()
            };
        }
    }
}

fn median_of(values: impl Iterator<Item = f64>) -> f64 {
    let mut all: Vec<f64> = values.collect();
    if all.is_empty() {
        return 0.0;
    }
    let mid = all.len() / 2;
    *all.select_nth_unstable_by(mid, f64::total_cmp).1
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_come_back_finer_than_a_sample() {
        let rate_hz = 48_000.0;
        let wave = |t: f64| (-0.5 * (t / 60e-6).powi(2)).exp() * (std::f64::consts::TAU * 2_000.0 * t).cos();
        let truth: Vec<f64> = (1..200).map(|n| 0.003 * f64::from(n) + 5e-6 * (f64::from(n) * 1.3).sin()).collect();
        let mut x = vec![0.0f32; 30_000];
        for t in &truth {
            for (i, v) in x.iter_mut().enumerate().skip((t * rate_hz) as usize - 30).take(60) {
                *v += wave(i as f64 / rate_hz - t) as f32;
            }
        }
        let start: Vec<f64> = truth.iter().map(|t| (t * rate_hz).round() / rate_hz).collect();
        let channel = channels(true)[0];
        let reader = channel.learn(&x, rate_hz, &start, 0.003, true).unwrap();
        let read = reader.read(&x, &start);
        let shift = median_of(read.iter().zip(&truth).map(|(a, b)| a - b));
        for (a, b) in read.iter().zip(&truth) {
            // A hundredth of a sample: cubic reading and the parabola, no noise.
            assert!((a - b - shift).abs() < 0.02 / rate_hz, "{}", (a - b - shift) * rate_hz);
        }
    }
}
