//! Collects the evidence as audio and events go by.

use super::clicks;
use super::excerpts::{Excerpt, Picker, STRETCHES, Why};
use super::trace::Growing;
use super::{Course, EVIDENCE_FORMAT, Evidence, FiringPoint, Oddity, Thinned, Trace, growth, short, spectrum};
use crate::firing::{Event, EventKind};
use std::collections::VecDeque;

/// Audio that is held until its events come, s: a piece that begins a while before its event must be there still.
pub const HOLD_S: f64 = crate::measure::LATEST_S + 5.0;
/// Firings and oddities that are kept at most.
const MOST_FIRINGS: usize = 3000;
const MOST_ODDITIES: usize = 400;
/// Runs of periods at most.
const MOST_RUNS: usize = 500;
/// Audio shown where nothing was found, s.
const NOTHING_S: f64 = 0.06;

/// Collects evidence: audio first, then the events that it gave.
pub struct Collector {
    from_s: f64,
    rate_hz: f64,
    held: VecDeque<f32>,
    held_from: u64,
    audio: Growing,
    spectrum: Option<spectrum::Meter>,
    clicks: Option<clicks::Meter>,
    picker: Picker,
    excerpts: Vec<Excerpt>,
    firings: Thinned<FiringPoint>,
    course: Runs,
    oddities: Thinned<Oddity>,
    growth: growth::Meter,
    period_s: Option<f64>,
    missed: u64,
}

impl Collector {
    /// A collector; times of events count from the start of the file, of which `from_s` is heard first.
    #[must_use]
    pub fn new(from_s: f64) -> Self {
        Self {
            from_s,
            rate_hz: 1.0,
            held: VecDeque::new(),
            held_from: 0,
            audio: Growing::default(),
            spectrum: None,
            clicks: None,
            picker: Picker::default(),
            excerpts: Vec::new(),
            firings: Thinned::new(MOST_FIRINGS),
            course: Runs { of: 1, runs: Vec::new() },
            oddities: Thinned::new(MOST_ODDITIES),
            growth: growth::Meter::default(),
            period_s: None,
            missed: 0,
        }
    }

    /// Takes audio before the analyzer gives the events in it.
    pub fn hear(&mut self, mono: &[f32], sample_rate_hz: u32) {
        self.rate_hz = f64::from(sample_rate_hz.max(1));
        let rate_hz = self.rate_hz;
        self.audio.push(mono);
        self.spectrum.get_or_insert_with(|| spectrum::Meter::new(rate_hz)).push(mono);
        self.held.extend(mono);
        let most = (HOLD_S * rate_hz) as usize + mono.len();
        if self.held.len() > most {
            let gone = self.held.len() - most;
            self.held.drain(..gone);
            self.held_from += gone as u64;
        }
    }

    /// Takes an event with the gap voltage that its period implies.
    pub fn event(&mut self, event: &Event, gap_voltage_v: Option<f64>) {
        match event.kind {
            EventKind::Firing => self.firing(event, gap_voltage_v),
            kind => {
                self.missed += u64::from(kind == EventKind::Missed);
                self.oddities.push(Oddity { time_s: short(event.time_s, 9), kind });
            }
        }
        self.picker.push(event, self.period_s);
        self.fill_excerpts();
    }

    fn firing(&mut self, event: &Event, gap_voltage_v: Option<f64>) {
        self.period_s = self.period_s.or(event.period_s);
        self.growth.push(event.time_s, event.period_s, std::mem::take(&mut self.missed));
        if let Some(period_s) = event.period_s {
            self.course.push(event.time_s, period_s);
            if self.firings.wants_next() {
                self.firings.push(FiringPoint {
                    time_s: short(event.time_s, 9),
                    period_s: short(period_s, 7),
                    size: short(event.size, 4),
                    gap_voltage_v: gap_voltage_v.map(|v| short(v, 6)),
                });
            } else {
                self.firings.skip();
            }
        }
        let Some(period_s) = self.period_s.filter(|_| !self.held.is_empty()) else { return };
        let rate_hz = self.rate_hz;
        let meter = self.clicks.get_or_insert_with(|| clicks::Meter::new(period_s, rate_hz));
        let position = (event.time_s - self.from_s) * rate_hz;
        let (first, count) = meter.range(position);
        let Some(start) = (first as i64).checked_sub(self.held_from as i64).filter(|start| *start >= 0) else { return };
        if start as usize + count <= self.held.len() {
            let samples: Vec<f32> = self.held.range(start as usize..start as usize + count).copied().collect();
            meter.push(position, first, &samples);
        }
    }

    fn fill_excerpts(&mut self) {
        for (from_s, length_s, why, events) in self.picker.take() {
            let audio = self.piece(from_s, length_s);
            if !audio.low.is_empty() {
                self.excerpts.push(Excerpt { why, audio, events });
            }
        }
    }

    /// A piece of the audio that is held.
    fn piece(&self, from_s: f64, length_s: f64) -> Trace {
        let first = (((from_s - self.from_s) * self.rate_hz) as u64).max(self.held_from);
        let start = ((first - self.held_from) as usize).min(self.held.len());
        let end = (start + (length_s * self.rate_hz) as usize).min(self.held.len());
        let samples: Vec<f32> = self.held.range(start..end).copied().collect();
        Trace::of(&samples, self.from_s + first as f64 / self.rate_hz, self.rate_hz, STRETCHES)
    }

    /// What was collected.
    #[must_use]
    pub fn finish(mut self) -> Evidence {
        self.picker.finish();
        self.fill_excerpts();
        if self.excerpts.is_empty() && !self.held.is_empty() {
            // The middle of what is held: no switching on or off.
            let middle_s = self.from_s + (self.held_from as f64 + 0.5 * self.held.len() as f64) / self.rate_hz;
            let audio = self.piece(middle_s - 0.5 * NOTHING_S, NOTHING_S);
            self.excerpts.push(Excerpt { why: Why::Nothing, audio, events: Vec::new() });
        }
        Evidence {
            format: EVIDENCE_FORMAT.to_owned(),
            audio: self.audio.finish(self.from_s, self.rate_hz),
            click: self.clicks.and_then(clicks::Meter::finish),
            excerpts: self.excerpts,
            firings: self.firings,
            course: self.course.finish(),
            oddities: self.oddities,
            growth: self.growth.finish(),
            spectrum: self.spectrum.and_then(|meter| meter.finish(self.rate_hz)),
        }
    }
}

/// All single periods in runs of equal number, which doubles when there are too many runs.
struct Runs {
    of: u64,
    runs: Vec<(Course, u64)>,
}

impl Runs {
    fn push(&mut self, time_s: f64, period_s: f64) {
        if self.runs.last().is_none_or(|last| last.1 >= self.of) {
            if self.runs.len() == MOST_RUNS {
                self.runs = self.runs.chunks(2).map(|two| joined(two[0], two[1])).collect();
                self.of *= 2;
            }
            let alone = Course { from_s: time_s, to_s: time_s, low_s: period_s, high_s: period_s, mean_s: period_s };
            self.runs.push((alone, 1));
        } else if let Some(last) = self.runs.last_mut() {
            let alone = Course { from_s: time_s, to_s: time_s, low_s: period_s, high_s: period_s, mean_s: period_s };
            *last = joined(*last, (alone, 1));
        }
    }

    fn finish(self) -> Vec<Course> {
        let rounded = |course: Course| Course {
            from_s: short(course.from_s, 7),
            to_s: short(course.to_s, 7),
            low_s: short(course.low_s, 7),
            high_s: short(course.high_s, 7),
            mean_s: short(course.mean_s, 8),
        };
        self.runs.into_iter().map(|(course, _)| rounded(course)).collect()
    }
}

fn joined(one: (Course, u64), two: (Course, u64)) -> (Course, u64) {
    let n = one.1 + two.1;
    let mean_s = (one.0.mean_s * one.1 as f64 + two.0.mean_s * two.1 as f64) / n as f64;
    let (low_s, high_s) = (one.0.low_s.min(two.0.low_s), one.0.high_s.max(two.0.high_s));
    (Course { from_s: one.0.from_s, to_s: two.0.to_s, low_s, high_s, mean_s }, n)
}
