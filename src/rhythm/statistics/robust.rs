//! Scatter and displaced clicks, by robust rules.

use crate::rhythm::fit::{median, running_median};

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

/// A click is displaced if it lies this many robust deviations off the middle of its neighbours …
const DISPLACED: f64 = 4.5;
/// … while the step over it is within this many.
const OTHERWISE_FINE: f64 = 3.5;

/// Which clicks to keep: a displaced click (a strike of noise taken for the firing) makes one period long and the next
/// short, and 1 % of them would add 40 % to the jitter.
#[must_use]
pub fn undisplaced(time_s: &[f64], number: &[i64]) -> Vec<bool> {
    let n = time_s.len();
    let mut keep = vec![true; n];
    if n < 12 {
        return keep;
    }
    let step = |a: usize, b: usize| (number[b] - number[a]).max(1) as f64;
    let period = median(&(1..n).map(|i| (time_s[i] - time_s[i - 1]) / step(i - 1, i)).collect::<Vec<_>>());
    let off: Vec<f64> = (1..n - 1)
        .map(|i| {
            let share = step(i - 1, i) / step(i - 1, i + 1);
            time_s[i] - time_s[i - 1] - share * (time_s[i + 1] - time_s[i - 1])
        })
        .collect();
    let double: Vec<f64> = (1..n - 1)
        .map(|i| (time_s[i + 1] - time_s[i - 1] - step(i - 1, i + 1) * period) / (0.5 * step(i - 1, i + 1)).sqrt())
        .collect();
    let deviation = |x: &[f64]| 1.4826 * median(&x.iter().map(|v| v.abs()).collect::<Vec<_>>()) + 1e-12;
    let (off_sd, double_sd) = (deviation(&off), deviation(&double));
    let mut i = 1;
    while i + 1 < n {
        if off[i - 1].abs() > DISPLACED * off_sd && double[i - 1].abs() < OTHERWISE_FINE * double_sd {
            keep[i] = false;
            // The neighbours were judged with this one: they are looked at no further.
            i += 1;
        }
        i += 1;
    }
    keep
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
    fn one_displaced_click_is_recognised() {
        let number: Vec<i64> = (0..60).collect();
        let mut time_s: Vec<f64> = number.iter().map(|&n| n as f64 + 0.01 * (n as f64 * 1.7).sin()).collect();
        time_s[30] += 0.2;
        let keep = undisplaced(&time_s, &number);
        assert!(!keep[30] && keep.iter().filter(|k| !**k).count() == 1);
    }
}
