//! The page of a prediction: of one setting, or of a range of them.

use super::KeptText;
use super::document::{caution, document, figure, figures, folded, list, table, verbatim};
use crate::bench::si;
use crate::pictures;
use crate::plot::escaped;
use crate::predict::{self, Prediction, Sweep};
use crate::report::HIGH_VOLTAGE_CAUTION;

/// The page; `drawn` is the fine range for the picture, `table` the range that was asked for.
///
/// # Errors
/// A prediction that cannot be written as JSON.
pub fn prediction(
    present: Option<&Prediction>,
    range: Option<&Sweep>,
    drawn: Option<&Sweep>,
    bench: &KeptText,
) -> serde_json::Result<String> {
    let any = present.or(range.and_then(|sweep| sweep.settings.first()));
    let title = any.and_then(|one| one.title.clone()).unwrap_or_else(|| bench.file.clone());
    let mut body = format!("<header>\n<p class=\"what\">Prediction for <bdi>{}</bdi></p>\n", escaped(&title));
    if let Some(present) = present {
        body.push_str(&format!(
            "<h1>{}</h1>\n<p class=\"verdict\">{}</p>\n",
            escaped(&answer(present)),
            escaped(&present.reason)
        ));
    } else if let Some(sweep) = range {
        body.push_str(&format!("<h1>{}</h1>\n", escaped(&answer_of_range(sweep))));
    }
    body.push_str("</header>\n");
    body.push_str(&caution(HIGH_VOLTAGE_CAUTION));
    if let Some(present) = present {
        body.push_str(&figures(&predict::figure_rows(present)));
    }
    if let Some(sweep) = drawn {
        body.push_str(&figure(&pictures::prediction(sweep, present), 2, "prediction"));
    }
    if let Some(sweep) = range {
        body.push_str(&settings(sweep));
        body.push_str(&list("Along the range", 2, &sweep.remarks));
    }
    if let Some(present) = present {
        for (heading, lines) in predict::lists(present) {
            body.push_str(&list(heading, 2, &lines));
        }
    } else if let Some(any) = any {
        body.push_str(&list("Cautions", 2, &any.cautions));
    }
    body.push_str(&format!("<h2>What this rests on</h2>\n<p>The bench, <bdi>{}</bdi>:</p>\n", escaped(&bench.file)));
    body.push_str(&verbatim("bench", &bench.text));
    let json = match (present, range) {
        (Some(present), _) => serde_json::to_string_pretty(present)?,
        (None, range) => serde_json::to_string_pretty(&range)?,
    };
    body.push_str(&folded("The figures as JSON", &verbatim("figures as JSON", &json)));
    Ok(document(&format!("Prediction for {title}"), &body, &json))
}

fn answer(present: &Prediction) -> String {
    let supply = present.supply_v.map_or_else(String::new, |v| format!(" at {}", si(v, "V", 4)));
    match (present.firing_rate_hz, present.fires) {
        (Some(rate), _) => {
            let note = present
                .pitch
                .as_ref()
                .filter(|pitch| pitch.hearing == predict::Hearing::Pitch)
                .map_or_else(String::new, |pitch| format!(", heard as {}", pitch.note));
            format!("{} firings a second{supply}{note}", crate::bench::with_uncertainty(rate.value, rate.u, ""))
        }
        (None, Some(false)) => format!("The gap does not fire{supply}"),
        _ => format!("No rate can be told{supply}"),
    }
}

fn answer_of_range(sweep: &Sweep) -> String {
    let rates = || sweep.settings.iter().filter_map(|setting| setting.firing_rate_hz.map(|rate| rate.value));
    let (low, high) = (rates().fold(f64::INFINITY, f64::min), rates().fold(0.0, f64::max));
    if low > high {
        "The gap fires at none of these settings".to_owned()
    } else {
        format!("{low:.1} to {high:.1} firings a second over this range")
    }
}

fn settings(sweep: &Sweep) -> String {
    let told = |value: Option<String>| escaped(&value.unwrap_or_else(|| "–".to_owned()));
    let rows: Vec<Vec<String>> = sweep
        .settings
        .iter()
        .map(|one| {
            let rate = one.firing_rate_hz.map(|rate| crate::bench::with_uncertainty(rate.value, rate.u, "/s"));
            let share =
                one.period_jitter_s.zip(one.period_s).map(|(j, t)| format!("{:.2} %", 100.0 * j.value / t.value));
            let pitch = one.pitch.as_ref().filter(|pitch| pitch.hearing == predict::Hearing::Pitch);
            vec![
                told(one.supply_v.map(|v| si(v, "V", 4))),
                told(rate),
                told(share),
                told(pitch.map(|pitch| format!("{} {}", pitch.note, crate::bench::signed(pitch.cents, 0)))),
            ]
        })
        .collect();
    table("Settings", &["supply", "rate", "jitter", "pitch, cents"], &rows)
}
