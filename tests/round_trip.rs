//! The round trip over many benches: a clip is rendered from a random bench, measured, and compared with what is true.
//!
//! The truth of an interval is that of the process, for that is what the intervals claim: mean period, jitter and gap voltage
//! of a run of [`LONG_RUN`] firings of the same bench with another seed, whose own scatter is a thirtieth of a clip's interval
//! or less. The figures of the clip itself (the `realised` ones of its truth) are compared too: an interval for the process is wider
//! than it needs to be for them.

use gaptone::bench::{self, Bench};
use gaptone::estimate::Estimate;
use gaptone::measure::{Measurer, Options};
use gaptone::model::charging::Circuit;
use gaptone::model::clip::Clip;
use gaptone::model::firings::{Faults, GapLaw, Plan, Realised, Rhythm, Start, simulate};
use gaptone::model::random::Random;
use gaptone::model::receiver::ReceiverSettings;
use gaptone::model::render::RenderSettings;
use gaptone::model::truth::TrainTruth;
use gaptone::voltage::VoltageMeter;
use std::sync::Mutex;
use std::sync::atomic::{AtomicU64, Ordering};

/// Firings of the long run that tells what is true of a bench.
const LONG_RUN: f64 = 400_000.0;
/// Seconds of a clip.
const CLIP_S: f64 = 4.0;

/// Text of a random bench: 40 to 900 firings a second, spread 0.2 to 2 %, memory up to 0.5 in one of three, noise 20 to 40 dB
/// under a click.
fn bench_text(random: &mut Random) -> String {
    let mut between = |low: f64, high: f64| low + (high - low) * random.uniform();
    let rate_hz = 40.0 * (900.0f64 / 40.0).powf(between(0.0, 1.0));
    let supply_v = between(6e3, 12e3);
    let gap_v = supply_v * between(0.4, 0.8);
    let residual_v = between(0.0, 200.0);
    let spread = 100.0 * 0.002 * 10f64.powf(between(0.0, 1.0));
    let memory = (between(0.0, 1.0) - 2.0 / 3.0).max(0.0) * 1.5;
    let noise_db = between(-40.0, -20.0);
    let resistance_ohm = 1e6;
    let capacitance_f = 1.0 / rate_hz / resistance_ohm / ((supply_v - residual_v) / (supply_v - gap_v)).ln();
    format!(
        "[supply]\nvoltage = \"{supply_v:.6e} V\"\n\
         [charging]\nresistance = \"{resistance_ohm:.6e} ohm\"\ncapacitance = \"{capacitance_f:.6e} F\"\n\
         [gap]\nvoltage = \"{gap_v:.6e} V\"\nspread = \"{spread:.4} %\"\nmemory = {memory:.4}\n\
         residual_voltage = \"{residual_v:.3} V\"\nconduction_time = \"5 us\"\n\
         [receiver]\nbandwidth = \"6 kHz\"\nnoise = \"{noise_db:.2} dB\"\n"
    )
}

fn plan(bench: &Bench, duration_s: f64, seed: u64) -> Plan {
    let voltage = bench.gap.voltage.expect("a gap voltage").value;
    let circuit = Circuit::from_bench(bench, None).expect("a circuit");
    let rhythm = Rhythm::Bench { circuit, gap: GapLaw::from_bench(bench, voltage) };
    Plan { rhythm, faults: Faults::none(), start: Start::Running, duration_s, seed }
}

/// What is true of a bench in the long run.
fn process(bench: &Bench, rate_hz: f64, seed: u64) -> Realised {
    simulate(&plan(bench, LONG_RUN / rate_hz, seed)).expect("a train").realised
}

/// One round trip.
#[derive(Debug, Clone, Default)]
struct Trip {
    seed: u64,
    /// Error of the rate against that of the clip, relative.
    rate_error: Option<f64>,
    /// Whether the 95 % intervals hold what is true of the process: rate, jitter, gap voltage.
    covered: [Option<bool>; 3],
    /// Whether that of the rate holds the rate of the clip.
    clip_covered: bool,
}

fn holds(interval: Option<Estimate>, truth: Option<f64>) -> Option<bool> {
    interval.zip(truth).map(|(interval, truth)| interval.low <= truth && truth <= interval.high)
}

fn trip(seed: u64) -> Trip {
    let mut random = Random::seeded(seed);
    let bench = bench::parse(&bench_text(&mut random), "a random bench").unwrap_or_else(|error| panic!("{error}"));
    let plan = plan(&bench, CLIP_S, seed);
    let train = TrainTruth::of_plan(simulate(&plan).expect("a train").firings, &plan);
    let realised = train.realised;
    let receiver = ReceiverSettings::from_bench(&bench).expect("a receiver");
    let clip = Clip::new(RenderSettings::new(receiver, CLIP_S, seed), vec![train]).expect("a clip");
    let samples: Vec<f32> = clip.renderer.collect();

    let mut measurer = Measurer::new(clip.truth.settings.sample_rate_hz, Options::default());
    measurer.push(&samples);
    let outcome = measurer.finish();
    let mut meter = VoltageMeter::new(&bench, None).expect("a voltmeter");
    outcome.events.iter().for_each(|event| meter.push(event));
    let voltage = meter.finish(&outcome.reading).gap_voltage_v;

    let rate = outcome.reading.firing_rate_hz;
    let truth = process(&bench, realised.firing_rate_hz.expect("a rate"), seed + (1 << 32));
    Trip {
        seed,
        rate_error: rate.zip(realised.firing_rate_hz).map(|(found, real)| found.value / real - 1.0),
        covered: [
            holds(rate, truth.firing_rate_hz),
            holds(outcome.reading.period_jitter_s, truth.period_jitter_s),
            holds(voltage, truth.gap_voltage_v),
        ],
        clip_covered: holds(rate, realised.firing_rate_hz) == Some(true),
    }
}

/// Round trips for a range of seeds, on all cores.
fn trips(seeds: std::ops::Range<u64>) -> Vec<Trip> {
    let next = AtomicU64::new(seeds.start);
    let all = Mutex::new(Vec::new());
    let cores = std::thread::available_parallelism().map_or(1, usize::from);
    std::thread::scope(|scope| {
        for _ in 0..cores {
            scope.spawn(|| {
                loop {
                    let seed = next.fetch_add(1, Ordering::Relaxed);
                    if seed >= seeds.end {
                        return;
                    }
                    let trip = trip(seed);
                    all.lock().expect("no thread panicked").push(trip);
                }
            });
        }
    });
    all.into_inner().expect("no thread panicked")
}

fn count(trips: &[Trip], is: impl Fn(&Trip) -> bool) -> usize {
    trips.iter().filter(|trip| is(trip)).count()
}

fn report(trips: &[Trip]) {
    let answered = |figure: usize| count(trips, |trip| trip.covered[figure].is_some());
    let covered = |figure: usize| count(trips, |trip| trip.covered[figure] == Some(true));
    for (figure, name) in ["rate", "jitter", "gap voltage"].iter().enumerate() {
        let share = 100.0 * covered(figure) as f64 / answered(figure) as f64;
        println!("{name}: interval holds the process in {} of {} ({share:.1} %)", covered(figure), answered(figure));
    }
    println!("rate: interval holds the clip's own in {} of {}", count(trips, |trip| trip.clip_covered), trips.len());
    for trip in trips.iter().filter(|trip| trip.rate_error.is_none_or(|error| error.abs() > 1e-3)) {
        println!("seed {}: rate off by {:?}", trip.seed, trip.rate_error);
    }
}

#[test]
fn the_interval_of_the_rate_holds_the_rate_of_the_process() {
    const CLIPS: u64 = 60;
    let trips = trips(0..CLIPS);
    report(&trips);
    // Within 0.5 % in 98.5 % of the clips is what the program promises for such benches.
    let good = count(&trips, |trip| trip.rate_error.is_some_and(|error| error.abs() < 5e-3));
    assert!(good as f64 >= (0.985 * CLIPS as f64).floor(), "{good} of {CLIPS}");
    // Of 60 intervals that hold the truth with 95 %, 51 or more do with a probability of 0.9993 (binomial); all 60 with 0.046.
    let covered = count(&trips, |trip| trip.covered[0] == Some(true));
    assert!(covered >= 51, "{covered} of {CLIPS}");
    assert!(
        count(&trips, |trip| trip.clip_covered) >= covered,
        "the clip's own rate is nearer than that of the process"
    );
}

#[test]
#[ignore = "minutes of computing; the command stands in DEVELOPERS.md"]
fn the_interval_of_the_rate_holds_the_rate_of_the_process_in_93_to_97_of_a_hundred() {
    const CLIPS: usize = 400;
    let trips = trips(1_000_000..1_000_000 + CLIPS as u64);
    report(&trips);
    let good = count(&trips, |trip| trip.rate_error.is_some_and(|error| error.abs() < 5e-3));
    assert!(good as f64 >= 0.985 * CLIPS as f64, "{good} of {CLIPS}");
    // 93 to 97 % widened by what 400 draws scatter by: three times √(0.95·0.05/400) = 3.3 %.
    let share = count(&trips, |trip| trip.covered[0] == Some(true)) as f64 / CLIPS as f64;
    assert!((0.917..=0.983).contains(&share), "{share}");
}
