//! The page of a calibration.

use super::KeptText;
use super::document::{caution, document, figure, figures, folded, list, name, table, verbatim};
use crate::bench::si;
use crate::calibrate::Calibration;
use crate::estimate::Estimate;
use crate::pictures;
use crate::plot::escaped;
use crate::report::{Figure, HIGH_VOLTAGE_CAUTION};

/// The page.
///
/// # Errors
/// A calibration that cannot be written as JSON.
pub fn calibration(calibration: &Calibration, text: Option<&KeptText>) -> serde_json::Result<String> {
    let (tau, gap) = (calibration.time_constant_s, calibration.gap_voltage_v);
    let shown = |estimate: Estimate, unit| Figure::prefixed(estimate, unit);
    let answer =
        format!("Time constant {}, gap voltage {}", shown(tau, "s").value_and_u(), shown(gap, "V").value_and_u());
    let used = calibration.settings.iter().filter(|setting| setting.used).count();
    let mut body = format!(
        "<header>\n<p class=\"what\">Calibration from {used} of {} settings</p>\n<h1>{}</h1>\n<p class=\"verdict\">{}</p>\n</header>\n{}",
        calibration.settings.len(),
        escaped(&answer),
        escaped(&agreement(calibration)),
        caution(HIGH_VOLTAGE_CAUTION)
    );
    let row = |label: &str, estimate, unit| {
        let figure = shown(estimate, unit);
        (label.to_owned(), figure.value_and_u(), figure.interval())
    };
    let mut rows = vec![row("time constant", tau, "s"), row("gap voltage", gap, "V")];
    rows.extend(calibration.residual_voltage_v.map(|residual| row("residual voltage", residual, "V")));
    if let Some(recovery) = &calibration.recovery {
        let depth = Figure::plain(recovery.depth.scaled(100.0), "%");
        rows.push((
            "recovery depth".to_owned(),
            depth.value_and_u(),
            format!("within {}", si(recovery.time_s, "s", 3)),
        ));
    }
    body.push_str(&figures(&rows));
    body.push_str("<p class=\"key\">± is one standard uncertainty, .. the 95 % interval.</p>\n");
    body.push_str(&figure(&pictures::calibration(calibration), 2, "calibration"));
    body.push_str(&settings(calibration));
    if let Some(next) = calibration.next_setting {
        body.push_str(&format!(
            "<p>A further recording at {} would help most: time constant to ± {}, gap voltage to ± {} (without the meter's scale).</p>\n",
            si(next.supply_v, "V", 3),
            si(next.time_constant_u_s, "s", 2),
            si(next.gap_voltage_u_v, "V", 2)
        ));
    }
    body.push_str(&list("Notes", 2, &calibration.notes));
    if let Some(kept) = text {
        body.push_str(&format!(
            "<h2>What this rests on</h2>\n<p>The bench, {}:</p>\n{}",
            name(&kept.file),
            verbatim("bench", &kept.text)
        ));
    }
    let json = serde_json::to_string_pretty(calibration)?;
    body.push_str(&folded("The figures as JSON", &verbatim("figures as JSON", &json)));
    Ok(document(&answer, &body, &json))
}

fn agreement(calibration: &Calibration) -> String {
    match calibration.chi_square_probability {
        Some(probability) if probability < 0.01 => {
            "The settings do not agree with each other as well as they are stated; the uncertainties are widened."
                .to_owned()
        }
        Some(_) => "The settings agree with the charging law.".to_owned(),
        None => "As many parameters as settings: nothing checks the law.".to_owned(),
    }
}

fn settings(calibration: &Calibration) -> String {
    let none = || "–".to_owned();
    let rows: Vec<Vec<String>> = calibration
        .settings
        .iter()
        .map(|setting| {
            vec![
                name(&setting.file),
                si(setting.supply_v, "V", 4),
                setting.firing_rate_hz.map_or_else(none, |rate| format!("{:.2} /s", rate.value)),
                setting.residual.map_or_else(none, |residual| format!("{residual:+.2} u")),
                setting
                    .left_out
                    .as_deref()
                    .map_or_else(|| "used".to_owned(), |why| format!("left out: {}", escaped(why))),
            ]
        })
        .collect();
    table("Settings", &["recording", "supply", "rate", "residual", "use"], &rows)
}
