//! What a person should know about a gap voltage.

use super::classes::Kept;
use super::scatter::Scatter;
use crate::bench::Bench;
use crate::estimate::Estimate;
use crate::model::charging::Circuit;
use crate::rhythm::Reading;
use crate::uncertainty::Budget;

/// Voltage below which no air gap breaks down, V: the minimum of Paschen's law for air is about 327 V (published as
/// 327 V at 7.5 µm and one atmosphere).
const LEAST_BREAKDOWN_V: f64 = 300.0;

/// Time constants above which the voltage hardly depends on the period any more: within e⁻⁵ of the final voltage.
const NEARLY_FULL: f64 = 5.0;

/// Shift of the voltage, relative, that makes an unstated part of the bench worth a sentence.
const WORTH_SAYING: f64 = 2e-3;

/// Share of periods left out that is worth a sentence.
const MANY_LEFT_OUT: f64 = 0.02;

/// Relative difference between the mean of single periods and the reading's period that is worth a sentence.
const APART: f64 = 0.01;

/// Share of the spread's variance above which its cause is named.
const PART_OF_SPREAD: f64 = 0.2;

/// Relative distance from a multiple or fraction of a mains frequency, and relative jitter, of a locked gap.
const ON_THE_MAINS: f64 = 3e-4;

/// What the notes are made from.
pub(super) struct Facts<'a> {
    pub bench: &'a Bench,
    pub circuit: &'a Circuit,
    pub reading: &'a Reading,
    pub period: Estimate,
    pub voltage: Estimate,
    pub slope: f64,
    pub scatter: &'a Scatter,
    pub kept: &'a Kept,
    pub total: f64,
    pub budget: &'a Budget,
}

/// All notes that apply.
pub(super) fn notes(facts: &Facts) -> Vec<String> {
    [largest, unstated, limited, nearly_full, too_low, left_out, apart, spread_causes, locked]
        .iter()
        .filter_map(|note| note(facts))
        .collect()
}

/// A voltage with three digits and a fitting unit.
fn volts(v: f64) -> String {
    match v.abs() {
        size if size >= 10e3 => format!("{:.1} kV", v / 1e3),
        size if size >= 1e3 => format!("{:.2} kV", v / 1e3),
        size if size >= 10.0 => format!("{v:.0} V"),
        _ => format!("{v:.2} V"),
    }
}

fn largest(facts: &Facts) -> Option<String> {
    // Alone it needs no mention.
    (facts.budget.inputs.len() > 1).then(|| facts.budget.advice.clone())
}

fn unstated(facts: &Facts) -> Option<String> {
    let gap = &facts.bench.gap;
    let mut missing = Vec::new();
    let mut effects = Vec::new();
    let mut consider = |stated: bool, name: &str, amount: &str, shift_v: f64| {
        if !stated && shift_v.abs() > WORTH_SAYING * facts.voltage.value {
            missing.push(name.to_owned());
            effects.push(format!("{amount} would change the gap voltage by {}", volts(shift_v)));
        }
    };
    // What is left on the capacitor decays with the charging: dV/dVr is the ratio of the slopes.
    let circuit = facts.circuit;
    let remains = circuit.slope_v_per_s(facts.voltage.value) / circuit.slope_v_per_s(circuit.residual_v());
    consider(gap.residual_voltage.is_some(), "residual voltage", "100 V left on the capacitor", 100.0 * remains);
    consider(gap.conduction_time.is_some(), "conduction time", "10 µs", -10e-6 * facts.slope);
    let verb = if missing.len() > 1 { "are" } else { "is" };
    (!missing.is_empty())
        .then(|| format!("{} {verb} not stated and taken as 0; {}", missing.join(" and "), effects.join(", ")))
}

fn limited(facts: &Facts) -> Option<String> {
    let knee_v = facts.circuit.knee_v()?;
    let residual_v = facts.circuit.residual_v();
    (facts.voltage.value < knee_v)
        .then(|| {
            format!("the supply is in current limit up to {}: the rate does not depend on its setting", volts(knee_v))
        })
        .or_else(|| {
            (knee_v > residual_v)
                .then(|| format!("the supply is in current limit while the capacitor is below {}", volts(knee_v)))
        })
}

fn nearly_full(facts: &Facts) -> Option<String> {
    let time_constants = (facts.period.value - facts.circuit.conduction_s()) / facts.circuit.time_constant_s();
    (time_constants > NEARLY_FULL).then(|| {
        format!(
            "the period is {time_constants:.1} time constants of the bench, so the gap voltage is practically the highest that the supply gives; check resistance and capacitance"
        )
    })
}

fn too_low(facts: &Facts) -> Option<String> {
    (facts.voltage.value < LEAST_BREAKDOWN_V).then(|| {
        format!(
            "an air gap does not break down at {}; check supply, resistance and capacitance",
            volts(facts.voltage.value)
        )
    })
}

fn left_out(facts: &Facts) -> Option<String> {
    let out = facts.total - facts.kept.inverted;
    (out > MANY_LEFT_OUT * facts.total).then(|| {
        let no_answer = facts.kept.count - facts.kept.inverted;
        let reason =
            if no_answer > 0.5 * out { "the bench has no voltage for them" } else { "they are off the rhythm" };
        format!("{out:.0} of {:.0} periods were left out of the gap voltage: {reason}", facts.total)
    })
}

fn apart(facts: &Facts) -> Option<String> {
    let ratio = facts.kept.period_s / facts.period.value - 1.0;
    (facts.kept.inverted >= super::FEWEST_PERIODS && ratio.abs() > APART).then(|| {
        format!(
            "single periods are {:+.1} % off the mean period on average; the gap voltage follows the latter",
            100.0 * ratio
        )
    })
}

fn spread_causes(facts: &Facts) -> Option<String> {
    let variance = facts.scatter.periods_s().powi(2);
    let counts = |part: f64| variance > 0.0 && part * part > PART_OF_SPREAD * variance;
    let mut causes = Vec::new();
    if counts(facts.scatter.drift) {
        causes.push(format!(
            "the voltage spread holds the drift over the recording; without it, it is {}",
            volts(facts.slope * facts.scatter.own_s())
        ));
    }
    if counts(facts.scatter.mains) {
        causes.push(
            "jitter that keeps step with the mains is taken as supply ripple and left out of the voltage spread"
                .to_owned(),
        );
    }
    (!causes.is_empty()).then(|| causes.join("; "))
}

fn locked(facts: &Facts) -> Option<String> {
    let jitter = facts.reading.period_jitter_s?.value;
    if jitter > ON_THE_MAINS * facts.period.value {
        return None;
    }
    [50.0f64, 60.0, 100.0, 120.0].iter().find_map(|mains_hz| {
        let ratio = mains_hz * facts.period.value;
        let multiple = if ratio >= 1.0 { ratio } else { 1.0 / ratio };
        let near = (multiple / multiple.round() - 1.0).abs() < ON_THE_MAINS && multiple < 8.5;
        near.then(|| {
            format!(
                "the firing sits in step with {mains_hz:.0} Hz and hardly scatters: a gap that ripple holds there may be up to the ripple's size away from this voltage"
            )
        })
    })
}
