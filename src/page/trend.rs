//! The page of a trend.

use super::document::{caution, document, figure, figures, folded, list, name, table, verbatim};
use crate::bench::si;
use crate::pictures::{self, capital};
use crate::plot::escaped;
use crate::report::{HIGH_VOLTAGE_CAUTION, trend_rows};
use crate::trend::{Charted, Moment, Trend, advice};

/// Entries in the table of the page.
const SHOWN: usize = 40;

/// The page of the trend of a log.
///
/// # Errors
/// A trend that cannot be written as JSON.
pub fn trend(log: &str, trend: &Trend) -> serde_json::Result<String> {
    // What is so stands in the heading, what to do about it below.
    let (heading, action) = trend.advice.split_once("; ").unwrap_or((trend.advice.as_str(), ""));
    let action = if action.is_empty() {
        String::new()
    } else {
        format!("<p class=\"verdict\">{}.</p>\n", escaped(&capital(action)))
    };
    let of = if trend.title.is_empty() { String::new() } else { format!(" of {}", name(&trend.title)) };
    let mut body = format!(
        "<header>\n<p class=\"what\">History{of}: {} entries of {}</p>\n<h1 class=\"long\">{}</h1>\n{action}</header>\n",
        trend.entries,
        name(log),
        escaped(&capital(heading))
    );
    if trend.charted == Charted::GapVoltage {
        body.push_str(&caution(HIGH_VOLTAGE_CAUTION));
    }
    body.push_str(&figure(&pictures::trend(trend), 2, "trend"));
    let rows: Vec<_> =
        trend_rows(trend).into_iter().map(|(label, value)| (label.to_owned(), value, String::new())).collect();
    body.push_str(&figures(&rows));
    body.push_str(&entries(trend));
    body.push_str(&list("Notes", 2, &trend.notes));
    let json = serde_json::to_string(trend)?;
    // The points stand in the page once, in the embedded object.
    let figures = serde_json::to_string_pretty(&Trend { points: Vec::new(), ..trend.clone() })?;
    body.push_str(&folded("The figures as JSON, without the entries", &verbatim("figures as JSON", &figures)));
    Ok(document(&format!("History of {}", if trend.title.is_empty() { log } else { &trend.title }), &body, &json))
}

/// `2026-11-30 14:05`
fn minute(time: Moment) -> String {
    let text = time.to_string();
    escaped(&text.get(..16).unwrap_or(&text).replace('T', " "))
}

fn entries(trend: &Trend) -> String {
    let hidden = trend.points.len().saturating_sub(SHOWN);
    // A history that was shortened has more entries than points; its last rows are not the last entries.
    let which = if trend.points.len() < trend.entries { "of those kept here" } else { "entries" };
    let none = || "–".to_owned();
    let rows: Vec<Vec<String>> = trend.points[hidden..]
        .iter()
        .map(|point| {
            vec![
                format!("<span class=\"nowrap\">{}</span>", minute(point.time)),
                escaped(&advice::amount(trend.charted, point.value, 5)),
                point.firing_rate_hz.map_or_else(none, |rate| format!("{rate:.2} /s")),
                point.gap_voltage_v.map_or_else(none, |v| si(v, "V", 5)),
                if point.outside == 0 { String::new() } else { "beyond a limit".to_owned() },
                name(&point.file),
            ]
        })
        .collect();
    let caption =
        if hidden > 0 { format!("The last {SHOWN} of {} {which}", trend.points.len()) } else { "Entries".to_owned() };
    table(&caption, &["time (UTC)", trend.charted.words(), "rate", "voltage as measured", "limits", "recording"], &rows)
}
