//! The gap as it runs: what it is doing now, with honest figures of the last moments, and what has changed.
//!
//! Audio is pushed as it comes. A [`follow::Follower`] keeps the train in steps of a quarter of a second; the firings since the last
//! change are the [`present::Present`], from which the figures are made with the same statistics as those of a recording. Beside
//! it the whole is measured as [`crate::measure`] does, for the summary at the end. Memory is bounded, whatever comes.
//!
//! Knows nothing of files, terminals or devices.

pub mod change;
pub mod follow;
mod glance;
mod level;
pub mod limit;
mod looks;
pub mod present;

pub use glance::{Change, Changed, FORMAT, Glance, Level, State, Trend};

use crate::estimate::{COVERAGE_95, Estimate};
use crate::measure::{self, Measurer};
use crate::rhythm::{Reading, locked_to};
use crate::voltage::VoltageMeter;
use change::Scatter;
use follow::{Follower, Found};
use level::LevelMeter;
use limit::Limits;
use present::Present;

/// A look of this length that finds nothing says that the gap does not fire, s.
const NOTHING_S: f64 = 4.0;
/// A rhythm that is lost and found at another rate within this time made a step, s.
const STEP_WITHIN_S: f64 = 3.0;
/// Standard uncertainties from which a drift is said.
const DRIFT_SAID: f64 = 3.0;
/// Glances in a row without a lock after which it is over.
const UNLOCKED: u32 = 3;
/// A relative difference of rates that is a step, not the same rate found again.
const OTHER_RATE: f64 = 2e-3;

/// How to watch.
#[derive(Debug, Clone, Default)]
pub struct Options {
    /// Voltmeter of the bench, if there is one.
    pub meter: Option<VoltageMeter>,
    /// The sample clock is right within this share.
    pub clock: f64,
    /// Limits.
    pub limits: Limits,
}

/// What a watch ends with.
#[derive(Debug, Clone)]
pub struct Summary {
    /// Where it begins, s.
    pub from_s: f64,
    /// Everything since the start or the last reset, as [`crate::measure`] reads it.
    pub reading: Reading,
    /// Gap voltage and its spread, V.
    pub gap_voltage_v: (Option<Estimate>, Option<Estimate>),
}

/// A rhythm that was lost.
#[derive(Debug, Clone, Copy)]
struct Lost {
    rate_hz: f64,
    last_s: f64,
    clicks_go_on: Option<bool>,
}

impl Lost {
    /// True if a look of this length that found nothing says that the gap does not fire.
    fn is_over(&self, duration_s: f64) -> bool {
        self.clicks_go_on != Some(true) && duration_s >= (3.0 / self.rate_hz).min(NOTHING_S)
    }
}

/// The watch.
pub struct Watch {
    sample_rate_hz: u32,
    options: Options,
    follower: Follower,
    found: Vec<(f64, Found)>,
    present: Present,
    scatter: Option<Scatter>,
    whole: Measurer,
    whole_meter: Option<VoltageMeter>,
    /// Where the whole begins, s.
    began_s: f64,
    state: State,
    loose: (u64, f64),
    reason: &'static str,
    /// Last firing, s.
    last_s: Option<f64>,
    lost: Option<Lost>,
    others: usize,
    locked_hz: Option<f64>,
    /// Glances in a row without the lock that was told.
    unlocked: u32,
    drift_per_s: f64,
    samples: u64,
    level: LevelMeter,
    changes: Vec<Change>,
}

impl Watch {
    /// A watch over audio of a sample rate in Hz.
    #[must_use]
    pub fn new(sample_rate_hz: u32, options: Options) -> Self {
        Self {
            sample_rate_hz,
            follower: Follower::new(sample_rate_hz),
            found: Vec::new(),
            present: Present::default(),
            scatter: None,
            whole: Measurer::new(sample_rate_hz, measure::Options::default()),
            whole_meter: options.meter.clone(),
            began_s: 0.0,
            options,
            state: State::Listening,
            loose: (0, 0.0),
            reason: "no clicks stand out yet",
            last_s: None,
            lost: None,
            others: 0,
            locked_hz: None,
            unlocked: 0,
            drift_per_s: 0.0,
            samples: 0,
            level: LevelMeter::default(),
            changes: Vec::new(),
        }
    }

    /// Takes mono samples in units of full scale.
    pub fn push(&mut self, mono: &[f32]) {
        self.samples += mono.len() as u64;
        self.level.push(mono);
        let mut found = std::mem::take(&mut self.found);
        self.follower.push(mono, &mut found);
        for (now_s, found) in found.drain(..) {
            self.take(now_s, found);
        }
        self.found = found;
        self.whole.push(mono);
        self.meter_whole();
    }

    /// Says how many of the samples pushed since the last glance were clipped.
    pub fn add_clipped(&mut self, frames: u64) {
        self.level.add_clipped(frames);
    }

    /// Says that audio was lost here, nobody knows how much.
    pub fn interrupt(&mut self) {
        let now_s = self.time_s();
        self.whole.interrupt();
        self.meter_whole();
        self.forget();
        self.change(now_s, now_s, Changed::AudioLost);
    }

    /// Forgets the past: figures begin anew, those of the whole too.
    pub fn reset(&mut self) {
        self.forget();
        self.whole = Measurer::new(self.sample_rate_hz, measure::Options::default());
        self.whole_meter = self.options.meter.clone();
        self.began_s = self.time_s();
    }

    /// Another setting of the supply: another voltmeter, and the past is forgotten.
    pub fn set_meter(&mut self, meter: Option<VoltageMeter>) {
        self.options.meter = meter;
        self.reset();
    }

    /// Time of the audio so far, s.
    #[must_use]
    pub fn time_s(&self) -> f64 {
        self.samples as f64 / f64::from(self.sample_rate_hz.max(1))
    }

    fn forget(&mut self) {
        self.follower.forget_all();
        self.present.clear();
        self.scatter = None;
        self.state = State::Listening;
        self.reason = "no clicks stand out yet";
        self.lost = None;
        self.drift_per_s = 0.0;
    }

    fn change(&mut self, time_s: f64, noticed_s: f64, what: Changed) {
        self.changes.push(Change { time_s, noticed_s, what });
    }

    fn take(&mut self, now_s: f64, found: Found) {
        match found {
            Found::Begun(train) => self.begin(now_s, *train),
            Found::More(train) => {
                self.last_s = train.time_s.last().copied().or(self.last_s);
                self.present.add(*train);
                self.compare(now_s);
            }
            Found::Better(train) => {
                self.last_s = train.time_s.last().copied().or(self.last_s);
                self.tell_others(
                    now_s,
                    train.others.first().map(|other| other.firing_rate_hz.value),
                    train.others.len(),
                );
                self.present.replace(*train);
                self.scatter = None;
                self.compare(now_s);
            }
            Found::Ended { last_s, clicks_go_on } => {
                let silent = clicks_go_on == Some(false);
                self.last_s = Some(last_s);
                self.lost = self.rate_hz().map(|rate_hz| Lost { rate_hz, last_s, clicks_go_on });
                self.present.clear();
                self.scatter = None;
                self.drift_per_s = 0.0;
                self.state = if silent { State::NotFiring } else { State::Listening };
                self.reason =
                    if silent { "the clicks have stopped" } else { "clicks are heard, their rhythm is not known yet" };
                self.change(last_s, now_s, if silent { Changed::Stopped } else { Changed::LostRhythm });
            }
            Found::Loose { count, duration_s } => {
                self.state = State::Irregular;
                self.loose = (count, duration_s);
            }
            Found::Nothing { duration_s, reason } => {
                self.reason = reason;
                let lost = self.lost.filter(|lost| self.state == State::Listening && lost.is_over(duration_s));
                if let Some(Lost { last_s, .. }) = lost {
                    (self.state, self.lost) = (State::NotFiring, None);
                    self.change(last_s, now_s, Changed::Stopped);
                } else if duration_s >= NOTHING_S {
                    self.state = State::NotFiring;
                }
            }
        }
    }

    fn begin(&mut self, now_s: f64, train: crate::measure::train::Train) {
        let (first_s, rate_hz) = (train.time_s[0], 1.0 / train.period_s);
        self.last_s = train.time_s.last().copied();
        let before = match (self.state, self.lost.take()) {
            // A train in place of the one that was followed.
            (State::Firing, _) => self.rate_hz(),
            (_, Some(Lost { rate_hz, last_s, .. })) if first_s - last_s < STEP_WITHIN_S => Some(rate_hz),
            _ => None,
        };
        match before {
            Some(before_hz) if (rate_hz / before_hz - 1.0).abs() > OTHER_RATE => {
                self.change(first_s, now_s, Changed::Rate { before_hz, after_hz: rate_hz });
            }
            _ => self.change(first_s, now_s, Changed::Began),
        }
        self.tell_others(now_s, train.others.first().map(|other| other.firing_rate_hz.value), train.others.len());
        self.state = State::Firing;
        self.present.replace(train);
        self.scatter = None;
        self.drift_per_s = 0.0;
        self.compare(now_s);
    }

    fn tell_others(&mut self, now_s: f64, rate_hz: Option<f64>, count: usize) {
        if let Some(rate_hz) = rate_hz.filter(|_| count > self.others) {
            self.change(now_s, now_s, Changed::SecondTrain { rate_hz });
        }
        self.others = count;
    }

    /// Compares the newest firings with those before them.
    fn compare(&mut self, now_s: f64) {
        self.present.age(now_s, self.drift_per_s);
        let mut stretches = self.present.stretches();
        let Some((time_s, number)) = stretches.pop() else { return };
        let step = self.scatter.and_then(|scatter| {
            let earlier = stretches.last().map(|(time_s, number)| (time_s.as_slice(), number.as_slice()));
            let between = earlier.and_then(|earlier| change::between(earlier, (&time_s, &number), scatter));
            between.or_else(|| change::find(&time_s, &number, scatter))
        });
        if let Some(step) = step {
            let (before_hz, after_hz) = step.rates_hz;
            self.change(step.time_s, now_s, Changed::Rate { before_hz, after_hz });
            self.present.cut_before(step.time_s);
            self.drift_per_s = 0.0;
        } else if let Some(scatter) = Scatter::of(&time_s, &number) {
            self.scatter = Some(scatter);
        }
    }

    fn rate_hz(&self) -> Option<f64> {
        let (time_s, number) = self.present.series();
        let last = time_s.len().checked_sub(1).filter(|last| *last > 0)?;
        Some((number[last] - number[0]) as f64 / (time_s[last] - time_s[0]))
    }

    fn meter_whole(&mut self) {
        let events = self.whole.take_events();
        if let Some(meter) = &mut self.whole_meter {
            events.iter().for_each(|event| meter.push(event));
        }
    }

    /// What is to be told now; level and changes are those since the last glance.
    pub fn glance(&mut self) -> Glance {
        let time_s = self.time_s();
        let mut reading = self.reading(time_s);
        self.tell_lock(time_s, &reading);
        let clock = self.options.clock / 3f64.sqrt();
        reading.firing_rate_hz = reading.firing_rate_hz.map(|rate| widened(rate, clock));
        reading.period_s = reading.period_s.map(|period| widened(period, clock));
        let drift = reading.drift_per_s.filter(|drift| drift.value.abs() > DRIFT_SAID * drift.u);
        self.drift_per_s = drift.map_or(0.0, |drift| drift.value);
        let trend = reading.firing_rate_hz.map(|_| match self.drift_per_s {
            drift if drift > 0.0 => Trend::Rising,
            drift if drift < 0.0 => Trend::Falling,
            _ => Trend::Steady,
        });
        let voltage = self.options.meter.clone().filter(|_| self.state == State::Firing).map(|mut meter| {
            self.present.events().iter().for_each(|event| meter.push(event));
            meter.finish(&reading)
        });
        let voltage = voltage.unwrap_or_default();
        reading.notes.extend(voltage.notes);
        let firings = reading.firings;
        let demanded = (firings.on_rhythm + firings.missed) as f64;
        let share = |count: u64, of: f64| (self.state == State::Firing && of > 0.0).then(|| count as f64 / of);
        let mut glance = Glance {
            format: FORMAT.to_owned(),
            time_s,
            state: self.state,
            since_s: self.present.first_s(),
            trend,
            missed_share: share(firings.missed, demanded),
            extra_share: share(firings.extra, firings.on_rhythm as f64),
            gap_voltage_v: voltage.gap_voltage_v,
            gap_voltage_spread_v: voltage.gap_voltage_spread_v,
            level: self.level.read(),
            silence_s: self.last_s.map(|last_s| (time_s - last_s).max(0.0)),
            changes: std::mem::take(&mut self.changes),
            alarms: Vec::new(),
            reading,
        };
        glance.alarms = self.options.limits.check(&glance);
        glance
    }

    fn reading(&self, time_s: f64) -> Reading {
        match self.state {
            State::Firing => match self.present.reading() {
                Some(reading) => Reading { reason: measure::reason(&reading), ..reading },
                None => Reading::none("the gap fires; its rate needs some more firings".to_owned()),
            },
            State::Irregular => measure::clicks_alone(self.loose.0, self.loose.1),
            State::Listening if time_s < NOTHING_S => {
                Reading::none(format!("listening ({}); a slow gap needs several seconds", self.reason))
            }
            State::Listening => Reading::none(self.reason.to_owned()),
            State::NotFiring => Reading::none(format!("not firing: {}", self.reason)),
        }
    }

    fn tell_lock(&mut self, time_s: f64, reading: &Reading) {
        let (Some(rate), Some(period)) = (reading.firing_rate_hz, reading.period_s) else { return };
        let Some(jitter) = reading.period_jitter_s else { return };
        let locked_hz = locked_to(rate.value, jitter.value / period.value);
        match (self.locked_hz, locked_hz) {
            (None, Some(line_hz)) => self.change(time_s, time_s, Changed::Locked { line_hz }),
            (Some(_), None) if self.unlocked + 1 < UNLOCKED => {
                self.unlocked += 1;
                return;
            }
            (Some(_), None) => self.change(time_s, time_s, Changed::Unlocked),
            _ => {}
        }
        (self.locked_hz, self.unlocked) = (locked_hz, 0);
    }

    /// Ends the watch with the figures of the whole.
    #[must_use]
    pub fn finish(mut self) -> Summary {
        let from_s = self.began_s;
        let outcome = self.whole.finish();
        let mut reading = outcome.reading;
        let clock = self.options.clock / 3f64.sqrt();
        reading.firing_rate_hz = reading.firing_rate_hz.map(|rate| widened(rate, clock));
        reading.period_s = reading.period_s.map(|period| widened(period, clock));
        let voltage = self.whole_meter.take().map(|mut meter| {
            outcome.events.iter().for_each(|event| meter.push(event));
            meter.finish(&reading)
        });
        let voltage = voltage.unwrap_or_default();
        reading.notes.extend(voltage.notes);
        Summary { from_s, reading, gap_voltage_v: (voltage.gap_voltage_v, voltage.gap_voltage_spread_v) }
    }
}

/// An estimate with another relative standard uncertainty added to its own.
fn widened(estimate: Estimate, relative: f64) -> Estimate {
    let added = relative * estimate.value;
    let reach = |half: f64| half.hypot(COVERAGE_95 * added);
    Estimate {
        value: estimate.value,
        u: estimate.u.hypot(added),
        low: estimate.value - reach(estimate.value - estimate.low),
        high: estimate.value + reach(estimate.high - estimate.value),
    }
}
