//! Locking to the ripple of the supply, against a general circuit simulator and against plain stepping in time.

mod circuit_table;

use circuit_table::rows;
use gaptone::model::charging::{Circuit, Parts, Ripple, Strength};
use gaptone::model::locking::{PhaseMap, Rippled, lock_range, pattern_range};
use proptest::prelude::*;

fn settled(circuit: &Circuit, gap_v: f64) -> Rippled {
    PhaseMap::new(circuit, Strength::settled(gap_v)).expect("a ripple").settled().expect("fires")
}

/// Range of the last 60 periods of each simulated case, s; see `data/circuit-timing.md`.
fn late_ranges() -> Vec<(String, f64)> {
    let text = include_str!("data/circuit-locks.csv");
    let pair = |line: &str| line.split_once(',').map(|(case, range)| (case.to_owned(), range.parse().unwrap()));
    text.lines().skip(1).filter_map(pair).collect()
}

#[test]
fn the_simulated_gaps_that_lock_are_predicted_to_lock_and_no_others() {
    // General circuit simulator, see data/circuit-timing.md. Its own step and the volt by which its residual voltage
    // scatters leave 0.4 µs; a gap that does not lock swings by more than 40 µs.
    const STILL_S: f64 = 1e-6;
    let ranges = late_ranges();
    let mut locks = 0;
    for row in rows("ripple") {
        let range = ranges.iter().find(|(case, _)| *case == row.case).unwrap().1;
        let circuit = row.parts().circuit().unwrap();
        let found = settled(&circuit, row.gap_v);
        let single = found.lock.is_some_and(|lock| lock.firings == 1);
        assert_eq!(single, range < STILL_S, "{}: {found:?}, simulated range {range}", row.case);
        locks += usize::from(single);
        // And by the range of settings.
        let at = |supply_v: f64| Parts { supply_v: Some(supply_v), ..row.parts() }.circuit().ok();
        let cycles = (found.mean_period_s * row.ripple_hz).round() as u32;
        let within = cycles >= 1
            && lock_range(&at, row.gap_v, cycles, row.supply_v)
                .is_some_and(|(low, high)| (low..high).contains(&row.supply_v));
        assert_eq!(within, single, "{}", row.case);
    }
    assert_eq!(locks, 4, "the table holds four locked cases");
}

#[test]
fn mean_and_swing_of_the_periods_are_those_of_the_simulated_circuit() {
    // The simulated means hold the transient from switching on and end anywhere in a beat: 0.5 %, and for the swing 5 % of
    // it and a microsecond of it where a lock has taken some firings to set in.
    for row in rows("ripple") {
        let found = settled(&row.parts().circuit().unwrap(), row.gap_v);
        assert!((found.mean_period_s / row.period_s - 1.0).abs() < 5e-3, "{}: {found:?} {}", row.case, row.period_s);
        if found.lock.is_none_or(|lock| lock.firings > 1) {
            assert!(
                (found.period_sd_s / row.period_sd_s - 1.0).abs() < 0.05,
                "{}: {found:?} {}",
                row.case,
                row.period_sd_s
            );
        }
    }
}

/// Periods of a gap by stepping through time: no map, no closed form, the midpoint rule and a straight line to the crossing.
fn stepped(supply_v: f64, gap_v: f64, residual_v: f64, tau_s: f64, ripple: Ripple, count: usize) -> Vec<f64> {
    let step_s = 1.0 / ripple.frequency_hz / 4000.0;
    let rate = |v: f64, t: f64| (supply_v * ripple.factor_at(t) - v) / tau_s;
    let (mut v, mut step, mut last) = (residual_v, 0u64, 0.0);
    let mut periods = Vec::new();
    while periods.len() < count {
        let t = step as f64 * step_s;
        let half = v + 0.5 * step_s * rate(v, t);
        let next = v + step_s * rate(half, t + 0.5 * step_s);
        if next >= gap_v {
            let at = t + step_s * (gap_v - v) / (next - v);
            periods.push(at - last);
            last = at;
            // What is left of the step charges from the residual voltage.
            v = residual_v + (t + step_s - at) * rate(residual_v, at);
        } else {
            v = next;
        }
        step += 1;
    }
    periods
}

#[test]
fn the_edges_of_a_lock_are_where_plain_stepping_stops_locking() {
    let (gap_v, tau_s) = (4340.0, 3.198e-3);
    let ripple = Ripple { fraction: 0.02, frequency_hz: 100.0, phase_rad: 0.0 };
    let at = |supply_v: f64| {
        let parts =
            Parts { supply_v: Some(supply_v), time_constant_s: Some(tau_s), ripple: Some(ripple), ..Parts::default() };
        parts.circuit().ok()
    };
    let (low, high) = lock_range(&at, gap_v, 1, 4570.0).unwrap();
    let locks = |supply_v: f64| {
        let periods = stepped(supply_v, gap_v, 0.0, tau_s, ripple, 260);
        periods[220..].iter().all(|period| (period - 10e-3).abs() < 2e-6)
    };
    // A thousandth of the setting inside and outside of either edge.
    assert!(locks(low * 1.001) && locks(high * 0.999) && locks(0.5 * (low + high)), "{low} {high}");
    assert!(!locks(low * 0.999) && !locks(high * 1.001), "{low} {high}");
    // The settled sine at 100 Hz is 2 % · Vs/√(1 + (ωτ)²), about 0.9 % of the gap voltage: the lock is that wide either way.
    assert!((1.012..1.025).contains(&(high / low)), "{low} {high}");
}

#[test]
fn a_pattern_of_several_firings_holds_over_the_range_in_which_plain_stepping_repeats_it() {
    let (gap_v, tau_s) = (4340.0, 3.198e-3);
    // The higher the order, the more ripple it takes for a lock that plain stepping settles into.
    for (firings, cycles, fraction) in [(2, 1, 0.02), (3, 2, 0.08)] {
        let ripple = Ripple { fraction, frequency_hz: 100.0, phase_rad: 0.0 };
        let at = |supply_v: f64| {
            let parts = Parts {
                supply_v: Some(supply_v),
                time_constant_s: Some(tau_s),
                ripple: Some(ripple),
                ..Parts::default()
            };
            parts.circuit().ok()
        };
        let mean = |supply_v: f64| settled(&at(supply_v).unwrap(), gap_v).mean_period_s;
        let period_s = f64::from(cycles) / f64::from(firings) / ripple.frequency_hz;
        // The settings at which the gap is a little slower and a little faster, by halving.
        let setting = |period_s: f64| {
            let (mut low, mut high) = (gap_v * 1.01, gap_v * 3.0);
            for _ in 0..50 {
                let middle = 0.5 * (low + high);
                if mean(middle) > period_s { low = middle } else { high = middle }
            }
            high
        };
        let inside = 0.5 * (setting(period_s * (1.0 + 1e-9)) + setting(period_s * (1.0 - 1e-9)));
        let lock = settled(&at(inside).unwrap(), gap_v).lock.unwrap();
        assert_eq!((lock.firings, lock.cycles), (firings, cycles));
        let (low, high) = pattern_range(&at, Strength::settled(gap_v), lock, inside).unwrap();
        let width = high - low;
        eprintln!("{firings}:{cycles}: {low:.3} V to {high:.3} V");
        // A locked pattern repeats itself; half a width outside the phase creeps on, by more than 10 µs in each pattern.
        let creep_s = |supply_v: f64| {
            let periods = stepped(supply_v, gap_v, 0.0, tau_s, ripple, 3000);
            (periods[2400..].iter().sum::<f64>() - 600.0 * period_s).abs()
        };
        for inside_v in [low + 0.2 * width, high - 0.2 * width] {
            let creep_s = creep_s(inside_v);
            assert!(creep_s < 20e-6, "{firings}:{cycles} {low} {high}: {creep_s}");
        }
        for outside_v in [low - 0.5 * width, high + 0.5 * width] {
            let creep_s = creep_s(outside_v);
            assert!(creep_s > 100e-6, "{firings}:{cycles} {low} {high}: {creep_s}");
        }
    }
}

#[test]
fn a_lock_with_a_current_limit_is_found_on_the_map() {
    let ripple = Ripple { fraction: 0.02, frequency_hz: 100.0, phase_rad: 0.0 };
    let at = |supply_v: f64, limit: Option<f64>| {
        Parts {
            supply_v: Some(supply_v),
            resistance_ohm: Some(3.9e6),
            capacitance_f: Some(820e-12),
            current_limit_a: limit,
            ripple: Some(ripple),
            ..Parts::default()
        }
        .circuit()
        .ok()
    };
    let free = lock_range(&|v| at(v, None), 4340.0, 1, 4570.0).unwrap();
    // A limit that never acts changes nothing; the closed form and the map agree.
    let idle = lock_range(&|v| at(v, Some(1.0)), 4340.0, 1, 4570.0).unwrap();
    assert!((idle.0 / free.0 - 1.0).abs() < 1e-4 && (idle.1 / free.1 - 1.0).abs() < 1e-4, "{idle:?} {free:?}");
    // One that acts slows the charge, so that the lock moves to higher settings.
    let acting = lock_range(&|v| at(v, Some(0.9e-3)), 4340.0, 1, 4570.0).unwrap();
    assert!(acting.0 > free.0 && acting.1 > free.1, "{acting:?} {free:?}");
    let inside = at(0.5 * (acting.0 + acting.1), Some(0.9e-3)).unwrap();
    assert_eq!(settled(&inside, 4340.0).lock.unwrap().firings, 1);
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(40))]
    #[test]
    fn the_map_agrees_with_plain_stepping(
        over in 1.03..3.0f64, tau_s in 1e-3..8e-3f64, fraction in 0.001..0.03f64, residual_part in -0.3..0.3f64,
    ) {
        let gap_v = 5000.0;
        let ripple = Ripple { fraction, frequency_hz: 100.0, phase_rad: 0.0 };
        let circuit = Parts {
            supply_v: Some(over * gap_v), time_constant_s: Some(tau_s), ripple: Some(ripple),
            residual_v: residual_part * gap_v, ..Parts::default()
        }.circuit().unwrap();
        let map = PhaseMap::new(&circuit, Strength::settled(gap_v)).unwrap();
        let stepped = stepped(over * gap_v, gap_v, residual_part * gap_v, tau_s, ripple, 12);
        let mut turns = 0.0;
        for period in stepped {
            let found = map.period_s(turns).unwrap();
            // The midpoint rule and the straight line to the crossing are good to 1e-6 of a ripple period here.
            prop_assert!((found - period).abs() < 1e-6, "{found} {period}");
            turns += 100.0 * period;
        }
    }
}
