//! A piece of audio, conditioned, with what every later step shares.

use crate::clicks::filter::{FilterBank, Kernel};
use crate::clicks::resample;
use crate::clicks::spectrum::Spectrum;
use crate::clicks::timing::Flatness;
use std::cell::OnceCell;

/// High-pass of the whitening that finds clicks, Hz: over the mains hum, under any channel's click.
pub const FIND_HIGH_PASS_HZ: f64 = 250.0;
/// Block by which activity is judged, s, and step of the search for the most active part.
const BLOCK_S: f64 = 0.05;
const STEP_BLOCKS: usize = 10;

/// A conditioned piece of audio: median removed, at an inner rate of 32 to 64 kHz.
pub struct Window<'a> {
    /// Transform plans.
    pub bank: &'a FilterBank,
    /// Samples.
    pub x: Vec<f32>,
    /// Inner sample rate, Hz.
    pub rate_hz: f64,
    spectrum: OnceCell<Spectrum>,
    flattened: OnceCell<Vec<Vec<f32>>>,
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
        Self::of(bank, x, rate_hz * up as f64 / down as f64)
    }

    fn of(bank: &'a FilterBank, x: Vec<f32>, rate_hz: f64) -> Self {
        Self { bank, x, rate_hz, spectrum: OnceCell::new(), flattened: OnceCell::new() }
    }

    /// Power spectrum in bins of about 90 Hz; made once.
    pub fn spectrum(&self) -> &Spectrum {
        self.spectrum.get_or_init(|| Spectrum::of_noise(&self.x, self.rate_hz))
    }

    /// Duration, s.
    #[must_use]
    pub fn duration_s(&self) -> f64 {
        self.x.len() as f64 / self.rate_hz
    }

    /// The most active part of a given length: where the median of short blocks' peaks is highest. A burst of static does not
    /// draw it, silence between stretches of firing repels it.
    #[must_use]
    pub fn most_active_part(&self, length_s: f64) -> Self {
        let block = (BLOCK_S * self.rate_hz) as usize;
        let peaks: Vec<f32> =
            self.x.chunks(block).map(|c| c.windows(2).fold(0.0f32, |m, w| m.max((w[1] - w[0]).abs()))).collect();
        let wanted = ((length_s / BLOCK_S) as usize).clamp(1, peaks.len());
        let mut best = (f32::NEG_INFINITY, 0);
        for from in (0..=peaks.len() - wanted).step_by(STEP_BLOCKS) {
            let mut part = peaks[from..from + wanted].to_vec();
            let mid = part.len() / 2;
            let middle = *part.select_nth_unstable_by(mid, f32::total_cmp).1;
            if middle > best.0 {
                best = (middle, from);
            }
        }
        let from = best.1 * block;
        Self::of(self.bank, self.x[from..(from + wanted * block).min(self.x.len())].to_vec(), self.rate_hz)
    }

    /// Kernel of a gain at the inner rate.
    #[must_use]
    pub fn kernel(&self, gain: impl Fn(f64) -> f64) -> Kernel {
        self.bank.kernel_of_gain(self.rate_hz, gain)
    }

    /// The samples through a kernel.
    #[must_use]
    pub fn through(&self, kernel: &Kernel) -> Vec<f32> {
        let mut out = Vec::new();
        self.bank.apply(&self.x, kernel, &mut out);
        out
    }

    /// Kernel that flattens for reading times.
    #[must_use]
    pub fn flattening(&self, flatness: Flatness) -> Kernel {
        let (high_pass_hz, floor) = flatness.settings();
        self.kernel(self.spectrum().whitening(high_pass_hz, floor))
    }

    /// The samples flattened for reading times; all flattenings are made together, once.
    pub fn flat(&self, flatness: Flatness) -> &[f32] {
        let all = self.flattened.get_or_init(|| {
            let kernels = Flatness::ALL.map(|flatness| self.flattening(flatness));
            self.bank.apply_all(&self.x, &kernels.each_ref())
        });
        &all[flatness as usize]
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
