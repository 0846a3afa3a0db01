//! The air in the gap: relative density and humidity, and what they do to a breakdown voltage.
//!
//! Standard air is 20 °C, 101.3 kPa and 8.5 g/m³ of water (IEC 60052). Older handbooks refer to 25 °C, which makes a
//! difference of 1.7 %; every law here is brought to 20 °C first. Units: K, Pa, g/m³; relative humidity as a fraction.

use crate::bench;

/// Temperature of standard air, K.
pub const STANDARD_TEMPERATURE_K: f64 = 293.0;
/// Pressure of standard air, Pa.
pub const STANDARD_PRESSURE_PA: f64 = 101_300.0;
/// Absolute humidity of standard air, g/m³.
pub const STANDARD_HUMIDITY_G_PER_M3: f64 = 8.5;

/// What an unstated air may differ from standard air: ± 5 K, ± 2500 Pa, ± 45 % relative humidity (a heated room near sea
/// level).
pub const UNSTATED: [f64; 3] = [5.0, 2500.0, 0.45];

/// 0 °C as IEC 60052 counts it, K.
const ZERO_CELSIUS_K: f64 = 273.0;
/// Relative humidity that gives the standard absolute humidity at 20 °C.
const STANDARD_RELATIVE_HUMIDITY: f64 = 0.4933;

/// Correction factor of a sphere gap against relative air density (a published copy of the table of the older standards).
const DENSITY_TABLE: [(f64, f64); 10] = [
    (0.70, 0.72),
    (0.75, 0.77),
    (0.80, 0.82),
    (0.85, 0.86),
    (0.90, 0.91),
    (0.95, 0.95),
    (1.00, 1.00),
    (1.05, 1.05),
    (1.10, 1.09),
    (1.15, 1.12),
];

/// State of the air.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Air {
    /// Temperature, K.
    pub temperature_k: f64,
    /// Pressure, Pa.
    pub pressure_pa: f64,
    /// Relative humidity, 0..1.
    pub relative_humidity: f64,
}

impl Default for Air {
    /// Standard air.
    fn default() -> Self {
        Self { temperature_k: 293.15, pressure_pa: STANDARD_PRESSURE_PA, relative_humidity: STANDARD_RELATIVE_HUMIDITY }
    }
}

impl Air {
    /// The air of a bench; what it does not state is that of standard air.
    #[must_use]
    pub fn of_bench(air: &bench::Air) -> Self {
        let standard = Self::default();
        let or = |quantity: Option<bench::Quantity>, value: f64| quantity.map_or(value, |q| q.value);
        Self {
            temperature_k: or(air.temperature, standard.temperature_k),
            pressure_pa: or(air.pressure, standard.pressure_pa),
            relative_humidity: or(air.humidity, standard.relative_humidity),
        }
    }

    /// Temperature, °C.
    #[must_use]
    pub fn celsius(&self) -> f64 {
        self.temperature_k - 273.15
    }

    /// Density over that of standard air: (p/101.3 kPa)·293/(273 + t) (IEC 60052, IEC 60060-1).
    #[must_use]
    pub fn relative_density(&self) -> f64 {
        self.pressure_pa / STANDARD_PRESSURE_PA * STANDARD_TEMPERATURE_K / (ZERO_CELSIUS_K + self.celsius())
    }

    /// Water in the air, g/m³: 6.11·R·exp(17.6·t/(243 + t))/(0.4615·(273 + t)), R in percent (IEC 60060-1:2010). Meant for
    /// −30 °C to 50 °C.
    #[must_use]
    pub fn absolute_humidity_g_per_m3(&self) -> f64 {
        let t = self.celsius();
        6.11 * 100.0 * self.relative_humidity * (17.6 * t / (243.0 + t)).exp() / (0.4615 * (ZERO_CELSIUS_K + t))
    }

    /// Humidity factor of a sphere gap: 1 + 0.002·(h/δ − 8.5) (IEC 60052:2002, from memory).
    #[must_use]
    pub fn humidity_factor(&self) -> f64 {
        1.0 + 0.002 * (self.humidity_over_density() - STANDARD_HUMIDITY_G_PER_M3)
    }

    /// h/δ, g/m³.
    #[must_use]
    pub fn humidity_over_density(&self) -> f64 {
        self.absolute_humidity_g_per_m3() / self.relative_density()
    }

    /// Density factor of a sphere gap: the relative density itself from 0.95 to 1.05, else interpolated in the published
    /// table. None outside 0.70 to 1.15, where the table ends.
    #[must_use]
    pub fn density_factor(&self) -> Option<f64> {
        let density = self.relative_density();
        let above = DENSITY_TABLE.iter().position(|(at, _)| *at >= density)?;
        let (high, factor_high) = DENSITY_TABLE[above];
        if above == 0 {
            return (density == high).then_some(factor_high);
        }
        let (low, factor_low) = DENSITY_TABLE[above - 1];
        Some(factor_low + (factor_high - factor_low) * (density - low) / (high - low))
    }
}

/// Lowest and highest relative density of [`Air::density_factor`].
pub const DENSITY_RANGE: (f64, f64) = (0.70, 1.15);

#[cfg(test)]
mod tests {
    use super::*;

    fn air(celsius: f64, pressure_pa: f64, relative_humidity: f64) -> Air {
        Air { temperature_k: 273.15 + celsius, pressure_pa, relative_humidity }
    }

    #[test]
    fn relative_density_refers_to_20_degrees_and_101_3_kilopascal() {
        // 95.0 kPa and 28 °C by hand.
        assert!((air(28.0, 95e3, 0.5).relative_density() - 0.912_88).abs() < 5e-6);
        assert!((air(20.0, 101.3e3, 0.5).relative_density() - 1.0).abs() < 1e-12);
        // The older handbook form 3.92·b/(273 + t) with b = 75 cmHg at 35 °C is 0.9545 (Wadhwa, High Voltage Engineering,
        // chapter 4); it refers to 25 °C and lies 298/293 above this one.
        let older = air(35.0, 750.0 * 133.322_387, 0.5).relative_density() * 298.0 / 293.0;
        // 3.92 is a rounded 298/76.
        assert!((older - 0.9545).abs() < 1e-3, "{older}");
    }

    #[test]
    fn humidity_and_its_factor_follow_the_worked_table() {
        // °C, %, g/m³, factor at 101.3 kPa: the formula of IEC 60060-1:2010 and the factor of IEC 60052 worked by hand.
        let rows = [
            (0.0, 0.5, 2.425, 0.9875),
            (10.0, 0.4, 3.752, 0.9902),
            (20.0, 0.5, 8.615, 1.0002),
            (20.0, 1.0, 17.229, 1.0175),
            (25.0, 0.6, 13.767, 1.0110),
            (30.0, 0.8, 24.181, 1.0330),
        ];
        for (celsius, relative, absolute, factor) in rows {
            let air = air(celsius, 101.3e3, relative);
            assert!((air.absolute_humidity_g_per_m3() - absolute).abs() < 6e-4, "{celsius}");
            assert!((air.humidity_factor() - factor).abs() < 6e-5, "{celsius}");
        }
        let total = air(25.0, 101.3e3, 0.6);
        assert!((total.relative_density() * total.humidity_factor() - 0.9940).abs() < 6e-5);
    }

    #[test]
    fn two_humidity_formulas_agree_within_half_a_percent_from_0_to_35_degrees() {
        // 6.112·exp(17.67·t/(t + 243.5))·R·2.1674/(273.15 + t), a published form good to 0.1 %.
        for celsius in 0..=35 {
            let t = f64::from(celsius);
            let other = 6.112 * (17.67 * t / (t + 243.5)).exp() * 50.0 * 2.1674 / (273.15 + t);
            assert!((air(t, 101.3e3, 0.5).absolute_humidity_g_per_m3() / other - 1.0).abs() < 5e-3, "{t}");
        }
    }

    #[test]
    fn standard_air_needs_no_correction() {
        let standard = Air::default();
        assert!((standard.humidity_factor() - 1.0).abs() < 1e-5);
        assert!((standard.density_factor().unwrap() - 1.0).abs() < 1e-9);
    }

    #[test]
    fn the_density_factor_is_the_published_table_and_ends_with_it() {
        let of = |density: f64| air(20.0, 101.3e3 * density, 0.5).density_factor();
        for (density, factor) in DENSITY_TABLE.iter().skip(1).take(8) {
            assert!((of(*density).unwrap() - factor).abs() < 1e-9, "{density}");
        }
        assert!((of(0.97).unwrap() - 0.97).abs() < 1e-9);
        assert_eq!((of(0.69), of(1.16)), (None, None));
    }
}
