//! Breakdown between planes in air: the uniform-field formula, and Paschen's law below a tenth of a millimetre.

use super::uniform::{AIR, SECONDARY, uniform_kv};
use super::{Law, Level, NoGapVoltage};

/// Torr of standard air.
const TORR: f64 = 759.8;
/// δ·d in cm below which Paschen's law is taken alone, and above which the uniform-field formula is; between them the two,
/// which differ by under 6 % there, pass over into one another, so that nothing jumps.
const PASSAGE_CM: (f64, f64) = (0.008, 0.0125);
/// Greatest δ·d, cm: the formula is published up to 20 cm.
const MOST_CM: f64 = 20.0;
/// Least p·d, Torr·cm: twice that of the minimum. Nearer to it no set of constants gives place and depth of the minimum.
const LEAST_TORR_CM: f64 = 1.7;
/// Least spacing, m: below, field emission takes over (from memory).
const LEAST_SPACING_M: f64 = 10e-6;
/// Accuracy of the uniform-field formula: the published ones differ by 6 %.
const BAND_UNIFORM: f64 = 0.06;
/// Accuracy of Paschen's law with the usual constants.
const BAND_PASCHEN: f64 = 0.2;

/// Breakdown voltage of planes with rounded rims.
pub(super) fn planes(spacing_m: f64, density: f64) -> Result<Level, NoGapVoltage> {
    let x = 100.0 * spacing_m * density;
    let torr_cm = TORR * x;
    let least_m = LEAST_SPACING_M.max(0.01 * LEAST_TORR_CM / (TORR * density));
    let range = (least_m, 0.01 * MOST_CM / density);
    if !(range.0..=range.1).contains(&spacing_m) {
        let instead = "below it field emission and the minimum of Paschen's law set the voltage, above it nothing is published; \
                       state gap.voltage";
        return Err(NoGapVoltage::range("gap.spacing", spacing_m, "m", range, instead));
    }
    let uniform = 1e3 * uniform_kv(x);
    let (low, high) = PASSAGE_CM;
    if x >= high {
        return Ok(Level { voltage_v: uniform, band: BAND_UNIFORM, law: Law::UniformField });
    }
    // The range above keeps p·d right of the minimum, where the law has an answer.
    let paschen = AIR.paschen_v(torr_cm, SECONDARY).unwrap_or(uniform);
    let weight = ((x / low).ln() / (high / low).ln()).max(0.0);
    let voltage_v = paschen * (1.0 - weight) + uniform * weight;
    let (band, law) = if weight > 0.5 { (BAND_UNIFORM, Law::UniformField) } else { (BAND_PASCHEN, Law::Paschen) };
    Ok(Level { voltage_v, band, law })
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn millimetres_are_a_uniform_field_and_tens_of_micrometres_are_paschens() {
        assert_eq!(planes(1e-3, 1.0).unwrap().law, Law::UniformField);
        assert!((planes(1e-3, 1.0).unwrap().voltage_v - 4345.0).abs() < 1.0);
        let small = planes(50e-6, 1.0).unwrap();
        assert_eq!(small.law, Law::Paschen);
        // 38 Torr·cm: 365·3.8/(1.1787 + ln 3.8) by hand.
        assert!((small.voltage_v / (365.0 * 3.799 / (1.1787 + 3.799f64.ln())) - 1.0).abs() < 1e-3);
    }

    #[test]
    fn density_and_spacing_count_by_their_product() {
        assert!((planes(2e-3, 0.5).unwrap().voltage_v / planes(1e-3, 1.0).unwrap().voltage_v - 1.0).abs() < 1e-12);
    }

    #[test]
    fn nothing_is_said_below_ten_micrometres_or_beyond_20_cm() {
        for (spacing, density) in [(5e-6, 1.0), (0.3, 1.0), (30e-6, 0.1)] {
            assert!(planes(spacing, density).is_err(), "{spacing} {density}");
        }
    }

    proptest! {
        #[test]
        fn the_voltage_rises_without_jumps_and_never_falls_below_300_volts(
            spacing_log in -4.6..-0.8f64, density in 0.3..1.5f64, step in 1e-6..1e-4f64,
        ) {
            let spacing = 10f64.powf(spacing_log);
            if let (Ok(at), Ok(beyond)) = (planes(spacing, density), planes(spacing * (1.0 + step), density)) {
                prop_assert!(at.voltage_v > 300.0);
                prop_assert!(beyond.voltage_v > at.voltage_v);
                prop_assert!(beyond.voltage_v / at.voltage_v - 1.0 < 2.0 * step);
            }
        }
    }
}
