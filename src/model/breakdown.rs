//! The voltage at which the gap breaks down: stated, or from electrodes, spacing and air, with its range and accuracy.
//!
//! Laws: sphere-gap table of IEC 60052 with density and humidity correction; uniform field 24.22·x + 6.08·√x with x = δ·d,
//! and Paschen's law where p·d is small; needle-gap table; points by the field at the tip. Each holds in air only, within
//! the range that it refuses to leave, and with the accuracy of [`GapVoltage::band`]. Units: V, m, K, Pa.

mod budget;
mod error;
mod inputs;
mod planes;
mod points;
mod spacing;
mod sphere_table;
mod spheres;
mod uniform;

pub use budget::{Contribution, GapVoltage, gap_voltage};
pub use error::NoGapVoltage;
pub use inputs::implied_spacing;
pub use spacing::{GapGeometry, Implied};
pub use uniform::{
    AIR, GASES, Gas, SECONDARY, point_field_factor, sphere_field_factor, sphere_surface_kv_per_cm, uniform_kv,
};

use super::air::{Air, DENSITY_RANGE};
use crate::bench::Electrodes;
use serde::{Deserialize, Serialize};

/// Where a gap voltage comes from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Law {
    /// `gap.voltage`.
    Stated,
    /// Sphere-gap table of IEC 60052.
    SphereTable,
    /// That table continued: short spacings, wide spacings, spheres below 20 mm.
    SphereTableExtrapolated,
    /// Uniform field.
    UniformField,
    /// Paschen's law.
    Paschen,
    /// Needle-gap table.
    Needles,
    /// Field at the tip of a point.
    TipField,
}

impl Law {
    /// In words.
    #[must_use]
    pub fn words(self) -> &'static str {
        match self {
            Self::Stated => "as stated",
            Self::SphereTable => "sphere-gap table of IEC 60052",
            Self::SphereTableExtrapolated => "sphere-gap table of IEC 60052, continued beyond its entries",
            Self::UniformField => "uniform field, 24.22·x + 6.08·√x kV, x = δ·d in cm",
            Self::Paschen => "Paschen's law for air",
            Self::Needles => "needle-gap table",
            Self::TipField => "field at the tips of the points",
        }
    }
}

/// A voltage by one law.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Level {
    /// Breakdown voltage, V.
    pub voltage_v: f64,
    /// Accuracy of the law itself: half width of its band, as a fraction.
    pub band: f64,
    /// The law.
    pub law: Law,
}

/// Breakdown voltage of electrodes in air. `diameter_m` is that of the spheres or of the tips of the points; planes need
/// none, points without one are needles.
///
/// # Errors
/// [`NoGapVoltage`] if the law does not hold there, with what holds instead.
pub fn level(
    electrodes: Electrodes,
    diameter_m: Option<f64>,
    spacing_m: f64,
    air: &Air,
) -> Result<Level, NoGapVoltage> {
    if !(spacing_m > 0.0 && spacing_m.is_finite()) {
        return Err(NoGapVoltage::range("gap.spacing", spacing_m, "m", (0.0, f64::INFINITY), "it must be above 0 m"));
    }
    match electrodes {
        Electrodes::Plane => planes::planes(spacing_m, air.relative_density()),
        Electrodes::Spheres => {
            let diameter = diameter_m.ok_or(NoGapVoltage::Missing("gap.diameter"))?;
            let standard = spheres::spheres(diameter, spacing_m)?;
            let density = air.density_factor().ok_or_else(|| {
                let instead = "the density correction of the sphere-gap table ends there; state gap.voltage";
                NoGapVoltage::range("the relative air density", air.relative_density(), "", DENSITY_RANGE, instead)
            })?;
            Ok(Level { voltage_v: standard.voltage_v * density * air.humidity_factor(), ..standard })
        }
        Electrodes::Points => points::points(diameter_m, spacing_m, air.relative_density()),
    }
}
