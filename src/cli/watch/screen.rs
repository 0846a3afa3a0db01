//! What a person sees of a watch, as lines of text: nothing here knows a terminal, so that tests read what is shown.

use crate::report::Figure;
use crate::watch::{Change, Changed, Glance, State, Trend};
#[cfg(feature = "live-view")]
use std::collections::VecDeque;

/// One line about a glance.
pub(super) fn line(glance: &Glance) -> String {
    let mut parts = vec![format!("{:8.1} s", glance.time_s), state(glance).to_owned()];
    parts.extend(rate(glance));
    parts.extend(figures(glance).into_iter().map(|(name, value)| format!("{name} {value}")));
    parts.extend(glance.changes.iter().map(change));
    parts.extend(glance.alarms.iter().map(|alarm| format!("LIMIT {}: {}", alarm.limit, alarm.of.text(alarm.value))));
    parts.join("  ")
}

/// What the gap is doing, in words.
fn state(glance: &Glance) -> &'static str {
    match (glance.state, glance.trend) {
        (State::Listening, _) => "listening",
        (State::Firing, None) => "firing",
        (State::Firing, Some(Trend::Steady)) => "firing, holding",
        (State::Firing, Some(Trend::Rising)) => "firing, rising",
        (State::Firing, Some(Trend::Falling)) => "firing, falling",
        (State::Irregular, _) => "clicks without a rhythm",
        (State::NotFiring, _) => "NOT FIRING",
    }
}

/// The rate with its uncertainty.
fn rate(glance: &Glance) -> Option<String> {
    glance.reading.firing_rate_hz.map(|rate| Figure::plain(rate, "/s").value_and_u())
}

/// The other figures, with their names.
fn figures(glance: &Glance) -> Vec<(&'static str, String)> {
    let reading = &glance.reading;
    let mut figures = Vec::new();
    if let (Some(jitter), Some(period)) = (reading.period_jitter_s, reading.period_s) {
        figures.push(("jitter", Figure::plain(jitter.scaled(100.0 / period.value), "%").value_and_u()));
    }
    if let Some(voltage) = glance.gap_voltage_v {
        figures.push(("gap voltage", Figure::prefixed(voltage, "V").value_and_u()));
    }
    let share = |share: f64| format!("{:.1} %", 100.0 * share);
    figures.extend(glance.missed_share.map(|missed| ("missed", share(missed))));
    figures.extend(glance.extra_share.map(|extra| ("extra", share(extra))));
    figures.extend(reading.other_trains.first().map(|other| {
        ("second train", format!("{:.2} /s, {:.1} times as large", other.firing_rate_hz.value, other.relative_size))
    }));
    figures
}

/// A change in words.
fn change(change: &Change) -> String {
    let at = format!("at {:.1} s", change.time_s);
    match change.what {
        Changed::Began => format!("began to fire {at}"),
        Changed::Stopped => format!("stopped {at}"),
        Changed::LostRhythm => format!("rhythm lost {at}"),
        Changed::Rate { before_hz, after_hz } => format!("rate went from {before_hz:.1} to {after_hz:.1} /s {at}"),
        Changed::SecondTrain { rate_hz } => format!("a second train of {rate_hz:.1} /s {at}"),
        Changed::Locked { line_hz } => format!("locked to the mains of {line_hz:.0} Hz {at}"),
        Changed::Unlocked => format!("no longer locked to the mains {at}"),
        Changed::AudioLost => format!("audio lost {at}: counted anew"),
    }
}

/// Everything that is shown at one moment.
#[cfg(feature = "live-view")]
#[derive(Debug, Clone, Default)]
pub(super) struct Shown {
    /// What is watched.
    pub name: String,
    pub glance: Option<Glance>,
    /// Rates of the last minute, one a glance; none where there was none.
    pub rates_hz: VecDeque<Option<f64>>,
    /// Time between two glances, s.
    pub every_s: f64,
    /// What was told, newest last.
    pub messages: VecDeque<String>,
    /// The figures are held.
    pub held: bool,
    /// What is being typed, with its question.
    pub typed: Option<(&'static str, String)>,
    pub supply: Option<String>,
}

#[cfg(feature = "live-view")]
impl Shown {
    /// Messages that are kept.
    const MESSAGES: usize = 50;

    /// Takes a glance.
    pub fn take(&mut self, glance: Glance) {
        for news in &glance.changes {
            self.tell(change(news));
        }
        self.rates_hz
            .push_back(glance.reading.firing_rate_hz.filter(|_| glance.state == State::Firing).map(|r| r.value));
        while self.rates_hz.len() as f64 * self.every_s > 60.0 {
            self.rates_hz.pop_front();
        }
        if !self.held || self.glance.is_none() {
            self.glance = Some(glance);
        }
    }

    /// Adds a message.
    pub fn tell(&mut self, message: String) {
        self.messages.push_back(message);
        if self.messages.len() > Self::MESSAGES {
            self.messages.pop_front();
        }
    }

    /// The screen as lines, each at most `width` characters wide, `height` of them at most.
    pub fn lines(&self, width: usize, height: usize) -> Vec<String> {
        let mut lines = vec![self.head(width)];
        match &self.glance {
            Some(glance) => self.body(glance, width, height, &mut lines),
            None => lines.push("  waiting for audio".to_owned()),
        }
        // What was told fills what is left, the newest at its end; the keys stay at the foot.
        let room = height.saturating_sub(lines.len() + 1);
        let mut messages: Vec<String> = Vec::new();
        for message in self.messages.iter().rev() {
            let rows = wrapped_to(message, width);
            if messages.len() + rows.len() > room.saturating_sub(1) {
                break;
            }
            messages.splice(0..0, rows);
        }
        if !messages.is_empty() {
            lines.push(String::new());
            lines.append(&mut messages);
        }
        lines.truncate(height.saturating_sub(1));
        lines.resize(height.saturating_sub(1), String::new());
        lines.push(self.foot());
        lines.into_iter().map(|line| line.chars().take(width).collect()).collect()
    }

    fn head(&self, width: usize) -> String {
        let time_s = self.glance.as_ref().map_or(0.0, |glance| glance.time_s);
        let clock = format!("{:.0}:{:02.0}", (time_s / 60.0).floor(), (time_s % 60.0).floor());
        let held = if self.held { "  HELD" } else { "" };
        let supply = self.supply.as_ref().map(|supply| format!("  supply {supply}")).unwrap_or_default();
        let left = format!(" {}{supply}{held}", self.name);
        let gap = width.saturating_sub(left.chars().count() + clock.len() + 1).max(1);
        format!("{left}{}{clock}", " ".repeat(gap))
    }

    fn body(&self, glance: &Glance, width: usize, height: usize, lines: &mut Vec<String>) {
        let tall = height >= 18;
        if tall {
            lines.push(String::new());
        }
        let number = glance.reading.firing_rate_hz.map(|rate| number(rate.value, rate.u));
        match number {
            Some(number) if tall && width >= 8 * number.len() => {
                lines.extend(large(&number).map(|row| format!("  {row}")));
                lines.push(String::new());
            }
            _ => {}
        }
        let rate = rate(glance).map(|rate| format!("{rate}   ")).unwrap_or_default();
        lines.push(format!("  {rate}{}", state(glance)));
        if let Some(rate) = glance.reading.firing_rate_hz {
            lines.push(format!("  95 %: {}", Figure::plain(rate, "/s").interval()));
        } else {
            lines.extend(wrapped_to(&glance.reading.reason, width));
        }
        for (name, value) in figures(glance) {
            lines.push(format!("  {name:<14}{value}"));
        }
        lines.push(format!("  {:<14}{}", "level", level(glance)));
        for alarm in &glance.alarms {
            lines.push(format!("  !! {} is {}, limit {}", alarm.of.name(), alarm.of.text(alarm.value), alarm.limit));
        }
        if tall {
            lines.push(String::new());
        }
        lines.extend(strip(&self.rates_hz, width.saturating_sub(4)).map(|strip| format!("  {strip}")));
        for note in &glance.reading.notes {
            lines.extend(wrapped_to(note, width));
        }
        if glance.gap_voltage_v.is_some() {
            lines.extend(wrapped_to(crate::report::HIGH_VOLTAGE_CAUTION, width));
        }
    }

    fn foot(&self) -> String {
        match &self.typed {
            Some((question, text)) => format!(" {question}: {text}_   (Enter: done, Esc: not)"),
            None => " q quit   h hold   m mark   s supply   r reset".to_owned(),
        }
    }
}

#[cfg(feature = "live-view")]
fn wrapped_to(text: &str, width: usize) -> Vec<String> {
    let mut lines = Vec::new();
    let mut line = String::new();
    for word in text.split_whitespace() {
        if !line.is_empty() && line.chars().count() + word.chars().count() + 3 > width {
            lines.push(format!("  {line}"));
            line.clear();
        }
        if !line.is_empty() {
            line.push(' ');
        }
        line.push_str(word);
    }
    lines.push(format!("  {line}"));
    lines
}

#[cfg(feature = "live-view")]
fn level(glance: &Glance) -> String {
    let db = |level: Option<f64>| level.map_or("silent".to_owned(), |db| format!("{db:.0} dBFS"));
    let clipped = 100.0 * glance.level.clipped_share;
    let clipped = if clipped > 0.0 { format!(", CLIPPED {clipped:.2} %: turn it down") } else { String::new() };
    format!("peak {}, rms {}{clipped}", db(glance.level.peak_dbfs), db(glance.level.rms_dbfs))
}

/// A rate with as many digits as its uncertainty leaves.
#[cfg(feature = "live-view")]
fn number(value: f64, u: f64) -> String {
    let decimals = (-u.max(1e-6).log10().floor()).clamp(0.0, 3.0) as usize;
    format!("{value:.decimals$}")
}

/// The rates of the last minute as a row of blocks between their least and their largest.
#[cfg(feature = "live-view")]
fn strip(rates_hz: &VecDeque<Option<f64>>, width: usize) -> Option<String> {
    const BLOCKS: [char; 8] = ['▁', '▂', '▃', '▄', '▅', '▆', '▇', '█'];
    let known = || rates_hz.iter().flatten().copied();
    let (low, high) = (known().reduce(f64::min)?, known().reduce(f64::max)?);
    let label = format!(" {low:.1}..{high:.1} /s in the last minute");
    let shown = width.saturating_sub(label.chars().count()).clamp(8, 60);
    let from = rates_hz.len().saturating_sub(shown);
    // Less than a thousandth is shown flat: noise must not look like a mountain range.
    let span = (high - low).max(1e-3 * high);
    let middle = 0.5 * (high + low);
    let block = |rate: f64| BLOCKS[((0.5 + (rate - middle) / span) * 7.0).round().clamp(0.0, 7.0) as usize];
    let blocks: String = rates_hz.iter().skip(from).map(|rate| rate.map_or('·', block)).collect();
    Some(format!("{blocks}{label}"))
}

/// A number in digits three rows high.
#[cfg(feature = "live-view")]
fn large(number: &str) -> [String; 3] {
    const DIGITS: [[&str; 3]; 10] = [
        ["█▀█", "█ █", "▀▀▀"],
        ["▀█ ", " █ ", "▀▀▀"],
        ["▀▀█", "█▀▀", "▀▀▀"],
        ["▀▀█", " ▀█", "▀▀▀"],
        ["█ █", "▀▀█", "  ▀"],
        ["█▀▀", "▀▀█", "▀▀▀"],
        ["█▀▀", "█▀█", "▀▀▀"],
        ["▀▀█", "  █", "  ▀"],
        ["█▀█", "█▀█", "▀▀▀"],
        ["█▀█", "▀▀█", "▀▀▀"],
    ];
    [0, 1, 2].map(|row| {
        number
            .chars()
            .map(|c| match c.to_digit(10) {
                Some(digit) => format!("{} ", DIGITS[digit as usize][row]),
                None => if row == 2 { "▀ " } else { "  " }.to_owned(),
            })
            .collect()
    })
}
