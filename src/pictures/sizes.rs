//! Click size against the voltage that its period implies: a check of the whole chain that needs no calibration.

use super::{Measured, every, has_rhythm};
use crate::plot::{Axis, Legend, Mark, Panel, Picture, Scale, Stroke};

/// Fewest firings for a slope.
const FEWEST: usize = 30;
/// Groups of equal number whose means are drawn.
const GROUPS: usize = 10;
/// Share of the values at each end that do not set the scale.
const TAIL: f64 = 0.005;

pub(super) fn picture(measured: Measured<'_>) -> Option<Picture> {
    let reading = &measured.measurement.reading;
    if !has_rhythm(reading) || measured.measurement.gap_voltage_v.is_none() {
        return None;
    }
    let firings = &measured.evidence.firings;
    let mut points: Vec<(f64, f64)> =
        firings.kept.iter().filter_map(|point| Some((point.gap_voltage_v?, point.size))).collect();
    if points.len() < FEWEST {
        return None;
    }
    points.sort_by(|a, b| a.0.total_cmp(&b.0));
    let line = Line::through(&points)?;
    let voltages: Vec<f64> = points.iter().map(|point| point.0).collect();
    let mut sizes: Vec<f64> = points.iter().map(|point| point.1).collect();
    sizes.sort_by(f64::total_cmp);
    let (x, y) = (middle_part(&voltages), middle_part(&sizes));
    let mut panel = Panel::new(
        Picture::area(240.0),
        Axis::new(x, "gap voltage by the period", "V", 5),
        Axis::new(y, "click size, full scale behind the filter", "", 5),
    );
    let inside =
        |point: &&(f64, f64)| (0.0..=1.0).contains(&x.share(point.0)) && (0.0..=1.0).contains(&y.share(point.1));
    panel.marks("firings", Mark::Fine, points.iter().filter(inside).copied());
    let proportional = line.mean_size / line.mean_v;
    panel.line("proportional", Stroke::Model, [x.low, x.high].map(|v| (v, proportional * v)));
    let groups: Vec<(f64, f64, f64)> = points.chunks(points.len().div_ceil(GROUPS)).map(group).collect();
    panel.spans("group spans", Stroke::Limit, groups.iter().map(|(v, size, u)| (*v, size - u, size + u)));
    panel.marks("groups", Mark::Square, groups.iter().map(|(v, size, _)| (*v, *size)));
    let title = line.title();
    let mut text = "The burst of a spark is as strong as the voltage it starts from, so clicks should grow in proportion to the \
                    voltage that their periods imply (dashed). Squares: means of groups with their standard uncertainty. Noise of \
                    the times flattens the slope; noise of the audio and a carrier spread the points but do not bend it."
        .to_owned();
    if firings.every > 1 {
        text.push_str(&format!(" Drawn is {}.", every(firings.every, "firing")));
    }
    let legend = vec![
        (Legend::Mark(Mark::Fine), "firing".to_owned()),
        (Legend::Mark(Mark::Square), "mean of a group".to_owned()),
        (Legend::Line(Stroke::Model), "in proportion".to_owned()),
    ];
    Some(Picture { kind: "sizes", title, reading: text, panels: vec![panel], legend })
}

/// The scale over all but the outermost of sorted values.
fn middle_part(sorted: &[f64]) -> Scale {
    let skip = (TAIL * sorted.len() as f64) as usize;
    Scale::over(sorted[skip..sorted.len() - skip].iter().copied(), 0.08)
}

/// Mean voltage, mean size, standard uncertainty of that.
fn group(points: &[(f64, f64)]) -> (f64, f64, f64) {
    let n = points.len() as f64;
    let mean = |of: fn(&(f64, f64)) -> f64| points.iter().map(of).sum::<f64>() / n;
    let (v, size) = (mean(|point| point.0), mean(|point| point.1));
    let variance = points.iter().map(|point| (point.1 - size).powi(2)).sum::<f64>() / (n - 1.0).max(1.0);
    (v, size, (variance / n).sqrt())
}

/// The regression of size on voltage.
struct Line {
    mean_v: f64,
    mean_size: f64,
    /// Slope over that of proportion, with its standard uncertainty.
    ratio: f64,
    u: f64,
}

impl Line {
    fn through(points: &[(f64, f64)]) -> Option<Self> {
        let n = points.len() as f64;
        let mean = |of: fn(&(f64, f64)) -> f64| points.iter().map(of).sum::<f64>() / n;
        let (mean_v, mean_size) = (mean(|point| point.0), mean(|point| point.1));
        let sum = |of: &dyn Fn(f64, f64) -> f64| points.iter().map(|(v, s)| of(v - mean_v, s - mean_size)).sum::<f64>();
        let (vv, vs) = (sum(&|v, _| v * v), sum(&|v, s| v * s));
        let slope = vs / vv;
        let rest = sum(&|v, s| (s - slope * v).powi(2)) / (n - 2.0);
        let scale = mean_v / mean_size;
        let line = Self { mean_v, mean_size, ratio: slope * scale, u: (rest / vv).sqrt() * scale };
        (line.ratio.is_finite() && line.u.is_finite()).then_some(line)
    }

    fn title(&self) -> String {
        let Self { ratio, u, .. } = self;
        let decimals = if *u < 0.1 { 2 } else { 1 };
        let figure = format!("{ratio:.decimals$} ± {u:.decimals$} of proportion");
        if *u > 0.4 {
            format!("Click sizes scatter too much to tell whether they follow the voltage (slope {figure})")
        } else if (ratio - 1.0).abs() < 2.0 * u + 0.15 {
            format!("Clicks grow with the voltage that their periods imply (slope {figure})")
        } else {
            format!("Clicks do not grow as the voltage that their periods imply (slope {figure})")
        }
    }
}
