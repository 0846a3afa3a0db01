//! The state of the gap, and the sentence that says what to do.

use super::wear::Shape;
use super::{AirPart, Alarm, ChangePoint, Chart, Charted, FEWEST, Limits, Point, Wear};
use crate::bench::{si, signed, with_uncertainty};
use serde::{Deserialize, Serialize};

/// State of the gap at the last entry.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum State {
    /// Too few entries to say.
    TooFew,
    /// No alarm stands and no slope is sure.
    WithinLimits,
    /// No alarm stands, but a slope is sure.
    Drifting,
    /// The last entry alone lies beyond the limits.
    LastOutside,
    /// An alarm stands, and a steady slope explains it.
    Wearing,
    /// An alarm stands.
    OutOfLimits,
}

/// What the sentence is made from.
pub(super) struct Facts<'a> {
    pub charted: Charted,
    pub points: &'a [Point],
    pub limits: Option<&'a Limits>,
    pub alarms: &'a [Alarm],
    pub change: Option<&'a ChangePoint>,
    pub wear: Option<&'a Wear>,
    pub air: Option<&'a AirPart>,
}

/// State and sentence.
pub(super) fn advice(facts: &Facts) -> (State, String) {
    let Some(limits) = facts.limits else {
        let entries = facts.points.len();
        let more = FEWEST.saturating_sub(entries);
        return (
            State::TooFew,
            format!("too few entries for limits: {entries} of {FEWEST}; log {more} more measurements"),
        );
    };
    let standing = |chart: Chart| facts.alarms.iter().find(|alarm| alarm.stands && alarm.chart == chart);
    let sums = standing(Chart::Cusum);
    let single = standing(Chart::Individuals);
    let wear = facts.wear.filter(|wear| wear.sure);
    match (sums, single) {
        (None, Some(alarm)) if alarm.entries == 1 => (
            State::LastOutside,
            format!("the last entry lies {} the limits: measure again before you act", beyond(alarm.side)),
        ),
        (None, None) => match wear.filter(|wear| wear.shape == Shape::Line) {
            Some(wear) => (State::Drifting, drifting(facts, wear)),
            None => (State::WithinLimits, "within limits: nothing to do".to_owned()),
        },
        (sums, single) => {
            let since = [sums, single].into_iter().flatten().min_by_key(|alarm| alarm.first);
            out(facts, limits, since, wear)
        }
    }
}

fn beyond(side: i8) -> &'static str {
    if side > 0 { "above" } else { "below" }
}

/// A figure of what is charted, with unit.
pub(crate) fn amount(charted: Charted, value: f64, digits: usize) -> String {
    match charted {
        Charted::GapVoltage | Charted::FiringRate => si(value, charted.unit(), digits),
        Charted::Jitter | Charted::Missed => format!("{:.3} %", 100.0 * value),
    }
}

fn rate_of_wear(charted: Charted, wear: &Wear) -> String {
    let (value, u) = (wear.per_hour.value, wear.per_hour.u);
    let text = match charted {
        Charted::GapVoltage | Charted::FiringRate => with_uncertainty(value, u, charted.unit()),
        Charted::Jitter | Charted::Missed => with_uncertainty(100.0 * value, 100.0 * u, "%"),
    };
    let recorded = if wear.hour_meter { "" } else { " recorded" };
    format!("{text} per hour of{recorded} firing")
}

fn drifting(facts: &Facts, wear: &Wear) -> String {
    let drift = rate_of_wear(facts.charted, wear);
    let when = match wear.hours_to_limit {
        Some((hours, earliest, latest)) => {
            let latest = latest.map_or("never".to_owned(), |latest| format!("{} h", short(latest)));
            format!("reaches the limit in {} h of firing ({} h to {latest})", short(hours), short(earliest))
        }
        None => "the fit has passed the limit".to_owned(),
    };
    format!(
        "within limits, but the {} changes by {drift} and {when}: plan to reset the gap before then",
        facts.charted.words()
    )
}

/// Two significant digits.
fn short(hours: f64) -> String {
    si(hours, "", 2).trim().to_owned()
}

fn out(facts: &Facts, limits: &Limits, since: Option<&Alarm>, wear: Option<&Wear>) -> (State, String) {
    let side = since.map_or(0, |alarm| alarm.side);
    let words = facts.charted.words();
    let line = wear.filter(|wear| wear.shape == Shape::Line && wear.per_hour.value.signum() == f64::from(side));
    if let Some(wear) = line {
        let when = match wear.hours_to_limit {
            Some((hours, ..)) => format!("it reaches the limit in {} h of firing", short(hours)),
            None => "it has passed the limit".to_owned(),
        };
        let text = format!("wear of {}; {when}: {}", rate_of_wear(facts.charted, wear), remedy(facts.charted, side));
        return (State::Wearing, text);
    }
    let day = match facts.change {
        Some(change) if change.from == change.to => change.time.day(),
        Some(change) => format!("{} (95 %: {} to {})", change.time.day(), change.from.day(), change.to.day()),
        None => since.map_or_else(String::new, |alarm| alarm.since.day()),
    };
    let size = facts.change.map_or_else(String::new, |change| {
        let percent = |estimate: f64| signed(100.0 * estimate / limits.centre, 2);
        let difference = &change.difference;
        format!(
            ": the {words} is {} % off ({} .. {} %)",
            percent(difference.value),
            percent(difference.low),
            percent(difference.high)
        )
    });
    let air = facts
        .air
        .and_then(|air| air.change_by_air)
        .map_or_else(String::new, |by_air| format!(", after {} % that the air explains", signed(100.0 * by_air, 2)));
    (State::OutOfLimits, format!("out of limits since {day}{size}{air}; {}", remedy(facts.charted, side)))
}

fn remedy(charted: Charted, side: i8) -> &'static str {
    match (charted, side > 0) {
        (Charted::GapVoltage, true) => {
            "look for worn or moved electrodes and for a changed supply or charging part, then reset the gap and begin a new stretch \
             with --since"
        }
        (Charted::GapVoltage, false) => {
            "look for dirt, a burr or electrodes that moved together and for a changed supply or charging part, then begin a new stretch \
             with --since"
        }
        (Charted::FiringRate, _) => "look at supply, charging parts and gap, then begin a new stretch with --since",
        (Charted::Jitter, _) => "look for dirty or pitted electrodes and ripple of the supply",
        (Charted::Missed, _) => "look at the receiver and its place, and whether the gap misses firings",
    }
}
