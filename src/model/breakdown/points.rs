//! Breakdown between points.
//!
//! Needles by a published table; points of a known tip by the field at the tip, if that is more: a blunt tip sparks when
//! its surface does, a sharp one has corona first and sparks when the needle table says. Units: m, V.

use super::uniform::{point_field_factor, sphere_surface_kv_per_cm};
use super::{Law, Level, NoGapVoltage};

/// Voltage in kV and spacing in cm of the needle gap at 25 °C and 760 mmHg (American Institute of Electrical Engineers).
const NEEDLES: [(f64, f64); 6] = [(5.0, 0.42), (10.0, 0.85), (15.0, 1.30), (20.0, 1.75), (30.0, 2.69), (50.0, 5.20)];
/// The table refers to 25 °C.
const DENSITY_OF_TABLE: f64 = 293.0 / 298.0;
/// Accuracy of the needle table (rod gaps scatter by ± 8 %; humidity counts as much).
const BAND_NEEDLES: f64 = 0.15;
/// Accuracy below the least spacing of the table, where it is extended through zero.
const BAND_SHORT: f64 = 0.3;
/// Accuracy of a spark voltage from the field at the tip.
const BAND_TIP: f64 = 0.15;
/// Spacings of the needle table, m, extended downwards.
const SPACINGS_M: (f64, f64) = (1e-3, 0.0521);

/// Needle gap in air of a relative density, kV.
fn needles_kv(spacing_cm: f64, density: f64) -> f64 {
    let mut before = (0.0, 0.0);
    for row in NEEDLES {
        if spacing_cm <= row.1 {
            let weight = (spacing_cm - before.1) / (row.1 - before.1);
            return (before.0 + (row.0 - before.0) * weight) * density / DENSITY_OF_TABLE;
        }
        before = row;
    }
    before.0 * density / DENSITY_OF_TABLE
}

/// Breakdown voltage of points in air of a relative density.
pub(super) fn points(diameter_m: Option<f64>, spacing_m: f64, density: f64) -> Result<Level, NoGapVoltage> {
    let (least, most) = SPACINGS_M;
    if !(least..=most).contains(&spacing_m) {
        let instead = "the needle-gap table holds there; state gap.voltage";
        return Err(NoGapVoltage::range("gap.spacing", spacing_m, "m", SPACINGS_M, instead));
    }
    let needles_v = 1e3 * needles_kv(100.0 * spacing_m, density);
    let short = spacing_m < 0.01 * NEEDLES[0].1;
    let needles =
        Level { voltage_v: needles_v, band: if short { BAND_SHORT } else { BAND_NEEDLES }, law: Law::Needles };
    let Some(diameter_m) = diameter_m else { return Ok(needles) };
    let radius_m = 0.5 * diameter_m;
    if spacing_m < radius_m {
        let instead = "points closer than their radius are spheres: take electrodes = \"spheres\"";
        return Err(NoGapVoltage::range("gap.spacing", spacing_m, "m", (radius_m, most), instead));
    }
    let surface = sphere_surface_kv_per_cm(density, 100.0 * radius_m);
    let tip_v = 1e3 * surface * 100.0 * spacing_m / point_field_factor(spacing_m / radius_m);
    if tip_v > needles_v { Ok(Level { voltage_v: tip_v, band: BAND_TIP, law: Law::TipField }) } else { Ok(needles) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn needles_break_down_at_the_published_spacings() {
        for (kilovolts, spacing_cm) in NEEDLES {
            let found = points(None, 0.01 * spacing_cm, DENSITY_OF_TABLE).unwrap();
            assert!((found.voltage_v / (1e3 * kilovolts) - 1.0).abs() < 1e-9);
        }
        // American Institute of Electrical Engineers: 10 kV at 8.5 mm, to 15 %, in standard air too.
        assert!((points(None, 8.5e-3, 1.0).unwrap().voltage_v / 10e3 - 1.0).abs() < 0.15);
    }

    #[test]
    fn a_sharp_tip_is_a_needle_and_a_blunt_one_holds_more() {
        let at = |diameter: f64| points(Some(diameter), 5e-3, 1.0).unwrap();
        assert_eq!((at(0.02e-3).law, at(2e-3).law), (Law::Needles, Law::TipField));
        assert!(at(2e-3).voltage_v > at(1e-3).voltage_v && at(1e-3).voltage_v > at(0.02e-3).voltage_v);
        // And less than spheres a centimetre thick.
        assert!(at(2e-3).voltage_v < 17.4e3);
    }

    #[test]
    fn points_out_of_the_table_are_refused() {
        assert!(points(None, 0.5e-3, 1.0).is_err() && points(None, 0.06, 1.0).is_err());
        assert!(points(Some(6e-3), 2e-3, 1.0).unwrap_err().to_string().contains("spheres"));
    }
}
