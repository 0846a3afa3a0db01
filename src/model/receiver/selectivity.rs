//! IF selectivity as the poles of its low-pass equivalent.
//!
//! Assumption: the band is narrow against its centre, so that the band-pass filter acts on the complex envelope as a low-pass
//! filter of half the bandwidth. Sources: classical tuned-circuit theory; for the two pairs, the theoretical receiver of the
//! informative annex of CISPR 16-1-1 (from memory).

use super::Complex;
use serde::{Deserialize, Serialize};
use std::f64::consts::PI;

/// Which circuits select the channel. Bandwidths are given between the 6 dB points.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", tag = "kind")]
pub enum Selectivity {
    /// Critically coupled pairs of tuned circuits in cascade; two pairs are the usual broadcast receiver and the default.
    CoupledPairs {
        /// Pairs in cascade.
        pairs: u8,
    },
    /// Butterworth.
    Butterworth {
        /// Poles of the low-pass equivalent.
        poles: u8,
    },
    /// Equal single tuned circuits in cascade; tends to a Gaussian as they become many.
    Synchronous {
        /// Circuits in cascade.
        circuits: u8,
    },
    /// Flat with steep edges and linear phase, as ceramic and digital filters come near.
    Flat {
        /// Width of each edge, from pass to stop band, in percent of the bandwidth.
        edge_percent: u8,
    },
}

impl Default for Selectivity {
    fn default() -> Self {
        Self::CoupledPairs { pairs: 2 }
    }
}

/// A pole of the low-pass equivalent and how often it occurs.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Pole {
    /// Position, rad/s; the real part is negative.
    pub at: Complex,
    /// Multiplicity, at least 1.
    pub multiplicity: usize,
}

impl Selectivity {
    /// Greatest order: above it the exact step loses digits.
    pub const MAX_ORDER: usize = 32;

    /// Five equal circuits: the pulse response differs from a Gaussian one by a few percent.
    #[must_use]
    pub fn gaussian() -> Self {
        Self::Synchronous { circuits: 5 }
    }

    /// Order of the low-pass equivalent.
    #[must_use]
    pub fn order(self) -> usize {
        match self {
            Self::CoupledPairs { pairs } => 2 * usize::from(pairs),
            Self::Butterworth { poles } => usize::from(poles),
            Self::Synchronous { circuits } => usize::from(circuits),
            // No poles; as good as the simplest filter.
            Self::Flat { .. } => 1,
        }
    }

    /// Poles for a 6 dB bandwidth in Hz (between the two 6 dB points, so the low-pass equivalent has half of it).
    pub(crate) fn poles(self, bandwidth_hz: f64) -> Vec<Pole> {
        let edge = PI * bandwidth_hz;
        match self {
            // One pair: |H|² = 4w⁴/(4w⁴ + Ω⁴); n of them are down to 1/2 where Ω⁴ = 4w⁴(2^(2/n) − 1).
            Self::CoupledPairs { pairs } => {
                let n = f64::from(pairs);
                let w = edge / (2f64.sqrt() * (2f64.powf(2.0 / n) - 1.0).powf(0.25));
                let multiplicity = usize::from(pairs);
                [1.0, -1.0].map(|side| Pole { at: Complex::new(-w, side * w), multiplicity }).to_vec()
            }
            Self::Butterworth { poles } => {
                let n = f64::from(poles);
                let corner = edge / 3f64.powf(0.5 / n);
                (0..poles)
                    .map(|k| {
                        let angle = PI * (2.0 * f64::from(k) + n + 1.0) / (2.0 * n);
                        Pole { at: Complex::from_polar(corner, angle), multiplicity: 1 }
                    })
                    .collect()
            }
            Self::Synchronous { circuits } => {
                let rate = edge / (2f64.powf(2.0 / f64::from(circuits)) - 1.0).sqrt();
                vec![Pole { at: Complex::new(-rate, 0.0), multiplicity: usize::from(circuits) }]
            }
            Self::Flat { .. } => Vec::new(),
        }
    }
}
