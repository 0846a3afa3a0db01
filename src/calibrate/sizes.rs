//! The second witness: within one recording a later firing is a firing at a higher voltage, and so a larger click.
//!
//! The charging law gives the relative change of the voltage with the period, (V − Vb)/(τ·Vb). Click sizes are in proportion
//! to the voltage, so their regression on the periods must have that slope, whatever the receiver's gain is.

use super::fit::Fit;
use super::law::Point;
use super::result::{ClickSizes, SettingResult};
use crate::firing::{Event, EventKind};
use crate::rhythm::Reading;

/// Fewest clicks for a regression.
const FEWEST: f64 = 50.0;

/// Standard uncertainty of the ratio above which it witnesses nothing.
const USELESS: f64 = 0.25;

/// Distance of the ratio from 1, in standard uncertainties and absolute, that speaks against the calibration. Filters and
/// detectors are not exactly linear, hence the absolute one.
const AGAINST: (f64, f64) = (4.0, 0.3);

/// Regression of click sizes on periods.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SizeTrend {
    /// Relative change of the size per second of period, 1/s, corrected for the timing noise in the periods.
    pub slope_per_s: f64,
    /// Its standard uncertainty, 1/s.
    pub u_per_s: f64,
}

/// Collects sizes and periods of one recording.
#[derive(Debug, Clone, Copy, Default)]
pub struct SizeMeter {
    n: f64,
    /// First period: sums are taken about it, so that they keep their precision.
    origin_s: f64,
    t: f64,
    s: f64,
    tt: f64,
    ts: f64,
    ss: f64,
}

impl SizeMeter {
    /// Takes the next event.
    pub fn push(&mut self, event: &Event) {
        let Some(period_s) = event.period_s.filter(|_| event.kind == EventKind::Firing) else { return };
        if self.n == 0.0 {
            self.origin_s = period_s;
        }
        let (t, s) = (period_s - self.origin_s, event.size);
        self.n += 1.0;
        self.t += t;
        self.s += s;
        self.tt += t * t;
        self.ts += t * s;
        self.ss += s * s;
    }

    /// The regression, if there are clicks enough and their periods scatter.
    #[must_use]
    pub fn trend(&self, reading: &Reading) -> Option<SizeTrend> {
        let (mean_t, mean_s) = (self.t / self.n, self.s / self.n);
        let var_t = self.tt / self.n - mean_t * mean_t;
        let covariance = self.ts / self.n - mean_t * mean_s;
        let var_s = self.ss / self.n - mean_s * mean_s;
        if self.n < FEWEST || var_t.is_nan() || var_t <= 0.0 || mean_s <= 0.0 {
            return None;
        }
        let jitter = reading.period_jitter_s?.value.powi(2);
        let noise = 2.0 * reading.timing_noise_s.map_or(0.0, |noise| noise.value.powi(2));
        // Errors in the regressor flatten the line (attenuation); the reading knows by how much.
        let kept = jitter / (jitter + noise);
        let slope = covariance / var_t;
        let rest = (var_s - slope * covariance).max(0.0);
        let scale = 1.0 / (mean_s * kept);
        let trend = SizeTrend { slope_per_s: slope * scale, u_per_s: (rest / ((self.n - 2.0) * var_t)).sqrt() * scale };
        (trend.slope_per_s.is_finite() && trend.u_per_s.is_finite()).then_some(trend)
    }
}

/// Slope of the sizes over what the law demands; none where it says nothing.
pub(super) fn witness(trend: &SizeTrend, found: &Fit, point: &Point) -> Option<ClickSizes> {
    let demanded = (point.supply_v - found.gap_v()) / (found.time_constant_s * found.gap_v());
    let sizes = ClickSizes { ratio: trend.slope_per_s / demanded, u: trend.u_per_s / demanded };
    (sizes.u > 0.0 && sizes.u < USELESS).then_some(sizes)
}

/// What the click sizes say of the calibration.
pub(super) fn note(results: &[SettingResult]) -> Option<String> {
    let sizes: Vec<ClickSizes> = results.iter().filter(|r| r.used).filter_map(|r| r.click_size).collect();
    let weight: f64 = sizes.iter().map(|s| s.u.powi(-2)).sum();
    if sizes.is_empty() {
        return None;
    }
    let ratio = sizes.iter().map(|s| s.ratio * s.u.powi(-2)).sum::<f64>() / weight;
    let u = weight.powf(-0.5);
    let against = (ratio - 1.0).abs() > (AGAINST.0 * u).max(AGAINST.1);
    let verdict = if against {
        "speaks against this calibration, or the receiver's gain does not follow the clicks"
    } else {
        "agrees"
    };
    Some(format!(
        "click sizes grow with the period {ratio:.2} ± {u:.2} times as fast as the charging law demands, which {verdict}"
    ))
}
