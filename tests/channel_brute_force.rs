//! The channel filter, carried exactly from instant to instant, against a cascade of its circuits that is stepped through time, on
//! random benches.

use gaptone::model::random::Random;
use gaptone::model::receiver::{Channel, Complex, Selectivity};
use proptest::prelude::*;
use std::f64::consts::{PI, TAU};

/// Inaudible and below 16-bit rounding: the bound set for the event-driven filter.
const MINUS_80_DB: f64 = 1e-4;

/// Poles of the low-pass equivalent by the textbook, rad/s, each as often as it occurs.
fn textbook_poles(selectivity: Selectivity, bandwidth_hz: f64) -> Vec<Complex> {
    let edge = PI * bandwidth_hz;
    match selectivity {
        Selectivity::CoupledPairs { pairs } => {
            let w = edge / (2f64.sqrt() * (2f64.powf(2.0 / f64::from(pairs)) - 1.0).powf(0.25));
            (0..pairs).flat_map(|_| [Complex::new(-w, w), Complex::new(-w, -w)]).collect()
        }
        Selectivity::Butterworth { poles } => {
            let n = f64::from(poles);
            let corner = edge / 3f64.powf(0.5 / n);
            let angle = |k: u8| PI * (0.5 + (f64::from(k) + 0.5) / n);
            (0..poles).map(|k| Complex::from_polar(corner, angle(k))).collect()
        }
        Selectivity::Synchronous { circuits } => {
            let rate = edge / (2f64.powf(2.0 / f64::from(circuits)) - 1.0).sqrt();
            vec![Complex::from(-rate); usize::from(circuits)]
        }
        Selectivity::Flat { .. } => unreachable!("a flat filter has no poles"),
    }
}

/// The cascade of the circuits, one after the other, by Runge's and Kutta's method; no partial fractions, nothing exact.
fn cascade(poles: &[Complex], x: &mut [Complex], step_s: f64) {
    let slope = |x: &[Complex]| -> Vec<Complex> {
        (0..x.len()).map(|i| poles[i] * (x[i] - if i > 0 { x[i - 1] } else { Complex::default() })).collect()
    };
    let moved = |k: &[Complex], h: f64| -> Vec<Complex> { x.iter().zip(k).map(|(x, k)| x + k * h).collect() };
    let k1 = slope(x);
    let k2 = slope(&moved(&k1, step_s / 2.0));
    let k3 = slope(&moved(&k2, step_s / 2.0));
    let k4 = slope(&moved(&k3, step_s));
    for i in 0..x.len() {
        x[i] += (k1[i] + 2.0 * k2[i] + 2.0 * k3[i] + k4[i]) * (step_s / 6.0);
    }
}

fn any_circuits() -> impl Strategy<Value = Selectivity> {
    prop_oneof![
        (1..4u8).prop_map(|pairs| Selectivity::CoupledPairs { pairs }),
        // One circuit alone jumps with each click, which nothing sampled can follow.
        (2..7u8).prop_map(|poles| Selectivity::Butterworth { poles }),
        (2..7u8).prop_map(|circuits| Selectivity::Synchronous { circuits }),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(16))]

    #[test]
    fn on_random_benches_exact_propagation_equals_brute_force_at_64_times_the_rate(
        selectivity in any_circuits(), bandwidth_hz in 1e3..12e3f64, rate_hz in 50.0..4000.0f64, seed in 0..1000u64,
    ) {
        const FINE: usize = 64;
        const SAMPLES: usize = 1500;
        let sample_rate_hz = 96_000.0;
        let channel = Channel::new(selectivity, bandwidth_hz);
        let mut state = channel.state(1.0 / sample_rate_hz);
        let poles = textbook_poles(selectivity, bandwidth_hz);
        let mut x = vec![Complex::default(); poles.len()];
        let mut random = Random::seeded(seed);
        // Clicks with 10 % jitter at instants of the fine grid, which are odd ones to the samples; any phase and size.
        let (mut clicks, mut place) = (Vec::new(), 3.0);
        while (place as usize) < (SAMPLES - 1) * FINE {
            let strength = Complex::from_polar(0.5 + random.uniform(), TAU * random.uniform());
            clicks.push((place as usize, strength / channel.impulse_peak().1));
            place += (1.0 + 0.1 * random.normal()).max(0.1) * FINE as f64 * sample_rate_hz / rate_hz;
        }
        let (mut exact_next, mut fine_next) = (0, 0);
        let (mut worst, mut peak) = (0.0f64, 0.0f64);
        for k in 0..SAMPLES {
            state.advance();
            while exact_next < clicks.len() && clicks[exact_next].0 <= k * FINE {
                let age_s = (k * FINE - clicks[exact_next].0) as f64 / (FINE as f64 * sample_rate_hz);
                state.add_impulse(clicks[exact_next].1, age_s);
                exact_next += 1;
            }
            for fine in if k == 0 { 0..1 } else { FINE * (k - 1) + 1..FINE * k + 1 } {
                if fine > 0 {
                    cascade(&poles, &mut x, 1.0 / (FINE as f64 * sample_rate_hz));
                }
                while fine_next < clicks.len() && clicks[fine_next].0 <= fine {
                    x[0] -= poles[0] * clicks[fine_next].1;
                    fine_next += 1;
                }
            }
            worst = worst.max((state.output() - x[x.len() - 1]).norm());
            peak = peak.max(state.output().norm());
        }
        prop_assert!(peak > 0.3, "{peak}");
        prop_assert!(worst < MINUS_80_DB * peak, "{selectivity:?} {bandwidth_hz}: {worst} of {peak}");
    }
}
