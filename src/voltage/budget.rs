//! The uncertainty budgets of the gap voltage and of its spread: which inputs there are and how they act.
//!
//! The rules of propagation are those of [`crate::uncertainty`]; here stand the parts of a bench, the statistics of the
//! firings, a ripple whose phase is not known (arcsine), and the correction for the pull of the ripple on the rate.

use super::scatter::Scatter;
use crate::bench::{Bench, Quantity, Tolerance};
use crate::estimate::Estimate;
use crate::model::charging::{Circuit, Parts};
use crate::uncertainty::{Budget, Distribution, Input, Problem};

/// A part of a bench that the voltage depends on.
struct Part {
    name: &'static str,
    unit: &'static str,
    /// What would reduce its uncertainty.
    remedy: &'static str,
    stated: fn(&Bench) -> Option<Quantity>,
    place: fn(&mut Parts, f64),
}

const METER: &str = "read the supply with a better meter, or have this one calibrated";
const CALIBRATE: &str =
    "measure it, or let calibrate find the time constant from recordings at several supply settings";
const CURRENT: &str = "measure the current with a better meter";

/// The parts of a bench that the voltage depends on.
const PARTS: [Part; 10] = [
    Part {
        name: "supply voltage",
        unit: "V",
        remedy: METER,
        stated: |b| b.supply.voltage,
        place: |p, x| p.supply_v = Some(x),
    },
    Part {
        name: "supply current limit",
        unit: "A",
        remedy: CURRENT,
        stated: |b| b.supply.current_limit,
        place: |p, x| p.current_limit_a = Some(x),
    },
    Part {
        name: "charging resistance",
        unit: "Ω",
        remedy: CALIBRATE,
        stated: |b| b.charging.resistance,
        place: |p, x| p.resistance_ohm = Some(x),
    },
    Part {
        name: "charging current",
        unit: "A",
        remedy: CURRENT,
        stated: |b| b.charging.current,
        place: |p, x| p.current_a = Some(x),
    },
    Part {
        name: "time constant",
        unit: "s",
        remedy: CALIBRATE,
        stated: |b| b.charging.time_constant,
        place: |p, x| p.time_constant_s = Some(x),
    },
    Part {
        name: "capacitance",
        unit: "F",
        remedy: CALIBRATE,
        stated: |b| b.charging.capacitance,
        place: |p, x| p.capacitance_f = Some(x),
    },
    Part {
        name: "leakage",
        unit: "Ω",
        remedy: "measure the leakage with the gap opened, or take the divider off",
        stated: |b| b.charging.leakage,
        place: |p, x| p.leakage_ohm = Some(x),
    },
    Part {
        name: "residual voltage",
        unit: "V",
        remedy: "find it from recordings at several supply settings with calibrate --residual",
        stated: |b| b.gap.residual_voltage,
        place: |p, x| p.residual_v = x,
    },
    Part {
        name: "conduction time",
        unit: "s",
        remedy: "run slower, so that it is a smaller part of the period",
        stated: |b| b.gap.conduction_time,
        place: |p, x| p.conduction_s = x,
    },
    Part {
        name: "stray capacitance",
        unit: "F",
        remedy: CALIBRATE,
        stated: |b| b.gap.stray_capacitance,
        place: |p, x| p.stray_f = x,
    },
];

/// What the uncertainty is computed from.
pub(super) struct Sources<'a> {
    pub bench: &'a Bench,
    pub period: Estimate,
    pub scatter: &'a Scatter,
    /// dV/dT, V/s.
    pub slope: f64,
    pub firings: u64,
    /// Standard uncertainty of the correction for the pull of the mains ripple, V.
    pub pull_u_v: f64,
}

/// Percentage of a fraction with two significant digits.
fn percent(fraction: f64) -> String {
    let percent = 100.0 * fraction;
    let digits = if percent >= 1.0 { 1 } else { (1.0 - percent.max(1e-6).log10().floor()) as usize };
    let text = format!("{percent:.digits$}");
    let text = if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.') } else { &text };
    format!("{text} %")
}

fn tolerance_text(quantity: &Quantity) -> String {
    match quantity.tolerance {
        Tolerance::Exact => String::new(),
        Tolerance::Limit(half_width) if quantity.value != 0.0 => {
            format!(" (± {})", percent(half_width / quantity.value.abs()))
        }
        Tolerance::Standard(u) if quantity.value != 0.0 => format!(" (u {})", percent(u / quantity.value.abs())),
        Tolerance::Limit(amount) => format!(" (± {amount})"),
        Tolerance::Standard(amount) => format!(" (u {amount})"),
    }
}

/// Mean voltage of a circuit for periods of this mean and scatter: three nodes of Gauss–Hermite quadrature, exact for a law
/// of fifth degree.
fn mean_voltage(circuit: &Circuit, period_s: f64, scatter_s: f64) -> Option<f64> {
    let at = |period_s: f64| circuit.gap_voltage_v(period_s).ok();
    let reach = 3f64.sqrt() * scatter_s;
    let middle = at(period_s)?;
    match (at(period_s - reach), at(period_s + reach)) {
        (Some(low), Some(high)) => Some((low + 4.0 * middle + high) / 6.0),
        _ => Some(middle),
    }
}

impl Sources<'_> {
    /// The parts that are not exact, with their inputs.
    fn parts(&self) -> (Vec<&'static Part>, Vec<Input>) {
        PARTS
            .iter()
            .filter_map(|part| {
                let quantity = (part.stated)(self.bench).filter(|quantity| quantity.u() > 0.0)?;
                let name = format!("{}{}", part.name, tolerance_text(&quantity));
                Some((part, Input::of_quantity(name, part.unit, &quantity).reduced_by(part.remedy)))
            })
            .unzip()
    }

    /// Distribution of a statistical figure of the firings.
    fn statistical(&self, u: f64) -> Distribution {
        let freedom = self.firings.saturating_sub(1) as f64;
        if freedom >= 1.0 {
            Distribution::Student { scale: u, degrees_of_freedom: freedom }
        } else {
            Distribution::Normal { u }
        }
    }

    /// Amplitude of the mean voltage's error by a ripple whose phase is not known, V, and the ripple's size.
    ///
    /// Over N firings at phases that advance by 2πfT the mean of a sine is |sin(Nx)/(N·sin x)|, x = πfT: 1 for a gap
    /// that keeps step, next to nothing otherwise.
    fn ripple_v(&self) -> Option<(f64, f64)> {
        let circuit = Circuit::from_bench(self.bench, None).ok()?;
        let ripple = circuit.ripple()?;
        let x = std::f64::consts::PI * (ripple.frequency_hz * self.period.value).fract();
        let n = self.firings as f64;
        let coherence = if x.sin().abs() * n < 1e-6 { 1.0 } else { ((n * x).sin() / (n * x.sin())).abs() };
        Some((ripple.fraction, coherence * circuit.ripple_swing_v(self.period.value)))
    }

    /// Inputs that act on the voltage as they are, V.
    fn additions(&self) -> Vec<Input> {
        let mut inputs = Vec::new();
        if let Some((fraction, amplitude_v)) = self.ripple_v() {
            let name = format!("supply ripple ({} peak)", percent(fraction));
            let shape = Distribution::Arcsine { half_width: amplitude_v };
            inputs.push(
                Input::new(name, "V", 0.0, shape).reduced_by("smooth the supply, or run off the mains' multiples"),
            );
        }
        let pull = Distribution::Normal { u: self.pull_u_v };
        inputs.push(Input::new("pull of the ripple on the rate", "V", 0.0, pull).reduced_by("smooth the supply"));
        inputs
    }

    /// Budget of the mean gap voltage, about the mean that was found.
    pub fn voltage(&self, mean_v: f64) -> Option<Budget> {
        let base = Parts::from_bench(self.bench, None).ok()?;
        let (parts, mut inputs) = self.parts();
        let period = self.statistical(self.period.u);
        inputs.push(
            Input::new("statistics of the firings", "s", self.period.value, period).reduced_by("record for longer"),
        );
        inputs.extend(self.additions());
        let scatter_s = self.scatter.periods_s();
        let offset_v = mean_v - mean_voltage(&base.circuit().ok()?, self.period.value, scatter_s)?;
        let model = move |x: &[f64]| {
            let mut drawn = base;
            parts.iter().zip(x).for_each(|(part, value)| (part.place)(&mut drawn, *value));
            let rest = &x[parts.len()..];
            let voltage_v = mean_voltage(&drawn.circuit().ok()?, rest[0], scatter_s)?;
            Some(voltage_v + offset_v + rest[1..].iter().sum::<f64>())
        };
        Problem::new(inputs, model).budget("gap_voltage_v", "gap voltage", "V")
    }

    /// Difference of the mean gap voltages of two runs at one bench, V: second less first. The parts are common to both.
    pub fn difference(&self, mean_v: f64, second: &Sources, second_mean_v: f64) -> Option<Budget> {
        let base = Parts::from_bench(self.bench, None).ok()?;
        let (parts, mut inputs) = self.parts();
        let scatters = [self.scatter.periods_s(), second.scatter.periods_s()];
        let centre = base.circuit().ok()?;
        let mut offsets_v = [mean_v, second_mean_v];
        for (place, run) in [self, second].into_iter().enumerate() {
            offsets_v[place] -= mean_voltage(&centre, run.period.value, scatters[place])?;
            let period = run.statistical(run.period.u);
            inputs.push(Input::new("statistics of the firings", "s", run.period.value, period));
        }
        inputs.extend(self.additions());
        inputs.extend(second.additions());
        let model = move |x: &[f64]| {
            let mut drawn = base;
            parts.iter().zip(x).for_each(|(part, value)| (part.place)(&mut drawn, *value));
            let circuit = drawn.circuit().ok()?;
            let rest = &x[parts.len()..];
            let at = |place: usize| Some(mean_voltage(&circuit, rest[place], scatters[place])? + offsets_v[place]);
            // The sign of what adds up does not matter: its distribution is symmetric.
            Some(at(1)? - at(0)? + rest[2..].iter().sum::<f64>())
        };
        Problem::new(inputs, model).budget("gap_voltage_difference_v", "difference of the gap voltages", "V")
    }

    /// The problem of the spread: slope of the law times the scatter of the periods.
    fn spread_problem(&self) -> Option<Problem<'static>> {
        let base = Parts::from_bench(self.bench, None).ok()?;
        let tangent = |circuit: &Circuit, period_s: f64| {
            Some(circuit.slope_v_per_s(circuit.gap_voltage_v(period_s).ok()?)).filter(|slope| *slope > 0.0)
        };
        let period_s = self.period.value;
        // The slope in force is averaged over the scatter; the tangent follows the parts.
        let factor = self.slope / tangent(&base.circuit().ok()?, period_s)?;
        let (parts, mut inputs) = self.parts();
        let own = self.scatter.own?;
        let longer = "record for longer";
        inputs.push(Input::new("jitter", "s", own.value, self.statistical(own.u)).reduced_by(longer));
        let drift = Distribution::Normal { u: self.scatter.drift_u };
        inputs.push(Input::new("drift", "s", self.scatter.drift, drift).reduced_by(longer));
        Some(Problem::new(inputs, move |x| {
            let mut drawn = base;
            parts.iter().zip(x).for_each(|(part, value)| (part.place)(&mut drawn, *value));
            let rest = &x[parts.len()..];
            Some(factor * tangent(&drawn.circuit().ok()?, period_s)? * rest[0].hypot(rest[1]))
        }))
    }

    /// Standard uncertainty that everything but the jitter's own statistics brings to the spread, V.
    pub fn spread_rest_u_v(&self) -> Option<f64> {
        let problem = self.spread_problem()?;
        let linear = problem.linear()?;
        let jitter = problem.inputs().iter().position(|input| input.name == "jitter")?;
        Some(linear.u * (1.0 - linear.shares[jitter]).max(0.0).sqrt())
    }

    /// Budget of the spread.
    pub fn spread(&self) -> Option<Budget> {
        self.spread_problem()?.budget("gap_voltage_spread_v", "voltage spread", "V")
    }
}
