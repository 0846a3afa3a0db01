//! The budget: both ways of propagation side by side, and the one that holds.

use super::{Linear, MonteCarlo, Problem, Propagated};
use crate::estimate::Estimate;
use serde::{Deserialize, Serialize};

/// Coverage probability of every interval that is reported.
const PROBABILITY: f64 = 0.95;

/// Which propagation the figure rests on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Method {
    /// The law of propagation of uncertainty.
    Propagation,
    /// Monte Carlo, because the law of propagation does not agree with it to the digits shown.
    MonteCarlo,
}

/// One input in a budget.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Line {
    /// What it is.
    pub name: String,
    /// Unit of value and standard uncertainty; empty for a plain number.
    pub unit: String,
    /// Its value.
    pub value: f64,
    /// Name of its distribution.
    pub distribution: String,
    /// Its standard uncertainty.
    pub u: f64,
    /// Degrees of freedom of that; none if there is no limit.
    pub degrees_of_freedom: Option<f64>,
    /// Change of the result per unit of the input.
    pub sensitivity: f64,
    /// Standard uncertainty that it brings to the result, in the result's unit.
    pub contribution: f64,
    /// Share of the variance, 0..1.
    pub share: f64,
    /// What would reduce it; empty if nothing is known.
    pub remedy: String,
}

/// The uncertainty budget of one figure.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Budget {
    /// Name of the figure, as in the measurement.
    pub quantity: String,
    /// Its unit.
    pub unit: String,
    /// The figure with its standard uncertainty and 95 % interval.
    pub result: Estimate,
    /// Which propagation that rests on.
    pub method: Method,
    /// What the law of propagation gives.
    pub propagation: Estimate,
    /// Effective degrees of freedom; none if there is no limit.
    pub effective_degrees_of_freedom: Option<f64>,
    /// Factor from standard uncertainty to half the interval of the law of propagation.
    pub coverage_factor: f64,
    /// What Monte Carlo gives; none if the model has no answer for one draw in a hundred.
    pub monte_carlo: Option<Estimate>,
    /// Draws of it.
    pub draws: usize,
    /// Inputs, the largest contribution first.
    pub inputs: Vec<Line>,
    /// The largest contributor, and what would reduce it.
    pub advice: String,
}

impl Problem<'_> {
    /// The budget of a figure: its name in the measurement, in words, and its unit are the caller's. None if the model has
    /// no answer at the inputs.
    #[must_use]
    pub fn budget(&self, quantity: &str, words: &str, unit: &str) -> Option<Budget> {
        let linear = self.linear()?;
        let exact = !self.inputs.iter().any(|input| input.distribution.u() > 0.0);
        let drawn = if exact { None } else { self.monte_carlo(&MonteCarlo::default()) };
        let (low, high) = linear.interval(PROBABILITY);
        let propagation = Estimate { value: linear.value, u: linear.u, low, high };
        // As in clause 8 of JCGM 101; the draws themselves may be off by the tolerance once more.
        let agree = drawn.is_none_or(|drawn| {
            let apart = (drawn.low - low).abs().max((drawn.high - high).abs());
            apart <= 2.0 * drawn.tolerance
        });
        let of = |drawn: Propagated| Estimate { value: drawn.value, u: drawn.u, low: drawn.low, high: drawn.high };
        // The value stays that of the stated inputs: a mean of draws would move it by what the tolerances happen to be.
        let result = match drawn {
            Some(drawn) if !agree => Estimate { value: linear.value, ..of(drawn) },
            _ => propagation,
        };
        let inputs = self.lines(&linear);
        Some(Budget {
            quantity: quantity.to_owned(),
            unit: unit.to_owned(),
            result,
            method: if agree { Method::Propagation } else { Method::MonteCarlo },
            propagation,
            effective_degrees_of_freedom: linear.effective_degrees_of_freedom.filter(|freedom| freedom.is_finite()),
            coverage_factor: linear.coverage_factor(PROBABILITY),
            monte_carlo: drawn.map(of),
            draws: drawn.map_or(0, |drawn| drawn.draws),
            advice: advice(words, &inputs),
            inputs,
        })
    }

    /// The inputs that are not exact, the largest contribution first.
    fn lines(&self, linear: &Linear) -> Vec<Line> {
        let mut lines: Vec<Line> = self
            .inputs
            .iter()
            .enumerate()
            .filter(|(i, _)| linear.sensitivities[*i] != 0.0)
            .map(|(i, input)| {
                let freedom = input.distribution.degrees_of_freedom();
                let u = input.distribution.u();
                Line {
                    name: input.name.clone(),
                    unit: input.unit.to_owned(),
                    value: input.value,
                    distribution: input.distribution.name().to_owned(),
                    u,
                    degrees_of_freedom: freedom.is_finite().then_some(freedom),
                    sensitivity: linear.sensitivities[i],
                    contribution: (linear.sensitivities[i] * u).abs(),
                    share: linear.shares[i],
                    remedy: input.remedy.to_owned(),
                }
            })
            .collect();
        lines.sort_by(|a, b| b.contribution.total_cmp(&a.contribution));
        lines
    }
}

/// A sentence about the largest contributor and what would reduce it; empty if nothing is uncertain.
fn advice(words: &str, lines: &[Line]) -> String {
    let Some(first) = lines.first() else { return String::new() };
    let most = if first.share > 0.5 { "most" } else { "the largest part" };
    let remedy = if first.remedy.is_empty() { String::new() } else { format!("; to reduce it, {}", first.remedy) };
    format!("{most} of the uncertainty of the {words} comes from the {}{remedy}", first.name)
}
