//! Firings of a gap across a charging circuit.

use super::faults::DustSource;
use super::rhythm::Scatter;
use super::{GapLaw, MOST_FIRINGS, Moment, NoTrain, Plan, Start, check, stream};
use crate::firing::{EventKind, Firing};
use crate::model::charging::{Circuit, NoFiring, Strength};
use crate::model::random::Random;

/// Draws of the strength in a row that are out of the capacitor's reach before the gap counts as silent.
const PATIENCE: usize = 1000;

/// Time constants that a full capacitor waits before the strength is drawn anew.
const WAIT_TIME_CONSTANTS: f64 = 5.0;

/// Periods before time zero for which a running gap has been running: after these it has settled on a ripple.
const RUNNING_PERIODS: f64 = 100.0;

/// Least strength of a scattered gap as a share of its mean; keeps a wild draw above the residual voltage.
const LEAST_STRENGTH: f64 = 0.05;

struct Gap<'a> {
    moments: &'a [Moment],
    /// The moment that holds now.
    now: usize,
    dust: Option<DustSource>,
    scatter: Scatter,
    lag: Random,
}

/// A breakdown: its instant and voltage.
struct Breakdown {
    time_s: f64,
    voltage_v: f64,
}

impl<'a> Gap<'a> {
    fn circuit(&self) -> &'a Circuit {
        &self.moments[self.now].circuit
    }

    fn law(&self) -> &'a GapLaw {
        &self.moments[self.now].gap
    }

    fn strength(&mut self, time_s: f64) -> Strength {
        let dust = self.dust.as_mut().map_or(1.0, |dust| dust.strength(time_s));
        let law = &self.moments[self.now].gap;
        let mean = law.voltage_v * (1.0 + law.drift_per_s * time_s.max(0.0)) * dust;
        let settled_v = mean * (1.0 + law.spread * self.scatter.draw()).max(LEAST_STRENGTH);
        law.strength(settled_v, self.circuit().residual_v())
    }

    /// The next breakdown of a capacitor that starts to charge at `start_s` from `v0`.
    fn next(&mut self, start_s: f64, v0: f64) -> Result<Breakdown, NoFiring> {
        while self.moments.get(self.now + 1).is_some_and(|next| next.from_s <= start_s) {
            self.now += 1;
        }
        let mut from_s = start_s;
        let mut v = v0;
        for _ in 0..PATIENCE {
            let strength = self.strength(from_s);
            match self.circuit().time_to_breakdown_s(v, from_s, &strength) {
                Ok(0.0) if v == v0 => {
                    return Err(NoFiring::BelowResidual { gap_v: strength.at(0.0), residual_v: v0 });
                }
                Ok(charging_s) => return Ok(self.breakdown(from_s, v, charging_s, &strength)),
                Err(error) => {
                    // A steady gap stays out of reach; a scattered one has another strength a little later.
                    let wait_s = WAIT_TIME_CONSTANTS * self.circuit().time_constant_s();
                    if self.law().spread == 0.0 || !wait_s.is_finite() {
                        return Err(error);
                    }
                    v = self.circuit().voltage_after(v, from_s, wait_s);
                    from_s += wait_s;
                }
            }
        }
        Err(NoFiring::OutOfReach { gap_v: self.law().voltage_v, reach_v: self.circuit().crest_v() })
    }

    fn breakdown(&mut self, from_s: f64, v: f64, charging_s: f64, strength: &Strength) -> Breakdown {
        if self.law().statistical_lag_s == 0.0 {
            return Breakdown { time_s: from_s + charging_s, voltage_v: strength.at(charging_s).max(v) };
        }
        let total_s = charging_s + self.lag.exponential() * self.law().statistical_lag_s;
        Breakdown { time_s: from_s + total_s, voltage_v: self.circuit().voltage_after(v, from_s, total_s) }
    }
}

/// Firings of a gap across a circuit, both as they are from moment to moment.
pub(super) fn fire(plan: &Plan, moments: &[Moment]) -> Result<Vec<Firing>, NoTrain> {
    let Some(Moment { circuit, gap: law, .. }) = moments.first() else {
        return Err(check("the number of moments", 0.0, false, "it must be 1 or more")
            .err()
            .unwrap_or(NoTrain::TooMany));
    };
    moments.iter().try_for_each(|moment| moment.gap.check())?;
    let scatter = Scatter::new(Random::stream(plan.seed, stream::RHYTHM), law.memory);
    let dust = plan.faults.dust.map(|dust| DustSource::new(dust, Random::stream(plan.seed, stream::DUST)));
    let mut gap = Gap { moments, now: 0, dust, scatter, lag: Random::stream(plan.seed, stream::LAG) };
    let mut next = match plan.start {
        Start::SwitchedOn => gap.next(0.0, 0.0)?,
        Start::Running => {
            // Where the mean law has no period (recovery, ripple at the edge) the train starts with a full charge.
            let period_s = circuit.period_s(law.voltage_v).unwrap_or(0.0);
            let phase = Random::stream(plan.seed, stream::START).uniform();
            gap.next(-(phase + RUNNING_PERIODS) * period_s, circuit.residual_v())?
        }
    };
    let mut firings = Vec::new();
    while next.time_s < plan.duration_s {
        if let Some(end_s) = plan.faults.outage_end(next.time_s) {
            next = gap.next(end_s, gap.circuit().residual_v())?;
            continue;
        }
        if next.time_s >= 0.0 {
            firings.push(Firing { time_s: next.time_s, voltage_v: next.voltage_v, kind: EventKind::Firing });
        }
        if firings.len() > MOST_FIRINGS {
            return Err(NoTrain::TooMany);
        }
        next = gap.next(next.time_s + gap.circuit().conduction_s(), gap.circuit().residual_v())?;
    }
    Ok(firings)
}
