//! The click: the mean of all, over some of them.

use super::{Measured, counted, seconds};
use crate::evidence::ClickShape;
use crate::plot::{Axis, Legend, Panel, Picture, Scale, Stroke};

/// Share of the peak below which a click has gone.
const GONE: f64 = 0.1;
/// Share of clicks upside down that is worth a word.
const SOME_TURNED: f64 = 0.05;

pub(super) fn picture(measured: Measured<'_>) -> Option<Picture> {
    let click = measured.evidence.click.as_ref()?;
    let mean: Vec<(f64, f64)> = mean(click).collect();
    let x = Scale::linear(click.from_s, mean.last()?.0);
    let singles = || click.single.iter().flat_map(|(_, samples)| samples.iter()).map(|s| f64::from(*s));
    let y = Scale::over(singles().chain(mean.iter().map(|point| point.1)), 0.05);
    let mut panel = Panel::new(
        Picture::area(240.0),
        Axis::new(x, "time from the time that was read for the click", "s", 6),
        Axis::new(y, "audio, full scale", "", 5),
    );
    for (from_s, samples) in &click.single {
        let points = samples.iter().enumerate().map(|(k, s)| (from_s + k as f64 * click.sample_s, f64::from(*s)));
        panel.line("single", Stroke::Faint, points);
    }
    panel.upright("time", Stroke::Other, 0.0);
    panel.line("mean", Stroke::Main, mean.iter().copied());
    let turned = click.turned as f64 > SOME_TURNED * click.count as f64;
    let upside = if turned { "; those upside down are turned for the mean" } else { "" };
    let title = format!(
        "The mean of {} lasts {}{}",
        counted(click.count, "click", "clicks"),
        seconds(length_s(&mean)),
        if turned { format!(", {:.0} % of them are upside down", percent(click)) } else { String::new() }
    );
    let reading = format!(
        "Thin lines: single clicks, spread over the recording, laid over each other at the times that were read. If they lie \
         on each other, the times are good and each click comes from the same thing; if they form a smear, something else is \
         counted. Length is told from the first to the last place where the mean exceeds a tenth of its peak{upside}."
    );
    let legend = vec![
        (Legend::Line(Stroke::Main), "mean".to_owned()),
        (Legend::Line(Stroke::Faint), counted(click.single.len() as u64, "single click", "single clicks")),
        (Legend::Line(Stroke::Other), "time of the click".to_owned()),
    ];
    Some(Picture { kind: "click", title, reading, panels: vec![panel], legend })
}

fn mean(click: &ClickShape) -> impl Iterator<Item = (f64, f64)> {
    click.mean.iter().enumerate().map(|(k, value)| (click.from_s + k as f64 * click.step_s, f64::from(*value)))
}

fn percent(click: &ClickShape) -> f64 {
    100.0 * click.turned as f64 / click.count as f64
}

/// From the first to the last place that exceeds a tenth of the peak, counted from the mean before the click, s.
fn length_s(mean: &[(f64, f64)]) -> f64 {
    let peak = mean.iter().fold(0.0f64, |peak, point| peak.max(point.1.abs()));
    let mut beyond = mean.iter().filter(|point| point.1.abs() > GONE * peak).map(|point| point.0);
    let first = beyond.next().unwrap_or(0.0);
    beyond.next_back().unwrap_or(first) - first
}
