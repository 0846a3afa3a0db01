//! The normal gap: mean and spread of a normally scattered breakdown voltage from mean and scatter of the periods.
//!
//! Close to the supply voltage the law is bent so much that a small, symmetric scatter of the voltage makes a skewed one of
//! the periods. The voltage is taken as normal, and the pair (mean, spread) is sought that gives the mean and the standard
//! deviation of the periods. On simulated trains that does as well as the scatter of the inverted voltages where the click
//! times are exact, and far better where they are noisy.

use crate::model::charging::Circuit;

/// Nodes and weights of five-point Gauss–Hermite quadrature for a standard normal variable (Abramowitz and Stegun, table
/// 25.10, abscissas times √2).
const NODES: [(f64, f64); 5] = [
    (-2.856_970_013_872_805_6, 0.011_257_411_327_720_7),
    (-1.355_626_179_974_266, 0.222_075_922_005_612_7),
    (0.0, 0.533_333_333_333_333_3),
    (1.355_626_179_974_266, 0.222_075_922_005_612_7),
    (2.856_970_013_872_805_6, 0.011_257_411_327_720_7),
];

/// Share of the way to the highest voltage that the outermost node may go.
const HEADROOM: f64 = 0.98;

/// Rounds of the search; each takes the error down by about the relative scatter.
const ROUNDS: usize = 30;

/// Mean voltage and mean slope (spread of the voltage over scatter of the periods) of a normal gap.
#[derive(Debug, Clone, Copy)]
pub(super) struct NormalGap {
    /// Mean voltage, V.
    pub mean_v: f64,
    /// Spread over scatter of the periods, V/s.
    pub slope: f64,
}

/// The normal gap whose periods have this mean and standard deviation; none where the law has no answer there.
pub(super) fn normal_gap(circuit: &Circuit, period_s: f64, scatter_s: f64) -> Option<NormalGap> {
    let mut mean_v = circuit.gap_voltage_v(period_s).ok()?;
    let slope = circuit.slope_v_per_s(mean_v);
    if scatter_s <= 0.0 {
        return Some(NormalGap { mean_v, slope });
    }
    let reach_v = circuit.reach_v();
    let bound = |spread_v: f64, mean_v: f64| spread_v.min(HEADROOM * (reach_v - mean_v) / NODES[4].0);
    let mut spread_v = bound(slope * scatter_s, mean_v);
    for _ in 0..ROUNDS {
        let (mut mean, mut square) = (0.0, 0.0);
        for (node, weight) in NODES {
            let period = circuit.period_s(mean_v + node * spread_v).ok()?;
            mean += weight * period;
            square += weight * (period - period_s).powi(2);
        }
        let found_s = (square - (mean - period_s).powi(2)).max(0.0).sqrt();
        if found_s.is_nan() || found_s <= 0.0 {
            return None;
        }
        mean_v += circuit.slope_v_per_s(mean_v) * (period_s - mean);
        // The square root damps the step: near the supply the scatter grows faster than in proportion.
        spread_v = bound(spread_v * (scatter_s / found_s).sqrt(), mean_v);
    }
    (mean_v.is_finite() && spread_v > 0.0).then_some(NormalGap { mean_v, slope: spread_v / scatter_s })
}
