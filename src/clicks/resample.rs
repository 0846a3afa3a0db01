//! Brings any sample rate into 32..64 kHz by a whole factor, so that a click always has enough samples for the
//! parabola through its peak and never more than the work is worth. Whole factors shift no time.

use super::snippet::dot;

/// What to do to a rate: multiply by the first or divide by the second (one of them is 1).
#[must_use]
pub fn whole_factors(rate_hz: f64) -> (usize, usize) {
    if rate_hz < 32_000.0 {
        ((44_000.0 / rate_hz).ceil() as usize, 1)
    } else if rate_hz >= 64_000.0 {
        (1, (rate_hz / 44_100.0).floor().max(1.0) as usize)
    } else {
        (1, 1)
    }
}

/// Zero crossings of the windowed sinc on each side of its centre.
const LOBES: usize = 16;
/// Kaiser shape: about 80 dB stop band.
const KAISER_BETA: f64 = 8.0;

fn bessel_i0(x: f64) -> f64 {
    let mut sum = 1.0;
    let mut term = 1.0;
    for k in 1..40 {
        term *= (x / (2.0 * k as f64)).powi(2);
        sum += term;
    }
    sum
}

/// Windowed sinc of `2·half + 1` taps with its −6 dB point at `cut` of the sample rate (0..0.5), unit sum.
fn low_pass(cut: f64, half: usize) -> Vec<f32> {
    let mut taps: Vec<f64> = (0..=2 * half)
        .map(|i| {
            let t = i as f64 - half as f64;
            let x = 2.0 * cut * t;
            let sinc =
                if x.abs() < 1e-12 { 1.0 } else { (std::f64::consts::PI * x).sin() / (std::f64::consts::PI * x) };
            let r = t / (half as f64 + 1.0);
            sinc * bessel_i0(KAISER_BETA * (1.0 - r * r).max(0.0).sqrt())
        })
        .collect();
    let sum: f64 = taps.iter().sum();
    taps.iter_mut().for_each(|t| *t /= sum);
    taps.into_iter().map(|t| t as f32).collect()
}

/// Inserts `factor − 1` band-limited samples between neighbours; output `k·factor` belongs to input `k`.
#[must_use]
pub fn upsample(x: &[f32], factor: usize) -> Vec<f32> {
    let half = LOBES * factor;
    // The cut sits a little below the old half rate: the images of what lies against it matter more than its last 4 %.
    let taps = low_pass(0.48 / factor as f64, half);
    // Tap index of input sample i at output n is half + n − i·factor: a row of taps for each place between two samples.
    let rows: Vec<Vec<f32>> = (0..factor)
        .map(|phase| {
            let taps = (0..=2 * LOBES).map(|d| taps.get(phase + (2 * LOBES - d) * factor));
            taps.map(|tap| tap.map_or(0.0, |t| t * factor as f32)).collect()
        })
        .collect();
    let mut padded = vec![0.0f32; x.len() + 2 * LOBES];
    padded[LOBES..LOBES + x.len()].copy_from_slice(x);
    let mut out = Vec::with_capacity(x.len() * factor);
    for near in padded.windows(2 * LOBES + 1) {
        out.extend(rows.iter().map(|row| dot(near, row)));
    }
    out
}

/// Keeps every `factor`-th sample behind a low-pass; output `k` belongs to input `k·factor`.
#[must_use]
pub fn decimate(x: &[f32], factor: usize) -> Vec<f32> {
    let half = LOBES * factor;
    let taps = low_pass(0.46 / factor as f64, half);
    (0..x.len().div_ceil(factor))
        .map(|k| {
            let centre = k * factor;
            let from = centre.saturating_sub(half);
            let to = (centre + half + 1).min(x.len());
            let skip = half + from - centre;
            dot(&x[from..to], &taps[skip..skip + to - from])
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_tone_keeps_its_phase_through_whole_factors() {
        let tone = |rate: f64| -> Vec<f32> {
            (0..rate as usize).map(|n| (std::f64::consts::TAU * 700.0 * n as f64 / rate).sin() as f32).collect()
        };
        let up = upsample(&tone(8_000.0), 6);
        let down = decimate(&tone(192_000.0), 4);
        for (n, &want) in tone(48_000.0).iter().enumerate().skip(2_000).take(40_000) {
            // 80 dB stop band, and single precision.
            assert!((up[n] - want).abs() < 1e-3 && (down[n] - want).abs() < 1e-3, "sample {n}");
        }
    }

    #[test]
    fn every_rate_lands_between_32_and_64_khz() {
        for rate in [
            8_000.0, 11_025.0, 16_000.0, 22_050.0, 32_000.0, 44_100.0, 48_000.0, 64_000.0, 88_200.0, 96_000.0,
            192_000.0,
        ] {
            let (up, down) = whole_factors(rate);
            let inside = rate * up as f64 / down as f64;
            assert!((32_000.0..66_200.0).contains(&inside), "{rate} -> {inside}");
        }
    }
}
