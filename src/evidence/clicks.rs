//! The click: the mean of all of them, and some one by one.

use super::{Thinned, short};
use serde::{Deserialize, Serialize};

/// The shape of a click about its time.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ClickShape {
    /// Time of the first value after the time of the click (negative: before it), s.
    pub from_s: f64,
    /// Distance of values of the mean, s.
    pub step_s: f64,
    /// Mean over all clicks, those upside down turned, full scale.
    pub mean: Vec<f32>,
    /// Clicks in the mean.
    pub count: u64,
    /// Those that were turned.
    pub turned: u64,
    /// Distance of values of the single clicks, s.
    pub sample_s: f64,
    /// Some single clicks: time of the first sample after the time of the click, s, and the samples, full scale.
    pub single: Vec<(f64, Vec<f32>)>,
}

/// Reach before and after the time of a click, s and in periods.
const BEFORE: (f64, f64) = (0.8e-3, 0.3);
const AFTER: (f64, f64) = (2.2e-3, 0.7);
/// Single clicks kept at most: half as many are shown at least.
const MOST_SINGLE: usize = 40;
/// Values of the mean for each sample, where clicks enough fall between the samples.
const FINE: f64 = 4.0;
/// Clicks from which the mean is made fine.
const MANY: u64 = 200;
/// A bin that holds less than this part of the clicks is as good as empty; an even spread puts a quarter of them into each.
const SPREAD: f64 = 20.0;

/// Adds clicks, with values at quarters of a sample: clicks do not lie on samples, so each part is met.
#[derive(Debug, Clone)]
pub(super) struct Meter {
    before_s: f64,
    rate_hz: f64,
    /// Samples less the straight line through each click: what hum does to a single click does not get between the bins.
    sums: Vec<(f64, u32)>,
    /// The sums of those lines: value at the first bin, and slope per sample.
    line: (f64, f64),
    /// The sums to whole samples, by which a click upside down is told.
    coarse: Vec<f64>,
    count: u64,
    turned: u64,
    single: Thinned<(f64, Vec<f32>)>,
}

impl Meter {
    pub fn new(period_s: f64, rate_hz: f64) -> Self {
        let before_s = BEFORE.0.min(BEFORE.1 * period_s);
        let after_s = AFTER.0.min(AFTER.1 * period_s);
        let bins = ((before_s + after_s) * rate_hz * FINE).ceil() as usize;
        Self {
            before_s,
            rate_hz,
            sums: vec![(0.0, 0); bins],
            line: (0.0, 0.0),
            coarse: vec![0.0; bins.div_ceil(FINE as usize)],
            count: 0,
            turned: 0,
            single: Thinned::new(MOST_SINGLE),
        }
    }

    /// First sample and number of samples about a click at `position` (in samples).
    pub fn range(&self, position: f64) -> (f64, usize) {
        let first = (position - self.before_s * self.rate_hz).ceil();
        (first, (self.sums.len() as f64 / FINE) as usize)
    }

    /// Takes the samples from [`Self::range`] of a click at `position`.
    pub fn push(&mut self, position: f64, first: f64, samples: &[f32]) {
        let offset = first - position + self.before_s * self.rate_hz;
        let bin = |k: usize| ((offset + k as f64) * FINE) as usize;
        let (bare, mean, slope) = without_line(samples);
        let likeness: f64 = bare.iter().zip(&self.coarse).map(|(s, sum)| s * sum).sum();
        let sign = if likeness < 0.0 { -1.0 } else { 1.0 };
        for (k, sample) in bare.iter().enumerate() {
            if let Some(sum) = self.sums.get_mut(bin(k)) {
                *sum = (sum.0 + sign * sample, sum.1 + 1);
            }
        }
        let middle = offset + 0.5 * (samples.len() as f64 - 1.0);
        self.line.0 += sign * (mean - slope * middle);
        self.line.1 += sign * slope;
        self.coarse.iter_mut().zip(bare).for_each(|(sum, s)| *sum += sign * s);
        self.count += 1;
        self.turned += u64::from(sign < 0.0);
        if self.single.wants_next() {
            let rounded = samples.iter().map(|s| short(f64::from(*s), 4) as f32).collect();
            self.single.push((short((first - position) / self.rate_hz, 6), rounded));
        } else {
            self.single.skip();
        }
    }

    /// Sums over so many values at a time.
    fn bins(&self, fine: usize) -> Vec<(f64, u32)> {
        let joined = |bins: &[(f64, u32)]| bins.iter().fold((0.0, 0), |all, bin| (all.0 + bin.0, all.1 + bin.1));
        self.sums.chunks(fine).map(joined).collect()
    }

    pub fn finish(self) -> Option<ClickShape> {
        if self.count == 0 {
            return None;
        }
        let fine = self.bins(1);
        let inner = &fine[..fine.len().saturating_sub(FINE as usize)];
        // Clicks that always lie alike on the samples leave bins between them empty.
        let spread = self.count >= MANY && inner.iter().all(|bin| SPREAD * f64::from(bin.1) > self.count as f64);
        let (fine, bins) = if spread { (1, fine) } else { (FINE as usize, self.bins(FINE as usize)) };
        // The last bins are reached by few clicks or by none: by less than half of what an even spread gives.
        let full =
            bins.iter().rposition(|bin| 8 * u64::from(bin.1) >= fine as u64 * self.count).map_or(0, |last| last + 1);
        let n = self.count as f64;
        let line = |k: usize| (self.line.0 + self.line.1 * (k as f64 + 0.5) * fine as f64 / FINE) / n;
        let mean = bins[..full].iter().enumerate();
        let mean = mean.map(|(k, (sum, n))| short(sum / f64::from((*n).max(1)) + line(k), 4) as f32);
        let step_s = fine as f64 / (FINE * self.rate_hz);
        // A small part of clicks upside down is the smaller part: which way up is a matter of the recorder.
        let turned = self.turned.min(self.count - self.turned);
        Some(ClickShape {
            from_s: short(0.5 * step_s - self.before_s, 6),
            step_s,
            mean: mean.collect(),
            count: self.count,
            turned,
            sample_s: 1.0 / self.rate_hz,
            single: self.single.kept,
        })
    }
}

/// Samples less the straight line through them, the mean and the slope of that per sample: hum under a click is little else, and
/// must not tell which way up it is.
fn without_line(samples: &[f32]) -> (Vec<f64>, f64, f64) {
    let n = samples.len() as f64;
    let middle = 0.5 * (n - 1.0);
    let at = |k: usize| k as f64 - middle;
    let mean = samples.iter().map(|s| f64::from(*s)).sum::<f64>() / n.max(1.0);
    let moment: f64 = samples.iter().enumerate().map(|(k, s)| at(k) * f64::from(*s)).sum();
    let slope = if n > 1.0 { 12.0 * moment / (n * (n * n - 1.0)) } else { 0.0 };
    (samples.iter().enumerate().map(|(k, s)| f64::from(*s) - mean - slope * at(k)).collect(), mean, slope)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_mean_of_clicks_between_samples_is_the_click() {
        let rate_hz = 48_000.0;
        let shape = |t: f64| if t < 0.0 { 0.0 } else { 0.5 * (-t / 0.4e-3).exp() * (6000.0 * t).cos() };
        let mut meter = Meter::new(5e-3, rate_hz);
        for k in 0..1000 {
            let position = 1000.0 + f64::from(k) * 0.618_034 % 1.0;
            let (first, count) = meter.range(position);
            let sign = if k % 3 == 2 { -1.0 } else { 1.0 };
            let samples: Vec<f32> =
                (0..count).map(|j| (sign * shape((first + j as f64 - position) / rate_hz)) as f32).collect();
            meter.push(position, first, &samples);
        }
        let click = meter.finish().expect("clicks");
        assert_eq!((click.count, click.turned), (1000, 333));
        for (k, value) in click.mean.iter().enumerate() {
            let t = click.from_s + k as f64 * click.step_s;
            // Within a bin of 5 µs the click moves by some percent; at its front the bin holds both sides.
            if t.abs() > 10e-6 && t < 2.1e-3 {
                assert!((f64::from(*value) - shape(t)).abs() < 0.01, "{t}: {value} {}", shape(t));
            }
        }
    }

    #[test]
    fn hum_does_not_tell_which_way_up_a_click_is() {
        let rate_hz = 24_000.0;
        let click = |t: f64| if t < 0.0 { 0.0 } else { 0.2 * (-t / 0.2e-3).exp() };
        let mut meter = Meter::new(17e-3, rate_hz);
        for n in 0..300 {
            let position = 1000.0 + f64::from(n) * 0.618_034 % 1.0;
            let (first, count) = meter.range(position);
            // Hum of three times the click, at another phase each time that has nothing to do with the place between samples.
            let phase = f64::from(n) * 1.7;
            let samples: Vec<f32> = (0..count)
                .map(|j| (first + j as f64 - position) / rate_hz)
                .map(|t| (click(t) + 0.6 * (std::f64::consts::TAU * 50.0 * t + phase).cos()) as f32)
                .collect();
            meter.push(position, first, &samples);
        }
        let found = meter.finish().expect("clicks");
        assert_eq!(found.turned, 0);
        // Neighbouring bins hold other clicks, on other hum: the mean must not show it. A bin is a twentieth of the decay.
        let steps = found.mean.windows(2).enumerate().filter(|(k, _)| found.from_s + *k as f64 * found.step_s > 50e-6);
        assert!(steps.map(|(_, pair)| (pair[1] - pair[0]).abs()).fold(0.0, f32::max) < 0.02, "{:?}", found.mean);
    }
}
