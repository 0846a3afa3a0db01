//! The law of propagation of uncertainty.

use super::Problem;
use statrs::distribution::{ContinuousCDF, StudentsT};

/// Degrees of freedom above which Student's t is taken as normal: the 95 % factor differs by less than 3e-6.
const MANY: f64 = 1e6;

/// Result of the law of propagation.
#[derive(Debug, Clone, PartialEq)]
pub struct Linear {
    /// The model at the values of the inputs.
    pub value: f64,
    /// Combined standard uncertainty.
    pub u: f64,
    /// Partial derivative by each input.
    pub sensitivities: Vec<f64>,
    /// Share of each input in the variance; with correlated inputs its covariances count half to each side, so that a share
    /// may be negative. They add up to 1.
    pub shares: Vec<f64>,
    /// Effective degrees of freedom (JCGM 100, G.4.1), infinite if no input has a finite number. None for correlated
    /// inputs, for which the formula does not hold.
    pub effective_degrees_of_freedom: Option<f64>,
}

impl Linear {
    /// Coverage factor of a probability, by Student's t with the effective degrees of freedom, cut to a whole number
    /// (G.4.1, note 1).
    #[must_use]
    pub fn coverage_factor(&self, probability: f64) -> f64 {
        let freedom = self.effective_degrees_of_freedom.unwrap_or(f64::INFINITY).min(MANY).floor().max(1.0);
        StudentsT::new(0.0, 1.0, freedom).map_or(f64::NAN, |t| t.inverse_cdf(0.5 + 0.5 * probability))
    }

    /// The symmetric interval of a probability.
    #[must_use]
    pub fn interval(&self, probability: f64) -> (f64, f64) {
        let reach = self.coverage_factor(probability) * self.u;
        (self.value - reach, self.value + reach)
    }
}

impl Problem<'_> {
    /// Half the change of the model when one input goes from −u to +u, per unit of input (JCGM 100, 5.1.3 note 2);
    /// one-sided where a side has no answer.
    fn sensitivity(&self, input: usize, centre: &[f64], middle: f64) -> Option<f64> {
        let u = self.inputs[input].distribution.u();
        if u == 0.0 {
            return Some(0.0);
        }
        let at = |side: f64| {
            let mut moved = centre.to_vec();
            moved[input] += side * u;
            (self.model)(&moved).filter(|y| y.is_finite())
        };
        match (at(-1.0), at(1.0)) {
            (Some(low), Some(high)) => Some(0.5 * (high - low) / u),
            (Some(low), None) => Some((middle - low) / u),
            (None, Some(high)) => Some((high - middle) / u),
            (None, None) => None,
        }
    }

    /// The law of propagation of uncertainty; none if the model has no answer at the inputs or about them.
    #[must_use]
    pub fn linear(&self) -> Option<Linear> {
        let centre = self.centre();
        let value = (self.model)(&centre).filter(|y| y.is_finite())?;
        let n = self.inputs.len();
        let sensitivities: Vec<f64> = (0..n).map(|i| self.sensitivity(i, &centre, value)).collect::<Option<_>>()?;
        let parts: Vec<f64> = sensitivities.iter().zip(&self.inputs).map(|(c, i)| c * i.distribution.u()).collect();
        let rows: Vec<f64> =
            (0..n).map(|i| parts[i] * (0..n).map(|j| self.correlation(i, j) * parts[j]).sum::<f64>()).collect();
        let variance: f64 = rows.iter().sum::<f64>().max(0.0);
        let shares = rows.iter().map(|row| if variance > 0.0 { row / variance } else { 0.0 }).collect();
        let loss: f64 =
            parts.iter().zip(&self.inputs).map(|(p, i)| p.powi(4) / i.distribution.degrees_of_freedom()).sum();
        let effective = if loss > 0.0 { variance * variance / loss } else { f64::INFINITY };
        Some(Linear {
            value,
            u: variance.sqrt(),
            sensitivities,
            shares,
            effective_degrees_of_freedom: self.correlation.is_none().then_some(effective),
        })
    }
}
