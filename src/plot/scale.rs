//! Scales, axes and their ticks.

use crate::bench::si;

/// A stretch of values onto a stretch from 0 to 1.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Scale {
    /// Value at 0.
    pub low: f64,
    /// Value at 1.
    pub high: f64,
    /// True if equal ratios take equal room.
    pub logarithmic: bool,
}

/// Ratio from which a logarithmic scale is labelled by 1, 2, 5 or by powers of ten.
const FEW_RATIO: f64 = 8.0;
const MANY_RATIO: f64 = 3e3;

impl Scale {
    /// Equal differences take equal room. Ends that are equal or not finite are moved apart.
    #[must_use]
    pub fn linear(low: f64, high: f64) -> Self {
        let (low, high) = if low.is_finite() && high.is_finite() { (low.min(high), low.max(high)) } else { (0.0, 1.0) };
        let least = 1e-9 * low.abs().max(high.abs());
        if high - low > least {
            return Self { low, high, logarithmic: false };
        }
        let half = if low == 0.0 { 1.0 } else { 0.01 * low.abs() };
        Self { low: low - half, high: high + half, logarithmic: false }
    }

    /// Equal ratios take equal room; both ends must be above 0, others are replaced.
    #[must_use]
    pub fn logarithmic(low: f64, high: f64) -> Self {
        let high = if high.is_finite() && high > 0.0 { high } else { 1.0 };
        let low = if low > 0.0 && low < high { low } else { 0.1 * high };
        Self { low, high, logarithmic: true }
    }

    /// The linear scale over all values, with a share of its extent to spare at both ends.
    #[must_use]
    pub fn over(values: impl Iterator<Item = f64>, spare: f64) -> Self {
        let (low, high) = ends(values);
        Self::linear(low - spare * (high - low), high + spare * (high - low))
    }

    /// From value to share; outside of 0 to 1 beyond the ends.
    #[must_use]
    pub fn share(&self, value: f64) -> f64 {
        if self.logarithmic {
            (value / self.low).ln() / (self.high / self.low).ln()
        } else {
            (value - self.low) / (self.high - self.low)
        }
    }

    /// Round values along the scale, about so many.
    #[must_use]
    pub fn ticks(&self, about: usize) -> Vec<f64> {
        let ratio = self.high / self.low;
        if self.logarithmic && ratio > FEW_RATIO {
            let digits: &[f64] = if ratio > MANY_RATIO { &[1.0] } else { &[1.0, 2.0, 5.0] };
            let powers = self.low.log10().floor() as i32..=self.high.log10().ceil() as i32;
            let all = powers.flat_map(|power| digits.iter().map(move |digit| digit * 10f64.powi(power)));
            let inside = self.low * (1.0 - 1e-9)..=self.high * (1.0 + 1e-9);
            return all.filter(|tick| inside.contains(tick)).collect();
        }
        let step = self.step(about);
        let first = (self.low / step - 1e-9).ceil();
        (0..=3 * about as u32)
            .map(|k| (first + f64::from(k)) * step)
            .filter(|tick| *tick <= self.high + 1e-9 * step)
            .collect()
    }

    /// Distance of the ticks of a linear scale.
    fn step(&self, about: usize) -> f64 {
        let rough = (self.high - self.low) / about.max(1) as f64;
        let power = 10f64.powf(rough.log10().floor());
        [1.0, 2.0, 5.0, 10.0].into_iter().map(|digit| digit * power).find(|step| *step >= rough).unwrap_or(rough)
    }
}

/// Least and greatest of the finite values; 0 and 1 if there are none.
fn ends(values: impl Iterator<Item = f64>) -> (f64, f64) {
    let start = (f64::INFINITY, f64::NEG_INFINITY);
    let found = values.filter(|v| v.is_finite()).fold(start, |(low, high), v| (low.min(v), high.max(v)));
    if found.0 <= found.1 { found } else { (0.0, 1.0) }
}

/// A scale with what it shows: words, and the SI unit of its values.
#[derive(Debug, Clone, PartialEq)]
pub struct Axis {
    /// The scale.
    pub scale: Scale,
    /// Ticks with their labels.
    pub ticks: Vec<(f64, String)>,
    /// What the axis shows, with its unit.
    pub title: String,
    /// SI unit of its values, `%` for shares; empty where they have none.
    pub unit: String,
}

/// Prefixes that one axis takes for all its labels.
const PREFIXES: [(&str, f64); 6] = [("M", 1e6), ("k", 1e3), ("", 1.0), ("m", 1e-3), ("µ", 1e-6), ("n", 1e-9)];

impl Axis {
    /// An axis of values in an SI unit; a linear one takes one prefix for all labels and names it in the title, a logarithmic
    /// one has the unit at each label.
    #[must_use]
    pub fn new(scale: Scale, words: &str, unit: &str, about: usize) -> Self {
        if scale.logarithmic {
            let ticks = scale.ticks(about).into_iter().map(|tick| (tick, short(tick, unit))).collect();
            return Self { scale, ticks, title: words.to_owned(), unit: unit.to_owned() };
        }
        let takes_prefix = matches!(unit, "s" | "V" | "Hz");
        let size = scale.low.abs().max(scale.high.abs());
        let fits = |(_, factor): &&(&str, f64)| size >= *factor * (1.0 - 1e-9);
        let (prefix, factor) = if takes_prefix { *PREFIXES.iter().find(fits).unwrap_or(&("", 1.0)) } else { ("", 1.0) };
        let step = scale.step(about) / factor;
        let decimals = (-(step.log10() + 1e-9).floor()).clamp(0.0, 9.0) as usize;
        let label = |tick: f64| crate::bench::signed(tick / factor, decimals).trim_start_matches('+').to_owned();
        let ticks = scale.ticks(about).into_iter().map(|tick| (tick, label(tick))).collect();
        let title = if unit.is_empty() { words.to_owned() } else { format!("{words}, {prefix}{unit}") };
        Self { scale, ticks, title, unit: unit.to_owned() }
    }

    /// An axis of shares, labelled in percent.
    #[must_use]
    pub fn percent(scale: Scale, words: &str, about: usize) -> Self {
        let hundred = Scale { low: 100.0 * scale.low, high: 100.0 * scale.high, ..scale };
        let axis = Self::new(hundred, words, "%", about);
        Self { scale, ticks: axis.ticks.into_iter().map(|(tick, label)| (tick / 100.0, label)).collect(), ..axis }
    }

    /// An axis whose ticks are stated: names instead of numbers.
    #[must_use]
    pub fn named(scale: Scale, title: &str, ticks: Vec<(f64, String)>) -> Self {
        Self { scale, ticks, title: title.to_owned(), unit: String::new() }
    }
}

/// `20 µs`, `1 kHz`, `100`.
fn short(value: f64, unit: &str) -> String {
    let text = si(value, unit, 3);
    let (number, rest) = text.split_once(' ').map_or((text.as_str(), ""), |(number, rest)| (number, rest));
    let number = if number.contains('.') && !number.contains('e') {
        number.trim_end_matches('0').trim_end_matches('.')
    } else {
        number
    };
    if rest.is_empty() { number.to_owned() } else { format!("{number} {rest}") }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_round_and_inside() {
        assert_eq!(Scale::linear(0.0, 10.0).ticks(5), [0.0, 2.0, 4.0, 6.0, 8.0, 10.0]);
        let ticks = Scale::linear(-0.37, 1.21).ticks(4);
        assert_eq!(ticks, [0.0, 0.5, 1.0]);
        assert_eq!(Scale::logarithmic(10.0, 1000.0).ticks(5), [10.0, 20.0, 50.0, 100.0, 200.0, 500.0, 1000.0]);
        assert_eq!(Scale::logarithmic(0.9, 20_000.0).ticks(5), [1.0, 10.0, 100.0, 1000.0, 10_000.0]);
    }

    #[test]
    fn one_prefix_serves_an_axis_and_stands_in_its_title() {
        let axis = Axis::new(Scale::linear(2.3e-3, 2.4e-3), "period", "s", 5);
        assert_eq!(axis.title, "period, ms");
        assert_eq!(
            axis.ticks.iter().map(|tick| tick.1.as_str()).collect::<Vec<_>>(),
            ["2.30", "2.32", "2.34", "2.36", "2.38", "2.40"]
        );
        let axis = Axis::new(Scale::logarithmic(1e-5, 1e-4), "scatter", "s", 5);
        assert_eq!(axis.ticks[0].1, "10 µs");
        let axis = Axis::percent(Scale::linear(0.0, 0.5), "share", 5);
        assert_eq!(axis.ticks.last().expect("ticks"), &(0.5, "50".to_owned()));
    }

    #[test]
    fn a_scale_without_extent_or_numbers_is_still_one() {
        for scale in [Scale::linear(3.0, 3.0), Scale::linear(f64::NAN, 1.0), Scale::over([].into_iter(), 0.1)] {
            assert!(scale.high > scale.low && scale.share(scale.high) == 1.0, "{scale:?}");
        }
        assert!(Scale::logarithmic(0.0, f64::NAN).low > 0.0);
    }
}
