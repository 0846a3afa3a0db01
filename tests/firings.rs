//! Trains of firings: against a general circuit simulator, against closed formulas, and against themselves.

mod circuit_table;

use circuit_table::{Row, rows};
use gaptone::firing::EventKind;
use gaptone::model::charging::{Circuit, NoFiring, Parts, Ripple};
use gaptone::model::firings::{
    BareRhythm, Faults, GapLaw, NoTrain, Outage, PeriodLaw, Plan, Recovery, Rhythm, Start, Train, simulate,
};

fn plan(rhythm: Rhythm, duration_s: f64, seed: u64) -> Plan {
    Plan { rhythm, faults: Faults::none(), start: Start::Running, duration_s, seed }
}

fn bench(circuit: Circuit, gap: GapLaw) -> Rhythm {
    Rhythm::Bench { circuit, gap }
}

/// 8 kV, 10 MΩ, 1 nF.
fn kilovolt_circuit() -> Circuit {
    Parts { supply_v: Some(8e3), resistance_ohm: Some(10e6), capacitance_f: Some(1e-9), ..Parts::default() }
        .circuit()
        .unwrap()
}

fn bare(rate_hz: f64, relative_jitter: f64) -> BareRhythm {
    BareRhythm::steady(rate_hz, relative_jitter)
}

/// Mean and standard deviation of as many periods as the simulator gave, the first left out as there.
fn replay(row: &Row) -> (f64, f64) {
    let circuit = row.parts().circuit().unwrap();
    let rhythm = bench(circuit, GapLaw::steady(row.gap_v));
    let duration_s = row.first_firing_s + row.period_s * (row.firings as f64 + 10.0) * 1.1;
    let train = simulate(&Plan { start: Start::SwitchedOn, ..plan(rhythm, duration_s, 1) }).unwrap();
    let times: Vec<f64> = train.firings.iter().skip(1).take(row.firings - 1).map(|f| f.time_s).collect();
    assert_eq!(times.len(), row.firings - 1, "{}", row.case);
    let periods: Vec<f64> = times.windows(2).map(|w| w[1] - w[0]).collect();
    let n = periods.len() as f64;
    let mean = periods.iter().sum::<f64>() / n;
    let square: f64 = periods.iter().map(|p| (p - mean) * (p - mean)).sum();
    (mean, (square / (n - 1.0)).sqrt())
}

#[test]
fn ripple_moves_the_periods_as_a_simulated_circuit_does() {
    // General circuit simulator, see data/circuit-timing.md; among the rows are gaps that lock to the ripple.
    /// Largest relative difference of the mean period; the simulator's own step gives about 1e-4.
    const MEAN: f64 = 5e-4;
    /// Largest relative difference of the standard deviation; the simulated times are printed to a nanosecond and the
    /// residual voltage scatters by a volt, which moves the beat by a small part of a period.
    const SPREAD: f64 = 5e-3;
    let table = rows("ripple");
    assert_eq!(table.len(), 38);
    for row in table {
        let (mean, sd) = replay(&row);
        assert!((mean / row.period_s - 1.0).abs() < MEAN, "{}: mean {mean} against {}", row.case, row.period_s);
        assert!((sd / row.period_sd_s - 1.0).abs() < SPREAD, "{}: sd {sd} against {}", row.case, row.period_sd_s);
    }
}

#[test]
fn ripple_locks_a_gap_that_would_run_near_its_frequency() {
    // The simulated row B-1.050: 9.73 ms by the mean law, 10.000 ms locked to 100 Hz.
    let row = rows("ripple").into_iter().find(|row| row.case == "B-1.050-ripple").unwrap();
    let circuit = row.parts().circuit().unwrap();
    assert!((circuit.period_s(row.gap_v).unwrap() - 9.733e-3).abs() < 1e-6);
    let train = simulate(&plan(bench(circuit, GapLaw::steady(row.gap_v)), 5.0, 1)).unwrap();
    let late: Vec<f64> = train.firings.iter().filter(|f| f.time_s > 2.0).map(|f| f.time_s).collect();
    for pair in late.windows(2) {
        assert!((pair[1] - pair[0] - 10e-3).abs() < 1e-9);
    }
}

#[test]
fn scatter_of_the_gap_voltage_gives_the_simulated_scatter_of_the_periods() {
    // Eight simulated rows with 1 % scatter, 600 firings each: four standard errors of either side together.
    let table = rows("scatter");
    assert_eq!(table.len(), 8);
    for row in table {
        let circuit = row.parts().circuit().unwrap();
        let gap = GapLaw { spread: row.scatter, ..GapLaw::steady(row.gap_v) };
        let n = 4000.0;
        let realised = simulate(&plan(bench(circuit, gap), n * row.period_s, 11)).unwrap().realised;
        let (period, sd) = (realised.period_s.unwrap(), realised.period_jitter_s.unwrap());
        let firings = row.firings as f64;
        let mean_error = 4.0 * row.period_sd_s * (1.0 / firings + 1.0 / n).sqrt();
        let sd_error = 4.0 * (0.5 / firings + 0.5 / n).sqrt();
        assert!((period - row.period_s).abs() < mean_error, "{}: {period} {}", row.case, row.period_s);
        assert!((sd / row.period_sd_s - 1.0).abs() < sd_error, "{}: {sd} {}", row.case, row.period_sd_s);
    }
}

#[test]
fn one_percent_spread_gives_the_published_share_of_jitter() {
    // dT/T = 1.6992·dVb/Vb at 5 kV on 8 kV (first order; the curvature adds 0.014 % to the mean).
    let gap = GapLaw { spread: 0.01, ..GapLaw::steady(5e3) };
    let circuit = kilovolt_circuit();
    let realised = simulate(&plan(bench(circuit, gap), 500.0, 3)).unwrap().realised;
    let n = realised.firings as f64;
    let period = realised.period_s.unwrap();
    assert!((realised.period_jitter_s.unwrap() / period / 0.016_992 - 1.0).abs() < 4.0 / (2.0 * n).sqrt());
    let mean = circuit.period_s(5e3).unwrap() * 1.000_14;
    assert!((period / mean - 1.0).abs() < 4.0 * 0.017 / n.sqrt());
    assert!((realised.gap_voltage_v.unwrap() / 5e3 - 1.0).abs() < 4.0 * 0.01 / n.sqrt());
    assert!((realised.gap_voltage_spread_v.unwrap() / 50.0 - 1.0).abs() < 4.0 / (2.0 * n).sqrt());
}

#[test]
fn the_same_seed_gives_the_same_firing_times() {
    let rhythm = || bench(kilovolt_circuit(), GapLaw { spread: 0.02, memory: 0.5, ..GapLaw::steady(5e3) });
    let make = |seed| simulate(&plan(rhythm(), 2.0, seed)).unwrap();
    assert_eq!(make(5), make(5));
    assert_ne!(make(5).firings, make(6).firings);
}

/// The first firing, the 100th and the last of two seconds, s, as every build and every machine makes them.
const FIRING_TIMES_S: [f64; 3] = [0.001_592_878_226_904_692, 0.990_603_362_216_205_7, 1.995_678_412_133_044_6];

#[test]
fn firing_times_are_the_same_in_every_build_profile_and_on_every_machine() {
    /// Elementary functions differ in their last bit from one library to the other; in one library all profiles agree to the
    /// bit (DEVELOPERS.md has the command).
    const LAST_BITS: f64 = 1e-13;
    let gap = GapLaw { spread: 0.02, memory: 0.5, statistical_lag_s: 50e-6, ..GapLaw::steady(5e3) };
    let firings = simulate(&plan(bench(kilovolt_circuit(), gap), 2.0, 5)).unwrap().firings;
    let times = [firings[0].time_s, firings[100].time_s, firings[firings.len() - 1].time_s];
    for (time_s, expected_s) in times.into_iter().zip(FIRING_TIMES_S) {
        assert!((time_s - expected_s).abs() < LAST_BITS, "{times:?}");
    }
}

#[test]
fn a_fault_does_not_move_the_firings() {
    let rhythm = || bench(kilovolt_circuit(), GapLaw { spread: 0.02, ..GapLaw::steady(5e3) });
    let clean = simulate(&plan(rhythm(), 20.0, 5)).unwrap();
    let faults = Faults { missed: 0.1, extra: 0.08, extra_delay_s: 2e-3, extra_size: 0.4, ..Faults::none() };
    let faulty = simulate(&Plan { faults, ..plan(rhythm(), 20.0, 5) }).unwrap();
    let times = |train: &Train| -> Vec<f64> {
        train.firings.iter().filter(|f| f.kind != EventKind::Extra).map(|f| f.time_s).collect()
    };
    assert_eq!(times(&clean), times(&faulty));
    assert_eq!(clean.realised, faulty.realised);
    let n = clean.firings.len() as f64;
    let share = |kind| faulty.firings.iter().filter(|f| f.kind == kind).count() as f64 / n;
    // Four standard errors of a share of about 0.1 among n.
    let tolerance = 4.0 * (0.1 * 0.9 / n).sqrt();
    assert!((share(EventKind::Missed) - 0.1).abs() < tolerance);
    assert!((share(EventKind::Extra) - 0.08).abs() < tolerance);
    assert!(faulty.firings.windows(2).all(|w| w[0].time_s <= w[1].time_s));
}

#[test]
fn an_outage_is_silent_and_does_not_count_as_a_period() {
    let faults = Faults { outages: vec![Outage { from_s: 1.0, to_s: 3.0 }], ..Faults::none() };
    for rhythm in [bench(kilovolt_circuit(), GapLaw::steady(5e3)), Rhythm::Bare(bare(101.955, 0.0))] {
        let train = simulate(&Plan { faults: faults.clone(), ..plan(rhythm, 4.0, 5) }).unwrap();
        assert!(train.firings.iter().all(|f| f.time_s < 1.0 || f.time_s >= 3.0));
        assert!((train.realised.firing_rate_hz.unwrap() / 101.955 - 1.0).abs() < 1e-5);
        assert!((train.firings.len() as f64 - 2.0 * 101.955).abs() < 3.0);
    }
}

/// Lag-one correlation of the periods.
fn lag_one(train: &Train) -> f64 {
    let times: Vec<f64> = train.firings.iter().map(|f| f.time_s).collect();
    let periods: Vec<f64> = times.windows(2).map(|w| w[1] - w[0]).collect();
    let mean = periods.iter().sum::<f64>() / periods.len() as f64;
    let both: f64 = periods.windows(2).map(|w| (w[0] - mean) * (w[1] - mean)).sum();
    both / periods.iter().map(|p| (p - mean) * (p - mean)).sum::<f64>()
}

#[test]
fn memory_is_the_correlation_of_neighbouring_periods() {
    for memory in [-0.3, 0.0, 0.6] {
        let gap = GapLaw { spread: 0.01, memory, ..GapLaw::steady(5e3) };
        let rhythms = [
            bench(kilovolt_circuit(), gap),
            Rhythm::Bare(BareRhythm { memory, ..bare(100.0, 0.02) }),
            Rhythm::Bare(BareRhythm { memory, law: PeriodLaw::Gamma, ..bare(100.0, 0.1) }),
        ];
        for rhythm in rhythms {
            let train = simulate(&plan(rhythm, 300.0, 9)).unwrap();
            // Four standard errors of a correlation from n values, and 0.01 for the bend of the laws.
            let tolerance = 4.0 / (train.firings.len() as f64).sqrt() + 0.01;
            assert!((lag_one(&train) - memory).abs() < tolerance, "{memory} {}", lag_one(&train));
        }
    }
}

#[test]
fn a_bare_rhythm_has_the_rate_and_jitter_that_were_asked_for() {
    for (law, jitter) in [(PeriodLaw::Normal, 0.03), (PeriodLaw::Gamma, 0.03), (PeriodLaw::Gamma, 0.4)] {
        let rhythm = BareRhythm { law, ..bare(430.0, jitter) };
        let realised = simulate(&plan(Rhythm::Bare(rhythm), 60.0, 2)).unwrap().realised;
        let n = realised.firings as f64;
        let period = realised.period_s.unwrap();
        assert!((period * 430.0 - 1.0).abs() < 4.0 * jitter / n.sqrt());
        let relative = realised.period_jitter_s.unwrap() / period;
        assert!((relative / jitter - 1.0).abs() < 4.0 / n.sqrt(), "{relative} {jitter}");
        // Independent periods: cycle-to-cycle jitter is √2 times the period jitter.
        let ratio = realised.cycle_jitter_s.unwrap() / realised.period_jitter_s.unwrap();
        assert!((ratio / 2f64.sqrt() - 1.0).abs() < 4.0 / n.sqrt(), "{ratio}");
    }
}

#[test]
fn drift_is_the_relative_change_of_the_rate_per_second() {
    let rhythm = BareRhythm { drift_per_s: 0.004, ..bare(200.0, 0.0) };
    let realised = simulate(&plan(Rhythm::Bare(rhythm), 10.0, 2)).unwrap().realised;
    // At mid time the rate is 204 Hz and grows by 0.8 Hz a second: 0.00392; the period bends by half a percent of that.
    assert!((realised.drift_per_s.unwrap() / (0.004 / 1.02) - 1.0).abs() < 2e-3);
    let gap = GapLaw { drift_per_s: 0.005, ..GapLaw::steady(5e3) };
    let realised = simulate(&plan(bench(kilovolt_circuit(), gap), 10.0, 2)).unwrap().realised;
    assert!((realised.gap_voltage_v.unwrap() / (5e3 * 1.025) - 1.0).abs() < 1e-3);
    assert!(realised.drift_per_s.unwrap() < 0.0);
}

#[test]
fn a_statistical_lag_adds_its_mean_to_the_period_and_its_skew_to_the_voltage() {
    // Ramp of 0.3 V/µs at threshold and a mean lag of 0.2 ms: mean excess 60 V, standard deviation 60 V.
    let ramp = Parts { current_a: Some(0.3e-3), capacitance_f: Some(1e-9), ..Parts::default() }.circuit().unwrap();
    let gap = GapLaw { statistical_lag_s: 0.2e-3, ..GapLaw::steady(3e3) };
    let train = simulate(&plan(bench(ramp, gap), 200.0, 4)).unwrap();
    let realised = train.realised;
    let n = realised.firings as f64;
    // Of n lags those that are still waiting after t fall as exp(−t/ts) (von Laue 1925): the straight line through ln(n/N) from the
    // first to the last tenth has the slope −1/ts, with an error of some 3/√n.
    let mut lags_s: Vec<f64> = train.firings.iter().map(|firing| (firing.voltage_v - 3e3) / 0.3e6).collect();
    lags_s.sort_by(f64::total_cmp);
    let waiting = |share: f64| (lags_s[((1.0 - share) * lags_s.len() as f64) as usize], share.ln());
    let ((from_s, from), (to_s, to)) = (waiting(0.9), waiting(0.1));
    let slope = (to - from) / (to_s - from_s);
    assert!((slope * 0.2e-3 + 1.0).abs() < 4.0 * 3.0 / n.sqrt(), "{slope}");
    // An exponential has skewness 2, where a normal one has none.
    let third = lags_s.iter().map(|lag_s| (lag_s / 0.2e-3 - 1.0).powi(3)).sum::<f64>() / lags_s.len() as f64;
    assert!((third - 2.0).abs() < 0.5, "{third}");
    assert!((realised.gap_voltage_v.unwrap() - 3060.0).abs() < 4.0 * 60.0 / n.sqrt());
    // An exponential has kurtosis 9: the variance has a relative error of √(8/n).
    assert!((realised.gap_voltage_spread_v.unwrap() / 60.0 - 1.0).abs() < 4.0 * (2.0 / n).sqrt());
    assert!((realised.period_s.unwrap() - 10.2e-3).abs() < 4.0 * 0.2e-3 / n.sqrt());
}

#[test]
fn a_gap_driven_faster_than_it_recovers_fires_early() {
    let period = |recovery| {
        let gap = GapLaw { recovery, ..GapLaw::steady(5e3) };
        let realised = simulate(&plan(bench(kilovolt_circuit(), gap), 3.0, 4)).unwrap().realised;
        (realised.period_s.unwrap(), realised.gap_voltage_v.unwrap())
    };
    let recovery = |time_constant_s| Some(Recovery { time_constant_s, depth: 0.9 });
    let (steady, _) = period(None);
    let (quick, quick_v) = period(recovery(0.1e-3));
    let (slow, slow_v) = period(recovery(5e-3));
    assert!((quick / steady - 1.0).abs() < 1e-9 && (quick_v / 5e3 - 1.0).abs() < 1e-9);
    assert!(slow < 0.95 * steady && slow_v < 0.95 * 5e3);
    // The crossing is where both laws agree: 8 kV·(1 − exp(−T/10 ms)) = 5 kV·(1 − 0.9·exp(−T/5 ms)).
    let charged = 8e3 * (1.0 - (-slow / 10e-3).exp());
    assert!((charged / (5e3 * (1.0 - 0.9 * (-slow / 5e-3).exp())) - 1.0).abs() < 1e-9);
    assert!((charged / slow_v - 1.0).abs() < 1e-9);
}

#[test]
fn switching_on_starts_from_zero_volts() {
    let circuit = Parts {
        supply_v: Some(8e3),
        resistance_ohm: Some(10e6),
        capacitance_f: Some(1e-9),
        residual_v: 500.0,
        conduction_s: 20e-6,
        ..Parts::default()
    }
    .circuit()
    .unwrap();
    let switched = Plan { start: Start::SwitchedOn, ..plan(bench(circuit, GapLaw::steady(5e3)), 1.0, 1) };
    let train = simulate(&switched).unwrap();
    assert!((train.firings[0].time_s / circuit.first_firing_s(5e3).unwrap() - 1.0).abs() < 1e-12);
    let period = train.firings[1].time_s - train.firings[0].time_s;
    assert!((period / circuit.period_s(5e3).unwrap() - 1.0).abs() < 1e-12);
}

#[test]
fn a_train_that_cannot_be_is_refused_with_the_reason() {
    let error = |rhythm| simulate(&plan(rhythm, 1.0, 1)).unwrap_err();
    let silent = error(bench(kilovolt_circuit(), GapLaw::steady(8.1e3)));
    assert!(matches!(silent, NoTrain::NoFiring(NoFiring::OutOfReach { .. })), "{silent}");
    let wild = GapLaw { spread: 0.01, ..GapLaw::steady(20e3) };
    assert!(matches!(error(bench(kilovolt_circuit(), wild)), NoTrain::NoFiring(_)));
    let rippled = kilovolt_circuit().with_ripple(Some(Ripple { fraction: 0.01, frequency_hz: 100.0, phase_rad: 0.0 }));
    assert!(matches!(error(bench(rippled, GapLaw::steady(8.1e3))), NoTrain::NoFiring(_)));
    for rhythm in
        [bare(-1.0, 0.01), bare(f64::NAN, 0.01), bare(10.0, 0.9), BareRhythm { memory: 1.0, ..bare(10.0, 0.1) }]
    {
        assert!(matches!(error(Rhythm::Bare(rhythm)), NoTrain::OutOfRange { .. }), "{rhythm:?}");
    }
    assert_eq!(error(Rhythm::Bare(bare(1e8, 0.0))), NoTrain::TooMany);
    let endless = simulate(&plan(Rhythm::Bare(bare(10.0, 0.0)), f64::INFINITY, 1));
    assert!(matches!(endless, Err(NoTrain::OutOfRange { .. })));
}

#[test]
fn a_scattered_gap_just_below_the_supply_goes_on_firing() {
    // At 3 % spread and a supply 5 % above the gap one draw in twenty is out of reach; the gap waits and fires later.
    let circuit = Parts { supply_v: Some(5250.0), ..Parts::default() };
    let circuit = Parts { resistance_ohm: Some(1e6), capacitance_f: Some(1e-9), ..circuit }.circuit().unwrap();
    let gap = GapLaw { spread: 0.03, ..GapLaw::steady(5e3) };
    let train = simulate(&plan(bench(circuit, gap), 20.0, 8)).unwrap();
    assert!(train.firings.len() > 4000);
    assert!(train.firings.iter().all(|f| f.voltage_v < 5250.0));
}
