//! An input of a measurement: its value and what is known of its error.

use crate::bench::{Quantity, Tolerance};
use crate::model::random::Random;
use std::f64::consts::TAU;

/// Distribution of an input about its value.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Distribution {
    /// Known exactly.
    Exact,
    /// Normal with a standard uncertainty.
    Normal {
        /// Standard uncertainty.
        u: f64,
    },
    /// Rectangular between limits of error (JCGM 100, 4.3.7).
    Rectangular {
        /// Half width.
        half_width: f64,
    },
    /// Rectangular between limits that are themselves only known to ± `inexactness` (JCGM 101, 6.4.3).
    InexactRectangular {
        /// Half width.
        half_width: f64,
        /// Half width of the limits' own range.
        inexactness: f64,
    },
    /// Arcsine: a sine of unknown phase (JCGM 101, 6.4.6).
    Arcsine {
        /// Amplitude.
        half_width: f64,
    },
    /// Scaled and shifted Student's t: a mean of a few observations (JCGM 101, 6.4.9).
    Student {
        /// Standard uncertainty as JCGM 100 counts it: the scale of the distribution.
        scale: f64,
        /// Degrees of freedom.
        degrees_of_freedom: f64,
    },
}

impl Distribution {
    /// Standard uncertainty.
    #[must_use]
    pub fn u(&self) -> f64 {
        match *self {
            Self::Exact => 0.0,
            Self::Normal { u } => u,
            Self::Rectangular { half_width } => half_width / 3f64.sqrt(),
            Self::InexactRectangular { half_width, inexactness } => {
                (half_width * half_width / 3.0 + inexactness * inexactness / 9.0).sqrt()
            }
            Self::Arcsine { half_width } => half_width / std::f64::consts::SQRT_2,
            Self::Student { scale, .. } => scale,
        }
    }

    /// Degrees of freedom of the standard uncertainty; infinite for what is not a sample. Of limits that are known to a
    /// fraction r, ½·r⁻² (JCGM 100, G.4.2).
    #[must_use]
    pub fn degrees_of_freedom(&self) -> f64 {
        match *self {
            Self::Student { degrees_of_freedom, .. } => degrees_of_freedom,
            Self::InexactRectangular { half_width, inexactness } => 0.5 * (half_width / inexactness).powi(2),
            _ => f64::INFINITY,
        }
    }

    /// In one word or two.
    #[must_use]
    pub fn name(&self) -> &'static str {
        match self {
            Self::Exact => "exact",
            Self::Normal { .. } => "normal",
            Self::Rectangular { .. } => "rectangular",
            Self::InexactRectangular { .. } => "rectangular, inexact limits",
            Self::Arcsine { .. } => "arcsine",
            Self::Student { .. } => "Student's t",
        }
    }

    /// A draw of the error.
    pub(super) fn draw(&self, random: &mut Random) -> f64 {
        let symmetric = |random: &mut Random| 2.0 * random.uniform() - 1.0;
        match *self {
            Self::Exact => 0.0,
            Self::Normal { u } => u * random.normal(),
            Self::Rectangular { half_width } => half_width * symmetric(random),
            Self::InexactRectangular { half_width, inexactness } => {
                // Both limits move together: the middle stays, the width does not (JCGM 101, 6.4.3.4).
                let width = half_width + inexactness * symmetric(random);
                width * symmetric(random)
            }
            Self::Arcsine { half_width } => half_width * (TAU * random.uniform()).sin(),
            Self::Student { scale, degrees_of_freedom } => {
                // The polar method for t of any degrees of freedom (Bailey 1994).
                let radius = degrees_of_freedom * (random.uniform().powf(-2.0 / degrees_of_freedom) - 1.0);
                scale * radius.sqrt() * (TAU * random.uniform()).cos()
            }
        }
    }
}

/// An input with its name and what would make it better.
#[derive(Debug, Clone, PartialEq)]
pub struct Input {
    /// What it is.
    pub name: String,
    /// Unit of the value; empty for a plain number.
    pub unit: &'static str,
    /// Best estimate.
    pub value: f64,
    /// What is known of its error.
    pub distribution: Distribution,
    /// What would reduce its uncertainty; empty if nothing is known.
    pub remedy: &'static str,
}

impl Input {
    /// An input without a remedy.
    pub fn new(name: impl Into<String>, unit: &'static str, value: f64, distribution: Distribution) -> Self {
        Self { name: name.into(), unit, value, distribution, remedy: "" }
    }

    /// A quantity of a bench: limits of error are rectangular, a standard uncertainty is normal.
    pub fn of_quantity(name: impl Into<String>, unit: &'static str, quantity: &Quantity) -> Self {
        let distribution = match quantity.tolerance {
            Tolerance::Exact => Distribution::Exact,
            Tolerance::Limit(half_width) => Distribution::Rectangular { half_width },
            Tolerance::Standard(u) => Distribution::Normal { u },
        };
        Self::new(name, unit, quantity.value, distribution)
    }

    /// The same with its remedy.
    #[must_use]
    pub fn reduced_by(self, remedy: &'static str) -> Self {
        Self { remedy, ..self }
    }
}
