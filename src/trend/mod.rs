//! The history of a gap: has it changed, by more than weather and chance explain?
//!
//! Entries of a log go in, a [`Trend`] comes out: gap voltage reduced to standard air, the individuals and moving-range chart
//! ([`limits`]), cumulative sums for slow wear ([`cusum`]), the most probable step ([`change`]), the slope per hour of firing
//! ([`wear`]), and one sentence that says what to do. Reading and writing of logs is no business of this room.
//!
//! Every entry has passed the same bench description, so what is wrong with that shifts all alike; the charts look at the
//! scatter from entry to entry, never at the uncertainty of a single voltage.

pub mod advice;
pub mod change;
pub mod cusum;
pub mod date;
pub mod entry;
pub mod limits;
pub mod regression;
mod shown;
pub mod wear;
pub mod weather;

mod alarms;
mod beside;
mod points;

pub use advice::State;
pub use alarms::{Alarm, Chart};
pub use beside::Beside;
pub use date::Moment;
pub use entry::{Entry, LOG_FAMILY, LOG_FORMAT, LoggedBench, Weather};
pub use limits::Limits;
pub use points::{Charted, Point};
pub use wear::Wear;
pub use weather::{AirPart, Spacing};

use crate::estimate::Estimate;
use serde::{Deserialize, Serialize};

/// Name of the format.
pub const TREND_FORMAT: &str = "gaptone.trend/1";

/// Entries of the first stretch unless stated otherwise.
pub const REFERENCE: usize = 20;
/// Fewest entries from which limits are drawn.
pub const FEWEST: usize = 8;

/// Logs of a gap that does not change in which a step is told all the same, one in so many.
const CHANCE: f64 = 0.01;

/// What is asked of a log.
#[derive(Debug, Clone, Default)]
pub struct Options {
    /// What to chart; the gap voltage if absent, or the firing rate where no entry has a voltage.
    pub charted: Option<Charted>,
    /// Title of the bench whose entries count; that of the last entry if absent.
    pub title: Option<String>,
    /// Entries before this moment do not count.
    pub since: Option<Moment>,
    /// Entries of the first stretch.
    pub reference: Option<usize>,
    /// Stated limits, in the unit of what is charted.
    pub limits: Option<(f64, f64)>,
}

/// A step of the series.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ChangePoint {
    /// Index of the first entry after it.
    pub index: usize,
    /// Time of that entry.
    pub time: Moment,
    /// Earliest time of the 95 % interval.
    pub from: Moment,
    /// Latest time of it.
    pub to: Moment,
    /// Mean before.
    pub before: f64,
    /// Mean after.
    pub after: f64,
    /// After less before.
    pub difference: Estimate,
}

/// The history of a gap.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Trend {
    /// Always [`TREND_FORMAT`].
    pub format: String,
    /// Title of the bench.
    pub title: String,
    /// What is charted.
    pub charted: Charted,
    /// Its unit; empty for a share.
    pub unit: String,
    /// Entries on the chart.
    pub entries: usize,
    /// Limits; absent with too few entries.
    pub limits: Option<Limits>,
    /// Alarms of all charts, the earliest first.
    pub alarms: Vec<Alarm>,
    /// Moving ranges above their limit.
    pub wide_moving_ranges: usize,
    /// The most probable step, if the charts raised an alarm and it stands out of the scatter.
    pub change_point: Option<ChangePoint>,
    /// Change with the hours of firing.
    pub wear: Option<Wear>,
    /// What the air explains.
    pub air: Option<AirPart>,
    /// Spacing of the gap.
    pub spacing: Option<Spacing>,
    /// The figures that are not charted: reference and last value.
    pub beside: Vec<Beside>,
    /// State of the gap in one word.
    pub state: State,
    /// The sentence that says what to do.
    pub advice: String,
    /// What else a person should know.
    pub notes: Vec<String>,
    /// The entries on the chart, in the order of time.
    pub points: Vec<Point>,
}

/// Charts a log. Entries may come in any order.
#[must_use]
pub fn analyse(entries: &[Entry], options: &Options) -> Trend {
    let mut notes = Vec::new();
    let points::Series { title, charted, mut points, entries: used } = points::series(entries, options, &mut notes);
    let values: Vec<f64> = points.iter().map(|point| point.value).collect();
    let limits = first_stretch(&values, options, &mut notes);
    let mut alarms = Vec::new();
    let mut change_point = None;
    let mut wear = None;
    let mut wide_moving_ranges = 0;
    if let Some(limits) = &limits {
        alarms = alarms::find(&mut points, limits);
        wide_moving_ranges = points.iter().filter(|point| point.moving_range > Some(limits.moving_range_high)).count();
        let clear = change::clear(values.len(), CHANCE);
        let is_clear = |step: &change::Step| step.difference.value.abs() > clear * step.difference.u;
        let step = change::step(&values).filter(|step| !alarms.is_empty() && is_clear(step));
        wear = wear::wear(&points, &values, step.as_ref(), limits, points::has_hour_meter(&used));
        change_point = step.map(|step| at_its_time(&step, &points));
    }
    let air = weather::air_part(&points, &used, charted, change_point.as_ref());
    let spacing = weather::spacing(&points, &used, change_point.as_ref(), wear.as_ref());
    let beside = beside::beside(&points, charted, limits.as_ref());
    let (state, advice) = advice::advice(&advice::Facts {
        charted,
        points: &points,
        limits: limits.as_ref(),
        alarms: &alarms,
        change: change_point.as_ref(),
        wear: wear.as_ref(),
        air: air.as_ref(),
    });
    Trend {
        format: TREND_FORMAT.to_owned(),
        title,
        charted,
        unit: charted.unit().to_owned(),
        entries: points.len(),
        limits,
        alarms,
        wide_moving_ranges,
        change_point,
        wear,
        air,
        spacing,
        beside,
        state,
        advice,
        notes,
        points,
    }
}

/// Limits from the first stretch, or stated ones with the scatter of the first stretch.
fn first_stretch(values: &[f64], options: &Options, notes: &mut Vec<String>) -> Option<Limits> {
    if values.len() < FEWEST {
        return None;
    }
    let wanted = options.reference.unwrap_or(REFERENCE).max(FEWEST);
    if options.reference.is_some_and(|reference| reference > values.len()) {
        notes.push(format!("only {} entries are there for the first stretch", values.len()));
    }
    let limits = Limits::of(&values[..wanted.min(values.len())]);
    Some(match options.limits {
        Some((low, high)) => limits.stated(low, high),
        None => limits,
    })
}

fn at_its_time(step: &change::Step, points: &[Point]) -> ChangePoint {
    let time = |index: usize| points[index.min(points.len() - 1)].time;
    ChangePoint {
        index: step.at,
        time: time(step.at),
        // The change lies after the last entry before it.
        from: time(step.interval.0.saturating_sub(1)),
        to: time(step.interval.1),
        before: step.before,
        after: step.after,
        difference: step.difference,
    }
}
