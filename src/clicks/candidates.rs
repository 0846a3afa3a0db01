//! Every local maximum of the matched filter, with its mark. No threshold: what is a firing is decided by the rhythm.

use super::filter::{FilterBank, Kernel};
use super::shape::Shape;

/// Candidate clicks in the order of time: the two vectors have equal length.
#[derive(Debug, Clone, Default)]
pub struct Candidates {
    /// Time from the start of the window, s.
    pub time_s: Vec<f64>,
    /// Mark: natural logarithm of the filter output over its robust standard deviation.
    pub mark: Vec<f64>,
    /// That standard deviation.
    pub scale: f64,
}

/// Marks alone, where the times do not matter.
pub type Marks = [f64];

/// At most this many candidates a second: maxima of noise in a 7 kHz band.
const MOST_PER_S: f64 = 7_000.0;
/// Outputs below this many standard deviations all say the same.
const LEAST_SIGMAS: f32 = 0.3;

impl Candidates {
    /// Number of candidates.
    #[must_use]
    pub fn len(&self) -> usize {
        self.time_s.len()
    }

    /// True if there is none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.time_s.is_empty()
    }

    /// The candidates with the given indices.
    #[must_use]
    pub fn pick(&self, indices: &[usize]) -> Self {
        Self {
            time_s: indices.iter().map(|&i| self.time_s[i]).collect(),
            mark: indices.iter().map(|&i| self.mark[i]).collect(),
            scale: self.scale,
        }
    }

    /// The same candidates with marks over another standard deviation.
    #[must_use]
    pub fn over(mut self, scale: f64) -> Self {
        let shift = (self.scale / scale).ln();
        self.mark.iter_mut().for_each(|m| *m += shift);
        self.scale = scale;
        self
    }

    /// The candidates from one time (s) up to another.
    #[must_use]
    pub fn between(&self, from_s: f64, to_s: f64) -> Self {
        let from = self.time_s.partition_point(|&t| t < from_s);
        let to = self.time_s.partition_point(|&t| t < to_s).max(from);
        Self { time_s: self.time_s[from..to].to_vec(), mark: self.mark[from..to].to_vec(), scale: self.scale }
    }

    /// Indices of the `count` strongest, in the order of time.
    #[must_use]
    pub fn strongest(&self, count: usize) -> Vec<usize> {
        if count >= self.len() {
            return (0..self.len()).collect();
        }
        let threshold = nth_largest(&self.mark, count.max(1) - 1);
        (0..self.len()).filter(|&i| self.mark[i] >= threshold).collect()
    }
}

/// The value of rank `rank` from the top (0 is the largest); the slice must not be empty.
#[must_use]
pub fn nth_largest(values: &Marks, rank: usize) -> f64 {
    let mut copy = values.to_vec();
    let rank = rank.min(copy.len() - 1);
    *copy.select_nth_unstable_by(rank, |a, b| b.total_cmp(a)).1
}

/// Output of the matched filter for a shape: signed, or the root of the summed squares over its vectors.
pub fn matched_output(bank: &FilterBank, x: &[f32], shape: &Shape, out: &mut Vec<f32>) {
    let kernels: Vec<Kernel> = shape.vectors.iter().map(|v| bank.correlator(v, shape.centre)).collect();
    *out = joined(bank.apply_all(x, &kernels.iter().collect::<Vec<_>>()), shape.signed);
}

/// Joins the outputs for each vector of a shape.
#[must_use]
pub fn joined(mut outputs: Vec<Vec<f32>>, signed: bool) -> Vec<f32> {
    let mut out = outputs.swap_remove(0);
    if signed {
        return out;
    }
    out.iter_mut().for_each(|v| *v *= *v);
    for other in &outputs {
        out.iter_mut().zip(other).for_each(|(o, v)| *o += v * v);
    }
    out.iter_mut().for_each(|v| *v = v.sqrt());
    out
}

/// Robust standard deviation: 1.4826 × the median distance from the median, over 50 000 to 100 000 samples of a long row.
#[must_use]
pub fn robust_sd(x: &[f32]) -> f32 {
    let stride = (x.len() / 50_000).max(1);
    let mut part: Vec<f32> = x.iter().step_by(stride).copied().collect();
    if part.is_empty() {
        return 0.0;
    }
    let mid = part.len() / 2;
    let median = *part.select_nth_unstable_by(mid, f32::total_cmp).1;
    part.iter_mut().for_each(|v| *v = (*v - median).abs());
    1.4826 * *part.select_nth_unstable_by(mid, f32::total_cmp).1
}

/// A swing this much larger and the other way round, within this time (s), makes a maximum the side lobe of a click.
const SIDE_LOBE: (f32, f64) = (1.25, 0.4e-3);

/// All local maxima of `output`, times by the parabola through three samples; a maximum that is not the largest
/// within ± `apart_s`, or that is a side lobe, is left out (neither is asked if `apart_s` is zero).
#[must_use]
pub fn find(output: &[f32], rate_hz: f64, apart_s: f64) -> Candidates {
    let scale = robust_sd(output) + 1e-12;
    let reach = (apart_s * rate_hz) as usize;
    let lobe_reach = (SIDE_LOBE.1.max(apart_s) * rate_hz) as usize;
    let turns = Turns::of(output);
    let mut found: Vec<(f64, f32)> = Vec::with_capacity(turns.tops.len());
    let (mut near, mut about) = (0, 0);
    for &top in &turns.tops {
        let i = top as usize;
        if reach > 1 {
            let (first, last) = (i.saturating_sub(reach), (i + reach).min(output.len() - 1));
            if !is_largest(output, &turns.tops, &mut near, i, (first, last)) {
                continue;
            }
            let (first, last) = (i.saturating_sub(lobe_reach), (i + lobe_reach).min(output.len() - 1));
            if is_side_lobe(output, &turns.dips, &mut about, i, (first, last)) {
                continue;
            }
        }
        let (a, b, c) = (output[i - 1], output[i], output[i + 1]);
        let bend = a - 2.0 * b + c;
        let shift = if bend < 0.0 { 0.5 * (a - c) / bend } else { 0.0 };
        found.push(((i as f64 + f64::from(shift)) / rate_hz, b - 0.25 * (a - c) * shift));
    }
    keep_strongest(&mut found, (MOST_PER_S * output.len() as f64 / rate_hz) as usize);
    Candidates {
        time_s: found.iter().map(|f| f.0).collect(),
        mark: found.iter().map(|f| f64::from(f.1.max(LEAST_SIGMAS * scale) / scale).ln()).collect(),
        scale: f64::from(scale),
    }
}

/// Places of the positive local maxima and of the negative local minima: what is extreme in any range lies on one of them or at the
/// range's ends.
struct Turns {
    tops: Vec<u32>,
    dips: Vec<u32>,
}

impl Turns {
    fn of(x: &[f32]) -> Self {
        let floor = 1e-9 * x.iter().fold(0.0f32, |m, &v| if v > m { v } else { m });
        let (mut tops, mut dips) = (Vec::with_capacity(x.len() / 6), Vec::with_capacity(x.len() / 6));
        for (i, w) in x.windows(3).enumerate() {
            let (a, b, c) = (w[0], w[1], w[2]);
            if b > a && b >= c {
                if b > floor {
                    tops.push(i as u32 + 1);
                }
            } else if b < a && b <= c && b < 0.0 {
                dips.push(i as u32 + 1);
            }
        }
        Self { tops, dips }
    }
}

/// The places of `all` within a range; `from` remembers where the last range began.
fn within<'a>(all: &'a [u32], from: &mut usize, (first, last): (usize, usize)) -> impl Iterator<Item = usize> + 'a {
    while *from < all.len() && (all[*from] as usize) < first {
        *from += 1;
    }
    all[*from..].iter().map(|&i| i as usize).take_while(move |&i| i <= last)
}

fn is_largest(x: &[f32], tops: &[u32], from: &mut usize, i: usize, range: (usize, usize)) -> bool {
    let most = x[i] * 1.0001;
    x[range.0] <= most && x[range.1] <= most && within(tops, from, range).all(|k| x[k] <= most)
}

fn is_side_lobe(x: &[f32], dips: &[u32], from: &mut usize, i: usize, range: (usize, usize)) -> bool {
    let least = -x[i] * SIDE_LOBE.0;
    x[range.0] < least || x[range.1] < least || within(dips, from, range).any(|k| x[k] < least)
}

fn keep_strongest(found: &mut Vec<(f64, f32)>, most: usize) {
    if found.len() > most && most > 0 {
        let mut sizes: Vec<f32> = found.iter().map(|f| f.1).collect();
        let threshold = *sizes.select_nth_unstable_by(most - 1, |a, b| b.total_cmp(a)).1;
        found.retain(|f| f.1 >= threshold);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_parabola_is_found_between_samples() {
        let output: Vec<f32> = (0..100).map(|n| 10.0 - 0.05 * (n as f32 - 50.3).powi(2)).map(|v| v.max(0.0)).collect();
        let found = find(&output, 1.0, 0.0);
        let best = (0..found.len()).max_by(|&a, &b| found.mark[a].total_cmp(&found.mark[b])).unwrap();
        assert!((found.time_s[best] - 50.3).abs() < 1e-3);
    }

    #[test]
    fn the_strongest_are_kept_in_the_order_of_time() {
        let c = Candidates { time_s: vec![0.0, 1.0, 2.0, 3.0], mark: vec![1.0, 4.0, 2.0, 3.0], scale: 1.0 };
        assert_eq!(c.strongest(2), vec![1, 3]);
    }
}
