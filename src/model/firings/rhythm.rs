//! What sets the rhythm: the scatter of a gap, or bare statistics of the periods.

use super::{MOST_FIRINGS, NoTrain, Plan, Start, check, stream};
use crate::bench::Bench;
use crate::firing::{EventKind, Firing};
use crate::model::breakdown::{NoGapVoltage, gap_voltage};
use crate::model::charging::Strength;
use crate::model::random::{Random, gamma_quantile, normal_probability};

/// Recovery of the gap after a spark: what it withstands t seconds after it stopped conducting is
/// Vb·(1 − depth·exp(−t/time_constant)).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Recovery {
    /// Time constant, s.
    pub time_constant_s: f64,
    /// Share of the strength that is lacking right after the spark, 0..1.
    pub depth: f64,
}

/// Depth of recovery where only its time constant is stated: a gap that has just stopped conducting holds about a tenth
/// of its voltage (from memory; free recovery of small gaps in air is given as an S curve that starts near zero).
pub const RECOVERY_DEPTH: f64 = 0.9;

/// The breakdown of a gap from firing to firing.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct GapLaw {
    /// Mean breakdown voltage at time zero, V.
    pub voltage_v: f64,
    /// Standard deviation from firing to firing, as a fraction of the voltage.
    pub spread: f64,
    /// Correlation of the scatter of neighbouring firings, −1..1.
    pub memory: f64,
    /// Relative change of the breakdown voltage per second, 1/s.
    pub drift_per_s: f64,
    /// Mean of the exponential wait after the threshold is crossed, s; 0 for none.
    pub statistical_lag_s: f64,
    /// Recovery after a spark.
    pub recovery: Option<Recovery>,
}

impl GapLaw {
    /// A gap that breaks down at the same voltage every time.
    #[must_use]
    pub fn steady(voltage_v: f64) -> Self {
        Self { voltage_v, spread: 0.0, memory: 0.0, drift_per_s: 0.0, statistical_lag_s: 0.0, recovery: None }
    }

    /// The gap of a bench, at `gap.voltage` or at what its electrodes and the air give.
    ///
    /// # Errors
    /// [`NoGapVoltage`] if the bench does not say enough, or leaves the range of the breakdown law.
    pub fn of_bench(bench: &Bench) -> Result<Self, NoGapVoltage> {
        gap_voltage(bench).map(|gap| Self::from_bench(bench, gap.voltage_v))
    }

    /// The gap of a bench that breaks down at `voltage_v`: takes `gap.spread`, `gap.memory`, `gap.drift`,
    /// `gap.statistical_lag`, `gap.recovery_time` and `gap.recovery_depth`.
    #[must_use]
    pub fn from_bench(bench: &Bench, voltage_v: f64) -> Self {
        let gap = &bench.gap;
        Self {
            spread: gap.spread.map_or(0.0, |q| q.value),
            memory: gap.memory.map_or(0.0, |q| q.value),
            recovery: gap.recovery_time.filter(|q| q.value > 0.0).map(|q| Recovery {
                time_constant_s: q.value,
                depth: gap.recovery_depth.map_or(RECOVERY_DEPTH, |depth| depth.value),
            }),
            drift_per_s: gap.drift.map_or(0.0, |q| q.value),
            statistical_lag_s: gap.statistical_lag.map_or(0.0, |q| q.value),
            ..Self::steady(voltage_v)
        }
    }

    /// What a gap of the given settled breakdown voltage withstands after a spark that leaves `residual_v` on the capacitor.
    /// The depth of recovery is made so shallow that the gap withstands what is left: it has just gone out.
    #[must_use]
    pub fn strength(&self, settled_v: f64, residual_v: f64) -> Strength {
        match self.recovery {
            Some(recovery) => {
                let hold = 1.0 - 1.1 * residual_v.max(0.0) / settled_v;
                Strength { settled_v, depth: recovery.depth.min(hold).max(0.0), recovery_s: recovery.time_constant_s }
            }
            None => Strength::settled(settled_v),
        }
    }

    pub(super) fn check(&self) -> Result<(), NoTrain> {
        check("the gap voltage", self.voltage_v, self.voltage_v > 0.0, "it must be above 0 V")?;
        check("the voltage spread", self.spread, (0.0..1.0).contains(&self.spread), "it must be 0 to below 1")?;
        check("the memory", self.memory, self.memory.abs() < 1.0, "it must be between -1 and 1")?;
        check("the drift", self.drift_per_s, true, "it must be a number")?;
        check("the statistical lag", self.statistical_lag_s, self.statistical_lag_s >= 0.0, "it must be 0 s or more")?;
        if let Some(recovery) = self.recovery {
            let time_s = recovery.time_constant_s;
            check("the recovery time", time_s, time_s > 0.0, "it must be above 0 s")?;
            check("the depth of recovery", recovery.depth, (0.0..=1.0).contains(&recovery.depth), "it must be 0 to 1")?;
        }
        Ok(())
    }
}

/// Scatter with a first-order memory: standard normal values with correlation `memory` from one to the next.
pub(super) struct Scatter {
    random: Random,
    memory: f64,
    last: Option<f64>,
}

impl Scatter {
    pub(super) fn new(random: Random, memory: f64) -> Self {
        Self { random, memory, last: None }
    }

    pub(super) fn draw(&mut self) -> f64 {
        let fresh = self.random.normal();
        let z = match self.last {
            Some(last) => self.memory * last + (1.0 - self.memory * self.memory).sqrt() * fresh,
            None => fresh,
        };
        self.last = Some(z);
        z
    }
}

/// Law of the periods of a bare rhythm.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum PeriodLaw {
    /// Normal; good up to a relative jitter of about 15 %.
    #[default]
    Normal,
    /// Gamma; never negative, and exponential (no rhythm) at a relative jitter of 1.
    Gamma,
}

/// Bare statistics of a rhythm.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct BareRhythm {
    /// Firings per second at time zero, Hz.
    pub rate_hz: f64,
    /// Standard deviation of the periods over their mean.
    pub relative_jitter: f64,
    /// Law of the periods.
    pub law: PeriodLaw,
    /// Correlation of the scatter of neighbouring periods, −1..1.
    pub memory: f64,
    /// Relative change of the rate per second, 1/s.
    pub drift_per_s: f64,
    /// Voltage written beside every firing, V; without a bench only a common scale of the click sizes.
    pub voltage_v: f64,
}

impl BareRhythm {
    /// A rhythm with independent normal periods and voltage 1.
    #[must_use]
    pub fn steady(rate_hz: f64, relative_jitter: f64) -> Self {
        Self { rate_hz, relative_jitter, law: PeriodLaw::Normal, memory: 0.0, drift_per_s: 0.0, voltage_v: 1.0 }
    }

    fn check(&self, duration_s: f64) -> Result<(), NoTrain> {
        let jitter = self.relative_jitter;
        let most = match self.law {
            PeriodLaw::Normal => jitter <= 0.3,
            PeriodLaw::Gamma => jitter <= 2.0,
        };
        check("the rate", self.rate_hz, self.rate_hz > 0.0, "it must be above 0 Hz")?;
        let range = "it must be 0 to 0.3 for normal periods, 0 to 2 for gamma periods";
        check("the relative jitter", jitter, jitter >= 0.0 && most, range)?;
        check("the memory", self.memory, self.memory.abs() < 1.0, "it must be between -1 and 1")?;
        let end = 1.0 + self.drift_per_s * duration_s;
        check("the drift", self.drift_per_s, end > 0.05, "the rate must not fall below a twentieth")?;
        check("the voltage", self.voltage_v, true, "it must be a number")
    }

    /// Period over its mean, from a standard normal value.
    fn relative_period(&self, z: f64) -> f64 {
        if self.relative_jitter == 0.0 {
            return 1.0;
        }
        match self.law {
            // A bound at a twentieth keeps time running forward; it is 3.2 standard deviations off at the largest jitter.
            PeriodLaw::Normal => (1.0 + self.relative_jitter * z).max(0.05),
            PeriodLaw::Gamma => {
                let shape = self.relative_jitter.powi(-2);
                // The mean of the law is 1; the floor keeps a probability of 1 from becoming infinite.
                gamma_quantile(shape, normal_probability(z).clamp(1e-16, 1.0 - 1e-16)) / shape
            }
        }
    }
}

/// Firings of a bare rhythm.
pub(super) fn fire(plan: &Plan, bare: &BareRhythm) -> Result<Vec<Firing>, NoTrain> {
    bare.check(plan.duration_s)?;
    let mut scatter = Scatter::new(Random::stream(plan.seed, stream::RHYTHM), bare.memory);
    let mut start = Random::stream(plan.seed, stream::START);
    let mut next = |t: f64| {
        let rate = bare.rate_hz * (1.0 + bare.drift_per_s * t.max(0.0));
        t + bare.relative_period(scatter.draw()) / rate
    };
    let mut time_s = match plan.start {
        Start::SwitchedOn => next(0.0),
        Start::Running => next(-start.uniform() / bare.rate_hz),
    };
    let mut firings = Vec::new();
    while time_s < plan.duration_s {
        if let Some(end) = plan.faults.outage_end(time_s) {
            time_s = next(end);
            continue;
        }
        if time_s >= 0.0 {
            firings.push(Firing { time_s, voltage_v: bare.voltage_v, kind: EventKind::Firing });
        }
        if firings.len() > MOST_FIRINGS {
            return Err(NoTrain::TooMany);
        }
        time_s = next(time_s);
    }
    Ok(firings)
}
