//! The Kalman filter that whitens click times at unit scale (σ_e² + σ_T² = 1), with regressor columns carried along.

/// Columns carried: times, then the regressors n and n² (scaled).
pub const COLUMNS: usize = 3;

/// What one pass over a block of clicks gives.
#[derive(Debug, Clone, Copy, Default)]
pub struct Pass {
    /// Residual sum of squares after the regressors are fitted.
    pub rest: f64,
    /// Σ ln F + ln det(X'X): the two determinants of the restricted likelihood.
    pub ln_det: f64,
    /// Coefficients of the regressors.
    pub beta: [f64; 2],
    /// (X'X)⁻¹ element of the first regressor (n): variance of the mean period at unit scale.
    pub mean_variance: f64,
}

/// Click times of a block in the form that the filter wants.
#[derive(Debug, Clone)]
pub struct Block {
    rows: Vec<[f64; COLUMNS]>,
    /// Firing-number steps to each click after the first.
    steps: Vec<u32>,
    /// Number span: coefficient 0 divided by it is the period.
    pub span: f64,
}

impl Block {
    /// Times (s) and firing numbers, ascending. At least four clicks.
    #[must_use]
    pub fn new(time_s: &[f64], number: &[i64]) -> Self {
        let span = (number[number.len() - 1] - number[0]).max(1) as f64;
        let mean = number.iter().map(|&n| (n - number[0]) as f64).sum::<f64>() / number.len() as f64;
        let rows = time_s
            .iter()
            .zip(number)
            .map(|(t, &n)| {
                let x = (n - number[0]) as f64;
                [t - time_s[0], x / span, ((x - mean) / span).powi(2)]
            })
            .collect();
        let steps = number.windows(2).map(|w| (w[1] - w[0]).max(1) as u32).collect();
        Self { rows, steps, span }
    }

    /// Degrees of freedom left after the start and the regressors.
    #[must_use]
    pub fn freedom(&self) -> f64 {
        self.steps.len() as f64 - 2.0
    }

    /// One pass for a share `u` = σ_e²/(σ_e² + σ_T²) and memory `rho`.
    #[cfg(test)]
    #[must_use]
    pub fn pass(&self, u: f64, rho: f64) -> Pass {
        self.passes([u; LANES], [rho; LANES])[0]
    }

    /// Passes for several pairs of share and memory side by side: each step waits for the one before, so that one pair alone
    /// would leave most of the processor idle.
    #[must_use]
    pub fn passes(&self, u: [f64; LANES], rho: [f64; LANES]) -> [Pass; LANES] {
        let mut sums = Sums::default();
        let mut ln_f = [0.0; LANES];
        if rho == [0.0; LANES] {
            self.filter_white(u, &mut sums, &mut ln_f);
        } else {
            self.filter_memory(u, rho, &mut sums, &mut ln_f);
        }
        std::array::from_fn(|l| sums.solve(l, ln_f[l]))
    }

    /// Without memory one state is enough: a missed firing only adds variance.
    fn filter_white(&self, u: Lanes, sums: &mut Sums, ln_f: &mut Lanes) {
        let mut s: [Lanes; COLUMNS] = self.rows[0].map(|v| [v; LANES]);
        let mut p = u;
        let mut product = [1.0; LANES];
        for (row, &steps) in self.rows[1..].iter().zip(&self.steps) {
            let steps = f64::from(steps);
            let mut inv = [0.0; LANES];
            for l in 0..LANES {
                p[l] += steps * (1.0 - u[l]);
                let f = p[l] + u[l];
                inv[l] = 1.0 / f;
                product[l] *= f;
            }
            take_logs(&mut product, ln_f);
            let mut v = [[0.0; LANES]; COLUMNS];
            for c in 0..COLUMNS {
                for l in 0..LANES {
                    v[c][l] = row[c] - s[c][l];
                    s[c][l] += p[l] * inv[l] * v[c][l];
                }
            }
            for l in 0..LANES {
                p[l] *= u[l] * inv[l];
            }
            sums.add(&v, &inv);
        }
        add_logs(&product, ln_f);
    }

    fn filter_memory(&self, u: Lanes, rho: Lanes, sums: &mut Sums, ln_f: &mut Lanes) {
        let q: Lanes = std::array::from_fn(|l| (1.0 - rho[l] * rho[l]) * (1.0 - u[l]));
        let mut s: [Lanes; COLUMNS] = self.rows[0].map(|v| [v; LANES]);
        let mut a = [[0.0; LANES]; COLUMNS];
        let (mut pss, mut psa, mut paa): (Lanes, Lanes, Lanes) = (u, [0.0; LANES], u.map(|u| 1.0 - u));
        let mut product = [1.0; LANES];
        for (row, &steps) in self.rows[1..].iter().zip(&self.steps) {
            for _ in 0..steps {
                for l in 0..LANES {
                    let next_aa = rho[l] * rho[l] * paa[l] + q[l];
                    let next_sa = rho[l] * psa[l] + next_aa;
                    pss[l] += 2.0 * rho[l] * psa[l] + next_aa;
                    psa[l] = next_sa;
                    paa[l] = next_aa;
                }
                for c in 0..COLUMNS {
                    for l in 0..LANES {
                        a[c][l] *= rho[l];
                        s[c][l] += a[c][l];
                    }
                }
            }
            let mut inv = [0.0; LANES];
            for l in 0..LANES {
                let f = pss[l] + u[l];
                inv[l] = 1.0 / f;
                product[l] *= f;
            }
            take_logs(&mut product, ln_f);
            let mut v = [[0.0; LANES]; COLUMNS];
            for c in 0..COLUMNS {
                for l in 0..LANES {
                    v[c][l] = row[c] - s[c][l];
                    s[c][l] += pss[l] * inv[l] * v[c][l];
                    a[c][l] += psa[l] * inv[l] * v[c][l];
                }
            }
            for l in 0..LANES {
                paa[l] -= psa[l] * inv[l] * psa[l];
                psa[l] -= psa[l] * inv[l] * pss[l];
                pss[l] -= pss[l] * inv[l] * pss[l];
            }
            sums.add(&v, &inv);
        }
        add_logs(&product, ln_f);
    }
}

/// Passes computed side by side.
pub const LANES: usize = 4;
type Lanes = [f64; LANES];

/// Takes the logarithm of products before they leave the range of numbers.
#[inline]
fn take_logs(product: &mut Lanes, ln_f: &mut Lanes) {
    if product.iter().any(|p| !(1e-200..1e200).contains(p)) {
        add_logs(product, ln_f);
        *product = [1.0; LANES];
    }
}

fn add_logs(product: &Lanes, ln_f: &mut Lanes) {
    ln_f.iter_mut().zip(product).for_each(|(ln, p)| *ln += p.ln());
}

/// Sums of products of the whitened columns.
#[derive(Default)]
struct Sums {
    yy: Lanes,
    xy: [Lanes; 2],
    xx: [Lanes; 3],
}

impl Sums {
    #[inline]
    fn add(&mut self, v: &[Lanes; COLUMNS], inv: &Lanes) {
        for l in 0..LANES {
            let w = [v[0][l] * inv[l], v[1][l] * inv[l], v[2][l] * inv[l]];
            self.yy[l] += w[0] * v[0][l];
            self.xy[0][l] += w[0] * v[1][l];
            self.xy[1][l] += w[0] * v[2][l];
            self.xx[0][l] += w[1] * v[1][l];
            self.xx[1][l] += w[1] * v[2][l];
            self.xx[2][l] += w[2] * v[2][l];
        }
    }

    fn solve(&self, l: usize, ln_f: f64) -> Pass {
        let (yy, xy, xx) = (self.yy[l], self.xy.map(|v| v[l]), self.xx.map(|v| v[l]));
        let det = (xx[0] * xx[2] - xx[1] * xx[1]).max(1e-300);
        let beta = [(xx[2] * xy[0] - xx[1] * xy[1]) / det, (xx[0] * xy[1] - xx[1] * xy[0]) / det];
        let rest = (yy - beta[0] * xy[0] - beta[1] * xy[1]).max(1e-300);
        Pass { rest, ln_det: ln_f + det.ln(), beta, mean_variance: xx[2] / det }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The slow obvious version: the covariance of the differences written out, and its Cholesky factor.
    fn dense(time_s: &[f64], number: &[i64], u: f64, rho: f64) -> (f64, f64) {
        let n = time_s.len() - 1;
        let last = (number[n] - number[0]) as usize;
        // Covariance of s at firing numbers, from the covariance of a.
        let cov_a = |i: usize, j: usize| (1.0 - u) * rho.powi((i as i32 - j as i32).abs());
        let cov_s = |i: usize, j: usize| -> f64 { (1..=i).map(|p| (1..=j).map(|q| cov_a(p, q)).sum::<f64>()).sum() };
        assert!(last < 40);
        let at: Vec<usize> = number.iter().map(|m| (m - number[0]) as usize).collect();
        let mut c = vec![vec![0.0; n]; n];
        for i in 0..n {
            for j in 0..n {
                // t_i − t_0 = s_i + e_i − e_0.
                c[i][j] = cov_s(at[i + 1], at[j + 1]) + u + if i == j { u } else { 0.0 };
            }
        }
        let mut l = vec![vec![0.0; n]; n];
        for i in 0..n {
            for j in 0..=i {
                let sum: f64 = (0..j).map(|k| l[i][k] * l[j][k]).sum();
                l[i][j] = if i == j { (c[i][i] - sum).sqrt() } else { (c[i][j] - sum) / l[j][j] };
            }
        }
        let block = Block::new(time_s, number);
        let solve = |col: usize| -> Vec<f64> {
            let mut out = vec![0.0; n];
            for i in 0..n {
                let sum: f64 = (0..i).map(|k| l[i][k] * out[k]).sum();
                out[i] = (block.rows[i + 1][col] - block.rows[0][col] - sum) / l[i][i];
            }
            out
        };
        let mut sums = Sums::default();
        let (y, a, b) = (solve(0), solve(1), solve(2));
        for i in 0..n {
            sums.add(&[[y[i]; LANES], [a[i]; LANES], [b[i]; LANES]], &[1.0; LANES]);
        }
        let pass = sums.solve(0, l.iter().enumerate().map(|(i, r)| 2.0 * r[i].ln()).sum());
        (pass.rest, pass.ln_det)
    }

    #[test]
    fn the_filter_equals_the_dense_likelihood() {
        let number = [0i64, 1, 2, 4, 5, 6, 9, 10, 11, 12, 13, 15];
        let time_s: Vec<f64> =
            number.iter().enumerate().map(|(i, &n)| n as f64 + 0.1 * ((i * i) as f64 * 0.7).sin()).collect();
        for (u, rho) in [(0.3, 0.0), (0.01, 0.0), (0.4, 0.6), (0.1, -0.2), (0.7, 0.9)] {
            let pass = Block::new(&time_s, &number).pass(u, rho);
            let (rest, ln_det) = dense(&time_s, &number, u, rho);
            assert!((pass.rest / rest - 1.0).abs() < 1e-9, "u {u} rho {rho}: {} {rest}", pass.rest);
            assert!((pass.ln_det - ln_det).abs() < 1e-8, "u {u} rho {rho}: {} {ln_det}", pass.ln_det);
        }
    }
}
