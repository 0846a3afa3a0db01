//! Predictions over a range of supply settings as a table.

use crate::bench::{si, with_uncertainty};
use crate::predict::{CAUTIONS, Prediction, Sweep};
use std::fmt::Write;

use super::text::wrapped;

/// One line for each setting, then what holds for all of them.
#[must_use]
pub fn sweep_text(sweep: &Sweep) -> String {
    let title = sweep.settings.first().and_then(|setting| setting.title.as_deref()).unwrap_or("Bench");
    let mut text = format!("{title}\n\n");
    // Writing to a string cannot fail.
    let _ = writeln!(text, "  {:>10}  {:22}{:24}{:12}heard as", "supply", "firing rate", "period", "stored");
    for setting in &sweep.settings {
        let _ = writeln!(text, "  {}", line(setting).trim_end());
    }
    text.push('\n');
    for caution in CAUTIONS {
        text.push_str(&wrapped(caution, "  - ", "    "));
    }
    let mut notes: Vec<&String> = sweep.settings.iter().flat_map(|setting| &setting.notes).collect();
    notes.sort();
    notes.dedup();
    if !notes.is_empty() {
        text.push('\n');
    }
    for note in notes {
        text.push_str(&wrapped(&format!("note: {note}"), "  ", "        "));
    }
    text
}

fn line(setting: &Prediction) -> String {
    let supply = setting.supply_v.map_or_else(String::new, |volts| si(volts, "V", 4));
    let stored = setting.stored_energy_j.map_or_else(String::new, |energy| si(energy, "J", 3));
    let (rate, period) = match (setting.firing_rate_hz, setting.period_s) {
        (Some(rate), Some(period)) => {
            (with_uncertainty(rate.value, rate.u, "/s"), with_uncertainty(period.value, period.u, "s"))
        }
        _ if setting.fires == Some(false) => ("does not fire".to_owned(), String::new()),
        _ => ("not known".to_owned(), String::new()),
    };
    let heard = setting.pitch.as_ref().map_or_else(String::new, |pitch| pitch.words());
    format!("{supply:>10}  {rate:22}{period:24}{stored:12}{heard}")
}
