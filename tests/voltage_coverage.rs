//! Coverage of the voltage's interval when the true parts are drawn inside the tolerances of the bench.

mod voltage_help;

use gaptone::bench::{Bench, Quantity, Tolerance};
use gaptone::estimate::Estimate;
use gaptone::model::charging::Circuit;
use gaptone::model::random::Random;
use voltage_help::{measure, reading};

/// How often the reported interval, that of the law of propagation, and that of Monte Carlo hold the truth.
#[derive(Debug, Default)]
struct Coverage {
    draws: usize,
    reported: usize,
    propagation: usize,
    monte_carlo: usize,
    /// Ends of the law of propagation beyond the highest voltage that the supply gives.
    impossible: usize,
}

/// One part as it is written on it, with the tolerance that its true value is drawn from.
fn stated(truth: f64, tolerance: Tolerance, random: &mut Random) -> Option<Quantity> {
    let (error, tolerance) = match tolerance {
        Tolerance::Exact => (0.0, tolerance),
        Tolerance::Limit(share) => (share * (2.0 * random.uniform() - 1.0), Tolerance::Limit(share * truth)),
        Tolerance::Standard(share) => (share * random.normal(), Tolerance::Standard(share * truth)),
    };
    Some(Quantity { value: truth * (1.0 - error), tolerance })
}

/// True gap voltages of `fill` times the supply; parts with the given relative tolerances.
fn coverage(draws: usize, seed: u64, fill: (f64, f64), supply: Tolerance, parts: Tolerance) -> Coverage {
    let mut coverage = Coverage::default();
    for number in 0..draws {
        let mut random = Random::stream(seed, number as u64);
        let (supply_v, resistance_ohm, capacitance_f) = (9e3, 1.2e6, 4e-9);
        let mut truth = Bench::default();
        truth.supply.voltage = Some(Quantity::exact(supply_v));
        truth.charging.resistance = Some(Quantity::exact(resistance_ohm));
        truth.charging.capacitance = Some(Quantity::exact(capacitance_f));
        truth.gap.residual_voltage = Some(Quantity::exact(150.0));
        truth.gap.conduction_time = Some(Quantity::exact(0.0));
        let gap_v = supply_v * (fill.0 + (fill.1 - fill.0) * random.uniform());
        let period_s = Circuit::from_bench(&truth, None).unwrap().period_s(gap_v).unwrap();
        let u_s = 3e-4 * period_s;
        let mut bench = truth.clone();
        bench.supply.voltage = stated(supply_v, supply, &mut random);
        bench.charging.resistance = stated(resistance_ohm, parts, &mut random);
        bench.charging.capacitance = stated(capacitance_f, parts, &mut random);
        let result = measure(&bench, &reading(Estimate::normal(period_s + u_s * random.normal(), u_s)));
        let Some(budget) = result.budgets.first() else { continue };
        let holds = |estimate: Estimate| usize::from((estimate.low..=estimate.high).contains(&gap_v));
        coverage.draws += 1;
        coverage.reported += holds(budget.result);
        coverage.propagation += holds(budget.propagation);
        coverage.monte_carlo += budget.monte_carlo.map_or(0, holds);
        coverage.impossible += usize::from(budget.propagation.high > bench.supply.voltage.unwrap().value);
    }
    coverage
}

fn percent(part: usize, coverage: &Coverage) -> f64 {
    100.0 * part as f64 / coverage.draws as f64
}

#[test]
fn the_interval_holds_the_truth_of_most_benches() {
    let found = coverage(120, 1, (0.3, 0.9), Tolerance::Limit(0.01), Tolerance::Limit(0.05));
    // 95 % of 120 are 114 ± 2.4; fewer than 107 have a probability of 0.3 %.
    assert!(found.draws == 120 && found.reported >= 107, "{found:?}");
}

/// `cargo test --release --test voltage_coverage -- --ignored --nocapture`
#[test]
#[ignore = "measures the figures of DEVELOPERS.md"]
fn coverage_over_five_hundred_benches() {
    let cases = [
        ("limits: supply 1 %, R and C 5 %; fill 0.3..0.9", (0.3, 0.9), Tolerance::Limit(0.01), Tolerance::Limit(0.05)),
        (
            "normal: supply 0.5 %, R and C 2 %; fill 0.3..0.9",
            (0.3, 0.9),
            Tolerance::Standard(0.005),
            Tolerance::Standard(0.02),
        ),
        ("limits: supply exact, R and C 10 %; fill 0.9..0.98", (0.9, 0.98), Tolerance::Exact, Tolerance::Limit(0.10)),
        ("normal: supply exact, R and C 5 %; fill 0.9..0.98", (0.9, 0.98), Tolerance::Exact, Tolerance::Standard(0.05)),
    ];
    for (name, fill, supply, parts) in cases {
        let found = coverage(500, 2, fill, supply, parts);
        println!(
            "{name}: reported {:.1} %, law of propagation {:.1} % (upper end above the supply in {:.1} %), Monte Carlo {:.1} % of {}",
            percent(found.reported, &found),
            percent(found.propagation, &found),
            percent(found.impossible, &found),
            percent(found.monte_carlo, &found),
            found.draws
        );
    }
}

/// Draws of a cell of the table below, and the seed: one that nothing was tuned on.
const NEAR_DRAWS: usize = 600;
const NEAR_SEED: u64 = 31;

/// Near the supply the voltage hardly depends on the period any more, and the interval of the law of propagation, symmetric about
/// the estimate, reaches beyond what the supply gives while it misses truths far below. Monte Carlo follows the bend.
///
/// `cargo test --release --test voltage_coverage near_the_supply -- --ignored --nocapture`
#[test]
#[ignore = "measures the figures of DEVELOPERS.md: 5400 draws with a Monte Carlo each"]
fn near_the_supply_monte_carlo_covers_where_propagation_does_not() {
    let fills = [(0.95, 0.96), (0.96, 0.97), (0.97, 0.98)];
    let cells: Vec<(f64, (f64, f64))> =
        [0.05, 0.075, 0.10].into_iter().flat_map(|u| fills.map(|fill| (u, fill))).collect();
    let found: Vec<Coverage> = std::thread::scope(|scope| {
        let of = |&(u, fill): &(f64, (f64, f64))| {
            scope.spawn(move || coverage(NEAR_DRAWS, NEAR_SEED, fill, Tolerance::Exact, Tolerance::Standard(u)))
        };
        let running: Vec<_> = cells.iter().map(of).collect();
        running.into_iter().map(|thread| thread.join().expect("no thread panics")).collect()
    });
    println!("u of R and of C | V_b/V_inf | Monte Carlo covers | propagation covers | its upper end above the supply");
    for ((u, fill), cell) in cells.iter().zip(&found) {
        println!(
            "{:.1} % | {:.2}..{:.2} | {:.1} % | {:.1} % | {:.1} %",
            100.0 * u,
            fill.0,
            fill.1,
            percent(cell.monte_carlo, cell),
            percent(cell.propagation, cell),
            percent(cell.impossible, cell)
        );
    }
    for cell in &found {
        // 93..97 %, and three standard deviations of a share of 600: 2.7 %.
        assert!((90.3..=99.7).contains(&percent(cell.monte_carlo, cell)), "{cell:?}");
    }
    let sum = |of: fn(&Coverage) -> usize, part: &[Coverage]| part.iter().map(of).sum::<usize>();
    let share =
        |of: fn(&Coverage) -> usize, part: &[Coverage]| 100.0 * sum(of, part) as f64 / sum(|c| c.draws, part) as f64;
    // The cells share the draws of their parts, so all of them together scatter nearly as 600 do, by 0.9 %: a right program would
    // leave 93..97 % with one seed in forty.
    assert!((93.0..=97.0).contains(&share(|c| c.monte_carlo, &found)), "{found:?}");
    // With the least certain parts propagation falls short, and its interval reaches beyond the supply.
    let widest = &found[6..];
    assert!((93.0..=97.0).contains(&share(|c| c.monte_carlo, widest)), "{widest:?}");
    assert!(share(|c| c.propagation, widest) < 93.0 && share(|c| c.impossible, widest) > 20.0, "{widest:?}");
}

#[test]
fn near_the_supply_monte_carlo_is_what_is_reported() {
    let found = coverage(30, NEAR_SEED + 1, (0.95, 0.98), Tolerance::Exact, Tolerance::Standard(0.10));
    // 95 % of 30 are 28.5; fewer than 25 have a probability of 0.3 %.
    assert!(found.draws == 30 && found.reported == found.monte_carlo && found.reported >= 25, "{found:?}");
    // Ends that no supply gives: some 40 % of the draws; none of 30 has a probability below one in a million.
    assert!(found.impossible > 0, "{found:?}");
}
