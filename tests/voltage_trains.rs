//! The gap voltage of whole trains: simulated trains with known truth, and a general circuit simulator.

mod circuit_table;
mod voltage_help;

use circuit_table::rows;
use gaptone::bench::Quantity;
use gaptone::estimate::Estimate;
use gaptone::model::charging::Circuit;
use gaptone::model::firings::{Faults, GapLaw, Plan, Rhythm, Start, simulate};
use gaptone::rhythm::{FiringCounts, MainsJitter, Reading};
use gaptone::voltage::VoltageResult;
use voltage_help::{analyse, bench, exact, measure, random_case, reading, voltage_of};

/// Relative errors of mean and spread over many random benches, sorted, and how often the intervals hold the truth.
struct Score {
    mean: Vec<f64>,
    spread: Vec<f64>,
    mean_covered: usize,
    spread_covered: usize,
}

fn score(cases: u64, noise: f64) -> Score {
    let faults = Faults { missed: 0.08, extra: 0.05, ..Faults::none() };
    let mut score = Score { mean: Vec::new(), spread: Vec::new(), mean_covered: 0, spread_covered: 0 };
    for number in 0..cases {
        let case = random_case(number, 0.05, &faults);
        let truth = case.train.realised;
        let (events, reading) = analyse(&case.train, noise * truth.period_jitter_s.unwrap(), number);
        let result = voltage_of(&case.bench, &events, &reading);
        let (voltage, spread) = (result.gap_voltage_v.unwrap(), result.gap_voltage_spread_v.unwrap());
        let (true_v, true_spread_v) = (truth.gap_voltage_v.unwrap(), truth.gap_voltage_spread_v.unwrap());
        score.mean.push((voltage.value / true_v - 1.0).abs());
        score.spread.push((spread.value / true_spread_v - 1.0).abs());
        score.mean_covered += usize::from(voltage.low <= true_v && true_v <= voltage.high);
        score.spread_covered += usize::from(spread.low <= true_spread_v && true_spread_v <= spread.high);
    }
    score.mean.sort_by(f64::total_cmp);
    score.spread.sort_by(f64::total_cmp);
    score
}

#[test]
fn the_realised_gap_voltage_and_its_spread_come_back_at_any_timing_noise() {
    /// Largest relative error of the mean: the job asks for 1 %, the law allows far less.
    const MEAN: f64 = 0.003;
    /// Relative error of the spread that nine of ten stay under; benches at 1.03 times the gap voltage are among them.
    const SPREAD_90: f64 = 0.03;
    for noise in [0.0, 0.3, 1.0, 3.0, 10.0] {
        let cases = 200;
        let score = score(cases, noise);
        let at = |sorted: &[f64], share: f64| sorted[((cases - 1) as f64 * share) as usize];
        println!(
            "noise/jitter {noise}: mean median {:.1e} 97 % {:.1e} largest {:.1e}, held {}; spread median {:.1e} 90 % {:.1e} largest {:.1e}, held {}; of {cases}",
            at(&score.mean, 0.5),
            at(&score.mean, 0.97),
            at(&score.mean, 1.0),
            score.mean_covered,
            at(&score.spread, 0.5),
            at(&score.spread, 0.9),
            at(&score.spread, 1.0),
            score.spread_covered,
        );
        assert!(at(&score.mean, 1.0) < MEAN, "noise {noise}");
        assert!(at(&score.spread, 0.9) < SPREAD_90, "noise {noise}");
        assert!(score.mean_covered as f64 > 0.93 * cases as f64, "noise {noise}");
    }
}

#[test]
fn timing_noise_does_not_move_the_mean_voltage() {
    // Near the supply voltage the law is bent: without the correction 3 % timing noise at 3 time constants would take
    // V''·σ² = 0.03²·9/2·(V∞ − V) and more off.
    let bench = bench(5.25e3, 1e6, 1e-9, 0.0);
    let rhythm = Rhythm::Bench {
        circuit: Circuit::from_bench(&bench, None).unwrap(),
        gap: GapLaw { spread: 0.004, ..GapLaw::steady(5e3) },
    };
    let train =
        simulate(&Plan { rhythm, faults: Faults::none(), start: Start::Running, duration_s: 30.0, seed: 4 }).unwrap();
    let truth = train.realised;
    let (events, reading) = analyse(&train, 0.9 * truth.period_jitter_s.unwrap(), 5);
    let result = voltage_of(&bench, &events, &reading);
    let error = result.gap_voltage_v.unwrap().value - truth.gap_voltage_v.unwrap();
    let naive = events.iter().filter_map(|e| e.period_s).map(|p| 5.25e3 * (1.0 - (-p / 1e-3).exp())).sum::<f64>()
        / (events.len() - 1) as f64;
    // A tenth of what plain inversion is off.
    assert!(error.abs() < 0.1 * (naive - truth.gap_voltage_v.unwrap()).abs(), "{error} {naive}");
}

#[test]
fn simulated_circuits_give_back_their_firing_voltage() {
    // General circuit simulator, see data/circuit-timing.md; 0.2 % is what the law leaves open at most.
    for condition in ["base", "res05", "res20", "probe", "ilim", "tank", "tankarc", "scatter"] {
        for row in rows(condition) {
            let mut bench = bench(row.supply_v, row.resistance_ohm, row.capacitance_f, row.residual_v);
            bench.gap.conduction_time = exact(row.conduction_s);
            bench.charging.leakage = row.probe_ohm.map(Quantity::exact);
            bench.supply.current_limit = row.limit_a.map(Quantity::exact);
            bench.gap.stray_capacitance = exact(row.parts().stray_f);
            let jitter = Estimate::normal(row.period_sd_s, row.period_sd_s / (2.0 * row.firings as f64).sqrt());
            let period = Estimate::normal(row.period_s, row.period_sd_s / (row.firings as f64).sqrt());
            let result = measure(&bench, &Reading { period_jitter_s: Some(jitter), ..reading(period) });
            let voltage = result.gap_voltage_v.unwrap();
            assert!((voltage.value / row.firing_v - 1.0).abs() < 2e-3, "{} {voltage:?} {}", row.case, row.firing_v);
            if row.scatter > 0.0 {
                let spread = result.gap_voltage_spread_v.unwrap();
                // The residual voltage scatters with the firing voltage there, by a hundredth of it.
                assert!(
                    (spread.value / row.firing_sd_v - 1.0).abs() < 0.02,
                    "{} {spread:?} {}",
                    row.case,
                    row.firing_sd_v
                );
            }
        }
    }
}

/// Voltage of a simulated row with ripple.
fn rippled(row: &circuit_table::Row) -> VoltageResult {
    let mut bench = bench(row.supply_v, row.resistance_ohm, row.capacitance_f, row.residual_v);
    bench.gap.conduction_time = exact(row.conduction_s);
    bench.supply.ripple = exact(row.ripple_fraction);
    bench.supply.ripple_frequency = exact(row.ripple_hz);
    let jitter = Estimate::normal(row.period_sd_s, 1e-3 * row.period_sd_s);
    let reading = Reading {
        period_jitter_s: Some(jitter),
        mains_locked_jitter_s: Some(MainsJitter { jitter_s: jitter, frequency_hz: row.ripple_hz }),
        firings: FiringCounts { on_rhythm: row.firings as u64, missed: 0, extra: 0 },
        ..reading(Estimate::normal(row.period_s, 0.0))
    };
    measure(&bench, &reading)
}

#[test]
fn ripple_near_the_rate_moves_the_voltage_only_where_the_gap_is_locked() {
    // General circuit simulator with 2 % ripple. Taken at face value the mean period is off by up to 4 % near the lock,
    // the voltage by 0.5 %.
    /// Relative error that remains with the pull of the ripple taken out.
    const PULLED: f64 = 6e-4;
    /// Relative error of a locked gap: the ripple on the capacitor there.
    const LOCKED: f64 = 0.01;
    let mut held = 0;
    for row in rows("ripple") {
        let result = rippled(&row);
        let voltage = result.gap_voltage_v.unwrap();
        let error = voltage.value / row.gap_v - 1.0;
        let locked = (row.period_s * row.ripple_hz - 1.0).abs() < 1e-3;
        println!("{} {error:+.2e} u {:.2e}", row.case, voltage.u / row.gap_v);
        assert!(error.abs() < if locked { LOCKED } else { PULLED }, "{} {error}", row.case);
        if locked {
            assert!(voltage.u / row.gap_v > 3e-3, "{} {voltage:?}", row.case);
            assert!(result.budgets[0].inputs[0].name.starts_with("supply ripple"), "{:?}", result.budgets);
        }
        held += usize::from(voltage.low <= row.gap_v && row.gap_v <= voltage.high);
        // All of the scatter is ripple, none of it the gap's.
        assert_eq!(result.gap_voltage_spread_v.unwrap().value, 0.0);
    }
    assert!(held >= 36, "{held} of 38");
}

#[test]
fn a_few_wild_periods_do_not_move_the_voltage() {
    let case = random_case(5, 0.02, &Faults::none());
    let (mut events, reading) = analyse(&case.train, 0.0, 1);
    let clean = voltage_of(&case.bench, &events, &reading);
    let period = reading.period_s.unwrap().value;
    for (i, event) in events.iter_mut().enumerate().filter(|(i, _)| i % 20 == 7) {
        event.period_s = Some(period * if i % 40 == 7 { 2.0 } else { 0.4 });
    }
    let wild = voltage_of(&case.bench, &events, &reading);
    let (clean_v, wild_v) = (clean.gap_voltage_v.unwrap(), wild.gap_voltage_v.unwrap());
    assert!((wild_v.value - clean_v.value).abs() < 0.1 * clean_v.u, "{wild_v:?} {clean_v:?}");
    assert!(wild.notes.iter().any(|note| note.contains("left out")), "{:?}", wild.notes);
}

#[test]
fn without_single_periods_the_figures_of_the_reading_carry_the_voltage() {
    // Overlapping clicks leave a rate and a jitter but no events.
    let case = random_case(9, 0.03, &Faults::none());
    let (_, reading) = analyse(&case.train, 0.0, 1);
    let result = measure(&case.bench, &reading);
    let truth = case.train.realised;
    assert!((result.gap_voltage_v.unwrap().value / truth.gap_voltage_v.unwrap() - 1.0).abs() < 1e-3);
    assert!((result.gap_voltage_spread_v.unwrap().value / truth.gap_voltage_spread_v.unwrap() - 1.0).abs() < 0.03);
}
