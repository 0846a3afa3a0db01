//! The whole recording: its level, and when the gap fires.

use super::{Measured, seconds};
use crate::plot::{Axis, Legend, Panel, Picture, Scale, Stroke};

pub(super) fn picture(measured: Measured<'_>) -> Option<Picture> {
    let trace = &measured.evidence.audio;
    if trace.low.is_empty() {
        return None;
    }
    let stretches = &measured.measurement.reading.stretches;
    let peak = trace.stretches().fold(1e-6f64, |peak, (_, low, high)| peak.max(low.abs()).max(high.abs()));
    let level = Scale::over(trace.stretches().flat_map(|(_, low, high)| [low, high, 0.0]), 0.06);
    let end_s = trace.from_s + measured.measurement.recording.duration_s;
    let mut panel = Panel::new(
        Picture::area(110.0),
        Axis::new(Scale::linear(trace.from_s, end_s), "time in the recording", "s", 6),
        Axis::new(level, "audio, full scale", "", 4),
    );
    for stretch in stretches {
        panel.zone("fires", stretch.from_s, stretch.to_s);
    }
    panel.spans("audio", Stroke::Main, trace.stretches());
    let firing_s: f64 = stretches.iter().map(|stretch| stretch.to_s - stretch.from_s).sum();
    let share = (100.0 * firing_s / measured.measurement.recording.duration_s).clamp(0.0, 100.0);
    let title = if stretches.is_empty() {
        format!("No rhythm is followed in this recording; its peak is {:.2} of full scale", peak)
    } else if stretches.len() == 1 {
        format!("The gap is heard firing for {share:.0} % of the recording; the peak is {peak:.2} of full scale")
    } else {
        let count = stretches.len();
        format!("The gap fires in {count} stretches, {share:.0} % of the time; the peak is {peak:.2} of full scale")
    };
    let held = if stretches.is_empty() { "" } else { " The figures hold for the shaded time." };
    let reading = format!(
        "Each stroke goes from the least to the greatest sample of {}, so that no peak is lost.{held} A flat top at full scale is \
         a recording that clips.",
        seconds(trace.step_s)
    );
    let mut legend = vec![(Legend::Line(Stroke::Main), "audio".to_owned())];
    if !stretches.is_empty() {
        legend.push((Legend::Area("zone"), "the gap fires".to_owned()));
    }
    Some(Picture { kind: "recording", title, reading, panels: vec![panel], legend })
}
