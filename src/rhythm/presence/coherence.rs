//! Does what lies beside a line move with the line? Clicks modulate the line at their rate and everything around it together:
//! the audio at a frequency ν is then coherent with the line's own modulation at ± ν. A whistle in noise, however wavering,
//! has no such tie.

use crate::clicks::filter::FilterBank;
use crate::rhythm::unwrap::unwrap;
use rustfft::FftPlanner;
use rustfft::num_complex::{Complex32, Complex64};

/// Standard deviation of the band about the line, share of its frequency.
const BAND: f64 = 0.08;
/// Range of ν, share of the line's frequency.
const RANGE: (f64, f64) = (0.15, 0.4);
/// Lowest ν, Hz.
const LEAST_HZ: f64 = 100.0;
/// Longest stretch looked at, s.
const LONGEST_S: f64 = 6.0;
/// Samples of the phase per band width.
const FINE: f64 = 32.0;
/// Cycles for the growth of the phase variance.
const CYCLES: [f64; 3] = [6.0, 30.0, 60.0];

/// What a line does over time.
#[derive(Debug, Clone, Copy)]
pub struct LineCharacter {
    /// Mean frequency, Hz.
    pub frequency_hz: f64,
    /// Share of the time within 6 % of it and with more than a third of the median amplitude.
    pub stable: f64,
    /// Jitter that the growth of the phase variance implies, share of the period.
    pub jitter: f64,
    /// Growth from 30 to 60 cycles over that from 6 to 30: 1 for independent periods.
    pub growth: f64,
    /// Coefficient of variation of its amplitude.
    pub amplitude_cv: f64,
    /// Multiple coherence of the audio with the line's modulation.
    pub coherence: f64,
}

/// Looks at the line near a frequency (Hz); none if the audio is too short.
#[must_use]
pub fn of_line(bank: &FilterBank, x: &[f32], rate_hz: f64, line_hz: f64) -> Option<LineCharacter> {
    let band = BAND * line_hz;
    let kernel = bank.kernel_of_gain(rate_hz, |f| (-0.5 * ((f - line_hz) / band).powi(2)).exp());
    let mut z: Vec<Complex32> = Vec::new();
    bank.apply_analytic(x, &kernel, &mut z);
    // The middle of a long window says what there is to say.
    let most = (LONGEST_S * rate_hz) as usize;
    let cut = (z.len() / 20).max(z.len().saturating_sub(most) / 2);
    let (z, x) = (&z[cut..z.len() - cut], &x[cut..x.len() - cut]);
    let fine = ((rate_hz / (FINE * band)) as usize).max(1);
    let phase = unwrap(z, fine, line_hz / rate_hz);
    let stride = ((rate_hz / (8.0 * band)) as usize / fine).max(1);
    let count = phase.len().saturating_sub(1) / stride;
    if count < 40 {
        return None;
    }
    let step = (stride * fine) as f64 / rate_hz * std::f64::consts::TAU;
    let rates: Vec<f64> = (0..count).map(|i| (phase[(i + 1) * stride] - phase[i * stride]) / step).collect();
    let amplitude: Vec<f64> = (0..count).map(|i| f64::from(z[i * stride * fine].norm())).collect();
    let middle = crate::rhythm::order::median(&rates);
    let typical = crate::rhythm::order::median(&amplitude);
    let stable = rates
        .iter()
        .zip(&amplitude)
        .filter(|(f, a)| (**f - middle).abs() < 0.06 * line_hz && **a > 0.3 * typical)
        .count() as f64
        / count as f64;
    let mean = amplitude.iter().sum::<f64>() / count as f64;
    let spread = (amplitude.iter().map(|a| (a - mean).powi(2)).sum::<f64>() / count as f64).sqrt();
    let (jitter, growth) = phase_growth(&phase, rate_hz / fine as f64, middle);
    Some(LineCharacter {
        frequency_hz: middle,
        stable,
        jitter,
        growth,
        amplitude_cv: spread / mean.max(1e-30),
        coherence: coherence(x, z, rate_hz, middle),
    })
}

fn phase_growth(phase: &[f64], rate_hz: f64, line_hz: f64) -> (f64, f64) {
    let slope = (phase[phase.len() - 1] - phase[0]) / (phase.len() - 1) as f64;
    let variance = |cycles: f64| {
        let lag = ((cycles / line_hz * rate_hz) as usize).clamp(1, phase.len() - 1);
        let sum: f64 = (0..phase.len() - lag).map(|i| (phase[i + lag] - phase[i] - slope * lag as f64).powi(2)).sum();
        sum / (phase.len() - lag) as f64
    };
    let v = CYCLES.map(variance);
    let early = (v[1] - v[0]).max(1e-12);
    let jitter = ((v[1] - v[0]).max(0.0) / (CYCLES[1] - CYCLES[0])).sqrt() / std::f64::consts::TAU;
    (jitter, (v[2] - v[1]) / early / ((CYCLES[2] - CYCLES[1]) / (CYCLES[1] - CYCLES[0])))
}

/// Multiple coherence of the audio at ν with the audio demodulated by the line's phase at ν and −ν, less what chance gives.
fn coherence(x: &[f32], z: &[Complex32], rate_hz: f64, line_hz: f64) -> f64 {
    let samples = rate_hz * (24.0 / line_hz).max(0.02);
    // A line that stands still, as in silence, would want a window without end.
    if samples >= x.len() as f64 {
        return 0.0;
    }
    let length = 1usize << (samples.log2().round() as u32);
    if x.len() < 2 * length {
        return 0.0;
    }
    let fft = FftPlanner::<f32>::new().plan_fft_forward(length);
    let window: Vec<f32> =
        (0..length).map(|i| (0.5 - 0.5 * (std::f32::consts::TAU * i as f32 / length as f32).cos()).powi(2)).collect();
    let step_hz = rate_hz / length as f64;
    let from = ((RANGE.0 * line_hz).max(LEAST_HZ) / step_hz).ceil() as usize;
    let to = (RANGE.1 * line_hz / step_hz).floor() as usize;
    if to <= from {
        return 0.0;
    }
    let bins = to - from;
    // Per bin: the 2 × 2 Gram matrix of the regressors, their products with the audio, and the audio's power.
    let mut gram = vec![(0.0f64, 0.0f64, Complex64::default()); bins];
    let mut cross = vec![(Complex64::default(), Complex64::default(), 0.0f64); bins];
    let mut blocks = 0usize;
    let mut audio = vec![Complex32::default(); length];
    let mut line = vec![Complex32::default(); length];
    let mut start = 0;
    while start + length <= x.len() {
        for (i, w) in window.iter().enumerate() {
            let (v, z) = (x[start + i] * w, z[start + i]);
            audio[i] = Complex32::new(v, 0.0);
            line[i] = z.conj() * (v / z.norm_sqr().max(f32::MIN_POSITIVE).sqrt());
        }
        fft.process(&mut audio);
        fft.process(&mut line);
        for b in 0..bins {
            let k = from + b;
            let double = |c: Complex32| Complex64::new(f64::from(c.re), f64::from(c.im));
            let (y, p, m) = (double(audio[k]), double(line[k]), double(line[length - k].conj()));
            gram[b].0 += p.norm_sqr();
            gram[b].1 += m.norm_sqr();
            gram[b].2 += p.conj() * m;
            cross[b].0 += p.conj() * y;
            cross[b].1 += m.conj() * y;
            cross[b].2 += y.norm_sqr();
        }
        blocks += 1;
        start += length / 2;
    }
    let (mut explained, mut total) = (0.0, 0.0);
    for ((a, d, b), (u, v, power)) in gram.iter().zip(&cross) {
        let det = a * d - b.norm_sqr();
        if det > 1e-9 * a * d && det > 0.0 {
            // [u v]ᴴ G⁻¹ [u v] of the Hermitian Gram matrix.
            explained += (u.norm_sqr() * d + v.norm_sqr() * a - 2.0 * (u.conj() * b * v).re) / det;
        }
        total += power;
    }
    if total > 0.0 { explained / total - 2.0 / blocks as f64 } else { 0.0 }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn jittered(shape: impl Fn(f64) -> f64) -> Vec<f32> {
        let mut x = vec![0.0f32; 4 * 48_000];
        let (mut t, mut seed) = (0.01, 17u64);
        while t < 3.98 {
            let at = t * 48_000.0;
            for (i, v) in x.iter_mut().enumerate().skip(at as usize - 20).take(41) {
                *v += shape(i as f64 - at) as f32;
            }
            seed = seed.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1);
            t += (1.0 + 0.05 * ((seed >> 33) as f64 / (1u64 << 31) as f64 - 0.5)) / 1_900.0;
        }
        x
    }

    #[test]
    fn a_click_train_is_coherent_with_its_line_and_a_whistle_in_noise_is_not() {
        let bank = FilterBank::new();
        let train = jittered(|d| (-0.5 * (d / 3.0).powi(2)).exp());
        let clicks = of_line(&bank, &train, 48_000.0, 1_900.0).unwrap();
        assert!(clicks.coherence > 0.3 && clicks.stable > 0.97, "{clicks:?}");
        let (mut phase, mut seed) = (0.0f64, 5u64);
        let whistle: Vec<f32> = (0..4 * 48_000)
            .map(|n| {
                seed = seed.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1);
                let noise = (seed >> 33) as f64 / (1u64 << 31) as f64 - 0.5;
                phase += std::f64::consts::TAU * (1_900.0 + 15.0 * (n as f64 * 2e-4).sin()) / 48_000.0;
                (phase.sin() + 0.2 * noise) as f32
            })
            .collect();
        let whistle = of_line(&bank, &whistle, 48_000.0, 1_900.0).unwrap();
        assert!(whistle.coherence < 0.1, "{whistle:?}");
    }

    // A damaged recording was like this: its line stood still, and a window for that would have taken all memory.
    #[test]
    fn a_line_in_silence_has_no_coherence() {
        let silence = of_line(&FilterBank::new(), &vec![0.0; 4 * 48_000], 48_000.0, 1_900.0).unwrap();
        assert_eq!((silence.frequency_hz, silence.coherence), (0.0, 0.0));
    }
}
