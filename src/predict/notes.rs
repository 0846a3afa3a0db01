//! The sentences of a prediction: why it fires or not, what is stored, what is missing or doubtful.

use super::figures::{self, capacitance_f, resistance_ohm, short_circuit_a};
use super::hazard;
use super::jitter::JitterForecast;
use super::propagate::Propagated;
use super::{Setting, bleed_time_s};
use crate::bench::{Bench, si};
use crate::model::firings::GapLaw;
use crate::model::receiver::DEFAULT_BANDWIDTH_HZ;

/// From this current on the supply may keep a glow or an arc in the gap burning, A (published glow-to-arc transitions
/// at atmospheric pressure, in argon, lie between 2 mA and 1 A).
const MAY_KEEP_BURNING_A: f64 = 2e-3;
/// Least arc current of copper and silver contacts in air, A (Holm: from memory).
const LEAST_ARC_A: f64 = 0.4;
/// Jitter from which on a tone is rough, as a share of the period (common practice).
const ROUGH_JITTER: f64 = 0.05;
/// Least rate that is heard as a tone, Hz (published: a clear pitch of click trains from 43 Hz).
const HEARD_AS_TONE_HZ: f64 = 40.0;
/// Voltage rating of an ordinary film resistor, V (common practice: 250 V to 500 V).
const ORDINARY_RESISTOR_V: f64 = 500.0;
/// Share of its strength that a gap may lack before it is told.
const LACKING: f64 = 0.002;
/// How far the simulated jitter may be off before the formula is said not to hold.
const FORMULA_HOLDS: f64 = 0.1;

/// Why the gap fires or not.
pub(super) fn reason(setting: &Setting<'_>) -> String {
    let (Some(reach), Some(gap_v)) = (setting.reach_v, setting.gap_v()) else {
        return "cannot say whether the gap fires; the notes name what is missing".to_owned();
    };
    let gap_text = si(gap_v, "V", 3);
    if gap_v <= setting.parts.residual_v {
        return format!(
            "does not fire again: {} are left after a spark and the gap breaks down at {gap_text}",
            si(setting.parts.residual_v, "V", 3)
        );
    }
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
    let (Some(c), Some(worst_v)) = (capacitance_f(&setting.parts), setting.worst_v()) else {
        return vec!["The stored energy is not known from this bench; treat the capacitor as dangerous.".to_owned()];
    };
    let mut said = hazard::sentences(c, worst_v);
    if setting.fires == Some(true) && setting.gap_v().is_some_and(|gap_v| worst_v > gap_v) {
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
    if let Some(r) = resistance_ohm(&setting.parts) {
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
pub(super) fn notes(
    setting: &Setting<'_>,
    period_s: Option<Propagated>,
    jitter: Option<&JitterForecast>,
) -> Vec<String> {
    let mut said = missing(setting);
    said.extend(setting.gap.iter().flat_map(|gap| gap.notes.iter().cloned()));
    said.extend(assumed(setting, period_s));
    if let Some(period_s) = period_s {
        said.extend(hearing(setting, period_s.value, jitter));
        said.extend(ripple(setting, period_s.value));
        said.extend(recovery(setting, period_s.value));
        if period_s.at_the_edge {
            said.push(
                "so near to its least supply voltage the gap may not fire at all within the stated tolerances"
                    .to_owned(),
            );
        }
    }
    said.extend(jitter.into_iter().flat_map(jitter_notes));
    said.extend(burning(setting));
    said.extend(ratings(setting));
    said
}

/// What the parts have to stand.
fn ratings(setting: &Setting<'_>) -> Vec<String> {
    let mut said = Vec::new();
    if let Some(volts) = setting.resistor_voltage_v() {
        let watts = setting.means().and_then(|means| means.resistor_w);
        let power = watts.map_or_else(String::new, |watts| format!(" and dissipates {} on average", si(watts, "W", 2)));
        said.push(format!(
            "the charging resistor has to stand {}{power}, and all of the supply voltage for good if the gap stays lit or is \
             shorted ({}); an ordinary resistor is rated for {ORDINARY_RESISTOR_V} V or less (common practice): use a \
             high-voltage type or a string",
            si(volts, "V", 3),
            shorted(setting).map_or_else(|| "its power then is not known".to_owned(), |watts| si(watts, "W", 2))
        ));
    }
    if let Some(volts) = setting.worst_v() {
        said.push(format!(
            "the capacitor has to stand {} if the gap fails to fire, and the ring after every spark",
            si(volts, "V", 3)
        ));
    }
    said
}

/// Power in the charging resistor while the gap is a short, W.
fn shorted(setting: &Setting<'_>) -> Option<f64> {
    Some(resistance_ohm(&setting.parts)? * short_circuit_a(&setting.parts)?.powi(2))
}

pub(super) fn missing(setting: &Setting<'_>) -> Vec<String> {
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
    need(
        setting.gap.is_none(),
        "gap.voltage, or gap.electrodes with gap.spacing (and gap.diameter for spheres), is needed for firing, rate, period \
         and energy at breakdown",
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
    need(
        setting.bench.gap.spread.is_none() && setting.bench.gap.statistical_lag.is_none(),
        "gap.spread is needed for the period jitter",
    );
    need(
        super::burst::missing(setting.bench),
        "tank.frequency with tank.quality, or tank.inductance with tank.resistance, or tank.peaks with tank.peak_spacing is \
         needed for the ring",
    );
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
    let exact = setting.supply.is_some_and(|supply| supply.u() == 0.0)
        || setting.gap.as_ref().is_some_and(|gap| gap.u_v == 0.0);
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
    if setting.parts.ripple.is_none() {
        return Some("supply.ripple_frequency is needed to know what the ripple does to the firing".to_owned());
    }
    let at = |part: f64| {
        let supply_v = setting.supply_v().map(|supply| supply * (1.0 + part * ripple));
        figures::period(setting.bench, supply_v, setting.gap_v()?)
    };
    let (Some(slow), Some(fast)) = (at(-1.0), at(1.0)) else {
        return Some("the ripple decides whether the gap fires: it pauses in the troughs".to_owned());
    };
    let part = (slow - fast) / (2.0 * period_s);
    Some(format!("supply.ripple moves single periods by up to {:.1} % in step with the mains", 100.0 * part))
}

fn recovery(setting: &Setting<'_>, period_s: f64) -> Option<String> {
    let gap = &setting.bench.gap;
    let recovery_s = gap.recovery_time.filter(|recovery| recovery.value > 0.0)?.value;
    let charging_s = period_s - gap.conduction_time.map_or(0.0, |time| time.value) - setting.lag_s();
    let strength =
        GapLaw::from_bench(setting.bench, setting.gap_v()?).strength(setting.gap_v()?, setting.parts.residual_v);
    let lacking = 1.0 - strength.at(charging_s) / strength.settled_v;
    (lacking > LACKING).then(|| {
        format!(
            "driven too fast: after {} the gap has not recovered (gap.recovery_time is {}) and fires at {}, {:.1} % below its \
             own voltage",
            si(charging_s, "s", 3),
            si(recovery_s, "s", 2),
            si(strength.at(charging_s), "V", 3),
            100.0 * lacking
        )
    })
}

/// Rate from which on clicks overlap in the receiver of the bench, Hz: one third of its bandwidth. (With spacing times
/// bandwidth below 3 the random carrier phase moves the peaks of neighbours; below 2 they merge.)
pub(super) fn clicks_overlap_hz(bench: &Bench) -> f64 {
    bench.receiver.bandwidth.map_or(DEFAULT_BANDWIDTH_HZ, |bandwidth| bandwidth.value) / 3.0
}

/// Jitter, as a share of the period, from which on no pitch is left: the spectrum of a train of firings with independent
/// periods stands by (1 + R)/(1 − R), R = exp(−2π²·jitter²), above its mean at the rate (renewal process); where that is
/// less than two, 3 dB, nothing rings out of the noise.
pub(super) fn pitch_lost_jitter() -> f64 {
    (3f64.ln() / 2.0).sqrt() / std::f64::consts::PI
}

/// What the receiver and the ear make of it.
fn hearing(setting: &Setting<'_>, period_s: f64, jitter: Option<&JitterForecast>) -> Vec<String> {
    let mut said = Vec::new();
    let limit_hz = clicks_overlap_hz(setting.bench);
    if 1.0 / period_s > limit_hz {
        let whose = if setting.bench.receiver.bandwidth.is_some() { "this" } else { "an ordinary AM" };
        said.push(format!(
            "above {} clicks overlap in {whose} receiver: single clicks are lost, the tone at the rate is not",
            si(limit_hz, "/s", 3)
        ));
    }
    if let Some((low, high)) = setting.bench.receiver.audio_band {
        let rate_hz = 1.0 / period_s;
        if rate_hz > high.value {
            said.push("the rate lies above the audio band of the receiver: no tone is heard".to_owned());
        } else if rate_hz < low.value && rate_hz > HEARD_AS_TONE_HZ {
            said.push(
                "the rate lies below the audio band of the receiver; the ear hears its pitch from the harmonics all the same"
                    .to_owned(),
            );
        }
    }
    if let Some(share) = jitter.map(|jitter| jitter.total_s / period_s) {
        if share > pitch_lost_jitter() {
            said.push(format!(
                "a jitter of {:.0} % of the period leaves no pitch: it is heard as noise",
                100.0 * share
            ));
        } else if share > ROUGH_JITTER {
            said.push(format!(
                "a jitter of {:.0} % of the period makes the tone rough (common practice: a clean tone needs less than 5 %)",
                100.0 * share
            ));
        }
    }
    said
}

/// Where formula and simulation part.
fn jitter_notes(jitter: &JitterForecast) -> Vec<String> {
    let mut said = Vec::new();
    if jitter.lag_s > 0.0 {
        said.push(
            "the statistical lag is exponential: single periods are skewed to the long side, and the voltage rises above the \
             gap voltage while the gap waits"
                .to_owned(),
        );
    }
    let Some(simulated) = jitter.simulated else { return said };
    // Statistical error of a standard deviation of normal values.
    let chance = 4.0 / (2.0 * simulated.periods as f64).sqrt();
    let off = simulated.period_jitter_s / jitter.total_s - 1.0;
    if jitter.total_s > 0.0 && off.abs() > chance.max(FORMULA_HOLDS) {
        said.push(format!(
            "the formula for the jitter does not hold here: {} simulated firings scatter by {}",
            simulated.periods + 1,
            si(simulated.period_jitter_s, "s", 3)
        ));
    }
    said
}

fn burning(setting: &Setting<'_>) -> Option<String> {
    let current = short_circuit_a(&setting.parts)?;
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
