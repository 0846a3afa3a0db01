//! Ripple on the supply and the firing of the gap: the map from one firing phase to the next, its locks and its beats.
//!
//! A firing at phase θ of the ripple (in turns) is followed by one at θ + f·P(θ), P the exact period from there. Where the
//! map θ → θ + f·P(θ) has a stable fixed point the gap locks: one firing in every n periods of the ripple, with no scatter,
//! over a whole range of supply settings; q firings in p periods of the ripple are locks of the map applied q times (patterns, found
//! up to twelve firings). Outside of the locks the phase runs on and the periods beat. (Circle maps; textbook theory of synchronisation.)
//!
//! Units: s, Hz, V; phases in turns. Assumes a gap that breaks down at the same voltage every time.

use super::charging::{Circuit, NoFiring, Ripple, Strength};
use super::root::bracketed;

/// Phases at which the map is looked at for locks of one firing.
const PHASES: usize = 48;
/// Firings until the phase has settled.
const SETTLE: usize = 96;
/// Firings over which means are taken. The weights of the mean vanish smoothly at both ends, which makes the mean of a
/// quasi-periodic series converge faster than any power of this.
const COUNT: usize = 160;
/// Periods of the ripple in one period of the gap beyond which locks are so narrow that no supply holds one.
const FAR_APART: f64 = 200.0;
/// Firings over which means are then taken.
const COUNT_FAR_APART: usize = 30;
/// Most firings in one pattern that is looked for.
const LONGEST_PATTERN: usize = 12;
/// Turns by which a pattern may fail to repeat.
const REPEATS: f64 = 1e-7;
/// Half step for the slope of the map, turns.
const SLOPE_STEP: f64 = 1e-5;
/// How far the closed form of a lock's edge may differ from the map, turns.
const EDGE_AGREES: f64 = 2e-3;
/// Turns by which a mean may miss a pattern for it to be looked for: more than half of the widest.
const NEAR_PATTERN: f64 = 1e-2;
/// Turns over which a pattern must hold on for it to be more than the last digits of the map.
const LEAST_PATTERN: f64 = 1e-10;
/// Halvings of an edge of a lock.
const HALVINGS: usize = 44;

/// A locked pattern.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Lock {
    /// Firings in the pattern.
    pub firings: u32,
    /// Periods of the ripple that it takes.
    pub cycles: u32,
    /// Slope of the map there, −1..1: what is left of a disturbance after one pattern. Only known for patterns of one firing.
    pub slope: Option<f64>,
}

/// What the ripple makes of the periods.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rippled {
    /// Mean period, s.
    pub mean_period_s: f64,
    /// Standard deviation of the periods, in step with the ripple, s.
    pub period_sd_s: f64,
    /// Shortest period, s.
    pub shortest_s: f64,
    /// Longest period, s.
    pub longest_s: f64,
    /// The lock, if it is in one.
    pub lock: Option<Lock>,
}

/// The map from one firing phase to the next.
#[derive(Debug, Clone, Copy)]
pub struct PhaseMap<'a> {
    circuit: &'a Circuit,
    ripple: Ripple,
    strength: Strength,
}

impl<'a> PhaseMap<'a> {
    /// The map of a circuit with a gap of a given strength; none without ripple.
    #[must_use]
    pub fn new(circuit: &'a Circuit, strength: Strength) -> Option<Self> {
        circuit.ripple().filter(|ripple| ripple.fraction > 0.0).map(|ripple| Self { circuit, ripple, strength })
    }

    /// Period that follows a firing at a phase, s.
    ///
    /// # Errors
    /// [`NoFiring`] if no firing follows.
    pub fn period_s(&self, turns: f64) -> Result<f64, NoFiring> {
        let conduction_s = self.circuit.conduction_s();
        let start_s = turns / self.ripple.frequency_hz + conduction_s;
        let charging_s = self.circuit.time_to_breakdown_s(self.circuit.residual_v(), start_s, &self.strength)?;
        Ok(conduction_s + charging_s)
    }

    /// Periods of the ripple in the period that follows.
    fn turned(&self, turns: f64) -> Result<f64, NoFiring> {
        Ok(self.ripple.frequency_hz * self.period_s(turns)?)
    }

    /// What the ripple makes of the periods of this gap once it has settled.
    ///
    /// # Errors
    /// [`NoFiring`] if the gap does not fire, or stops.
    pub fn settled(&self) -> Result<Rippled, NoFiring> {
        if self.turned(0.0)? > FAR_APART {
            return self.run(0, COUNT_FAR_APART);
        }
        let samples = self.samples()?;
        if let Some(lock) = self.single_lock(&samples) {
            let period_s = f64::from(lock.cycles) / self.ripple.frequency_hz;
            return Ok(Rippled {
                mean_period_s: period_s,
                period_sd_s: 0.0,
                shortest_s: period_s,
                longest_s: period_s,
                lock: Some(lock),
            });
        }
        self.run(SETTLE, COUNT)
    }

    /// Follows the map over `count` firings after `settle` others.
    fn run(&self, settle: usize, count: usize) -> Result<Rippled, NoFiring> {
        let mut turns = 0.0f64;
        for _ in 0..settle {
            turns = (turns + self.turned(turns)?).fract();
        }
        let mut periods = Vec::with_capacity(count);
        let mut phases = Vec::with_capacity(count);
        for _ in 0..count {
            let next = self.turned(turns)?;
            phases.push(turns);
            periods.push(next);
            turns = (turns + next).fract();
        }
        Ok(self.summary(&phases, &periods))
    }

    /// The map at evenly spaced phases.
    fn samples(&self) -> Result<Vec<f64>, NoFiring> {
        (0..PHASES).map(|k| self.turned(k as f64 / PHASES as f64)).collect()
    }

    /// A stable fixed point: one firing in a whole number of ripple periods.
    fn single_lock(&self, samples: &[f64]) -> Option<Lock> {
        let least = samples.iter().fold(f64::INFINITY, |a, b| a.min(*b));
        let most = samples.iter().fold(f64::NEG_INFINITY, |a, b| a.max(*b));
        // Between two sampled phases the extreme may lie a little further out.
        let margin = (most - least) * 0.01;
        let cycles = (least - margin).ceil().max(1.0);
        if cycles > most + margin || cycles > 1e6 {
            return None;
        }
        let gap = |turns: f64| self.turned(turns).map_or(f64::NAN, |turned| turned - cycles);
        for k in 0..PHASES {
            let (here, there) = (samples[k] - cycles, samples[(k + 1) % PHASES] - cycles);
            // The slope of the map is below one at a fixed point where the period falls with the phase.
            if here < 0.0 || there > 0.0 || (here == 0.0 && there == 0.0) {
                continue;
            }
            let at = bracketed(k as f64 / PHASES as f64, (k + 1) as f64 / PHASES as f64, gap);
            let slope = 1.0 + (gap(at + SLOPE_STEP) - gap(at - SLOPE_STEP)) / (2.0 * SLOPE_STEP);
            if gap(at).abs() < REPEATS && slope.abs() < 1.0 {
                return Some(Lock { firings: 1, cycles: cycles as u32, slope: Some(slope) });
            }
        }
        None
    }

    /// Least and greatest advance over a pattern, in turns less its whole number.
    fn pattern_extremes(&self, firings: u32, cycles: u32) -> Result<(f64, f64), NoFiring> {
        let (mut least, mut most) = (f64::INFINITY, f64::NEG_INFINITY);
        for k in 0..PHASES {
            // The orbit of one firing after the other carries the phase by about 1/firings: a little more than that part of a
            // turn shows all.
            let start = 1.2 / f64::from(firings) * k as f64 / PHASES as f64;
            let mut turns = start;
            for _ in 0..firings {
                turns += self.turned(turns)?;
            }
            let advance = turns - start - f64::from(cycles);
            (least, most) = (least.min(advance), most.max(advance));
        }
        Ok((least, most))
    }

    /// A pattern that holds the phase too weakly to settle within the firings that are followed.
    fn weak_pattern(&self, mean: f64) -> Option<Lock> {
        (2..=LONGEST_PATTERN as u32).find_map(|firings| {
            let cycles = (f64::from(firings) * mean).round();
            if cycles < 1.0 || (f64::from(firings) * mean - cycles).abs() > NEAR_PATTERN {
                return None;
            }
            let (least, most) = self.pattern_extremes(firings, cycles as u32).ok()?;
            let holds = least <= 0.0 && most >= 0.0 && most - least > LEAST_PATTERN;
            holds.then_some(Lock { firings, cycles: cycles as u32, slope: None })
        })
    }

    fn summary(&self, phases: &[f64], turned: &[f64]) -> Rippled {
        let mut lock = pattern(phases, turned);
        let count = turned.len();
        let weights: Vec<f64> = match lock {
            Some(lock) => {
                let last = count - count % lock.firings as usize;
                (0..count).map(|k| if k < last { 1.0 } else { 0.0 }).collect()
            }
            None => (0..count).map(|k| smooth((k as f64 + 0.5) / count as f64)).collect(),
        };
        let total: f64 = weights.iter().sum();
        let mut mean = turned.iter().zip(&weights).map(|(turned, weight)| turned * weight).sum::<f64>() / total;
        lock = lock.or_else(|| self.weak_pattern(mean));
        if let Some(lock) = lock {
            mean = f64::from(lock.cycles) / f64::from(lock.firings);
        }
        let square = |turned: f64| (turned - mean) * (turned - mean);
        let variance =
            turned.iter().zip(&weights).map(|(turned, weight)| square(*turned) * weight).sum::<f64>() / total;
        let second = 1.0 / self.ripple.frequency_hz;
        Rippled {
            mean_period_s: mean * second,
            period_sd_s: variance.sqrt() * second,
            shortest_s: turned.iter().fold(f64::INFINITY, |a, b| a.min(*b)) * second,
            longest_s: turned.iter().fold(0.0f64, |a, b| a.max(*b)) * second,
            lock,
        }
    }
}

/// A weight that vanishes with all of its derivatives at 0 and 1.
fn smooth(x: f64) -> f64 {
    (-1.0 / (x * (1.0 - x))).exp()
}

/// The shortest pattern that the phases repeat.
fn pattern(phases: &[f64], turned: &[f64]) -> Option<Lock> {
    (1..=LONGEST_PATTERN).find_map(|firings| {
        let apart = |k: usize| {
            let difference = phases[k + firings] - phases[k];
            (difference - difference.round()).abs()
        };
        let last = phases.len() - firings - 1;
        // Twice, far from each other, so that a slow passage is not taken for a lock.
        let repeats = apart(last) < REPEATS && apart(last / 2) < REPEATS;
        let cycles = turned[last..last + firings].iter().sum::<f64>().round();
        repeats.then_some(Lock { firings: firings as u32, cycles: cycles as u32, slope: None })
    })
}

/// Lowest and highest supply voltage at which the gap locks with one firing in `cycles` periods of the ripple.
///
/// `circuit_at` gives the circuit at a supply voltage in V, and `near_v` is a setting at which it charges. The settled
/// sine on the capacitor moves the voltage that is reached after a fixed time by ± [`Circuit::ripple_swing_v`]; the lock
/// reaches from the setting at which its crest only just gets the gap voltage in that time to that at which its trough
/// does. Where that is not the first crossing, or the supply is in current limit, the edges are found on the map.
pub fn lock_range(
    circuit_at: &dyn Fn(f64) -> Option<Circuit>,
    gap_v: f64,
    cycles: u32,
    near_v: f64,
) -> Option<(f64, f64)> {
    let near = circuit_at(near_v)?;
    let frequency_hz = near.ripple()?.frequency_hz;
    let closed = closed_form(&near, gap_v, f64::from(cycles) / frequency_hz, near_v);
    // Longest and shortest period in turns less the whole number; infinite where it does not fire.
    let extremes = |supply_v: f64| -> (f64, f64) {
        let Some(circuit) = circuit_at(supply_v) else { return (f64::INFINITY, f64::INFINITY) };
        let samples = PhaseMap::new(&circuit, Strength::settled(gap_v)).and_then(|map| map.samples().ok());
        let Some(samples) = samples else { return (f64::INFINITY, f64::INFINITY) };
        let fold = |start: f64, pick: fn(f64, f64) -> f64| samples.iter().fold(start, |a, b| pick(a, *b));
        (fold(f64::INFINITY, f64::min) - f64::from(cycles), fold(f64::NEG_INFINITY, f64::max) - f64::from(cycles))
    };
    if let Some((low, high)) = closed
        && extremes(low).0.abs() < EDGE_AGREES
        && extremes(high).1.abs() < EDGE_AGREES
    {
        return Some((low, high));
    }
    let low = falling_zero(near_v, &|supply_v| extremes(supply_v).0)?;
    let high = falling_zero(near_v, &|supply_v| extremes(supply_v).1)?;
    (low < high).then_some((low, high))
}

/// Lowest and highest supply voltage at which the gap stays in a pattern of several firings; `within_v` is a setting in it.
///
/// The edges are where the phase, after the firings of the pattern, only just comes back anywhere on its way round. Such locks
/// are of a higher order in the ripple and mostly very narrow.
pub fn pattern_range(
    circuit_at: &dyn Fn(f64) -> Option<Circuit>,
    strength: Strength,
    lock: Lock,
    within_v: f64,
) -> Option<(f64, f64)> {
    let extremes = |supply_v: f64| {
        let circuit = circuit_at(supply_v)?;
        PhaseMap::new(&circuit, strength)?.pattern_extremes(lock.firings, lock.cycles).ok()
    };
    let least = |supply_v: f64| extremes(supply_v).map_or(f64::INFINITY, |(least, _)| least);
    let most = |supply_v: f64| extremes(supply_v).map_or(f64::INFINITY, |(_, most)| most);
    let (low, high) = (falling_zero(within_v, &least)?, falling_zero(within_v, &most)?);
    (low < high).then_some((low, high))
}

/// The edges by the settled sine, for a circuit without a current limit.
fn closed_form(circuit: &Circuit, gap_v: f64, period_s: f64, supply_v: f64) -> Option<(f64, f64)> {
    let charging_s = period_s - circuit.conduction_s();
    if circuit.knee_v().is_some() || charging_s <= 0.0 {
        return None;
    }
    let left = circuit.residual_v() * (-charging_s / circuit.time_constant_s()).exp();
    let reached = circuit.with_ripple(None).voltage_after(circuit.residual_v(), 0.0, charging_s);
    let gain = (reached - left) / supply_v;
    let swing = circuit.ripple_swing_v(period_s) / supply_v;
    (gain > swing).then(|| ((gap_v - left) / (gain + swing), (gap_v - left) / (gain - swing)))
}

/// Where a function that falls with the supply voltage passes zero.
fn falling_zero(near_v: f64, f: &dyn Fn(f64) -> f64) -> Option<f64> {
    let (mut low, mut high) = (near_v, near_v);
    let mut tries = 0;
    while f(low) < 0.0 || f(high) > 0.0 {
        if f(low) < 0.0 {
            low /= 1.1;
        }
        if f(high) > 0.0 {
            high *= 1.1;
        }
        tries += 1;
        if tries > 40 {
            return None;
        }
    }
    for _ in 0..HALVINGS {
        let middle = 0.5 * (low + high);
        if f(middle) > 0.0 { low = middle } else { high = middle }
    }
    Some(0.5 * (low + high))
}
