//! One window of audio, conditioned, with what every later step shares.

use crate::clicks::filter::FilterBank;
use crate::clicks::resample;
use crate::clicks::spectrum::Spectrum;
use crate::clicks::timing::Flatness;
use std::cell::OnceCell;

/// High-pass of the whitening that finds clicks, Hz: over the mains hum, under any channel's click.
pub const FIND_HIGH_PASS_HZ: f64 = 250.0;

/// A conditioned window: median removed, at an inner rate of 32 to 64 kHz.
pub struct Window<'a> {
    /// Transform plans.
    pub bank: &'a FilterBank,
    /// Samples.
    pub x: Vec<f32>,
    /// Inner sample rate, Hz.
    pub rate_hz: f64,
    /// Power spectrum in bins of about 90 Hz.
    pub spectrum: Spectrum,
    flattened: [OnceCell<Vec<f32>>; 3],
}

impl<'a> Window<'a> {
    /// Conditions samples at a file's own rate (Hz).
    #[must_use]
    pub fn new(bank: &'a FilterBank, samples: &[f32], rate_hz: f64) -> Self {
        let (up, down) = resample::whole_factors(rate_hz);
        let centre = median(samples);
        let centred: Vec<f32> = samples.iter().map(|s| s - centre).collect();
        let x = match (up, down) {
            (1, 1) => centred,
            (_, 1) => resample::upsample(&centred, up),
            _ => resample::decimate(&centred, down),
        };
        let rate_hz = rate_hz * up as f64 / down as f64;
        let spectrum = Spectrum::of_noise(&x, rate_hz);
        Self { bank, x, rate_hz, spectrum, flattened: std::array::from_fn(|_| OnceCell::new()) }
    }

    /// Duration, s.
    #[must_use]
    pub fn duration_s(&self) -> f64 {
        self.x.len() as f64 / self.rate_hz
    }

    /// The window whitened for finding clicks, with a given floor.
    #[must_use]
    pub fn whitened(&self, floor: f64) -> Vec<f32> {
        self.through(&self.x, &self.spectrum, FIND_HIGH_PASS_HZ, floor)
    }

    /// Any signal of the window through the whitening gain of a spectrum.
    #[must_use]
    pub fn through(&self, x: &[f32], spectrum: &Spectrum, high_pass_hz: f64, floor: f64) -> Vec<f32> {
        let kernel = self.bank.kernel_of_gain(self.rate_hz, spectrum.whitening(high_pass_hz, floor));
        let mut out = Vec::new();
        self.bank.apply(x, &kernel, &mut out);
        out
    }

    /// The window flattened for reading times; made once each.
    pub fn flat(&self, flatness: Flatness) -> &[f32] {
        self.flattened[flatness as usize].get_or_init(|| {
            let (high_pass_hz, floor) = flatness.settings();
            self.through(&self.x, &self.spectrum, high_pass_hz, floor)
        })
    }
}

fn median(samples: &[f32]) -> f32 {
    let stride = (samples.len() / 100_000).max(1);
    let mut part: Vec<f32> = samples.iter().step_by(stride).copied().collect();
    if part.is_empty() {
        return 0.0;
    }
    let mid = part.len() / 2;
    *part.select_nth_unstable_by(mid, f32::total_cmp).1
}
