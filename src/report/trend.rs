//! The history of a gap as text and CSV; JSON is the [`Trend`] itself.

use super::text::{HIGH_VOLTAGE_CAUTION, wrapped};
use crate::bench::{si, signed, with_uncertainty};
use crate::trend::wear::Shape;
use crate::trend::{Alarm, Chart, Charted, Limits, Point, Trend, advice};
use std::fmt::Write;
use std::io;

/// Entries in the table; the CSV has all.
const SHOWN: usize = 20;
/// Width of the labels.
const LABEL: usize = 16;
/// Alarms told one by one.
const SHOWN_ALARMS: usize = 5;
/// Columns between the limits in the drawing of an entry, and beyond them on each side.
const INSIDE: f64 = 16.0;
const OUTSIDE: usize = 3;

/// False alarms in 100 entries of a gap that does not change: one in 370 (3σ) and one in 465 (cumulative sums of k = 0.5, h = 5).
const FALSE_ALARMS_PER_100: f64 = 100.0 / 370.4 + 100.0 / 465.0;

/// Header of the CSV; what is not known is left empty.
pub const TREND_HEADER: &str = "time,file,firing_h,supply_v,gap_voltage_v,standard_air_v,air_density,spacing_m,spacing_u_m,\
     firing_rate_hz,relative_jitter,missed_share,charted,moving_range,score,cusum_high,cusum_low,outside";

/// The report, ending with the sentence that says what to do.
#[must_use]
pub fn trend_text(log: &str, trend: &Trend) -> String {
    let mut text = heading(log, trend);
    for (label, value) in trend_rows(trend) {
        text.push_str(&wrapped(&value, &format!("  {label:LABEL$}"), &" ".repeat(LABEL + 2)));
    }
    if !trend.points.is_empty() {
        text.push('\n');
        table(&mut text, trend);
        text.push('\n');
    }
    for note in &trend.notes {
        text.push_str(&wrapped(&format!("note: {note}"), "  ", "        "));
    }
    if trend.charted == Charted::GapVoltage {
        text.push_str(&wrapped(HIGH_VOLTAGE_CAUTION, "  ", "  "));
    }
    if !text.ends_with("\n\n") {
        text.push('\n');
    }
    text + &wrapped(&trend.advice, "  ", "  ")
}

fn heading(log: &str, trend: &Trend) -> String {
    let mut text = format!("{log}: {} {}", trend.entries, if trend.entries == 1 { "entry" } else { "entries" });
    if !trend.title.is_empty() {
        let _ = write!(text, " of \"{}\"", trend.title);
    }
    if let (Some(first), Some(last)) = (trend.points.first(), trend.points.last()) {
        let _ = write!(text, ", {} to {}", first.time.day(), last.time.day());
    }
    text.push('\n');
    let air = if trend.charted == Charted::GapVoltage { ", reduced to standard air" } else { "" };
    let _ = writeln!(text, "  charted: {}{air}\n", trend.charted.words());
    text
}

type Row = (&'static str, String);

/// The findings as rows: name and value; the name is empty where a row goes on with the one before.
#[must_use]
pub fn trend_rows(trend: &Trend) -> Vec<(&'static str, String)> {
    let mut rows: Vec<Row> = Vec::new();
    let of = |value: f64| advice::amount(trend.charted, value, 5);
    if let Some(limits) = &trend.limits {
        rows.extend(limit_rows(trend, limits));
    }
    if let Some(change) = &trend.change_point {
        let difference = &change.difference;
        let interval = format!("{} .. {}", of(difference.low), of(difference.high));
        let when = format!("before {}, 95 % from {} to {}", change.time.day(), change.from.day(), change.to.day());
        rows.push((
            "step",
            format!("{} to {}, by {} ({interval}); {when}", of(change.before), of(change.after), of(difference.value)),
        ));
    }
    rows.extend(wear_row(trend));
    rows.extend(air_row(trend));
    if let Some(spacing) = &trend.spacing {
        let metres = |e: &crate::estimate::Estimate| with_uncertainty(e.value, e.u, "m");
        let change =
            spacing.change_m.as_ref().map_or_else(String::new, |c| format!("; changed by {} at the step", metres(c)));
        rows.push(("implied spacing", format!("{} by the last entry{change}", metres(&spacing.last_m))));
    }
    for figure in &trend.beside {
        let of = |value: f64| advice::amount(figure.figure, value, 5);
        let verdict = if figure.outside == 0 { "within" } else { "outside" };
        let (low, high) = figure.limits;
        rows.push((
            figure.figure.words(),
            format!(
                "{} at first, now {}, {verdict} {} .. {}",
                of(figure.reference),
                of(figure.last),
                of(low),
                of(high)
            ),
        ));
    }
    rows
}

fn limit_rows(trend: &Trend, limits: &Limits) -> Vec<Row> {
    let of = |value: f64| advice::amount(trend.charted, value, 5);
    let from = match limits.entries {
        0 => "stated".to_owned(),
        entries => format!("of the first {entries} entries"),
    };
    let share = 100.0 * limits.sigma / limits.centre;
    let wide = trend.wide_moving_ranges;
    let mut rows = vec![
        ("limits", format!("{} .. {}, {from}; centre {}", of(limits.low), of(limits.high), of(limits.centre))),
        (
            "moving range",
            format!(
                "{} in the mean, so σ {} ({share:.2} %) from entry to entry; {wide} above {}",
                of(limits.moving_range),
                of(limits.sigma),
                of(limits.moving_range_high)
            ),
        ),
    ];
    let expected = FALSE_ALARMS_PER_100 * trend.entries as f64 / 100.0;
    let count = trend.alarms.len();
    let chance = format!("{count} (an unchanged gap gives {expected:.1} in so many entries)");
    rows.push(("alarms", chance));
    let hidden = count.saturating_sub(SHOWN_ALARMS);
    for alarm in trend.alarms.iter().skip(hidden) {
        rows.push(("", alarm_text(alarm)));
    }
    if hidden > 0 {
        rows.push(("", format!("and {hidden} earlier")));
    }
    rows
}

fn alarm_text(alarm: &Alarm) -> String {
    let what = match (alarm.chart, alarm.side > 0) {
        (Chart::Individuals, true) => "above the upper limit",
        (Chart::Individuals, false) => "below the lower limit",
        (Chart::Cusum, true) => "cumulative sum says higher",
        (Chart::Cusum, false) => "cumulative sum says lower",
    };
    let entries = if alarm.entries == 1 { "1 entry".to_owned() } else { format!("{} entries", alarm.entries) };
    format!("{}: {what}, {entries}{}", alarm.since.day(), if alarm.stands { ", stands" } else { "" })
}

fn wear_row(trend: &Trend) -> Option<Row> {
    let wear = trend.wear.as_ref()?;
    let of = |value: f64| advice::amount(trend.charted, value, 3);
    let beside = if wear.shape == Shape::Step { " beside the step" } else { "" };
    let recorded = if wear.hour_meter { "by the hour meter" } else { "recorded; state --hour-meter to count the rest" };
    let slope = &wear.per_hour;
    Some((
        "slope",
        format!(
            "{} per hour of firing{beside} (95 %: {} .. {}), over {:.2} h {recorded}",
            of(slope.value),
            of(slope.low),
            of(slope.high),
            wear.hours
        ),
    ))
}

fn air_row(trend: &Trend) -> Option<Row> {
    let air = trend.air.as_ref()?;
    let mut text = format!(
        "relative density {:.3} .. {:.3}; scatter {:.2} % as measured, {:.2} % in standard air",
        air.density.0,
        air.density.1,
        100.0 * air.scatter_as_measured,
        100.0 * air.scatter_reduced
    );
    if let Some(exponent) = &air.exponent {
        let _ = write!(
            text,
            "; the voltage follows the law of the air with the power {}",
            with_uncertainty(exponent.value, exponent.u, "")
        );
    }
    if let (Some(all), Some(by_air)) = (air.change_as_measured, air.change_by_air) {
        let _ = write!(
            text,
            "; of the step of {} % as measured the air explains {} %",
            signed(100.0 * all, 2),
            signed(100.0 * by_air, 2)
        );
    }
    Some(("air", text))
}

/// The last entries with their place between the limits.
fn table(text: &mut String, trend: &Trend) {
    let hidden = trend.points.len().saturating_sub(SHOWN);
    if hidden > 0 {
        let _ = writeln!(text, "  the last {SHOWN} of {} entries (--csv has all)", trend.points.len());
    }
    let is_voltage = trend.charted == Charted::GapVoltage;
    let measured = if is_voltage { "measured" } else { "" };
    let _ = writeln!(
        text,
        "  {:17}{measured:>10}{:>11}{:>10}{:>8}{:>8}   chart",
        "time", "charted", "rate", "CUSUM+", "CUSUM-"
    );
    for point in &trend.points[hidden..] {
        let measured = point.gap_voltage_v.filter(|_| is_voltage).map_or_else(String::new, |v| si(v, "V", 5));
        let rate = point.firing_rate_hz.map_or_else(String::new, |rate| format!("{rate:.2}"));
        let time = point.time.to_string();
        let _ = writeln!(
            text,
            "  {:17}{measured:>10}{:>11}{rate:>10}{:>8.1}{:>8.1}   {}",
            time.get(..16).unwrap_or(&time).replace('T', " "),
            advice::amount(trend.charted, point.value, 5),
            point.cusum_high,
            point.cusum_low,
            trend.limits.as_ref().map_or_else(String::new, |limits| drawn(point, limits)),
        );
    }
}

/// An entry as a mark between two limits.
fn drawn(point: &Point, limits: &Limits) -> String {
    let width = INSIDE as usize + 2 * OUTSIDE + 1;
    let place = (point.value - limits.low) / (limits.high - limits.low) * INSIDE;
    let place =
        if place.is_finite() { place.round().clamp(-(OUTSIDE as f64), INSIDE + OUTSIDE as f64) } else { 0.5 * INSIDE };
    let mut line = vec![' '; width];
    line[OUTSIDE] = '|';
    line[OUTSIDE + INSIDE as usize / 2] = '·';
    line[OUTSIDE + INSIDE as usize] = '|';
    line[(place + OUTSIDE as f64) as usize] = if point.outside == 0 { 'o' } else { 'X' };
    line.into_iter().collect::<String>().trim_end().to_owned()
}

/// All entries as CSV.
///
/// # Errors
/// Those of the writer.
pub fn write_trend_csv(out: &mut impl io::Write, trend: &Trend) -> io::Result<()> {
    writeln!(out, "{TREND_HEADER}")?;
    for point in &trend.points {
        let spacing = point.spacing_m.as_ref();
        let figures = [
            Some(point.hours),
            point.supply_v,
            point.gap_voltage_v,
            point.standard_air_v,
            point.air_density,
            spacing.map(|spacing| spacing.value),
            spacing.map(|spacing| spacing.u),
            point.firing_rate_hz,
            point.relative_jitter,
            point.missed_share,
            Some(point.value),
            point.moving_range,
            point.score,
            Some(point.cusum_high),
            Some(point.cusum_low),
        ];
        write!(out, "{},{}", point.time, quoted(&point.file))?;
        for figure in figures {
            out.write_all(b",")?;
            if let Some(figure) = figure.filter(|figure| figure.is_finite()) {
                write!(out, "{}", rounded(figure))?;
            }
        }
        writeln!(out, ",{}", point.outside)?;
    }
    Ok(())
}

/// Eight significant digits: more than any figure is worth, and no tail of rounding. A whole number times or over an exact power
/// of ten is the nearest number to that decimal, so that it is written with these digits and no more.
fn rounded(value: f64) -> f64 {
    /// Powers of ten up to this one are exact.
    const EXACT: i32 = 22;
    let power = 7 - value.abs().log10().floor() as i32;
    match power {
        _ if value == 0.0 || power.abs() > EXACT => value,
        0.. => (value * 10f64.powi(power)).round() / 10f64.powi(power),
        _ => (value / 10f64.powi(-power)).round() * 10f64.powi(-power),
    }
}

/// A field in quotes where CSV needs them (RFC 4180).
fn quoted(field: &str) -> String {
    if field.contains([',', '"', '\n', '\r']) {
        format!("\"{}\"", field.replace('"', "\"\""))
    } else {
        field.to_owned()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn eight_digits_are_written_without_a_tail() {
        for (value, written) in [
            (7_103.123_456_789, "7103.1235"),
            (0.1 + 0.2, "0.3"),
            (-1.234_567_891e-5, "-0.000012345679"),
            (9.999_999_999, "10"),
            (123_456_789_012.0, "123456790000"),
            (0.0, "0"),
            (1e-30, "0.000000000000000000000000000001"),
        ] {
            assert_eq!(rounded(value).to_string(), written);
        }
        // As the decimal formatting of the standard library rounds, for many sizes.
        for k in 1..20_000 {
            let value = (f64::from(k) * 0.377).rem_euclid(40.0).exp2() * 1e-6;
            let slow: f64 = format!("{value:.7e}").parse().expect("a number");
            assert!((rounded(value) - slow).abs() <= 1.1e-7 * value, "{value}");
            assert!(rounded(value).to_string().trim_start_matches(['0', '.']).replace('.', "").len() <= 8, "{value}");
        }
    }
}
