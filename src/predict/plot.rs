//! A range of settings as a drawing: rate, pitch and jitter against the supply voltage.

use super::{Prediction, Sweep};
use crate::bench::{si, signed};
use std::fmt::Write;

const WIDTH: f64 = 760.0;
const LEFT: f64 = 74.0;
const RIGHT: f64 = 70.0;
/// Top and height of the two panels.
const RATE: (f64, f64) = (44.0, 250.0);
const JITTER: (f64, f64) = (340.0, 130.0);
const HEIGHT: f64 = 520.0;

/// A linear or logarithmic axis onto a stretch of the drawing.
struct Axis {
    low: f64,
    high: f64,
    from: f64,
    to: f64,
    logarithmic: bool,
}

impl Axis {
    fn at(&self, value: f64) -> f64 {
        let share = if self.logarithmic {
            (value / self.low).ln() / (self.high / self.low).ln()
        } else {
            (value - self.low) / (self.high - self.low)
        };
        self.from + share * (self.to - self.from)
    }

    /// Round values along the axis.
    fn ticks(&self) -> Vec<f64> {
        if self.logarithmic && self.high / self.low > 8.0 {
            let powers = self.low.log10().floor() as i32..=self.high.log10().ceil() as i32;
            let all = powers.flat_map(|power| [1.0, 2.0, 5.0].map(|digit| digit * 10f64.powi(power)));
            return all.filter(|tick| (self.low..=self.high).contains(tick)).collect();
        }
        let rough = (self.high - self.low) / 5.0;
        let power = 10f64.powf(rough.log10().floor());
        let step =
            [1.0, 2.0, 5.0, 10.0].into_iter().map(|digit| digit * power).find(|step| *step >= rough).unwrap_or(rough);
        let first = (self.low / step).ceil();
        (0..20).map(|k| (first + f64::from(k)) * step).filter(|tick| *tick <= self.high * (1.0 + 1e-12)).collect()
    }
}

/// The drawing as SVG text: the rate with its 95 % band (and its pitch on the right), the jitter below it, locks and the
/// settings at which it does not fire shaded.
#[must_use]
pub fn plot_svg(sweep: &Sweep) -> String {
    let volts = |setting: &Prediction| setting.supply_v.unwrap_or(0.0);
    let ends = (sweep.settings.first().map_or(0.0, volts), sweep.settings.last().map_or(1.0, volts));
    let x = Axis { low: ends.0, high: ends.1, from: LEFT, to: WIDTH - RIGHT, logarithmic: false };
    let mut out = format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 {WIDTH} {HEIGHT}\" font-family=\"sans-serif\" \
         font-size=\"12\">\n<rect width=\"{WIDTH}\" height=\"{HEIGHT}\" fill=\"white\"/>\n"
    );
    let title = sweep.settings.first().and_then(|setting| setting.title.as_deref()).unwrap_or("Bench");
    text(&mut out, LEFT, 24.0, "start", &format!("{title}: firing against supply voltage"));
    shade(&mut out, sweep, &x);
    rate_panel(&mut out, sweep, &x);
    jitter_panel(&mut out, sweep, &x);
    for tick in x.ticks() {
        let at = x.at(tick);
        let bottom = JITTER.0 + JITTER.1;
        let _ = writeln!(out, "<path d=\"M{at:.1} {bottom}v5\" stroke=\"black\"/>");
        text(&mut out, at, bottom + 18.0, "middle", &si(tick, "V", 3));
    }
    text(&mut out, 0.5 * (LEFT + WIDTH - RIGHT), HEIGHT - 10.0, "middle", "supply voltage");
    out.push_str("</svg>\n");
    out
}

/// Locks, and where it does not fire.
fn shade(out: &mut String, sweep: &Sweep, x: &Axis) {
    let mut band = |low: f64, high: f64, colour: &str| {
        let (from, to) = (x.at(low.max(x.low)), x.at(high.min(x.high)));
        if to > from {
            for (top, height) in [RATE, JITTER] {
                let width = to - from;
                let _ = writeln!(
                    out,
                    "<rect x=\"{from:.1}\" y=\"{top}\" width=\"{width:.1}\" height=\"{height}\" fill=\"{colour}\"/>"
                );
            }
        }
    };
    if let Some(least_v) = sweep.settings.iter().find_map(|setting| setting.least_supply_v) {
        band(x.low, least_v, "#e8e8e8");
    }
    let mut told: Vec<f64> = Vec::new();
    for lock in sweep.settings.iter().filter_map(|setting| setting.ripple.as_ref()?.lock) {
        if !told.contains(&lock.low_supply_v) {
            told.push(lock.low_supply_v);
            band(lock.low_supply_v, lock.high_supply_v, "#fff0c0");
        }
    }
}

fn rate_panel(out: &mut String, sweep: &Sweep, x: &Axis) {
    let points: Vec<_> =
        sweep.settings.iter().filter_map(|setting| Some((setting.supply_v?, setting.firing_rate_hz?))).collect();
    let positive = |value: &f64| *value > 0.0 && value.is_finite();
    let low = points.iter().map(|point| point.1.low).filter(positive).fold(f64::INFINITY, f64::min);
    let high = points.iter().map(|point| point.1.high).filter(positive).fold(0.0, f64::max);
    frame(out, RATE);
    if points.is_empty() || low >= high {
        text(
            out,
            0.5 * (LEFT + WIDTH - RIGHT),
            RATE.0 + 0.5 * RATE.1,
            "middle",
            "no rate that changes at these settings",
        );
        return;
    }
    // Far below the rest only the knee at the least setting would be seen.
    let low = low.max(high / 300.0);
    let y = Axis { low, high, from: RATE.0 + RATE.1, to: RATE.0, logarithmic: true };
    let up = |rate: f64| y.at(rate.clamp(low, high));
    let mut outline: String = points.iter().map(|(v, rate)| format!("{:.1},{:.1} ", x.at(*v), up(rate.high))).collect();
    outline.extend(points.iter().rev().map(|(v, rate)| format!("{:.1},{:.1} ", x.at(*v), up(rate.low))));
    let _ = writeln!(out, "<polygon points=\"{outline}\" fill=\"#c8dcf0\"/>");
    line(out, points.iter().map(|(v, rate)| (x.at(*v), up(rate.value))), "#1f5fa0");
    for tick in y.ticks() {
        left_tick(out, y.at(tick), &si(tick, "", 3));
        if let Some(pitch) = super::pitch(tick).filter(|pitch| pitch.hearing == super::Hearing::Pitch) {
            text(
                out,
                WIDTH - RIGHT + 6.0,
                y.at(tick) + 4.0,
                "start",
                &format!("{} {}", pitch.note, signed(pitch.cents, 0)),
            );
        }
    }
    text(out, 8.0, RATE.0 - 6.0, "start", "firings/s (band: 95 %)");
    text(out, WIDTH - 8.0, RATE.0 - 6.0, "end", "pitch, cents");
}

fn jitter_panel(out: &mut String, sweep: &Sweep, x: &Axis) {
    let points: Vec<_> = sweep
        .settings
        .iter()
        .filter_map(|s| Some((s.supply_v?, 100.0 * s.period_jitter_s?.value / s.period_s?.value)))
        .collect();
    frame(out, JITTER);
    let high = points.iter().map(|point| point.1).filter(|share| share.is_finite()).fold(0.0, f64::max);
    if high <= 0.0 {
        text(out, 0.5 * (LEFT + WIDTH - RIGHT), JITTER.0 + 0.5 * JITTER.1, "middle", "no jitter stated");
        return;
    }
    let y = Axis { low: 0.0, high: 1.05 * high, from: JITTER.0 + JITTER.1, to: JITTER.0, logarithmic: false };
    line(out, points.iter().map(|(v, share)| (x.at(*v), y.at(*share))), "#a03f1f");
    for tick in y.ticks() {
        left_tick(out, y.at(tick), &si(tick, "", 2));
    }
    text(out, 8.0, JITTER.0 - 6.0, "start", "jitter, % of the period");
}

fn frame(out: &mut String, (top, height): (f64, f64)) {
    let width = WIDTH - LEFT - RIGHT;
    let _ = writeln!(
        out,
        "<rect x=\"{LEFT}\" y=\"{top}\" width=\"{width}\" height=\"{height}\" fill=\"none\" stroke=\"black\"/>"
    );
}

fn left_tick(out: &mut String, y: f64, label: &str) {
    let _ = writeln!(out, "<path d=\"M{LEFT} {y:.1}h-5\" stroke=\"black\"/>");
    text(out, LEFT - 8.0, y + 4.0, "end", label);
}

fn line(out: &mut String, points: impl Iterator<Item = (f64, f64)>, colour: &str) {
    let points: String = points.map(|(x, y)| format!("{x:.1},{y:.1} ")).collect();
    let _ = writeln!(out, "<polyline points=\"{points}\" fill=\"none\" stroke=\"{colour}\" stroke-width=\"2\"/>");
}

fn text(out: &mut String, x: f64, y: f64, anchor: &str, words: &str) {
    let safe = words.replace('&', "&amp;").replace('<', "&lt;").replace('>', "&gt;");
    let _ = writeln!(out, "<text x=\"{x:.1}\" y=\"{y:.1}\" text-anchor=\"{anchor}\">{safe}</text>");
}

#[cfg(test)]
mod tests {
    use super::super::sweep;
    use super::*;
    use crate::bench::parse;

    fn drawn(extra: &str, low_v: f64, high_v: f64) -> String {
        let text = format!(
            "title = \"A <bench> & more\"\nsupply.voltage = \"8 kV\"\ngap.voltage = \"5 kV\"\n\
             charging.resistance = \"10 MΩ\"\ncharging.capacitance = \"1 nF\"\n{extra}"
        );
        plot_svg(&sweep(&parse(&text, "test.toml").unwrap(), low_v, high_v, 40).unwrap())
    }

    #[test]
    fn the_drawing_holds_rate_pitch_jitter_and_locks_as_well_formed_text() {
        let extra = "gap.spread = \"1 %\"\nsupply.ripple = \"2 %\"\nsupply.ripple_frequency = \"100 Hz\"\n";
        let svg = drawn(extra, 4e3, 12e3);
        for part in ["A &lt;bench&gt; &amp; more", "#fff0c0", "#e8e8e8", "polygon", "G2", "8.00 kV", "jitter, %"] {
            assert!(svg.contains(part), "{part}");
        }
        assert!(!svg.contains("NaN") && !svg.contains("inf"));
        let mut depth = 0i32;
        for piece in svg.split('<').skip(1) {
            depth += if piece.starts_with('/') { -1 } else { i32::from(!piece.contains("/>")) };
        }
        assert_eq!(depth, 0);
    }

    #[test]
    fn a_range_without_firing_is_drawn_as_such() {
        let svg = drawn("", 1e3, 4e3);
        assert!(svg.contains("no rate that changes") && svg.contains("no jitter stated") && !svg.contains("NaN"));
    }
}
