//! Firings of a charging circuit: a capacitor charged through a resistor, fired whenever it reaches a gap voltage
//! that differs from firing to firing. Each crossing is found by stepping and bisection. SI units.

use crate::case::CircuitTruth;
use crate::random::Dice;
use std::f64::consts::TAU;

/// A circuit with its gap.
#[derive(Clone, Copy)]
pub struct Circuit {
    /// Mean of the supply, V.
    pub supply_v: f64,
    /// Charging resistance, Ω.
    pub resistance_ohm: f64,
    /// Capacitance, F.
    pub capacitance_f: f64,
    /// Mean voltage at breakdown, V.
    pub gap_v: f64,
    /// Standard deviation from firing to firing, relative.
    pub spread: f64,
    /// First-order memory from firing to firing.
    pub memory: f64,
    /// Relative change of the mean gap voltage over the recording.
    pub drift: f64,
    /// Voltage left after a spark, V.
    pub residual_v: f64,
    /// Ripple of the supply: relative peak and frequency in hertz.
    pub ripple: (f64, f64),
}

/// What the circuit did.
pub struct Run {
    /// Firing times, s.
    pub times_s: Vec<f64>,
    /// Voltage at each, V.
    pub voltages_v: Vec<f64>,
}

impl Circuit {
    /// Draws a steady circuit whose rate is in the given range, 1/s.
    pub fn draw(dice: &mut Dice, slowest_hz: f64, fastest_hz: f64) -> Self {
        let gap_v = dice.log_uniform(2e3, 2e4);
        let supply_v = gap_v / dice.uniform(0.3, 0.88);
        let residual_v = gap_v * dice.pick(&[0.0, 0.05, 0.1]);
        let period_s = 1.0 / dice.log_uniform(slowest_hz, fastest_hz);
        let time_constant_s = period_s / ((supply_v - residual_v) / (supply_v - gap_v)).ln();
        let capacitance_f = dice.log_uniform(1e-9, 3e-8);
        // Scatter of the voltage as the scatter of periods wants it: dT/dV = RC/(V∞ − Vb).
        let jitter = dice.log_uniform(0.002, 0.08);
        let spread = jitter * period_s * (supply_v - gap_v) / time_constant_s / gap_v;
        Self {
            supply_v,
            resistance_ohm: time_constant_s / capacitance_f,
            capacitance_f,
            gap_v,
            spread,
            memory: 0.0,
            drift: 0.0,
            residual_v,
            ripple: (0.0, 100.0),
        }
    }

    /// Nominal period, s.
    pub fn period_s(&self) -> f64 {
        self.time_constant_s() * ((self.supply_v - self.residual_v) / (self.supply_v - self.gap_v)).ln()
    }

    fn time_constant_s(&self) -> f64 {
        self.resistance_ohm * self.capacitance_f
    }

    /// Runs for a length of time, starting somewhere within a period.
    pub fn run(&self, dice: &mut Dice, duration_s: f64) -> Run {
        let mut run = Run { times_s: Vec::new(), voltages_v: Vec::new() };
        let phase = dice.phase();
        let mut deviation = dice.normal();
        let mut time = -dice.uniform(0.0, 0.9) * self.period_s();
        loop {
            let drift = 1.0 + self.drift * (time / duration_s - 0.5);
            // A gap that the supply cannot reach would never fire again; keep the draw below it.
            let highest = self.supply_v * (1.0 - self.ripple.0) * 0.995;
            let target = (self.gap_v * drift * (1.0 + self.spread * deviation)).min(highest);
            time = self.crossing(time, target, phase);
            if time >= duration_s - 2e-3 {
                return run;
            }
            if time > 1e-4 {
                run.times_s.push(time);
                run.voltages_v.push(target);
            }
            deviation = self.memory * deviation + (1.0 - self.memory * self.memory).sqrt() * dice.normal();
        }
    }

    /// When the capacitor, at the residual voltage at `start`, reaches `target`.
    fn crossing(&self, start: f64, target: f64, phase: f64) -> f64 {
        let step = self.period_s() / 100.0;
        let mut high = step;
        while self.voltage(start, high, phase) < target {
            high += step;
        }
        let mut low = high - step;
        for _ in 0..50 {
            let middle = 0.5 * (low + high);
            if self.voltage(start, middle, phase) < target { low = middle } else { high = middle }
        }
        start + 0.5 * (low + high)
    }

    /// Capacitor voltage `t` after `start`: constant and sinusoidal part of the supply superposed.
    fn voltage(&self, start: f64, t: f64, phase: f64) -> f64 {
        let rc = self.time_constant_s();
        let (relative, frequency_hz) = self.ripple;
        let omega = TAU * frequency_hz;
        let lag = (omega * rc).atan();
        let swing = self.supply_v * relative / (omega * rc).hypot(1.0);
        let forced = |t: f64| swing * (omega * (start + t) + phase - lag).sin();
        let free = self.residual_v - self.supply_v - forced(0.0);
        self.supply_v + forced(t) + free * (-t / rc).exp()
    }

    /// Numbers for the bench file, with the voltages a run realised.
    pub fn truth(&self, run: &Run) -> CircuitTruth {
        let n = run.voltages_v.len() as f64;
        let mean = run.voltages_v.iter().sum::<f64>() / n;
        let variance = run.voltages_v.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / (n - 1.0);
        CircuitTruth {
            gap_voltage_v: mean,
            gap_voltage_spread_v: variance.sqrt(),
            supply_v: self.supply_v,
            resistance_ohm: self.resistance_ohm,
            capacitance_f: self.capacitance_f,
            residual_v: self.residual_v,
        }
    }
}
