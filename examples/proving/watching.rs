//! How the watch does: its figures on recordings of every kind, and how soon it notices that something has changed.

use crate::case::{Answer, Case, Truth};
use crate::firings::{Plan, Scatter, Strike, strikes};
use crate::random::Dice;
use crate::scene::Scene;
use gaptone::watch::{Changed, Glance, Options, State, Watch};
use std::time::Instant;

/// Blocks in which audio comes, s, and time between glances, in blocks.
const BLOCK_S: f64 = 0.05;
const GLANCE_BLOCKS: usize = 20;
/// A rate this far off is wrong.
const WRONG: f64 = 0.02;

/// What a watch made of a recording.
pub struct Watched {
    kind: &'static str,
    seed: u64,
    audio_s: f64,
    cpu_s: f64,
    /// Relative errors of the rates told, and whether their intervals hold the truth.
    lines: Vec<(f64, bool)>,
    first_s: Option<f64>,
    changes: usize,
    agrees: Option<bool>,
}

/// Pushes samples in blocks and takes a glance each second.
fn watch(samples: &[f32], rate_hz: u32, mut take: impl FnMut(Glance)) -> Watch {
    let mut watch = Watch::new(rate_hz, Options::default());
    for (i, block) in samples.chunks((BLOCK_S * f64::from(rate_hz)) as usize).enumerate() {
        watch.push(block);
        if (i + 1) % GLANCE_BLOCKS == 0 {
            take(watch.glance());
        }
    }
    watch
}

/// Watches a case.
pub fn score(case: &Case, verbose: bool) -> Watched {
    let truth = match &case.answer {
        Answer::Gap(truth) => Some(truth),
        _ => None,
    };
    let mut found = Watched {
        kind: case.kind,
        seed: case.seed,
        audio_s: case.duration_s(),
        cpu_s: 0.0,
        lines: Vec::new(),
        first_s: None,
        changes: 0,
        agrees: None,
    };
    let start = Instant::now();
    let watch = watch(&case.samples, case.sample_rate_hz, |glance| {
        found.changes +=
            glance.changes.iter().filter(|c| !matches!(c.what, Changed::Began | Changed::SecondTrain { .. })).count();
        let Some(rate) = glance.reading.firing_rate_hz.filter(|_| glance.state == State::Firing) else { return };
        found.first_s.get_or_insert(glance.time_s);
        let true_hz = truth.and_then(|truth| local_rate_hz(truth, glance.since_s.unwrap_or(0.0), glance.time_s));
        let Some(true_hz) = true_hz else {
            found.lines.push((f64::INFINITY, false));
            return;
        };
        found.lines.push(((rate.value / true_hz - 1.0).abs(), (rate.low..=rate.high).contains(&true_hz)));
        if verbose && (rate.value / true_hz - 1.0).abs() > 0.005 {
            println!(
                "  {} {} at {:.0} s: {:.3} instead of {true_hz:.3}",
                case.kind, case.seed, glance.time_s, rate.value
            );
        }
    });
    let summary = watch.finish();
    found.cpu_s = start.elapsed().as_secs_f64();
    let mut measurer = gaptone::measure::Measurer::new(case.sample_rate_hz, gaptone::measure::Options::default());
    measurer.push(&case.samples);
    let measured = measurer.finish().reading.firing_rate_hz;
    found.agrees = match (summary.reading.firing_rate_hz, measured) {
        (Some(a), Some(b)) => Some((a.value - b.value).abs() <= 0.1 * b.u),
        (None, None) => None,
        _ => Some(false),
    };
    found
}

/// Rate of the process; of a drifting one what it did between two times, s.
fn local_rate_hz(truth: &Truth, from_s: f64, to_s: f64) -> Option<f64> {
    if let Some(period_s) = truth.process_period_s {
        return Some(1.0 / period_s);
    }
    let from = truth.times_s.partition_point(|t| *t < from_s - 2e-3);
    let to = truth.times_s.partition_point(|t| *t < to_s);
    let of = truth.times_s.get(from..to).filter(|of| of.len() > 3)?;
    // Over a silence between, the rate is that of the firing.
    let mut periods: Vec<f64> = of.windows(2).map(|w| w[1] - w[0]).collect();
    let longest = 4.0 / truth.rate_hz;
    periods.retain(|p| *p < longest);
    Some(periods.len() as f64 / periods.iter().sum::<f64>())
}

/// Prints a table by kind.
pub fn print(all: &[Watched]) {
    println!("kind         n   lines  within %  median %  wrong   first s  changes  agrees  ms/s");
    let mut kinds: Vec<&str> = all.iter().map(|w| w.kind).collect();
    kinds.dedup();
    for kind in kinds {
        line(kind, &all.iter().filter(|w| w.kind == kind).collect::<Vec<_>>());
    }
    line("all", &all.iter().collect::<Vec<_>>());
}

fn line(kind: &str, of: &[&Watched]) {
    let lines: Vec<(f64, bool)> = of.iter().flat_map(|w| w.lines.iter().copied()).collect();
    let within = lines.iter().filter(|l| l.1).count() as f64 / lines.len().max(1) as f64;
    let mut errors: Vec<f64> = lines.iter().map(|l| l.0).collect();
    let wrong = errors.iter().filter(|e| **e > WRONG).count();
    let first: Vec<f64> = of.iter().filter_map(|w| w.first_s).collect();
    let agrees: Vec<bool> = of.iter().filter_map(|w| w.agrees).collect();
    let cost = 1e3 * of.iter().map(|w| w.cpu_s).sum::<f64>() / of.iter().map(|w| w.audio_s).sum::<f64>();
    println!(
        "{kind:<10} {:>3} {:>7} {:>9.1} {:>9.3} {wrong:>6} {:>9.1} {:>8} {:>3}/{:<3} {cost:>6.2}",
        of.len(),
        lines.len(),
        100.0 * within,
        100.0 * quantile(&mut errors, 0.5),
        quantile(&mut first.clone(), 0.5),
        of.iter().map(|w| w.changes).sum::<usize>(),
        agrees.iter().filter(|a| **a).count(),
        agrees.len(),
    );
    if wrong > 0 && kind != "all" {
        let seeds: Vec<String> =
            of.iter().filter(|w| w.lines.iter().any(|l| l.0 > WRONG)).map(|w| w.seed.to_string()).collect();
        println!("           wrong in {}", seeds.join(", "));
    }
}

fn quantile(values: &mut [f64], q: f64) -> f64 {
    values.sort_by(f64::total_cmp);
    let at = (q * values.len() as f64) as usize;
    values.get(at.min(values.len().saturating_sub(1))).copied().unwrap_or(f64::NAN)
}

/// A kind of change: what happens, and what the watch should say.
struct Event {
    name: &'static str,
    make: fn(&mut Dice, f64) -> (Vec<Strike>, f64),
    is_noticed: fn(&Changed) -> bool,
}

/// Length of a recording with a change, and when it happens, s.
const LENGTH_S: f64 = 24.0;
const AT_S: (f64, f64) = (10.0, 12.0);

const EVENTS: &[Event] = &[
    Event { name: "step", make: step, is_noticed: |c| matches!(c, Changed::Rate { .. } | Changed::Began) },
    Event { name: "small-step", make: small_step, is_noticed: |c| matches!(c, Changed::Rate { .. }) },
    Event { name: "slow-step", make: slow_step, is_noticed: |c| matches!(c, Changed::Rate { .. } | Changed::Began) },
    Event { name: "start", make: start, is_noticed: |c| matches!(c, Changed::Began | Changed::Rate { .. }) },
    Event { name: "slow-start", make: slow_start, is_noticed: |c| matches!(c, Changed::Began | Changed::Rate { .. }) },
    Event { name: "stop", make: stop, is_noticed: |c| matches!(c, Changed::Stopped) },
    Event { name: "slow-stop", make: slow_stop, is_noticed: |c| matches!(c, Changed::Stopped) },
    Event { name: "second", make: second, is_noticed: |c| matches!(c, Changed::SecondTrain { .. }) },
    Event { name: "lock", make: lock, is_noticed: |c| matches!(c, Changed::Locked { .. }) },
    Event { name: "none", make: steady, is_noticed: |_| false },
];

fn plan(dice: &mut Dice, slowest_hz: f64, fastest_hz: f64) -> Plan {
    Plan {
        period_s: 1.0 / dice.log_uniform(slowest_hz, fastest_hz),
        jitter: dice.log_uniform(0.003, 0.05),
        duration_s: LENGTH_S,
    }
}

fn between(dice: &mut Dice, plan: Plan, from_s: f64, to_s: f64) -> Vec<f64> {
    plan.times_between(dice, Scatter::Normal, from_s, to_s)
}

fn stepped(dice: &mut Dice, rates_hz: (f64, f64), share: f64) -> (Vec<Strike>, f64) {
    let first = plan(dice, rates_hz.0, rates_hz.1);
    let at_s = dice.uniform(AT_S.0, AT_S.1);
    let mut times = between(dice, first, 0.1 * first.period_s, at_s);
    let second = Plan { period_s: first.period_s * (1.0 + dice.sign() * share), ..first };
    let last_s = times.last().copied().unwrap_or(0.0);
    times.extend(between(dice, second, last_s + second.period_s, LENGTH_S));
    (strikes(dice, &times, 1.0), at_s)
}

fn step(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    let share = dice.log_uniform(0.03, 0.4);
    stepped(dice, (20.0, 1000.0), share)
}

fn small_step(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    let share = dice.log_uniform(0.01, 0.03);
    stepped(dice, (100.0, 1000.0), share)
}

fn slow_step(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    let share = dice.log_uniform(0.1, 0.4);
    stepped(dice, (4.0, 20.0), share)
}

fn started(dice: &mut Dice, rates_hz: (f64, f64)) -> (Vec<Strike>, f64) {
    let plan = plan(dice, rates_hz.0, rates_hz.1);
    let at_s = dice.uniform(AT_S.0, AT_S.1);
    let times = between(dice, plan, at_s, LENGTH_S);
    (strikes(dice, &times, 1.0), at_s)
}

fn start(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    started(dice, (20.0, 1000.0))
}

fn slow_start(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    started(dice, (1.5, 10.0))
}

fn stopped(dice: &mut Dice, rates_hz: (f64, f64)) -> (Vec<Strike>, f64) {
    let plan = plan(dice, rates_hz.0, rates_hz.1);
    let at_s = dice.uniform(AT_S.0, AT_S.1);
    let times = between(dice, plan, 0.1 * plan.period_s, at_s);
    let last_s = times.last().copied().unwrap_or(at_s);
    (strikes(dice, &times, 1.0), last_s)
}

fn stop(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    stopped(dice, (20.0, 1000.0))
}

fn slow_stop(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    stopped(dice, (2.0, 10.0))
}

fn second(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    let first = plan(dice, 30.0, 400.0);
    let other = Plan { period_s: first.period_s * dice.uniform(1.2, 3.0), ..plan(dice, 10.0, 20.0) };
    let at_s = dice.uniform(AT_S.0, AT_S.1);
    let times = between(dice, first, 0.1 * first.period_s, LENGTH_S);
    let mut all = strikes(dice, &times, 1.0);
    let times = between(dice, other, at_s, LENGTH_S);
    let size = dice.uniform(0.4, 0.8);
    all.extend(strikes(dice, &times, size));
    (all, at_s)
}

fn lock(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    let line_hz = dice.pick(&[100.0, 120.0]) * dice.pick(&[1.0, 2.0]);
    let first = Plan { period_s: (1.0 + dice.sign() * dice.uniform(0.005, 0.03)) / line_hz, ..plan(dice, 10.0, 20.0) };
    let at_s = dice.uniform(AT_S.0, AT_S.1);
    let mut times = between(dice, first, 0.1 * first.period_s, at_s);
    let second = Plan { period_s: 1.0 / line_hz, jitter: 0.0, duration_s: LENGTH_S };
    let last_s = times.last().copied().unwrap_or(0.0);
    // In step with the mains: each firing has its own small error, which does not add up.
    let exact = between(dice, second, last_s + second.period_s, LENGTH_S);
    times.extend(exact.iter().map(|t| t + 5e-4 * second.period_s * dice.normal()));
    (strikes(dice, &times, 1.0), at_s)
}

fn steady(dice: &mut Dice, _: f64) -> (Vec<Strike>, f64) {
    let plan = plan(dice, 20.0, 1000.0);
    let times = between(dice, plan, 0.1 * plan.period_s, LENGTH_S);
    (strikes(dice, &times, 1.0), LENGTH_S)
}

/// What a watch made of a change.
struct Reaction {
    after_s: Option<f64>,
    /// Changes told that did not happen.
    false_ones: usize,
    /// Firings between the change and its notice.
    rate_hz: f64,
}

/// Prints how soon changes are noticed.
pub fn reactions(names: &str, seeds: std::ops::Range<u64>, verbose: bool) {
    println!("change        n  noticed  median s   90 %   95 %    max s  >2 s and >10 firings  false");
    for event in EVENTS.iter().filter(|event| names == "all" || names.split(',').any(|name| name == event.name)) {
        let all: Vec<Reaction> = seeds.clone().map(|seed| react(event, seed, verbose)).collect();
        let mut after: Vec<f64> = all.iter().filter_map(|r| r.after_s).collect();
        let late = all.iter().filter(|r| r.after_s.is_some_and(|s| s > 2.0 && s * r.rate_hz > 11.0)).count();
        println!(
            "{:<11} {:>3} {:>8} {:>9.2} {:>6.2} {:>6.2} {:>8.2} {late:>22} {:>6}",
            event.name,
            all.len(),
            after.len(),
            quantile(&mut after, 0.5),
            quantile(&mut after, 0.9),
            quantile(&mut after, 0.95),
            quantile(&mut after, 1.0),
            all.iter().map(|r| r.false_ones).sum::<usize>()
        );
    }
}

fn react(event: &Event, seed: u64, verbose: bool) -> Reaction {
    let mut dice = Dice::new(event.name, seed);
    let (strikes, at_s) = (event.make)(&mut dice, LENGTH_S);
    let behind = strikes.iter().filter(|s| s.time_s > at_s).count() as f64 / (LENGTH_S - at_s).max(1.0);
    let scene = Scene::ordinary(&mut dice, LENGTH_S, strikes);
    let samples = scene.render(&mut dice);
    let mut changes = Vec::new();
    let _ = watch(&samples, scene.recorder.sample_rate_hz, |glance| changes.extend(glance.changes));
    let noticed = changes.iter().find(|c| c.noticed_s > at_s && (event.is_noticed)(&c.what));
    let is_expected = |c: &&gaptone::watch::Change| {
        let first = matches!(c.what, Changed::Began) && c.time_s < 3.0;
        let about = c.noticed_s > at_s && c.noticed_s < at_s + 4.0;
        first || about || (event.is_noticed)(&c.what) && c.noticed_s > at_s
    };
    let false_ones: Vec<_> = changes.iter().filter(|c| !is_expected(c)).collect();
    if verbose && (noticed.is_none_or(|c| c.noticed_s > at_s + 2.0) || !false_ones.is_empty()) {
        println!("  {} {seed} at {at_s:.2} s, {behind:.1} /s behind it: {changes:?}", event.name);
    }
    Reaction { after_s: noticed.map(|c| c.noticed_s - at_s), false_ones: false_ones.len(), rate_hz: behind }
}
