//! What the peaks of a ring say: frequency, decrement, quality factor, and whether an arc was in it.
//!
//! Neighbouring peaks of the same sign; n + 1 peaks span n cycles. The decrement is the slope of the least-squares line
//! through the logarithms. With an arc of constant voltage in series every cycle loses a fixed amount beside a fixed share,
//! x(k+1) = r·x(k) − c: the local decrement grows from peak to peak, and the peaks fall along a line.

use crate::bench::Quantity;
use crate::model::receiver::{Burst, BurstError, decrement};
use std::f64::consts::TAU;

/// Relative reading uncertainty of a peak where none is stated: a line's width on a screen (common practice).
const READING: f64 = 0.01;
/// Growth of the local decrement from the first to the last pair of peaks from which on an arc is told.
const ARC_GROWTH: f64 = 1.2;

/// A decay along a line.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Arc {
    /// Local decrement of the last pair of peaks over that of the first.
    pub growth: f64,
    /// Quality factor of the circuit without the arc, from r; none if the peaks do not allow it.
    pub quality: Option<f64>,
    /// Amount that a cycle loses to the arc over the first peak.
    pub loss_per_cycle: f64,
}

/// Figures from the peaks.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Readings {
    /// Peaks that were used.
    pub peaks: usize,
    /// Cycles that they span: one fewer.
    pub cycles: usize,
    /// Ring frequency, Hz.
    pub ring_hz: f64,
    /// Its standard uncertainty, Hz.
    pub u_ring_hz: f64,
    /// Logarithmic decrement.
    pub decrement: f64,
    /// Its standard uncertainty, from the readings or from their scatter about the line, whichever is larger.
    pub u_decrement: f64,
    /// The decay is along a line.
    pub arc: Option<Arc>,
}

impl Readings {
    /// Quality factor ½·√(1 + (2π/λ)²).
    #[must_use]
    pub fn quality(&self) -> f64 {
        0.5 * f64::hypot(1.0, TAU / self.decrement)
    }

    /// Standard uncertainty of the quality factor: dQ/dλ = −π²/(λ³·Q).
    #[must_use]
    pub fn u_quality(&self) -> f64 {
        let slope = (0.5 * TAU).powi(2) / (self.decrement.powi(3) * self.quality());
        slope * self.u_decrement
    }

    /// The damped wave.
    ///
    /// # Errors
    /// If it does not ring.
    pub fn burst(&self) -> Result<Burst, BurstError> {
        Burst::ringing(self.ring_hz, self.decrement * self.ring_hz)
    }
}

/// Figures from peaks of one sign, in any unit, and the time from one to the next in s.
///
/// # Errors
/// [`BurstError::Peaks`] unless there are at least two, of one sign, and they fall.
pub fn read_off(peaks: &[Quantity], spacing: Quantity) -> Result<Readings, BurstError> {
    let values: Vec<f64> = peaks.iter().map(|peak| peak.value.abs()).collect();
    let signed: Vec<f64> = peaks.iter().map(|peak| peak.value).collect();
    let slope = decrement(&signed).ok_or(BurstError::Peaks)?;
    let ring_hz = 1.0 / spacing.value;
    Ok(Readings {
        peaks: values.len(),
        cycles: values.len() - 1,
        ring_hz,
        u_ring_hz: ring_hz * spacing.u() / spacing.value,
        decrement: slope,
        u_decrement: u_decrement(peaks, &values, slope),
        arc: arc(&values),
    })
}

fn u_decrement(peaks: &[Quantity], values: &[f64], slope: f64) -> f64 {
    let n = values.len() as f64;
    let middle = 0.5 * (n - 1.0);
    let logs: Vec<f64> = values.iter().map(|value| value.ln()).collect();
    let mean = logs.iter().sum::<f64>() / n;
    let x = |k: usize| k as f64 - middle;
    let squares: f64 = (0..values.len()).map(|k| x(k) * x(k)).sum();
    let relative = |k: usize| if peaks[k].u() > 0.0 { peaks[k].u() / values[k] } else { READING };
    let by_reading = (0..values.len()).map(|k| (x(k) * relative(k)).powi(2)).sum::<f64>().sqrt() / squares;
    if values.len() < 3 {
        return by_reading;
    }
    let rest: f64 = (0..values.len()).map(|k| (logs[k] - mean + slope * x(k)).powi(2)).sum();
    by_reading.max((rest / (n - 2.0) / squares).sqrt())
}

/// An arc, if the local decrement grows from every pair of peaks to the next, and by more than reading errors would.
fn arc(values: &[f64]) -> Option<Arc> {
    let local: Vec<f64> = values.windows(2).map(|pair| (pair[0] / pair[1]).ln()).collect();
    let (first, last) = (*local.first()?, *local.last()?);
    let grows = local.len() >= 2 && local.windows(2).all(|pair| pair[1] > pair[0]);
    let growth = last / first;
    if !grows || growth < ARC_GROWTH || first <= 0.0 || last - first < 3.0 * 2.0 * READING {
        return None;
    }
    // x(k+1) = r·x(k) − c by least squares.
    let pairs = values.windows(2).map(|pair| (pair[0], pair[1]));
    let n = local.len() as f64;
    let (sum_x, sum_y) = pairs.clone().fold((0.0, 0.0), |sum, (x, y)| (sum.0 + x, sum.1 + y));
    let (mean_x, mean_y) = (sum_x / n, sum_y / n);
    let (xx, xy) =
        pairs.fold((0.0, 0.0), |sum, (x, y)| (sum.0 + (x - mean_x).powi(2), sum.1 + (x - mean_x) * (y - mean_y)));
    let left = xy / xx;
    let quality = (left > 0.0 && left < 1.0).then(|| 0.5 * f64::hypot(1.0, TAU / -left.ln()));
    Some(Arc { growth, quality, loss_per_cycle: (left * mean_x - mean_y) / values[0] })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::bench::Tolerance;

    fn exact(values: &[f64]) -> Vec<Quantity> {
        values.iter().map(|value| Quantity::exact(*value)).collect()
    }

    fn read(values: &[f64]) -> Readings {
        read_off(&exact(values), Quantity::exact(0.5e-6)).unwrap()
    }

    #[test]
    fn ten_peaks_span_nine_cycles() {
        let peaks: Vec<f64> = (0..10).map(|k| (-0.314_553 * f64::from(k)).exp()).collect();
        let found = read(&peaks);
        assert_eq!((found.peaks, found.cycles, found.arc), (10, 9, None));
        // Dividing by the number of peaks would give 0.2831, by eight 0.3539.
        assert!((found.decrement - 0.314_553).abs() < 1e-9);
        assert!((found.quality() - 10.0).abs() < 1e-4 && (found.ring_hz - 2e6).abs() < 1e-3);
    }

    #[test]
    fn thirteen_percent_after_ninety_nine_cycles_is_the_published_decrement() {
        // A published exercise: the amplitude on the 100th cycle is 13 % of that on the first; the wording means 99 intervals.
        let last = 0.13f64;
        let peaks: Vec<f64> = (0..100).map(|k| last.powf(f64::from(k) / 99.0)).collect();
        assert!((read(&peaks).decrement - 0.020_608).abs() < 5e-7);
    }

    #[test]
    fn a_published_decay_gives_its_decrement_and_damping() {
        // 0.010 falls to 0.004993 in one cycle: λ = 0.694548, ζ = 0.109872 (a course script's example).
        let found = read(&[0.010, 0.004_993]);
        assert!((found.decrement - 0.694_548).abs() < 5e-7);
        assert!((0.5 / found.quality() - 0.109_872).abs() < 5e-7);
    }

    #[test]
    fn the_uncertainty_of_the_quality_follows_the_readings() {
        let toleranced: Vec<Quantity> = [240.0, 170.0, 121.0, 85.0]
            .iter()
            .map(|value| Quantity { value: *value, tolerance: Tolerance::Standard(5.0) })
            .collect();
        let found =
            read_off(&toleranced, Quantity { value: 0.55e-6, tolerance: Tolerance::Standard(0.011e-6) }).unwrap();
        // By moving each peak: half the change of the decrement, in quadrature.
        let slope = |values: &[f64]| read(values).decrement;
        let by_moving: f64 = (0..4)
            .map(|k| {
                let (mut up, mut down) = ([240.0, 170.0, 121.0, 85.0], [240.0, 170.0, 121.0, 85.0]);
                up[k] += 5.0;
                down[k] -= 5.0;
                (0.5 * (slope(&up) - slope(&down))).powi(2)
            })
            .sum();
        assert!((found.u_decrement / by_moving.sqrt() - 1.0).abs() < 0.01);
        assert!((found.u_ring_hz / found.ring_hz - 0.02).abs() < 1e-9);
        assert!((found.u_quality() / found.quality() - found.u_decrement / found.decrement).abs() < 0.01);
        assert_eq!(found.arc, None);
    }

    #[test]
    fn peaks_that_fall_by_a_fixed_amount_are_an_arc() {
        let found = read(&[100.0, 80.0, 60.0, 40.0, 20.0]);
        let arc = found.arc.expect("a line");
        assert!((arc.loss_per_cycle - 0.2).abs() < 1e-9 && arc.quality.is_none(), "{arc:?}");
        // A share beside the amount: both come back.
        let (mut x, mut peaks) = (100.0, vec![100.0]);
        for _ in 0..4 {
            x = 0.8 * x - 8.0;
            peaks.push(x);
        }
        let arc = read(&peaks).arc.expect("a line");
        assert!((arc.loss_per_cycle - 0.08).abs() < 1e-9);
        assert!((arc.quality.unwrap() - 0.5 * f64::hypot(1.0, TAU / -(0.8f64.ln()))).abs() < 1e-6);
    }

    #[test]
    fn peaks_that_do_not_fall_are_refused() {
        for wrong in [&[1.0][..], &[1.0, 1.2], &[1.0, -0.8]] {
            assert!(matches!(read_off(&exact(wrong), Quantity::exact(1e-6)), Err(BurstError::Peaks)));
        }
    }
}
