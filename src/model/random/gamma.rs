//! The gamma distribution and its inverse.
//!
//! Source: M. Abramowitz and I. Stegun, Handbook of Mathematical Functions, 6.1.40 (Stirling), 6.5.29 (series) and 6.5.31
//! (continued fraction); the starting value is that of Wilson and Hilferty (1931).

use super::normal::normal_quantile;
use crate::model::root::bracketed;

/// Shape above which the cube-root transform of Wilson and Hilferty is used as it stands: for a shape of 2500 (a
/// relative jitter of 2 %) it misses the quantile by under 1e-3 of the standard deviation.
const LARGE_SHAPE: f64 = 2500.0;

/// Natural logarithm of the gamma function for a positive argument: Stirling's series after raising it above 20.
fn ln_gamma(x: f64) -> f64 {
    let mut shift = 0.0;
    let mut y = x;
    while y < 20.0 {
        shift += y.ln();
        y += 1.0;
    }
    let r = 1.0 / (y * y);
    let series = 1.0 / 12.0 + r * (-1.0 / 360.0 + r * (1.0 / 1260.0 + r * (-1.0 / 1680.0 + r / 1188.0)));
    (y - 0.5) * y.ln() - y + 0.5 * std::f64::consts::TAU.ln() + series / y - shift
}

/// Probability that a gamma variable of the given shape and scale 1 stays below `x`.
#[must_use]
pub fn gamma_probability(shape: f64, x: f64) -> f64 {
    if x.is_nan() || x <= 0.0 {
        return 0.0;
    }
    let front = (shape * x.ln() - x - ln_gamma(shape)).exp();
    if x < shape + 1.0 { front * series(shape, x) } else { 1.0 - front * fraction(shape, x) }
}

fn series(shape: f64, x: f64) -> f64 {
    let mut term = 1.0 / shape;
    let mut sum = term;
    let mut n = shape;
    while term > sum * 1e-17 {
        n += 1.0;
        term *= x / n;
        sum += term;
    }
    sum
}

/// The continued fraction by Lentz's method.
fn fraction(shape: f64, x: f64) -> f64 {
    let tiny = 1e-300;
    let mut b = x + 1.0 - shape;
    let mut c = 1.0 / tiny;
    let mut d = 1.0 / b;
    let mut h = d;
    for i in 1..10_000 {
        let i = f64::from(i);
        let a = -i * (i - shape);
        b += 2.0;
        d = a * d + b;
        d = 1.0 / if d.abs() < tiny { tiny } else { d };
        c = b + a / c;
        c = if c.abs() < tiny { tiny } else { c };
        let change = c * d;
        h *= change;
        if (change - 1.0).abs() < 1e-16 {
            break;
        }
    }
    h
}

/// The value that a gamma variable of the given shape and scale 1 stays below with the given probability.
#[must_use]
pub fn gamma_quantile(shape: f64, probability: f64) -> f64 {
    let spread = 1.0 / (9.0 * shape);
    let start = |z: f64| shape * (1.0 - spread + z * spread.sqrt()).powi(3);
    let z = normal_quantile(probability);
    if shape > LARGE_SHAPE {
        return start(z);
    }
    let excess = |x: f64| gamma_probability(shape, x) - probability;
    let mut high = start(z + 0.1).max(shape * 1e-3);
    while excess(high) < 0.0 {
        high *= 1.5;
    }
    let mut low = start(z - 0.1).clamp(0.0, high);
    if excess(low) > 0.0 {
        low = 0.0;
    }
    bracketed(low, high, excess)
}
