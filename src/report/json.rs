//! Results as JSON, in SI base units. JSON knows no infinity: a figure that is not finite becomes null with a note.

use super::comparison::Comparison;
use super::measurement::{FORMAT, Measurement};
use crate::estimate::Estimate;
use serde::Serialize;
use std::fmt;

/// A recording that could not be read, in its place among those that could.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Failure {
    format: &'static str,
    recording: FailedRecording,
    error: String,
}

#[derive(Debug, Clone, PartialEq, Serialize)]
struct FailedRecording {
    file: String,
}

impl Failure {
    /// The failure of a file.
    #[must_use]
    pub fn new(file: &str, error: &str) -> Self {
        Self { format: FORMAT, recording: FailedRecording { file: file.to_owned() }, error: error.to_owned() }
    }
}

impl fmt::Display for Failure {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}: {}", self.recording.file, self.error)
    }
}

/// What became of one recording.
#[derive(Debug, Clone, PartialEq, Serialize)]
#[serde(untagged)]
pub enum Report {
    /// It was measured, or found to hold nothing.
    Measured(Box<Measurement>),
    /// It was measured and compared with the truth of a rendered clip.
    Compared(Box<WithTruth>),
    /// It could not be read.
    Failed(Failure),
}

/// A measurement with its distance from the truth.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct WithTruth {
    /// The measurement.
    #[serde(flatten)]
    pub measurement: Measurement,
    /// The comparison.
    pub comparison: Comparison,
}

/// One object for one recording, an array for several.
///
/// # Errors
/// None for reports whose measurements went through [`finite`].
pub fn to_json(reports: &[Report]) -> serde_json::Result<String> {
    match reports {
        [one] => serde_json::to_string_pretty(one),
        several => serde_json::to_string_pretty(several),
    }
}

/// The measurement without figures that are not finite; a note names each that was left out.
#[must_use]
pub fn finite(mut measurement: Measurement) -> Measurement {
    let reading = &mut measurement.reading;
    let mut left_out = Vec::new();
    let figures: [(&str, &mut Option<Estimate>); 8] = [
        ("firing rate", &mut reading.firing_rate_hz),
        ("period", &mut reading.period_s),
        ("period jitter", &mut reading.period_jitter_s),
        ("cycle-to-cycle jitter", &mut reading.cycle_jitter_s),
        ("drift", &mut reading.drift_per_s),
        ("timing noise", &mut reading.timing_noise_s),
        ("gap voltage", &mut measurement.gap_voltage_v),
        ("voltage spread", &mut measurement.gap_voltage_spread_v),
    ];
    for (name, figure) in figures {
        if figure.is_some_and(|figure| !figure.is_finite()) {
            *figure = None;
            left_out.push(name);
        }
    }
    let mains = &mut reading.mains_locked_jitter_s;
    if mains.is_some_and(|mains| !(mains.jitter_s.is_finite() && mains.frequency_hz.is_finite())) {
        *mains = None;
        left_out.push("mains-locked jitter");
    }
    let trains = reading.other_trains.len();
    reading.other_trains.retain(|train| train.firing_rate_hz.is_finite() && train.relative_size.is_finite());
    if reading.other_trains.len() < trains {
        left_out.push("other train");
    }
    for train in &mut reading.other_trains {
        train.period_jitter_s = train.period_jitter_s.filter(Estimate::is_finite);
    }
    reading.stretches.retain(|stretch| stretch.from_s.is_finite() && stretch.to_s.is_finite());
    let notes = left_out.into_iter().map(|name| format!("the {name} came out without a finite value and is left out"));
    reading.notes.extend(notes);
    measurement
}

#[cfg(test)]
mod tests {
    use super::super::text::tests::measured;
    use super::*;

    #[test]
    fn the_json_holds_every_key_of_the_contract() {
        let text = to_json(&[Report::Measured(Box::new(measured()))]).expect("JSON");
        let value: serde_json::Value = serde_json::from_str(&text).expect("JSON");
        assert_eq!(value["format"], "gaptone.measurement/1");
        assert_eq!(value["verdict"], "steady");
        assert_eq!(value["recording"]["file"], "run.wav");
        assert_eq!(value["firings"]["missed"], 12);
        assert_eq!(value["firing_rate_hz"]["value"], 437.21);
        assert_eq!(value["mains_locked_jitter_s"]["frequency_hz"], 100.0);
        for key in [
            "reason",
            "period_s",
            "period_jitter_s",
            "cycle_jitter_s",
            "drift_per_s",
            "timing_noise_s",
            "gap_voltage_v",
            "gap_voltage_spread_v",
            "other_trains",
            "notes",
        ] {
            assert!(value.get(key).is_some(), "{key} is missing");
        }
    }

    #[test]
    fn what_is_not_finite_becomes_null_with_a_note() {
        let mut measurement = measured();
        measurement.reading.period_jitter_s = Some(Estimate::normal(1e-6, f64::INFINITY));
        measurement.gap_voltage_v = Some(Estimate::normal(f64::NAN, 1.0));
        let measurement = finite(measurement);
        assert_eq!(measurement.reading.period_jitter_s, None);
        assert_eq!(measurement.gap_voltage_v, None);
        assert_eq!(
            measurement.reading.notes[1..],
            [
                "the period jitter came out without a finite value and is left out",
                "the gap voltage came out without a finite value and is left out"
            ]
        );
    }

    #[test]
    fn several_recordings_are_an_array_and_a_failure_keeps_its_place() {
        let reports =
            [Report::Failed(Failure::new("gone.wav", "no such file")), Report::Measured(Box::new(measured()))];
        let value: serde_json::Value = serde_json::from_str(&to_json(&reports).expect("JSON")).expect("JSON");
        assert_eq!(value[0]["recording"]["file"], "gone.wav");
        assert_eq!(value[0]["error"], "no such file");
        assert_eq!(value[0]["format"], "gaptone.measurement/1");
        assert_eq!(value[1]["verdict"], "steady");
    }
}
