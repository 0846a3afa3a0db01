//! The measurement as text that a person takes in at a glance: what was read, the verdict, the figures, the notes.

use super::budget::budget_text;
use super::{Figure, Measurement, Recording};
use crate::estimate::Estimate;
use crate::rhythm::{Reading, Verdict};
use std::fmt::Write;

/// Shown beside every voltage.
pub const HIGH_VOLTAGE_CAUTION: &str = "caution: kilovolts on a capacitor kill, with the supply off too. De-energise, \
     discharge with a rated stick, verify, ground. Local rules and qualified persons decide what is safe.";

/// Widest line.
const WIDTH: usize = 88;

/// Columns: labels and values are padded to these widths.
const LABEL: usize = 16;
const VALUE: usize = 26;

/// Stretches shown one by one; a recording full of breaks would hide its figures behind them.
const SHOWN_STRETCHES: usize = 6;

/// Minutes are what a person watches a drift over.
const SECONDS_PER_MINUTE: f64 = 60.0;

/// The whole report of one recording, ending with a line break.
#[must_use]
pub fn measurement_text(measurement: &Measurement) -> String {
    let reading = &measurement.reading;
    let mut text = format!("{}\n", recording_line(&measurement.recording));
    text.push_str(&wrapped(&verdict_line(reading), "  ", "  "));
    let rows = figure_rows(measurement);
    if !rows.is_empty() {
        text.push('\n');
    }
    for (label, value, aside) in rows {
        let line = format!("  {label:LABEL$}{value:VALUE$}{aside}");
        // Writing to a string cannot fail.
        let _ = writeln!(text, "{}", line.trim_end());
    }
    if reading.firing_rate_hz.is_some() {
        text.push_str("  (± is one standard uncertainty, .. the 95 % interval)\n");
    }
    for budget in &measurement.budget {
        text.push('\n');
        text.push_str(&budget_text(budget));
    }
    if !reading.notes.is_empty() {
        text.push('\n');
    }
    for note in &reading.notes {
        text.push_str(&wrapped(&format!("note: {note}"), "  ", "        "));
    }
    if measurement.gap_voltage_v.is_some() {
        text.push('\n');
        text.push_str(&wrapped(HIGH_VOLTAGE_CAUTION, "  ", "  "));
    }
    text
}

type Row = (String, String, String);

/// The figures as rows: name, value with its unit, and what stands beside it.
#[must_use]
pub fn figure_rows(measurement: &Measurement) -> Vec<(String, String, String)> {
    let mut rows = reading_rows(&measurement.reading);
    rows.extend(voltage_rows(measurement));
    rows.extend(count_rows(&measurement.reading));
    rows
}

fn row(label: &str, figure: &Figure, aside: String) -> Row {
    (label.to_owned(), figure.value_and_u(), aside)
}

fn verdict_line(reading: &Reading) -> String {
    let reason = &reading.reason;
    match reading.verdict {
        Verdict::Steady => format!("steady: {reason}"),
        Verdict::Unsteady => format!("unsteady: {reason}"),
        Verdict::Irregular => format!("irregular: {reason}"),
        // The reason says that there is none.
        Verdict::None => reason.clone(),
    }
}

/// What was read, in one line: file, length, sample rate, channel.
#[must_use]
pub fn recording_line(recording: &Recording) -> String {
    let Recording { file, duration_s, sample_rate_hz, channels, channel, from_s } = recording;
    let mut line = format!("{file}: {duration_s:.2} s at {} kHz", f64::from(*sample_rate_hz) / 1000.0);
    if *from_s > 0.0 {
        let _ = write!(line, ", from {from_s:.2} s");
    }
    if *channels > 1 {
        let _ = write!(line, ", channel {channel} of {channels}");
    }
    line
}

fn reading_rows(reading: &Reading) -> Vec<Row> {
    let mut rows = Vec::new();
    let seconds = |estimate| Figure::prefixed(estimate, "s");
    if let Some(rate) = reading.firing_rate_hz {
        let figure = Figure::plain(rate, "/s");
        rows.push(row("firing rate", &figure, figure.interval()));
    }
    if let Some(period) = reading.period_s {
        rows.push(row("period", &seconds(period), String::new()));
    }
    if let Some(jitter) = reading.period_jitter_s {
        let share = reading.period_s.map(|period| format!(", {} of the period", percent(jitter.value, period.value)));
        let figure = seconds(jitter);
        rows.push(row("period jitter", &figure, figure.interval() + &share.unwrap_or_default()));
    }
    if let Some(jitter) = reading.cycle_jitter_s {
        rows.push(row("cycle to cycle", &seconds(jitter), String::new()));
    }
    if let Some(mains) = reading.mains_locked_jitter_s {
        rows.push(row("mains-locked", &seconds(mains.jitter_s), format!("at {} Hz", trimmed(mains.frequency_hz, 2))));
    }
    if let Some(drift) = reading.drift_per_s {
        let per_minute = drift.scaled(100.0 * SECONDS_PER_MINUTE);
        rows.push(row("drift", &Figure::plain(per_minute, "% per minute"), String::new()));
    }
    if let Some(noise) = reading.timing_noise_s {
        rows.push(row("timing noise", &seconds(noise), "of one click, taken out of the jitter".to_owned()));
    }
    rows
}

fn voltage_rows(measurement: &Measurement) -> Vec<Row> {
    let mut rows = Vec::new();
    let volts = |estimate: Estimate| Figure::prefixed(estimate, "V");
    if let Some(voltage) = measurement.gap_voltage_v {
        rows.push(row("gap voltage", &volts(voltage), volts(voltage).interval()));
    }
    if let Some(spread) = measurement.gap_voltage_spread_v {
        let share = measurement.gap_voltage_v.map(|voltage| format!("{} of it", percent(spread.value, voltage.value)));
        rows.push(row("voltage spread", &volts(spread), share.unwrap_or_default()));
    }
    rows
}

fn count_rows(reading: &Reading) -> Vec<Row> {
    let mut rows = Vec::new();
    let plain = |label: &str, value: String| (label.to_owned(), value, String::new());
    let counts = reading.firings;
    if counts.on_rhythm + counts.missed + counts.extra > 0 {
        let value = format!("{} on the rhythm, {} missed, {} extra", counts.on_rhythm, counts.missed, counts.extra);
        rows.push(plain("firings", value));
    }
    if reading.stretches.len() > 1 {
        for stretch in reading.stretches.iter().take(SHOWN_STRETCHES) {
            rows.push(plain("fires", format!("{:.2} s .. {:.2} s", stretch.from_s, stretch.to_s)));
        }
        let more = reading.stretches.len().saturating_sub(SHOWN_STRETCHES);
        if more > 0 {
            rows.push(plain("fires", format!("and in {more} more stretches")));
        }
    }
    for train in &reading.other_trains {
        let mut aside = format!("clicks {} times as large", trimmed(train.relative_size, 2));
        if let Some(jitter) = train.period_jitter_s {
            let _ = write!(aside, ", jitter {}", Figure::prefixed(jitter, "s").value_and_u());
        }
        rows.push(row("another train", &Figure::plain(train.firing_rate_hz, "/s"), aside));
    }
    rows
}

/// A share in percent to three significant digits at most.
fn percent(part: f64, whole: f64) -> String {
    let share = 100.0 * part / whole;
    let decimals = if share.abs() < 0.1 {
        3
    } else if share.abs() < 10.0 {
        2
    } else {
        1
    };
    format!("{share:.decimals$} %")
}

/// A number without trailing zeros.
fn trimmed(value: f64, decimals: usize) -> String {
    let text = format!("{value:.decimals$}");
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

/// Text broken between words, `first` before the first line and `rest` before the others.
#[must_use]
pub fn wrapped(text: &str, first: &str, rest: &str) -> String {
    let mut out = String::new();
    let mut line = first.to_owned();
    let mut is_bare = true;
    for word in text.split_whitespace() {
        if !is_bare && line.chars().count() + 1 + word.chars().count() > WIDTH {
            out.push_str(&line);
            out.push('\n');
            line = rest.to_owned();
            is_bare = true;
        }
        if !is_bare {
            line.push(' ');
        }
        line.push_str(word);
        is_bare = false;
    }
    out + &line + "\n"
}

#[cfg(test)]
pub(super) mod tests {
    use super::*;
    use crate::report::FORMAT;
    use crate::rhythm::{FiringCounts, MainsJitter, OtherTrain, Stretch};

    /// A measurement in which every field is filled; the figures are made up.
    pub(in crate::report) fn measured() -> Measurement {
        Measurement {
            format: FORMAT.to_owned(),
            recording: Recording {
                file: "run.wav".to_owned(),
                duration_s: 10.0,
                sample_rate_hz: 44_100,
                channels: 2,
                channel: "left".to_owned(),
                from_s: 2.5,
            },
            reading: Reading {
                verdict: Verdict::Steady,
                reason: "one train with a jitter of 0.20 % of the period".to_owned(),
                firings: FiringCounts { on_rhythm: 4370, missed: 12, extra: 3 },
                firing_rate_hz: Some(Estimate::normal(437.21, 0.19)),
                period_s: Some(Estimate::normal(0.002_287_23, 1e-6)),
                period_jitter_s: Some(Estimate { value: 4.6e-6, u: 2e-7, low: 4.3e-6, high: 5.1e-6 }),
                cycle_jitter_s: Some(Estimate::normal(6.5e-6, 3e-7)),
                mains_locked_jitter_s: Some(MainsJitter {
                    jitter_s: Estimate::normal(1.2e-6, 3e-7),
                    frequency_hz: 100.0,
                }),
                drift_per_s: Some(Estimate::normal(2e-5, 3e-5)),
                timing_noise_s: Some(Estimate::normal(1.1e-6, 1e-7)),
                other_trains: vec![OtherTrain {
                    firing_rate_hz: Estimate::normal(120.31, 0.21),
                    period_jitter_s: None,
                    relative_size: 0.4,
                }],
                stretches: vec![Stretch { from_s: 0.2, to_s: 4.0 }, Stretch { from_s: 5.0, to_s: 9.8 }],
                notes: vec!["clipped 2.1 % of samples; turn the recording level down".to_owned()],
            },
            gap_voltage_v: Some(Estimate::normal(7103.0, 52.0)),
            gap_voltage_spread_v: Some(Estimate::normal(22.0, 1.5)),
            budget: vec![],
        }
    }

    #[test]
    fn the_report_shows_every_figure_with_unit_and_uncertainty() {
        let expected = "\
run.wav: 10.00 s at 44.1 kHz, from 2.50 s, channel left of 2
  steady: one train with a jitter of 0.20 % of the period

  firing rate     437.21 ± 0.19 /s          436.84 .. 437.58 /s
  period          2.2872 ± 0.0010 ms
  period jitter   4.60 ± 0.20 µs            4.30 .. 5.10 µs, 0.20 % of the period
  cycle to cycle  6.50 ± 0.30 µs
  mains-locked    1.20 ± 0.30 µs            at 100 Hz
  drift           0.12 ± 0.18 % per minute
  timing noise    1.10 ± 0.10 µs            of one click, taken out of the jitter
  gap voltage     7.103 ± 0.052 kV          7.001 .. 7.205 kV
  voltage spread  22.0 ± 1.5 V              0.31 % of it
  firings         4370 on the rhythm, 12 missed, 3 extra
  fires           0.20 s .. 4.00 s
  fires           5.00 s .. 9.80 s
  another train   120.31 ± 0.21 /s          clicks 0.4 times as large
  (± is one standard uncertainty, .. the 95 % interval)

  note: clipped 2.1 % of samples; turn the recording level down

  caution: kilovolts on a capacitor kill, with the supply off too. De-energise,
  discharge with a rated stick, verify, ground. Local rules and qualified persons decide
  what is safe.
";
        assert_eq!(measurement_text(&measured()), expected);
    }

    #[test]
    fn without_a_voltage_there_is_no_caution_and_without_a_figure_no_row() {
        let mut measurement = measured();
        measurement.gap_voltage_v = None;
        measurement.gap_voltage_spread_v = None;
        measurement.reading = Reading::none("no gap is heard: nothing stands out of the noise".to_owned());
        assert_eq!(
            measurement_text(&measurement),
            "run.wav: 10.00 s at 44.1 kHz, from 2.50 s, channel left of 2\n  \
             no gap is heard: nothing stands out of the noise\n"
        );
    }

    #[test]
    fn many_stretches_are_summed_up() {
        let mut measurement = measured();
        measurement.reading.stretches = (0..20).map(|k| Stretch { from_s: f64::from(k), to_s: 0.5 }).collect();
        let text = measurement_text(&measurement);
        assert_eq!(text.matches("fires  ").count(), SHOWN_STRETCHES + 1);
        assert!(text.contains("and in 14 more stretches"), "{text}");
    }

    #[test]
    fn no_line_of_running_text_is_wider_than_the_page() {
        let text = wrapped(&"word ".repeat(100), "  note: ", "        ");
        assert!(text.lines().all(|line| line.chars().count() <= WIDTH));
        assert_eq!(text.split_whitespace().count(), 101);
    }
}
