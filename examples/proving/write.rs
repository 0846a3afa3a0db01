//! Recordings and truth as files: WAV of sixteen bits, truth as JSON, the bench as TOML.

use crate::case::{Answer, Case, Truth};
use serde_json::{Map, Value, json};
use std::error::Error;
use std::path::Path;

/// Writes `kind-seed.wav`, `.json` and, where a circuit stands behind it, `.toml`.
pub fn write(case: &Case, directory: &Path) -> Result<(), Box<dyn Error>> {
    std::fs::create_dir_all(directory)?;
    let stem = format!("{}-{:02}", case.kind, case.seed);
    let spec = hound::WavSpec {
        channels: 1,
        sample_rate: case.sample_rate_hz,
        bits_per_sample: 16,
        sample_format: hound::SampleFormat::Int,
    };
    let mut wav = hound::WavWriter::create(directory.join(format!("{stem}.wav")), spec)?;
    for sample in &case.samples {
        wav.write_sample((sample * 32768.0).round().clamp(-32768.0, 32767.0) as i16)?;
    }
    wav.finalize()?;
    let mut truth = match &case.answer {
        Answer::Gap(truth) => gap(truth),
        Answer::Nothing | Answer::NoRhythm | Answer::OtherRhythm => nothing(case),
    };
    truth.insert("duration_s".into(), json!(case.duration_s()));
    truth.insert("file".into(), json!(format!("{stem}.wav")));
    if let Answer::Gap(gap) = &case.answer {
        truth.insert("category".into(), json!(case.kind));
        if let Some(circuit) = &gap.circuit {
            std::fs::write(directory.join(format!("{stem}.toml")), circuit.bench_toml())?;
        }
    }
    std::fs::write(directory.join(format!("{stem}.json")), serde_json::to_string(&truth)?)?;
    Ok(())
}

fn nothing(case: &Case) -> Map<String, Value> {
    let kind = case.kind.strip_prefix("no-").unwrap_or(case.kind);
    let category = if matches!(case.answer, Answer::OtherRhythm) { "notgap-other" } else { "notgap" };
    Map::from_iter([
        ("not_gap".into(), json!(true)),
        ("kind".into(), json!(kind)),
        ("category".into(), json!(category)),
    ])
}

fn gap(truth: &Truth) -> Map<String, Value> {
    let mut object = Map::from_iter([
        ("firings".into(), json!(truth.times_s.len())),
        ("rate_hz".into(), json!(truth.rate_hz)),
        ("jitter_s".into(), json!(truth.jitter_s)),
        ("process_period_s".into(), json!(truth.process_period_s)),
        ("process_jitter_s".into(), json!(truth.process_jitter_s)),
        ("times_s".into(), json!(truth.times_s)),
        ("missing".into(), json!(truth.unheard)),
        ("extra".into(), json!(truth.extra)),
        ("second_rate_hz".into(), json!(truth.second_rate_hz)),
    ]);
    if let Some(c) = &truth.circuit {
        object.insert("gap_voltage_v".into(), json!(c.gap_voltage_v));
        object.insert("gap_voltage_spread_v".into(), json!(c.gap_voltage_spread_v));
        object.insert("supply".into(), json!(c.supply_v));
        object.insert("r".into(), json!(c.resistance_ohm));
        object.insert("c".into(), json!(c.capacitance_f));
        object.insert("vres".into(), json!(c.residual_v));
    }
    object
}
