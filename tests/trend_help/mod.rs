//! Made-up logs, and a table of what the charts do with them.

#![allow(dead_code, reason = "each test program uses a part")]

use gaptone::bench::Electrodes;
use gaptone::estimate::Estimate;
use gaptone::model::air::Air;
use gaptone::model::breakdown::level;
use gaptone::model::random::Random;
use gaptone::rhythm::{FiringCounts, Verdict};
use gaptone::trend::entry::Known;
use gaptone::trend::{Chart, Entry, LOG_FORMAT, LoggedBench, Moment, Options, State, analyse};

/// Weather of a made-up log.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Weather {
    /// Standard air.
    Standard,
    /// 20 ± 5 °C, 1005 ± 15 hPa, 35 to 65 %.
    Changing,
}

/// A made-up gap that is measured again and again.
#[derive(Debug, Clone, Copy)]
pub struct Gap {
    /// Standard deviation from entry to entry, relative.
    pub scatter: f64,
    /// Relative change of the voltage per entry.
    pub drift: f64,
    /// First entry after a step, and its relative size.
    pub step: Option<(usize, f64)>,
    /// Entry at which the step is repaired.
    pub until: Option<usize>,
    /// Weather.
    pub weather: Weather,
    /// Hours of firing from entry to entry.
    pub hours_each: f64,
}

impl Default for Gap {
    fn default() -> Self {
        Self { scatter: 0.005, drift: 0.0, step: None, until: None, weather: Weather::Standard, hours_each: 1.0 }
    }
}

impl Gap {
    /// Voltage in standard air at the first entry, V.
    pub const VOLTAGE_V: f64 = 7.1e3;
    const DIAMETER_M: f64 = 0.025;

    /// A log of it.
    pub fn entries(&self, count: usize, seed: u64) -> Vec<Entry> {
        let mut random = Random::seeded(seed);
        let standard = self.law(2.2e-3, &Air::default());
        (0..count)
            .map(|index| {
                let air = match self.weather {
                    Weather::Standard => Air::default(),
                    Weather::Changing => Air {
                        temperature_k: 293.15 + 10.0 * (random.uniform() - 0.5),
                        pressure_pa: 1005e2 + 30e2 * (random.uniform() - 0.5),
                        relative_humidity: 0.5 + 0.3 * (random.uniform() - 0.5),
                    },
                };
                let stands = self.until.is_none_or(|until| index < until);
                let step = self.step.filter(|(at, _)| index >= *at && stands).map_or(0.0, |(_, size)| size);
                let true_v = Self::VOLTAGE_V * (1.0 + self.drift * index as f64 + step);
                // For spheres the correction of the air does not depend on the spacing.
                let voltage_v = true_v * self.law(2.2e-3, &air) / standard * (1.0 + self.scatter * random.normal());
                self.entry(index, voltage_v, &air, &mut random)
            })
            .collect()
    }

    fn law(&self, spacing_m: f64, air: &Air) -> f64 {
        level(Electrodes::Spheres, Some(Self::DIAMETER_M), spacing_m, air).expect("within the law").voltage_v
    }

    fn entry(&self, index: usize, voltage_v: f64, air: &Air, random: &mut Random) -> Entry {
        let rate = 430.0 * (1.0 + 0.01 * random.normal());
        Entry {
            format: LOG_FORMAT.to_owned(),
            // Every second day from 2026-01-01 on.
            time: Moment(1_767_225_600 + 172_800 * index as i64),
            file: format!("run-{index}.wav"),
            verdict: Verdict::Steady,
            firings: FiringCounts { on_rhythm: 4300, missed: (5.0 * random.exponential()) as u64, extra: 0 },
            firing_time_s: 10.0,
            hour_meter_h: Some(100.0 + self.hours_each * index as f64),
            firing_rate_hz: Some(Estimate::normal(rate, 0.05)),
            period_jitter_s: Some(Estimate::normal(15e-6 * (1.0 + 0.02 * random.normal()), 2e-7)),
            gap_voltage_v: Some(Estimate::normal(voltage_v, 0.01 * voltage_v)),
            gap_voltage_spread_v: Some(Estimate::normal(20.0, 0.5)),
            bench: Some(LoggedBench {
                title: Some("invented".to_owned()),
                supply_v: Some(9200.0),
                electrodes: Some(Electrodes::Spheres),
                diameter_m: Some(Self::DIAMETER_M),
            }),
            air: gaptone::trend::Weather {
                temperature_k: Some(Known { value: air.temperature_k, u: 0.2 }),
                pressure_pa: Some(Known { value: air.pressure_pa, u: 50.0 }),
                humidity: Some(Known { value: air.relative_humidity, u: 0.02 }),
            },
        }
    }
}

/// Prints false alarms per 100 entries and delays, with a first stretch of 20 entries and changing weather.
pub fn figures() {
    const LOGS: u64 = 400;
    println!("in control, 120 entries, weather changing: per 100 entries after the first 20");
    for scatter in [0.005, 0.01] {
        let mut counts = [0.0; 3];
        let mut action = 0;
        for seed in 0..LOGS {
            let gap = Gap { scatter, weather: Weather::Changing, ..Gap::default() };
            let trend = analyse(&gap.entries(120, 1000 + seed), &Options::default());
            for alarm in trend.alarms.iter().filter(|alarm| alarm.first >= 20) {
                counts[usize::from(alarm.chart == Chart::Cusum)] += 1.0;
            }
            counts[2] += trend.points[20..]
                .iter()
                .filter(|p| p.moving_range > trend.limits.map(|l| l.moving_range_high))
                .count() as f64;
            action += u32::from(matches!(trend.state, State::Wearing | State::OutOfLimits | State::LastOutside));
        }
        let per_100 = counts.map(|count| count / LOGS as f64);
        println!(
            "  scatter {:.1} %: individuals {:.2} (published 0.27), CUSUM {:.2} (published 0.22), moving range {:.2} (0.92); last sentence asks for action in {:.1} % of logs",
            100.0 * scatter,
            per_100[0],
            per_100[1],
            per_100[2],
            100.0 * f64::from(action) / LOGS as f64
        );
    }
    println!("delay in entries after 20 or 60 good entries: mean of the first alarm that comes after the change");
    let cases = [("1 % step", Some(0.01), 0.0), ("3 % step", Some(0.03), 0.0), ("0.1 % per entry", None, 0.001)];
    for scatter in [0.005, 0.01] {
        for before in [20_usize, 60] {
            for (name, size, drift) in cases {
                delays(scatter, before, name, size, drift);
            }
        }
    }
}

fn delays(scatter: f64, before: usize, name: &str, size: Option<f64>, drift: f64) {
    const LOGS: u64 = 400;
    const LONGEST: usize = 200;
    let mut sums = [0.0; 3];
    let mut missed = 0;
    let mut used = 0.0;
    for seed in 0..LOGS {
        let gap = Gap { scatter, weather: Weather::Changing, step: size.map(|size| (before, size)), ..Gap::default() };
        let mut entries = gap.entries(before + LONGEST, 5000 + seed);
        for (index, entry) in entries.iter_mut().enumerate().skip(before) {
            let factor = 1.0 + drift * (index + 1 - before) as f64;
            entry.gap_voltage_v.as_mut().expect("a voltage").value *= factor;
        }
        let trend = analyse(&entries, &Options::default());
        let first = |chart: Chart| {
            trend
                .alarms
                .iter()
                .filter(|a| a.chart == chart && a.first + a.entries > before && a.side > 0)
                .map(|a| a.first.max(before))
                .min()
        };
        let delay = |first: Option<usize>| first.map_or(LONGEST, |first| first + 1 - before) as f64;
        let (single, sums_alarm) = (first(Chart::Individuals), first(Chart::Cusum));
        used += 1.0;
        missed += u32::from(single.is_none() && sums_alarm.is_none());
        sums[0] += delay(single);
        sums[1] += delay(sums_alarm);
        sums[2] += delay([single, sums_alarm].into_iter().flatten().min());
    }
    let [single, cusum, both] = sums.map(|sum| sum / used);
    println!(
        "  scatter {:.1} %, {before} before, {name:15}: individuals {single:6.1}, CUSUM {cusum:6.1}, either {both:6.1}; never within 200: {missed} of {LOGS}",
        100.0 * scatter
    );
}
