//! The phase of a line's analytic signal without its jumps.

use rustfft::num_complex::Complex32;
use std::f64::consts::TAU;

/// The phase (rad) at every `stride`-th sample. Each step is the whole number of turns nearest to the advance of a line of
/// `cycles_per_sample`, so the stride may be longer than a cycle; it must be short against one over the line's band width.
#[must_use]
pub fn unwrap(z: &[Complex32], stride: usize, cycles_per_sample: f64) -> Vec<f64> {
    let expected = TAU * cycles_per_sample * stride as f64;
    let (mut total, mut last) = (0.0f64, None);
    z.iter()
        .step_by(stride)
        .map(|v| {
            let angle = f64::from(v.arg());
            let off = angle - last.map_or(0.0, |l| l + expected);
            total += if last.is_some() { expected + off - TAU * (off / TAU).round() } else { angle };
            last = Some(angle);
            total
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_long_stride_finds_the_phase_of_a_short_one() {
        let at = |n: usize| 0.31 * n as f64 + 2.0 * (n as f64 * 1e-3).sin();
        let z: Vec<Complex32> = (0..20_000).map(|n| Complex32::from_polar(1.0, at(n) as f32)).collect();
        // Single precision of the angle: 20 000 · 0.31 rad to 24 bits is 5e-4 rad.
        for (k, p) in unwrap(&z, 40, 0.31 / TAU).iter().enumerate() {
            assert!((p - at(40 * k)).abs() < 2e-3, "{k}: {p} against {}", at(40 * k));
        }
    }
}
