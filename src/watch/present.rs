//! The firings of the present: those since the last change, and of these not more than the figures need.

use crate::estimate::{COVERAGE_95, Estimate};
use crate::firing::Event;
use crate::measure::accumulate::{Accumulator, STEADY};
use crate::measure::train::{LONGEST_MISS, Train};
use crate::rhythm::order::median;
use crate::rhythm::{FiringCounts, Reading, Verdict};
use std::collections::VecDeque;

/// Firings that the figures are made of at most, and at least where the train is slow.
const MOST_FIRINGS: f64 = 1500.0;
const FEWEST_FIRINGS: f64 = 30.0;
/// Time that they are taken from, s at least and at most; more where fewer firings than the least lie in it.
const TIME_S: (f64, f64) = (1.0, 10.0);
const LONGEST_S: f64 = 120.0;
/// Relative change of the rate that the time is kept under, so that a drift does not make the figures old.
const DRIFT: f64 = 0.004;
/// Firings from which the whole statistics are made; of fewer the mean period alone.
const STATISTICS_FROM: usize = 12;

/// The firings of the present.
#[derive(Debug, Clone, Default)]
pub struct Present {
    trains: VecDeque<Train>,
}

impl Present {
    /// Forgets everything.
    pub fn clear(&mut self) {
        self.trains.clear();
    }

    /// Takes the next firings.
    pub fn add(&mut self, train: Train) {
        self.trains.push_back(train);
    }

    /// Takes firings in place of all there are: the times of a train that was learnt anew do not fit to the old ones.
    pub fn replace(&mut self, train: Train) {
        self.trains.clear();
        self.trains.push_back(train);
    }

    /// Forgets what lies before a time, s.
    pub fn cut_before(&mut self, time_s: f64) {
        let kept: VecDeque<Train> =
            self.trains.drain(..).filter_map(|train| train.within(&(time_s..f64::INFINITY))).collect();
        self.trains = kept;
    }

    /// Forgets what is older than the figures need, at a time in s; `drift_per_s` is the relative drift of the rate, 1/s.
    pub fn age(&mut self, now_s: f64, drift_per_s: f64) {
        let Some(period_s) = self.trains.back().map(|train| train.period_s) else { return };
        let by_drift = if drift_per_s == 0.0 { f64::INFINITY } else { DRIFT / drift_per_s.abs() };
        let longest_s = (FEWEST_FIRINGS * period_s).clamp(TIME_S.1, LONGEST_S);
        let time_s = (MOST_FIRINGS * period_s).min(by_drift).clamp(TIME_S.0.max(FEWEST_FIRINGS * period_s), longest_s);
        if self.first_s().is_some_and(|first_s| first_s < now_s - 1.25 * time_s) {
            self.cut_before(now_s - time_s);
        }
    }

    /// Time of the first firing, s.
    #[must_use]
    pub fn first_s(&self) -> Option<f64> {
        self.trains.front().map(|train| train.time_s[0])
    }

    /// Times (s) and firing numbers of the stretches without a drop-out, the last one last.
    #[must_use]
    pub fn stretches(&self) -> Vec<(Vec<f64>, Vec<i64>)> {
        let mut all: Vec<(Vec<f64>, Vec<i64>)> = Vec::new();
        for train in &self.trains {
            for stretch in &train.stretches {
                let (time_s, number) = (&train.time_s[stretch.clone()], &train.number[stretch.clone()]);
                let last = all.last().map(|(times, numbers)| (times[times.len() - 1], numbers[numbers.len() - 1]));
                let steps = last.map(|(last_s, _)| (time_s[0] - last_s) / train.period_s);
                match (last, steps, all.last_mut()) {
                    (Some((_, last)), Some(steps), Some((times, numbers))) if steps <= LONGEST_MISS => {
                        // The click on the border of two steps may be in both.
                        let skip = usize::from(steps < 0.5);
                        let first = last + steps.round() as i64;
                        times.extend_from_slice(&time_s[skip..]);
                        numbers.extend(number[skip..].iter().map(|n| n - number[0] + first));
                    }
                    _ => all.push((time_s.to_vec(), number.to_vec())),
                }
            }
        }
        all
    }

    /// The last stretch without a drop-out; empty if there is none.
    #[must_use]
    pub fn series(&self) -> (Vec<f64>, Vec<i64>) {
        self.stretches().pop().unwrap_or_default()
    }

    /// The firings as events in the order of time.
    #[must_use]
    pub fn events(&self) -> Vec<Event> {
        self.trains.iter().flat_map(|train| train.events(0.0)).collect()
    }

    /// The figures.
    #[must_use]
    pub fn reading(&self) -> Option<Reading> {
        let (time_s, number) = self.series();
        if time_s.len() < STATISTICS_FROM {
            return self.mean_alone(&time_s, &number);
        }
        let mut sums = Accumulator::default();
        self.trains.iter().for_each(|train| sums.add(train));
        let mut reading = sums.reading()?;
        if let Some(last) = self.trains.back() {
            reading.other_trains.clone_from(&last.others);
        }
        Some(reading)
    }

    /// Too few firings for statistics: their mean period, with Student's distribution for what so few tell of their scatter.
    fn mean_alone(&self, time_s: &[f64], number: &[i64]) -> Option<Reading> {
        let n = time_s.len();
        if n < 4 {
            return None;
        }
        let steps = (number[n - 1] - number[0]) as f64;
        let period = (time_s[n - 1] - time_s[0]) / steps;
        let each: Vec<f64> =
            (1..n).map(|i| (time_s[i] - time_s[i - 1]) / (number[i] - number[i - 1]).max(1) as f64).collect();
        let mean = each.iter().sum::<f64>() / each.len() as f64;
        let freedom = each.len() as f64 - 1.0;
        let sd = (each.iter().map(|p| (p - mean).powi(2)).sum::<f64>() / freedom).sqrt();
        let u = sd.max(1e-3 * median(&each)) / (each.len() as f64).sqrt();
        let reach = student_95(freedom) * u;
        let period_s = Estimate { value: period, u: reach / COVERAGE_95, low: period - reach, high: period + reach };
        if period_s.low <= 0.0 {
            return None;
        }
        let counts = FiringCounts {
            on_rhythm: self.trains.iter().map(|train| train.time_s.len() as u64).sum(),
            missed: self.trains.iter().map(Train::missed).sum(),
            extra: self.trains.iter().map(|train| train.extra.len() as u64).sum(),
        };
        Some(Reading {
            verdict: if sd < STEADY * period { Verdict::Steady } else { Verdict::Unsteady },
            firings: counts,
            firing_rate_hz: Some(period_s.reciprocal()),
            period_s: Some(period_s),
            notes: vec![format!("only {n} firings so far: the jitter needs more")],
            ..Reading::none(String::new())
        })
    }
}

/// Half width of the 95 % interval of Student's distribution, in standard deviations.
fn student_95(freedom: f64) -> f64 {
    use statrs::distribution::{ContinuousCDF, StudentsT};
    StudentsT::new(0.0, 1.0, freedom).map_or(f64::INFINITY, |student| student.inverse_cdf(0.975))
}
