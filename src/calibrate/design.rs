//! What each setting was worth, and which further one would be worth most.

use super::fit::{Fit, fit};
use super::law::Point;
use super::matrix::inverse;
use super::result::{Influence, NextSetting};

/// Candidates for a further setting.
const CANDIDATES: usize = 80;

/// Lowest of them over the gap voltage, and highest over the highest supply that was used. Nearer to the gap voltage a
/// supply's reading, and its ripple, decide whether it fires at all.
const RANGE: (f64, f64) = (1.05, 1.25);

/// How far time constant and gap voltage move when a setting is left out, relative; none if too few would remain.
pub(super) fn influence(found: &Fit, points: &[Point], kept: &[usize], place: usize) -> Option<Influence> {
    if !kept.contains(&place) {
        return None;
    }
    let rest: Vec<Point> = kept.iter().filter(|&&i| i != place).map(|&i| points[i]).collect();
    let without = fit(&found.form, &rest).filter(|fit| fit.is_sound() && !fit.at_bound)?;
    Some(Influence {
        time_constant: found.time_constant_s / without.time_constant_s - 1.0,
        gap_voltage: found.gap_v() / without.gap_v() - 1.0,
    })
}

/// The supply setting that would bring the relative uncertainties of time constant and gap voltage down most, read and
/// recorded as well as the middle one of those at hand.
pub(super) fn next_setting(
    found: &Fit,
    kept: &[Point],
    widened: f64,
    time_constant_factor: f64,
    reach: f64,
) -> Option<NextSetting> {
    let mut relative: Vec<(f64, f64, f64)> =
        kept.iter().map(|p| (p.supply_u_v / p.supply_v, p.charging_u_s / p.charging_s, p.supply_v)).collect();
    relative.sort_by(|a, b| a.0.total_cmp(&b.0));
    let (supply_u, charging_u, _) = relative[relative.len() / 2];
    let lowest = RANGE.0 * found.gap_v() * (1.0 + 3.0 * kept.iter().map(|p| found.spread(p)).fold(0.0, f64::max));
    let highest = RANGE.1 * relative.iter().map(|r| r.2).fold(0.0, f64::max);
    let information = inverse(&found.covariance)?;
    (0..CANDIDATES)
        .filter_map(|i| {
            let supply_v = lowest + (highest - lowest) * i as f64 / (CANDIDATES - 1) as f64;
            let left = (supply_v - found.gap_v()) / (supply_v - found.residual_v());
            let charging_s = -found.time_constant_s * left.ln();
            let point = Point {
                supply_v,
                supply_u_v: supply_u * supply_v,
                charging_s,
                charging_u_s: charging_u * charging_s,
                scatter_s: 0.0,
            };
            let covariance = with(found, &information, &point)?;
            let (tau_u, gap_u_v) = (covariance[0][0].sqrt(), covariance[1][1].sqrt());
            let next = NextSetting {
                supply_v: supply_v / reach,
                time_constant_u_s: widened * tau_u * found.time_constant_s * time_constant_factor,
                gap_voltage_u_v: widened * gap_u_v,
            };
            Some((tau_u.powi(2) + (gap_u_v / found.gap_v()).powi(2), next))
        })
        .min_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, next)| next)
}

/// Covariance with one more point.
fn with(found: &Fit, information: &[Vec<f64>], point: &Point) -> Option<Vec<Vec<f64>>> {
    let row = found.gradient(point);
    let u = found.form.u_v(point, found.time_constant_s, &found.linear);
    let n = row.len();
    let more: Vec<Vec<f64>> =
        (0..n).map(|i| (0..n).map(|j| information[i][j] + row[i] * row[j] / (u * u)).collect()).collect();
    inverse(&more)
}
