//! The sums over windows from which the figures are made. Their size does not grow with the recording but for one entry for some
//! thousand clicks or a stretch.

use super::train::Train;
use crate::estimate::{COVERAGE_95, Estimate};
use crate::rhythm::statistics::structure::{self, Structure};
use crate::rhythm::statistics::{NoiseRange, Posterior, PosteriorGrid, robust};
use crate::rhythm::{FiringCounts, MainsJitter, OtherTrain, Reading, Stretch, Verdict};

/// Clicks per block of the posterior: long enough for memory of 0.97, short enough that a slow wander is taken by the line.
const BLOCK: usize = 3000;
/// Clicks gathered over windows before they enter the sums: slow drift and lines are told by many.
const GATHERED: usize = 12_000;
/// Jitter of a steady gap, share of the period.
pub const STEADY: f64 = 0.05;
/// Stretches listed at most.
const MOST_STRETCHES: usize = 1000;

/// Mean period of a piece of train, for the line through the recording.
#[derive(Debug, Clone, Copy)]
struct Piece {
    /// Firing number of its middle, counted over all pieces.
    middle: f64,
    period_s: f64,
    firings: f64,
    /// Σ(n − middle)·(period − mean), Σ(n − middle)² inside the piece.
    inner: (f64, f64),
}

/// Clicks of a stretch that have not entered the sums.
#[derive(Debug, Clone, Default)]
struct Gathered {
    time_s: Vec<f64>,
    number: Vec<i64>,
}

/// Sums over trains of successive windows.
#[derive(Debug, Clone, Default)]
pub struct Accumulator {
    gathered: Gathered,
    grid: PosteriorGrid,
    counts: FiringCounts,
    steps: f64,
    duration_s: f64,
    pieces: Vec<Piece>,
    /// Weighted logarithms of the ends of the range of timing noise, and the weight.
    noise_ln_sum: (f64, f64, f64),
    excess: (f64, f64),
    drift_variance: (f64, f64),
    mains: Vec<(f64, f64, f64, f64)>,
    phase: Vec<(Estimate, f64)>,
    removed: u64,
    stretches: Vec<Stretch>,
    others: Vec<OtherTrain>,
}

impl Accumulator {
    /// Adds the train of a window.
    pub fn add(&mut self, train: &Train) {
        self.counts.on_rhythm += train.time_s.len() as u64;
        self.counts.missed += train.missed();
        self.counts.extra += train.extra.len() as u64;
        for (i, range) in train.stretches.iter().enumerate() {
            let (time_s, number) = (&train.time_s[range.clone()], &train.number[range.clone()]);
            // Only the first can go on with the last of the window before.
            let ends_s = self.gathered.time_s.last().copied().filter(|_| i == 0);
            let goes_on = ends_s.is_some_and(|t| time_s[0] - t < super::train::LONGEST_MISS * train.period_s);
            self.add_time(time_s[0], time_s[time_s.len() - 1], goes_on);
            self.gather(time_s, number, train.period_s, goes_on);
        }
        if self.others.is_empty() {
            self.others.clone_from(&train.others);
        }
        let n = train.time_s.len() as f64;
        if let Some(noise) = train.noise {
            self.noise_ln_sum.0 += n * noise.least_s.ln();
            self.noise_ln_sum.1 += n * noise.most_s.ln();
            self.noise_ln_sum.2 += n;
        }
        if let Some(phase) = train.phase_jitter_s {
            self.phase.push((phase, n));
        }
    }

    /// Takes the clicks of a stretch, alone or behind those of the window before.
    fn gather(&mut self, time_s: &[f64], number: &[i64], period_s: f64, goes_on: bool) {
        let own = &mut self.gathered;
        if let (true, Some(&last_s), Some(&last)) = (goes_on, own.time_s.last(), own.number.last()) {
            let steps = (time_s[0] - last_s) / period_s;
            // The click on the border of two windows may be in both.
            let from = usize::from(steps < 0.5);
            let steps = steps.round() as i64;
            self.counts.missed += (steps - 1).max(0) as u64;
            own.number.extend(number[from..].iter().map(|n| n - number[0] + last + steps));
            own.time_s.extend_from_slice(&time_s[from..]);
        } else {
            self.settle();
            self.gathered = Gathered { time_s: time_s.to_vec(), number: number.to_vec() };
        }
        if self.gathered.time_s.len() >= GATHERED {
            let last = self.gathered.time_s.len() - 1;
            let next = Gathered { time_s: vec![self.gathered.time_s[last]], number: vec![self.gathered.number[last]] };
            self.settle();
            self.gathered = next;
        }
    }

    /// Moves what was gathered into the sums.
    fn settle(&mut self) {
        let Gathered { time_s, number } = std::mem::take(&mut self.gathered);
        if time_s.len() < 2 {
            return;
        }
        self.add_stretch(&time_s, &number);
        self.steps += (number[number.len() - 1] - number[0]) as f64;
        self.duration_s += time_s[time_s.len() - 1] - time_s[0];
    }

    /// Lists a stretch, or lets it go on with the last.
    fn add_time(&mut self, from_s: f64, to_s: f64, goes_on: bool) {
        let listed = self.stretches.len();
        match self.stretches.last_mut() {
            Some(last) if goes_on => last.to_s = to_s,
            _ if listed < MOST_STRETCHES => self.stretches.push(Stretch { from_s, to_s }),
            _ => {}
        }
    }

    fn add_stretch(&mut self, time_s: &[f64], number: &[i64]) {
        let keep = robust::undisplaced(time_s, number);
        let kept = |x: &[f64]| -> Vec<f64> { x.iter().zip(&keep).filter(|(_, k)| **k).map(|(v, _)| *v).collect() };
        let numbers: Vec<i64> = number.iter().zip(&keep).filter(|(_, k)| **k).map(|(v, _)| *v).collect();
        let times = kept(time_s);
        self.removed += (time_s.len() - times.len()) as u64;
        let found = structure::find(&times, &numbers);
        let smooth = without(&times, &numbers, &found);
        let n = times.len() as f64;
        self.drift_variance.0 += n * found.drift_sd_s.powi(2);
        self.drift_variance.1 += n;
        if let Some((line_hz, sd, u)) = found.mains {
            self.mains.push((line_hz, sd, u, n));
        }
        let excess = robust::excess_kurtosis(&smooth, &numbers);
        self.excess.0 += n * excess;
        self.excess.1 += n;
        for from in (0..smooth.len()).step_by(BLOCK) {
            // A short last block joins the one before.
            let to = if smooth.len() - from < 2 * BLOCK { smooth.len() } else { from + BLOCK };
            self.grid.add(&smooth[from..to], &numbers[from..to]);
            if to == smooth.len() {
                break;
            }
        }
        self.pieces.push(piece(&times, &numbers, self.steps));
    }

    /// Says that firings between the last train and the next may be unknown: nothing is counted across.
    pub fn interrupt(&mut self) {
        self.settle();
    }

    /// The figures of everything added.
    #[must_use]
    pub fn reading(&self) -> Option<Reading> {
        let mut all = self.clone();
        all.settle();
        all.settled_reading()
    }

    fn settled_reading(&self) -> Option<Reading> {
        let (least, most, weight) = self.noise_ln_sum;
        let noise =
            (weight > 0.0).then(|| NoiseRange { least_s: (least / weight).exp(), most_s: (most / weight).exp() });
        let excess = if self.excess.1 > 0.0 { self.excess.0 / self.excess.1 } else { 0.0 };
        let posterior = self.grid.posterior(noise, excess)?;
        let period = self.duration_s / self.steps;
        let mut notes = Vec::new();
        let random = self.random_jitter(&posterior, period, &mut notes);
        let mains = self.mains_jitter();
        let line = self.line(period, &posterior);
        let structure_variance = line.curved_variance
            + if self.drift_variance.1 > 0.0 { self.drift_variance.0 / self.drift_variance.1 } else { 0.0 }
            + mains.map_or(0.0, |m| m.jitter_s.value.powi(2));
        let total = (random.value.powi(2) + structure_variance).sqrt();
        let jitter = with_structure(random, structure_variance, mains.map(|m| m.jitter_s));
        let long_run = posterior.long_run_variance_s2 * (random.value / posterior.jitter_s.value).powi(2);
        let u_period = (long_run / self.steps + 2.0 * (posterior.timing_noise_s.value / self.steps).powi(2)).sqrt();
        let period_s = Estimate::normal(period, u_period);
        let relative = total / period;
        self.add_notes(&mut notes, &posterior, period);
        Some(Reading {
            verdict: if relative < STEADY { Verdict::Steady } else { Verdict::Unsteady },
            reason: String::new(),
            firings: self.counts,
            firing_rate_hz: Some(period_s.reciprocal()),
            period_s: Some(period_s),
            period_jitter_s: Some(jitter),
            cycle_jitter_s: Some(posterior.cycle_jitter_s),
            mains_locked_jitter_s: mains,
            drift_per_s: line.drift_per_s,
            timing_noise_s: Some(posterior.timing_noise_s),
            other_trains: self.others.clone(),
            stretches: self.stretches.clone(),
            notes,
        })
    }

    /// The random part: by intervals, or by the phase of the line where clicks overlap and intervals see memory that may not be.
    fn random_jitter(&self, posterior: &Posterior, period_s: f64, notes: &mut Vec<String>) -> Estimate {
        let Some(phase) = self.phase_jitter().map(overlapping) else { return posterior.jitter_s };
        let no_clicks = self.noise_ln_sum.2 == 0.0;
        let hidden = posterior.memory_probability > 0.5 || posterior.timing_noise_s.value > posterior.jitter_s.value;
        let part = (phase.value / posterior.jitter_s.value).ln();
        if no_clicks || hidden {
            notes.push(
                "clicks overlap in the receiver: the jitter is read from the phase of the line at the rate, where memory from firing to firing cannot be excluded".into(),
            );
            return phase;
        }
        if part.abs() > 0.1 {
            notes.push(format!(
                "the phase of the line at the rate gives a period jitter of {:.3} %, the intervals {:.3} %",
                100.0 * phase.value / period_s,
                100.0 * posterior.jitter_s.value / period_s
            ));
        }
        overlapping(posterior.jitter_s)
    }

    fn phase_jitter(&self) -> Option<Estimate> {
        let weight: f64 = self.phase.iter().map(|p| p.1).sum();
        if weight == 0.0 {
            return None;
        }
        let value = (self.phase.iter().map(|(e, w)| w * e.value.powi(2)).sum::<f64>() / weight).sqrt();
        let relative = (self.phase.iter().map(|(e, w)| (w * e.u / e.value).powi(2)).sum::<f64>()).sqrt() / weight;
        let reach = (COVERAGE_95 * relative).exp();
        Some(Estimate { value, u: value * relative, low: value / reach, high: value * reach })
    }

    /// The mains line seen in most of the recording.
    fn mains_jitter(&self) -> Option<MainsJitter> {
        let all: f64 = self.drift_variance.1;
        structure::LINES_HZ
            .iter()
            .filter_map(|&line_hz| {
                let of: Vec<_> = self.mains.iter().filter(|m| m.0 == line_hz).collect();
                let weight: f64 = of.iter().map(|m| m.3).sum();
                (weight > 0.5 * all).then(|| {
                    let value = (of.iter().map(|m| m.3 * m.1 * m.1).sum::<f64>() / weight).sqrt();
                    let u = of.iter().map(|m| (m.3 * m.2).powi(2)).sum::<f64>().sqrt() / weight;
                    MainsJitter { jitter_s: Estimate::normal(value, u), frequency_hz: line_hz }
                })
            })
            .max_by(|a, b| a.jitter_s.value.total_cmp(&b.jitter_s.value))
    }

    /// Straight line through the periods of the recording.
    fn line(&self, period_s: f64, posterior: &Posterior) -> Line {
        let weight: f64 = self.pieces.iter().map(|p| p.firings).sum();
        let mean_n = self.pieces.iter().map(|p| p.firings * p.middle).sum::<f64>() / weight;
        let mean_p = self.pieces.iter().map(|p| p.firings * p.period_s).sum::<f64>() / weight;
        let (mut sxy, mut sxx) = (0.0, 0.0);
        for p in &self.pieces {
            let n = p.middle - mean_n;
            sxy += p.firings * n * (p.period_s - mean_p) + p.inner.0;
            sxx += p.firings * n * n + p.inner.1;
        }
        if sxx <= 0.0 || weight < 8.0 {
            return Line { drift_per_s: None, curved_variance: 0.0 };
        }
        let slope = sxy / sxx;
        let u = (posterior.long_run_variance_s2 / sxx).sqrt();
        let off: f64 = self
            .pieces
            .iter()
            .map(|p| p.firings * (p.period_s - mean_p - slope * (p.middle - mean_n)).powi(2))
            .sum::<f64>()
            / weight;
        // What the random part alone lets the pieces scatter.
        let by_chance = posterior.long_run_variance_s2 * (self.pieces.len() as f64 - 2.0).max(0.0) / weight;
        Line {
            drift_per_s: Some(Estimate::normal(-slope / period_s.powi(2), u / period_s.powi(2))),
            curved_variance: (off - by_chance).max(0.0),
        }
    }

    fn add_notes(&self, notes: &mut Vec<String>, posterior: &Posterior, period_s: f64) {
        if posterior.memory_probability > 0.95 {
            notes.push(format!(
                "neighbouring periods are alike: memory from firing to firing about {:.2}",
                posterior.memory
            ));
        } else if posterior.memory_probability > 0.3 && posterior.timing_noise_s.value > posterior.jitter_s.value {
            notes.push("timing noise exceeds the gap's own jitter: memory from firing to firing can be neither seen nor excluded".into());
        }
        let share = self.removed as f64 / self.counts.on_rhythm.max(1) as f64;
        if share > 0.01 {
            notes.push(format!(
                "{:.1} % of the clicks stand off the rhythm by chance noise and are left out of the jitter",
                100.0 * share
            ));
        }
        if self.stretches.len() > 1 {
            let list: Vec<String> =
                self.stretches.iter().take(6).map(|s| format!("{:.1}–{:.1} s", s.from_s, s.to_s)).collect();
            let more = if self.stretches.len() > 6 { ", …" } else { "" };
            notes.push(format!(
                "the gap fires in {} stretches ({}{more}); the figures are of these",
                self.stretches.len(),
                list.join(", ")
            ));
        }
        if let Some(line_hz) = crate::rhythm::locked_to(1.0 / period_s, posterior.jitter_s.value / period_s) {
            notes.push(format!(
                "the rate sits on the mains ({line_hz:.0} Hz) with almost no scatter: the gap is locked to the supply's ripple, or it is no gap; a voltage read from it may be off by 1 %"
            ));
        }
    }
}

/// Relative standard deviation that overlap adds to any reading of the jitter: random carrier phases between neighbours move
/// the peaks and bend the line's phase in a way that neither model holds (150 generated recordings at 1800 to 3500 /s).
const OVERLAP_MODEL: f64 = 0.022;

fn overlapping(e: Estimate) -> Estimate {
    let (up, down) = ((e.high / e.value).ln(), (e.value / e.low).ln());
    let wider = |x: f64| x.hypot(COVERAGE_95 * OVERLAP_MODEL);
    Estimate {
        value: e.value,
        u: e.u.hypot(OVERLAP_MODEL * e.value),
        low: e.value * (-wider(down)).exp(),
        high: e.value * wider(up).exp(),
    }
}

struct Line {
    drift_per_s: Option<Estimate>,
    curved_variance: f64,
}

/// Click times with the structure taken out.
fn without(time_s: &[f64], number: &[i64], found: &Structure) -> Vec<f64> {
    let mut shift = 0.0;
    let mut out = Vec::with_capacity(time_s.len());
    out.push(time_s[0]);
    for i in 1..time_s.len() {
        shift += found.deviation_s[i - 1] * (number[i] - number[i - 1]) as f64;
        out.push(time_s[i] - shift);
    }
    out
}

fn piece(time_s: &[f64], number: &[i64], before: f64) -> Piece {
    let last = time_s.len() - 1;
    let firings = (number[last] - number[0]).max(1) as f64;
    let period_s = (time_s[last] - time_s[0]) / firings;
    let centre = 0.5 * (number[last] + number[0]) as f64;
    let mut inner = (0.0, 0.0);
    for (t, n) in time_s.windows(2).zip(number.windows(2)) {
        let k = (n[1] - n[0]).max(1) as f64;
        let x = 0.5 * (n[0] + n[1]) as f64 - centre;
        inner.0 += k * x * ((t[1] - t[0]) / k - period_s);
        inner.1 += k * x * x;
    }
    Piece { middle: before + 0.5 * firings, period_s, firings, inner }
}

/// The random part joined with the variance of what is not random; of that the mains part has an uncertainty of its own.
fn with_structure(random: Estimate, variance: f64, mains: Option<Estimate>) -> Estimate {
    let join = |x: f64| (x * x + variance).sqrt();
    let value = join(random.value);
    let of_mains = mains.map_or(0.0, |m| m.value * m.u / value);
    let wider = |reach: f64| reach.hypot(COVERAGE_95 * of_mains);
    Estimate {
        value,
        u: (random.u * random.value / value).hypot(of_mains),
        low: (value - wider(value - join(random.low))).max(0.0),
        high: value + wider(join(random.high) - value),
    }
}
