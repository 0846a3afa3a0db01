//! Limits of a watch: what is right, and what an alarm says when it is not.

use super::glance::{Glance, State};
use crate::bench::{Dimension, parse_quantity};
use crate::estimate::Estimate;
use serde::{Deserialize, Serialize};
use std::fmt;
use std::str::FromStr;

/// Glances in a row with a figure outside its limits after which an alarm is raised though its interval still reaches inside.
const PATIENCE: u32 = 3;

/// What a limit is set to.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Quality {
    /// Firing rate, Hz.
    Rate,
    /// Period jitter, share of the period.
    Jitter,
    /// Gap voltage, V.
    Voltage,
    /// Share of missed firings.
    Missed,
    /// Extra strikes per firing.
    Extra,
    /// Time since the last firing, s.
    Silence,
}

impl Quality {
    const ALL: [(Self, &'static str, Dimension); 6] = [
        (Self::Rate, "rate", Dimension::Frequency),
        (Self::Jitter, "jitter", Dimension::Fraction),
        (Self::Voltage, "voltage", Dimension::Voltage),
        (Self::Missed, "missed", Dimension::Fraction),
        (Self::Extra, "extra", Dimension::Fraction),
        (Self::Silence, "silence", Dimension::Time),
    ];

    fn facts(self) -> (Self, &'static str, Dimension) {
        Self::ALL[self as usize]
    }

    /// Name, as it is written.
    #[must_use]
    pub fn name(self) -> &'static str {
        self.facts().1
    }

    /// A value with its unit, for a person.
    #[must_use]
    pub fn text(self, value: f64) -> String {
        match self {
            Self::Rate => format!("{value:.4} Hz"),
            Self::Voltage => format!("{:.3} kV", 1e-3 * value),
            Self::Silence => format!("{value:.1} s"),
            Self::Jitter | Self::Missed | Self::Extra => format!("{:.2} %", 100.0 * value),
        }
    }
}

/// A range that a figure must lie in.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Limit {
    /// Of what.
    pub of: Quality,
    /// Least right value, SI.
    pub low: f64,
    /// Largest right value, SI.
    pub high: f64,
}

/// A text that is no limit.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum LimitError {
    /// It begins with no known name.
    #[error(
        "'{0}' is no limit; write one of rate, jitter, voltage, missed, extra, silence and a range, such as 'rate 430..450 Hz', 'missed ..5 %'"
    )]
    Name(String),
    /// It has no range.
    #[error("'{text}' has no range; write both ends or one, such as '{example}'")]
    Range {
        /// As written.
        text: String,
        /// What would be right.
        example: String,
    },
    /// One end is wrong.
    #[error("'{text}': {reason}")]
    End {
        /// As written.
        text: String,
        /// Why.
        reason: String,
    },
    /// Nothing lies between the ends.
    #[error("'{0}': nothing lies between these ends; the lower one comes first")]
    Reversed(String),
    /// Two limits leave nothing between them.
    #[error("the limits '{0}' and '{1}' contradict each other: no {2} is within both")]
    Contradiction(String, String, &'static str),
}

impl FromStr for Limit {
    type Err = LimitError;

    /// Reads `NAME LOW..HIGH`; either end may be left out, and the first may leave its unit to the second.
    fn from_str(text: &str) -> Result<Self, LimitError> {
        let (name, range) = text.trim().split_once([' ', '=']).unwrap_or((text.trim(), ""));
        let (of, _, dimension) = Quality::ALL
            .into_iter()
            .find(|known| known.1.eq_ignore_ascii_case(name))
            .ok_or_else(|| LimitError::Name(text.to_owned()))?;
        let no_range =
            || LimitError::Range { text: text.to_owned(), example: format!("{name} ..{}", dimension.example()) };
        let (low, high) = range.split_once("..").ok_or_else(no_range)?;
        let (low, high) = (low.trim(), high.trim());
        if low.is_empty() && high.is_empty() {
            return Err(no_range());
        }
        let end = |written: &str| {
            let quantity = parse_quantity(written, dimension)
                .or_else(|error| with_unit_of(written, high).map_or(Err(error), |w| parse_quantity(&w, dimension)));
            match quantity {
                Ok(quantity) if quantity.value >= 0.0 => Ok(quantity.value),
                Ok(_) => Err(LimitError::End { text: text.to_owned(), reason: "an end below 0 says nothing".into() }),
                Err(error) => Err(LimitError::End { text: text.to_owned(), reason: error.to_string() }),
            }
        };
        let limit = Self {
            of,
            low: if low.is_empty() { 0.0 } else { end(low)? },
            high: if high.is_empty() { f64::INFINITY } else { end(high)? },
        };
        if limit.low >= limit.high { Err(LimitError::Reversed(text.to_owned())) } else { Ok(limit) }
    }
}

/// A number without a unit, with the unit of another one; a rate is one of hertz where none is written at all.
fn with_unit_of(written: &str, other: &str) -> Option<String> {
    let bare: f64 = written.parse().ok()?;
    let unit = other.trim_start_matches(|c: char| c.is_ascii_digit() || ".,eE+- ".contains(c));
    Some(format!("{bare} {}", if unit.is_empty() { "Hz" } else { unit }))
}

impl fmt::Display for Limit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let end = |value: f64, open: f64| if value == open { String::new() } else { self.of.text(value) };
        write!(f, "{} {}..{}", self.of.name(), end(self.low, 0.0), end(self.high, f64::INFINITY))
    }
}

/// A figure outside its limits.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Alarm {
    /// Which figure.
    pub of: Quality,
    /// Its value, SI.
    pub value: f64,
    /// The limits, as a text.
    pub limit: String,
}

/// The limits of a watch, with their memory.
#[derive(Debug, Clone, Default)]
pub struct Limits {
    limits: Vec<(Limit, u32)>,
}

impl Limits {
    /// Limits that must all be kept.
    ///
    /// # Errors
    /// [`LimitError::Contradiction`].
    pub fn new(limits: Vec<Limit>) -> Result<Self, LimitError> {
        for (i, a) in limits.iter().enumerate() {
            if let Some(b) = limits[..i].iter().find(|b| a.of == b.of && a.low.max(b.low) >= a.high.min(b.high)) {
                return Err(LimitError::Contradiction(b.to_string(), a.to_string(), a.of.name()));
            }
        }
        Ok(Self { limits: limits.into_iter().map(|limit| (limit, 0)).collect() })
    }

    /// True if one of the limits is set to this.
    #[must_use]
    pub fn any_of(&self, of: Quality) -> bool {
        self.limits.iter().any(|(limit, _)| limit.of == of)
    }

    /// The alarms of a glance: figures whose interval lies outside their limits, or whose value has for some glances in a row.
    pub fn check(&mut self, glance: &Glance) -> Vec<Alarm> {
        let mut alarms = Vec::new();
        for (limit, outside) in &mut self.limits {
            let Some(figure) = figure(glance, limit.of) else {
                *outside = 0;
                continue;
            };
            let is_outside = figure.value < limit.low || figure.value > limit.high;
            let surely = figure.high < limit.low || figure.low > limit.high;
            *outside = if is_outside { *outside + 1 } else { 0 };
            if surely || *outside >= PATIENCE {
                alarms.push(Alarm { of: limit.of, value: figure.value, limit: limit.to_string() });
            }
        }
        alarms
    }
}

/// The figure of a glance that a limit is set to.
fn figure(glance: &Glance, of: Quality) -> Option<Estimate> {
    let reading = &glance.reading;
    let firing = glance.state == State::Firing;
    match of {
        Quality::Rate => reading.firing_rate_hz.filter(|_| firing),
        Quality::Jitter => Some(reading.period_jitter_s?.scaled(1.0 / reading.period_s?.value)),
        Quality::Voltage => glance.gap_voltage_v,
        Quality::Missed => share(glance.missed_share?, reading.firings.on_rhythm + reading.firings.missed),
        Quality::Extra => share(glance.extra_share?, reading.firings.on_rhythm),
        Quality::Silence => glance.silence_s.map(|silence_s| Estimate::normal(silence_s, 0.0)),
    }
}

/// A share counted in `of` firings, with the interval of Wilson (1927).
fn share(value: f64, of: u64) -> Option<Estimate> {
    let (n, z) = (of as f64, crate::estimate::COVERAGE_95);
    if n == 0.0 {
        return None;
    }
    let p = value.min(1.0);
    let centre = (p + z * z / (2.0 * n)) / (1.0 + z * z / n);
    let half = z / (1.0 + z * z / n) * (p * (1.0 - p) / n + z * z / (4.0 * n * n)).sqrt();
    Some(Estimate { value, u: half / z, low: centre - half, high: centre + half })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn limits_are_read_in_the_units_of_a_bench() {
        let limit = |text: &str| text.parse::<Limit>();
        assert_eq!(limit("rate 430..450"), Ok(Limit { of: Quality::Rate, low: 430.0, high: 450.0 }));
        assert_eq!(limit("rate 0.43..0.45 kHz"), Ok(Limit { of: Quality::Rate, low: 430.0, high: 450.0 }));
        assert_eq!(limit("missed ..5 %"), Ok(Limit { of: Quality::Missed, low: 0.0, high: 0.05 }));
        assert_eq!(limit("voltage 3kV.."), Ok(Limit { of: Quality::Voltage, low: 3000.0, high: f64::INFINITY }));
        assert_eq!(limit("silence ..2s").map(|l| l.to_string()), Ok("silence ..2.0 s".to_owned()));
        for wrong in
            ["", "rate", "rate ..", "rate 450..430", "speed 1..2", "voltage 3..4 Hz", "rate -5..3 Hz", "jitter 1"]
        {
            assert!(limit(wrong).is_err(), "{wrong}");
        }
    }

    #[test]
    fn limits_that_leave_nothing_are_refused() {
        let limits = |texts: &[&str]| Limits::new(texts.iter().map(|t| t.parse().expect("a limit")).collect());
        assert!(limits(&["rate 430..450", "rate 440..", "jitter ..2 %"]).is_ok());
        assert!(matches!(limits(&["rate 430..450", "rate 460.."]), Err(LimitError::Contradiction(..))));
    }

    /// NIST/SEMATECH e-Handbook, 7.2.4.1: 4 defectives of 20 give 0.2 with Wilson's interval 0.0807 to 0.4160 (95 %, two-sided;
    /// recomputed from the formula there).
    #[test]
    fn a_share_has_the_interval_of_wilson() {
        let e = share(0.2, 20).expect("some");
        assert!((e.low - 0.0807).abs() < 1e-4 && (e.high - 0.4160).abs() < 1e-4, "{e:?}");
    }
}
