//! Slips of the rhythm: dust between the electrodes lets a gap fire early, once or for a while. The clicks are the gap's, but not of the
//! rhythm that is measured, and after a slip the rhythm begins anew. A click that noise has displaced is no slip: the period before it is
//! long, the one after it short, and the count of periods goes on.

use crate::rhythm::order::{median, running_median};
use std::ops::Range;

/// Half width of the running median of periods that is the rhythm about a slip.
const AROUND: usize = 50;
/// A period is off if it differs by this share and by this many deviations of single periods, or if so many are missed in a row;
/// periods that are off within this many of each other belong together.
const SHARE: f64 = 0.1;
const DEVIATIONS: f64 = 6.0;
const LONG: f64 = 4.0;
const TOGETHER: usize = 8;
/// Together they are a slip if their sum differs from the counted periods by this share of one and by as many deviations.
const SLIPPED: f64 = 0.25;

/// The slips in a stretch (ascending times in s with firing numbers): the ranges of clicks between the last one before each and the
/// first one after it. A range without a click is a single period that is off.
#[must_use]
pub fn slips(time_s: &[f64], number: &[i64]) -> Vec<Range<usize>> {
    if time_s.len() < AROUND {
        return Vec::new();
    }
    let counted = |from: usize, to: usize| (number[to] - number[from]).max(1) as f64;
    let period: Vec<f64> = (1..time_s.len()).map(|i| (time_s[i] - time_s[i - 1]) / counted(i - 1, i)).collect();
    let around = running_median(&period, AROUND);
    let off: Vec<f64> = period.iter().zip(&around).map(|(p, a)| (p / a - 1.0).abs()).collect();
    let deviation = 1.4826 * median(&off);
    let limit = SHARE.max(DEVIATIONS * deviation);
    let is_off = |k: usize| off[k] > limit || counted(k, k + 1) >= LONG;
    let mut found = Vec::new();
    let mut i = 0;
    while i < off.len() {
        if !is_off(i) {
            i += 1;
            continue;
        }
        let (first, mut last) = (i, i);
        while let Some(next) = (last + 1..(last + 1 + TOGETHER).min(off.len())).find(|&k| is_off(k)) {
            last = next;
        }
        let count = counted(first, last + 1);
        let sum = (time_s[last + 1] - time_s[first]) / around[first];
        if (sum - count).abs() > SLIPPED.max(DEVIATIONS * deviation * count.sqrt()) {
            found.push(first + 1..last + 1);
        }
        i = last + 1;
    }
    found
}

/// A size is odd if its logarithm is off by this much and by this many deviations.
const ODD: (f64, f64) = (0.2, 5.0);

/// Which sizes are not those of the rhythm.
#[must_use]
pub fn odd_sizes(size: &[f32]) -> Vec<bool> {
    let ln: Vec<f64> = size.iter().map(|s| f64::from(s.max(1e-9)).ln()).collect();
    let middle = median(&ln);
    let off: Vec<f64> = ln.iter().map(|l| (l - middle).abs()).collect();
    let limit = ODD.0.max(ODD.1 * 1.4826 * median(&off));
    off.iter().map(|o| *o > limit).collect()
}

/// A slip made wider by what beside it is of another kind: periods that hold an extra click (`extra_s` ascending) and clicks of odd
/// size. There the gap fires early already, or still.
#[must_use]
pub fn widened(slip: Range<usize>, time_s: &[f64], odd: &[bool], extra_s: &[f64]) -> Range<usize> {
    let struck = |from: usize, to: usize| {
        let next = extra_s.partition_point(|t| *t <= time_s[from]);
        extra_s.get(next).is_some_and(|t| *t < time_s[to])
    };
    let Range { mut start, mut end } = slip;
    while start > 1 && (odd[start - 1] || struck(start - 2, start - 1)) {
        start -= 1;
    }
    while end + 1 < time_s.len() && (odd[end] || struck(end, end + 1)) {
        end += 1;
    }
    start..end
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A clock with 1 % jitter that runs `factor` times as fast from click 200 to click 240.
    fn clock(factor: f64) -> Vec<f64> {
        let mut t = 0.0;
        (0..500)
            .map(|n| {
                t += 0.01
                    * (1.0 + 0.01 * (f64::from(n) * 2.4).sin())
                    * if (200..240).contains(&n) { factor } else { 1.0 };
                t
            })
            .collect()
    }

    #[test]
    fn a_burst_and_a_single_early_firing_are_found_where_they_are() {
        let number: Vec<i64> = (0..500).collect();
        for factor in [0.6, 1.5] {
            // Click 199 ends the last period before it, click 239 the last of its own.
            assert_eq!(slips(&clock(factor), &number), std::slice::from_ref(&(200..239)), "{factor}");
        }
        let early: Vec<f64> =
            clock(1.0).iter().enumerate().map(|(n, t)| if n < 300 { *t } else { t - 0.004 }).collect();
        assert_eq!(slips(&early, &number), std::slice::from_ref(&(300..300)));
    }

    #[test]
    fn a_slip_takes_struck_periods_and_odd_clicks_beside_it_along() {
        let time_s: Vec<f64> = (0..20).map(f64::from).collect();
        let size: Vec<f32> =
            (0..20).map(|n| if (13..15).contains(&n) { 0.6 } else { 1.0 + 0.01 * (n % 3) as f32 }).collect();
        let odd = odd_sizes(&size);
        assert_eq!(widened(10..12, &time_s, &odd, &[7.5, 8.5, 12.4, 17.5]), 8..15);
        assert_eq!(widened(1..19, &time_s, &odd, &[0.5, 18.5]), 1..19);
    }

    #[test]
    fn neither_displaced_clicks_nor_jitter_nor_drift_are_slips() {
        let number: Vec<i64> = (0..500).collect();
        let mut displaced = clock(1.0);
        for n in [100, 103, 250, 251, 254] {
            displaced[n] += 0.003;
        }
        assert!(slips(&displaced, &number).is_empty());
        let drifting: Vec<f64> = (0..500).map(|n| 0.01 * f64::from(n) * (1.0 + 2e-4 * f64::from(n))).collect();
        assert!(slips(&drifting, &number).is_empty());
        let loose: Vec<f64> = (0..500).map(|n| 0.01 * (f64::from(n) + 0.4 * (f64::from(n * n) * 0.7).sin())).collect();
        assert!(slips(&loose, &number).is_empty());
    }
}
