//! What a charged capacitor can do: energy, charge, published thresholds, time to bleed, cautions.
//!
//! Each threshold is named for what it is; none of them is a permission, and no wording here says that anything is
//! harmless. Units: V, F, J, C, Ω, s.

use crate::bench::si;

/// Voltage down to which bleeding is counted, V (usual pass reading for extra-low voltage, as in IEC 61010-1 and
/// IEC 62368-1).
pub const BLED_V: f64 = 60.0;

/// Shown with every prediction.
pub const CAUTIONS: [&str; 5] = [
    "Kilovolts on a capacitor kill, with the supply off too.",
    "De-energise, discharge with a rated stick, verify, ground; keep it shorted, because charge comes back by dielectric \
     absorption.",
    "Guard and interlock the bench; local rules and qualified persons decide.",
    "Damped-wave emission is forbidden on the air practically everywhere (in the United States 47 CFR 2.201(f)): run it \
     screened, into a dummy load, without an aerial.",
    "Sparks make ultraviolet, ozone and noise.",
];

/// Energy of a charged capacitor, J.
#[must_use]
pub fn energy_j(capacitance_f: f64, voltage_v: f64) -> f64 {
    0.5 * capacitance_f * voltage_v * voltage_v
}

/// Charge of a capacitor, C.
#[must_use]
pub fn charge_c(capacitance_f: f64, voltage_v: f64) -> f64 {
    capacitance_f * voltage_v
}

/// Time to bleed from a voltage to [`BLED_V`] through a resistance, s: R·C·ln(V/60 V).
#[must_use]
pub fn bleed_time_s(resistance_ohm: f64, capacitance_f: f64, voltage_v: f64) -> f64 {
    resistance_ohm * capacitance_f * (voltage_v / BLED_V).ln().max(0.0)
}

/// A published threshold.
struct Threshold {
    /// True if the capacitor lies above it.
    above: bool,
    /// Value and what it is.
    text: &'static str,
}

/// The published thresholds that apply at a voltage.
fn thresholds(capacitance_f: f64, voltage_v: f64) -> Vec<Threshold> {
    let energy = energy_j(capacitance_f, voltage_v);
    let charge = charge_c(capacitance_f, voltage_v);
    let v = voltage_v;
    let rows = [
        // Hazardous thresholds of a national laboratory after the DOE classification.
        (v >= 100.0, energy >= 10e3, "10 kJ (arc-flash threshold of a national laboratory)"),
        (v >= 100.0, energy >= 10.0, "10 J (shock threshold of a national laboratory)"),
        (v < 100.0, energy > 100.0, "100 J (burn threshold of a national laboratory, below 100 V)"),
        // NFPA 70E:2021, article 360 and annex R: from memory.
        (v > 400.0, energy > 0.25, "0.25 J (NFPA 70E:2021 above 400 V, from memory)"),
        ((100.0..=400.0).contains(&v), energy > 1.0, "1 J (NFPA 70E:2021 from 100 V to 400 V, from memory)"),
        // A contribution to a vehicle-safety working group, with DOE-HDBK-1092-2013 as support.
        (v > 400.0, energy > 0.2, "0.2 J (limit proposed for electric vehicles above 400 V)"),
        (v > BLED_V, charge > 45e-6, "45 µC (charge limit for hazardous live parts of IEC 61010-1)"),
        // IEC 60335-1, clause 8.1.4; its 45 µC from 450 V to 15 kV is the figure above.
        (v > BLED_V && v <= 450.0, capacitance_f > 0.1e-6, "0.1 µF (live-part limit of IEC 60335-1 up to 450 V)"),
        (v > 15e3, energy > 0.35, "0.35 J (live-part limit of IEC 60335-1 above 15 kV)"),
    ];
    rows.into_iter().filter(|row| row.0).map(|(_, above, text)| Threshold { above, text }).collect()
}

/// Sentences on a capacitor charged to a voltage: what it holds, and which published thresholds it exceeds.
#[must_use]
pub fn sentences(capacitance_f: f64, voltage_v: f64) -> Vec<String> {
    let holds = format!(
        "{} at {} is {} and {}.",
        si(capacitance_f, "F", 3),
        si(voltage_v, "V", 3),
        si(energy_j(capacitance_f, voltage_v), "J", 3),
        si(charge_c(capacitance_f, voltage_v), "C", 3)
    );
    let applying = thresholds(capacitance_f, voltage_v);
    let mut said = vec![holds];
    said.extend(applying.iter().filter(|row| row.above).map(|row| format!("HAZARD: exceeds {}.", row.text)));
    let below: Vec<_> = applying.iter().filter(|row| !row.above).map(|row| row.text).collect();
    if !below.is_empty() {
        said.push(format!("Not exceeded, which is no permission to touch it: {}.", below.join(", ")));
    }
    said
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Printed digits of the worked figures.
    const PRINTED: f64 = 1e-3;

    fn near(value: f64, expected: f64) -> bool {
        (value / expected - 1.0).abs() < PRINTED
    }

    #[test]
    fn energy_and_charge_follow_from_capacitance_and_voltage() {
        // ½·C·V² and C·V by hand.
        let rows = [
            (1e-9, 5e3, 12.5e-3, 5e-6),
            (10e-9, 5e3, 0.125, 50e-6),
            (100e-9, 5e3, 1.25, 500e-6),
            (1e-6, 5e3, 12.5, 5e-3),
            (1.75e-9, 20e3, 0.35, 35e-6),
        ];
        for (c, v, energy, charge) in rows {
            assert!(near(energy_j(c, v), energy) && near(charge_c(c, v), charge), "{c} {v}");
        }
        // 45 µC is 9 nF at 5 kV and 4.5 nF at 10 kV.
        assert!(near(charge_c(9e-9, 5e3), 45e-6) && near(charge_c(4.5e-9, 10e3), 45e-6));
    }

    #[test]
    fn bleeding_to_60_volt_takes_the_logarithm_of_the_ratio() {
        // ln(V/60 V) to the printed digits for 5, 10 and 20 kV.
        for (v, time_constants) in [(5e3, 4.423), (10e3, 5.116), (20e3, 5.809)] {
            assert!((bleed_time_s(1e9, 1e-9, v) - time_constants).abs() < 5e-4, "{v}");
        }
        assert_eq!(bleed_time_s(1e9, 1e-9, 30.0), 0.0);
    }

    #[test]
    fn the_hazard_is_named_above_each_threshold() {
        let said = |c, v| sentences(c, v).join(" ");
        assert!(said(1e-6, 5e3).contains("HAZARD: exceeds 10 J"));
        // 0.28 J at 7.5 kV, well below 10 J.
        assert!(said(10e-9, 7.5e3).contains("HAZARD: exceeds 0.25 J (NFPA 70E:2021 above 400 V"));
        // 50 µC at 5 kV, 0.125 J.
        let charged = said(10e-9, 5e3);
        assert!(charged.contains("HAZARD: exceeds 45 µC") && !charged.contains("exceeds 0.25 J"));
        assert!(said(1.8e-9, 20e3).contains("HAZARD: exceeds 0.35 J (live-part limit of IEC 60335-1 above 15 kV"));
        assert!(said(0.2e-6, 300.0).contains("HAZARD: exceeds 0.1 µF"));
        assert!(!said(1e-12, 5e3).contains("HAZARD"));
    }

    #[test]
    fn no_wording_calls_anything_harmless() {
        let mut all: Vec<String> = CAUTIONS.map(str::to_owned).to_vec();
        for v in [10.0, 90.0, 300.0, 500.0, 5e3, 20e3] {
            for c in [1e-12, 1e-9, 1e-6, 1.0] {
                all.extend(sentences(c, v));
            }
        }
        for text in all {
            let small = text.to_lowercase();
            assert!(!["safe", "harmless", "no danger", "no hazard"].iter().any(|word| small.contains(word)), "{text}");
        }
    }
}
