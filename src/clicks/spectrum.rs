//! Power spectra by Welch's method, and whitening gains made from them.

use realfft::RealFftPlanner;

/// A one-sided power spectrum (power per bin, arbitrary scale).
#[derive(Debug, Clone)]
pub struct Spectrum {
    /// Distance of the bins, Hz.
    pub step_hz: f64,
    /// Power of each bin from 0 Hz to half the sample rate.
    pub power: Vec<f64>,
}

/// Welch spectrum: Hann windows of `segment` samples (a power of two), half overlapped, mean removed if asked.
#[must_use]
pub fn welch(x: &[f32], rate_hz: f64, segment: usize, remove_mean: bool) -> Spectrum {
    let fft = RealFftPlanner::<f32>::new().plan_fft_forward(segment);
    let window: Vec<f32> =
        (0..segment).map(|n| (0.5 - 0.5 * (std::f64::consts::TAU * n as f64 / segment as f64).cos()) as f32).collect();
    let mut power = vec![0.0f64; segment / 2 + 1];
    let mut input = fft.make_input_vec();
    let mut output = fft.make_output_vec();
    let mut scratch = fft.make_scratch_vec();
    let mut count = 0usize;
    let mut start = 0;
    while start + segment <= x.len() {
        let part = &x[start..start + segment];
        let mean = if remove_mean { part.iter().sum::<f32>() / segment as f32 } else { 0.0 };
        for ((i, s), w) in input.iter_mut().zip(part).zip(&window) {
            *i = (s - mean) * w;
        }
        let _ = fft.process_with_scratch(&mut input, &mut output, &mut scratch);
        for (p, v) in power.iter_mut().zip(&output) {
            *p += f64::from(v.norm_sqr());
        }
        count += 1;
        start += segment / 2;
    }
    for p in &mut power {
        *p /= count.max(1) as f64;
    }
    Spectrum { step_hz: rate_hz / segment as f64, power }
}

/// The power of two nearest to `wanted` on a logarithmic scale.
#[must_use]
pub fn power_of_two_near(wanted: f64) -> usize {
    1usize << (wanted.log2().round().max(4.0) as u32)
}

impl Spectrum {
    /// Spectrum in bins of about 90 Hz, smoothed over five bins: fine enough for hum and channel edges, coarse enough
    /// that the whitening filter stays within a few ms.
    #[must_use]
    pub fn of_noise(x: &[f32], rate_hz: f64) -> Self {
        let mut spectrum = welch(x, rate_hz, power_of_two_near(rate_hz / 90.0), false);
        let raw = spectrum.power.clone();
        let last = raw.len() as isize - 1;
        for (k, p) in spectrum.power.iter_mut().enumerate() {
            let at = |d: isize| raw[(k as isize + d).clamp(0, last) as usize];
            *p = (at(-2) + 2.0 * at(-1) + 3.0 * at(0) + 2.0 * at(1) + at(2)) / 9.0;
        }
        spectrum
    }

    /// Power at a frequency, linear between bins.
    #[must_use]
    pub fn at(&self, frequency_hz: f64) -> f64 {
        let x = (frequency_hz / self.step_hz).max(0.0);
        let i = (x as usize).min(self.power.len() - 1);
        let j = (i + 1).min(self.power.len() - 1);
        self.power[i] + (self.power[j] - self.power[i]) * (x - i as f64).clamp(0.0, 1.0)
    }

    /// Greatest power above a frequency.
    #[must_use]
    pub fn max_above(&self, frequency_hz: f64) -> f64 {
        let from = ((frequency_hz / self.step_hz).ceil() as usize).min(self.power.len() - 1);
        self.power[from..].iter().copied().fold(0.0, f64::max)
    }

    /// Bin nearest to a frequency.
    #[must_use]
    pub fn bin(&self, frequency_hz: f64) -> usize {
        ((frequency_hz / self.step_hz).round().max(0.0) as usize).min(self.power.len() - 1)
    }

    /// Sum of the power between two frequencies.
    #[must_use]
    pub fn sum(&self, from_hz: f64, to_hz: f64) -> f64 {
        self.power
            .iter()
            .enumerate()
            .filter(|(k, _)| (from_hz..to_hz).contains(&(*k as f64 * self.step_hz)))
            .map(|(_, p)| p)
            .sum()
    }

    /// Whitening gain 1/√(P + floor·max P) with a raised-cosine high-pass about `high_pass_hz` (0.8 to 1.2 of it).
    /// A floor well above 1 leaves the spectrum as it is.
    pub fn whitening(&self, high_pass_hz: f64, floor: f64) -> impl Fn(f64) -> f64 + '_ {
        let lift = floor * self.max_above(high_pass_hz) + f64::MIN_POSITIVE;
        move |f| {
            let ramp = ((f - 0.8 * high_pass_hz) / (0.4 * high_pass_hz)).clamp(0.0, 1.0);
            let edge = 0.5 - 0.5 * (std::f64::consts::PI * ramp).cos();
            if edge == 0.0 { 0.0 } else { edge / (self.at(f) + lift).sqrt() }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_tone_stands_in_its_bin() {
        let x: Vec<f32> = (0..48_000).map(|n| (std::f32::consts::TAU * 1_000.0 * n as f32 / 48_000.0).sin()).collect();
        let spectrum = welch(&x, 48_000.0, 4096, false);
        let top = (0..spectrum.power.len()).max_by(|&a, &b| spectrum.power[a].total_cmp(&spectrum.power[b])).unwrap();
        assert!((top as f64 * spectrum.step_hz - 1_000.0).abs() <= spectrum.step_hz);
    }
}
