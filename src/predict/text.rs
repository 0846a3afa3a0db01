//! A prediction as text that a person reads at a glance.

use super::Prediction;
use crate::bench::{si, with_uncertainty};
use crate::estimate::Estimate;
use std::fmt::Write;

/// The prediction as text, with a line end at the end.
#[must_use]
pub fn text(prediction: &Prediction) -> String {
    let mut out = String::new();
    let title = prediction.title.as_deref().unwrap_or("Bench");
    let setting = prediction.supply_v.map_or_else(String::new, |volts| format!(" at {}", si(volts, "V", 4)));
    // Writing to a String cannot fail.
    let _ = writeln!(out, "{title}{setting}\n  {}\n", prediction.reason);
    for (name, figure) in figures(prediction) {
        if let Some(figure) = figure {
            let _ = writeln!(out, "  {name:<16}{figure}");
        }
    }
    for (heading, lines) in
        [("Stored energy", &prediction.hazards), ("Cautions", &prediction.cautions), ("Notes", &prediction.notes)]
    {
        if !lines.is_empty() {
            let _ = writeln!(out, "\n{heading}");
        }
        for line in lines {
            let _ = writeln!(out, "  - {line}");
        }
    }
    out
}

fn figures(prediction: &Prediction) -> [(&'static str, Option<String>); 10] {
    let time = |seconds: Option<f64>| seconds.map(|seconds| si(seconds, "s", 3));
    let supply = prediction.supply_current_a.map(|current| {
        let power = prediction.supply_power_w.map_or_else(String::new, |power| format!(", {}", si(power, "W", 3)));
        format!("{}{power} (mean)", si(current, "A", 3))
    });
    [
        ("firing rate", prediction.firing_rate_hz.map(|rate| with_interval(rate, "/s"))),
        ("heard as", prediction.pitch.as_ref().map(super::Pitch::words)),
        ("period", prediction.period_s.map(|period| with_interval(period, "s"))),
        ("period jitter", jitter(prediction)),
        ("gap voltage", prediction.gap_voltage_v.map(|gap| with_uncertainty(gap.value, gap.u, "V"))),
        ("least supply", prediction.least_supply_v.map(|volts| si(volts, "V", 4))),
        ("first firing", time(prediction.first_firing_s).map(|time| format!("{time} after switching on"))),
        ("stored energy", prediction.stored_energy_j.map(|energy| si(energy, "J", 3))),
        ("bleeds to 60 V", time(prediction.bleed_time_s).map(|time| format!("in {time}, through the leakage"))),
        ("supply gives", supply),
    ]
}

fn jitter(prediction: &Prediction) -> Option<String> {
    let jitter = prediction.period_jitter_s?;
    let part = 100.0 * jitter.value / prediction.period_s?.value;
    Some(format!("{} ({part:.2} % of the period)", with_uncertainty(jitter.value, jitter.u, "s")))
}

fn with_interval(figure: Estimate, unit: &str) -> String {
    let shown = with_uncertainty(figure.value, figure.u, unit);
    if figure.u == 0.0 {
        return shown;
    }
    let (low, high) = (si(figure.low, unit, 4), si(figure.high, unit, 4));
    // The unit once, if both ends carry the same.
    match (low.split_once(' '), high.split_once(' ')) {
        (Some((number, own)), Some((_, other))) if own == other => format!("{shown} (95 %: {number} to {high})"),
        _ => format!("{shown} (95 %: {low} to {high})"),
    }
}
