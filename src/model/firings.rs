//! Trains of firings with known truth: the forward model from a charging circuit (or from bare statistics) to the
//! instants and voltages of breakdown.
//!
//! The breakdown voltage of firing k is Vb·(1 + drift·t)·(1 + spread·z_k), z_k normal with a first-order memory ρ:
//! z_k = ρ·z_{k−1} + √(1 − ρ²)·n_k. The instant is the exact crossing of the capacitor voltage, under ripple with the phase
//! running on from firing to firing. A gap that recovers slowly withstands less at first; a statistical lag (an
//! exponential wait after the crossing, von Laue 1925) lets the voltage rise on. Random draws come from separate streams
//! of one seed for the gap, the lag and each fault, so that adding a fault does not move the firings.
//!
//! Units: s, V, Hz.

mod circuit;
mod faults;
mod realised;
mod rhythm;

pub use faults::{Dust, Faults, Outage};
pub use realised::Realised;
pub use rhythm::{BareRhythm, GapLaw, PeriodLaw, Recovery};

use crate::firing::Firing;
use crate::model::charging::{Circuit, NoFiring};
use thiserror::Error;

/// Most firings of one train; a guard against a plan that would fill the memory.
pub const MOST_FIRINGS: usize = 5_000_000;

/// What sets the instants of firing.
#[derive(Debug, Clone, PartialEq)]
pub enum Rhythm {
    /// A gap across a charging circuit.
    Bench {
        /// The charging circuit.
        circuit: Circuit,
        /// The gap.
        gap: GapLaw,
    },
    /// A gap and a circuit that change as time goes on: each moment holds from its time until the next.
    Moving(Vec<Moment>),
    /// Bare statistics, without voltages.
    Bare(BareRhythm),
}

/// Circuit and gap from a time on.
#[derive(Debug, Clone, PartialEq)]
pub struct Moment {
    /// From when on, s.
    pub from_s: f64,
    /// The charging circuit.
    pub circuit: Circuit,
    /// The gap.
    pub gap: GapLaw,
}

/// How a train begins.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Start {
    /// Time zero falls at random between two firings of a gap that runs already.
    #[default]
    Running,
    /// The supply is switched on at time zero, with the capacitor at 0 V.
    SwitchedOn,
}

/// A train to be made.
#[derive(Debug, Clone, PartialEq)]
pub struct Plan {
    /// What sets the instants.
    pub rhythm: Rhythm,
    /// Faults.
    pub faults: Faults,
    /// How it begins.
    pub start: Start,
    /// Length, s.
    pub duration_s: f64,
    /// Seed of the random numbers; the same seed gives the same firing times.
    pub seed: u64,
}

/// A train, with what only the model knows.
#[derive(Debug, Clone, PartialEq)]
pub struct Train {
    /// All events in the order of time: firings, firings that stay unheard, extra strikes.
    pub firings: Vec<Firing>,
    /// The figures that came out, over firings heard or not, extra strikes left out.
    pub realised: Realised,
}

/// A train cannot be made.
#[derive(Debug, Clone, Copy, PartialEq, Error)]
pub enum NoTrain {
    /// The gap does not fire.
    #[error(transparent)]
    NoFiring(#[from] NoFiring),
    /// A number of the plan is out of range.
    #[error("{what} is {value}; {range}")]
    OutOfRange {
        /// Which number.
        what: &'static str,
        /// Its value.
        value: f64,
        /// What would be right.
        range: &'static str,
    },
    /// The train would have too many firings.
    #[error("the train would have more than {MOST_FIRINGS} firings; shorten it or lower the rate")]
    TooMany,
}

pub(crate) fn check(what: &'static str, value: f64, ok: bool, range: &'static str) -> Result<(), NoTrain> {
    if ok && value.is_finite() { Ok(()) } else { Err(NoTrain::OutOfRange { what, value, range }) }
}

/// Streams of the seed, one for each cause.
mod stream {
    pub const RHYTHM: u64 = 0;
    pub const LAG: u64 = 1;
    pub const MISSED: u64 = 2;
    pub const EXTRA: u64 = 3;
    pub const START: u64 = 4;
    pub const DUST: u64 = 5;
}

/// Makes the train of a plan.
///
/// # Errors
/// [`NoTrain`] if the gap does not fire or a number of the plan is out of range.
pub fn simulate(plan: &Plan) -> Result<Train, NoTrain> {
    check("the duration", plan.duration_s, plan.duration_s > 0.0, "it must be above 0 s")?;
    plan.faults.check()?;
    let rhythm = match &plan.rhythm {
        Rhythm::Bench { circuit, gap } => circuit::fire(plan, &[Moment { from_s: 0.0, circuit: *circuit, gap: *gap }])?,
        Rhythm::Moving(moments) => circuit::fire(plan, moments)?,
        Rhythm::Bare(bare) => rhythm::fire(plan, bare)?,
    };
    let realised = Realised::of(&rhythm, &plan.faults.outages);
    Ok(Train { firings: plan.faults.apply(rhythm, plan.duration_s, plan.seed), realised })
}
