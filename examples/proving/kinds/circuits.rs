//! Firings of a charging circuit with a known gap voltage.

use crate::case::{Draft, Truth};
use crate::circuit::Circuit;
use crate::firings::{Plan, Strike, realised};
use crate::random::Dice;
use crate::scene::Scene;

/// Firings of the run that tells what the process settles to.
const LONG_RUN: f64 = 20_000.0;

/// Voltage spread, nothing else.
pub fn voltage(dice: &mut Dice) -> Draft {
    let circuit = Circuit::draw(dice, 10.0, 900.0);
    recording(dice, circuit)
}

/// Each firing voltage correlated with the last, up to 0.9.
pub fn memory(dice: &mut Dice) -> Draft {
    let circuit = Circuit { memory: dice.uniform(0.2, 0.9), ..Circuit::draw(dice, 10.0, 900.0) };
    recording(dice, circuit)
}

/// Supply ripple of 50..120 Hz.
pub fn ripple(dice: &mut Dice) -> Draft {
    let circuit = Circuit {
        ripple: (dice.log_uniform(0.001, 0.02), dice.pick(&[50.0, 60.0, 100.0, 120.0])),
        ..Circuit::draw(dice, 20.0, 900.0)
    };
    recording(dice, circuit)
}

/// Gap voltage drifting 3..10 % over the recording.
pub fn drift(dice: &mut Dice) -> Draft {
    let mut circuit = Circuit::draw(dice, 10.0, 900.0);
    // Leave the supply room above the drifted gap.
    circuit.supply_v = circuit.supply_v.max(circuit.gap_v / 0.86);
    circuit.drift = dice.sign() * dice.uniform(0.03, 0.1);
    recording(dice, circuit)
}

fn recording(dice: &mut Dice, circuit: Circuit) -> Draft {
    let duration_s = Plan::duration(dice, circuit.period_s());
    let run = circuit.run(dice, duration_s);
    let mut truth = Truth::of_times(&run.times_s);
    truth.circuit = Some(circuit.truth(&run));
    if circuit.drift == 0.0 {
        let long = circuit.run(dice, LONG_RUN * circuit.period_s());
        let process = realised(&[long.times_s]);
        truth = truth.with_process(1.0 / process.rate_hz, process.jitter_s);
    }
    // The click follows the voltage, and a little of everything else.
    let spread = dice.log_uniform(0.003, 0.05);
    let strikes = run
        .times_s
        .iter()
        .zip(&run.voltages_v)
        .map(|(&time_s, v)| Strike { time_s, size: v / circuit.gap_v * (spread * dice.normal()).exp() })
        .collect();
    Draft::gap(Scene::ordinary(dice, duration_s, strikes), truth)
}
