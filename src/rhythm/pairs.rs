//! Pairs of event times: which lags come again and again, and the trains behind them.
//!
//! A histogram of the distances between all pairs of events shows every train at its period, and falsely at twice and three
//! times its period. Weighting each pair with a phase takes those out (Nishiguchi and Kobayashi 2000):
//!
//! ```text
//! D(τ) = Σ over pairs with t_j − t_i = τ of exp(2πi·t_j/τ)
//! ```
//!
//! At the period all pairs have the same phase and add up; at n times the period their phases take n values in turn and
//! cancel. Two methods meet in [`trains`]: the lag of the largest |D| gives the period, a chain of events at that period gives
//! the members, which are taken out before the next train is looked for.
//!
//! Times, lags and widths are in one unit, the second elsewhere in this crate. Assumed: events in the order of time; errors
//! of the events that do not add up from one to the next (a clock with noisy edges), below a tenth of the period; and lists short
//! enough that the phase 2π·t·w/τ² of a width w stays below about one turn. A longer list goes in pieces.

use rustfft::num_complex::Complex64;
use std::f64::consts::TAU;

/// What the pairs at one lag say.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct LagPairs {
    /// Pairs of any order at this lag.
    pub count: usize,
    /// D at this lag.
    pub transform: Complex64,
}

/// Pairs of events whose distance is `lag` within ± `half_width`.
#[must_use]
pub fn at_lag(times: &[f64], lag: f64, half_width: f64) -> LagPairs {
    let mut found = LagPairs::default();
    let mut first = 0;
    for (j, &later) in times.iter().enumerate() {
        // One width more than needed: the comparison below decides alone.
        while first < j && later - times[first] > lag + 2.0 * half_width {
            first += 1;
        }
        for &earlier in times[first..j].iter().take_while(|&&t| later - t >= lag - 2.0 * half_width) {
            if (later - earlier - lag).abs() <= half_width {
                found.count += 1;
                found.transform += Complex64::from_polar(1.0, TAU * later / lag);
            }
        }
    }
    found
}

/// A train found among events.
#[derive(Debug, Clone, PartialEq)]
pub struct PairTrain {
    /// Its period, by least squares over its members.
    pub period: f64,
    /// Indices of its events, ascending.
    pub members: Vec<usize>,
}

/// Fewest events of a train.
const FEWEST: usize = 5;
/// Share of the expected pairs that must add up at the period of a train (Nishiguchi and Kobayashi name 0.1 to 0.3 for long lists).
const LEAST_SHARE: f64 = 0.5;
/// Missed events in a row that a chain bridges.
const MOST_MISSED: usize = 2;

/// Finds the trains among events, in the order of their periods, shortest first. Periods are looked for up to `longest`;
/// a member lies within ± `half_width` of its place.
#[must_use]
pub fn trains(times: &[f64], half_width: f64, longest: f64) -> Vec<PairTrain> {
    let mut left: Vec<usize> = (0..times.len()).collect();
    let mut found = Vec::new();
    while left.len() >= FEWEST {
        let rest: Vec<f64> = left.iter().map(|&i| times[i]).collect();
        let Some(train) = clearest_lag(&rest, half_width, longest).and_then(|lag| chain(&rest, lag, half_width)) else {
            break;
        };
        let members: Vec<usize> = train.members.iter().map(|&i| left[i]).collect();
        left.retain(|i| members.binary_search(i).is_err());
        found.push(PairTrain { period: train.period, members });
    }
    found.sort_by(|a, b| a.period.total_cmp(&b.period));
    found
}

/// The lag with the largest |D| in units of the pairs that a train of that period would have.
fn clearest_lag(times: &[f64], half_width: f64, longest: f64) -> Option<f64> {
    let span = times.last()? - times.first()?;
    let share = |lag: f64| at_lag(times, lag, half_width).transform.norm() / (span / lag);
    distances(times, half_width, longest)
        .into_iter()
        .map(|lag| (lag, share(lag)))
        .filter(|(_, share)| *share >= LEAST_SHARE)
        .max_by(|a, b| a.1.total_cmp(&b.1))
        .map(|(lag, _)| lag)
}

/// Distances that occur, ascending, those closer together than half a width named once. Nothing below twice the width: events
/// that close cannot be told apart.
fn distances(times: &[f64], half_width: f64, longest: f64) -> Vec<f64> {
    let mut all: Vec<f64> = Vec::new();
    for (i, &earlier) in times.iter().enumerate() {
        let lags = times[i + 1..].iter().map(|later| later - earlier);
        all.extend(lags.take_while(|&lag| lag <= longest).filter(|&lag| lag > 2.0 * half_width));
    }
    all.sort_by(f64::total_cmp);
    all.dedup_by(|next, kept| *next - *kept < 0.5 * half_width);
    all
}

/// The longest chain of events at about this period; none if it is too short or misses too much.
fn chain(times: &[f64], lag: f64, half_width: f64) -> Option<PairTrain> {
    let (members, line) =
        (0..times.len()).map(|start| follow(times, start, lag, half_width)).max_by_key(|(members, _)| members.len())?;
    let span = times[times.len() - 1] - times[0];
    let enough = members.len() >= FEWEST && members.len() as f64 >= LEAST_SHARE * span / line.period;
    enough.then_some(PairTrain { period: line.period, members })
}

/// Follows a train from one event on: each next one is the event nearest to its place on the line through those before.
fn follow(times: &[f64], start: usize, lag: f64, half_width: f64) -> (Vec<usize>, Line) {
    let mut members = vec![start];
    let mut sums = Sums::default();
    sums.add(0.0, 0.0);
    let (mut number, mut missed) = (0.0, 0);
    while missed <= MOST_MISSED {
        number += 1.0;
        let line = sums.line(lag);
        let place = times[start] + line.at(number);
        let from = members[members.len() - 1] + 1;
        let nearest =
            (from..times.len()).min_by(|&a, &b| (times[a] - place).abs().total_cmp(&(times[b] - place).abs()));
        match nearest {
            Some(i) if (times[i] - place).abs() <= half_width => {
                members.push(i);
                sums.add(number, times[i] - times[start]);
                missed = 0;
            }
            Some(_) => missed += 1,
            None => break,
        }
    }
    (members, sums.line(lag))
}

/// A straight line of time over number.
#[derive(Debug, Clone, Copy)]
struct Line {
    offset: f64,
    period: f64,
}

impl Line {
    fn at(self, number: f64) -> f64 {
        self.offset + self.period * number
    }
}

/// Sums of a least-squares line.
#[derive(Debug, Clone, Copy, Default)]
struct Sums {
    n: f64,
    x: f64,
    y: f64,
    xx: f64,
    xy: f64,
}

impl Sums {
    fn add(&mut self, x: f64, y: f64) {
        self.n += 1.0;
        self.x += x;
        self.y += y;
        self.xx += x * x;
        self.xy += x * y;
    }

    /// The line; its slope is `period` while fewer than four events would say it worse.
    fn line(&self, period: f64) -> Line {
        let spread = self.n * self.xx - self.x * self.x;
        let slope = if self.n < 4.0 || spread <= 0.0 { period } else { (self.n * self.xy - self.x * self.y) / spread };
        Line { offset: (self.y - slope * self.x) / self.n, period: slope }
    }
}
