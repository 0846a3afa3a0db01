//! Slow change with the hours of firing, and when it reaches a limit.

use super::regression::fit;
use super::{Limits, Point, change};
use crate::estimate::Estimate;
use serde::{Deserialize, Serialize};

/// Factor between the 95 % interval and one that a chance slope leaves in 3 of 1000 logs: 3 over 1.96.
const SURE: f64 = 3.0 / crate::estimate::COVERAGE_95;

/// Which describes the series better.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Shape {
    /// A straight line over the hours.
    Line,
    /// One step.
    Step,
}

/// Change with the hours of firing.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Wear {
    /// Change per hour of firing, in the unit of the figure; beside a step, if a step describes the series better.
    pub per_hour: Estimate,
    /// True if the slope is not chance: at three standard uncertainties.
    pub sure: bool,
    /// Which describes the series better.
    pub shape: Shape,
    /// Hours between first and last entry.
    pub hours: f64,
    /// True if an hour meter was read; otherwise only the recorded time counts.
    pub hour_meter: bool,
    /// Fitted value at the last entry.
    pub now: f64,
    /// Limit that the slope runs to.
    pub limit: Option<f64>,
    /// Hours of firing until the fit reaches it: best, earliest and latest by the 95 % interval of the slope; the latest is
    /// absent if the interval holds zero.
    pub hours_to_limit: Option<(f64, f64, Option<f64>)>,
}

/// The slope of a series. None without two different hours.
pub(super) fn wear(
    points: &[Point],
    values: &[f64],
    step: Option<&change::Step>,
    limits: &Limits,
    hour_meter: bool,
) -> Option<Wear> {
    let hours: Vec<f64> = points.iter().map(|point| point.hours).collect();
    let line = fit(&[&hours], values)?;
    let n = values.len() as f64;
    // Schwarz's criterion; a step has one parameter more, its place.
    let cost = |squares: f64, parameters: f64| n * squares.ln() + parameters * n.ln();
    let steps = step.filter(|step| cost(step.squares, 3.0) < cost(line.squares, 2.0));
    let after: Vec<f64> =
        steps.map(|step| (0..values.len()).map(|k| f64::from(u8::from(k >= step.at))).collect()).unwrap_or_default();
    let (fitted, shape) = match steps.and_then(|_| fit(&[&hours, &after], values)) {
        Some(beside) => (beside, Shape::Step),
        None => (line, Shape::Line),
    };
    let per_hour = fitted.slopes[0];
    let half = SURE * 0.5 * (per_hour.high - per_hour.low);
    let sure = per_hour.value.abs() > half;
    let limit = if per_hour.value > 0.0 { limits.high } else { limits.low };
    Some(Wear {
        per_hour,
        sure,
        shape,
        hours: hours.last()? - hours.first()?,
        hour_meter,
        now: fitted.last,
        limit: sure.then_some(limit),
        hours_to_limit: if sure { until(limit - fitted.last, &per_hour) } else { None },
    })
}

/// Hours until a slope has gone a distance; none if it is behind.
fn until(distance: f64, per_hour: &Estimate) -> Option<(f64, f64, Option<f64>)> {
    let side = per_hour.value.signum();
    let (slow, fast) = if side > 0.0 { (per_hour.low, per_hour.high) } else { (per_hour.high, per_hour.low) };
    let latest = (slow * side > 0.0).then(|| distance / slow);
    (distance * side > 0.0).then(|| (distance / per_hour.value, distance / fast, latest))
}
