//! The charging law against published examples and against a general circuit simulator.

mod circuit_table;

use circuit_table::{Row, rows};
use gaptone::bench::{Bench, Quantity};
use gaptone::model::charging::{Circuit, NoFiring, NoVoltage, Parts, Ripple};
use proptest::prelude::*;

/// What remains when the law is inverted: rounding only.
const ROUND_TRIP: f64 = 1e-9;

fn resistor(supply_v: f64, resistance_ohm: f64, capacitance_f: f64, residual_v: f64) -> Circuit {
    Parts {
        supply_v: Some(supply_v),
        resistance_ohm: Some(resistance_ohm),
        capacitance_f: Some(capacitance_f),
        residual_v,
        ..Parts::default()
    }
    .circuit()
    .expect("supply, resistor and capacitor are enough")
}

fn close(found: f64, expected: f64, relative: f64) {
    assert!((found / expected - 1.0).abs() <= relative, "found {found}, expected {expected}");
}

#[test]
fn the_neon_flasher_of_the_textbook_flashes_every_16_636_seconds() {
    // Alexander and Sadiku, Fundamentals of Electric Circuits, chapter 7: fires at 75 V, goes out at 30 V, 120 Ω lit,
    // 120 V through 4 MΩ on 6 µF; interval 16.636 s (charging and the lit time together).
    let lit_s = 120.0 * 6e-6 * (75.0f64 / 30.0).ln();
    close(lit_s, 0.659_7e-3, 1e-4);
    let charging = resistor(120.0, 4e6, 6e-6, 30.0).period_s(75.0).unwrap();
    assert!((charging + lit_s - 16.636).abs() < 0.001, "{charging}");
}

#[test]
fn the_logic_gate_oscillator_runs_at_its_printed_frequency() {
    // Public circuit write-up of a Schmitt-gate relaxation oscillator: 1 kΩ, 100 nF, 5 V and 0 V, thresholds 2.5 V and
    // 0.6 V, printed 5018.82 Hz. The way down from 2.5 V to 0.6 V is the way up of the mirrored circuit.
    let up = resistor(5.0, 1e3, 100e-9, 0.6).period_s(2.5).unwrap();
    let down = resistor(5.0, 1e3, 100e-9, 2.5).period_s(4.4).unwrap();
    close(1.0 / (up + down), 5018.82, 1e-4);
}

#[test]
fn the_unijunction_sawtooth_has_its_printed_period() {
    // Chattopadhyay and Rakshit, Electronics, chapter 16 example 1: 40 V, fires at 15 V, 50 kΩ, 2 nF: 47 µs.
    close(resistor(40.0, 50e3, 2e-9, 0.0).period_s(15.0).unwrap(), 47e-6, 1e-3);
}

#[test]
fn the_op_amp_astable_has_its_printed_frequency() {
    // Textbook example 10.10: ± 15 V, divider 86 kΩ over 100 kΩ, 100 kΩ, 0.1 µF: 49.97 Hz. Each half swings from −βV to
    // +βV towards +V; shifted up by βV it is a circuit that charges from 0 V.
    let beta = 86.0 / 186.0;
    let half = resistor(15.0 * (1.0 + beta), 100e3, 0.1e-6, 0.0).period_s(30.0 * beta).unwrap();
    close(0.5 / half, 49.97, 1e-4);
}

#[test]
fn the_constant_current_ramp_has_its_printed_frequency() {
    // Textbook example 9.6: (5 − 0.7) V / 12 kΩ into 0.05 µF over a swing of 5/3 V: 4.300 kHz.
    let ramp = Parts { current_a: Some(4.3 / 12e3), capacitance_f: Some(0.05e-6), ..Parts::default() };
    let circuit = ramp.circuit().unwrap();
    close(1.0 / circuit.period_s(5.0 / 3.0).unwrap(), 4300.0, 1e-4);
    close(circuit.gap_voltage_v(1.0 / 4300.0).unwrap(), 5.0 / 3.0, 1e-4);
}

#[test]
fn bench_rows_in_kilovolts_come_out_and_return() {
    // Closed form evaluated independently, to the printed digits.
    for (supply, gap, residual, period_ms) in [
        (8e3, 5e3, 0.0, 9.808_293),
        (8e3, 5e3, 200.0, 9.555_114),
        (10e3, 5e3, 0.0, 6.931_472),
        (6e3, 5.7e3, 0.0, 29.957_323),
    ] {
        let circuit = resistor(supply, 10e6, 1e-9, residual);
        let period = circuit.period_s(gap).unwrap();
        close(period * 1e3, period_ms, 1e-7);
        close(circuit.gap_voltage_v(period).unwrap(), gap, ROUND_TRIP);
    }
}

#[test]
fn half_the_supply_is_reached_after_rc_ln_2() {
    close(resistor(9e3, 2e6, 3e-9, 0.0).period_s(4.5e3).unwrap(), 6e-3 * 2f64.ln(), 1e-14);
}

#[test]
fn a_gap_at_or_above_the_supply_does_not_fire() {
    let circuit = resistor(5e3, 1e6, 1e-9, 0.0);
    for gap_v in [5e3, 5.001e3, 1e5] {
        assert!(matches!(circuit.period_s(gap_v), Err(NoFiring::OutOfReach { .. })), "{gap_v}");
        assert!(circuit.first_firing_s(gap_v).is_err());
    }
    assert!(matches!(resistor(5e3, 1e6, 1e-9, 2e3).period_s(1.9e3), Err(NoFiring::BelowResidual { .. })));
    assert!(circuit.period_s(f64::NAN).is_err());
}

#[test]
fn the_slope_of_the_inverse_is_the_published_sensitivity() {
    // dT/dVb = RC/(Vs − Vb): 1 % spread of 5 kV at 8 kV gives 1.699 % of the period.
    let circuit = resistor(8e3, 10e6, 1e-9, 0.0);
    let relative = 5e3 / circuit.slope_v_per_s(5e3) / circuit.period_s(5e3).unwrap();
    close(relative, 1.699_2, 1e-4);
}

#[test]
fn periods_that_no_gap_voltage_gives_are_refused() {
    let parts = Parts {
        supply_v: Some(8e3),
        resistance_ohm: Some(1e6),
        capacitance_f: Some(1e-9),
        conduction_s: 20e-6,
        ..Parts::default()
    };
    let circuit = parts.circuit().unwrap();
    for period in [20e-6, 0.0, -1.0, f64::NAN] {
        assert!(matches!(circuit.gap_voltage_v(period), Err(NoVoltage::TooShort { .. })), "{period}");
    }
    assert!(matches!(circuit.gap_voltage_v(13e-3), Err(NoVoltage::TooLong { .. })));
    let stuck = Parts { residual_v: 9e3, ..parts }.circuit().unwrap();
    assert!(matches!(stuck.gap_voltage_v(1e-3), Err(NoVoltage::DoesNotCharge { .. })));
    let ramp = Parts { current_a: Some(1e-3), ..parts }.circuit().unwrap();
    assert!(matches!(ramp.gap_voltage_v(9e-3), Err(NoVoltage::AboveSupply { .. })));
    assert!(ramp.period_s(8.1e3).is_err());
    assert!(Parts { supply_v: None, ..parts }.circuit().is_err());
    assert!(Parts { current_a: Some(1e-3), supply_v: None, ..parts }.circuit().unwrap().gap_voltage_v(9.0).is_ok());
}

#[test]
fn a_missing_part_is_named_by_its_key() {
    let mut bench = Bench::default();
    let key = |bench: &Bench| Circuit::from_bench(bench, None).unwrap_err().key;
    assert!(key(&bench).contains("charging.time_constant"));
    bench.charging.resistance = Some(Quantity::exact(1e6));
    assert_eq!(key(&bench), "charging.capacitance");
    bench.charging.capacitance = Some(Quantity::exact(1e-9));
    assert_eq!(key(&bench), "supply.voltage");
    assert!(Circuit::from_bench(&bench, Some(Quantity::exact(8e3))).is_ok());
    bench.supply.voltage = Some(Quantity::exact(8e3));
    bench.supply.ripple = Some(Quantity::exact(0.01));
    assert_eq!(key(&bench), "supply.ripple_frequency");
    let mut tau = Bench::default();
    tau.supply.voltage = Some(Quantity::exact(8e3));
    tau.charging.time_constant = Some(Quantity::exact(1e-3));
    assert!(Circuit::from_bench(&tau, None).is_ok());
    tau.charging.leakage = Some(Quantity::exact(1e8));
    assert!(key(&tau).contains("charging.resistance"));
}

/// Largest relative difference to the simulated mean period where the law knows everything. The simulator's own step
/// shows up to 4e-5.
const SIMULATOR: f64 = 1e-4;

fn check_rows(condition: &str, expected_rows: usize) {
    let table = rows(condition);
    assert_eq!(table.len(), expected_rows, "{condition}");
    for row in table {
        let circuit = row.parts().circuit().unwrap();
        let period = circuit.period_s(row.gap_v).unwrap();
        assert!((period / row.period_s - 1.0).abs() < SIMULATOR, "{} {period} {}", row.case, row.period_s);
        let gap_v = circuit.gap_voltage_v(row.period_s).unwrap();
        assert!((gap_v / row.gap_v - 1.0).abs() < SIMULATOR, "{} {gap_v} {}", row.case, row.gap_v);
    }
}

#[test]
fn a_simulated_circuit_without_residual_voltage_keeps_the_law() {
    check_rows("base", 30);
}

#[test]
fn a_simulated_residual_voltage_shortens_the_period_as_the_law_says() {
    check_rows("res05", 30);
    check_rows("res20", 30);
}

#[test]
fn a_simulated_probe_of_100_megohms_is_a_leakage() {
    check_rows("probe", 30);
}

#[test]
fn a_simulated_current_limit_is_a_ramp_and_then_an_exponential() {
    check_rows("ilim", 30);
}

#[test]
fn a_simulated_tank_adds_conduction_time_stray_capacitance_and_a_signed_residual() {
    check_rows("tank", 12);
    check_rows("tankarc", 12);
}

#[test]
fn the_first_firing_of_a_simulated_circuit_starts_from_zero_volts() {
    for row in rows("base").iter().chain(&rows("ilim")).chain(&rows("probe")) {
        let first = row.parts().circuit().unwrap().first_firing_s(row.gap_v).unwrap();
        assert!((first / row.first_firing_s - 1.0).abs() < SIMULATOR, "{} {first}", row.case);
    }
}

#[test]
fn with_ripple_the_exact_crossing_solves_the_differential_equation() {
    // Against a plain Runge–Kutta integration of C·dv/dt with ripple and current limit together.
    let ripple = Ripple { fraction: 0.05, frequency_hz: 100.0, phase_rad: 0.4 };
    for limit_a in [None, Some(3.3e-3)] {
        let parts = Parts {
            supply_v: Some(4592.0),
            resistance_ohm: Some(1.2e6),
            capacitance_f: Some(6.8e-9),
            leakage_ohm: Some(50e6),
            current_limit_a: limit_a,
            ripple: Some(ripple),
            ..Parts::default()
        };
        let circuit = parts.circuit().unwrap();
        let rate = |t: f64, v: f64| {
            let current = (4592.0 * ripple.factor_at(t) - v) / 1.2e6;
            (current.min(limit_a.unwrap_or(f64::INFINITY)) - v / 50e6) / 6.8e-9
        };
        let (mut t, mut v, h) = (3e-3, 100.0, 1e-6);
        for _ in 0..9000 {
            let a = rate(t, v);
            let b = rate(t + 0.5 * h, v + 0.5 * h * a);
            let c = rate(t + 0.5 * h, v + 0.5 * h * b);
            let d = rate(t + h, v + h * c);
            v += h / 6.0 * (a + 2.0 * b + 2.0 * c + d);
            t += h;
        }
        // The kink of the limit costs the integration about h per crossing of it.
        close(circuit.voltage_after(100.0, 3e-3, 9e-3), v, 1e-7);
        let strength = gaptone::model::charging::Strength::settled(v);
        close(circuit.time_to_breakdown_s(100.0, 3e-3, &strength).unwrap(), 9e-3, 1e-6);
    }
}

#[test]
fn ripple_lets_a_gap_just_above_the_supply_fire_and_one_above_the_crest_not() {
    let ripple = Ripple { fraction: 0.02, frequency_hz: 10.0, phase_rad: 0.0 };
    let circuit = resistor(5e3, 1e6, 1e-9, 0.0).with_ripple(Some(ripple));
    let fires =
        |gap_v: f64| circuit.time_to_breakdown_s(0.0, 0.0, &gaptone::model::charging::Strength::settled(gap_v)).is_ok();
    assert!(fires(5.05e3));
    assert!(fires(circuit.crest_v() * (1.0 - 1e-9)));
    assert!(!fires(circuit.crest_v() * (1.0 + 1e-9)));
}

fn any_parts() -> impl Strategy<Value = Parts> {
    let probe = prop::option::of(1e2..1e5f64);
    let limit = prop::option::of(0.05..3.0f64);
    (500.0..30e3f64, 1e4..1e8f64, 1e-11..1e-6f64, -0.05..0.3f64, 0.0..5e-5f64, probe, limit).prop_map(
        |(supply_v, resistance, capacitance, residual, conduction_s, probe, limit)| Parts {
            supply_v: Some(supply_v),
            resistance_ohm: Some(resistance),
            capacitance_f: Some(capacitance),
            leakage_ohm: probe.map(|ratio| ratio * resistance),
            current_limit_a: limit.map(|share| share * supply_v / resistance),
            residual_v: residual * supply_v,
            conduction_s,
            ..Parts::default()
        },
    )
}

/// Period by stepping through time: Runge's and Kutta's method on the currents of the circuit and a straight line to the crossing.
fn stepped_period_s(parts: &Parts, gap_v: f64, step_s: f64) -> f64 {
    let (supply_v, r, c) = (parts.supply_v.unwrap(), parts.resistance_ohm.unwrap(), parts.capacitance_f.unwrap());
    let limit_a = parts.current_limit_a.unwrap_or(f64::INFINITY);
    let leak_s = parts.leakage_ohm.map_or(0.0, f64::recip);
    let rise = |v: f64| (((supply_v - v) / r).min(limit_a) - v * leak_s) / c;
    let (mut v, mut t) = (parts.residual_v, parts.conduction_s);
    loop {
        let k1 = rise(v);
        let k2 = rise(v + 0.5 * step_s * k1);
        let k3 = rise(v + 0.5 * step_s * k2);
        let k4 = rise(v + step_s * k3);
        let next = v + (k1 + 2.0 * k2 + 2.0 * k3 + k4) * step_s / 6.0;
        if next >= gap_v {
            return t + step_s * (gap_v - v) / (next - v);
        }
        v = next;
        t += step_s;
    }
}

proptest! {
    #[test]
    fn the_closed_form_is_what_plain_stepping_through_time_gives(parts in any_parts(), share in 0.05..0.95f64) {
        let circuit = parts.circuit().unwrap();
        let gap_v = circuit.residual_v() + share * (circuit.reach_v() - circuit.residual_v());
        let period_s = circuit.period_s(gap_v).unwrap();
        let charging_s = period_s - circuit.conduction_s();
        let stepped_s = stepped_period_s(&parts, gap_v, charging_s / 4000.0);
        // A step across the knee of a current limit and the straight line at the end leave less than 1e-6.
        prop_assert!((stepped_s / period_s - 1.0).abs() < 1e-6, "{stepped_s} {period_s}");
    }
}

proptest! {
    #[test]
    fn predict_then_invert_returns_the_gap_voltage(parts in any_parts(), share in 0.05..0.98f64) {
        let circuit = parts.circuit().unwrap();
        let residual = circuit.residual_v();
        let gap_v = residual + share * (circuit.reach_v() - residual);
        let period = circuit.period_s(gap_v).unwrap();
        let back = circuit.gap_voltage_v(period).unwrap();
        prop_assert!((back / gap_v - 1.0).abs() < ROUND_TRIP || (back - gap_v).abs() < ROUND_TRIP * circuit.reach_v());
    }

    #[test]
    fn the_rate_rises_with_the_supply_voltage(parts in any_parts(), share in 0.4..0.98f64, step in 1.001..2.0f64) {
        // With a current limit the rate may stand still, never fall.
        let circuit = parts.circuit().unwrap();
        let gap_v = share * circuit.reach_v();
        prop_assume!(gap_v > circuit.residual_v());
        let period = circuit.period_s(gap_v).unwrap();
        let higher = Parts { supply_v: parts.supply_v.map(|v| v * step), ..parts }.circuit().unwrap();
        let faster = higher.period_s(gap_v).unwrap();
        prop_assert!(faster <= period * (1.0 + 1e-12));
        if parts.current_limit_a.is_none() {
            prop_assert!(faster < period);
        }
    }

    #[test]
    fn slope_and_curvature_are_the_derivatives_of_the_voltage(parts in any_parts(), share in 0.1..0.9f64) {
        let circuit = parts.circuit().unwrap();
        let residual = circuit.residual_v();
        let gap_v = residual + share * (circuit.reach_v() - residual);
        prop_assume!(circuit.knee_v().is_none_or(|knee| (knee / gap_v - 1.0).abs() > 1e-3));
        let period = circuit.period_s(gap_v).unwrap();
        let h = 1e-5 * (period - circuit.conduction_s());
        let (up, down) = (circuit.gap_voltage_v(period + h).unwrap(), circuit.gap_voltage_v(period - h).unwrap());
        prop_assert!(((up - down) / (2.0 * h) / circuit.slope_v_per_s(gap_v) - 1.0).abs() < 1e-6);
        let slopes = (circuit.slope_v_per_s(up) - circuit.slope_v_per_s(down)) / (2.0 * h);
        let curvature = circuit.curvature_v_per_s2(gap_v);
        prop_assert!((slopes - curvature).abs() <= 1e-5 * curvature.abs() + 1e-9 * circuit.slope_v_per_s(gap_v) / h);
    }
}

#[test]
fn a_row_of_the_table_reads_as_printed() {
    let row: Row = rows("base").remove(0);
    assert_eq!((row.case.as_str(), row.resistance_ohm, row.gap_v), ("A-1.050-base", 1.2e6, 2870.0));
}
