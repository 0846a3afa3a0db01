//! Level of the audio between two glances.

use super::glance::Level;

/// Adds up what is heard until it is read.
#[derive(Debug, Clone, Copy, Default)]
pub struct LevelMeter {
    peak: f32,
    square_sum: f64,
    count: u64,
    clipped: u64,
}

impl LevelMeter {
    /// Takes samples in units of full scale.
    pub fn push(&mut self, mono: &[f32]) {
        self.count += mono.len() as u64;
        for &x in mono {
            self.peak = self.peak.max(x.abs());
            self.square_sum += f64::from(x).powi(2);
        }
    }

    /// Counts clipped samples.
    pub fn add_clipped(&mut self, frames: u64) {
        self.clipped += frames;
    }

    /// The level since the last reading.
    pub fn read(&mut self) -> Level {
        let Self { peak, square_sum, count, clipped } = std::mem::take(self);
        let db = |x: f64| (x > 0.0).then(|| 20.0 * x.log10());
        let of = count.max(1) as f64;
        Level {
            peak_dbfs: db(f64::from(peak)),
            rms_dbfs: db((square_sum / of).sqrt()),
            clipped_share: clipped as f64 / of,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_sine_has_its_peak_and_three_decibels_less_and_reading_begins_anew() {
        let mut meter = LevelMeter::default();
        let sine: Vec<f32> = (0..4800).map(|n| 0.5 * (std::f32::consts::TAU * n as f32 / 48.0).sin()).collect();
        meter.push(&sine);
        meter.add_clipped(48);
        let level = meter.read();
        let close = |a: Option<f64>, b: f64| a.is_some_and(|a| (a - b).abs() < 0.01);
        assert!(close(level.peak_dbfs, -6.02) && close(level.rms_dbfs, -9.03), "{level:?}");
        assert!((level.clipped_share - 0.01).abs() < 1e-12);
        assert_eq!(meter.read(), Level::default());
    }
}
