//! Ripple and drop of a half-wave voltage multiplier (Cockcroft and Walton), to fill in `supply.ripple`.
//!
//! n stages of two capacitors, all of C, loaded with a current I at a frequency f:
//! drop = I/(6·f·C)·(4n³ + 3n² − n), ripple peak to peak = I·n·(n + 1)/(2·f·C) (textbook high-voltage engineering; other
//! published approximations differ by 20 %). A doubler of two different capacitors: ripple I/(C2·f), mean drop I/f·(1/C1 + 1/(2·C2)).
//! Units: A, Hz, F, V.

/// A half-wave multiplier with equal capacitors.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Multiplier {
    /// Stages of two capacitors.
    pub stages: u32,
    /// Every capacitor, F.
    pub capacitance_f: f64,
    /// Frequency of the feeding voltage, Hz.
    pub frequency_hz: f64,
}

impl Multiplier {
    /// Fall of the crests of the output voltage under a load current, V.
    #[must_use]
    pub fn drop_v(&self, load_a: f64) -> f64 {
        let n = f64::from(self.stages);
        load_a / (6.0 * self.frequency_hz * self.capacitance_f) * (4.0 * n.powi(3) + 3.0 * n * n - n)
    }

    /// Ripple under a load current, peak to peak, V; `supply.ripple` is half of it over the output voltage.
    #[must_use]
    pub fn ripple_v(&self, load_a: f64) -> f64 {
        let n = f64::from(self.stages);
        load_a * n * (n + 1.0) / (2.0 * self.frequency_hz * self.capacitance_f)
    }

    /// Fall of the mean output voltage, V: that of the crests and half of the ripple.
    #[must_use]
    pub fn mean_drop_v(&self, load_a: f64) -> f64 {
        self.drop_v(load_a) + 0.5 * self.ripple_v(load_a)
    }

    /// Number of stages beyond which the drop eats what a stage adds: √(V̂·f·C/I), V̂ the peak of the feeding voltage, V.
    #[must_use]
    pub fn best_stages(&self, feed_peak_v: f64, load_a: f64) -> f64 {
        (feed_peak_v * self.frequency_hz * self.capacitance_f / load_a).sqrt()
    }
}

/// One stage with two different capacitors: a doubler.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Doubler {
    /// Capacitor that carries the charge up, F.
    pub pump_f: f64,
    /// Capacitor across the output, F.
    pub smoothing_f: f64,
    /// Frequency of the feeding voltage, Hz.
    pub frequency_hz: f64,
}

impl Doubler {
    /// Ripple under a load current, peak to peak, V.
    #[must_use]
    pub fn ripple_v(&self, load_a: f64) -> f64 {
        load_a / (self.frequency_hz * self.smoothing_f)
    }

    /// Fall of the mean output voltage under a load current, V: the charge of a period missing on the pump, and half the
    /// ripple.
    #[must_use]
    pub fn mean_drop_v(&self, load_a: f64) -> f64 {
        load_a / (self.frequency_hz * self.pump_f) + 0.5 * self.ripple_v(load_a)
    }

    /// Mean output voltage under a load current, V; `feed_peak_v` is the peak of the feeding voltage.
    #[must_use]
    pub fn mean_output_v(&self, feed_peak_v: f64, load_a: f64) -> f64 {
        2.0 * feed_peak_v - self.mean_drop_v(load_a)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_published_multiplier_has_its_printed_drop_and_best_number_of_stages() {
        // Naidu & Kamaraju, example 6.1: 0.05 µF, 125 kV, 150 Hz, 5 mA, 8 stages: regulation 12.4 % of 2 MV, optimum 14.
        let multiplier = Multiplier { stages: 8, capacitance_f: 0.05e-6, frequency_hz: 150.0 };
        assert!((multiplier.drop_v(5e-3) / 2e6 - 0.124).abs() < 5e-4);
        assert!((multiplier.best_stages(125e3, 5e-3) - 13.69).abs() < 0.005);
        // Its printed ripple of 4.53 % puts 16 capacitors in the place of 8 stages; with the stages it is 1.2 %.
        assert!((multiplier.ripple_v(5e-3) / 2e6 - 0.012).abs() < 1e-6);
        let by_capacitors = Multiplier { stages: 16, ..multiplier };
        assert!((by_capacitors.ripple_v(5e-3) / 2e6 - 0.0453).abs() < 5e-5);
    }

    #[test]
    fn another_published_formula_agrees_within_20_percent() {
        // I·(N² + N/2)/(8·f·C) with N single stages: N = 6, 1 mA, 50 kHz, 1 nF: 97.5 V.
        let multiplier = Multiplier { stages: 3, capacitance_f: 1e-9, frequency_hz: 50e3 };
        assert!((multiplier.ripple_v(1e-3) - 120.0).abs() < 1e-9);
        assert!((97.5f64 / multiplier.ripple_v(1e-3) - 1.0).abs() < 0.2);
    }

    // Textbook of high-voltage engineering, worked example on p. 556: 100 kV rms, 50 Hz, 5 mA, 0.01 µF and 0.05 µF: ripple 2000 V, drop
    // 11 000 V, mean output 271.8 kV.
    #[test]
    fn a_published_doubler_has_its_printed_ripple_drop_and_output() {
        let doubler = Doubler { pump_f: 0.01e-6, smoothing_f: 0.05e-6, frequency_hz: 50.0 };
        assert!((doubler.ripple_v(5e-3) - 2000.0).abs() < 1e-9);
        assert!((doubler.mean_drop_v(5e-3) - 11_000.0).abs() < 1e-8);
        let output_v = doubler.mean_output_v(100e3 * 2f64.sqrt(), 5e-3);
        assert!((output_v - 271.8e3).abs() < 50.0, "{output_v}");
    }

    #[test]
    fn a_doubler_of_equal_capacitors_is_a_multiplier_of_one_stage() {
        let one = Multiplier { stages: 1, capacitance_f: 0.05e-6, frequency_hz: 50.0 };
        let doubler = Doubler { pump_f: 0.05e-6, smoothing_f: 0.05e-6, frequency_hz: 50.0 };
        assert!((doubler.ripple_v(5e-3) / one.ripple_v(5e-3) - 1.0).abs() < 1e-12);
        assert!((doubler.mean_drop_v(5e-3) / one.mean_drop_v(5e-3) - 1.0).abs() < 1e-12);
    }
}
