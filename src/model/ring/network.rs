//! Modes of the linear network.

use crate::model::receiver::Complex;
use std::f64::consts::TAU;

/// Rounds of the root finder; it converges quadratically.
const ROUNDS: usize = 200;

/// Capacitor, leads, spark, coil and a capacitor across the coil.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Network {
    /// Capacitor that is charged and fires, F.
    pub capacitance_f: f64,
    /// Coil, H.
    pub inductance_h: f64,
    /// Loss resistance in series with the coil, Ω.
    pub coil_ohm: f64,
    /// Inductance of the leads between capacitor, gap and coil, H.
    pub lead_h: f64,
    /// Resistance of the spark, Ω.
    pub spark_ohm: f64,
    /// Capacitor across the coil, F; 0 for none.
    pub parallel_f: f64,
}

/// One ringing mode.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Mode {
    /// Ring frequency, Hz.
    pub ring_hz: f64,
    /// Decay rate, 1/s.
    pub decay_per_s: f64,
    /// Amplitude of its current in the coil over that of the strongest mode.
    pub share: f64,
}

impl Mode {
    /// Logarithmic decrement.
    #[must_use]
    pub fn decrement(&self) -> f64 {
        self.decay_per_s / self.ring_hz
    }

    /// Quality factor ½·√(1 + (2π/λ)²).
    #[must_use]
    pub fn quality(&self) -> f64 {
        0.5 * f64::hypot(1.0, TAU / self.decrement())
    }
}

impl Network {
    /// Inductance and capacitance of the simple formulas: coil and leads in series with the one capacitor; with a second
    /// capacitor across the coil both capacitors together and no leads.
    fn simple(&self) -> (f64, f64) {
        let leads = if self.parallel_f > 0.0 { 0.0 } else { self.lead_h };
        (self.inductance_h + leads, self.capacitance_f + self.parallel_f)
    }

    /// Natural frequency of the simple formula 1/(2π√(L·C)), Hz.
    #[must_use]
    pub fn simple_hz(&self) -> f64 {
        let (l, c) = self.simple();
        1.0 / (TAU * (l * c).sqrt())
    }

    /// Quality factor of the simple formula: √(L/C)/R.
    #[must_use]
    pub fn simple_quality(&self) -> f64 {
        let (l, c) = self.simple();
        (l / c).sqrt() / (self.coil_ohm + self.spark_ohm)
    }

    /// Modes while the gap conducts, the one with most current in the coil first; those that do not ring are left out.
    ///
    /// The roots of (1 + s·C·Rg + s²·C·Ll)·(1 + s·C₂·R + s²·L·C₂) + s·C·R + s²·L·C; the current in the coil is C·Vb over
    /// that polynomial, so a root s has the amplitude 2·C·Vb/|P′(s)|.
    #[must_use]
    pub fn closed(&self) -> Vec<Mode> {
        let Self { capacitance_f: c, inductance_h: l, coil_ohm: r, lead_h, spark_ohm, parallel_f } = *self;
        let (a1, a2) = (c * spark_ohm, c * lead_h);
        let (b1, b2) = (parallel_f * r, parallel_f * l);
        modes(&[1.0, a1 + b1 + c * r, a2 + b2 + a1 * b1 + c * l, a1 * b2 + a2 * b1, a2 * b2])
    }

    /// The mode of coil and parallel capacitor after the gap has opened; none without that capacitor.
    #[must_use]
    pub fn open(&self) -> Option<Mode> {
        let c = self.parallel_f;
        if c <= 0.0 {
            return None;
        }
        modes(&[1.0, c * self.coil_ohm, c * self.inductance_h]).into_iter().next()
    }

    /// Half cycles for which an arc of constant voltage lets it ring from a capacitor voltage: with the voltage x of the
    /// capacitor at one current zero the next is (x − Va)·e^(−λ/2) − Va on the other side, until it is below Va. None
    /// without a ringing mode.
    #[must_use]
    pub fn arc_half_cycles(&self, gap_v: f64, arc_v: f64) -> Option<u32> {
        let mode = self.closed().into_iter().next()?;
        if arc_v <= 0.0 {
            return None;
        }
        let left = (-0.5 * mode.decrement()).exp();
        let (mut volts, mut count) = (gap_v, 0);
        // Every half cycle takes at least 2·Va.
        while volts > arc_v && count < 1_000_000 {
            volts = (volts - arc_v) * left - arc_v;
            count += 1;
        }
        Some(count)
    }
}

/// Ringing modes of a polynomial with real coefficients, constant term 1 first.
fn modes(coefficients: &[f64]) -> Vec<Mode> {
    let Some(scale) = coefficients.get(2).filter(|second| **second > 0.0).map(|second| 1.0 / second.sqrt()) else {
        return Vec::new();
    };
    // In units of the rough natural angular frequency, with vanishing leading terms cut off.
    let mut scaled: Vec<f64> =
        coefficients.iter().enumerate().map(|(k, c)| c * scale.powi(i32::try_from(k).unwrap_or(0))).collect();
    while scaled.len() > 3 && scaled.last().is_some_and(|last| *last < 1e-18) {
        scaled.pop();
    }
    let mut found: Vec<Mode> = roots(&scaled)
        .into_iter()
        .filter(|root| root.im > 1e-9 * root.norm() && root.re < 0.0)
        .map(|root| Mode {
            ring_hz: root.im * scale / TAU,
            decay_per_s: -root.re * scale,
            share: 1.0 / derivative(&scaled, root).norm(),
        })
        .collect();
    found.sort_by(|a, b| b.share.total_cmp(&a.share));
    let strongest = found.first().map_or(1.0, |mode| mode.share);
    for mode in &mut found {
        mode.share /= strongest;
    }
    found
}

fn value(coefficients: &[f64], s: Complex) -> Complex {
    coefficients.iter().rev().fold(Complex::new(0.0, 0.0), |sum, c| sum * s + *c)
}

fn derivative(coefficients: &[f64], s: Complex) -> Complex {
    let terms = coefficients.iter().enumerate().skip(1).rev();
    terms.fold(Complex::new(0.0, 0.0), |sum, (k, c)| sum * s + *c * k as f64)
}

/// All roots by the simultaneous iteration of Weierstrass (Durand and Kerner), then Newton steps on each.
fn roots(coefficients: &[f64]) -> Vec<Complex> {
    let degree = coefficients.len() - 1;
    let leading = coefficients[degree];
    // Powers of a number that is neither real nor of modulus one, spread over the likely sizes.
    let size = (1.0 / leading.abs()).powf(1.0 / degree as f64);
    let mut found: Vec<Complex> =
        (0..degree).map(|k| Complex::from_polar(size, 0.4 + TAU * k as f64 / degree as f64)).collect();
    for _ in 0..ROUNDS {
        for k in 0..degree {
            let apart =
                (0..degree).filter(|j| *j != k).fold(Complex::new(leading, 0.0), |p, j| p * (found[k] - found[j]));
            let step = value(coefficients, found[k]) / apart;
            if step.norm().is_finite() {
                found[k] -= step;
            }
        }
    }
    for root in &mut found {
        for _ in 0..3 {
            let step = value(coefficients, *root) / derivative(coefficients, *root);
            if step.norm() < root.norm() {
                *root -= step;
            }
        }
    }
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    fn series(l: f64, c: f64, r: f64) -> Network {
        Network { capacitance_f: c, inductance_h: l, coil_ohm: r, lead_h: 0.0, spark_ohm: 0.0, parallel_f: 0.0 }
    }

    #[test]
    fn a_series_circuit_rings_by_the_textbook() {
        // 10 µH, 1 nF, 10 Ω by hand: fd = 1.589559 MHz, Q = 10 exactly, λ = 0.314553.
        let modes = series(10e-6, 1e-9, 10.0).closed();
        assert_eq!(modes.len(), 1);
        assert!((modes[0].ring_hz / 1.589_559e6 - 1.0).abs() < 5e-7);
        assert!((modes[0].quality() - 10.0).abs() < 1e-9);
        assert!((modes[0].decrement() - 0.314_553).abs() < 5e-7);
        assert!((std::f64::consts::PI / modes[0].decrement() - 9.9875).abs() < 5e-5);
    }

    #[test]
    fn a_tank_at_3_megahertz_with_260_kilohertz_of_bandwidth_has_a_quality_of_11_5() {
        // Common practice: R = 2π·B·L and Q = f/B.
        let (l, c) = (2e-6, 1.0 / ((TAU * 3e6).powi(2) * 2e-6));
        let mode = series(l, c, TAU * 260e3 * l).closed()[0];
        assert!((mode.quality() - 11.5).abs() < 0.05);
    }

    #[test]
    fn without_leads_and_spark_both_capacitors_ring_together_and_an_overdamped_circuit_does_not_ring() {
        let together = Network { parallel_f: 0.5e-9, ..series(10e-6, 1e-9, 10.0) };
        let modes = together.closed();
        let alone = series(10e-6, 1.5e-9, 10.0).closed();
        assert_eq!(modes.len(), 1);
        assert!((modes[0].ring_hz / alone[0].ring_hz - 1.0).abs() < 1e-9);
        assert!(series(10e-6, 1e-9, 300.0).closed().is_empty());
    }

    #[test]
    fn leads_make_a_second_mode_with_the_tank_capacitor() {
        let network = Network { lead_h: 60e-9, spark_ohm: 0.3, parallel_f: 270e-12, ..series(1.1e-6, 6.8e-9, 0.72) };
        let modes = network.closed();
        assert_eq!(modes.len(), 2);
        // Leads against both capacitors in series, loaded by the coil: tens of megahertz.
        assert!((30e6..50e6).contains(&modes[1].ring_hz) && modes[1].share < 0.1, "{modes:?}");
        assert!((modes[0].share - 1.0).abs() < 1e-12);
    }

    #[test]
    fn an_arc_takes_twice_its_voltage_in_every_half_cycle() {
        // Without loss (practically) 1000 V over 50 V: 1000 − 100·n.
        assert_eq!(series(1e-6, 1e-9, 1e-9).arc_half_cycles(1000.0, 51.0), Some(10));
        assert_eq!(series(1e-6, 1e-9, 1.0).arc_half_cycles(1000.0, 0.0), None);
    }
}
