//! The click's own shape, learnt from the recording.
//!
//! The audio of a receiver shows each firing as the same short wave (or, with a carrier under the clicks, as a mix of two
//! waves by the random carrier phase). Snippets about strong peaks are aligned to a fraction of a sample and their leading
//! singular vectors taken; each snippet counts by its agreement with the shape so far, so that strangers do not bend it.

use super::snippet::{dot, normalise, read};
use rustfft::num_complex::Complex32;

/// A click shape: orthonormal vectors with a common origin.
#[derive(Debug, Clone)]
pub struct Shape {
    /// One vector or more, each of unit norm.
    pub vectors: Vec<Vec<f32>>,
    /// Index of the sample that falls on the click's time.
    pub centre: usize,
    /// True if the sign is known: the filter output is then the correlation with the first vector itself, else its magnitude.
    pub signed: bool,
}

/// A later swing of a click whose match reaches this share of the whole can be taken for the click.
const SWING: f64 = 0.6;

impl Shape {
    /// How long after the click, in samples, a later swing of it can still be taken for the click itself.
    #[must_use]
    pub fn swings(&self) -> usize {
        let v = &self.vectors[0];
        let whole = f64::from(dot(v, v));
        let matches = |lag: usize| {
            let m = f64::from(dot(&v[..v.len() - lag], &v[lag..])) / whole;
            if self.signed { m } else { m.abs() }
        };
        (1..v.len()).rev().find(|&lag| matches(lag) > SWING).unwrap_or(0)
    }
}

/// What the first look at the strongest peaks gives.
#[derive(Debug, Clone)]
pub struct FirstLook {
    /// The three leading vectors.
    pub vectors: Vec<Vec<f32>>,
    /// Index of the origin.
    pub centre: usize,
    /// Share of snippets that agree in sign with the first vector.
    pub positive_share: f64,
}

/// Half width of the first snippets, s.
const FIRST_HALF_S: f64 = 0.5e-3;
/// Strongest peaks used, and the share of the very largest left out (static, switching).
const FIRST_COUNT: usize = 150;
const FIRST_SKIP: f64 = 0.02;
/// Peaks looked through for those: with their neighbours, which are too near to be taken.
const FIRST_LIST: usize = 4000;
/// Least distance of two peaks, s.
const FIRST_APART_S: f64 = 0.6e-3;

/// Learns a shape from the strongest peaks of the envelope of a whitened window; none if fewer than five peaks stand out.
#[must_use]
pub fn first_look(whitened: &[f32], envelope: &[Complex32], rate_hz: f64) -> Option<FirstLook> {
    let peaks = strongest_peaks(envelope, rate_hz)?;
    let half = (FIRST_HALF_S * rate_hz) as usize;
    let (vectors, positions) = learn(whitened, rate_hz, peaks, half);
    let mut piece = vec![0.0; 2 * half + 1];
    let positive = positions
        .iter()
        .filter(|&&p| {
            read(whitened, p, half, &mut piece);
            dot(&piece, &vectors[0]) > 0.0
        })
        .count();
    Some(FirstLook { vectors, centre: half, positive_share: positive as f64 / positions.len() as f64 })
}

fn strongest_peaks(envelope: &[Complex32], rate_hz: f64) -> Option<Vec<f64>> {
    let apart = (FIRST_APART_S * rate_hz).max(2.0) as usize;
    let edge = (3e-3 * rate_hz) as usize;
    if envelope.len() < 2 * edge + 10 {
        return None;
    }
    let power: Vec<f32> = envelope.iter().map(|z| z.norm_sqr()).collect();
    let mut peaks: Vec<(f32, usize)> = (edge..power.len() - edge)
        .filter(|&i| power[i] > power[i - 1] && power[i] >= power[i + 1] && power[i] > 0.0)
        .map(|i| (power[i], i))
        .collect();
    let falling = |a: &(f32, usize), b: &(f32, usize)| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1));
    if peaks.len() > FIRST_LIST {
        peaks.select_nth_unstable_by(FIRST_LIST, falling);
        peaks.truncate(FIRST_LIST);
    }
    peaks.sort_unstable_by(falling);
    let skip = (FIRST_SKIP * FIRST_COUNT as f64) as usize;
    let mut taken: Vec<usize> = Vec::new();
    for &(_, at) in &peaks {
        if taken.iter().all(|&t| t.abs_diff(at) >= apart) {
            taken.push(at);
            if taken.len() == FIRST_COUNT + skip {
                break;
            }
        }
    }
    let skip = (FIRST_SKIP * taken.len() as f64) as usize;
    let mut chosen: Vec<f64> = taken[skip..].iter().map(|&i| i as f64).collect();
    chosen.sort_by(f64::total_cmp);
    (chosen.len() >= 5).then_some(chosen)
}

/// Aligns snippets about `positions` and takes the leading vectors, five rounds.
fn learn(x: &[f32], rate_hz: f64, mut positions: Vec<f64>, half: usize) -> (Vec<Vec<f32>>, Vec<f64>) {
    let length = 2 * half + 1;
    let mut rows = pieces(x, &positions, half);
    rows.iter_mut().for_each(|r| normalise(r));
    let start = leading_vectors(&rows, None, 1).remove(0);
    // The snippet that agrees best with all: a real click, not an average of unaligned ones.
    let mut first = rows
        .iter()
        .max_by(|a, b| dot(a, &start).abs().total_cmp(&dot(b, &start).abs()))
        .cloned()
        .unwrap_or_else(|| vec![0.0; length]);
    let mut vectors = Vec::new();
    let wide = 0.2e-3 * rate_hz;
    for round in 0..5 {
        let (reach, step) = match round {
            0 => (wide, 0.25),
            1..=3 => (3.0, 0.25),
            _ => (1.0, 0.125),
        };
        for p in &mut positions {
            *p += best_shift(x, *p, &first, half, reach, step);
        }
        rows = pieces(x, &positions, half);
        rows.iter_mut().for_each(|r| normalise(r));
        let weights: Vec<f32> = rows.iter().map(|r| dot(r, &first).powi(2)).collect();
        vectors = leading_vectors(&rows, Some(&weights), 3);
        if dot(&vectors[0], &first) < 0.0 {
            vectors[0].iter_mut().for_each(|v| *v = -*v);
        }
        first.clone_from(&vectors[0]);
    }
    (vectors, positions)
}

fn best_shift(x: &[f32], position: f64, shape: &[f32], half: usize, reach: f64, step: f64) -> f64 {
    let mut piece = vec![0.0; shape.len()];
    let count = (2.0 * reach / step).floor() as usize;
    let mut best = (0.0f32, 0.0f64);
    for i in 0..=count {
        let shift = -reach + i as f64 * step;
        read(x, position + shift, half, &mut piece);
        let match_ = dot(&piece, shape).abs();
        if match_ > best.0 {
            best = (match_, shift);
        }
    }
    best.1
}

/// Snippets of `2·half + 1` samples about positions (in samples).
#[must_use]
pub fn pieces(x: &[f32], positions: &[f64], half: usize) -> Vec<Vec<f32>> {
    positions
        .iter()
        .map(|&p| {
            let mut piece = vec![0.0; 2 * half + 1];
            read(x, p, half, &mut piece);
            piece
        })
        .collect()
}

/// The leading right singular vectors of the rows (weighted), by orthogonal iteration on their Gram matrix.
#[must_use]
pub fn leading_vectors(rows: &[Vec<f32>], weights: Option<&[f32]>, count: usize) -> Vec<Vec<f32>> {
    let n = rows.first().map_or(0, Vec::len);
    let mut gram = vec![0.0f64; n * n];
    for (i, row) in rows.iter().enumerate() {
        let w = weights.map_or(1.0, |w| f64::from(w[i]).powi(2));
        for a in 0..n {
            let ra = w * f64::from(row[a]);
            for (g, &rb) in gram[a * n..=a * n + a].iter_mut().zip(row) {
                *g += ra * f64::from(rb);
            }
        }
    }
    for a in 0..n {
        for b in 0..a {
            gram[b * n + a] = gram[a * n + b];
        }
    }
    iterate(&gram, n, count)
}

/// Rounds of orthogonal iteration at most; the leading three of click Gram matrices stand well apart, 40 leave 1e-6 or better.
const ROUNDS: usize = 40;
/// It ends when no vector asked for turns by more than this, rad.
const TURNED: f64 = 1e-6;

fn iterate(gram: &[f64], n: usize, count: usize) -> Vec<Vec<f32>> {
    // One vector more than asked for speeds up the convergence of the last one asked for.
    let kept = (count + 1).min(n.max(1));
    let mut basis: Vec<Vec<f64>> = (0..kept)
        .map(|v| (0..n).map(|i| ((i * (2 * v + 1)) as f64 * 0.37 + v as f64).sin() + 0.01).collect())
        .collect();
    orthonormalise(&mut basis);
    for _ in 0..ROUNDS {
        let before = basis.clone();
        for (v, old) in basis.iter_mut().zip(&before) {
            for (value, row) in v.iter_mut().zip(gram.chunks_exact(n.max(1))) {
                *value = dot_f64(row, old);
            }
        }
        orthonormalise(&mut basis);
        // The sine of a small angle, not its cosine: the cosine says nothing below 1e-8.
        let turned = |(v, old): (&Vec<f64>, &Vec<f64>)| {
            let along = dot_f64(v, old);
            v.iter().zip(old).map(|(a, b)| (a - along * b).powi(2)).sum::<f64>().sqrt()
        };
        if basis.iter().zip(&before).take(count).map(turned).fold(0.0, f64::max) < TURNED {
            break;
        }
    }
    basis.truncate(count);
    basis.into_iter().map(|v| v.into_iter().map(|x| x as f32).collect()).collect()
}

/// Scalar product in four lanes.
fn dot_f64(a: &[f64], b: &[f64]) -> f64 {
    let mut lanes = [0.0f64; 4];
    let (ac, bc) = (a.chunks_exact(4), b.chunks_exact(4));
    let tail: f64 = ac.remainder().iter().zip(bc.remainder()).map(|(x, y)| x * y).sum();
    for (x, y) in ac.zip(bc) {
        for l in 0..4 {
            lanes[l] += x[l] * y[l];
        }
    }
    lanes.iter().sum::<f64>() + tail
}

fn orthonormalise(basis: &mut [Vec<f64>]) {
    for i in 0..basis.len() {
        let (done, rest) = basis.split_at_mut(i);
        let v = &mut rest[0];
        for d in done.iter() {
            let p: f64 = d.iter().zip(v.iter()).map(|(a, b)| a * b).sum();
            v.iter_mut().zip(d).for_each(|(x, y)| *x -= p * y);
        }
        let norm: f64 = v.iter().map(|x| x * x).sum::<f64>().sqrt();
        if norm > 1e-300 {
            v.iter_mut().for_each(|x| *x /= norm);
        }
    }
}

/// Element-wise median of rows, scaled to unit norm: the shape of signed clicks.
#[must_use]
pub fn median_shape(rows: &[Vec<f32>]) -> Vec<f32> {
    let n = rows.first().map_or(0, Vec::len);
    let mut column = vec![0.0f32; rows.len()];
    let mut shape: Vec<f32> = (0..n)
        .map(|k| {
            for (c, row) in column.iter_mut().zip(rows) {
                *c = row[k];
            }
            let mid = column.len() / 2;
            *column.select_nth_unstable_by(mid, f32::total_cmp).1
        })
        .collect();
    normalise(&mut shape);
    shape
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_leading_vectors_of_two_mixed_waves_span_them() {
        let (a, b): (Vec<f32>, Vec<f32>) = (0..21).map(|i| ((i as f32 * 0.5).sin(), (i as f32 * 0.9).cos())).unzip();
        let rows: Vec<Vec<f32>> = (0..40)
            .map(|k| a.iter().zip(&b).map(|(x, y)| x * (k as f32).cos() + y * (k as f32).sin()).collect())
            .collect();
        let v = leading_vectors(&rows, None, 2);
        for wave in [&a, &b] {
            let inside = dot(wave, &v[0]).powi(2) + dot(wave, &v[1]).powi(2);
            assert!((inside / dot(wave, wave) - 1.0).abs() < 1e-5);
        }
    }
}
