//! The charging law as a regression: which supply voltage a period stands for.
//!
//! With x = exp(−t/τ), t the period less the conduction time, the law Vb = V − (V − Vr)·x gives
//!
//! V = (Vb − Vr·x)/(1 − x),
//!
//! the supply voltage as a function of the period. It is linear in Vb and Vr for a given τ, and the supply's reading, which is
//! much less certain than the period, is the response; so the errors enter where least squares want them. A gap that is still
//! recovering breaks down at Vb·(1 − k·exp(−t/τ_r)), linear in k·Vb.
//!
//! The mean of the periods is longer than the period of the mean voltage: with T' = τ/(V − Vb) and T'' = τ/(V − Vb)², by
//! ½·T''·σ_v² = σ_T²/(2τ) to second order, σ_T the scatter of the periods.

/// A setting as the fit sees it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Point {
    /// Voltage that the capacitor tends to, V.
    pub supply_v: f64,
    /// Standard uncertainty of it, independent of the other settings, V.
    pub supply_u_v: f64,
    /// Mean period less the conduction time, s.
    pub charging_s: f64,
    /// Its standard uncertainty, s.
    pub charging_u_s: f64,
    /// Standard deviation of the periods, s.
    pub scatter_s: f64,
}

/// Which parameters there are besides time constant and gap voltage.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Form {
    /// Residual voltage.
    pub residual: Residual,
    /// Time constant of the recovery whose depth is fitted, s.
    pub recovery_s: Option<f64>,
}

/// What is known of the residual voltage.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Residual {
    /// Known, V.
    Fixed(f64),
    /// Stated with its standard uncertainty, V: the data may correct it.
    Stated(f64, f64),
    /// To be found.
    Free,
}

impl Form {
    /// How many parameters, the time constant among them.
    pub fn parameters(&self) -> usize {
        2 + usize::from(self.fits_residual()) + usize::from(self.recovery_s.is_some())
    }

    /// Parameters less what is stated of them beforehand: what the settings have to give.
    pub fn demanded(&self) -> usize {
        2 + usize::from(self.residual == Residual::Free) + usize::from(self.recovery_s.is_some())
    }

    pub fn fits_residual(&self) -> bool {
        !matches!(self.residual, Residual::Fixed(_))
    }

    /// Share of the charging that is left at a point.
    fn left(point: &Point, time_constant_s: f64) -> f64 {
        let t = point.charging_s - 0.5 * point.scatter_s * point.scatter_s / time_constant_s;
        (-t / time_constant_s).exp()
    }

    /// Coefficients of gap voltage, residual voltage and k·Vb, and the part that is fixed.
    pub fn row(&self, point: &Point, time_constant_s: f64) -> (Vec<f64>, f64) {
        let x = Self::left(point, time_constant_s);
        let over = 1.0 / (1.0 - x);
        let mut row = vec![over];
        let fixed = match self.residual {
            Residual::Fixed(residual_v) => -residual_v * x * over,
            _ => {
                row.push(-x * over);
                0.0
            }
        };
        if let Some(recovery_s) = self.recovery_s {
            row.push(-(-point.charging_s / recovery_s).exp() * over);
        }
        (row, fixed)
    }

    /// Supply voltage that a point's period stands for, V.
    pub fn supply_v(&self, point: &Point, time_constant_s: f64, linear: &[f64]) -> f64 {
        let (row, fixed) = self.row(point, time_constant_s);
        fixed + row.iter().zip(linear).map(|(a, b)| a * b).sum::<f64>()
    }

    /// Standard uncertainty of a point, as supply voltage, V: the reading's own, and the period's through the law.
    pub fn u_v(&self, point: &Point, time_constant_s: f64, linear: &[f64]) -> f64 {
        let x = Self::left(point, time_constant_s);
        let residual_v = match self.residual {
            Residual::Fixed(residual_v) => residual_v,
            _ => linear[1],
        };
        let slope = (linear[0] - residual_v) * x / (time_constant_s * (1.0 - x).powi(2));
        point.supply_u_v.hypot(slope * point.charging_u_s)
    }
}
