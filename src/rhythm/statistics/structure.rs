//! The part of the periods that is not random: a curved drift, and a swing that keeps step with the mains.
//!
//! Both are found by regression of the periods and taken out of the click times before the random part is fitted; white or
//! moving-average models under ripple would read the random jitter 40 % low.

use crate::rhythm::order::median;
use std::f64::consts::{PI, TAU};

/// Mains and rectified-mains frequencies tried, Hz.
pub const LINES_HZ: [f64; 4] = [50.0, 60.0, 100.0, 120.0];
/// A set of regressors is kept if it explains more than this many times the rest's variance per parameter …
const KEEP: f64 = 9.0;
/// … and as many times what sines nearby explain, since periods with memory have more variance at low frequencies: half
/// cycles over the stretch for the drift, and distances from a mains line in cycles over the stretch.
const BESIDE_DRIFT: [f64; 6] = [5.0, 6.0, 7.0, 8.0, 9.0, 10.0];
const BESIDE_LINE: [f64; 6] = [-9.0, -7.0, -5.0, 5.0, 7.0, 9.0];
/// Fewest periods for which structure is looked for.
const FEWEST: usize = 60;

/// Structure found in the periods of a stretch.
#[derive(Debug, Clone, Default)]
pub struct Structure {
    /// Deviation of each step's mean period (one per step between neighbouring clicks), s.
    pub deviation_s: Vec<f64>,
    /// Standard deviation of the curved drift, s.
    pub drift_sd_s: f64,
    /// Mains line with the standard deviation of the swing, if any: frequency (Hz), s, and its standard uncertainty, s.
    pub mains: Option<(f64, f64, f64)>,
}

/// Looks for structure in click times with firing numbers.
#[must_use]
pub fn find(time_s: &[f64], number: &[i64]) -> Structure {
    let steps: Vec<f64> = number.windows(2).map(|w| (w[1] - w[0]).max(1) as f64).collect();
    let period: Vec<f64> = time_s.windows(2).zip(&steps).map(|(w, k)| (w[1] - w[0]) / k).collect();
    let n = period.len();
    let mut found = Structure { deviation_s: vec![0.0; n], ..Structure::default() };
    if n <= FEWEST {
        return found;
    }
    let middle: Vec<f64> = time_s.windows(2).map(|w| 0.5 * (w[0] + w[1])).collect();
    // Drift is judged along the firings, as the straight line of the jitter's definition is; the mains along the time.
    let along: Vec<f64> = number.windows(2).map(|w| 0.5 * (w[0] + w[1]) as f64).collect();
    let rest = held_residual(&period, &along);
    add_drift(&mut found, &rest, &along);
    add_mains(&mut found, &rest, &middle);
    let mean = found.deviation_s.iter().sum::<f64>() / n as f64;
    found.deviation_s.iter_mut().for_each(|d| *d -= mean);
    found
}

/// Periods about a straight line, held within four robust deviations.
fn held_residual(period: &[f64], middle: &[f64]) -> Vec<f64> {
    let line = [vec![1.0; middle.len()], middle.to_vec()];
    let fit = least_squares(&line, period);
    let rest: Vec<f64> = period.iter().zip(&fit).map(|(p, f)| p - f).collect();
    let reach = 4.0 * 1.4826 * median(&rest.iter().map(|r| r.abs()).collect::<Vec<_>>()) + 1e-12;
    rest.into_iter().map(|r| r.clamp(-reach, reach)).collect()
}

/// Legendre polynomials of degree 2 to 4 over the stretch.
fn add_drift(found: &mut Structure, rest: &[f64], middle: &[f64]) {
    let (from, to) = (middle[0], middle[middle.len() - 1]);
    let x: Vec<f64> = middle.iter().map(|t| 2.0 * (t - from) / (to - from) - 1.0).collect();
    let basis = [
        x.iter().map(|x| 0.5 * (3.0 * x * x - 1.0)).collect(),
        x.iter().map(|x| 0.5 * (5.0 * x * x * x - 3.0 * x)).collect(),
        x.iter().map(|x| 0.125 * (35.0 * x.powi(4) - 30.0 * x * x + 3.0)).collect(),
    ];
    let beside = || {
        let half_cycles = |k: f64| vec![x.iter().map(|x| (0.5 * PI * k * (x + 1.0)).cos()).collect()];
        BESIDE_DRIFT.iter().map(|&k| half_cycles(k)).collect()
    };
    if let Some(fit) = worth_keeping(&basis, rest, &found.deviation_s, beside) {
        found.drift_sd_s = sd(&fit);
        found.deviation_s.iter_mut().zip(fit).for_each(|(d, f)| *d += f);
    }
}

/// The mains line that explains most, with its second harmonic.
fn add_mains(found: &mut Structure, rest: &[f64], middle: &[f64]) {
    let mut best: Option<(f64, Vec<f64>)> = None;
    let span = middle[middle.len() - 1] - middle[0];
    for line_hz in LINES_HZ {
        let basis = with_harmonic(line_hz, middle);
        let beside = || BESIDE_LINE.iter().map(|d| with_harmonic(line_hz + d / span, middle)).collect();
        if let Some(fit) = worth_keeping(&basis, rest, &found.deviation_s, beside)
            && best.as_ref().is_none_or(|(_, b)| sd(&fit) > sd(b))
        {
            best = Some((line_hz, fit));
        }
    }
    if let Some((line_hz, fit)) = best {
        found.deviation_s.iter_mut().zip(&fit).for_each(|(d, f)| *d += f);
        let left: Vec<f64> = rest.iter().zip(&found.deviation_s).map(|(r, d)| r - d).collect();
        // The amplitude of a fitted sine is known to √(2/N) of the rest, its rms to 1/√2 of that.
        found.mains = Some((line_hz, sd(&fit), sd(&left) / (rest.len() as f64).sqrt()));
    }
}

/// Cosine and sine of a frequency and of its double at given times.
fn with_harmonic(frequency_hz: f64, time_s: &[f64]) -> Vec<Vec<f64>> {
    let at = |harmonic: f64, f: fn(f64) -> f64| time_s.iter().map(|t| f(TAU * frequency_hz * harmonic * t)).collect();
    vec![at(1.0, f64::cos), at(1.0, f64::sin), at(2.0, f64::cos), at(2.0, f64::sin)]
}

/// Fitted values of a set of regressors, if they explain more than chance and than the sets beside it.
fn worth_keeping(
    basis: &[Vec<f64>],
    rest: &[f64],
    taken: &[f64],
    beside: impl Fn() -> Vec<Vec<Vec<f64>>>,
) -> Option<Vec<f64>> {
    let target: Vec<f64> = rest.iter().zip(taken).map(|(r, t)| r - t).collect();
    let fit = least_squares(basis, &target);
    let square = |x: &[f64]| x.iter().map(|f| f * f).sum::<f64>();
    let explained = square(&fit) / basis.len() as f64;
    let left: f64 = target.iter().zip(&fit).map(|(t, f)| (t - f).powi(2)).sum();
    if explained <= KEEP * left / target.len() as f64 {
        return None;
    }
    let unexplained: Vec<f64> = target.iter().zip(&fit).map(|(t, f)| t - f).collect();
    let sets = beside();
    let near = sets.iter().map(|b| square(&least_squares(b, &unexplained)) / b.len() as f64).sum::<f64>();
    (explained > KEEP * near / sets.len() as f64).then_some(fit)
}

fn sd(x: &[f64]) -> f64 {
    let mean = x.iter().sum::<f64>() / x.len() as f64;
    (x.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / x.len() as f64).sqrt()
}

/// Fitted values of a least-squares fit by the normal equations (a handful of well-scaled columns).
#[must_use]
pub fn least_squares(basis: &[Vec<f64>], target: &[f64]) -> Vec<f64> {
    let q = basis.len();
    let mut m = vec![vec![0.0; q + 1]; q];
    for a in 0..q {
        for b in 0..q {
            m[a][b] = basis[a].iter().zip(&basis[b]).map(|(x, y)| x * y).sum();
        }
        m[a][q] = basis[a].iter().zip(target).map(|(x, y)| x * y).sum();
    }
    let coefficient = solve(m);
    (0..target.len()).map(|i| basis.iter().zip(&coefficient).map(|(b, c)| b[i] * c).sum()).collect()
}

/// Gauss elimination with pivoting; a column without a pivot gets zero.
fn solve(mut m: Vec<Vec<f64>>) -> Vec<f64> {
    let q = m.len();
    for col in 0..q {
        let pivot = (col..q).max_by(|&a, &b| m[a][col].abs().total_cmp(&m[b][col].abs())).unwrap_or(col);
        m.swap(col, pivot);
        if m[col][col].abs() < 1e-30 {
            continue;
        }
        let top = m[col].clone();
        for (r, row) in m.iter_mut().enumerate() {
            if r != col {
                let f = row[col] / top[col];
                row.iter_mut().zip(&top).for_each(|(x, t)| *x -= f * t);
            }
        }
    }
    (0..q).map(|i| if m[i][i].abs() < 1e-30 { 0.0 } else { m[i][q] / m[i][i] }).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_swing_at_100_hz_is_found_with_its_size() {
        let mut time_s = vec![0.0];
        for n in 0..800 {
            let t: f64 = time_s[n];
            let noise = 3e-5 * ((n * n) as f64 * 0.37).sin();
            time_s.push(t + 0.0131 + 2e-4 * (TAU * 100.0 * t).sin() + noise);
        }
        let number: Vec<i64> = (0..time_s.len() as i64).collect();
        let (line, sd, _) = find(&time_s, &number).mains.unwrap();
        assert_eq!(line, 100.0);
        assert!((sd / (2e-4 / 2f64.sqrt()) - 1.0).abs() < 0.05, "{sd}");
    }
}
