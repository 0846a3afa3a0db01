//! The charts against published run lengths, and the way from entries to the sentence.
//!
//! Published: NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.3 (table of average run lengths of a one-sided CUSUM with
//! k = 0.5 and h = 5, and of a 3σ chart beside it); all values from memory. Delays to a step count from the first entry after it.

mod trend_help;

use gaptone::model::random::Random;
use gaptone::trend::cusum::Cusum;
use gaptone::trend::limits::Limits;
use gaptone::trend::{Chart, Charted, Moment, Options, State, analyse};
use trend_help::{Gap, Weather};

/// Shift in σ, run length of the CUSUM, run length of the 3σ chart.
const PUBLISHED: [(f64, f64, f64); 5] =
    [(0.5, 38.0, 155.22), (1.0, 10.4, 43.96), (1.5, 5.75, 14.97), (2.0, 4.01, 6.30), (3.0, 2.57, 2.00)];
/// Both sides together in control: 930/2 for the CUSUM, 370.4 for the 3σ chart.
const IN_CONTROL: (f64, f64) = (465.0, 370.4);

/// Good entries before a step: long enough that mean and σ are known as the published values take them to be.
const LONG: usize = 2000;

/// Entries from a step of `shift` σ until the CUSUM alarms, after `before` good entries without a standing sum.
fn cusum_delay(random: &mut Random, before: usize, shift: impl Fn(usize) -> f64) -> usize {
    let mut chart = Cusum::default();
    let mut last = 0.0;
    for _ in 0..before {
        last = chart.push(random.normal()).high;
    }
    // The published values start from a sum of zero.
    while last > 0.0 {
        last = chart.push(random.normal()).high;
    }
    (1..).find(|step| chart.push(shift(*step) + random.normal()).alarm() > 0).expect("an alarm")
}

#[test]
fn a_step_is_found_as_soon_as_the_table_of_the_handbook_says() {
    let mut random = Random::seeded(1);
    for (shift, published, _) in PUBLISHED {
        const RUNS: usize = 400;
        let delays: Vec<f64> = (0..RUNS).map(|_| cusum_delay(&mut random, LONG, |_| shift) as f64).collect();
        let mean = delays.iter().sum::<f64>() / RUNS as f64;
        let sd = (delays.iter().map(|d| (d - mean).powi(2)).sum::<f64>() / RUNS as f64).sqrt();
        // Four standard deviations of the mean, and 4 % for what 2000 entries leave open of mean and σ and for scores cut at 4.
        let allowed = 4.0 * sd / (RUNS as f64).sqrt() + 0.04 * published;
        println!("shift {shift} σ: CUSUM finds it in {mean:.2} entries, published {published}");
        assert!((mean - published).abs() < allowed, "{shift}: {mean} against {published} ± {allowed}");
    }
}

#[test]
fn an_unchanged_gap_raises_no_more_false_alarms_than_the_handbook_says_from_the_third_entry_on() {
    // Run lengths are nearly exponential, so the mean of 600 has a standard deviation of 4 %; four of these.
    const RUNS: usize = 600;
    let mut random = Random::seeded(2);
    let mut sum = 0;
    for _ in 0..RUNS {
        let mut chart = Cusum::default();
        sum += (1..).find(|_| chart.push(random.normal()).alarm() != 0).expect("an alarm");
    }
    let mean = f64::from(sum) / RUNS as f64;
    println!("in control: a first alarm of the CUSUM in {mean:.0} entries, published {}", IN_CONTROL.0);
    assert!((mean / IN_CONTROL.0 - 1.0).abs() < 0.17, "{mean}");
}

#[test]
fn the_limits_of_a_first_stretch_leave_a_further_entry_outside_once_in_370() {
    // 4000 stretches of each length, 30 further entries each: 120 000 entries, 324 alarms expected. Those of one stretch go
    // together, so that the count scatters by about 10 %; three of these.
    let mut random = Random::seeded(3);
    for reference in [8, 20, 50] {
        let mut outside = 0.0;
        for _ in 0..4000 {
            let first: Vec<f64> = (0..reference).map(|_| random.normal()).collect();
            let limits = Limits::of(&first);
            outside += (0..30).filter(|_| limits.side(random.normal()) != 0).count() as f64;
        }
        let per_370 = outside / 120_000.0 * IN_CONTROL.1;
        println!("in control: {per_370:.2} entries of 370 outside limits from {reference}, published 1");
        assert!((0.7..1.3).contains(&per_370), "{reference}: {per_370}");
    }
}

#[test]
fn weather_alone_raises_no_alarm_and_its_share_is_told() {
    let gap = Gap { scatter: 0.003, weather: Weather::Changing, ..Gap::default() };
    let trend = analyse(&gap.entries(60, 4), &Options::default());
    assert_eq!(trend.state, State::WithinLimits, "{}", trend.advice);
    assert_eq!(trend.advice, "within limits: nothing to do");
    let air = trend.air.expect("the air is known");
    // Density changes of ± 3 % about a scatter of 0.3 %.
    assert!(air.explained > 0.9 && air.scatter_reduced < 0.005, "{air:?}");
    let exponent = air.exponent.expect("the density moves enough");
    assert!(exponent.low < 1.0 && 1.0 < exponent.high, "{exponent:?}");
    // The same log taken as in standard air is full of alarms.
    let mut blind = gap.entries(60, 4);
    blind.iter_mut().for_each(|entry| entry.air = gaptone::trend::Weather::default());
    let blind = analyse(&blind, &Options::default());
    assert!(blind.limits.expect("limits").sigma > 3.0 * trend.limits.expect("limits").sigma);
    assert!(blind.notes.iter().any(|note| note.contains("60 of 60 entries state no temperature")), "{:?}", blind.notes);
}

#[test]
fn a_worn_gap_is_found_with_its_date_its_size_and_its_spacing() {
    let gap = Gap { scatter: 0.005, weather: Weather::Changing, step: Some((40, 0.03)), ..Gap::default() };
    let entries = gap.entries(60, 5);
    let trend = analyse(&entries, &Options::default());
    assert_eq!(trend.state, State::OutOfLimits, "{}", trend.advice);
    let change = trend.change_point.as_ref().expect("a step");
    assert!(change.from <= entries[40].time && entries[40].time <= change.to, "{change:?}");
    let true_step = 0.03 * Gap::VOLTAGE_V;
    assert!(change.difference.low < true_step && true_step < change.difference.high, "{change:?}");
    assert!(trend.advice.starts_with("out of limits since 2026-"), "{}", trend.advice);
    let spacing = trend.spacing.expect("electrodes are known");
    // 25 mm spheres at 7.1 kV: d ln V/d ln d is between 0.8 and 1, so 3 % of voltage are 3 to 3.75 % of spacing.
    let change_m = spacing.change_m.expect("a step");
    let share = change_m.value / spacing.last_m.value;
    assert!((0.024..0.042).contains(&share), "{spacing:?}");
    assert!(change_m.u < 0.3 * spacing.last_m.u, "what all entries share cancels: {spacing:?}");
}

#[test]
fn slow_wear_is_told_per_hour_with_the_hours_that_are_left() {
    let gap = Gap { scatter: 0.005, drift: 0.0002, hours_each: 2.0, ..Gap::default() };
    let trend = analyse(&gap.entries(60, 6), &Options { limits: Some((6.9e3, 7.5e3)), ..Options::default() });
    let wear = trend.wear.expect("hours");
    let true_slope = 0.0002 * Gap::VOLTAGE_V / 2.0;
    assert!(
        wear.sure && wear.hour_meter && wear.per_hour.low < true_slope && true_slope < wear.per_hour.high,
        "{wear:?}"
    );
    // 59 entries later the gap stands at 7184 V; 7500 V are 445 h away.
    let (best, earliest, latest) = wear.hours_to_limit.expect("a limit ahead");
    assert!(
        earliest < 445.0 && best > earliest && latest.is_some_and(|latest| latest > best && latest > 445.0),
        "{wear:?}"
    );
    assert!(trend.advice.contains("per hour of firing") && trend.advice.contains("limit in"), "{}", trend.advice);
}

#[test]
fn one_bad_entry_asks_for_another_measurement_and_a_repair_ends_the_alarm() {
    let mut entries = Gap { scatter: 0.004, ..Gap::default() }.entries(40, 7);
    let last = entries.last_mut().expect("entries").gap_voltage_v.as_mut().expect("a voltage");
    last.value *= 1.1;
    let trend = analyse(&entries, &Options::default());
    assert_eq!(trend.state, State::LastOutside);
    assert!(trend.advice.contains("measure again"), "{}", trend.advice);
    let worn = Gap { scatter: 0.004, step: Some((25, 0.03)), until: Some(45), ..Gap::default() };
    let trend = analyse(&worn.entries(70, 7), &Options::default());
    assert_eq!(trend.state, State::WithinLimits, "{}", trend.advice);
    assert!(trend.alarms.iter().any(|alarm| alarm.chart == Chart::Cusum && !alarm.stands), "{:?}", trend.alarms);
}

#[test]
fn entries_of_other_benches_and_older_ones_are_left_out_and_few_ones_get_no_limits() {
    let mut entries = Gap::default().entries(30, 8);
    entries[3].bench.as_mut().expect("a bench").title = Some("another".to_owned());
    let trend = analyse(&entries, &Options::default());
    assert_eq!(trend.entries, 29);
    assert!(trend.notes.iter().any(|note| note.contains("\"another\" (1)")), "{:?}", trend.notes);
    let other = analyse(&entries, &Options { title: Some("another".to_owned()), ..Options::default() });
    assert_eq!((other.entries, other.state), (1, State::TooFew));
    assert_eq!(other.advice, "too few entries for limits: 1 of 8; log 7 more measurements");
    let since = Moment(entries[25].time.0);
    assert_eq!(analyse(&entries, &Options { since: Some(since), ..Options::default() }).entries, 5);
    assert_eq!(analyse(&[], &Options::default()).state, State::TooFew);
}

#[test]
fn any_figure_can_be_charted() {
    let entries = Gap { scatter: 0.005, ..Gap::default() }.entries(30, 9);
    for charted in Charted::ALL {
        let trend = analyse(&entries, &Options { charted: Some(charted), ..Options::default() });
        assert_eq!((trend.charted, trend.entries), (charted, 30));
        assert_eq!(trend.beside.len(), 3);
    }
    let mut without: Vec<_> = entries;
    without.iter_mut().for_each(|entry| entry.gap_voltage_v = None);
    assert_eq!(analyse(&without, &Options::default()).charted, Charted::FiringRate);
}

#[test]
fn a_gap_that_does_not_change_gets_a_step_in_one_log_of_a_hundred_however_long_the_log() {
    for (entries, logs, most) in [(100, 400, 10), (1000, 200, 7), (10_000, 20, 2)] {
        let told = (0..logs)
            .filter(|seed| {
                let log = Gap::default().entries(entries, 40_000 + seed);
                analyse(&log, &Options::default()).change_point.is_some()
            })
            .count();
        println!("in control: a step in {told} of {logs} logs of {entries} entries");
        // With a chance of 1 % more than these come up in one run of 500 (binomial).
        assert!(told <= most, "{told} of {logs} logs of {entries}");
    }
}

/// Figures for a person; run with --ignored --nocapture.
#[test]
#[ignore = "prints a table"]
fn figures_of_the_charts() {
    trend_help::figures();
}
