//! Alarms of the two charts.

use super::date::Moment;
use super::{Limits, Point, cusum};
use serde::{Deserialize, Serialize};

/// Which chart.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Chart {
    /// Single entries beyond the limits.
    Individuals,
    /// Cumulative sum beyond its decision interval.
    Cusum,
}

/// Entries in a row that a chart calls out of control.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Alarm {
    /// The chart.
    pub chart: Chart,
    /// 1 if the value is too high, −1 if it is too low.
    pub side: i8,
    /// Index of the first entry.
    pub first: usize,
    /// Its time.
    pub since: Moment,
    /// Number of entries from the first to the last out of control.
    pub entries: usize,
    /// True if it stands at the last entry of the log.
    pub stands: bool,
}

/// Puts scores and sums into the points and gives the alarms, the earliest first.
pub(super) fn find(points: &mut [Point], limits: &Limits) -> Vec<Alarm> {
    let mut chart = cusum::Cusum::default();
    let mut sums = Vec::with_capacity(points.len());
    for point in points.iter_mut() {
        let step = chart.push(point.value);
        (point.score, point.cusum_high, point.cusum_low) = (step.score, step.high, step.low);
        point.outside = limits.side(point.value);
        sums.push(step.alarm());
    }
    let outside: Vec<i8> = points.iter().map(|point| point.outside).collect();
    let mut alarms = in_a_row(Chart::Individuals, &outside, points, |_, _| false);
    // A sum that crosses its interval again before it was at zero is the same alarm.
    let same = |side: i8, between: std::ops::Range<usize>| {
        let sum = |point: &Point| if side > 0 { point.cusum_high } else { point.cusum_low };
        points[between].iter().all(|point| sum(point) > 0.0)
    };
    alarms.extend(in_a_row(Chart::Cusum, &sums, points, same));
    alarms.sort_by_key(|alarm| alarm.first);
    alarms
}

fn in_a_row(
    chart: Chart,
    sides: &[i8],
    points: &[Point],
    same: impl Fn(i8, std::ops::Range<usize>) -> bool,
) -> Vec<Alarm> {
    let mut found: Vec<Alarm> = Vec::new();
    for (index, side) in sides.iter().enumerate().filter(|(_, side)| **side != 0) {
        match found.last_mut() {
            Some(last)
                if last.side == *side
                    && (last.first + last.entries == index || same(*side, last.first + last.entries..index)) =>
            {
                last.entries = index + 1 - last.first;
            }
            _ => found.push(Alarm {
                chart,
                side: *side,
                first: index,
                since: points[index].time,
                entries: 1,
                stands: false,
            }),
        }
    }
    if let Some(last) = found.last_mut() {
        last.stands = last.first + last.entries == sides.len();
    }
    found
}
