//! The three routes, each as plainly as its formula.

use rustfft::FftPlanner;
use rustfft::num_complex::Complex64;
use std::f64::consts::{PI, TAU};

/// What intervals say.
pub struct Intervals {
    /// Plain standard deviation, s.
    pub raw_s: f64,
    /// √(γ₀ + 2γ₁), s; 0 if that is negative.
    pub jitter_s: f64,
}

/// Jitter by the covariances of single intervals (a step over a missed click is left out).
pub fn intervals(times: &[f64]) -> Intervals {
    if times.len() < 8 {
        return Intervals { raw_s: f64::NAN, jitter_s: f64::NAN };
    }
    let all: Vec<f64> = times.windows(2).map(|w| w[1] - w[0]).collect();
    let mut sorted = all.clone();
    sorted.sort_by(f64::total_cmp);
    let typical = sorted[sorted.len() / 2];
    let single = |x: f64| x < 1.5 * typical;
    let kept: Vec<f64> = all.iter().copied().filter(|&x| single(x)).collect();
    let mean = kept.iter().sum::<f64>() / kept.len() as f64;
    let gamma_0 = kept.iter().map(|x| (x - mean).powi(2)).sum::<f64>() / (kept.len() - 1) as f64;
    let pairs: Vec<f64> =
        all.windows(2).filter(|w| single(w[0]) && single(w[1])).map(|w| (w[0] - mean) * (w[1] - mean)).collect();
    let gamma_1 = pairs.iter().sum::<f64>() / pairs.len() as f64;
    Intervals { raw_s: gamma_0.sqrt(), jitter_s: (gamma_0 + 2.0 * gamma_1).max(0.0).sqrt() }
}

/// Full discrete spectrum of samples; bin k is k/duration Hz.
fn spectrum(samples: &[f32]) -> Vec<Complex64> {
    let mut x: Vec<Complex64> = samples.iter().map(|&s| Complex64::new(f64::from(s), 0.0)).collect();
    FftPlanner::new().plan_fft_forward(x.len()).process(&mut x);
    x
}

/// Lags between which the growth of the phase is read, periods: past the reach of the band's filter, and short enough that
/// many fit into a recording.
const LAGS: (f64, f64) = (10.0, 40.0);
/// Half width of the raised-cosine band about the line, share of the rate.
const BAND: f64 = 0.35;

/// Jitter (s) by the growth of the phase of the line at the rate. The line is the strongest of the first six harmonics: behind an
/// audio high-pass the first may be faint. Its phase runs n times as fast.
pub fn phase_growth(samples: &[f32], sample_rate_hz: f64, rate_hz: f64) -> f64 {
    let spectrum = spectrum(samples);
    let step_hz = sample_rate_hz / samples.len() as f64;
    let power = |n: f64| band_power(&spectrum, step_hz, n * rate_hz, 0.1 * rate_hz);
    let harmonic = if rate_hz > 600.0 {
        1.0
    } else {
        [1.0, 2.0, 3.0].into_iter().max_by(|a, b| power(*a).total_cmp(&power(*b))).unwrap_or(1.0)
    };
    let centre_hz = harmonic * rate_hz;
    // The band, moved to zero frequency.
    let reach = (BAND * rate_hz / step_hz) as isize;
    let length = (2 * reach as usize + 1).next_power_of_two();
    let mut z = vec![Complex64::default(); length];
    let middle = (centre_hz / step_hz).round() as isize;
    for k in -reach..=reach {
        let window = 0.5 + 0.5 * (PI * k as f64 / reach as f64).cos();
        z[k.rem_euclid(length as isize) as usize] = spectrum[(middle + k) as usize] * window;
    }
    FftPlanner::new().plan_fft_inverse(length).process(&mut z);
    let sample_s = samples.len() as f64 / sample_rate_hz / length as f64;
    let phase = unwrapped(&z);
    let growth = |periods: f64| {
        let lag = (periods / rate_hz / sample_s).round() as usize;
        // The ends of the recording lie next to each other in a discrete transform: left out.
        let inner = &phase[phase.len() / 50..phase.len() - phase.len() / 50];
        let change: Vec<f64> = (lag..inner.len()).map(|i| inner[i] - inner[i - lag]).collect();
        let mean = change.iter().sum::<f64>() / change.len() as f64;
        (change.iter().map(|c| (c - mean).powi(2)).sum::<f64>() / change.len() as f64, lag as f64 * sample_s)
    };
    let ((near, near_s), (far, far_s)) = (growth(LAGS.0), growth(LAGS.1));
    let slope = (far - near) / (far_s - near_s);
    (slope.max(0.0) / rate_hz.powi(3)).sqrt() / (TAU * harmonic)
}

fn unwrapped(z: &[Complex64]) -> Vec<f64> {
    let mut total = 0.0;
    std::iter::once(0.0)
        .chain(z.windows(2).map(|w| {
            total += (w[1] * w[0].conj()).arg();
            total
        }))
        .collect()
}

fn band_power(spectrum: &[Complex64], step_hz: f64, centre_hz: f64, reach_hz: f64) -> f64 {
    let (from, to) = ((centre_hz - reach_hz) / step_hz, (centre_hz + reach_hz) / step_hz);
    spectrum[from as usize..to as usize].iter().map(|v| v.norm_sqr()).sum()
}

/// Two-sided spectrum of a train of unit impulses with independent normal intervals, in units of its rate:
/// sinh a/(cosh a − cos ωT) with a = (ω·CV·T)²/2.
pub fn renewal_spectrum(frequency_hz: f64, period_s: f64, cv: f64) -> f64 {
    let w = TAU * frequency_hz;
    let a = 0.5 * (w * cv * period_s).powi(2);
    a.sinh() / (a.cosh() - (w * period_s).cos())
}

/// Lines whose width is read, and the fewest bins within a width that make it one: a line of fewer is as wide as the recording is
/// short.
const LINES: usize = 3;
const LEAST_BINS: f64 = 12.0;
/// Half of the range in which a line is fitted at last, widths. Farther out its wings show how single periods scatter and no
/// longer how the train strays, which is not the same where there is memory.
const FIT_WIDTHS: f64 = 2.0;

/// Jitter (s) by the widths of the first lines: a Lorentzian on a floor is fitted to the periodogram about each by Whittle's
/// likelihood, and CV² = width·T/(2πn²). Each line weighs by the number of independent bins within its width; none if all are
/// too narrow.
pub fn line_width(samples: &[f32], sample_rate_hz: f64, rate_hz: f64) -> f64 {
    let spectrum = spectrum(samples);
    let step_hz = sample_rate_hz / samples.len() as f64;
    let mut sums = (0.0, 0.0);
    for n in 1..=LINES {
        let line = n as f64;
        let middle = (line * rate_hz / step_hz).round() as usize;
        let about = |middle: usize, reach: usize| -> Vec<f64> {
            spectrum[middle - reach..=middle + reach].iter().map(|v| v.norm_sqr()).collect()
        };
        let reach = (0.4 * rate_hz / step_hz) as usize;
        let (centre, wide) = lorentzian(&about(middle, reach));
        let near = ((FIT_WIDTHS * wide) as usize).clamp(8, reach);
        let (_, bins) = lorentzian(&about(middle - reach + centre.round() as usize, near));
        if bins >= LEAST_BINS {
            let cv2 = bins * step_hz / (TAU * line * line * rate_hz);
            sums = (sums.0 + bins * cv2, sums.1 + bins);
        }
    }
    (sums.0 / sums.1).sqrt() / rate_hz
}

/// Centre k₀ and full width w at half height, bins, of A/(1 + (2(k − k₀)/w)²) + B fitted to exponentially distributed power.
fn lorentzian(power: &[f64]) -> (f64, f64) {
    // The first centre is where a running mean over a few bins is largest.
    let smooth = 9usize.min(power.len() / 2);
    let centre = (0..power.len() - smooth)
        .max_by(|&a, &b| {
            let sum = |i: usize| power[i..i + smooth].iter().sum::<f64>();
            sum(a).total_cmp(&sum(b))
        })
        .unwrap_or(0) as f64
        + smooth as f64 / 2.0;
    let total = power.iter().sum::<f64>() / power.len() as f64;
    // Parameters: centre (bins), ln width, ln of the line's share of the power; the floor is what is left.
    let mut best = [centre, (power.len() as f64 / 40.0).max(4.0).ln(), (0.5f64).ln()];
    let mut step = [best[1].exp(), 1.0, 1.0];
    let ln = |p: &[f64; 3]| {
        let (width, line) = (p[1].exp(), total * p[2].exp());
        let area = |x: f64| (2.0 * x / width).atan();
        let norm = (area(power.len() as f64 - p[0]) + area(p[0])) * 0.5 * width / power.len() as f64;
        let floor = (total - line).max(1e-9 * total);
        power
            .iter()
            .enumerate()
            .map(|(k, &y)| {
                let model = line / norm / (1.0 + (2.0 * (k as f64 - p[0]) / width).powi(2)) + floor;
                -model.ln() - y / model
            })
            .sum::<f64>()
    };
    let mut top = ln(&best);
    // Pattern search: try both ways along each parameter, halve the step where neither helps.
    for _ in 0..60 {
        for i in 0..3 {
            let mut moved = false;
            for sign in [1.0, -1.0] {
                let mut p = best;
                p[i] += sign * step[i];
                let value = if i == 2 && p[2] > -1e-6 { f64::NEG_INFINITY } else { ln(&p) };
                if value > top {
                    (best, top, moved) = (p, value, true);
                    break;
                }
            }
            if !moved {
                step[i] *= 0.6;
            }
        }
    }
    (best[0], best[1].exp())
}
