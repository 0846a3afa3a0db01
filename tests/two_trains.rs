//! Two trains among event times, against a worked example of deinterleaving.

use gaptone::model::random::Random;
use gaptone::rhythm::pairs::{PairTrain, at_lag, trains};

/// The worked example (evaluated independently of this program, with the transform of Nishiguchi and Kobayashi, IEEE T-AES 36(2),
/// 2000): train 1 every 10.0 ms from 1.0 ms on, train 2 every 13.7 ms from 4.1 ms on, 300 ms: 30 and 22 pulses. In ms.
const FIRST: (f64, f64, i32) = (1.0, 10.0, 30);
const SECOND: (f64, f64, i32) = (4.1, 13.7, 22);

/// Half width of a bin of the worked example, ms.
const HALF_WIDTH_MS: f64 = 0.1;

fn pulses((start, period, count): (f64, f64, i32)) -> impl Iterator<Item = f64> {
    (0..count).map(move |k| start + period * f64::from(k))
}

/// Both trains in the order of time: time and train.
fn example() -> Vec<(f64, u8)> {
    let mut all: Vec<(f64, u8)> = pulses(FIRST).map(|t| (t, 1)).chain(pulses(SECOND).map(|t| (t, 2))).collect();
    all.sort_by(|a, b| a.0.total_cmp(&b.0));
    all
}

fn times(pulses: &[(f64, u8)]) -> Vec<f64> {
    pulses.iter().map(|pulse| pulse.0).collect()
}

#[test]
fn pair_counts_and_transform_are_those_of_the_worked_example() {
    // Columns: lag in ms, pairs of any order, |D|. Some pairs across the trains lie 0.1 ms off a lag, on the edge of its bin; the
    // table was made in milliseconds, and so is this, for the rounding of the edge to be the same.
    let table = [
        (5.0, 0, 0.00),
        (6.85, 2, 2.00),
        (10.0, 31, 31.00),
        (13.7, 23, 23.00),
        (20.0, 30, 2.00),
        (27.4, 22, 2.00),
        (30.0, 29, 2.00),
        (41.1, 21, 1.74),
    ];
    let times = times(&example());
    assert_eq!(times.len(), 52);
    for (lag, count, size) in table {
        let pairs = at_lag(&times, lag, HALF_WIDTH_MS);
        assert_eq!(pairs.count, count, "{lag} ms");
        // Printed with two decimals.
        assert!((pairs.transform.norm() - size).abs() <= 0.005, "{lag} ms: {} for {size}", pairs.transform.norm());
    }
}

#[test]
fn inside_the_edges_a_train_of_n_pulses_has_n_minus_k_pairs_k_periods_apart() {
    let times = times(&example());
    for (lag, expected) in [(10.0, 29), (20.0, 28), (30.0, 27), (13.7, 21), (27.4, 20), (41.1, 19)] {
        assert_eq!(at_lag(&times, lag, 0.05).count, expected, "{lag} ms");
    }
    // At n times the period the phases are spread evenly: what is left is at most one pair of n.
    assert!(at_lag(&times, 20.0, 0.05).transform.norm() < 1.0 + 1e-9);
    assert!((at_lag(&times, 10.0, 0.05).transform.norm() - 29.0).abs() < 1e-9);
}

#[test]
fn the_example_holds_100_hz_and_72_993_hz_and_not_50_hz() {
    let found = trains(&times(&example()), HALF_WIDTH_MS, 60.0);
    let rates: Vec<f64> = found.iter().map(|train| 1e3 / train.period).collect();
    assert_eq!(found.len(), 2, "{rates:?}");
    // Printed to 0.01 and 0.001 Hz.
    assert!((rates[0] - 100.00).abs() < 0.005 && (rates[1] - 72.993).abs() < 0.0005, "{rates:?}");
    assert_eq!((found[0].members.len(), found[1].members.len()), (30, 22));
    assert!(rates.iter().all(|rate| (rate - 50.0).abs() > 1.0), "{rates:?}");
}

/// Share of the pulses that stand in the right train.
fn assigned(pulses: &[(f64, u8)], found: &[PairTrain]) -> f64 {
    let right = |train: Option<&PairTrain>, name: u8| {
        train.map_or(0, |train| train.members.iter().filter(|&&i| pulses[i].1 == name).count())
    };
    (right(found.first(), 1) + right(found.get(1), 2)) as f64 / pulses.len() as f64
}

#[test]
fn edge_noise_of_one_percent_leaves_the_rates_within_a_thousandth() {
    // Both rates within 0.1 % and 95 % of the pulses in their train. A straight line through 22 edges of 1 % knows the period to
    // 1 %·√(12/22³) = 0.034 %, so that 0.3 % of the draws miss 0.1 % by chance alone, and two pulses of different trains lie
    // 0.1 ms apart: 80 of 100 draws are asked for.
    const DRAWS: u64 = 100;
    let mut good = 0;
    for seed in 0..DRAWS {
        let mut random = Random::seeded(seed);
        let mut pulses = example();
        for pulse in &mut pulses {
            let period = if pulse.1 == 1 { FIRST.1 } else { SECOND.1 };
            pulse.0 += 0.01 * period * random.normal();
        }
        pulses.sort_by(|a, b| a.0.total_cmp(&b.0));
        // Four standard deviations of an edge.
        let found = trains(&times(&pulses), 0.5, 60.0);
        let rate_good = |train: Option<&PairTrain>, period: f64| {
            train.is_some_and(|train| (train.period / period - 1.0).abs() < 1e-3)
        };
        let rates = found.len() == 2 && rate_good(found.first(), FIRST.1) && rate_good(found.get(1), SECOND.1);
        good += u64::from(rates && assigned(&pulses, &found) >= 0.95);
    }
    println!("{good} of {DRAWS} draws");
    assert!(good >= 80, "{good} of {DRAWS} draws");
}
