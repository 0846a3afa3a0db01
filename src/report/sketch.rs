//! A measurement as a small drawing of characters: the course of the periods and their distribution, for a terminal.

use super::Measurement;
use crate::bench::si;
use crate::evidence::Evidence;
use crate::rhythm::Verdict;

/// Eighths of a block, from an empty one to a full one.
const BLOCKS: [char; 9] = [' ', '▁', '▂', '▃', '▄', '▅', '▆', '▇', '█'];
/// Fewest periods that are worth a drawing.
const FEWEST: usize = 20;
/// Columns: of the labels, at least and at most of the drawing.
const LABEL: usize = 20;
const LEAST: usize = 20;
const MOST: usize = 70;
/// Half width of the distribution in standard deviations.
const REACH: f64 = 3.5;

/// The drawing for a terminal of a width in columns; none where there is no rhythm, or no room.
#[must_use]
pub fn sketch(measurement: &Measurement, evidence: &Evidence, width: usize) -> Option<String> {
    let reading = &measurement.reading;
    if !matches!(reading.verdict, Verdict::Steady | Verdict::Unsteady) || evidence.firings.kept.len() < FEWEST {
        return None;
    }
    let columns = width.checked_sub(LABEL + 1).filter(|columns| *columns >= LEAST)?.min(MOST);
    let mean_s = reading.period_s?.value;
    let measured: Vec<f64> = evidence.firings.kept.iter().map(|point| point.period_s).collect();
    let n = measured.len() as f64;
    let sd_s = (measured.iter().map(|p| (p - mean_s).powi(2)).sum::<f64>() / n).sqrt().min(0.5 * mean_s);
    if sd_s <= 0.0 {
        return None;
    }
    let course = course(evidence, columns);
    let (low_s, high_s) = (least(&course), -least(&course.iter().map(|v| -v).collect::<Vec<_>>()));
    let span_s = (high_s - low_s).max(1e-12);
    let line: String = course.iter().map(|mean| block((mean - low_s) / span_s * 7.0 + 1.0)).collect();
    // No more columns than the periods can fill.
    let bars = columns.min((2.0 * n.sqrt()) as usize).max(LEAST);
    let counts = histogram(&measured, mean_s, sd_s, bars);
    let top = counts.iter().copied().max().unwrap_or(1).max(1);
    let bars: String = counts.iter().map(|count| block(8.0 * f64::from(*count) / f64::from(top))).collect();
    let of = |value: f64| si(value, "s", 4);
    Some(format!(
        "\n  {:w$}{line}\n  {:w$}{} .. {} in the mean of each column\n  {:w$}{bars}\n  {:w$}{} .. {}\n",
        "period over time",
        "",
        of(low_s),
        of(high_s),
        "how often",
        "",
        of(mean_s - REACH * sd_s),
        of(mean_s + REACH * sd_s),
        w = LABEL - 2
    ))
}

fn block(eighths: f64) -> char {
    // Something that is there is shown as the least of blocks at least.
    let least = if eighths > 0.0 { 1.0 } else { 0.0 };
    BLOCKS[eighths.round().clamp(least, 8.0) as usize]
}

fn least(values: &[f64]) -> f64 {
    values.iter().copied().fold(f64::INFINITY, f64::min)
}

/// Mean period of each column.
fn course(evidence: &Evidence, columns: usize) -> Vec<f64> {
    let runs = &evidence.course;
    let columns = columns.min(runs.len()).max(1);
    (0..columns)
        .map(|k| {
            let part = &runs[k * runs.len() / columns..(k + 1) * runs.len() / columns];
            part.iter().map(|run| run.mean_s).sum::<f64>() / part.len() as f64
        })
        .collect()
}

/// How many periods fall into each column.
fn histogram(periods_s: &[f64], mean_s: f64, sd_s: f64, columns: usize) -> Vec<u32> {
    let mut counts = vec![0u32; columns];
    for period_s in periods_s {
        let share = ((period_s - mean_s) / (REACH * sd_s) + 1.0) / 2.0;
        let column = (share * columns as f64).floor();
        if column >= 0.0
            && let Some(count) = counts.get_mut(column as usize)
        {
            *count += 1;
        }
    }
    counts
}
