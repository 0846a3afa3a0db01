//! The sentences of a prediction: why it fires or not, what is stored, what is missing or doubtful.

use super::hazard;
use super::propagate::Propagated;
use super::{Setting, bleed_time_s, period};
use crate::bench::si;

/// From this current on the supply may keep a glow or an arc in the gap burning, A (published glow-to-arc transitions
/// at atmospheric pressure, in argon, lie between 2 mA and 1 A).
const MAY_KEEP_BURNING_A: f64 = 2e-3;
/// Least arc current of copper and silver contacts in air, A (Holm: from memory).
const LEAST_ARC_A: f64 = 0.4;
/// Recovery times within a period below which the strength of the gap is not back (exp(−5) is under 1 %).
const RECOVERED_AFTER: f64 = 5.0;

/// Why the gap fires or not.
pub(super) fn reason(setting: &Setting<'_>) -> String {
    let (Some(reach), Some(gap)) = (setting.reach_v, setting.gap) else {
        return "cannot say whether the gap fires; the notes name what is missing".to_owned();
    };
    let gap_text = si(gap.value, "V", 3);
    if setting.fires == Some(true) {
        let reach_text = if reach.is_finite() {
            format!("would reach {}", si(reach, "V", 3))
        } else {
            "rises without end".to_owned()
        };
        return format!("fires: the capacitor {reach_text} and the gap breaks down at {gap_text}");
    }
    let remedy = match setting.least_supply_v() {
        Some(least) => format!("it needs a supply above {}", si(least, "V", 4)),
        None => "no supply setting makes it fire, because the leakage takes all the current".to_owned(),
    };
    format!(
        "does not fire: the capacitor reaches {} and the gap needs more than {gap_text}; {remedy}",
        si(reach, "V", 3)
    )
}

/// What is stored at the highest voltage that the capacitor can take.
pub(super) fn hazards(setting: &Setting<'_>) -> Vec<String> {
    let (Some(c), Some(worst_v)) = (setting.parts.capacitance_f, setting.worst_v()) else {
        return vec!["The stored energy is not known from this bench; treat the capacitor as dangerous.".to_owned()];
    };
    let mut said = hazard::sentences(c, worst_v);
    if setting.fires == Some(true) && setting.gap.is_some_and(|gap| worst_v > gap.value) {
        said.insert(0, "If the gap fails to fire, the capacitor charges further:".to_owned());
    }
    said.push(match setting.parts.leakage_ohm {
        Some(leakage) => format!(
            "With the supply disconnected the leakage of {} bleeds it from {} to {} V in {}, if the leakage is really there.",
            si(leakage, "Ω", 3),
            si(worst_v, "V", 3),
            hazard::BLED_V,
            si(bleed_time_s(leakage, c, worst_v), "s", 2)
        ),
        None => "Nothing bleeds it: no charging.leakage is stated, so it stays charged with the supply off.".to_owned(),
    });
    if let Some(r) = setting.parts.resistance_ohm {
        said.push(format!(
            "The charging resistor discharges it only if the supply's output is a short when off (then {} to {} V); do not \
             count on it.",
            si(bleed_time_s(r, c, worst_v), "s", 2),
            hazard::BLED_V
        ));
    }
    said
}

/// What is missing, assumed or doubtful.
pub(super) fn notes(setting: &Setting<'_>, period_s: Option<Propagated>) -> Vec<String> {
    let mut said = missing(setting);
    said.extend(assumed(setting, period_s));
    if let Some(period_s) = period_s {
        said.extend(ripple(setting, period_s.value));
        said.extend(recovery(setting, period_s.value));
        if period_s.at_the_edge {
            said.push(
                "so near to its least supply voltage the gap may not fire at all within the stated tolerances"
                    .to_owned(),
            );
        }
    }
    said.extend(burning(setting));
    said
}

fn missing(setting: &Setting<'_>) -> Vec<String> {
    let charging = &setting.bench.charging;
    let mut said = Vec::new();
    let mut need = |absent: bool, text: &str| {
        if absent {
            said.push(text.to_owned());
        }
    };
    let by_current = charging.current.is_some();
    need(setting.supply.is_none() && !by_current, "supply.voltage or a setting is needed for firing, rate and period");
    need(
        setting.supply.is_none() && by_current,
        "supply.voltage is needed to know how far the current source can go; it is taken as unlimited",
    );
    let from_shape = setting.bench.gap.electrodes.is_some() || setting.bench.gap.spacing.is_some();
    need(
        setting.gap.is_none() && from_shape,
        "gap.voltage is needed for now: the breakdown voltage is not computed from electrodes, spacing and air",
    );
    need(
        setting.gap.is_none() && !from_shape,
        "gap.voltage is needed for firing, rate, period and energy at breakdown",
    );
    let no_law = !by_current && charging.resistance.is_none() && charging.time_constant.is_none();
    need(
        no_law,
        "charging.resistance with charging.capacitance, or charging.time_constant, or charging.current with \
         charging.capacitance is needed for the rate",
    );
    let law_without_c = (by_current || charging.resistance.is_some()) && charging.capacitance.is_none();
    need(law_without_c, "charging.capacitance is needed for the rate and the stored energy");
    need(
        charging.capacitance.is_none() && !law_without_c,
        "charging.capacitance is needed for the stored energy and the supply current",
    );
    need(setting.bench.gap.spread.is_none(), "gap.spread is needed for the period jitter");
    said
}

fn assumed(setting: &Setting<'_>, period_s: Option<Propagated>) -> Vec<String> {
    let (charging, gap) = (&setting.bench.charging, &setting.bench.gap);
    let mut said = Vec::new();
    if gap.residual_voltage.is_none() && period_s.is_some() {
        said.push("gap.residual_voltage is not stated; 0 V is taken".to_owned());
    }
    let only_time_constant = charging.time_constant.is_some() && charging.capacitance.is_none();
    let unused = [
        ("charging.leakage", charging.leakage.is_some()),
        ("gap.stray_capacitance", gap.stray_capacitance.is_some()),
        ("supply.current_limit", setting.bench.supply.current_limit.is_some()),
    ];
    for (key, _) in unused.into_iter().filter(|(_, given)| *given && only_time_constant) {
        said.push(format!("{key} is left out: with a time constant it needs charging.capacitance too"));
    }
    let exact = setting.supply.is_some_and(|supply| supply.u() == 0.0) || setting.gap.is_some_and(|gap| gap.u() == 0.0);
    if period_s.is_some() && exact {
        said.push(
            "supply.voltage or gap.voltage is stated without a tolerance and taken as exact; the real uncertainty is larger"
                .to_owned(),
        );
    }
    said
}

fn ripple(setting: &Setting<'_>, period_s: f64) -> Option<String> {
    let ripple = setting.bench.supply.ripple.filter(|ripple| ripple.value > 0.0)?.value;
    let (supply, gap) = (setting.supply?.value, setting.gap?.value);
    let at = |part: f64| period::period(setting.bench, supply * (1.0 + part * ripple), gap);
    let (Some(slow), Some(fast)) = (at(-1.0), at(1.0)) else {
        return Some(
            "the ripple decides whether the gap fires: it stops in the troughs; it is not in these figures".to_owned(),
        );
    };
    let part = (slow - fast) / (2.0 * period_s);
    let mut text = format!(
        "supply.ripple is not in these figures; it moves single periods by up to {:.1} % in step with the mains",
        100.0 * part
    );
    if let Some(frequency) = setting.bench.supply.ripple_frequency {
        let cycles = period_s * frequency.value;
        let whole = cycles.round();
        if whole >= 1.0 && (cycles / whole - 1.0).abs() <= part {
            text.push_str(&format!(
                "; the period is near {whole} periods of the ripple, where the gap locks to it and the rate stands at {:.4} /s",
                frequency.value / whole
            ));
        }
    } else {
        text.push_str("; supply.ripple_frequency is needed to know whether the gap locks to it");
    }
    Some(text)
}

fn recovery(setting: &Setting<'_>, period_s: f64) -> Option<String> {
    let recovery_s = setting.bench.gap.recovery_time?.value;
    (period_s < RECOVERED_AFTER * recovery_s).then(|| {
        format!(
            "the period is less than {RECOVERED_AFTER} times gap.recovery_time ({}); the gap will fire earlier than stated",
            si(recovery_s, "s", 2)
        )
    })
}

fn burning(setting: &Setting<'_>) -> Option<String> {
    let current = setting.parts.short_circuit_a(setting.drive_v().filter(|volts| volts.is_finite()).unwrap_or(0.0))?;
    let fed = si(current, "A", 2);
    if current >= LEAST_ARC_A {
        Some(format!("the supply can feed {fed} into the gap: a steady arc is likely instead of separate sparks"))
    } else if current >= MAY_KEEP_BURNING_A {
        Some(format!(
            "the supply can feed {fed} into the gap after a spark; from about 2 mA on a gap may go on glowing instead of \
             clearing"
        ))
    } else {
        None
    }
}
