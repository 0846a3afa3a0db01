//! How far a measurement is from the truth of a rendered clip, in intervals.
//!
//! The truth is what was realised in the clip, in the stretches that the measurement speaks of. Intervals are for the process (what a longer recording would settle to), so a
//! figure of a short clip may lie a little outside of them more often than one in twenty.

use super::Measurement;
use crate::bench::{si, signed};
use crate::estimate::Estimate;
use crate::firing::Firing;
use crate::model::firings::{Outage, Realised};
use crate::model::truth::{TrainTruth, Truth};
use crate::rhythm::{Stretch, Verdict};
use serde::{Deserialize, Serialize};
use std::fmt::Write;

/// Name of the format.
pub const COMPARISON_FORMAT: &str = "gaptone.comparison/1";

/// One figure beside its truth.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Compared {
    /// Name of the figure, as in the measurement.
    pub quantity: String,
    /// As it was realised, in the unit of the figure.
    pub truth: f64,
    /// As measured; none if the measurement gives no figure.
    pub measured: Option<Estimate>,
    /// (Measured − truth) over the half of the 95 % interval on the side of the truth: within ±1 the truth is covered.
    pub intervals: Option<f64>,
}

impl Compared {
    /// True if the interval covers the truth.
    #[must_use]
    pub fn covered(&self) -> bool {
        self.intervals.is_some_and(|intervals| intervals.abs() <= 1.0)
    }
}

/// A measurement beside the truth.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Comparison {
    /// Always [`COMPARISON_FORMAT`].
    pub format: String,
    /// Trains in the clip.
    pub trains: usize,
    /// What the measurement found.
    pub verdict: Verdict,
    /// True if a gap was found where there is one, and none where there is none.
    pub verdict_holds: bool,
    /// Stretches of the recording that the figures are of, measured and true; 1 if the gap fires all the time.
    pub stretches: usize,
    /// The figures.
    pub figures: Vec<Compared>,
}

impl Comparison {
    /// True if the verdict holds and every figure that was given covers its truth.
    #[must_use]
    pub fn holds(&self) -> bool {
        self.verdict_holds && self.figures.iter().all(|figure| figure.measured.is_none() || figure.covered())
    }
}

/// Compares a measurement with the truth of the clip that was measured.
#[must_use]
pub fn compare(measurement: &Measurement, truth: &Truth) -> Comparison {
    let reading = &measurement.reading;
    let found = matches!(reading.verdict, Verdict::Steady | Verdict::Unsteady);
    let mut figures = Vec::new();
    let mut put = |quantity: &str, truth: Option<f64>, measured: Option<Estimate>| {
        if let Some(truth) = truth {
            let intervals = measured.map(|estimate| intervals(&estimate, truth));
            figures.push(Compared { quantity: quantity.to_owned(), truth, measured, intervals });
        }
    };
    if let Some(train) = truth.trains.first() {
        let realised = realised_in(train, &reading.stretches, truth.receiver_delay_s);
        put("firing_rate_hz", realised.firing_rate_hz, reading.firing_rate_hz);
        put("period_s", realised.period_s, reading.period_s);
        put("period_jitter_s", realised.period_jitter_s, reading.period_jitter_s);
        put("cycle_jitter_s", realised.cycle_jitter_s, reading.cycle_jitter_s);
        put("drift_per_s", realised.drift_per_s, reading.drift_per_s);
        put("gap_voltage_v", realised.gap_voltage_v, measurement.gap_voltage_v);
        put("gap_voltage_spread_v", realised.gap_voltage_spread_v, measurement.gap_voltage_spread_v);
    }
    for (number, train) in truth.trains.iter().enumerate().skip(1) {
        let Some(rate_hz) = train.realised.firing_rate_hz else { continue };
        let distance = |estimate: &Estimate| (estimate.value / rate_hz).ln().abs();
        let nearest = reading
            .other_trains
            .iter()
            .map(|other| other.firing_rate_hz)
            .min_by(|a, b| distance(a).total_cmp(&distance(b)));
        put(&format!("firing_rate_hz of train {}", number + 1), Some(rate_hz), nearest);
    }
    Comparison {
        format: COMPARISON_FORMAT.to_owned(),
        trains: truth.trains.len(),
        verdict: reading.verdict,
        verdict_holds: found != truth.trains.is_empty(),
        stretches: reading.stretches.len().max(1),
        figures,
    }
}

/// What a train did in the stretches that a measurement speaks of: where it tells of several, what happened between them is no
/// part of its figures.
fn realised_in(train: &TrainTruth, stretches: &[Stretch], delay_s: f64) -> Realised {
    let (Some(period_s), true) = (train.realised.period_s, stretches.len() > 1) else { return train.realised };
    // A stretch ends at its last click, whose time is read with some error.
    let slack_s = 0.25 * period_s;
    let inside = |time_s: f64| {
        let heard_s = time_s + delay_s;
        stretches.iter().any(|s| (s.from_s - slack_s..=s.to_s + slack_s).contains(&heard_s))
    };
    let firings: Vec<Firing> = train.firings.iter().filter(|firing| inside(firing.time_s)).copied().collect();
    let between = |pair: &[Stretch]| Outage {
        from_s: pair[0].to_s - delay_s + slack_s,
        to_s: pair[1].from_s - delay_s - slack_s,
    };
    Realised::of(&firings, &stretches.windows(2).map(between).collect::<Vec<_>>())
}

/// Distance in half intervals; an interval of no width covers only the truth itself.
fn intervals(estimate: &Estimate, truth: f64) -> f64 {
    let distance = estimate.value - truth;
    let half = if distance > 0.0 { estimate.value - estimate.low } else { estimate.high - estimate.value };
    if distance == 0.0 { 0.0 } else { distance / half }
}

/// The comparison as lines for people.
#[must_use]
pub fn comparison_text(comparison: &Comparison) -> String {
    let mut text = String::new();
    let heard = match (comparison.trains, comparison.verdict_holds) {
        (0, true) => "there is no gap in the clip, and none was found",
        (0, false) => "there is no gap in the clip, but one was found",
        (_, true) => "the gap in the clip was found",
        (_, false) => "the gap in the clip was not found",
    };
    // Writing to a string cannot fail.
    let _ = writeln!(text, "against the truth: {heard}");
    if comparison.stretches > 1 {
        let _ =
            writeln!(text, "  (measured and true in the {} stretches in which it fires evenly)", comparison.stretches);
    }
    for figure in &comparison.figures {
        let line = match (figure.measured, figure.intervals) {
            (Some(measured), Some(intervals)) => {
                format!("measured {:<22} {}", in_units(&figure.quantity, measured.value), distance(intervals))
            }
            _ => "not measured".to_owned(),
        };
        let _ = writeln!(text, "  {:<28} {:<22} {line}", figure.quantity, in_units(&figure.quantity, figure.truth));
    }
    text
}

/// How far off a figure is, in words.
fn distance(intervals: f64) -> String {
    let side = if intervals > 0.0 { "above" } else { "below" };
    match intervals.abs() {
        0.0 => "is the truth".to_owned(),
        off if off <= 1.0 => {
            format!("{side} the truth, which is inside the 95 % interval, {:.0} % of the way to its end", 100.0 * off)
        }
        off if off.is_finite() => {
            format!("{side} the truth, which is OUTSIDE the 95 % interval, {off:.2} times as far as its end")
        }
        _ => format!("{side} the truth; its interval has no width"),
    }
}

/// A figure in the unit that the name of its quantity ends in, to six digits.
fn in_units(quantity: &str, value: f64) -> String {
    let name = quantity.split_once(' ').map_or(quantity, |(name, _)| name);
    match name.rsplit_once('_') {
        Some(("drift_per", _)) => format!("{} % per minute", signed(6000.0 * value, 3)),
        Some((_, "hz")) => si(value, "/s", 6),
        Some((_, "v")) => si(value, "V", 6),
        _ => si(value, "s", 6),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_the_stretches_that_were_measured_count() {
        let at = |time_s: f64| Firing { time_s, voltage_v: 5e3, kind: crate::firing::EventKind::Firing };
        // 100 a second, a burst of 500 a second from 1 s to 1.2 s, then 100 a second again.
        let even = |from_s: f64, count: i32, period_s: f64| (0..count).map(move |k| from_s + f64::from(k) * period_s);
        let times = even(0.0, 100, 0.01).chain(even(1.0, 100, 0.002)).chain(even(1.2, 100, 0.01));
        let train = TrainTruth::of(times.map(at).collect(), &[]);
        assert!(train.realised.firing_rate_hz.unwrap() > 120.0);
        let stretch = |from_s: f64, to_s: f64| Stretch { from_s, to_s };
        let found = realised_in(&train, &[stretch(0.0011, 0.9909), stretch(1.201, 2.191)], 0.001);
        assert_eq!(found.firings, 200);
        assert!((found.firing_rate_hz.unwrap() - 100.0).abs() < 1e-9 && found.period_jitter_s.unwrap() < 1e-9);
        assert_eq!(realised_in(&train, &[stretch(0.0, 2.2)], 0.001), train.realised);
    }

    #[test]
    fn figures_are_shown_in_their_units() {
        assert_eq!(in_units("firing_rate_hz of train 2", 423.502), "423.502 /s");
        assert_eq!(in_units("period_jitter_s", 14.64e-6), "14.6400 µs");
        assert_eq!(in_units("gap_voltage_v", 5200.0), "5.20000 kV");
        assert_eq!(in_units("drift_per_s", -1e-8), "+0.000 % per minute");
    }

    #[test]
    fn distances_are_told_in_words() {
        assert_eq!(distance(0.414), "above the truth, which is inside the 95 % interval, 41 % of the way to its end");
        assert_eq!(distance(-1.3), "below the truth, which is OUTSIDE the 95 % interval, 1.30 times as far as its end");
        assert_eq!(distance(0.0), "is the truth");
    }

    #[test]
    fn distances_are_counted_in_the_half_interval_on_the_side_of_the_truth() {
        let estimate = Estimate { value: 10.0, u: 1.0, low: 9.0, high: 14.0 };
        assert_eq!(intervals(&estimate, 8.0), 2.0);
        assert_eq!(intervals(&estimate, 12.0), -0.5);
        assert_eq!(intervals(&estimate, 10.0), 0.0);
        let sharp = Estimate { value: 10.0, u: 0.0, low: 10.0, high: 10.0 };
        assert_eq!(intervals(&sharp, 10.0), 0.0);
        assert!(intervals(&sharp, 9.0).is_infinite());
    }
}
