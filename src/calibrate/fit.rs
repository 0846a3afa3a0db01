//! Weighted least squares of the charging law over the settings.
//!
//! For a given time constant the law is linear, so its parameters have a closed form; what is left is one bounded search in one
//! dimension over the logarithm of the time constant. No start has to be guessed and no other minimum can catch the fit.

use super::law::{Form, Point, Residual};
use super::matrix::{inverse, solve};

/// Range of the time constant: shortest and longest charging time times these. Beyond, the voltage is the supply's to within
/// e⁻¹², or the charging is a straight ramp to within half a percent of the time constant's effect.
const RANGE: (f64, f64) = (1.0 / 12.0, 100.0);

/// Steps over that range before the refinement.
const STEPS: usize = 160;

/// Refinements by the golden section: 0.618⁶⁰ of a step is below the resolution of a number.
const REFINEMENTS: usize = 60;

/// Rounds in which weights and parameters follow each other.
const ROUNDS: usize = 4;

/// Step of the logarithm of the time constant for its derivative.
const STEP: f64 = 1e-4;

/// A fitted law.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Fit {
    pub form: Form,
    pub time_constant_s: f64,
    /// Gap voltage, then residual voltage and k·Vb where they are fitted.
    pub linear: Vec<f64>,
    /// Covariance of ln τ and of `linear`, in this order.
    pub covariance: Vec<Vec<f64>>,
    pub chi_square: f64,
    /// Settings less the parameters that they have to give.
    pub freedom: usize,
    /// (Reading − law)/u for each setting.
    pub residuals: Vec<f64>,
    /// True if the time constant ran into the end of its range: the settings do not bound it.
    pub at_bound: bool,
}

/// Parameters at one time constant, with the sum of squares.
struct Trial {
    linear: Vec<f64>,
    chi_square: f64,
}

/// Rows of the weighted problem: coefficients, response and standard uncertainty.
fn rows(form: &Form, points: &[Point], time_constant_s: f64, linear: &[f64]) -> Vec<(Vec<f64>, f64, f64)> {
    let mut rows: Vec<_> = points
        .iter()
        .map(|point| {
            let (row, fixed) = form.row(point, time_constant_s);
            (row, point.supply_v - fixed, form.u_v(point, time_constant_s, linear))
        })
        .collect();
    if let Residual::Stated(value, u) = form.residual {
        let mut row = vec![0.0; linear.len()];
        row[1] = 1.0;
        rows.push((row, value, u));
    }
    rows
}

fn normal_matrix(rows: &[(Vec<f64>, f64, f64)]) -> Vec<Vec<f64>> {
    let n = rows[0].0.len();
    let entry = |i: usize, j: usize| rows.iter().map(|(row, _, u)| row[i] * row[j] / (u * u)).sum();
    (0..n).map(|i| (0..n).map(|j| entry(i, j)).collect()).collect()
}

fn trial(form: &Form, points: &[Point], time_constant_s: f64) -> Option<Trial> {
    let lowest = points.iter().map(|point| point.supply_v).fold(f64::INFINITY, f64::min);
    let mut linear = vec![0.0; form.parameters() - 1];
    linear[0] = 0.8 * lowest;
    let mut chi_square = f64::NAN;
    for _ in 0..ROUNDS {
        let rows = rows(form, points, time_constant_s, &linear);
        let right: Vec<f64> =
            (0..linear.len()).map(|i| rows.iter().map(|(row, y, u)| row[i] * y / (u * u)).sum()).collect();
        linear = solve(&normal_matrix(&rows), &right)?;
        chi_square = rows
            .iter()
            .map(|(row, y, u)| ((y - row.iter().zip(&linear).map(|(a, b)| a * b).sum::<f64>()) / u).powi(2))
            .sum();
    }
    chi_square.is_finite().then_some(Trial { linear, chi_square })
}

/// Fits the law; none where the settings cannot tell its parameters apart.
pub(super) fn fit(form: &Form, points: &[Point]) -> Option<Fit> {
    if points.len() < form.demanded() {
        return None;
    }
    let shortest = points.iter().map(|point| point.charging_s).fold(f64::INFINITY, f64::min);
    let longest = points.iter().map(|point| point.charging_s).fold(0.0, f64::max);
    let (from, to) = ((RANGE.0 * shortest).ln(), (RANGE.1 * longest).ln());
    let badness = |log: f64| trial(form, points, log.exp()).map_or(f64::INFINITY, |trial| trial.chi_square);
    let width = (to - from) / STEPS as f64;
    let best = (0..=STEPS)
        .map(|i| (i, badness(from + width * i as f64)))
        .filter(|(_, chi_square)| chi_square.is_finite())
        .min_by(|a, b| a.1.total_cmp(&b.1))?
        .0;
    let log = golden(from + width * (best as f64 - 1.0), from + width * (best as f64 + 1.0), badness);
    finish(form, points, log, best == 0 || best == STEPS)
}

/// Place of the minimum between two ends.
fn golden(mut low: f64, mut high: f64, f: impl Fn(f64) -> f64) -> f64 {
    let ratio = 0.5 * (5f64.sqrt() - 1.0);
    let (mut a, mut b) = (high - ratio * (high - low), low + ratio * (high - low));
    let (mut f_a, mut f_b) = (f(a), f(b));
    for _ in 0..REFINEMENTS {
        if f_a < f_b {
            (high, b, f_b) = (b, a, f_a);
            a = high - ratio * (high - low);
            f_a = f(a);
        } else {
            (low, a, f_a) = (a, b, f_b);
            b = low + ratio * (high - low);
            f_b = f(b);
        }
    }
    0.5 * (low + high)
}

fn finish(form: &Form, points: &[Point], log: f64, at_bound: bool) -> Option<Fit> {
    let time_constant_s = log.exp();
    let Trial { linear, chi_square } = trial(form, points, time_constant_s)?;
    let law = |log: f64, point: &Point| form.supply_v(point, log.exp(), &linear);
    let mut rows = rows(form, points, time_constant_s, &linear);
    let residuals = rows.iter().zip(points).map(|((_, _, u), point)| (point.supply_v - law(log, point)) / u).collect();
    for (i, row) in rows.iter_mut().enumerate() {
        // What is stated beforehand does not depend on the time constant.
        let slope = points.get(i).map_or(0.0, |p| (law(log + STEP, p) - law(log - STEP, p)) / (2.0 * STEP));
        row.0.insert(0, slope);
    }
    Some(Fit {
        form: *form,
        time_constant_s,
        linear,
        covariance: inverse(&normal_matrix(&rows))?,
        chi_square,
        freedom: points.len() - form.demanded(),
        residuals,
        at_bound,
    })
}

impl Fit {
    pub fn gap_v(&self) -> f64 {
        self.linear[0]
    }

    pub fn residual_v(&self) -> f64 {
        match self.form.residual {
            Residual::Fixed(residual_v) => residual_v,
            _ => self.linear[1],
        }
    }

    /// Relative standard uncertainty of the time constant.
    pub fn time_constant_relative_u(&self) -> f64 {
        self.covariance[0][0].sqrt()
    }

    /// Standard uncertainty of the gap voltage, V.
    pub fn gap_u_v(&self) -> f64 {
        self.covariance[1][1].sqrt()
    }

    /// Derivatives of the supply voltage that a point stands for: by ln τ, then by `linear`.
    pub fn gradient(&self, point: &Point) -> Vec<f64> {
        let law = |shift: f64| self.form.supply_v(point, self.time_constant_s * shift.exp(), &self.linear);
        let mut gradient = vec![(law(STEP) - law(-STEP)) / (2.0 * STEP)];
        gradient.extend(self.form.row(point, self.time_constant_s).0);
        gradient
    }

    /// Voltage spread that a point's scatter stands for, as a fraction of the gap voltage.
    pub fn spread(&self, point: &Point) -> f64 {
        point.scatter_s * (point.supply_v - self.gap_v()).max(0.0) / (self.time_constant_s * self.gap_v())
    }

    /// True if the parameters are such as a gap can have.
    pub fn is_sound(&self) -> bool {
        let depth = if self.form.recovery_s.is_some() { self.linear[self.linear.len() - 1] } else { 0.0 };
        self.gap_v() > 0.0 && self.residual_v() < self.gap_v() && (0.0..=self.gap_v()).contains(&depth)
    }
}
