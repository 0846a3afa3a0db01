//! How far firings wander from an even beat, against what independent periods and a clock would do.

use super::{Measured, has_rhythm, mains, seconds};
use crate::evidence::Growth;
use crate::plot::{Axis, Legend, Mark, Panel, Picture, Scale, Stroke};

/// Fewest points that show a growth.
const FEWEST: usize = 4;
/// Standard deviations of a 95 % span.
const COVERAGE: f64 = 1.96;
/// Points of a curve.
const POINTS: u32 = 80;
/// From this ratio to the law on, beyond chance, the firings wander otherwise than independent periods.
const OTHERWISE: f64 = 1.25;

pub(super) fn picture(measured: Measured<'_>) -> Option<Picture> {
    let reading = &measured.measurement.reading;
    let growth = &measured.evidence.growth;
    let period_s = reading.period_s.filter(|_| has_rhythm(reading))?.value;
    let jitter_s = reading.period_jitter_s?.value;
    if growth.len() < FEWEST {
        return None;
    }
    let noise_s = reading.timing_noise_s.map_or(0.0, |noise| noise.value);
    let law = |periods: f64| (periods * jitter_s * jitter_s + 2.0 * noise_s * noise_s).sqrt();
    let last = growth.last()?;
    let end = f64::from(last.periods);
    let clock_s = std::f64::consts::SQRT_2 * noise_s;
    let all = || growth.iter().map(|g| g.sd_s).chain([law(1.0), law(end)]).chain((noise_s > 0.0).then_some(clock_s));
    let low_s = all().fold(f64::INFINITY, f64::min).max(1e-3 * law(end));
    let y = Scale::logarithmic(0.7 * low_s, 1.5 * all().fold(0.0, f64::max));
    let x = Scale::logarithmic(0.9, 1.1 * end);
    let mut panel = Panel::new(
        Picture::area(230.0),
        Axis::new(x, "periods", "", 5),
        Axis::new(y, "scatter of the time over so many periods", "s", 5),
    );
    let curve = (0..=POINTS).map(|k| end.powf(f64::from(k) / f64::from(POINTS)));
    panel.line("independent", Stroke::Model, curve.map(|periods| (periods, law(periods))));
    let mut legend = vec![
        (Legend::Mark(Mark::Dot), "measured, with 95 % span".to_owned()),
        (Legend::Line(Stroke::Model), "independent periods".to_owned()),
    ];
    if clock_s > y.low {
        panel.level("clock", Stroke::Other, clock_s);
        legend.push((Legend::Line(Stroke::Other), "a clock, read with this noise".to_owned()));
    }
    if let Some(line_hz) = mains::in_the_firing(reading) {
        // Seen once a period, a ripple faster than half the rate shows as its beat with the rate.
        let cycles = line_hz * period_s;
        let (wave, words) = if cycles < 0.5 { (1.0 / cycles, "one cycle of") } else { (beat(cycles), "beat with") };
        if wave < end {
            panel.upright("mains", Stroke::Limit, wave);
            panel.words_at(wave, 0, &format!("{words} {line_hz:.0} Hz"));
        }
    }
    panel.spans(
        "span",
        Stroke::Main,
        growth.iter().map(|g| {
            let u = g.sd_s * COVERAGE * relative_u(g);
            (f64::from(g.periods), (g.sd_s - u).max(y.low), g.sd_s + u)
        }),
    );
    panel.marks("growth", Mark::Dot, growth.iter().map(|g| (f64::from(g.periods), g.sd_s)));
    let title = title(growth, law);
    let text = "A gap forgets: each period starts anew, so the times of firings walk away from an even beat with the root of the \
                number of periods (dashed). A clock does not: its line stays level. Points above the dashed line are memory, drift \
                or a wave; points below it a gap that catches up. Both scales are logarithmic."
        .to_owned();
    Some(Picture { kind: "growth", title, reading: text, panels: vec![panel], legend })
}

/// Periods of the beat of a ripple that makes so many cycles in a period; endless where it is locked.
fn beat(cycles: f64) -> f64 {
    1.0 / (cycles - cycles.round()).abs()
}

/// Relative standard uncertainty of a scatter from so many pieces.
fn relative_u(growth: &Growth) -> f64 {
    1.0 / (2.0 * (growth.pieces - 1.0).max(1.0)).sqrt()
}

fn title(growth: &[Growth], law: impl Fn(f64) -> f64) -> String {
    // Long enough to tell a walk from noise, short enough that many lie side by side.
    let Some(told) = growth.iter().rev().find(|g| g.pieces >= 30.0).or(growth.last()) else { return String::new() };
    let expected_s = law(f64::from(told.periods));
    let ratio = told.sd_s / expected_s;
    let by_chance = 1.0 + 3.0 * relative_u(told);
    let verdict = if ratio > OTHERWISE.max(by_chance) {
        "more than"
    } else if ratio < 1.0 / OTHERWISE.max(by_chance) {
        "less than"
    } else {
        "about as far as"
    };
    format!(
        "Over {} periods firings stray by {}, {verdict} independent periods would ({})",
        told.periods,
        seconds(told.sd_s),
        seconds(expected_s)
    )
}
