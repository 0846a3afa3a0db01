//! A prediction as text that a person reads at a glance.

use super::Prediction;
use crate::bench::{si, with_uncertainty};
use crate::estimate::Estimate;
use crate::model::breakdown::GapVoltage;
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
    let ripple = prediction.ripple.as_ref().map_or_else(Vec::new, super::RippleForecast::words);
    for (heading, lines) in [
        ("Ripple", &ripple),
        ("Stored energy", &prediction.hazards),
        ("Cautions", &prediction.cautions),
        ("Notes", &prediction.notes),
    ] {
        if !lines.is_empty() {
            let _ = writeln!(out, "\n{heading}");
        }
        for line in lines {
            let _ = writeln!(out, "  - {line}");
        }
    }
    out
}

fn figures(prediction: &Prediction) -> [(&'static str, Option<String>); 14] {
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
        ("by", prediction.gap.as_ref().map(law)),
        ("rule 3 kV/mm", prediction.gap.as_ref().and_then(rule)),
        ("least supply", prediction.least_supply_v.map(|volts| si(volts, "V", 4))),
        ("first firing", time(prediction.first_firing_s).map(|time| format!("{time} after switching on"))),
        ("stored energy", prediction.stored_energy_j.map(|energy| si(energy, "J", 3))),
        ("bleeds to 60 V", time(prediction.bleed_time_s).map(|time| format!("in {time}, through the leakage"))),
        ("supply gives", supply),
        ("resistor", resistor(prediction)),
        ("gap conducts", prediction.duty.map(|duty| format!("{} % of the time", si(100.0 * duty, "", 2)))),
    ]
}

/// The breakdown law, its band and the largest part of the uncertainty.
fn law(gap: &GapVoltage) -> String {
    let mut text = gap.law.words().to_owned();
    if gap.band > 0.0 {
        let _ = write!(text, " (band ± {:.0} %)", 100.0 * gap.band);
    }
    if let Some(largest) = gap.contributions.first().filter(|part| part.u_v > 0.0) {
        let _ =
            write!(text, "; the largest part of its uncertainty is {}, u = {}", largest.name, si(largest.u_v, "V", 2));
    }
    text
}

/// The rule of common practice, and how far off it is here.
fn rule(gap: &GapVoltage) -> Option<String> {
    let rule_v = gap.rule_v?;
    let off = 100.0 * (rule_v / gap.voltage_v - 1.0);
    let side = if off < 0.0 { "low" } else { "high" };
    Some(format!(
        "{}: {:.0} % too {side} here (common practice, for gaps of about 1 cm)",
        si(rule_v, "V", 3),
        off.abs()
    ))
}

fn resistor(prediction: &Prediction) -> Option<String> {
    let (power, voltage) = (prediction.resistor_power_w?, prediction.resistor_voltage_v?);
    Some(format!("dissipates {}, stands {}", si(power, "W", 2), si(voltage, "V", 3)))
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
