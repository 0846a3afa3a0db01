//! Reads the table of a general circuit simulator; see `data/circuit-timing.md`.
#![allow(dead_code, reason = "every test binary uses another part of it")]

use gaptone::model::charging::{Parts, Ripple};

/// Capacitance across the gap in the cases with a tank, F.
const TANK_STRAY_F: f64 = 2e-12;

/// One case.
pub struct Row {
    pub case: String,
    pub condition: String,
    pub resistance_ohm: f64,
    pub capacitance_f: f64,
    pub gap_v: f64,
    pub supply_v: f64,
    pub ripple_fraction: f64,
    pub ripple_hz: f64,
    pub probe_ohm: Option<f64>,
    pub limit_a: Option<f64>,
    pub scatter: f64,
    pub firings: usize,
    pub first_firing_s: f64,
    pub period_s: f64,
    pub period_sd_s: f64,
    pub firing_v: f64,
    pub firing_sd_v: f64,
    pub residual_v: f64,
    pub conduction_s: f64,
}

impl Row {
    /// The circuit of the case, with the residual voltage that the simulator found and the time to which it refers.
    pub fn parts(&self) -> Parts {
        let ripple = (self.ripple_fraction > 0.0).then_some(Ripple {
            fraction: self.ripple_fraction,
            frequency_hz: self.ripple_hz,
            phase_rad: 0.0,
        });
        Parts {
            supply_v: Some(self.supply_v),
            resistance_ohm: Some(self.resistance_ohm),
            capacitance_f: Some(self.capacitance_f),
            leakage_ohm: self.probe_ohm,
            current_limit_a: self.limit_a,
            stray_f: if self.condition.starts_with("tank") { TANK_STRAY_F } else { 0.0 },
            residual_v: self.residual_v,
            conduction_s: self.conduction_s,
            ripple,
            ..Parts::default()
        }
    }
}

/// The rows of a condition.
pub fn rows(condition: &str) -> Vec<Row> {
    let text = include_str!("../data/circuit-timing.csv");
    let mut lines = text.lines();
    let names: Vec<&str> = lines.next().unwrap().split(',').collect();
    lines
        .map(|line| {
            let fields: Vec<&str> = line.split(',').collect();
            let field = |name: &str| fields[names.iter().position(|n| *n == name).unwrap()];
            let number = |name: &str| field(name).parse().unwrap_or(f64::NAN);
            Row {
                case: field("case").to_owned(),
                condition: field("condition").to_owned(),
                resistance_ohm: number("R_ohm"),
                capacitance_f: number("C_F"),
                gap_v: number("Vb_V"),
                supply_v: number("Vs_V"),
                ripple_fraction: number("ripple_peak_frac"),
                ripple_hz: number("ripple_Hz"),
                probe_ohm: field("R_probe_ohm").parse().ok(),
                limit_a: field("I_limit_A").parse().ok(),
                scatter: number("Vb_scatter_frac"),
                firings: field("n_firings").parse().unwrap(),
                first_firing_s: number("first_firing_s"),
                period_s: number("mean_period_s"),
                period_sd_s: number("std_period_s"),
                firing_v: number("mean_Vfire_V"),
                firing_sd_v: number("std_Vfire_V"),
                residual_v: number("mean_Vres_V"),
                conduction_s: number("residual_time_after_firing_s"),
            }
        })
        .filter(|row| row.condition == condition)
        .collect()
}
