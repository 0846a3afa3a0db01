//! A prediction as text that a person reads at a glance.

use super::{Prediction, Sweep, Target};
use crate::bench::{si, signed, with_uncertainty};
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
    if let Some(target) = &prediction.target {
        let _ = writeln!(out, "  {}", target_text(target).replace('\n', "\n  ").trim_end());
        out.push('\n');
    }
    for (name, figure) in figures(prediction) {
        if let Some(figure) = figure {
            let _ = writeln!(out, "  {name:<16}{figure}");
        }
    }
    for (heading, lines) in lists(prediction) {
        if !lines.is_empty() {
            let _ = writeln!(out, "\n{heading}");
        }
        for line in lines {
            let _ = writeln!(out, "  - {line}");
        }
    }
    out
}

/// What there is to say in sentences, under headings; a list may be empty.
#[must_use]
pub fn lists(prediction: &Prediction) -> [(&'static str, Vec<String>); 5] {
    let ripple = prediction.ripple.as_ref().map_or_else(Vec::new, super::RippleForecast::words);
    let ring = prediction.burst.as_ref().map_or_else(Vec::new, super::BurstForecast::words);
    [
        ("Ripple", ripple),
        ("Ring", ring),
        ("Stored energy", prediction.hazards.clone()),
        ("Cautions", prediction.cautions.clone()),
        ("Notes", prediction.notes.clone()),
    ]
}

/// The figures that there are, each with its name and what is said beside it.
#[must_use]
pub fn figure_rows(prediction: &Prediction) -> Vec<(String, String, String)> {
    let known =
        figures(prediction).into_iter().filter_map(|(name, figure)| Some((name.to_owned(), figure?, String::new())));
    known.collect()
}

fn figures(prediction: &Prediction) -> [(&'static str, Option<String>); 16] {
    let time = |seconds: Option<f64>| seconds.map(|seconds| si(seconds, "s", 3));
    let supply = prediction.supply_current_a.map(|current| {
        let power = prediction.supply_power_w.map_or_else(String::new, |power| format!(", {}", si(power, "W", 3)));
        format!("{}{power} (mean)", si(current, "A", 3))
    });
    [
        ("firing rate", prediction.firing_rate_hz.map(|rate| with_interval(rate, "/s"))),
        ("heard as", heard(prediction)),
        ("slope", prediction.slope_hz_per_v.map(|slope| format!("{} of supply", si(1e3 * slope, "Hz/kV", 3)))),
        ("period", prediction.period_s.map(|period| with_interval(period, "s"))),
        ("period jitter", jitter(prediction)),
        ("rate drifts", prediction.rate_drift_per_s.map(|drift| format!("{} % per minute", signed(6000.0 * drift, 3)))),
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

/// The pitch, and how far the tolerances move it.
fn heard(prediction: &Prediction) -> Option<String> {
    let pitch = prediction.pitch.as_ref()?;
    let mut words = pitch.words();
    if let Some((low, high)) = &prediction.pitch_band
        && high.midi - low.midi > 0.02
        && pitch.hearing == super::Hearing::Pitch
    {
        let _ = write!(
            words,
            "; from {} {} to {} {} cents",
            low.note,
            signed(low.cents, 0),
            high.note,
            signed(high.cents, 0)
        );
    }
    Some(words)
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

/// Predictions over a range of settings as a table, with what holds for all of them below.
#[must_use]
pub fn sweep_text(sweep: &Sweep) -> String {
    let title = sweep.settings.first().and_then(|setting| setting.title.as_deref()).unwrap_or("Bench");
    let mut out = format!("{title}\n\n");
    let _ =
        writeln!(out, "  {:>10}  {:20}{:11}{:12}{:10}heard as", "supply", "firing rate", "Hz/kV", "jitter", "stored");
    for setting in &sweep.settings {
        let _ = writeln!(out, "  {}", row(setting).trim_end());
    }
    let same = |lines: fn(&Prediction) -> &Vec<String>| {
        let mut all: Vec<&String> = Vec::new();
        for line in sweep.settings.iter().flat_map(lines) {
            if sweep.settings.iter().all(|setting| lines(setting).contains(line)) && !all.contains(&line) {
                all.push(line);
            }
        }
        all
    };
    let remarks = sweep.remarks.iter().collect();
    // The highest setting stores the most.
    let hazards = sweep.settings.last().map_or_else(Vec::new, |setting| setting.hazards.iter().collect());
    let cautions = same(|setting| &setting.cautions);
    let notes = same(|setting| &setting.notes);
    for (heading, lines) in [
        ("Along the range", remarks),
        ("Stored energy at the highest setting", hazards),
        ("Cautions", cautions),
        ("Notes", notes),
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

fn row(setting: &Prediction) -> String {
    let supply = setting.supply_v.map_or_else(String::new, |volts| si(volts, "V", 4));
    let stored = setting.stored_energy_j.map_or_else(String::new, |energy| si(energy, "J", 3));
    let rate = match setting.firing_rate_hz {
        Some(rate) => with_uncertainty(rate.value, rate.u, "/s"),
        None if setting.fires == Some(false) => "does not fire".to_owned(),
        None => "not known".to_owned(),
    };
    let slope = setting.slope_hz_per_v.map_or_else(String::new, |slope| si(1e3 * slope, "", 3));
    let share = setting.period_jitter_s.zip(setting.period_s).map(|(jitter, period)| jitter.value / period.value);
    let jitter = share.map_or_else(String::new, |share| format!("{} %", si(100.0 * share, "", 2)));
    let mut heard = setting.pitch.as_ref().map_or_else(String::new, |pitch| match pitch.hearing {
        super::Hearing::Pitch => format!("{} {} cents", pitch.note, signed(pitch.cents, 0)),
        _ => pitch.words(),
    });
    if let Some(locked) = setting.ripple.as_ref().and_then(|ripple| ripple.locked) {
        let _ = write!(heard, "; locked {}:{}", locked.firings, locked.cycles);
    }
    format!("{supply:>10}  {rate:20}{slope:11}{jitter:12}{stored:10}{heard}")
}

/// How to get a rate, as text.
fn target_text(target: &Target) -> String {
    let supply = with_uncertainty(target.supply_v.value, target.supply_v.u, "V");
    let mut out = format!("{} needs a supply of {supply}", si(target.firing_rate_hz, "Hz", 5));
    if target.supply_v.u > 0.0 {
        let (low, high) = (si(target.supply_v.low, "V", 4), si(target.supply_v.high, "V", 4));
        let _ = write!(out, " (95 %, by the tolerances of the other parts: {low} to {high})");
    }
    if let Some((low, high)) = target.locked_supply_v {
        let _ = write!(out, "; the ripple holds it at that rate from {} to {}", si(low, "V", 4), si(high, "V", 4));
    }
    let _ = writeln!(out, "; {} of supply are one cent", si(target.supply_per_cent_v, "V", 2));
    for other in &target.alternatives {
        let (value, now) = (si(other.value, &other.unit, 4), si(other.now, &other.unit, 4));
        let _ = writeln!(out, "  or, at the supply of the bench, {} = {value} instead of {now}", other.key);
    }
    out
}
