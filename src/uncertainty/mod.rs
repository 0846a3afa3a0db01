//! Uncertainty of a figure that is computed from others: the one place for the rules of JCGM 100 and JCGM 101.
//!
//! A [`Problem`] is a model, its inputs with their distributions and, where inputs belong together, their correlations.
//! [`Problem::linear`] applies the law of propagation (JCGM 100:2008, 5.1.2 and 5.2.2) with effective degrees of freedom
//! (G.4.1); [`Problem::monte_carlo`] propagates the distributions (JCGM 101:2008, clause 7) by the adaptive procedure
//! (7.9); [`Problem::budget`] does both, compares them (clause 8) and keeps the law of propagation only where the two agree
//! to the digits that are shown.
//!
//! Inputs and result carry whatever unit the model has; the texts name it.

mod budget;
mod input;
mod linear;
mod monte_carlo;

pub use budget::{Budget, Line, Method};
pub use input::{Distribution, Input};
pub use linear::Linear;
pub use monte_carlo::{Interval, MonteCarlo, Propagated, tolerance};

/// From the values of the inputs, in order, to the result; it may have no answer.
type Model<'a> = dyn Fn(&[f64]) -> Option<f64> + 'a;

/// A model of a measurement with its inputs.
pub struct Problem<'a> {
    inputs: Vec<Input>,
    /// Correlation coefficients, row by row; none for independent inputs.
    correlation: Option<Vec<Vec<f64>>>,
    model: Box<Model<'a>>,
}

impl<'a> Problem<'a> {
    /// A problem with independent inputs. The model takes their values in order and may have no answer.
    pub fn new(inputs: Vec<Input>, model: impl Fn(&[f64]) -> Option<f64> + 'a) -> Self {
        Self { inputs, correlation: None, model: Box::new(model) }
    }

    /// The same with two inputs correlated. Only normal inputs can be (JCGM 101, 6.4.8); others keep being drawn on their
    /// own.
    #[must_use]
    pub fn correlated(mut self, first: usize, second: usize, coefficient: f64) -> Self {
        let n = self.inputs.len();
        let matrix = self
            .correlation
            .get_or_insert_with(|| (0..n).map(|i| (0..n).map(|j| if i == j { 1.0 } else { 0.0 }).collect()).collect());
        matrix[first][second] = coefficient;
        matrix[second][first] = coefficient;
        self
    }

    /// The inputs.
    #[must_use]
    pub fn inputs(&self) -> &[Input] {
        &self.inputs
    }

    fn centre(&self) -> Vec<f64> {
        self.inputs.iter().map(|input| input.value).collect()
    }

    fn correlation(&self, i: usize, j: usize) -> f64 {
        match &self.correlation {
            Some(matrix) => matrix[i][j],
            None => f64::from(u8::from(i == j)),
        }
    }
}
