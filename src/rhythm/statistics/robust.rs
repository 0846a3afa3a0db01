//! Scatter and displaced clicks, by robust rules.

use crate::rhythm::order::{median, running_median};

/// Robust standard deviation of single periods about their running median: values beyond 2.5 × the 90 % quantile are held.
#[must_use]
pub fn scatter(time_s: &[f64], number: &[i64]) -> f64 {
    let length: Vec<f64> = time_s.windows(2).map(|w| w[1] - w[0]).collect();
    let steps: Vec<f64> = number.windows(2).map(|w| (w[1] - w[0]).max(1) as f64).collect();
    if length.len() < 3 {
        return f64::INFINITY;
    }
    let period = median(&length.iter().zip(&steps).map(|(d, k)| d / k).collect::<Vec<_>>());
    let mut z: Vec<f64> = length.iter().zip(&steps).map(|(d, k)| (d - k * period) / k.sqrt()).collect();
    if z.len() > 60 {
        let mid = running_median(&z, 15);
        z.iter_mut().zip(mid).for_each(|(a, m)| *a -= m);
    }
    let mut size: Vec<f64> = z.iter().map(|v| v.abs()).collect();
    let rank = (0.9 * (size.len() - 1) as f64) as usize;
    let hold = 2.5 * *size.select_nth_unstable_by(rank, f64::total_cmp).1;
    (size.iter().map(|v| v.min(hold).powi(2)).sum::<f64>() / size.len() as f64).sqrt()
}

/// A click is displaced if it lies this many robust deviations off the middle of its neighbours: where one click in fifty is
/// displaced anywhere within ± 0.3 ms and the others scatter by 15 µs, it is then more likely displaced than not …
const DISPLACED: f64 = 3.7;
/// … while the step over it is within this many. A period that is really long makes the step over it long as well.
const OTHERWISE_FINE: f64 = 3.5;
/// Rounds: a displaced neighbour hides another.
const ROUNDS: usize = 3;

/// Which clicks to keep: a displaced click (a strike of noise taken for the firing) makes one period long and the next
/// short, and 1 % of them would add 40 % to the jitter.
#[must_use]
pub fn undisplaced(time_s: &[f64], number: &[i64]) -> Vec<bool> {
    let mut keep = vec![true; time_s.len()];
    for _ in 0..ROUNDS {
        let index: Vec<usize> = (0..keep.len()).filter(|&i| keep[i]).collect();
        let times: Vec<f64> = index.iter().map(|&i| time_s[i]).collect();
        let numbers: Vec<i64> = index.iter().map(|&i| number[i]).collect();
        let displaced = displaced_once(&times, &numbers);
        if displaced.is_empty() {
            break;
        }
        displaced.iter().for_each(|&i| keep[index[i]] = false);
    }
    keep
}

fn displaced_once(time_s: &[f64], number: &[i64]) -> Vec<usize> {
    let n = time_s.len();
    if n < 12 {
        return Vec::new();
    }
    let step = |a: usize, b: usize| (number[b] - number[a]).max(1) as f64;
    let period = median(&(1..n).map(|i| (time_s[i] - time_s[i - 1]) / step(i - 1, i)).collect::<Vec<_>>());
    // Off the middle, in units in which k-fold steps scatter alike: its variance goes with l·r/(l + r).
    let off: Vec<f64> = (1..n - 1)
        .map(|i| {
            let (l, r) = (step(i - 1, i), step(i, i + 1));
            let middle = time_s[i - 1] + l / (l + r) * (time_s[i + 1] - time_s[i - 1]);
            (time_s[i] - middle) / (2.0 * l * r / (l + r)).sqrt()
        })
        .collect();
    let double: Vec<f64> = (1..n - 1)
        .map(|i| (time_s[i + 1] - time_s[i - 1] - step(i - 1, i + 1) * period) / (0.5 * step(i - 1, i + 1)).sqrt())
        .collect();
    let deviation = |x: &[f64]| 1.4826 * median(&x.iter().map(|v| v.abs()).collect::<Vec<_>>()) + 1e-12;
    let (off_sd, double_sd) = (deviation(&off), deviation(&double));
    let suspect = |i: usize| off[i - 1].abs() > DISPLACED * off_sd && double[i - 1].abs() < OTHERWISE_FINE * double_sd;
    // Of neighbouring suspects the one farther off is the culprit: it displaces the middle of the other.
    (1..n - 1)
        .filter(|&i| {
            suspect(i)
                && (i < 2 || !suspect(i - 1) || off[i - 1].abs() >= off[i - 2].abs())
                && (i + 2 > n - 1 || !suspect(i + 1) || off[i - 1].abs() > off[i].abs())
        })
        .collect()
}

/// Excess kurtosis of single-step periods about their running median.
#[must_use]
pub fn excess_kurtosis(time_s: &[f64], number: &[i64]) -> f64 {
    let single: Vec<f64> =
        time_s.windows(2).zip(number.windows(2)).filter(|(_, n)| n[1] - n[0] == 1).map(|(t, _)| t[1] - t[0]).collect();
    if single.len() < 30 {
        return 0.0;
    }
    let mean = single.iter().sum::<f64>() / single.len() as f64;
    let moment = |p: i32| single.iter().map(|x| (x - mean).powi(p)).sum::<f64>() / single.len() as f64;
    let variance = moment(2);
    if variance > 0.0 { moment(4) / (variance * variance) - 3.0 } else { 0.0 }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn displaced_clicks_are_recognised() {
        let number: Vec<i64> = (0..60).collect();
        let mut time_s: Vec<f64> = number.iter().map(|&n| n as f64 + 0.01 * (n as f64 * 1.7).sin()).collect();
        time_s[30] += 0.2;
        time_s[33] -= 0.15;
        let keep = undisplaced(&time_s, &number);
        assert!(!keep[30] && !keep[33] && keep.iter().filter(|k| !**k).count() == 2, "{keep:?}");
    }
}
