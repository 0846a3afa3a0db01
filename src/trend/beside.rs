//! The figures that are not charted: where they were in the first stretch and where they are.

use super::{Charted, FEWEST, Limits, Point};
use serde::{Deserialize, Serialize};

/// One figure beside the charted one.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Beside {
    /// The figure.
    pub figure: Charted,
    /// Its unit; empty for a share.
    pub unit: String,
    /// Mean in the first stretch.
    pub reference: f64,
    /// Limits for one further entry, from the first stretch.
    pub limits: (f64, f64),
    /// Last value.
    pub last: f64,
    /// Side of the limits on which it lies: −1, 0 or 1.
    pub outside: i8,
}

/// All figures that the first stretch and the last entry have.
pub(super) fn beside(points: &[Point], charted: Charted, limits: Option<&Limits>) -> Vec<Beside> {
    let Some(last) = points.last().filter(|_| limits.is_some()) else { return Vec::new() };
    let first = limits.map_or(0, |limits| limits.entries).max(FEWEST).min(points.len());
    let one = |figure: Charted| {
        let values: Vec<f64> = points[..first].iter().filter_map(|point| figure.of(point)).collect();
        let last = figure.of(last)?;
        (values.len() >= FEWEST.min(first)).then(|| {
            let limits = Limits::of(&values);
            Beside {
                figure,
                unit: figure.unit().to_owned(),
                reference: limits.centre,
                // None of these figures can be negative.
                limits: (limits.low.max(0.0), limits.high),
                last,
                outside: limits.side(last),
            }
        })
    };
    Charted::ALL.into_iter().filter(|figure| *figure != charted).filter_map(one).collect()
}
