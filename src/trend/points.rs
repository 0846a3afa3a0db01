//! From entries to the series that is charted.

use super::date::Moment;
use super::entry::{Entry, HOUR_S};
use super::{Options, weather};
use crate::estimate::Estimate;
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// What is charted.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Charted {
    /// Gap voltage in standard air, V.
    GapVoltage,
    /// Firing rate, Hz.
    FiringRate,
    /// Period jitter as a share of the period.
    Jitter,
    /// Share of the firings that the audio does not show.
    Missed,
}

impl Charted {
    /// All of them.
    pub const ALL: [Self; 4] = [Self::GapVoltage, Self::FiringRate, Self::Jitter, Self::Missed];

    /// In words.
    #[must_use]
    pub fn words(self) -> &'static str {
        match self {
            Self::GapVoltage => "gap voltage",
            Self::FiringRate => "firing rate",
            Self::Jitter => "period jitter",
            Self::Missed => "missed share",
        }
    }

    /// Unit; empty for a share.
    #[must_use]
    pub fn unit(self) -> &'static str {
        match self {
            Self::GapVoltage => "V",
            Self::FiringRate => "/s",
            Self::Jitter | Self::Missed => "",
        }
    }

    /// The value of a point.
    #[must_use]
    pub fn of(self, point: &Point) -> Option<f64> {
        match self {
            Self::GapVoltage => point.standard_air_v,
            Self::FiringRate => point.firing_rate_hz,
            Self::Jitter => point.relative_jitter,
            Self::Missed => point.missed_share,
        }
    }
}

/// One entry on the chart.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Point {
    /// When.
    pub time: Moment,
    /// Name of the recording.
    pub file: String,
    /// Hours of firing by then: of the hour meter, or the sum of what was recorded.
    pub hours: f64,
    /// Supply setting, V.
    pub supply_v: Option<f64>,
    /// Gap voltage as measured, V.
    pub gap_voltage_v: Option<f64>,
    /// Gap voltage reduced to standard air, V.
    pub standard_air_v: Option<f64>,
    /// Density of the air over that of standard air, where temperature and pressure are known.
    pub air_density: Option<f64>,
    /// Spacing that the voltage implies, m.
    pub spacing_m: Option<Estimate>,
    /// Firings per second.
    pub firing_rate_hz: Option<f64>,
    /// Jitter over period.
    pub relative_jitter: Option<f64>,
    /// Missed over all firings.
    pub missed_share: Option<f64>,
    /// The charted value.
    pub value: f64,
    /// Its distance from the one before.
    pub moving_range: Option<f64>,
    /// Normal score against the good entries before it.
    pub score: Option<f64>,
    /// Upper cumulative sum, σ.
    pub cusum_high: f64,
    /// Lower cumulative sum, σ.
    pub cusum_low: f64,
    /// Side of the limits on which it lies: −1, 0 or 1.
    pub outside: i8,
}

/// The series with the entries that it came from, one for each point.
pub(super) struct Series<'a> {
    pub title: String,
    pub charted: Charted,
    pub points: Vec<Point>,
    pub entries: Vec<&'a Entry>,
}

/// True if every entry tells its hours.
pub(super) fn has_hour_meter(entries: &[&Entry]) -> bool {
    !entries.is_empty() && entries.iter().all(|entry| entry.hour_meter_h.is_some())
}

/// The series of a log.
pub(super) fn series<'a>(entries: &'a [Entry], options: &Options, notes: &mut Vec<String>) -> Series<'a> {
    let mut chosen: Vec<&Entry> =
        entries.iter().filter(|entry| options.since.is_none_or(|t| entry.time >= t)).collect();
    chosen.sort_by_key(|entry| entry.time);
    let title =
        options.title.clone().or_else(|| chosen.last().map(|entry| entry.title().to_owned())).unwrap_or_default();
    of_one_bench(&mut chosen, &title, notes);
    let has_voltage = chosen.iter().any(|entry| entry.gap_voltage_v.is_some());
    let charted = options.charted.unwrap_or(if has_voltage { Charted::GapVoltage } else { Charted::FiringRate });
    if charted == Charted::FiringRate && options.charted.is_none() && !chosen.is_empty() {
        notes.push(
            "no entry has a gap voltage (measure with --bench); the firing rate is charted, which follows the supply \
             setting too"
                .to_owned(),
        );
    }
    let mut reducer = weather::Reducer::default();
    let metered = has_hour_meter(&chosen);
    let mut recorded_h = 0.0;
    let mut points = Vec::with_capacity(chosen.len());
    let mut kept = Vec::with_capacity(chosen.len());
    let (mut silent, mut valueless) = (0_usize, 0_usize);
    for entry in chosen {
        let own_h = entry.firing_time_s.max(0.0) / HOUR_S;
        let hours = entry.hour_meter_h.filter(|_| metered).unwrap_or(recorded_h + 0.5 * own_h);
        recorded_h += own_h;
        let mut point = point(entry, hours, &mut reducer);
        match charted.of(&point).filter(|value| value.is_finite()) {
            Some(value) => {
                point.value = value;
                point.moving_range = points.last().map(|before: &Point| (value - before.value).abs());
                points.push(point);
                kept.push(entry);
            }
            None if entry.firing_rate_hz.is_none() => silent += 1,
            None => valueless += 1,
        }
    }
    let words = charted.words();
    left_out(silent, "in which no gap was heard", notes);
    left_out(
        valueless,
        &format!("without a {words} that can be charted (no bench, no rhythm, or air beyond the correction)"),
        notes,
    );
    if charted == Charted::GapVoltage {
        weather::notes(&kept, notes);
    }
    several_supplies(&points, charted, notes);
    Series { title, charted, points, entries: kept }
}

fn left_out(count: usize, which: &str, notes: &mut Vec<String>) {
    if count > 0 {
        notes.push(format!("left out: {count} {} {which}", if count == 1 { "entry" } else { "entries" }));
    }
}

fn of_one_bench(chosen: &mut Vec<&Entry>, title: &str, notes: &mut Vec<String>) {
    let mut others: BTreeMap<&str, usize> = BTreeMap::new();
    for entry in chosen.iter().filter(|entry| entry.title() != title) {
        *others.entry(entry.title()).or_default() += 1;
    }
    if others.is_empty() {
        return;
    }
    let name = |title: &str| if title.is_empty() { "no title".to_owned() } else { format!("\"{title}\"") };
    let list: Vec<String> = others.iter().map(|(title, count)| format!("{} ({count})", name(title))).collect();
    notes.push(format!(
        "charted: entries of the bench with {}; left out: {}; --title chooses",
        if title.is_empty() { "no title".to_owned() } else { format!("the title {}", name(title)) },
        list.join(", ")
    ));
    chosen.retain(|entry| entry.title() == title);
}

fn several_supplies(points: &[Point], charted: Charted, notes: &mut Vec<String>) {
    let supplies = || points.iter().filter_map(|point| point.supply_v);
    let (low, high) = supplies().fold((f64::INFINITY, 0.0_f64), |(low, high), v| (low.min(v), high.max(v)));
    if high > low * (1.0 + 1e-6) {
        let what = if charted == Charted::GapVoltage {
            "an error of the time constant then shifts the voltage from setting to setting; keep to one setting"
        } else {
            "the figure follows the setting; keep to one"
        };
        let (low, high) = (crate::bench::si(low, "V", 3), crate::bench::si(high, "V", 3));
        notes.push(format!("the supply was set from {low} to {high}: {what}"));
    }
}

fn point(entry: &Entry, hours: f64, reducer: &mut weather::Reducer) -> Point {
    let reduced = reducer.reduce(entry);
    Point {
        time: entry.time,
        file: entry.file.clone(),
        hours,
        supply_v: entry.bench.as_ref().and_then(|bench| bench.supply_v),
        gap_voltage_v: entry.gap_voltage_v.map(|voltage| voltage.value),
        standard_air_v: reduced.map(|reduced| reduced.standard_air_v),
        air_density: entry.air.gives_density().then(|| entry.air.air().relative_density()),
        spacing_m: reduced.and_then(|reduced| reduced.spacing_m),
        firing_rate_hz: entry.firing_rate_hz.map(|rate| rate.value),
        relative_jitter: entry.relative_jitter(),
        missed_share: entry.missed_share(),
        value: f64::NAN,
        moving_range: None,
        score: None,
        cusum_high: 0.0,
        cusum_low: 0.0,
        outside: 0,
    }
}
