//! Benches, readings and events for the tests of the gap voltage.
#![allow(dead_code, reason = "every test binary uses another part of it")]

use gaptone::bench::{Bench, Quantity, Tolerance};
use gaptone::estimate::Estimate;
use gaptone::firing::{Event, EventKind};
use gaptone::model::charging::Circuit;
use gaptone::model::firings::{Faults, GapLaw, Plan, Rhythm, Start, Train, simulate};
use gaptone::model::random::Random;
use gaptone::rhythm::{FiringCounts, Reading, Stretch, Verdict};
use gaptone::voltage::{VoltageMeter, VoltageResult};

pub fn standard(value: f64, u: f64) -> Option<Quantity> {
    Some(Quantity { value, tolerance: Tolerance::Standard(u) })
}

pub fn exact(value: f64) -> Option<Quantity> {
    Some(Quantity::exact(value))
}

/// An exact bench; residual voltage and conduction time stated.
pub fn bench(supply_v: f64, resistance_ohm: f64, capacitance_f: f64, residual_v: f64) -> Bench {
    let mut bench = Bench::default();
    bench.supply.voltage = exact(supply_v);
    bench.charging.resistance = exact(resistance_ohm);
    bench.charging.capacitance = exact(capacitance_f);
    bench.gap.residual_voltage = exact(residual_v);
    bench.gap.conduction_time = exact(0.0);
    bench
}

pub fn reading(period: Estimate) -> Reading {
    Reading {
        verdict: Verdict::Steady,
        firings: FiringCounts { on_rhythm: 1000, missed: 0, extra: 0 },
        firing_rate_hz: Some(period.reciprocal()),
        period_s: Some(period),
        ..Reading::none(String::new())
    }
}

pub fn measure(bench: &Bench, reading: &Reading) -> VoltageResult {
    VoltageMeter::new(bench, None).unwrap().finish(reading)
}

/// Events and reading of a train as a perfect analyzer would give them, with timing noise.
pub fn analyse(train: &Train, timing_s: f64, seed: u64) -> (Vec<Event>, Reading) {
    let mut noise = Random::seeded(seed);
    let mut last: Option<f64> = None;
    let mut missed = 0;
    let events: Vec<Event> = train
        .firings
        .iter()
        .map(|firing| {
            let time_s = firing.time_s + timing_s * noise.normal();
            let period_s = match firing.kind {
                EventKind::Firing => last.replace(time_s).map(|last| time_s - last),
                EventKind::Missed => {
                    missed += 1;
                    last = None;
                    None
                }
                EventKind::Extra => None,
            };
            Event { time_s, kind: firing.kind, size: 1.0, timing_u_s: timing_s, period_s }
        })
        .collect();
    let truth = &train.realised;
    let n = truth.firings as f64;
    let jitter = truth.period_jitter_s.unwrap();
    let around = |value: f64, u: f64| Some(Estimate::normal(value, u));
    let (first, last) = (train.firings[0].time_s, train.firings.last().unwrap().time_s);
    let reading = Reading {
        firings: FiringCounts { on_rhythm: truth.firings as u64 - missed, missed, extra: 0 },
        period_jitter_s: around(jitter, jitter / (2.0 * n).sqrt()),
        drift_per_s: around(
            truth.drift_per_s.unwrap(),
            jitter * truth.firing_rate_hz.unwrap() * 12f64.sqrt() / (n.sqrt() * (last - first)),
        ),
        timing_noise_s: around(timing_s, 0.1 * timing_s),
        stretches: vec![Stretch { from_s: first, to_s: last }],
        ..reading(Estimate::normal(truth.period_s.unwrap(), jitter / n.sqrt()))
    };
    (events, reading)
}

pub fn voltage_of(bench: &Bench, events: &[Event], reading: &Reading) -> VoltageResult {
    let mut meter = VoltageMeter::new(bench, None).unwrap();
    for event in events {
        meter.push(event);
    }
    meter.finish(reading)
}

pub struct Case {
    pub bench: Bench,
    pub train: Train,
}

/// A random bench with a random gap: supply 1.03 to 5 times the gap voltage.
pub fn random_case(number: u64, most_spread: f64, faults: &Faults) -> Case {
    let mut random = Random::stream(number, 77);
    let gap_v = 1e3 * 20f64.powf(random.uniform());
    let supply_v = gap_v * (1.03 + 4.0 * random.uniform().powi(2));
    let rate = 10f64.powf(0.7 + 2.5 * random.uniform());
    let residual_v = if random.uniform() < 0.5 { 0.0 } else { gap_v * 0.1 * random.uniform() };
    let rc = 1.0 / (rate * ((supply_v - residual_v) / (supply_v - gap_v)).ln());
    let capacitance = 10f64.powf(-9.0 + 2.0 * random.uniform());
    let bench = bench(supply_v, rc / capacitance, capacitance, residual_v);
    let headroom = (supply_v / gap_v - 1.0) / 4.0;
    let spread = (0.001 * 30f64.powf(random.uniform())).min(most_spread).min(headroom);
    let memory = if random.uniform() < 0.3 { 0.6 } else { 0.0 };
    let drift_per_s = if random.uniform() < 0.3 { 0.008 * headroom.min(1.0) } else { 0.0 };
    let gap = GapLaw { spread, memory, drift_per_s, ..GapLaw::steady(gap_v) };
    let rhythm = Rhythm::Bench { circuit: Circuit::from_bench(&bench, None).unwrap(), gap };
    let faults = Faults { extra_delay_s: 0.3 / rate, extra_size: 0.5, ..faults.clone() };
    let train = simulate(&Plan { rhythm, faults, start: Start::Running, duration_s: 10.0, seed: number }).unwrap();
    Case { bench, train }
}
