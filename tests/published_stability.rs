//! Published stability statistics, from audio back to the printed numbers.
//!
//! NIST Special Publication 1065 (Riley 2008), section 12.4, gives a portable set of 1000 numbers and its deviations. Periods
//! built from the set are rendered as clicks, measured, and must give the published deviations again, to within the timing
//! noise. Nothing of this program stands between the two.

use gaptone::firing::{EventKind, Firing};
use gaptone::measure::{Measurer, Options, Outcome};
use gaptone::model::clip::Clip;
use gaptone::model::firings::{BareRhythm, Faults, Plan, Rhythm, Start, simulate};
use gaptone::model::random::Random;
use gaptone::model::receiver::ReceiverSettings;
use gaptone::model::render::RenderSettings;
use gaptone::model::truth::TrainTruth;

/// Averaging numbers of the table.
const AVERAGING: [usize; 3] = [1, 10, 100];
/// Table 31 of the publication: sample standard deviation of averages.
const STANDARD_DEVIATION: [f64; 3] = [2.884664e-1, 9.296352e-2, 3.206656e-2];
/// Allan deviation of averages that do not overlap.
const ALLAN: [f64; 3] = [2.922319e-1, 9.965736e-2, 3.897804e-2];
/// Overlapping Allan deviation.
const OVERLAPPING_ALLAN: [f64; 3] = [2.922319e-1, 9.159953e-2, 3.241343e-2];
/// Half a digit of the printed numbers, and the rounding of their last one.
const PRINTED: f64 = 1e-6;

/// Mean period and swing of the periods: T = 10 ms·(1 + 0.02·(y − 0.5)).
const PERIOD_S: f64 = 10e-3;
const SWING: f64 = 0.02;

/// The set: a linear congruential generator over 2³¹ − 1, from 1234567890 on, divided by the modulus.
fn published_set() -> Vec<f64> {
    const MODULUS: u64 = 2_147_483_647;
    std::iter::successors(Some(1_234_567_890u64), |n| Some(16_807 * n % MODULUS))
        .take(1000)
        .map(|n| n as f64 / MODULUS as f64)
        .collect()
}

fn averages(y: &[f64], m: usize) -> Vec<f64> {
    y.chunks_exact(m).map(|part| part.iter().sum::<f64>() / m as f64).collect()
}

/// Sample standard deviation, divisor n − 1.
fn standard_deviation(y: &[f64]) -> f64 {
    let mean = y.iter().sum::<f64>() / y.len() as f64;
    (y.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / (y.len() - 1) as f64).sqrt()
}

fn allan(y: &[f64]) -> f64 {
    (y.windows(2).map(|w| (w[1] - w[0]).powi(2)).sum::<f64>() / (2 * (y.len() - 1)) as f64).sqrt()
}

/// Overlapping Allan deviation of event times in units of the mean period.
fn overlapping_allan(x: &[f64], m: usize) -> f64 {
    let second = |k: usize| x[k + 2 * m] - 2.0 * x[k + m] + x[k];
    let count = x.len() - 2 * m;
    ((0..count).map(|k| second(k).powi(2)).sum::<f64>() / count as f64 / (2 * m * m) as f64).sqrt()
}

fn sums(y: &[f64]) -> Vec<f64> {
    std::iter::once(0.0)
        .chain(y.iter().scan(0.0, |sum, v| {
            *sum += v;
            Some(*sum)
        }))
        .collect()
}

#[test]
fn the_set_and_its_deviations_are_the_published_ones() {
    let y = published_set();
    // Printed beside the table: n₁, n₉₉₉, and the moments of the set.
    assert_eq!((y[1] * 2_147_483_647.0).round() as u64, 395_529_916);
    assert_eq!((y[999] * 2_147_483_647.0).round() as u64, 1_560_135_652);
    assert!((y.iter().sum::<f64>() / 1000.0 - 4.897745e-1).abs() < 1e-7);
    let x = sums(&y);
    for (i, m) in AVERAGING.into_iter().enumerate() {
        let close = |found: f64, printed: f64| {
            assert!((found / printed - 1.0).abs() < PRINTED, "m = {m}: {found} for {printed}");
        };
        close(standard_deviation(&averages(&y, m)), STANDARD_DEVIATION[i]);
        close(allan(&averages(&y, m)), ALLAN[i]);
        // Event times built as sums of the set give the deviations of the set.
        close(overlapping_allan(&x, m), OVERLAPPING_ALLAN[i]);
    }
}

/// The set as firings, rendered by this program's receiver with noise 40 dB under a click.
fn rendered() -> Clip {
    let periods = published_set().into_iter().map(|y| PERIOD_S * (1.0 + SWING * (y - 0.5)));
    let at = |time_s: f64| Firing { time_s, voltage_v: 5000.0, kind: EventKind::Firing };
    let firings: Vec<Firing> = sums(&periods.collect::<Vec<_>>()).into_iter().map(|time_s| at(5e-3 + time_s)).collect();
    let duration_s = firings[1000].time_s + 5e-3;
    let receiver = ReceiverSettings { noise: 0.01, ..ReceiverSettings::default() };
    Clip::new(RenderSettings::new(receiver, duration_s, 12), vec![TrainTruth::of(firings, &[])]).expect("a clip")
}

fn measured(clip: &Clip) -> Outcome {
    let samples: Vec<f32> = clip.renderer.clone().collect();
    let mut measurer = Measurer::new(clip.truth.settings.sample_rate_hz, Options::default());
    measurer.push(&samples);
    measurer.finish()
}

#[test]
fn clicks_rendered_from_the_set_and_measured_give_the_published_deviations() {
    let clip = rendered();
    let outcome = measured(&clip);
    let firings: Vec<_> = outcome.events.iter().filter(|event| event.kind == EventKind::Firing).collect();
    assert_eq!(firings.len(), 1001, "every click is found, and nothing else");
    let periods: Vec<f64> = firings.iter().filter_map(|event| event.period_s).collect();
    assert_eq!(periods.len(), 1000);

    let errors: Vec<f64> =
        firings.iter().zip(&clip.truth.trains[0].firings).map(|(found, fired)| found.time_s - fired.time_s).collect();
    let noise_s = standard_deviation(&errors);
    println!("timing noise {:.3} µs", 1e6 * noise_s);

    let y: Vec<f64> = periods.iter().map(|period| (period / PERIOD_S - 1.0) / SWING).collect();
    let x: Vec<f64> = sums(&y);
    for (i, m) in AVERAGING.into_iter().enumerate() {
        // White noise of the edges, in units of the set: its deviations of m-averages, added in squares; and what the product
        // of noise and set scatters by, four standard deviations over the number of averages.
        let edge = noise_s / PERIOD_S / SWING / m as f64;
        let check = |name: &str, found: f64, printed: f64, noise: f64, averages: f64| {
            let expected = printed.hypot(noise);
            let band = 4.0 * noise / averages.sqrt() + printed * PRINTED;
            println!("{name} m = {m}: {found:.6} for {printed:.6}, {expected:.6} ± {band:.6} with noise");
            assert!((found - expected).abs() <= band, "{name} m = {m}: {found} for {expected} ± {band}");
        };
        let n = 1000.0 / m as f64;
        check("sd", standard_deviation(&averages(&y, m)), STANDARD_DEVIATION[i], 2f64.sqrt() * edge, n);
        check("Allan", allan(&averages(&y, m)), ALLAN[i], 3f64.sqrt() * edge, n);
        check("overlapping Allan", overlapping_allan(&x, m), OVERLAPPING_ALLAN[i], 3f64.sqrt() * edge, n);
    }
}

#[test]
fn the_figures_of_the_set_are_those_reported() {
    let outcome = measured(&rendered());
    let jitter = outcome.reading.period_jitter_s.expect("a jitter");
    let rate = outcome.reading.firing_rate_hz.expect("a rate");
    // The slope of the set (6.490910e-6 a number, printed) takes 2·10⁻⁵ of the jitter about a straight line: nothing here. The
    // figure is known to 1/√(2·999) = 2.2 %, less for a flat distribution; three quarters of that are allowed.
    let printed = PERIOD_S * SWING * STANDARD_DEVIATION[0];
    assert!((jitter.value / printed - 1.0).abs() < 0.015, "{jitter:?} for {printed}");
    let mean_rate = 1.0 / (PERIOD_S * (1.0 + SWING * (4.897745e-1 - 0.5)));
    // Two edges of a microsecond or two over 10 s.
    assert!((rate.value / mean_rate - 1.0).abs() < 2e-6, "{rate:?} for {mean_rate}");
}

#[test]
fn neighbouring_differences_tell_a_renewal_train_from_a_clock_with_noisy_edges() {
    // Independent periods: cycle-to-cycle jitter √2 of the period jitter. A perfect clock with independent errors of its edges:
    // √3 of it (algebra). 10⁵ events, within 1 %.
    const EVENTS: usize = 100_000;
    let rhythm = Rhythm::Bare(BareRhythm::steady(1000.0, 0.02));
    let plan =
        Plan { rhythm, faults: Faults::none(), start: Start::Running, duration_s: EVENTS as f64 / 1000.0, seed: 5 };
    let renewal = simulate(&plan).expect("a train").firings;
    let mut random = Random::seeded(6);
    let edges: Vec<Firing> = (0..EVENTS)
        .map(|k| Firing { time_s: 1e-3 * k as f64 + 2e-5 * random.normal(), voltage_v: 1.0, kind: EventKind::Firing })
        .collect();
    for (firings, square) in [(renewal, 2.0f64), (edges, 3.0)] {
        let realised = TrainTruth::of(firings, &[]).realised;
        let ratio = realised.cycle_jitter_s.expect("many periods") / realised.period_jitter_s.expect("many periods");
        assert!((ratio / square.sqrt() - 1.0).abs() < 0.01, "{ratio} for √{square}");
    }
}
