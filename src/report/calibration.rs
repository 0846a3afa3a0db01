//! A calibration as text: the figures, the settings one by one, what would help most.

use super::{Figure, HIGH_VOLTAGE_CAUTION, wrapped};
use crate::bench::si;
use crate::calibrate::{Calibration, SettingResult};
use crate::estimate::Estimate;
use std::fmt::Write;

/// Columns of the figures: as in the text of a measurement.
const LABEL: usize = 18;
const VALUE: usize = 26;
/// Width of the name of a setting.
const NAME: usize = 26;

/// The whole report, ending with a line break. `stated_s` is the time constant that the bench states.
#[must_use]
pub fn calibration_text(calibration: &Calibration, stated_s: Option<f64>) -> String {
    let used = calibration.settings.iter().filter(|setting| setting.used).count();
    let mut text = format!("calibration from {used} of {} settings\n\n", calibration.settings.len());
    let mut row = |label: &str, estimate: Estimate, unit: &str, aside: &str| {
        let figure = Figure::prefixed(estimate, unit);
        let line = format!("  {label:LABEL$}{:VALUE$}{}{aside}", figure.value_and_u(), figure.interval());
        // Writing to a string cannot fail.
        let _ = writeln!(text, "{}", line.trim_end());
    };
    let tau = calibration.time_constant_s;
    let beside = stated_s.map(|s| format!(", {:+.2} % from the bench", 100.0 * (tau.value / s - 1.0)));
    row("time constant", tau, "s", &beside.unwrap_or_default());
    row("gap voltage", calibration.gap_voltage_v, "V", "");
    if let Some(residual) = calibration.residual_voltage_v {
        row("residual voltage", residual, "V", "");
    }
    if let Some(recovery) = &calibration.recovery {
        row("recovery depth", recovery.depth.scaled(100.0), "%", &format!(", within {}", si(recovery.time_s, "s", 3)));
    }
    text.push_str("  (± is one standard uncertainty, .. the 95 % interval)\n\n");
    text.push_str(&agreement(calibration));
    let _ = writeln!(
        text,
        "\n  {:NAME$} {:>10} {:>12} {:>9}  without it: time constant, gap voltage",
        "recording", "supply", "rate", "residual"
    );
    for setting in &calibration.settings {
        text.push_str(&setting_line(setting));
    }
    if let Some(next) = calibration.next_setting {
        let line = format!(
            "a further recording at {} would help most: time constant to ± {}, gap voltage to ± {} (without the meter's scale)",
            si(next.supply_v, "V", 3),
            si(next.time_constant_u_s, "s", 2),
            si(next.gap_voltage_u_v, "V", 2)
        );
        text.push('\n');
        text.push_str(&wrapped(&line, "  ", "  "));
    }
    text.push('\n');
    for note in &calibration.notes {
        text.push_str(&wrapped(&format!("note: {note}"), "  ", "        "));
    }
    text.push('\n');
    text + &wrapped(HIGH_VOLTAGE_CAUTION, "  ", "  ")
}

fn agreement(calibration: &Calibration) -> String {
    let line = match calibration.chi_square_probability {
        Some(probability) => format!(
            "chi-square {:.2} with {} degrees of freedom: settings as good as stated are this far apart or farther in {:.0} % of \
             cases",
            calibration.chi_square,
            calibration.degrees_of_freedom,
            100.0 * probability
        ),
        None => "no degrees of freedom: nothing checks the law".to_owned(),
    };
    wrapped(&line, "  ", "  ")
}

fn setting_line(setting: &SettingResult) -> String {
    let rate = setting.firing_rate_hz.map_or("-".to_owned(), |rate| format!("{:.2} /s", rate.value));
    let residual = setting.residual.map_or("-".to_owned(), |residual| format!("{residual:+.2} u"));
    let aside = match (&setting.left_out, setting.influence) {
        (Some(_), _) => "left out".to_owned(),
        (None, Some(moved)) => {
            // The other way round than the influence: what leaving it out does.
            format!("{:+.2} %, {:+.2} %", -100.0 * moved.time_constant, -100.0 * moved.gap_voltage)
        }
        (None, None) => String::new(),
    };
    let supply = si(setting.supply_v, "V", 4);
    let line = format!("  {:NAME$} {supply:>10} {rate:>12} {residual:>9}  {aside}", setting.file);
    line.trim_end().to_owned() + "\n"
}
