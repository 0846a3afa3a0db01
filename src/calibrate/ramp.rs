//! One recording with a ramped supply: a log of time and supply, and the stretches that stand for settings.

use super::matrix::solve;
use super::setting::Setting;
use crate::bench::{Quantity, si};
use crate::estimate::Estimate;
use crate::firing::{Event, EventKind};

/// Stretches that a ramp is cut into.
const STRETCHES: usize = 32;

/// Fewest periods in a stretch.
const FEWEST: usize = 8;

/// A log of the supply: voltage over time, straight between the entries.
#[derive(Debug, Clone, PartialEq)]
pub struct SupplyLog {
    entries: Vec<(f64, f64)>,
}

/// What is wrong with a log.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum SupplyLogError {
    /// No header.
    #[error("line 1: the header must be time_s,supply_v; it is `{found}`")]
    Header {
        /// What stands there.
        found: String,
    },
    /// A line that is no pair of numbers.
    #[error("line {line}: `{found}` is not a time in seconds and a supply in volts, such as 1.5,9200")]
    Line {
        /// Number of the line.
        line: usize,
        /// What stands there.
        found: String,
    },
    /// Times that do not rise.
    #[error("line {line}: the time is not later than the one before")]
    Order {
        /// Number of the line.
        line: usize,
    },
    /// Too few lines.
    #[error("it has {entries} entries; a ramp needs two or more")]
    TooFew {
        /// How many.
        entries: usize,
    },
}

/// Header of a log.
const HEADER: &str = "time_s,supply_v";

impl SupplyLog {
    /// Reads a log: the header `time_s,supply_v`, then one entry a line in the order of time; empty lines are skipped.
    ///
    /// # Errors
    /// [`SupplyLogError`] names the line.
    pub fn parse(text: &str) -> Result<Self, SupplyLogError> {
        let mut lines = text.trim_start_matches('\u{feff}').lines().enumerate();
        let header = lines.next().map_or("", |line| line.1).trim();
        if header.replace(' ', "") != HEADER {
            return Err(SupplyLogError::Header { found: header.chars().take(60).collect() });
        }
        let mut entries: Vec<(f64, f64)> = Vec::new();
        for (number, line) in lines.filter(|line| !line.1.trim().is_empty()) {
            let line_number = number + 1;
            let wrong = || SupplyLogError::Line { line: line_number, found: line.chars().take(60).collect() };
            let (time, supply) = line.split_once(',').ok_or_else(wrong)?;
            let parse = |text: &str| text.trim().parse::<f64>().ok().filter(|value| value.is_finite());
            let (time_s, supply_v) = parse(time).zip(parse(supply)).filter(|entry| entry.1 > 0.0).ok_or_else(wrong)?;
            if entries.last().is_some_and(|last| time_s <= last.0) {
                return Err(SupplyLogError::Order { line: line_number });
            }
            entries.push((time_s, supply_v));
        }
        if entries.len() < 2 {
            return Err(SupplyLogError::TooFew { entries: entries.len() });
        }
        Ok(Self { entries })
    }

    /// Supply at a time, V; none outside the log.
    #[must_use]
    pub fn supply_v(&self, time_s: f64) -> Option<f64> {
        let after = self.entries.partition_point(|entry| entry.0 <= time_s);
        let (before, after) = (self.entries.get(after.checked_sub(1)?)?, self.entries.get(after));
        match after {
            Some(after) => {
                let share = (time_s - before.0) / (after.0 - before.0);
                Some(before.1 + share * (after.1 - before.1))
            }
            None => (time_s == before.0).then_some(before.1),
        }
    }
}

/// One period with the supply in its middle.
#[derive(Clone, Copy)]
struct Period {
    supply_v: f64,
    period_s: f64,
}

/// The settings that a ramp stands for: its periods, ordered by supply, in stretches of equal numbers. A parabola through each
/// takes the ramp out of the mean and of the scatter.
#[must_use]
pub fn ramp_settings(name: &str, events: &[Event], log: &SupplyLog) -> Vec<Setting> {
    let mut periods: Vec<Period> = events
        .iter()
        .filter(|event| event.kind == EventKind::Firing)
        .filter_map(|event| {
            let period_s = event.period_s?;
            let supply_v = log.supply_v(event.time_s - 0.5 * period_s)?;
            Some(Period { supply_v, period_s })
        })
        .collect();
    periods.sort_by(|a, b| a.supply_v.total_cmp(&b.supply_v));
    let stretches = (periods.len() / FEWEST).clamp(1, STRETCHES);
    let length = periods.len().div_ceil(stretches).max(1);
    periods.chunks(length).filter(|chunk| chunk.len() >= FEWEST).map(|chunk| stretch(name, chunk)).collect()
}

fn stretch(name: &str, periods: &[Period]) -> Setting {
    let n = periods.len() as f64;
    let supply_v = periods.iter().map(|p| p.supply_v).sum::<f64>() / n;
    let reach_v = periods.iter().map(|p| (p.supply_v - supply_v).abs()).fold(f64::MIN_POSITIVE, f64::max);
    let basis = |p: &Period| {
        let x = (p.supply_v - supply_v) / reach_v;
        [1.0, x, x * x]
    };
    let sum = |of: &dyn Fn(&Period) -> f64| periods.iter().map(of).sum::<f64>();
    let matrix: Vec<Vec<f64>> = (0..3).map(|i| (0..3).map(|j| sum(&|p| basis(p)[i] * basis(p)[j])).collect()).collect();
    let right: Vec<f64> = (0..3).map(|i| sum(&|p| basis(p)[i] * p.period_s)).collect();
    // Without a ramp in the stretch the mean is what there is.
    let curve = solve(&matrix, &right).unwrap_or_else(|| vec![right[0] / n, 0.0, 0.0]);
    let rest = |p: &Period| p.period_s - basis(p).iter().zip(&curve).map(|(b, c)| b * c).sum::<f64>();
    let (period_s, scatter_s) = (curve[0], (sum(&|p| rest(p).powi(2)) / (n - 3.0)).sqrt());
    // The middle of a parabola is less certain than a mean, by a factor of 3/2 for even spacing.
    let period = Estimate::normal(period_s, 1.5 * scatter_s / n.sqrt());
    Setting {
        name: format!("{name} at {}", si(supply_v, "V", 4)),
        supply: Quantity::exact(supply_v),
        firing_rate_hz: Some(period.reciprocal()),
        period,
        scatter_s,
        size: None,
        left_out: None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_log_is_straight_between_its_entries_and_ends_where_they_end() {
        let log = SupplyLog::parse("time_s,supply_v\n0,8000\n\n10, 9000\n20,9000\n").unwrap();
        assert_eq!(log.supply_v(5.0), Some(8500.0));
        assert_eq!(log.supply_v(15.0), Some(9000.0));
        assert_eq!(log.supply_v(20.0), Some(9000.0));
        assert_eq!((log.supply_v(-0.1), log.supply_v(20.1)), (None, None));
    }

    #[test]
    fn a_wrong_line_is_named() {
        let error = |text: &str| SupplyLog::parse(text).unwrap_err().to_string();
        assert!(error("t,v\n1,2\n").starts_with("line 1"));
        assert!(error("").starts_with("line 1"));
        assert!(error("time_s,supply_v\n1,8000\n2;9000\n").starts_with("line 3"));
        assert!(error("time_s,supply_v\n1,8 kV\n").starts_with("line 2"));
        assert!(error("time_s,supply_v\n1,nan\n").starts_with("line 2"));
        assert!(error("time_s,supply_v\n1,8000\n1,9000\n").starts_with("line 3"));
        assert!(error("time_s,supply_v\n1,8000\n").contains("two or more"));
    }
}
