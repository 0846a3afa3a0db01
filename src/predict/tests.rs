//! Predictions against published worked examples, closed forms and plain numerical integration.

use super::*;
use crate::bench::{Quantity, Tolerance, parse};
use proptest::prelude::*;

/// Algebra and nothing else: a few roundings.
const ALGEBRA: f64 = 1e-9;

fn bench(text: &str) -> Bench {
    parse(text, "test.toml").unwrap_or_else(|error| panic!("{error}"))
}

fn at(bench: &Bench) -> Prediction {
    predict(bench, None).expect("a right setting")
}

/// Supply, gap and residual voltage, resistance, capacitance.
fn simple(supply_v: f64, gap_v: f64, residual_v: f64, r: f64, c: f64) -> Bench {
    let mut bench = Bench::default();
    bench.supply.voltage = Some(Quantity::exact(supply_v));
    bench.charging.resistance = Some(Quantity::exact(r));
    bench.charging.capacitance = Some(Quantity::exact(c));
    bench.gap.voltage = Some(Quantity::exact(gap_v));
    bench.gap.residual_voltage = Some(Quantity::exact(residual_v));
    bench
}

fn period_of(bench: &Bench) -> f64 {
    at(bench).period_s.expect("fires").value
}

fn rate_of(bench: &Bench) -> f64 {
    at(bench).firing_rate_hz.expect("fires").value
}

fn close(value: f64, expected: f64, relative: f64) -> bool {
    (value / expected - 1.0).abs() <= relative
}

#[test]
fn the_neon_flasher_of_a_textbook_flashes_every_16_636_seconds() {
    // Alexander & Sadiku, Fundamentals of Electric Circuits, chapter 7: fires at 75 V, goes out at 30 V, 120 V through
    // 4 MΩ into 6 µF; the lamp of 120 Ω conducts for 0.6597 ms.
    let mut flasher = simple(120.0, 75.0, 30.0, 4e6, 6e-6);
    flasher.gap.conduction_time = Some(Quantity::exact(0.6597e-3));
    assert!((period_of(&flasher) - 16.636).abs() < 0.001);
}

#[test]
fn published_relaxation_oscillators_run_at_their_printed_rates() {
    // Chattopadhyay & Rakshit p. 397: 40 V, fires at 15 V, 50 kΩ, 2 nF: 47 µs.
    assert!((period_of(&simple(40.0, 15.0, 0.0, 50e3, 2e-9)) - 47e-6).abs() < 0.05e-6);
    // Astable with ±15 V, divider 86/100 kΩ, 100 kΩ and 0.1 µF: two equal halves, 49.97 Hz.
    let threshold = 15.0 * 86.0 / 186.0;
    assert!((rate_of(&simple(15.0, threshold, -threshold, 100e3, 0.1e-6)) / 2.0 - 49.97).abs() < 0.01);
    // Constant-current ramp: (5 − 0.7) V/12 kΩ into 0.05 µF over 5/3 V: 4.300 kHz.
    let mut ramp = Bench::default();
    ramp.charging.current = Some(Quantity::exact(4.3 / 12e3));
    ramp.charging.capacitance = Some(Quantity::exact(0.05e-6));
    ramp.gap.voltage = Some(Quantity::exact(5.0 / 3.0));
    assert!((rate_of(&ramp) - 4300.0).abs() < 0.5);
}

#[test]
fn the_period_in_kilovolts_follows_the_logarithm() {
    // T = RC·ln((Vs − Vr)/(Vs − Vb)) worked out to seven digits for 10 MΩ and 1 nF.
    let rows = [
        (8e3, 5e3, 0.0, 9.808293e-3),
        (8e3, 5e3, 200.0, 9.555114e-3),
        (10e3, 5e3, 0.0, 6.931472e-3),
        (6e3, 5.7e3, 0.0, 29.957323e-3),
    ];
    for (supply, gap, residual, period) in rows {
        let found = period_of(&simple(supply, gap, residual, 10e6, 1e-9));
        // Half a unit of the last printed digit.
        assert!((found - period).abs() < 0.5e-9, "{found} {period}");
        // And back by the inverse law.
        let back = supply - (supply - residual) * (-found / 10e-3).exp();
        assert!(close(back, gap, ALGEBRA));
    }
}

#[test]
fn rates_of_teaching_gaps_follow_from_their_sphere_gap_voltages() {
    // Sphere-gap table for 2 cm spheres gives the gap voltages; the rates are worked out to the printed digits.
    let rows = [
        (6e3, 2.8e3, 4.7e6, 470e-12, 720.15),
        (8e3, 4.7e3, 10e6, 1e-9, 112.928),
        (12e3, 8.0e3, 10e6, 1e-9, 91.024),
        (20e3, 17.4e3, 22e6, 2.2e-9, 10.127),
    ];
    for (supply, gap, r, c, rate) in rows {
        assert!(close(rate_of(&simple(supply, gap, 0.0, r, c)), rate, 1e-4), "{rate}");
    }
    // Self-pulsing discharges with about 10 pF and megohms run at 1 to 15 kHz (published range).
    assert!((1e3..15e3).contains(&rate_of(&simple(8e3, 6e3, 0.0, 10e6, 10e-12))));
}

#[test]
fn a_supply_at_the_gap_voltage_does_not_fire_it() {
    let still = at(&simple(5e3, 5e3, 0.0, 10e6, 1e-9));
    assert_eq!(still.fires, Some(false));
    assert_eq!((still.firing_rate_hz, still.period_s, still.first_firing_s, still.pitch), (None, None, None, None));
    assert!(still.reason.contains("does not fire") && still.reason.contains("above 5.000 kV"), "{}", still.reason);
    // The capacitor is charged all the same.
    assert!(close(still.stored_energy_j.unwrap(), 12.5e-3, ALGEBRA));
}

#[test]
fn a_leakage_raises_the_least_supply_voltage_by_the_divider() {
    let mut leaky = simple(5.4e3, 5e3, 0.0, 10e6, 1e-9);
    leaky.charging.leakage = Some(Quantity::exact(100e6));
    let still = at(&leaky);
    // 5 kV · (10 MΩ + 100 MΩ)/100 MΩ.
    assert_eq!(still.fires, Some(false));
    assert!(close(still.least_supply_v.unwrap(), 5.5e3, ALGEBRA));
    assert_eq!(predict(&leaky, Some(5.51e3)).unwrap().fires, Some(true));
    // A limit of 40 µA lets 100 MΩ rise to 4 kV and no further, whatever the setting.
    leaky.supply.current_limit = Some(Quantity::exact(40e-6));
    let starved = predict(&leaky, Some(20e3)).unwrap();
    assert_eq!((starved.fires, starved.least_supply_v), (Some(false), None));
    assert!(starved.reason.contains("no supply setting"));
}

#[test]
fn a_spread_of_one_percent_makes_1_699_percent_of_jitter() {
    // (dT/T)/(dVb/Vb) = 1.6992 at 8 kV on 5 kV with no residual: σ_T = RC·σ_Vb/(Vs − Vb).
    let mut scattering = simple(8e3, 5e3, 0.0, 10e6, 1e-9);
    scattering.gap.spread = Some(Quantity::exact(0.01));
    let found = at(&scattering);
    let part = found.period_jitter_s.unwrap().value / found.period_s.unwrap().value;
    // Terms of higher order are x² = (σ_Vb/(Vs − Vb))² = 2.8e-4 of it; the mean period rises by 0.014 %.
    assert!(close(part, 0.016_992, 3e-4), "{part}");
    assert!(close(found.period_s.unwrap().value, 9.808_293e-3 * 1.000_14, 1e-5));
}

#[test]
fn tolerances_propagate_by_the_published_sensitivities() {
    // 8 kV (u 80 V), 200 V (u 100 V), 10 MΩ (u 1 %), 1 nF (u 2 %) give a gap voltage of 5000 V with u = 89.5 V (JCGM
    // 100 worked by hand); the same inputs move the period by 89.5 V/(dv/dt), dv/dt = 3000 V/10 ms.
    let toleranced = bench(
        "supply.voltage = \"8 kV (u 80 V)\"\ngap.voltage = \"5 kV\"\ngap.residual_voltage = \"200 V (u 100 V)\"\n\
         charging.resistance = \"10 MΩ (u 1 %)\"\ncharging.capacitance = \"1 nF (u 2 %)\"\n",
    );
    let period = at(&toleranced).period_s.unwrap();
    // The finite step of one standard uncertainty adds terms of third order.
    assert!(close(period.u, 89.5 * 10e-3 / 3000.0, 2e-3), "{}", period.u);
    assert!(period.low < period.value && period.value < period.high);
    let rate = at(&toleranced).firing_rate_hz.unwrap();
    assert!(close(rate.u / rate.value, period.u / period.value, ALGEBRA));
}

#[test]
fn a_limit_counts_with_its_rectangular_uncertainty() {
    let of = |tolerance| {
        at(&{
            let mut one = simple(8e3, 5e3, 0.0, 10e6, 1e-9);
            one.charging.capacitance = Some(Quantity { value: 1e-9, tolerance });
            one
        })
    };
    // T is proportional to C; JCGM 100:2008, 4.3.7.
    let limit = of(Tolerance::Limit(0.05e-9)).period_s.unwrap();
    assert!(close(limit.u / limit.value, 0.05 / 3f64.sqrt(), 1e-6));
}

/// The charging law integrated in small steps: time to the gap voltage and charge out of the supply.
fn integrated(supply_v: f64, r: f64, c: f64, leakage: f64, limit_a: f64, gap_v: f64) -> (f64, f64) {
    let current = |v: f64| ((supply_v - v) / r).min(limit_a);
    let rate = |v: f64| (current(v) - v / leakage) / c;
    let step_s = r * c / 2e5;
    let (mut v, mut t, mut charge) = (0.0, 0.0, 0.0);
    while v < gap_v {
        // Midpoint rule.
        let half = v + 0.5 * step_s * rate(v);
        charge += step_s * current(half);
        v += step_s * rate(half);
        t += step_s;
    }
    (t, charge)
}

#[test]
fn limit_and_leakage_agree_with_plain_integration() {
    // (supply, leakage, limit): no limit reached, limit for a part of the way, limit all the way.
    for (supply, leakage, limit) in [(8e3, 100e6, 1.0), (8e3, 100e6, 0.5e-3), (30e3, 300e6, 0.2e-3)] {
        let mut limited = simple(supply, 5e3, 0.0, 10e6, 1e-9);
        limited.charging.leakage = Some(Quantity::exact(leakage));
        limited.supply.current_limit = Some(Quantity::exact(limit));
        let found = at(&limited);
        let (period, charge) = integrated(supply, 10e6, 1e-9, leakage, limit, 5e3);
        // One step of the integration against the shortest of the periods.
        assert!(close(found.period_s.unwrap().value, period, 1e-4), "{supply}");
        assert!(close(found.first_firing_s.unwrap(), period, 1e-4));
        assert!(close(found.supply_current_a.unwrap(), charge / period, 1e-4));
        assert!(close(found.supply_power_w.unwrap(), supply * charge / period, 1e-4));
    }
}

#[test]
fn a_time_constant_with_a_capacitance_is_the_same_as_resistance_and_capacitance() {
    let by_parts = bench(
        "supply.voltage = \"8 kV\"\ngap.voltage = \"5 kV\"\ncharging.resistance = \"10 MΩ\"\n\
         charging.capacitance = \"1 nF\"\ncharging.leakage = \"200 MΩ\"\ngap.stray_capacitance = \"3 pF\"\n",
    );
    let mut by_constant = by_parts.clone();
    by_constant.charging.resistance = None;
    // A stated time constant is that of the circuit as it stands, with the gap's own 3 pF.
    by_constant.charging.time_constant = Some(Quantity::exact(10.03e-3));
    by_constant.gap.stray_capacitance = None;
    by_constant.charging.capacitance = Some(Quantity::exact(1.003e-9));
    assert!(close(period_of(&by_constant), period_of(&by_parts), ALGEBRA));
    by_constant.charging.capacitance = None;
    let alone = at(&by_constant);
    assert!(close(alone.period_s.unwrap().value, 10.03e-3 * (8.0f64 / 3.0).ln(), ALGEBRA));
    assert_eq!((alone.stored_energy_j, alone.bleed_time_s, alone.supply_current_a), (None, None, None));
    assert!(alone.notes.iter().any(|note| note.contains("charging.leakage is left out")));
}

#[test]
fn a_setting_takes_the_relative_tolerance_of_the_supply_voltage() {
    let toleranced =
        bench("supply.voltage = \"8 kV ± 1 %\"\ngap.voltage = \"5 kV\"\ncharging.time_constant = \"10 ms\"\n");
    let direct = bench("supply.voltage = \"9 kV ± 1 %\"\ngap.voltage = \"5 kV\"\ncharging.time_constant = \"10 ms\"\n");
    let (moved, direct) = (predict(&toleranced, Some(9e3)).unwrap(), at(&direct));
    assert!(close(moved.period_s.unwrap().u, direct.period_s.unwrap().u, ALGEBRA));
}

#[test]
fn near_its_least_supply_voltage_a_prediction_says_that_it_may_not_fire() {
    let near =
        bench("supply.voltage = \"5.05 kV ± 2 %\"\ngap.voltage = \"5 kV\"\ncharging.time_constant = \"10 ms\"\n");
    let found = at(&near);
    assert!(found.notes.iter().any(|note| note.contains("may not fire at all")));
    assert!(found.period_s.unwrap().low > 0.0 && found.firing_rate_hz.unwrap().low > 0.0);
}

#[test]
fn what_is_missing_is_named_and_the_rest_is_still_there() {
    let nothing = at(&Bench::default());
    assert_eq!((nothing.supply_v, nothing.fires, nothing.firing_rate_hz), (None, None, None));
    for key in ["supply.voltage", "gap.voltage", "charging.resistance", "charging.capacitance", "gap.spread"] {
        assert!(nothing.notes.iter().any(|note| note.contains(key)), "{key}");
    }
    let shaped = at(&bench("gap.electrodes = \"spheres\"\ngap.spacing = \"2 mm\"\ncharging.capacitance = \"1 nF\"\n"));
    assert!(shaped.notes.iter().any(|note| note.contains("gap.diameter for spheres")));
    let no_supply =
        at(&bench("gap.voltage = \"5 kV\"\ncharging.capacitance = \"1 nF\"\ncharging.leakage = \"1 GΩ\"\n"));
    assert!(close(no_supply.stored_energy_j.unwrap(), 12.5e-3, ALGEBRA));
    assert!(close(no_supply.bleed_time_s.unwrap(), 4.423, 1e-4));
}

#[test]
fn cautions_and_hazards_are_always_there() {
    for bench in [Bench::default(), simple(8e3, 5e3, 0.0, 10e6, 1e-9), simple(4e3, 5e3, 0.0, 10e6, 1e-6)] {
        let found = at(&bench);
        assert_eq!(found.cautions.len(), CAUTIONS.len());
        assert!(!found.hazards.is_empty());
        let shown = text(&found);
        for caution in CAUTIONS {
            assert!(shown.contains(caution));
        }
        for word in ["safe", "harmless"] {
            assert!(!shown.to_lowercase().contains(word), "{shown}");
        }
    }
    let unbled = at(&simple(8e3, 5e3, 0.0, 10e6, 1e-9)).hazards.join(" ");
    assert!(unbled.contains("Nothing bleeds it") && unbled.contains("only if the supply's output is a short"));
    // 1 µF that does not fire at 4 kV holds 8 J.
    let large = at(&simple(4e3, 5e3, 0.0, 10e6, 1e-6)).hazards.join(" ");
    assert!(large.contains("HAZARD: exceeds 0.25 J"), "{large}");
}

#[test]
fn a_supply_that_can_feed_an_arc_is_warned_of() {
    let warned = |r: f64| at(&simple(8e3, 5e3, 0.0, r, 1e-9)).notes.join(" ");
    // 0.8 mA: none; 8 mA: may glow; 0.8 A: a steady arc.
    assert!(!warned(10e6).contains("can feed"));
    assert!(warned(1e6).contains("may go on glowing"));
    assert!(warned(10e3).contains("steady arc is likely"));
}

#[test]
fn the_object_has_the_published_keys() {
    let json = serde_json::to_value(at(&bench(include_str!("../../examples/benches/north-bench.toml")))).unwrap();
    assert_eq!(json["format"], "gaptone.prediction/1");
    assert_eq!(json["supply_v"], 9200.0);
    assert_eq!(json["fires"], true);
    for key in ["firing_rate_hz", "period_s", "gap_voltage_v", "period_jitter_s"] {
        for part in ["value", "u", "low", "high"] {
            assert!(json[key][part].is_f64(), "{key}.{part}");
        }
    }
    for key in ["first_firing_s", "stored_energy_j", "bleed_time_s", "supply_current_a", "supply_power_w"] {
        assert!(json[key].is_f64(), "{key}");
    }
    assert!(json["notes"].is_array() && json["cautions"].is_array() && json["pitch"]["note"].is_string());
    let back: Prediction = serde_json::from_value(json).unwrap();
    assert!(back.period_s.is_some());
}

#[test]
fn the_example_benches_fire_at_the_rates_that_they_announce() {
    let rate = |text| rate_of(&bench(text));
    assert!((1.8..2.2).contains(&rate(include_str!("../../examples/benches/slow-demonstration.toml"))));
    assert!((2500.0..2700.0).contains(&rate(include_str!("../../examples/benches/fast-gap.toml"))));
    let rippled = at(&bench(include_str!("../../examples/benches/mains-ripple.toml")));
    assert!(rippled.notes.iter().any(|note| note.contains("supply.ripple")));
}

#[test]
fn a_senseless_setting_is_refused() {
    let some = simple(8e3, 5e3, 0.0, 10e6, 1e-9);
    for volts in [0.0, -5.0, f64::NAN, f64::INFINITY] {
        assert!(matches!(predict(&some, Some(volts)), Err(PredictError::Supply(_))));
        assert!(matches!(supply_for_rate(&some, volts), Err(PredictError::Rate(_))));
    }
    assert!(matches!(sweep(&some, 9e3, 6e3, 5), Err(PredictError::Range { .. })));
    assert!(matches!(sweep(&some, 6e3, f64::NAN, 5), Err(PredictError::Range { .. })));
    assert!(matches!(sweep(&some, 6e3, 9e3, 1), Err(PredictError::Range { .. })));
}

#[test]
fn a_sweep_runs_evenly_from_end_to_end() {
    let swept = sweep(&simple(8e3, 5e3, 0.0, 10e6, 1e-9), 4e3, 8e3, 5).unwrap();
    let settings: Vec<_> = swept.settings.iter().map(|one| (one.supply_v.unwrap(), one.fires.unwrap())).collect();
    assert_eq!(settings, [(4e3, false), (5e3, false), (6e3, true), (7e3, true), (8e3, true)]);
}

#[test]
fn a_rate_that_no_setting_gives_is_refused_with_what_can_be_had() {
    let mut ramp = simple(8e3, 5e3, 0.0, 10e6, 1e-9);
    ramp.charging.resistance = None;
    ramp.charging.current = Some(Quantity::exact(1e-3));
    // 1 mA into 1 nF over 5 kV: 200 /s at every setting.
    let refused = supply_for_rate(&ramp, 440.0).expect_err("out of reach").to_string();
    assert!(refused.contains("200.0 to 200.0"), "{refused}");
    assert!(matches!(supply_for_rate(&Bench::default(), 440.0), Err(PredictError::Missing(_))));
}

proptest! {
    #[test]
    fn the_setting_for_a_rate_gives_that_rate(rate_hz in 1.0..3000.0f64, residual_v in -2e3..2e3f64) {
        let mut leaky = simple(8e3, 5e3, residual_v, 10e6, 1e-9);
        leaky.charging.leakage = Some(Quantity::exact(500e6));
        // Slower than 27 time constants is beyond what a double can hold of a supply voltage.
        prop_assume!(rate_hz > 4.0);
        let supply_v = supply_for_rate(&leaky, rate_hz).map_err(|error| TestCaseError::fail(error.to_string()))?;
        let found = predict(&leaky, Some(supply_v)).unwrap().firing_rate_hz.unwrap().value;
        // At slow rates the last bit of the supply voltage moves the rate.
        prop_assert!(close(found, rate_hz, 1e-3), "{found} {rate_hz} at {supply_v}");
    }

    #[test]
    fn the_rate_rises_with_the_supply_and_the_inverse_law_gives_the_gap_voltage_back(
        supply_v in 5.1e3..50e3f64, more in 1.001..2.0f64, residual_v in -4e3..4e3f64,
    ) {
        let lower = simple(supply_v, 5e3, residual_v, 10e6, 1e-9);
        let period = period_of(&lower);
        prop_assert!(rate_of(&simple(supply_v * more, 5e3, residual_v, 10e6, 1e-9)) > 1.0 / period);
        let back = supply_v - (supply_v - residual_v) * (-period / 10e-3).exp();
        prop_assert!(close(back, 5e3, ALGEBRA));
    }

    #[test]
    fn any_bench_gives_finite_figures_or_none(
        supply_v in 1.0..1e6f64, gap_v in 1.0..1e6f64, residual_part in -0.99..0.99f64, power in -14i32..0,
        leakage in 1.0..1e12f64, limit_a in 1e-9..1.0f64, spread in 0.0..0.99f64,
    ) {
        let mut any = simple(supply_v, gap_v, residual_part * gap_v, 1e6, 10f64.powi(power));
        any.charging.leakage = Some(Quantity { value: leakage, tolerance: Tolerance::Standard(0.3 * leakage) });
        any.supply.current_limit = Some(Quantity::exact(limit_a));
        any.gap.spread = Some(Quantity::exact(spread));
        let found = at(&any);
        let estimates = [found.firing_rate_hz, found.period_s, found.period_jitter_s, found.gap_voltage_v];
        for estimate in estimates.into_iter().flatten() {
            prop_assert!(estimate.is_finite() && estimate.low <= estimate.value && estimate.value <= estimate.high);
        }
        let plain = [found.first_firing_s, found.stored_energy_j, found.bleed_time_s, found.supply_current_a];
        for value in plain.into_iter().flatten() {
            prop_assert!(value.is_finite() && value >= 0.0);
        }
        prop_assert_eq!(found.fires == Some(true), found.period_s.is_some());
        prop_assert!(text(&found).contains("Cautions"));
    }
}

#[test]
fn a_rate_out_of_reach_is_told_with_no_more_digits_than_help() {
    let error =
        PredictError::Unreachable { rate_hz: 5e5, low_hz: 0.123_456_789, high_hz: 61_234.567, most_v: 99_999.999 };
    assert_eq!(
        error.to_string(),
        "no supply setting up to 100.0 kV gives 500000 firings a second; the bench reaches 0.1235 to 61230"
    );
}
