//! The gap voltage of a period: published budget, what must be refused, and what a person is told.

mod voltage_help;

use gaptone::bench::{Bench, Quantity, Tolerance};
use gaptone::estimate::Estimate;
use gaptone::rhythm::{Reading, Verdict};
use gaptone::voltage::VoltageMeter;
use voltage_help::{bench, exact, measure, reading, standard};

#[test]
fn the_budget_of_the_worked_example_comes_out() {
    // Evaluated independently by the law of propagation and by Monte Carlo: 8000 ± 80 V, 200 ± 100 V, 10 MΩ ± 1 %,
    // 1 nF ± 2 %, 9.555114 ms ± 1 µs, all standard deviations: 5000 V, u 89.51 V; supply 49.2, residual 38.5, resistance
    // 28.7, capacitance 57.3, period 0.3 V; Monte Carlo 95 % interval 4826..5177 V.
    let mut bench = bench(8e3, 10e6, 1e-9, 200.0);
    bench.supply.voltage = standard(8e3, 80.0);
    bench.gap.residual_voltage = standard(200.0, 100.0);
    bench.charging.resistance = standard(10e6, 0.1e6);
    bench.charging.capacitance = standard(1e-9, 0.02e-9);
    let result = measure(&bench, &reading(Estimate::normal(9.555_114e-3, 1e-6)));
    let voltage = result.gap_voltage_v.unwrap();
    assert!((voltage.value - 5000.0).abs() < 0.01, "{voltage:?}");
    let budget = &result.budgets[0];
    // Differences over ± u leave the third derivative in; printed to 0.01 V.
    assert!((budget.propagation.u - 89.51).abs() < 0.05, "{budget:?}");
    // Monte Carlo within 0.5 % of it.
    assert!((voltage.u / 89.51 - 1.0).abs() < 5e-3, "{voltage:?}");
    // The tolerance of the draws is 0.5 V, and the printed ends are rounded.
    assert!((voltage.low - 4826.0).abs() < 1.5 && (voltage.high - 5177.0).abs() < 1.5, "{voltage:?}");
    let names =
        ["capacitance (u 2 %)", "supply voltage (u 1 %)", "residual voltage (u 50 %)", "charging resistance (u 1 %)"];
    let expected = [57.3, 49.2, 38.5, 28.7, 0.3];
    for (i, line) in budget.inputs.iter().enumerate() {
        assert!(i == 4 || line.name == names[i], "{}", line.name);
        assert!((line.contribution - expected[i]).abs() < 0.06, "{line:?}");
    }
    assert!((budget.inputs.iter().map(|line| line.share).sum::<f64>() - 1.0).abs() < 1e-12);
    assert!(result.notes.iter().any(|note| note.contains("capacitance (u 2 %)")), "{:?}", result.notes);
}

#[test]
fn an_exact_bench_leaves_the_statistics_alone() {
    let bench = bench(8e3, 10e6, 1e-9, 0.0);
    let result = measure(&bench, &reading(Estimate::normal(9.808_293e-3, 2e-6)));
    let voltage = result.gap_voltage_v.unwrap();
    // dV/dT = (8 kV − 5 kV)/10 ms.
    assert!((voltage.u - 3e5 * 2e-6).abs() < 2e-3, "{voltage:?}");
    assert_eq!(result.budgets[0].inputs.len(), 1);
    assert!(result.notes.is_empty(), "{:?}", result.notes);
}

#[test]
fn a_limit_of_error_gives_a_rectangular_interval() {
    // A single rectangular contribution: u = a/√3, 95 % interval ± 0.95·a (JCGM 101, 9.2.3 by one input).
    let mut bench = bench(8e3, 10e6, 1e-9, 0.0);
    bench.supply.voltage = Some(Quantity { value: 8e3, tolerance: Tolerance::Limit(80.0) });
    let voltage = measure(&bench, &reading(Estimate::normal(9.808_293e-3, 0.0))).gap_voltage_v.unwrap();
    let half_width = 80.0 * 0.625;
    assert!((voltage.u / (half_width / 3f64.sqrt()) - 1.0).abs() < 0.01, "{voltage:?}");
    assert!((voltage.high - voltage.value - 0.95 * half_width).abs() < 0.01 * half_width, "{voltage:?}");
}

#[test]
fn a_recording_without_a_rhythm_has_no_voltage() {
    let bench = bench(8e3, 10e6, 1e-9, 0.0);
    let period = Estimate::normal(9.8e-3, 1e-5);
    for verdict in [Verdict::Irregular, Verdict::None] {
        let result = measure(&bench, &Reading { verdict, ..reading(period) });
        assert_eq!(result.gap_voltage_v, None);
        assert!(result.gap_voltage_spread_v.is_none() && result.budgets.is_empty());
        assert_eq!(result.notes.len(), 1);
    }
    let silent = measure(&bench, &Reading { period_s: None, ..reading(period) });
    assert!(silent.gap_voltage_v.is_none() && silent.notes[0].starts_with("no gap voltage"));
    let infinite = measure(&bench, &reading(Estimate::normal(9.8e-3, f64::INFINITY)));
    assert!(infinite.gap_voltage_v.is_none());
}

#[test]
fn a_period_that_the_bench_does_not_allow_gives_no_voltage_and_the_reason() {
    let mut bench = bench(8e3, 10e6, 1e-9, 0.0);
    let note = |bench: &Bench, period_s: f64| {
        let result = measure(bench, &reading(Estimate::normal(period_s, 1e-6)));
        assert_eq!(result.gap_voltage_v, None, "{period_s}");
        result.notes[0].clone()
    };
    assert!(note(&bench, 0.2).contains("20.0 time constants"), "{}", note(&bench, 0.2));
    bench.gap.conduction_time = exact(2e-3);
    assert!(note(&bench, 1e-3).contains("conducts"));
    bench.charging.resistance = None;
    bench.charging.current = exact(1e-3);
    assert!(note(&bench, 20e-3).contains("above the supply"), "{}", note(&bench, 20e-3));
}

#[test]
fn a_missing_part_of_the_bench_is_named() {
    let mut bench = bench(8e3, 10e6, 1e-9, 0.0);
    bench.supply.voltage = None;
    assert_eq!(VoltageMeter::new(&bench, None).unwrap_err().key, "supply.voltage");
    let meter = VoltageMeter::new(&bench, Some(Quantity::exact(9e3))).unwrap();
    assert!((meter.gap_voltage_of(10e-3 * 2f64.ln()).unwrap() - 4.5e3).abs() < 1e-6);
    assert_eq!(meter.gap_voltage_of(-1.0), None);
}

#[test]
fn a_person_is_told_what_makes_the_voltage_doubtful() {
    let notes =
        |bench: &Bench, period_s: f64| measure(bench, &reading(Estimate::normal(period_s, 1e-7))).notes.join("\n");
    let mut plain = bench(8e3, 10e6, 1e-9, 0.0);
    assert!(notes(&plain, 65e-3).contains("6.5 time constants"));
    assert!(notes(&plain, 0.2e-3).contains("does not break down at 158 V"), "{}", notes(&plain, 0.2e-3));
    plain.gap.residual_voltage = None;
    let unstated = notes(&plain, 9.808e-3);
    assert!(unstated.contains("residual voltage is not stated") && unstated.contains("by 38 V"), "{unstated}");
    plain.gap.residual_voltage = exact(0.0);
    plain.supply.current_limit = exact(0.2e-3);
    assert!(notes(&plain, 20e-3).contains("does not depend on its setting"), "{}", notes(&plain, 20e-3));
    let locked =
        Reading { period_jitter_s: Some(Estimate::normal(1e-7, 1e-8)), ..reading(Estimate::normal(10e-3, 1e-9)) };
    let locked = measure(&bench(8e3, 10e6, 1e-9, 0.0), &locked).notes.join("\n");
    assert!(locked.contains("in step with 100 Hz") || locked.contains("in step with 50 Hz"), "{locked}");
}

#[test]
fn more_tolerance_never_makes_the_voltage_more_certain() {
    let mut bench = bench(8e3, 10e6, 1e-9, 100.0);
    let period = reading(Estimate::normal(9.8e-3, 1e-6));
    let mut last = measure(&bench, &period).gap_voltage_v.unwrap().u;
    let widened: [fn(&mut Bench); 5] = [
        |b| b.charging.capacitance = standard(1e-9, 0.03e-9),
        |b| b.charging.resistance = Some(Quantity { value: 10e6, tolerance: Tolerance::Limit(1e5) }),
        |b| b.gap.residual_voltage = standard(100.0, 30.0),
        |b| b.gap.conduction_time = standard(0.0, 5e-6),
        |b| b.supply.voltage = standard(8e3, 40.0),
    ];
    for widen in widened {
        widen(&mut bench);
        let voltage = measure(&bench, &period).gap_voltage_v.unwrap();
        assert!(voltage.u > last && voltage.low < voltage.value && voltage.value < voltage.high, "{voltage:?}");
        last = voltage.u;
    }
}
