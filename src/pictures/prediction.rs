//! A range of supply settings: rate, pitch and jitter, with locks and with the settings at which the gap does not fire.

use crate::bench::{si, signed};
use crate::estimate::Estimate;
use crate::plot::{Area, Axis, Legend, Panel, Picture, Scale, Stroke};
use crate::predict::{Hearing, Prediction, Sweep, pitch};

/// Far below the rest only the knee at the least setting would be seen.
const LARGEST_RATIO: f64 = 300.0;
/// Room on the right for pitches.
const PITCHES: f64 = 78.0;

/// The picture of a range of settings; `present` is the setting that was asked for.
#[must_use]
pub fn prediction(sweep: &Sweep, present: Option<&Prediction>) -> Picture {
    let volts = |setting: &Prediction| setting.supply_v.unwrap_or(0.0);
    let ends = (sweep.settings.first().map_or(0.0, volts), sweep.settings.last().map_or(1.0, volts));
    let x = Axis::new(Scale::linear(ends.0, ends.1), "supply voltage", "V", 6);
    let narrow = |area: Area| Area { right: area.right - PITCHES, ..area };
    let mut rate = rate_panel(sweep, &x, narrow(Picture::area(230.0)));
    let mut jitter = jitter_panel(sweep, &x, narrow(Picture::area_below(304.0, 120.0)));
    let mut legend = vec![
        (Legend::Line(Stroke::Main), "predicted".to_owned()),
        (Legend::Area("band"), "95 % by the tolerances".to_owned()),
    ];
    let mut shade = |name: &'static str, ranges: &[(f64, f64)], words: &str| {
        for (low, high) in ranges {
            for panel in [&mut rate, &mut jitter] {
                if name == "locked" { panel.zone(name, *low, *high) } else { panel.off(name, *low, *high) }
            }
        }
        if !ranges.is_empty() {
            legend.push((Legend::Area(if name == "locked" { "zone" } else { "off" }), words.to_owned()));
        }
    };
    shade("silent", &silent(sweep, ends), "does not fire");
    shade("locked", &locks(sweep, ends), "held by the ripple");
    if let Some((supply_v, rate_hz)) = present.and_then(|one| Some((one.supply_v?, one.firing_rate_hz?.value))) {
        for panel in [&mut rate, &mut jitter] {
            panel.upright("present", Stroke::Limit, supply_v);
        }
        let pitched = pitch(rate_hz).filter(|pitch| pitch.hearing == Hearing::Pitch);
        let note = pitched.map_or_else(String::new, |pitch| format!(", {} {}", pitch.note, signed(pitch.cents, 0)));
        rate.words_at(supply_v, 0, &format!("{:.1} /s{note}", rate_hz));
        legend.push((Legend::Line(Stroke::Limit), "present setting".to_owned()));
    }
    Picture {
        kind: "prediction",
        title: title(sweep, present, ends),
        reading: "Above: firings per second, on a scale of equal ratios, so that equal steps are equal intervals of pitch; notes on the \
                  right with their distance in cents. Below: scatter of single periods. Nearer to the least setting at which it fires \
                  a gap gets slower and less even."
            .to_owned(),
        panels: vec![rate, jitter],
        legend,
    }
}

fn title(sweep: &Sweep, present: Option<&Prediction>, ends: (f64, f64)) -> String {
    let name = sweep.settings.first().and_then(|setting| setting.title.as_deref()).unwrap_or("The bench");
    // Isolated (U+2068, U+2069), so that a name cannot turn the direction of the sentence.
    let name = format!("\u{2068}{name}\u{2069}");
    let range = format!("from {} to {}", si(ends.0, "V", 3), si(ends.1, "V", 3));
    match present.and_then(|one| Some((one.supply_v?, one.firing_rate_hz?))) {
        Some((supply_v, rate)) => {
            format!(
                "{name}: {:.1} firings a second at {}, and what a change of the supply does",
                rate.value,
                si(supply_v, "V", 4)
            )
        }
        None if rates(sweep).next().is_none() => format!("{name}: no firing {range} of supply voltage"),
        None => format!("{name}: firing {range} of supply voltage"),
    }
}

fn rates(sweep: &Sweep) -> impl Iterator<Item = (f64, Estimate)> {
    sweep.settings.iter().filter_map(|setting| Some((setting.supply_v?, setting.firing_rate_hz?)))
}

/// Where it does not fire.
fn silent(sweep: &Sweep, ends: (f64, f64)) -> Vec<(f64, f64)> {
    let least = sweep.settings.iter().find_map(|setting| setting.least_supply_v);
    least.filter(|least_v| *least_v > ends.0).map(|least_v| (ends.0, least_v.min(ends.1))).into_iter().collect()
}

/// The locks, each once, as far as they lie in the range.
fn locks(sweep: &Sweep, ends: (f64, f64)) -> Vec<(f64, f64)> {
    let mut found: Vec<(f64, f64)> = Vec::new();
    for lock in sweep.settings.iter().filter_map(|setting| setting.ripple.as_ref()?.lock) {
        let range = (lock.low_supply_v.max(ends.0), lock.high_supply_v.min(ends.1));
        if range.1 > range.0 && !found.iter().any(|one| one.0 == range.0) {
            found.push(range);
        }
    }
    found
}

fn rate_panel(sweep: &Sweep, x: &Axis, area: Area) -> Panel {
    let points: Vec<_> = rates(sweep).collect();
    let positive = |value: &f64| *value > 0.0 && value.is_finite();
    let low = points.iter().map(|point| point.1.low).filter(positive).fold(f64::INFINITY, f64::min);
    let high = points.iter().map(|point| point.1.high).filter(positive).fold(0.0, f64::max);
    let words = "firings a second";
    if points.is_empty() || low >= high {
        let mut panel = Panel::new(area, x.clone(), Axis::new(Scale::logarithmic(1.0, 10.0), words, "", 5));
        panel.words_in_the_middle("no rate that changes at these settings");
        return panel;
    }
    let y = Axis::new(Scale::logarithmic(low.max(high / LARGEST_RATIO), high), words, "", 5);
    let ticks: Vec<f64> = y.ticks.iter().map(|tick| tick.0).collect();
    let mut panel = Panel::new(area, x.clone(), y);
    panel.band("rate band", &points.iter().map(|(v, rate)| (*v, rate.low, rate.high)).collect::<Vec<_>>());
    panel.line("rate", Stroke::Main, points.iter().map(|(v, rate)| (*v, rate.value)));
    for tick in ticks {
        if let Some(pitch) = pitch(tick).filter(|pitch| pitch.hearing == Hearing::Pitch) {
            panel.words_right(tick, &format!("{} {}", pitch.note, signed(pitch.cents, 0)));
        }
    }
    panel
}

fn jitter_panel(sweep: &Sweep, x: &Axis, area: Area) -> Panel {
    let points: Vec<(f64, f64)> = sweep
        .settings
        .iter()
        .filter_map(|setting| Some((setting.supply_v?, setting.period_jitter_s?.value / setting.period_s?.value)))
        .collect();
    let high = points.iter().map(|point| point.1).filter(|share| share.is_finite()).fold(0.0, f64::max);
    let y = Axis::percent(
        Scale::linear(0.0, if high > 0.0 { 1.05 * high } else { 0.01 }),
        "jitter, share of the period",
        4,
    );
    let mut panel = Panel::new(area, x.clone(), y);
    if high > 0.0 {
        panel.line("jitter", Stroke::Main, points);
    } else {
        panel.words_in_the_middle("no jitter stated");
    }
    panel
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::bench::parse;
    use crate::plot::Medium;
    use crate::predict::sweep;

    fn drawn(extra: &str, low_v: f64, high_v: f64) -> String {
        let text = format!(
            "title = \"A <bench> & more\"\nsupply.voltage = \"8 kV\"\ngap.voltage = \"5 kV\"\n\
             charging.resistance = \"10 MΩ\"\ncharging.capacitance = \"1 nF\"\n{extra}"
        );
        let bench = parse(&text, "test.toml").unwrap();
        prediction(&sweep(&bench, low_v, high_v, 40).unwrap(), None).svg(Medium::File)
    }

    #[test]
    fn the_drawing_holds_rate_pitch_jitter_and_locks() {
        let extra = "gap.spread = \"1 %\"\nsupply.ripple = \"2 %\"\nsupply.ripple_frequency = \"100 Hz\"\n";
        let svg = drawn(extra, 4e3, 12e3);
        for part in [
            "A &lt;bench&gt; &amp; more",
            "data-series=\"locked\"",
            "data-series=\"silent\"",
            "data-series=\"rate band\"",
            "G2",
        ] {
            assert!(svg.contains(part), "{part}");
        }
        assert!(!svg.contains("NaN") && !svg.contains("inf"));
    }

    #[test]
    fn a_range_without_firing_is_drawn_as_such() {
        let svg = drawn("", 1e3, 4e3);
        assert!(svg.contains("no rate that changes") && svg.contains("no jitter stated") && !svg.contains("NaN"));
    }
}
