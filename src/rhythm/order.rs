//! Medians, sliding and plain, and interpolation between places.

/// Index reflected at both ends of a row of `n`.
#[must_use]
pub fn reflect(i: isize, n: usize) -> usize {
    let last = n as isize - 1;
    let mut k = i;
    if k < 0 {
        k = -k;
    }
    if k > last {
        k = 2 * last - k;
    }
    k.clamp(0, last) as usize
}

/// Median of each value's neighbourhood of ± `half`, reflected at the ends. A sorted window slides along: one value leaves,
/// one comes in.
#[must_use]
pub fn running_median(x: &[f64], half: usize) -> Vec<f64> {
    let at = |i: isize| x[reflect(i, x.len())];
    let reach = half as isize;
    let mut window: Vec<f64> = (-reach..=reach).map(at).collect();
    window.sort_by(f64::total_cmp);
    (0..x.len() as isize)
        .map(|i| {
            let middle = window[half];
            let (leaves, comes) = (at(i - reach), at(i + 1 + reach));
            let from = window.partition_point(|v| *v < leaves);
            let to = window.partition_point(|v| *v < comes);
            // The values between the two places move by one.
            if from < to {
                window.copy_within(from + 1..to, from);
                window[to - 1] = comes;
            } else {
                window.copy_within(to..from, to + 1);
                window[to] = comes;
            }
            middle
        })
        .collect()
}

/// Linear interpolation of (`at`, `value`) at ascending places, held at the ends.
#[must_use]
pub fn interpolate(places: &[f64], at: &[f64], value: &[f64]) -> Vec<f64> {
    let mut k = 0;
    places
        .iter()
        .map(|&p| {
            while k + 1 < at.len() && at[k + 1] <= p {
                k += 1;
            }
            if p <= at[0] || k + 1 >= at.len() {
                return if p <= at[0] { value[0] } else { value[at.len() - 1] };
            }
            value[k] + (value[k + 1] - value[k]) * (p - at[k]) / (at[k + 1] - at[k])
        })
        .collect()
}

/// Median; 0 for nothing.
#[must_use]
pub fn median(x: &[f64]) -> f64 {
    if x.is_empty() {
        return 0.0;
    }
    let mut copy = x.to_vec();
    let mid = copy.len() / 2;
    let upper = *copy.select_nth_unstable_by(mid, f64::total_cmp).1;
    if x.len() % 2 == 1 {
        upper
    } else {
        let lower = copy[..mid].iter().copied().fold(f64::NEG_INFINITY, f64::max);
        0.5 * (lower + upper)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_sliding_median_equals_the_plain_one() {
        let x: Vec<f64> = (0..200).map(|n| f64::from(n * 7919 % 61)).collect();
        for (i, &m) in running_median(&x, 15).iter().enumerate() {
            let around: Vec<f64> = (-15..=15).map(|d| x[reflect(i as isize + d, x.len())]).collect();
            assert_eq!(m, median(&around), "at {i}");
        }
    }
}
