//! The scatter of the periods, taken apart by its causes.

use crate::estimate::Estimate;
use crate::rhythm::Reading;

/// Largest pull of the ripple on the mean period, in standard deviations that it gives the periods. In theory the ratio
/// grows without bound at the edge of the lock, where the deviation vanishes; there it rests on noise.
const LARGEST_PULL: f64 = 2.0;

/// Relative standard uncertainty of the pull: it is a first-order theory.
const PULL_U: f64 = 0.4;

/// Standard uncertainty of what it leaves out, in σ²/T. Both agree with simulated circuits with 2 % ripple.
const SECOND_ORDER_U: f64 = 1.0;

/// Scatter of the periods, s, taken apart.
#[derive(Debug, Clone, Copy)]
pub(super) struct Scatter {
    /// The gap's own about a straight line, without the part that keeps step with the mains; with its interval.
    pub own: Option<Estimate>,
    /// Part that keeps step with the mains.
    pub mains: f64,
    /// Frequency of that part, Hz.
    pub mains_hz: f64,
    /// Part that the straight line makes over the recording.
    pub drift: f64,
    /// Standard uncertainty of that part.
    pub drift_u: f64,
    /// Error of a click time.
    pub timing: f64,
}

impl Scatter {
    pub fn of(reading: &Reading, period_s: f64) -> Self {
        let jitter = reading.period_jitter_s.filter(Estimate::is_finite);
        let mains = reading.mains_locked_jitter_s.map_or(0.0, |mains| mains.jitter_s.value);
        let span_s = match (reading.stretches.first(), reading.stretches.last()) {
            (Some(first), Some(last)) => last.to_s - first.from_s,
            _ => (reading.firings.on_rhythm + reading.firings.missed) as f64 * period_s,
        };
        // Standard deviation of a straight line over its length, per unit of relative slope.
        let line_s = period_s * span_s / 12f64.sqrt();
        let drift = reading.drift_per_s.filter(Estimate::is_finite).map_or((0.0, 0.0), |drift| {
            // The square of an estimate is too large by its variance.
            let square = (drift.value * drift.value - drift.u * drift.u).max(0.0);
            (line_s * square.sqrt(), line_s * drift.u)
        });
        Self {
            own: jitter.map(|jitter| without(jitter, mains)),
            mains,
            mains_hz: reading.mains_locked_jitter_s.map_or(0.0, |mains| mains.frequency_hz),
            drift: drift.0,
            drift_u: drift.1,
            timing: reading.timing_noise_s.map_or(0.0, |noise| noise.value),
        }
    }

    pub fn own_s(&self) -> f64 {
        self.own.map_or(0.0, |own| own.value)
    }

    /// What the mean period has to be lengthened by to get the period without ripple, s.
    ///
    /// Ripple pulls the firing towards a whole number n of its periods: the gap dwells at the phases that hold it there.
    /// With T_k = T + K·sin φ_k and the phase advancing by 2πf·T_k, the phases have a density ∝ 1/(Δ + K·sin φ), Δ = T − n/f
    /// (the slip of a locked oscillator: R. Adler, Proc. IRE 34 (1946) 351). From it the mean period differs from T by
    /// −σ²/(mean − n/f), σ the standard deviation that the ripple gives the periods, whatever K is. The sum over all
    /// n but 0 is σ²·(πf·cot(πf·mean) − 1/mean). A locked gap has no σ left, and nothing can be said.
    pub fn pull_s(&self, period_s: f64) -> f64 {
        if self.mains <= 0.0 || self.mains_hz <= 0.0 {
            return 0.0;
        }
        let angle = std::f64::consts::PI * self.mains_hz;
        let pull = self.mains * self.mains * (angle / (angle * period_s).tan() - 1.0 / period_s);
        let most = LARGEST_PULL * self.mains;
        if pull.is_finite() { pull.clamp(-most, most) } else { 0.0 }
    }

    /// Standard uncertainty of [`Self::pull_s`], s: a share of it, and a share of the second-order term that it lacks.
    pub fn pull_u_s(&self, period_s: f64) -> f64 {
        (PULL_U * self.pull_s(period_s)).hypot(SECOND_ORDER_U * self.mains * self.mains / period_s)
    }

    /// Standard deviation of the true periods, s.
    pub fn periods_s(&self) -> f64 {
        self.own_s().hypot(self.drift).hypot(self.mains)
    }

    /// Standard deviation of the periods as measured, s.
    pub fn measured_s(&self) -> f64 {
        self.periods_s().hypot(std::f64::consts::SQRT_2 * self.timing)
    }
}

/// A standard deviation with an independent known part taken out.
fn without(total: Estimate, part: f64) -> Estimate {
    let rest = |x: f64| (x * x - part * part).max(0.0).sqrt();
    let value = rest(total.value);
    let u = if value > 0.0 { total.u * (total.value / value).min(10.0) } else { total.u };
    Estimate { value, u, low: rest(total.low.max(0.0)), high: rest(total.high) }
}
