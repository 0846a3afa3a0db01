//! How often which period: the periods about their line, and the normal law of jitter and timing noise.

use super::{Measured, every, has_rhythm, scatter_as_read_s, seconds};
use crate::plot::{Axis, Legend, Panel, Picture, Scale, Stroke};
use crate::rhythm::Reading;
use statrs::distribution::{Continuous, Normal};

/// Half width of the picture in standard deviations of the law.
const REACH: f64 = 4.5;
/// Fewest periods that are worth a distribution.
const FEWEST: usize = 20;
/// Points of the curve.
const POINTS: usize = 120;

pub(super) fn picture(measured: Measured<'_>) -> Option<Picture> {
    let reading = &measured.measurement.reading;
    let mean_s = reading.period_s.filter(|_| has_rhythm(reading))?.value;
    let sd_s = scatter_as_read_s(reading).filter(|sd_s| *sd_s > 0.0)?;
    let firings = &measured.evidence.firings;
    if firings.kept.len() < FEWEST {
        return None;
    }
    let drift = reading.drift_per_s.map_or(0.0, |drift| drift.value);
    let n = firings.kept.len() as f64;
    let middle_s = firings.kept.iter().map(|point| point.time_s).sum::<f64>() / n;
    let straightened: Vec<f64> =
        firings.kept.iter().map(|point| point.period_s + drift * mean_s * (point.time_s - middle_s)).collect();
    let (low_s, high_s) = (mean_s - REACH * sd_s, mean_s + REACH * sd_s);
    let bins = (1.2 * n.sqrt()).clamp(15.0, 48.0) as usize;
    let width_s = (high_s - low_s) / bins as f64;
    let mut counts = vec![0u32; bins];
    let mut beyond = 0u64;
    for period_s in &straightened {
        match counts.get_mut(((period_s - low_s) / width_s).floor().max(-1.0) as i64 as usize) {
            Some(count) => *count += 1,
            None => beyond += 1,
        }
    }
    let law = Normal::new(mean_s, sd_s).ok()?;
    let expected = |period_s: f64| n * width_s * law.pdf(period_s);
    let top = counts.iter().map(|count| f64::from(*count)).fold(expected(mean_s), f64::max);
    let mut panel = Panel::new(
        Picture::area(220.0),
        Axis::new(Scale::linear(low_s, high_s), "period, drift taken out", "s", 6),
        Axis::new(Scale::linear(0.0, 1.08 * top), &format!("periods in {}", seconds(width_s)), "", 5),
    );
    let edge = |k: usize| low_s + width_s * k as f64;
    panel.bars("counts", counts.iter().enumerate().map(|(k, count)| (edge(k), edge(k + 1), f64::from(*count))));
    let along = (0..=POINTS).map(|k| low_s + (high_s - low_s) * k as f64 / POINTS as f64);
    panel.line("law", Stroke::Model, along.map(|period_s| (period_s, expected(period_s))));
    let title = title(reading, read_sd_s(&straightened), sd_s)?;
    let mut text = "Bars: the periods. Dashed: the normal law that has the mean and the scatter of the measurement. Bars that \
                    stand beside the law (two humps, a long tail) say that one number does not describe this gap. Where clicks overlap, \
                    single periods are read too evenly or too unevenly, and the jitter comes from the line at the rate instead."
        .to_owned();
    if firings.every > 1 {
        text.push_str(&format!(" Counted is {}.", every(firings.every, "period")));
    }
    if beyond > 0 {
        text.push_str(&format!(" {beyond} of {} lie beyond the edges.", straightened.len()));
    }
    let legend = vec![
        (Legend::Area("bar"), "periods".to_owned()),
        (Legend::Line(Stroke::Model), "normal law of the figures".to_owned()),
    ];
    Some(Picture { kind: "distribution", title, reading: text, panels: vec![panel], legend })
}

/// Standard deviation of the periods as they were read, by the middle half of them: a misread one does not count.
fn read_sd_s(periods_s: &[f64]) -> f64 {
    /// Width of the middle half of a normal law in standard deviations.
    const MIDDLE_HALF: f64 = 1.348_979_5;
    let mut sorted = periods_s.to_vec();
    sorted.sort_by(f64::total_cmp);
    let at = |share: f64| sorted[((sorted.len() - 1) as f64 * share).round() as usize];
    (at(0.75) - at(0.25)) / MIDDLE_HALF
}

/// What the periods scatter by, beside what the figures make.
fn title(reading: &Reading, read_s: f64, sd_s: f64) -> Option<String> {
    let jitter = reading.period_jitter_s?;
    let noise = reading
        .timing_noise_s
        .map_or_else(String::new, |noise| format!(" and the timing noise of {} of each click", seconds(noise.value)));
    Some(format!(
        "Periods as read scatter by {}; the gap's jitter of {}{noise} make {}",
        seconds(read_s),
        seconds(jitter.value),
        seconds(sd_s)
    ))
}
