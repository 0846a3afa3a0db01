//! What marks say: histograms of the marks of candidates on and off the rhythm, and the gain that follows.
//!
//! This one step takes care of the spread of sizes, a second train, extra strikes, carriers and automatic gain control: nothing
//! is assumed of the distributions but that marks of firings and of the rest differ.

/// Bins of a histogram.
const BINS: usize = 40;
/// Width of the smoothing Gaussian, bins.
const SMOOTH: f64 = 1.6;
const SMOOTH_REACH: isize = 6;
/// Gains are held within these (a bin with no entry must not decide).
const GAIN_RANGE: (f64, f64) = (-8.0, 12.0);

/// Marks sorted into bins once, for many histograms.
pub struct Binned {
    bin: Vec<u8>,
}

/// A smoothed density over the bins, summing to one.
pub type Density = [f64; BINS];

impl Binned {
    /// Sorts marks into bins between their extremes.
    #[must_use]
    pub fn new(marks: &[f64]) -> Self {
        let low = marks.iter().copied().fold(f64::INFINITY, f64::min) - 1e-6;
        let high = marks.iter().copied().fold(f64::NEG_INFINITY, f64::max) + 1e-6;
        let scale = BINS as f64 / (high - low);
        Self { bin: marks.iter().map(|m| (((m - low) * scale) as usize).min(BINS - 1) as u8).collect() }
    }

    /// Density of the marks for which `belongs` is true.
    pub fn density(&self, belongs: impl Fn(usize) -> bool) -> Density {
        let mut count = [0.0f64; BINS];
        let mut total = 0.0;
        for (i, &b) in self.bin.iter().enumerate() {
            if belongs(i) {
                count[b as usize] += 1.0;
                total += 1.0;
            }
        }
        smooth(&count, total)
    }

    /// Number of candidates in each bin.
    #[must_use]
    pub fn counts(&self) -> [f64; BINS] {
        let mut count = [0.0; BINS];
        self.bin.iter().for_each(|&b| count[b as usize] += 1.0);
        count
    }

    /// Log ratio of two densities at each candidate, held within −8..12.
    #[must_use]
    pub fn gain(&self, on: &Density, off: &Density) -> Vec<f64> {
        let mut table = [0.0; BINS];
        for ((t, a), b) in table.iter_mut().zip(on).zip(off) {
            *t = (a / b).ln().clamp(GAIN_RANGE.0, GAIN_RANGE.1);
        }
        self.bin.iter().map(|&b| table[b as usize]).collect()
    }
}

fn smooth(count: &Density, total: f64) -> Density {
    let mut kernel = [0.0; 2 * SMOOTH_REACH as usize + 1];
    for (i, k) in kernel.iter_mut().enumerate() {
        *k = (-0.5 * ((i as isize - SMOOTH_REACH) as f64 / SMOOTH).powi(2)).exp();
    }
    let norm: f64 = kernel.iter().sum();
    // A little of everything everywhere: 0.3 candidates, and 0.6 % of all.
    let mut out = [0.3 / BINS as f64 * (1.0 + 0.02 * total); BINS];
    for (b, o) in out.iter_mut().enumerate() {
        for (i, k) in kernel.iter().enumerate() {
            let from = b as isize + i as isize - SMOOTH_REACH;
            if (0..BINS as isize).contains(&from) {
                *o += count[from as usize] * k / norm;
            }
        }
    }
    let sum: f64 = out.iter().sum();
    out.iter_mut().for_each(|o| *o /= sum);
    out
}

/// Mean and standard deviation of the marks on and off a rhythm.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct MarkLaw {
    /// On the rhythm.
    pub on: (f64, f64),
    /// Off it.
    pub off: (f64, f64),
}

/// Least standard deviation of marks, so that a narrow class does not shut out what comes with another whitening.
const LEAST_MARK_SD: f64 = 0.15;

impl MarkLaw {
    /// Of marks, given which are on the rhythm.
    #[must_use]
    pub fn of(marks: &[f64], on: &[bool]) -> Self {
        let class = |wanted: bool| {
            let (mut n, mut sum, mut square) = (0.0, 0.0, 0.0);
            for (m, _) in marks.iter().zip(on).filter(|(_, o)| **o == wanted) {
                n += 1.0;
                sum += m;
                square += m * m;
            }
            let n = f64::max(n, 1.0);
            (sum / n, (square / n - (sum / n).powi(2)).max(0.0).sqrt().max(LEAST_MARK_SD))
        };
        Self { on: class(true), off: class(false) }
    }

    /// Log ratio of the two normal densities; beyond the means the nearer class stays as likely as at its mean.
    #[must_use]
    pub fn gain(&self, mark: f64) -> f64 {
        let ln = |(mean, sd): (f64, f64), m: f64| -0.5 * ((m - mean) / sd).powi(2) - sd.ln();
        (ln(self.on, mark.min(self.on.0)) - ln(self.off, mark.max(self.off.0))).clamp(-8.0, 12.0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn marks_of_two_kinds_give_gains_of_two_signs() {
        let marks: Vec<f64> = (0..200).map(|i| if i % 2 == 0 { 3.0 } else { 0.0 }).collect();
        let binned = Binned::new(&marks);
        let gain = binned.gain(&binned.density(|i| i % 2 == 0), &binned.density(|i| i % 2 == 1));
        assert!(gain[0] > 2.0 && gain[1] < -2.0);
    }
}
