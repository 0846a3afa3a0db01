//! The fitted law as a curve: which supply voltage stands for which rate, and how well that is known.

use super::fit::Fit;
use super::law::Point;
use super::result::LawPoint;
use super::setting::Known;

/// Points of the curve, and how far it goes beyond the rates of the settings, share of their range.
const POINTS: usize = 41;
const BEYOND: f64 = 0.08;
/// Least rate of the curve over the lowest of the settings: towards rate 0 the law only closes in on the gap voltage.
const LEAST: f64 = 0.3;

/// The law over the range of some rates (1/s), through `kept` points; its uncertainty is that of the fit, times `widened`,
/// without the meter's scale, which moves readings and law together.
pub(super) fn curve(found: &Fit, kept: &[Point], known: &Known, widened: f64, rates_hz: &[f64]) -> Vec<LawPoint> {
    let low = rates_hz.iter().copied().fold(f64::INFINITY, f64::min);
    let high = rates_hz.iter().copied().fold(0.0, f64::max);
    let spare = BEYOND * (high - low);
    let (from, to) = ((low - spare).max(LEAST * low), high + spare);
    let mut spreads: Vec<f64> = kept.iter().map(|point| found.spread(point)).collect();
    spreads.sort_by(f64::total_cmp);
    let spread = spreads.get(spreads.len() / 2).copied().unwrap_or(0.0);
    let rate_hz = |k: usize| from + (to - from) * k as f64 / (POINTS - 1) as f64;
    (0..POINTS).filter_map(|k| at(found, known, widened, spread, rate_hz(k))).collect()
}

/// One point; none where a period would be shorter than the conduction time.
fn at(found: &Fit, known: &Known, widened: f64, spread: f64, rate_hz: f64) -> Option<LawPoint> {
    let charging_s = 1.0 / rate_hz - known.conduction.value;
    if !(charging_s > 0.0 && charging_s.is_finite()) {
        return None;
    }
    let supply_v = |point: &Point| found.form.supply_v(point, found.time_constant_s, &found.linear);
    let even = Point { supply_v: 0.0, supply_u_v: 0.0, charging_s, charging_u_s: 0.0, scatter_s: 0.0 };
    // A setting at this rate would scatter as the others do, which its mean period depends on.
    let above_v = (supply_v(&even) - found.gap_v()).max(0.0);
    let scatter_s = if above_v > 0.0 { spread * found.gap_v() * found.time_constant_s / above_v } else { 0.0 };
    let point = Point { scatter_s: scatter_s.min(charging_s), ..even };
    let gradient = found.gradient(&point);
    let variance: f64 = gradient
        .iter()
        .zip(&found.covariance)
        .map(|(a, row)| a * row.iter().zip(&gradient).map(|(c, b)| c * b).sum::<f64>())
        .sum();
    let law = LawPoint {
        firing_rate_hz: rate_hz,
        supply_v: supply_v(&point) / known.reach,
        u_v: widened * variance.max(0.0).sqrt() / known.reach,
    };
    (law.supply_v.is_finite() && law.u_v.is_finite()).then_some(law)
}
