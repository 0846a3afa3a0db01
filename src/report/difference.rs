//! Whether two runs differ: the difference of each figure with its interval.

use super::{Figure, Measurement, wrapped};
use crate::estimate::Estimate;
use serde::{Deserialize, Serialize};
use std::fmt::Write;

/// Name of the format.
pub const DIFFERENCE_FORMAT: &str = "gaptone.difference/1";

/// One figure of both runs.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Difference {
    /// Name of the figure, as in the measurement.
    pub quantity: String,
    /// Of the first run.
    pub first: Estimate,
    /// Of the second run.
    pub second: Estimate,
    /// Second less first.
    pub difference: Estimate,
    /// True if the 95 % interval of the difference does not hold zero.
    pub differs: bool,
}

/// Two measurements side by side.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Differences {
    /// Always [`DIFFERENCE_FORMAT`].
    pub format: String,
    /// The two runs.
    pub measurements: Vec<Measurement>,
    /// Figures that both have.
    pub differences: Vec<Difference>,
}

/// Two independent estimates subtracted: the ends of the interval add in squares, each to its own side.
fn independent(first: Estimate, second: Estimate) -> Estimate {
    let value = second.value - first.value;
    Estimate {
        value,
        u: first.u.hypot(second.u),
        low: value - (second.value - second.low).hypot(first.high - first.value),
        high: value + (second.high - second.value).hypot(first.value - first.low),
    }
}

/// Compares two runs. `voltage` is the difference of their gap voltages where the bench is common to both: what the two have
/// in common cancels, so it is not the difference of two independent figures.
#[must_use]
pub fn differences(first: Measurement, second: Measurement, voltage: Option<Estimate>) -> Differences {
    let (one, two) = (&first.reading, &second.reading);
    let pairs = [
        ("firing_rate_hz", one.firing_rate_hz, two.firing_rate_hz, None),
        ("period_s", one.period_s, two.period_s, None),
        ("period_jitter_s", one.period_jitter_s, two.period_jitter_s, None),
        ("drift_per_s", one.drift_per_s, two.drift_per_s, None),
        ("gap_voltage_v", first.gap_voltage_v, second.gap_voltage_v, voltage),
    ];
    let differences = pairs
        .into_iter()
        .filter_map(|(quantity, first, second, known)| {
            let (first, second) = (first?, second?);
            let difference = known.unwrap_or_else(|| independent(first, second));
            let differs = difference.low > 0.0 || difference.high < 0.0;
            Some(Difference { quantity: quantity.to_owned(), first, second, difference, differs })
        })
        .collect();
    Differences { format: DIFFERENCE_FORMAT.to_owned(), measurements: vec![first, second], differences }
}

/// The differences as lines for people.
#[must_use]
pub fn differences_text(found: &Differences) -> String {
    let mut text = "second run less first\n".to_owned();
    for one in &found.differences {
        let (words, unit) = words_and_unit(&one.quantity);
        let figure = match unit {
            "s" | "V" => Figure::prefixed(one.difference, unit),
            unit => Figure::plain(one.difference, unit),
        };
        let verdict = if one.differs { "differs" } else { "no difference to be seen" };
        // Writing to a string cannot fail.
        let _ = writeln!(text, "  {words:16}{:26}{:28}{verdict}", figure.value_and_u(), figure.interval());
    }
    let differing: Vec<&str> =
        found.differences.iter().filter(|one| one.differs).map(|one| words_and_unit(&one.quantity).0).collect();
    let sentence = if found.differences.is_empty() {
        "the two runs have no figure in common".to_owned()
    } else if differing.is_empty() {
        "the two runs do not differ beyond their uncertainties (95 % intervals)".to_owned()
    } else {
        format!("the two runs differ in {} (95 % intervals)", differing.join(", "))
    };
    text + &wrapped(&sentence, "  ", "  ")
}

fn words_and_unit(quantity: &str) -> (&str, &str) {
    match quantity {
        "firing_rate_hz" => ("firing rate", "/s"),
        "period_s" => ("period", "s"),
        "period_jitter_s" => ("period jitter", "s"),
        "drift_per_s" => ("drift", "/s"),
        "gap_voltage_v" => ("gap voltage", "V"),
        other => (other, ""),
    }
}

#[cfg(test)]
mod tests {
    use super::super::text::tests::measured;
    use super::*;

    #[test]
    fn equal_runs_do_not_differ_and_a_shift_beyond_the_interval_does() {
        let same = differences(measured(), measured(), None);
        assert_eq!(same.differences.len(), 5);
        assert!(same.differences.iter().all(|one| !one.differs && one.difference.value == 0.0));
        assert!(differences_text(&same).contains("do not differ"));
        let mut shifted = measured();
        shifted.reading.firing_rate_hz = Some(Estimate::normal(438.21, 0.19));
        let found = differences(measured(), shifted, None);
        let rate = &found.differences[0];
        // u = 0.19·√2 = 0.27: 1.0 is 3.7 of it.
        assert!(rate.differs && (rate.difference.u - 0.2687).abs() < 1e-4);
        assert!(differences_text(&found).contains("the two runs differ in firing rate (95 % intervals)"));
    }

    #[test]
    fn a_lopsided_interval_keeps_its_sides() {
        let first = Estimate { value: 10.0, u: 1.0, low: 9.0, high: 14.0 };
        let second = Estimate { value: 10.0, u: 1.0, low: 7.0, high: 11.0 };
        let found = independent(first, second);
        assert_eq!((found.low, found.high), (-5.0, 2f64.sqrt()));
    }
}
