//! Slow obvious versions of the fast steps of this room, for tests alone: each is its formula written down, in double precision
//! and without a transform.

use super::candidates::{find, matched_output, nth_largest, robust_sd};
use super::filter::FilterBank;
use super::resample::{decimate, upsample};
use super::shape::Shape;
use super::snippet::{dot, read};
use super::spectrum::welch;
use crate::model::random::Random;
use std::f64::consts::{PI, TAU};

fn noise(count: usize, seed: u64) -> Vec<f32> {
    let mut random = Random::seeded(seed);
    (0..count).map(|_| random.normal() as f32).collect()
}

/// Σ x[n − k]·taps[k + half] over all k, zeros outside.
fn convolved(x: &[f32], taps: &[f64], n: usize) -> f64 {
    let half = taps.len() as isize / 2;
    (-half..=half)
        .filter_map(|k| x.get(usize::try_from(n as isize - k).ok()?).map(|v| f64::from(*v) * taps[(k + half) as usize]))
        .sum()
}

#[test]
fn a_kernel_of_a_gain_filters_like_its_impulse_response_summed_by_hand() {
    // The gain of a whitening filter: steep high-pass, a notch, a slope.
    let gain = |f: f64| if f < 250.0 { 0.0 } else { 1.0 / (1.0 + f / 3_000.0) + 0.3 * (f / 700.0).sin() };
    let (rate_hz, block, half) = (48_000.0, 8192usize, 1024isize);
    let taps: Vec<f64> = (-half..=half)
        .map(|lag| {
            let cosine = |k: usize| {
                gain(k as f64 * rate_hz / block as f64) * (TAU * (k as isize * lag) as f64 / block as f64).cos()
            };
            let sum = cosine(0) + cosine(block / 2) + 2.0 * (1..block / 2).map(cosine).sum::<f64>();
            sum / block as f64 * (0.5 + 0.5 * (PI * lag as f64 / (half + 1) as f64).cos())
        })
        .collect();
    let x = noise(15_000, 1);
    let bank = FilterBank::new();
    let mut fast = Vec::new();
    bank.apply(&x, &bank.kernel_of_gain(rate_hz, gain), &mut fast);
    // About the ends and the seams between blocks (every 6144 samples), and a few between.
    for n in (0..15_000).filter(|n| n % 6144 < 3 || n % 6144 > 6141 || n % 997 == 0 || *n > 14_997) {
        let plain = convolved(&x, &taps, n);
        // Single-precision transforms of 8192 points of unit noise: a few 1e-6.
        assert!((plain - f64::from(fast[n])).abs() < 2e-5, "sample {n}: {plain} against {}", fast[n]);
    }
}

#[test]
fn the_matched_filter_of_two_shapes_is_the_root_of_the_sums_squared() {
    let x = noise(13_000, 2);
    let vectors = vec![noise(49, 3), noise(49, 4)];
    for signed in [true, false] {
        let shape = Shape { vectors: vectors.clone(), centre: 20, signed };
        let mut fast = Vec::new();
        matched_output(&FilterBank::new(), &x, &shape, &mut fast);
        for (n, &found) in fast.iter().enumerate() {
            let sum = |v: &[f32]| -> f64 {
                let at = |k: usize| (n + k).checked_sub(20).and_then(|i| x.get(i)).map_or(0.0, |s| f64::from(*s));
                v.iter().enumerate().map(|(k, s)| at(k) * f64::from(*s)).sum()
            };
            let plain = if signed { sum(&vectors[0]) } else { sum(&vectors[0]).hypot(sum(&vectors[1])) };
            // Sums of 49 products of unit size.
            assert!((plain - f64::from(found)).abs() < 1e-4, "sample {n}: {plain} against {found}");
        }
    }
}

/// Low-pass taps with their −6 dB point at `cut` of the sample rate: a sinc of 16 lobes a side under a Kaiser window of shape 8, whose
/// Bessel function is taken from its integral ∫ exp(x·cos θ) dθ/π.
fn low_pass(cut: f64, half: usize) -> Vec<f64> {
    let bessel =
        |x: f64| (0..2000).map(|i| (x * (PI * (f64::from(i) + 0.5) / 2000.0).cos()).exp()).sum::<f64>() / 2000.0;
    let taps: Vec<f64> = (-(half as isize)..=half as isize)
        .map(|t| {
            let (t, x) = (t as f64, TAU * cut * t as f64);
            let sinc = if t == 0.0 { 1.0 } else { x.sin() / x };
            sinc * bessel(8.0 * (1.0 - (t / (half as f64 + 1.0)).powi(2)).sqrt())
        })
        .collect();
    let sum: f64 = taps.iter().sum();
    taps.iter().map(|t| t / sum).collect()
}

#[test]
fn resampling_equals_stuffing_zeros_or_dropping_samples_about_a_plain_low_pass() {
    let x = noise(400, 5);
    for factor in [2, 3, 6] {
        let taps = low_pass(0.48 / factor as f64, 16 * factor);
        let mut stuffed = vec![0.0f32; x.len() * factor];
        x.iter().enumerate().for_each(|(i, v)| stuffed[i * factor] = *v);
        for (n, &found) in upsample(&x, factor).iter().enumerate() {
            let plain = factor as f64 * convolved(&stuffed, &taps, n);
            // 33 products of unit size in single precision.
            assert!((plain - f64::from(found)).abs() < 1e-5, "up {factor}, sample {n}: {plain} against {found}");
        }
    }
    let x = noise(3_001, 6);
    for factor in [2, 4] {
        let taps = low_pass(0.46 / factor as f64, 16 * factor);
        let fast = decimate(&x, factor);
        assert_eq!(fast.len(), x.len().div_ceil(factor));
        for (n, &found) in fast.iter().enumerate() {
            let plain = convolved(&x, &taps, n * factor);
            assert!((plain - f64::from(found)).abs() < 1e-5, "down {factor}, sample {n}: {plain} against {found}");
        }
    }
}

#[test]
fn candidates_are_the_maxima_that_a_look_at_all_samples_finds() {
    let rate_hz = 48_000.0;
    let bank = FilterBank::new();
    let mut output = Vec::new();
    // Noise as smooth as behind a click's filter, and a few clicks with side lobes.
    bank.apply(&noise(20_000, 7), &bank.kernel_of_gain(rate_hz, |f| (-(f / 4_000.0).powi(2)).exp()), &mut output);
    for at in (400..19_000).step_by(1_777) {
        for d in 0..60usize {
            let t = d as f32 - 30.0;
            output[at + d] += 6.0 * (-(t / 9.0).powi(2)).exp() * (0.45 * t).cos();
        }
    }
    for apart_s in [0.0, 0.2e-3, 0.7e-3] {
        let found = find(&output, rate_hz, apart_s);
        let plain: Vec<usize> = (1..output.len() - 1).filter(|&i| is_candidate(&output, i, rate_hz, apart_s)).collect();
        // No more than 7000 a second are kept: the largest (this noise has fewer maxima where some distance is asked).
        let most = (7_000.0 * output.len() as f64 / rate_hz) as usize;
        let mut sizes: Vec<f32> = plain.iter().map(|&i| output[i]).collect();
        sizes.sort_by(|a, b| b.total_cmp(a));
        assert!(sizes.len() <= most, "the case is meant to stay under the limit");
        assert_eq!(found.len(), plain.len(), "apart {apart_s}");
        let mut magnitude: Vec<f64> = output.iter().map(|v| f64::from(*v)).collect();
        magnitude.sort_by(f64::total_cmp);
        for (&i, (&time_s, &mark)) in plain.iter().zip(found.time_s.iter().zip(&found.mark)) {
            let (a, b, c) = (f64::from(output[i - 1]), f64::from(output[i]), f64::from(output[i + 1]));
            // Vertex of the parabola through three points, in Lagrange's form.
            let place = i as f64 + (a - c) / (2.0 * (a - 2.0 * b + c));
            let height = b - (a - c).powi(2) / (8.0 * (a - 2.0 * b + c));
            assert!((time_s * rate_hz - place).abs() < 1e-4, "{time_s} against sample {place}");
            let want = (height / found.scale).max(0.3).ln();
            assert!((mark - want).abs() < 1e-5, "{mark} against {want}");
        }
    }
}

/// True if sample `i` is a local maximum above zero, the largest within ± `apart_s`, and no side lobe of something a quarter larger and
/// of the other sign within 0.4 ms (neither is asked without a distance).
fn is_candidate(output: &[f32], i: usize, rate_hz: f64, apart_s: f64) -> bool {
    let b = output[i];
    let near = |reach_s: f64| {
        let reach = (reach_s * rate_hz) as usize;
        (0..output.len()).filter(move |j| j.abs_diff(i) <= reach)
    };
    output[i - 1] < b
        && b >= output[i + 1]
        && b > 0.0
        && (apart_s == 0.0
            || (near(apart_s).all(|j| output[j] <= 1.0001 * b)
                && near(apart_s.max(0.4e-3)).all(|j| -output[j] <= 1.25 * b)))
}

#[test]
fn ranks_and_the_robust_deviation_equal_those_of_the_sorted_values() {
    let x = noise(1_001, 8);
    let sorted = |mut v: Vec<f32>| {
        v.sort_by(f32::total_cmp);
        v
    };
    let middle = sorted(x.clone())[500];
    let spread = sorted(x.iter().map(|v| (v - middle).abs()).collect())[500];
    assert_eq!(robust_sd(&x), 1.4826 * spread);
    let values: Vec<f64> = x.iter().map(|v| f64::from(*v)).collect();
    for rank in [0, 1, 500, 1_000, 5_000] {
        assert_eq!(nth_largest(&values, rank), f64::from(sorted(x.clone())[1_000 - rank.min(1_000)]));
    }
}

#[test]
fn the_spectrum_equals_the_mean_of_plain_transforms() {
    let x: Vec<f32> = noise(200, 9).iter().map(|v| v + 0.7).collect();
    let segment = 64;
    let fast = welch(&x, 64.0, segment, true);
    let starts: Vec<usize> = (0..).map(|i| i * segment / 2).take_while(|s| s + segment <= x.len()).collect();
    for (k, &found) in fast.power.iter().enumerate() {
        let power = |start: usize| -> f64 {
            let part = &x[start..start + segment];
            let mean = part.iter().map(|v| f64::from(*v)).sum::<f64>() / segment as f64;
            let sum = |f: fn(f64) -> f64| -> f64 {
                let window = |n: usize| 0.5 - 0.5 * (TAU * n as f64 / segment as f64).cos();
                let term =
                    |n: usize| (f64::from(part[n]) - mean) * window(n) * f(TAU * (k * n) as f64 / segment as f64);
                (0..segment).map(term).sum()
            };
            sum(f64::cos).powi(2) + sum(f64::sin).powi(2)
        };
        let plain = starts.iter().map(|&s| power(s)).sum::<f64>() / starts.len() as f64;
        assert!((plain - found).abs() < 1e-4 * (1.0 + plain), "bin {k}: {plain} against {found}");
    }
}

#[test]
fn reading_between_samples_is_hermites_cubic_with_mean_slopes() {
    let x = noise(60, 10);
    let at = |i: isize| usize::try_from(i).ok().and_then(|i| x.get(i)).map_or(0.0, |v| f64::from(*v));
    for position in [25.3, 30.0, 30.999, 1.2, 57.6] {
        let mut out = [0.0f32; 9];
        read(&x, position, 4, &mut out);
        for (k, &found) in out.iter().enumerate() {
            let place = position - 4.0 + k as f64;
            let (i, t) = (place.floor() as isize, place - place.floor());
            let slope = |i: isize| 0.5 * (at(i + 1) - at(i - 1));
            let plain = (1.0 + 2.0 * t) * (1.0 - t).powi(2) * at(i)
                + t * (1.0 - t).powi(2) * slope(i)
                + t * t * (3.0 - 2.0 * t) * at(i + 1)
                + t * t * (t - 1.0) * slope(i + 1);
            assert!((plain - f64::from(found)).abs() < 1e-5, "{place}: {plain} against {found}");
        }
    }
}

#[test]
fn a_scalar_product_in_lanes_is_the_plain_sum() {
    for count in [0, 1, 7, 8, 9, 49, 128] {
        let (a, b) = (noise(count, 11), noise(count, 12));
        let plain: f64 = a.iter().zip(&b).map(|(x, y)| f64::from(*x) * f64::from(*y)).sum();
        assert!((plain - f64::from(dot(&a, &b))).abs() < 1e-4, "{count}");
    }
}
