//! Single periods against time, with the line of their drift.

use super::{Measured, every, has_rhythm, seconds};
use crate::evidence::{Evidence, Oddity};
use crate::firing::EventKind;
use crate::plot::{Axis, Legend, Mark, Panel, Picture, Scale, Stroke};
use crate::report::{Figure, Measurement};

pub(super) fn picture(measured: Measured<'_>) -> Option<Picture> {
    let Measured { measurement, evidence, .. } = measured;
    let reading = &measurement.reading;
    let mean_s = reading.period_s.filter(|_| has_rhythm(reading))?.value;
    let (first, last) = (evidence.course.first()?, evidence.course.last()?);
    let low_s = evidence.course.iter().map(|run| run.low_s).fold(mean_s, f64::min);
    let high_s = evidence.course.iter().map(|run| run.high_s).fold(mean_s, f64::max);
    let spare_s = 0.12 * (high_s - low_s);
    let x = Scale::linear(first.from_s, last.to_s);
    let y = Scale::linear(low_s - 1.6 * spare_s, high_s + spare_s);
    let mut panel =
        Panel::new(Picture::area(230.0), Axis::new(x, "time in the recording", "s", 6), Axis::new(y, "period", "s", 5));
    let all = evidence.firings.every == 1;
    let mut legend = Vec::new();
    if all {
        panel.marks("periods", Mark::Fine, evidence.firings.kept.iter().map(|point| (point.time_s, point.period_s)));
        legend.push((Legend::Mark(Mark::Fine), "single period".to_owned()));
    } else {
        let middle = |run: &crate::evidence::Course| 0.5 * (run.from_s + run.to_s);
        panel.spans("course", Stroke::Faint, evidence.course.iter().map(|run| (middle(run), run.low_s, run.high_s)));
        panel.marks("means", Mark::Dot, evidence.course.iter().map(|run| (middle(run), run.mean_s)));
        legend.push((Legend::Line(Stroke::Faint), "shortest to longest".to_owned()));
        legend.push((Legend::Mark(Mark::Dot), "mean".to_owned()));
    }
    if let Some(line) = drift_line(measurement, mean_s, (first.from_s, last.to_s)) {
        panel.line("drift", Stroke::Model, line);
        legend.push((Legend::Line(Stroke::Model), "mean period with its drift".to_owned()));
    }
    oddities(&mut panel, &mut legend, &evidence.oddities.kept, low_s - spare_s);
    let reading = reading_of(evidence, all);
    Some(Picture { kind: "periods", title: title(measurement), reading, panels: vec![panel], legend })
}

fn title(measurement: &Measurement) -> String {
    let reading = &measurement.reading;
    let period = reading.period_s.map(|period| Figure::prefixed(period, "s").value_and_u()).unwrap_or_default();
    let jitter = reading
        .period_jitter_s
        .map_or_else(String::new, |jitter| format!(" with a jitter of {}", seconds(jitter.value)));
    let drift = reading.drift_per_s.map_or_else(String::new, |drift| {
        let per_minute = Figure::plain(drift.scaled(6000.0), "% per minute").value_and_u();
        let seen = drift.low > 0.0 || drift.high < 0.0;
        if seen { format!("; the rate drifts by {per_minute}") } else { format!("; no drift is seen ({per_minute})") }
    });
    format!("The period is {period}{jitter}{drift}")
}

fn reading_of(evidence: &Evidence, all: bool) -> String {
    let mut text =
        "A gap that fires evenly gives a level band. A slope is a drift, a wave something that pulls the gap (mains, \
                    a draught), two bands two modes of firing, points far off are misread clicks."
            .to_owned();
    if !all {
        text.push_str(&format!(
            " There are {} single periods: each stroke goes from the shortest to the longest of a run of them, so none that is \
             far off is hidden.",
            evidence.firings.of
        ));
    }
    if evidence.oddities.every > 1 {
        text.push_str(&format!(" Of missed and extra ones {} is marked.", every(evidence.oddities.every, "one")));
    }
    text
}

/// The mean period at both ends: the rate changes by the drift about the middle.
fn drift_line(measurement: &Measurement, mean_s: f64, (from_s, to_s): (f64, f64)) -> Option<[(f64, f64); 2]> {
    let drift = measurement.reading.drift_per_s?.value;
    let half_s = 0.5 * (to_s - from_s);
    Some([(from_s, mean_s * (1.0 + drift * half_s)), (to_s, mean_s * (1.0 - drift * half_s))])
}

fn oddities(panel: &mut Panel, legend: &mut Vec<(Legend, String)>, oddities: &[Oddity], at_s: f64) {
    for (kind, name, mark, words) in
        [(EventKind::Missed, "missed", Mark::Ring, "missed"), (EventKind::Extra, "extra", Mark::Cross, "extra")]
    {
        let of_kind: Vec<(f64, f64)> =
            oddities.iter().filter(|oddity| oddity.kind == kind).map(|oddity| (oddity.time_s, at_s)).collect();
        if !of_kind.is_empty() {
            panel.marks(name, mark, of_kind);
            legend.push((Legend::Mark(mark), words.to_owned()));
        }
    }
}
