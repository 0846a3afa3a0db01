//! From a breakdown voltage back to the spacing, and to what the same gap would hold in standard air.

use super::{Level, level};
use crate::bench::Electrodes;
use crate::model::air::Air;
use crate::model::root::bracketed;

/// Narrowest and widest spacing that is looked for, m.
const SPACINGS_M: (f64, f64) = (1e-5, 1.0);
/// Steps of the table over that range: 4 % of the spacing each.
const STEPS: i32 = 300;
/// By how much the air of the day moves a spacing at most, as a factor: the density correction ends at 0.70 and 1.15.
const AIR_MOVES: f64 = 1.6;

/// A gap of known electrodes whose spacing is to be found; many voltages can be asked for.
#[derive(Debug, Clone)]
pub struct GapGeometry {
    electrodes: Electrodes,
    diameter_m: Option<f64>,
    /// Spacing, m, and breakdown voltage in standard air, V, both rising.
    table: Vec<(f64, f64)>,
}

/// What a breakdown voltage says of the gap.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Implied {
    /// Spacing, m.
    pub spacing_m: f64,
    /// What the gap would break down at in standard air.
    pub in_standard_air: Level,
    /// d ln(voltage)/d ln(spacing) there.
    pub exponent: f64,
}

impl GapGeometry {
    /// Electrodes with the diameter of the spheres or tips, if they have one. None where no law holds at any spacing.
    #[must_use]
    pub fn new(electrodes: Electrodes, diameter_m: Option<f64>) -> Option<Self> {
        let air = Air::default();
        let ratio = SPACINGS_M.1 / SPACINGS_M.0;
        let mut table: Vec<(f64, f64)> = Vec::new();
        for step in 0..=STEPS {
            let spacing_m = SPACINGS_M.0 * ratio.powf(f64::from(step) / f64::from(STEPS));
            let Ok(found) = level(electrodes, diameter_m, spacing_m, &air) else { continue };
            if table.last().is_none_or(|last| found.voltage_v > last.1) {
                table.push((spacing_m, found.voltage_v));
            }
        }
        (table.len() >= 2).then_some(Self { electrodes, diameter_m, table })
    }

    /// Spacing at which the gap breaks down at a voltage in the given air. None where no law gives that voltage.
    #[must_use]
    pub fn implied(&self, voltage_v: f64, air: &Air) -> Option<Implied> {
        let above = self.table.partition_point(|row| row.1 < voltage_v);
        let last = self.table.len() - 1;
        let (low, high) = (self.table[above.saturating_sub(1)].0, self.table[above.min(last)].0);
        let at = |spacing_m: f64, air: &Air| level(self.electrodes, self.diameter_m, spacing_m, air).ok();
        let excess = |spacing_m: f64| at(spacing_m, air).map_or(f64::NAN, |level| level.voltage_v - voltage_v);
        // From the places of the table outwards, no further than a law holds.
        let (mut low, mut high) = (low / 1.05, high * 1.05);
        let ends = (self.table[0].0, self.table[last].0);
        (low, high) = (low.max(ends.0), high.min(ends.1));
        let begin = (low, high);
        while excess(low) > 0.0 && low > begin.0 / AIR_MOVES && low > ends.0 {
            low = (low / 1.1).max(ends.0);
        }
        while excess(high) < 0.0 && high < begin.1 * AIR_MOVES && high < ends.1 {
            high = (high * 1.1).min(ends.1);
        }
        if !(excess(low) <= 0.0 && excess(high) >= 0.0) {
            return None;
        }
        let spacing_m = bracketed(low, high, excess);
        let standard = Air::default();
        let in_standard_air = at(spacing_m, &standard)?;
        let step = if spacing_m * 1.01 < ends.1 { 1.01f64 } else { 1.0 / 1.01 };
        let beside = at(spacing_m * step, &standard)?;
        let exponent = (beside.voltage_v / in_standard_air.voltage_v).ln() / step.ln();
        Some(Implied { spacing_m, in_standard_air, exponent })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_spacing_comes_back_for_every_shape_and_weather() {
        let shapes = [
            (Electrodes::Spheres, Some(0.025), 2.2e-3),
            (Electrodes::Spheres, Some(0.025), 9e-3),
            (Electrodes::Plane, None, 1.5e-3),
            (Electrodes::Plane, None, 1e-4),
            (Electrodes::Points, None, 8e-3),
            (Electrodes::Points, Some(2e-3), 4e-3),
        ];
        for (electrodes, diameter_m, spacing_m) in shapes {
            let geometry = GapGeometry::new(electrodes, diameter_m).unwrap();
            let standard = level(electrodes, diameter_m, spacing_m, &Air::default()).unwrap();
            for (kelvin, pascal, humidity) in
                [(293.15, 101.3e3, 0.4933), (303.15, 98e3, 0.7), (283.15, 103e3, 0.2), (298.15, 85e3, 0.5)]
            {
                let air = Air { temperature_k: kelvin, pressure_pa: pascal, relative_humidity: humidity };
                let measured = level(electrodes, diameter_m, spacing_m, &air).unwrap().voltage_v;
                let found = geometry.implied(measured, &air).unwrap();
                assert!((found.spacing_m / spacing_m - 1.0).abs() < 1e-9, "{electrodes:?} {spacing_m}");
                assert!((found.in_standard_air.voltage_v / standard.voltage_v - 1.0).abs() < 1e-9);
                // About 1 for needles and planes, less where the field crowds at a tip.
                assert!((0.3..1.1).contains(&found.exponent), "{electrodes:?} {}", found.exponent);
            }
        }
    }

    #[test]
    fn two_centimetre_spheres_that_hold_8_kilovolts_stand_2_millimetres_apart() {
        // IEC 60052:2002, table 2; 7.28 kV is 8.0 kV at a relative density of 0.90 by the published factor 0.91.
        let geometry = GapGeometry::new(Electrodes::Spheres, Some(0.02)).unwrap();
        let found = geometry.implied(8e3, &Air::default()).unwrap();
        assert!((found.spacing_m - 2e-3).abs() < 1e-8);
        let thin = Air { temperature_k: 293.15, pressure_pa: 91_170.0, relative_humidity: 0.444 };
        let reduced = geometry.implied(7.28e3, &thin).unwrap().in_standard_air.voltage_v;
        assert!((reduced / 8e3 - 1.0).abs() < 1e-3, "{reduced}");
    }

    #[test]
    fn a_voltage_that_no_law_gives_has_no_spacing() {
        let geometry = GapGeometry::new(Electrodes::Spheres, Some(0.02)).unwrap();
        for voltage_v in [1e-3, 1e6, f64::NAN] {
            assert_eq!(geometry.implied(voltage_v, &Air::default()), None);
        }
        let vacuum = Air { pressure_pa: 100.0, ..Air::default() };
        assert_eq!(geometry.implied(8e3, &vacuum), None);
        assert!(GapGeometry::new(Electrodes::Spheres, None).is_none());
    }
}
