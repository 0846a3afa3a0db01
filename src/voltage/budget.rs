//! The uncertainty budget of the gap voltage.
//!
//! Law of propagation of uncertainty (JCGM 100:2008, 5.1.2) with the sensitivity of each part by differences over its own
//! standard uncertainty (5.1.3, note 2); limits of error are rectangular (4.3.7), an unknown phase gives the arcsine
//! distribution. The coverage interval is that of propagated distributions (JCGM 101:2008, clause 7).

use crate::bench::{Bench, Quantity, Tolerance};
use crate::estimate::Estimate;
use crate::model::charging::{Circuit, Ripple};
use crate::model::random::Random;

/// One contribution to the uncertainty of the gap voltage.
#[derive(Debug, Clone, PartialEq)]
pub struct Contribution {
    /// What it comes from, with its tolerance.
    pub name: String,
    /// Standard uncertainty that it brings to the voltage, V.
    pub u_v: f64,
    /// Share of the variance, 0..1.
    pub share: f64,
}

/// Draws of the propagation of distributions. The ends of the interval then scatter by about 1 % of its width.
const DRAWS: usize = 20_000;

/// Seed of those draws: the same recording gives the same interval.
const SEED: u64 = 0x0067_6170_746f_6e65;

/// Share of draws that may fall where the law has no answer; above it the interval is the normal one.
const FEW: f64 = 0.01;

/// Name of the statistical contribution.
const STATISTICS: &str = "statistics of the firings";

type Part = (&'static str, fn(&mut Bench) -> &mut Option<Quantity>);

/// The parts of a bench that the voltage depends on.
const PARTS: [Part; 10] = [
    ("supply voltage", |bench| &mut bench.supply.voltage),
    ("supply current limit", |bench| &mut bench.supply.current_limit),
    ("charging resistance", |bench| &mut bench.charging.resistance),
    ("charging current", |bench| &mut bench.charging.current),
    ("time constant", |bench| &mut bench.charging.time_constant),
    ("capacitance", |bench| &mut bench.charging.capacitance),
    ("leakage", |bench| &mut bench.charging.leakage),
    ("residual voltage", |bench| &mut bench.gap.residual_voltage),
    ("conduction time", |bench| &mut bench.gap.conduction_time),
    ("stray capacitance", |bench| &mut bench.gap.stray_capacitance),
];

/// What the uncertainty is computed from.
pub(super) struct Budget<'a> {
    pub bench: &'a Bench,
    pub period: Estimate,
    /// Standard deviation of the true periods, s.
    pub scatter_s: f64,
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

impl Budget<'_> {
    /// Mean voltage of a bench for periods of this mean and scatter: three nodes of Gauss–Hermite quadrature, exact
    /// for a law of fifth degree.
    fn mean_voltage(&self, bench: &Bench) -> Option<f64> {
        let circuit = Circuit::from_bench(bench, None).ok()?;
        let at = |period_s: f64| circuit.gap_voltage_v(period_s).ok();
        let reach = 3f64.sqrt() * self.scatter_s;
        let middle = at(self.period.value)?;
        match (at(self.period.value - reach), at(self.period.value + reach)) {
            (Some(low), Some(high)) => Some((low + 4.0 * middle + high) / 6.0),
            _ => Some(middle),
        }
    }

    fn slope_of(&self, bench: &Bench) -> Option<f64> {
        let circuit = Circuit::from_bench(bench, None).ok()?;
        Some(circuit.slope_v_per_s(circuit.gap_voltage_v(self.period.value).ok()?))
    }

    /// Half the change of a figure when one part goes from −u to +u; one-sided where a side has no answer.
    fn change(&self, part: &Part, figure: impl Fn(&Bench) -> Option<f64>) -> f64 {
        let shifted = |sign: f64| {
            let mut bench = self.bench.clone();
            if let Some(quantity) = (part.1)(&mut bench) {
                quantity.value += sign * quantity.u();
            }
            figure(&bench)
        };
        match (shifted(-1.0), figure(self.bench), shifted(1.0)) {
            (Some(low), _, Some(high)) => 0.5 * (high - low),
            (Some(low), Some(middle), None) => middle - low,
            (None, Some(middle), Some(high)) => high - middle,
            _ => f64::NAN,
        }
    }

    /// The parts that are not exact.
    fn uncertain(&self) -> impl Iterator<Item = (&'static Part, Quantity)> {
        let mut bench = self.bench.clone();
        PARTS.iter().filter_map(move |part| {
            let quantity = (*(part.1)(&mut bench))?;
            (quantity.u() > 0.0).then_some((part, quantity))
        })
    }

    /// Amplitude of the mean voltage's error by a ripple whose phase is not known, V.
    ///
    /// Over N firings at phases that advance by 2πfT the mean of a sine is |sin(Nx)/(N·sin x)|, x = πfT: 1 for a gap
    /// that keeps step, next to nothing otherwise.
    fn ripple_v(&self) -> Option<(Ripple, f64)> {
        let circuit = Circuit::from_bench(self.bench, None).ok()?;
        let ripple = circuit.ripple()?;
        let x = std::f64::consts::PI * (ripple.frequency_hz * self.period.value).fract();
        let n = self.firings as f64;
        let coherence = if x.sin().abs() * n < 1e-6 { 1.0 } else { ((n * x).sin() / (n * x.sin())).abs() };
        Some((ripple, coherence * circuit.ripple_swing_v(self.period.value)))
    }

    /// All contributions, largest first.
    pub fn contributions(&self) -> Vec<Contribution> {
        let contribution = |name: String, u_v: f64| Contribution { name, u_v, share: 0.0 };
        let mut list = vec![contribution(STATISTICS.to_owned(), (self.slope * self.period.u).abs())];
        for (part, quantity) in self.uncertain() {
            let u_v = self.change(part, |bench| self.mean_voltage(bench)).abs();
            list.push(contribution(format!("{}{}", part.0, tolerance_text(&quantity)), u_v));
        }
        if let Some((ripple, amplitude_v)) = self.ripple_v() {
            let u_v = amplitude_v / std::f64::consts::SQRT_2;
            list.push(contribution(format!("supply ripple ({} peak)", percent(ripple.fraction)), u_v));
        }
        list.push(contribution("pull of the ripple on the rate".to_owned(), self.pull_u_v));
        let variance: f64 = list.iter().map(|c| c.u_v * c.u_v).sum();
        for c in &mut list {
            c.share = if variance > 0.0 { c.u_v * c.u_v / variance } else { 0.0 };
        }
        list.retain(|c| c.u_v != 0.0);
        list.sort_by(|a, b| b.u_v.total_cmp(&a.u_v));
        list
    }

    /// The voltage with its combined uncertainty and coverage interval.
    pub fn estimate(&self, mean_v: f64, contributions: &[Contribution]) -> Estimate {
        let u = contributions.iter().map(|c| c.u_v * c.u_v).sum::<f64>().sqrt();
        let normal = Estimate::normal(mean_v, u);
        let only_statistics = contributions.iter().all(|c| c.name == STATISTICS);
        if only_statistics || !normal.is_finite() {
            return normal;
        }
        match self.propagated() {
            Some((low, high)) => Estimate { low: mean_v + low, high: mean_v + high, ..normal },
            None => normal,
        }
    }

    /// Ends of the 95 % interval against the voltage of the mean period, by propagation of distributions.
    fn propagated(&self) -> Option<(f64, f64)> {
        let middle_v = self.mean_voltage(self.bench)?;
        let offset_v = middle_v - Circuit::from_bench(self.bench, None).ok()?.gap_voltage_v(self.period.value).ok()?;
        let uncertain: Vec<_> = self.uncertain().collect();
        let ripple_v = self.ripple_v().map_or(0.0, |ripple| ripple.1);
        let mut random = Random::seeded(SEED);
        let mut bench = self.bench.clone();
        let mut voltages = Vec::with_capacity(DRAWS);
        for _ in 0..DRAWS {
            for (part, quantity) in &uncertain {
                *(part.1)(&mut bench) = Some(Quantity::exact(draw(quantity, &mut random)));
            }
            let period_s = self.period.value + self.period.u * random.normal();
            let phase = (std::f64::consts::TAU * random.uniform()).sin();
            let voltage = Circuit::from_bench(&bench, None).ok().and_then(|c| c.gap_voltage_v(period_s).ok());
            let pull_v = self.pull_u_v * random.normal();
            voltages.extend(voltage.map(|v| v + offset_v + ripple_v * phase + pull_v - middle_v));
        }
        if (voltages.len() as f64) < (1.0 - FEW) * DRAWS as f64 {
            return None;
        }
        voltages.sort_by(f64::total_cmp);
        let at = |share: f64| voltages[((voltages.len() - 1) as f64 * share).round() as usize];
        Some((at(0.025), at(0.975)))
    }

    /// Relative standard uncertainty of the slope dV/dT by the bench: that of a spread in volts.
    pub fn relative_u_of_slope(&self) -> f64 {
        let Some(slope) = self.slope_of(self.bench).filter(|slope| *slope > 0.0) else { return 0.0 };
        let square: f64 =
            self.uncertain().map(|(part, _)| self.change(part, |bench| self.slope_of(bench)).powi(2)).sum();
        if square.is_finite() { square.sqrt() / slope } else { 0.0 }
    }
}

fn draw(quantity: &Quantity, random: &mut Random) -> f64 {
    match quantity.tolerance {
        Tolerance::Exact => quantity.value,
        Tolerance::Limit(half_width) => quantity.value + half_width * (2.0 * random.uniform() - 1.0),
        Tolerance::Standard(u) => quantity.value + u * random.normal(),
    }
}
