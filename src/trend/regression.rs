//! Straight lines and planes by ordinary least squares, with Student's intervals.

use crate::estimate::Estimate;
use statrs::distribution::{ContinuousCDF, StudentsT};

/// Coverage factor of a two-sided 95 % interval with so many degrees of freedom.
#[must_use]
pub fn two_sided_95(freedom: f64) -> f64 {
    StudentsT::new(0.0, 1.0, freedom.max(1.0)).map_or(1.96, |t| t.inverse_cdf(0.975))
}

/// A fit y = mean(y) + Σ b_j·(x_j − mean(x_j)).
#[derive(Debug, Clone, PartialEq)]
pub struct Fit {
    /// Coefficients b_j, with intervals that allow for neighbouring residuals that resemble each other.
    pub slopes: Vec<Estimate>,
    /// Sum of squared residuals.
    pub squares: f64,
    /// Fitted value at the last row.
    pub last: f64,
}

/// Fits y on one or two columns. None with fewer than two rows more than unknowns, or if a column tells nothing of its own.
#[must_use]
pub fn fit(columns: &[&[f64]], y: &[f64]) -> Option<Fit> {
    let n = y.len();
    let unknowns = columns.len() + 1;
    if n < unknowns + 2 {
        return None;
    }
    let centred = |values: &[f64]| -> (f64, Vec<f64>) {
        let mean = values.iter().sum::<f64>() / n as f64;
        (mean, values.iter().map(|value| value - mean).collect())
    };
    let (mean_y, y) = centred(y);
    let x: Vec<Vec<f64>> = columns.iter().map(|column| centred(column).1).collect();
    let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
    let inverse = inverse(&x.iter().map(|a| x.iter().map(|b| dot(a, b)).collect()).collect::<Vec<Vec<f64>>>())?;
    let moments: Vec<f64> = x.iter().map(|a| dot(a, &y)).collect();
    let slopes: Vec<f64> = inverse.iter().map(|row| dot(row, &moments)).collect();
    let fitted = |row: usize| slopes.iter().zip(&x).map(|(slope, column)| slope * column[row]).sum::<f64>();
    let residuals: Vec<f64> = (0..n).map(|row| y[row] - fitted(row)).collect();
    let squares = dot(&residuals, &residuals);
    let freedom = (n - unknowns) as f64;
    let scatter = (squares / freedom).sqrt() * alike(&residuals, squares);
    let t = two_sided_95(freedom);
    let estimates = slopes.iter().enumerate().map(|(j, value)| {
        let u = scatter * inverse[j][j].sqrt();
        Estimate { value: *value, u, low: value - t * u, high: value + t * u }
    });
    Some(Fit { slopes: estimates.collect(), squares, last: mean_y + fitted(n - 1) })
}

/// By how much neighbouring residuals that resemble each other widen an uncertainty: √((1 + r)/(1 − r)) for a correlation r that is
/// above two of its standard deviations (first-order autoregression, common practice).
fn alike(residuals: &[f64], squares: f64) -> f64 {
    let r = residuals.windows(2).map(|pair| pair[0] * pair[1]).sum::<f64>() / squares;
    let noise = 2.0 / (residuals.len() as f64).sqrt();
    if r > noise { ((1.0 + r.min(0.98)) / (1.0 - r.min(0.98))).sqrt() } else { 1.0 }
}

/// Inverse of a symmetric matrix of one or two rows; none if it is singular to rounding.
fn inverse(a: &[Vec<f64>]) -> Option<Vec<Vec<f64>>> {
    match a {
        [row] => (row[0] > 0.0 && row[0].is_finite()).then(|| vec![vec![1.0 / row[0]]]),
        [first, second] => {
            let product = first[0] * second[1];
            let determinant = product - first[1] * second[0];
            (determinant > 1e-9 * product && determinant.is_finite()).then(|| {
                vec![
                    vec![second[1] / determinant, -first[1] / determinant],
                    vec![-second[0] / determinant, first[0] / determinant],
                ]
            })
        }
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::random::Random;

    #[test]
    fn a_printed_line_comes_back() {
        // JCGM 100:2008, H.3: correction of a thermometer against temperature above 20 °C; b = 0.00218, u = 0.00067, s = 0.0035.
        let above = [1.521, 2.012, 2.512, 3.003, 3.507, 3.999, 4.513, 5.002, 5.503, 6.010, 6.511];
        let correction = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160];
        let found = fit(&[&above], &correction).unwrap();
        assert!((found.slopes[0].value - 0.00218).abs() < 6e-6, "{found:?}");
        assert!((found.slopes[0].u - 0.00067).abs() < 6e-6);
        assert!(((found.squares / 9.0).sqrt() - 0.0035).abs() < 6e-5);
    }

    #[test]
    fn two_columns_are_told_apart() {
        let a: Vec<f64> = (0..50).map(f64::from).collect();
        let b: Vec<f64> = (0..50).map(|k| f64::from(k * k % 7)).collect();
        let y: Vec<f64> = a.iter().zip(&b).map(|(a, b)| 3.0 + 0.5 * a - 2.0 * b).collect();
        let found = fit(&[&a, &b], &y).unwrap();
        assert!((found.slopes[0].value - 0.5).abs() < 1e-9 && (found.slopes[1].value + 2.0).abs() < 1e-9);
        assert!((found.last - y[49]).abs() < 1e-9);
        assert_eq!(fit(&[&a, &a], &y), None);
        assert_eq!(fit(&[&a[..3]], &y[..3]), None);
    }

    #[test]
    fn the_interval_of_a_slope_holds_in_95_of_100_series() {
        // A rate of 95 % among 2000 has a standard deviation of 0.5 %; three quarters of residuals with a memory of 0.5 are
        // allowed for, so that 90 % and more hold there.
        let mut random = Random::seeded(5);
        for (memory, least, most) in [(0.0, 0.925, 0.97), (0.5, 0.87, 0.98)] {
            let mut held = 0;
            for _ in 0..2000 {
                let x: Vec<f64> = (0..60).map(f64::from).collect();
                let mut noise = random.normal();
                let y: Vec<f64> = x
                    .iter()
                    .map(|x| {
                        noise = memory * noise + (1.0f64 - memory * memory).sqrt() * random.normal();
                        0.3 * x + noise
                    })
                    .collect();
                let slope = fit(&[&x], &y).unwrap().slopes[0];
                held += u32::from(slope.low <= 0.3 && 0.3 <= slope.high);
            }
            let share = f64::from(held) / 2000.0;
            assert!((least..=most).contains(&share), "{memory}: {share}");
        }
    }
}
