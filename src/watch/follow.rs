//! Follows the gap through audio as it comes: looks for a train until there is one, then keeps it in short steps.

use super::looks::Looks;
use crate::clicks::filter::FilterBank;
use crate::measure::acquire::{self, Hint, Known};
use crate::measure::irregular;
use crate::measure::train::Train;
use crate::measure::window::Window;
use crate::rhythm::order::median;

/// Time between two steps, s. Everything happens at steps, so that no block size changes a result.
pub const STEP_S: f64 = 0.25;
/// Steps of looking from one of following to the next: a quick train.
const FOLLOW_STEPS: u64 = 2;
/// Audio before the part of a step that is analysed with it, s at least and periods: filters and rhythm need it.
const BEFORE: (f64, f64) = (0.15, 12.0);
/// Audio at the end of what was heard that is left to the next step, s at least and periods: the path may still change there.
const AFTER: (f64, f64) = (0.05, 1.5);
/// Longest stretch that is held, s.
const HELD_S: f64 = 60.0;
/// Silence that ends a train, s at least and periods.
const QUIET: (f64, f64) = (0.45, 2.6);
/// Chance of as many missed firings in a row that is not taken for silence.
const QUIET_CHANCE: f64 = 1e-4;
/// A train learnt on little is learnt again when there is so much of it, s and periods.
const AGAIN_S: f64 = 4.0;
const AGAIN_PERIODS: f64 = 60.0;
/// Windows in a row with more unexplained clicks than usual after which a second train is looked for, the audio on which that is
/// done, s at least and periods, and pause until it is done again, s.
const MORE_WINDOWS: u32 = 3;
const MORE_ON: (f64, f64) = (1.6, 40.0);
const MORE_PAUSE_S: f64 = 4.0;
/// Audio on which a train that is lost is looked for once more before it is given up, s at least and periods.
const ONCE_MORE: (f64, f64) = (2.0, 30.0);
/// A rate that differs by less is the same.
const SAME_RATE: f64 = 0.02;

/// Shortest look after which clicks without a rhythm are called so, s.
const LOOSE_FROM_S: f64 = 4.0;
/// Clicks off the rhythm behind its last firing from which it is lost rather than silent.
const STILL_CLICKS: usize = 2;
/// Reach of a click, s; share of a click's step that the noise between may reach for a judgement, and from which clicks go on.
const CLICK_S: f64 = 1.5e-3;
const QUIETER: f64 = 0.4;
const STILL_LOUD: f64 = 0.6;
/// Firings whose clicks are remembered for it.
const RECENT: usize = 8;

/// What a step has found.
#[derive(Debug, Clone)]
pub enum Found {
    /// A train that was not there before; the firings in it are those since its first.
    Begun(Box<Train>),
    /// The next firings of the train.
    More(Box<Train>),
    /// The train was learnt anew on more audio; these firings stand for those from their first on.
    Better(Box<Train>),
    /// The rhythm ended or is lost.
    Ended {
        /// Its last firing, s.
        last_s: f64,
        /// Whether clicks like its own go on all the same; none if that cannot be told.
        clicks_go_on: Option<bool>,
    },
    /// A look found clicks without a rhythm.
    Loose {
        /// How many.
        count: u64,
        /// In how many s.
        duration_s: f64,
    },
    /// A look found nothing.
    Nothing {
        /// Length of the look, s.
        duration_s: f64,
        /// Why.
        reason: &'static str,
    },
}

enum Stage {
    Looking(Looks),
    Following(Box<Following>),
}

/// A train as it is followed.
struct Following {
    known: Known,
    /// Time up to which firings were handed out, s, and the last firing found.
    done_s: f64,
    last_s: f64,
    /// Audio that the train was learnt on, s, and where that began.
    learnt_s: f64,
    learnt_from_s: f64,
    /// Firings and missed ones of late.
    counts: (f64, f64),
    /// Unexplained clicks in a window as usual, and windows in a row with more.
    usual: Option<f64>,
    more: u32,
    more_looked_s: f64,
    /// The last firings, s.
    recent_s: Vec<f64>,
}

/// The follower: bounded in memory, whatever comes.
pub struct Follower {
    bank: FilterBank,
    rate_hz: f64,
    step: u64,
    held: Vec<f32>,
    held_from: u64,
    next_step: u64,
    steps: u64,
    stage: Stage,
}

impl Follower {
    /// A follower for a sample rate in Hz.
    #[must_use]
    pub fn new(sample_rate_hz: u32) -> Self {
        let rate_hz = f64::from(sample_rate_hz.max(1));
        let step = ((STEP_S * rate_hz) as u64).max(1);
        Self {
            bank: FilterBank::new(),
            rate_hz,
            step,
            held: Vec::new(),
            held_from: 0,
            next_step: step,
            steps: 0,
            stage: Stage::Looking(Looks::new(0.0)),
        }
    }

    /// Takes mono samples; what is found is appended with the time at which it was found, s.
    pub fn push(&mut self, mut mono: &[f32], found: &mut Vec<(f64, Found)>) {
        while !mono.is_empty() {
            let wanted = (self.next_step - self.held_from) as usize - self.held.len();
            let (now, later) = mono.split_at(wanted.min(mono.len()));
            self.held.extend_from_slice(now);
            mono = later;
            if self.held_from + self.held.len() as u64 == self.next_step {
                self.next_step += self.step;
                self.steps += 1;
                self.take_step(found);
                self.forget();
            }
        }
    }

    /// Period of the train that is followed, s.
    #[must_use]
    pub fn period_s(&self) -> Option<f64> {
        match &self.stage {
            Stage::Following(following) => Some(following.known.periods_s(1.0)),
            Stage::Looking(_) => None,
        }
    }

    /// Forgets everything but the count of samples: the setting was changed, or audio was lost.
    pub fn forget_all(&mut self) {
        self.held_from += self.held.len() as u64;
        self.held.clear();
        self.stage = Stage::Looking(Looks::new(self.now_s()));
    }

    /// Looks anew from a time on, s: what was known before does not hold there.
    pub fn look_from(&mut self, time_s: f64) {
        self.stage = Stage::Looking(Looks::new(time_s.max(self.held_from as f64 / self.rate_hz)));
    }

    fn now_s(&self) -> f64 {
        (self.held_from + self.held.len() as u64) as f64 / self.rate_hz
    }

    fn take_step(&mut self, found: &mut Vec<(f64, Found)>) {
        let now_s = self.now_s();
        let fresh = self.held.len().saturating_sub(self.step as usize);
        match &mut self.stage {
            Stage::Looking(looks) => {
                if let Some(from_s) = looks.step(now_s, &self.held[fresh..], self.rate_hz) {
                    self.look(from_s, found);
                }
            }
            Stage::Following(following) => {
                let pause = if following.known.is_quick() { FOLLOW_STEPS } else { 1 };
                if self.steps.is_multiple_of(pause) {
                    self.follow(found);
                }
            }
        }
    }

    /// The held audio from a time on, as a window, with the time of its first sample, s.
    fn window(&self, from_s: f64) -> (Window<'_>, f64) {
        let from = ((from_s * self.rate_hz) as u64).saturating_sub(self.held_from).min(self.held.len() as u64) as usize;
        let at_s = (self.held_from + from as u64) as f64 / self.rate_hz;
        (Window::new(&self.bank, &self.held[from..], self.rate_hz), at_s)
    }

    fn look(&mut self, from_s: f64, found: &mut Vec<(f64, Found)>) {
        let now_s = self.now_s();
        let (window, at_s) = self.window(from_s);
        let looked = acquire::train(&window, Hint::default(), &mut Vec::new());
        let loose = if looked.is_err() { irregular::clicks(&window).map(|times| times.len() as u64) } else { None };
        let duration_s = window.duration_s();
        match looked {
            Ok((mut train, known)) => {
                train.shift(at_s);
                let following = Following::new(known, &train, now_s, duration_s);
                let settled = train.within(&(0.0..following.done_s));
                if let (Some(train), false) = (settled, following.is_quiet(now_s)) {
                    self.stage = Stage::Following(Box::new(following));
                    found.push((now_s, Found::Begun(Box::new(train))));
                }
            }
            Err(reason) => {
                let loose = loose.filter(|_| duration_s >= LOOSE_FROM_S);
                let nothing = Found::Nothing { duration_s, reason };
                found.push((now_s, loose.map_or(nothing, |count| Found::Loose { count, duration_s })));
            }
        }
    }

    fn follow(&mut self, found: &mut Vec<(f64, Found)>) {
        let now_s = self.now_s();
        let Stage::Following(following) = &mut self.stage else { return };
        let from_s = following.done_s - following.margin_s(BEFORE);
        let from = ((from_s * self.rate_hz) as u64).saturating_sub(self.held_from).min(self.held.len() as u64) as usize;
        let at_s = (self.held_from + from as u64) as f64 / self.rate_hz;
        let window = Window::new(&self.bank, &self.held[from..], self.rate_hz);
        let train = following.known.follow(&window, &mut Vec::new()).map(|mut train| {
            train.shift(at_s);
            train
        });
        match train {
            Some(train) => {
                following.compare(train.unexplained);
                following.last_s = train.time_s.last().copied().unwrap_or(following.last_s).max(following.last_s);
                let behind = train.extra.iter().filter(|extra| extra.0 > following.last_s).count();
                let done_s = following.done_s;
                following.done_s = (now_s - following.margin_s(AFTER)).max(done_s);
                if let Some(train) = train.within(&(done_s..following.done_s)) {
                    following.count(&train);
                    found.push((now_s, Found::More(Box::new(train))));
                }
                if following.is_quiet(now_s) {
                    self.end(behind < STILL_CLICKS, found);
                } else {
                    self.learn_again(found);
                }
            }
            None => self.once_more(found),
        }
    }

    /// A train that is lost: learnt anew on the last seconds, or given up.
    fn once_more(&mut self, found: &mut Vec<(f64, Found)>) {
        let Stage::Following(following) = &self.stage else { return };
        let wanted_s = following.margin_s(ONCE_MORE).min(HELD_S);
        if !self.learn(wanted_s, found) {
            self.end(false, found);
        }
    }

    /// Gives the train up; `rests` if nothing was found behind its last firing.
    fn end(&mut self, rests: bool, found: &mut Vec<(f64, Found)>) {
        let Stage::Following(following) = &self.stage else { return };
        let last_s = following.last_s;
        let go_on = self.clicks_behind(following);
        let clicks_go_on = if rests && go_on != Some(true) { Some(false) } else { go_on };
        found.push((self.now_s(), Found::Ended { last_s, clicks_go_on }));
        self.look_from(last_s + 0.5 * self.period_s().unwrap_or(0.0));
    }

    /// Whether steps as large as those of the train's clicks are heard behind its last one; none where noise makes them too.
    fn clicks_behind(&self, following: &Following) -> Option<bool> {
        let period_s = following.known.periods_s(1.0);
        let about_s = CLICK_S.min(0.25 * period_s);
        let times = &following.recent_s;
        let clicks: Vec<f64> = times.iter().map(|t| self.largest_step(t - about_s, t + about_s)).collect();
        let between: Vec<f64> =
            times.iter().map(|t| self.largest_step(t - 0.67 * period_s, t - 0.33 * period_s)).collect();
        if clicks.len() < 4 {
            return None;
        }
        let click = median(&clicks);
        let behind = self.largest_step(following.last_s + about_s.max(0.1 * period_s), self.now_s());
        (median(&between) < QUIETER * click).then_some(behind > STILL_LOUD * click)
    }

    /// Largest step from sample to sample between two times, s.
    fn largest_step(&self, from_s: f64, to_s: f64) -> f64 {
        let at = |time_s: f64| {
            ((time_s * self.rate_hz).max(0.0) as u64).saturating_sub(self.held_from).min(self.held.len() as u64)
                as usize
        };
        let part = &self.held[at(from_s)..at(to_s).max(at(from_s))];
        f64::from(part.windows(2).fold(0.0f32, |most, w| most.max((w[1] - w[0]).abs())))
    }

    /// Learns the train anew where there is more of it than before, or what looks like a second one.
    fn learn_again(&mut self, found: &mut Vec<(f64, Found)>) {
        let now_s = self.now_s();
        let Stage::Following(following) = &mut self.stage else { return };
        let wanted_s = AGAIN_S.max(following.known.periods_s(AGAIN_PERIODS)).min(0.9 * HELD_S);
        let heard_s = now_s - following.learnt_from_s;
        if following.learnt_s < 0.8 * wanted_s && heard_s >= wanted_s {
            // Only once, whatever comes of it.
            following.learnt_s = wanted_s;
            self.learn(wanted_s, found);
        } else if following.more >= MORE_WINDOWS && now_s - following.more_looked_s > MORE_PAUSE_S {
            following.more_looked_s = now_s;
            let wanted_s = following.margin_s(MORE_ON);
            self.learn(wanted_s, found);
        }
    }

    /// Learns on the last seconds; false if nothing is found there that still fires.
    fn learn(&mut self, wanted_s: f64, found: &mut Vec<(f64, Found)>) -> bool {
        let now_s = self.now_s();
        let Stage::Following(old) = &self.stage else { return false };
        let (period_s, more_looked_s) = (old.known.periods_s(1.0), old.more_looked_s);
        let (window, at_s) = self.window(now_s - wanted_s);
        let Ok((mut train, known)) = acquire::train(&window, Hint::default(), &mut Vec::new()) else { return false };
        train.shift(at_s);
        let new = Following::new(known, &train, now_s, window.duration_s());
        let same = (train.period_s / period_s - 1.0).abs() < SAME_RATE;
        if new.is_quiet(now_s) {
            return false;
        }
        let Some(train) = train.within(&(0.0..new.done_s)) else { return false };
        self.stage = Stage::Following(Box::new(Following { more_looked_s, ..new }));
        found.push((now_s, if same { Found::Better(Box::new(train)) } else { Found::Begun(Box::new(train)) }));
        true
    }

    /// Forgets audio that no later step can need.
    fn forget(&mut self) {
        let needed_s = self.now_s() - HELD_S;
        let drop = ((needed_s * self.rate_hz) as u64).saturating_sub(self.held_from).min(self.held.len() as u64);
        // In large pieces: each moves all that is held.
        if drop as f64 > 2.0 * self.rate_hz {
            self.held.drain(..drop as usize);
            self.held_from += drop;
        }
    }
}

impl Following {
    fn new(known: Known, train: &Train, now_s: f64, learnt_s: f64) -> Self {
        let last_s = train.time_s.last().copied().unwrap_or(now_s);
        let mut new = Self {
            known,
            done_s: now_s,
            last_s,
            learnt_s,
            learnt_from_s: now_s - learnt_s,
            counts: (0.0, 0.0),
            usual: None,
            more: 0,
            more_looked_s: f64::NEG_INFINITY,
            recent_s: Vec::new(),
        };
        new.done_s -= new.margin_s(AFTER);
        new.count(train);
        new
    }

    fn margin_s(&self, (least_s, periods): (f64, f64)) -> f64 {
        least_s.max(self.known.periods_s(periods))
    }

    /// Counts with a memory of some hundred firings.
    fn count(&mut self, train: &Train) {
        let new = (train.time_s.len() as f64, train.missed() as f64);
        self.recent_s.extend_from_slice(&train.time_s[train.time_s.len().saturating_sub(RECENT)..]);
        self.recent_s.drain(..self.recent_s.len().saturating_sub(RECENT));
        let kept = 1.0 / (1.0 + (self.counts.0 + new.0) / 400.0);
        self.counts = (kept * self.counts.0 + new.0, kept * self.counts.1 + new.1);
    }

    /// Compares the unexplained clicks of a window with the usual count.
    fn compare(&mut self, unexplained: usize) {
        let count = unexplained as f64;
        let usual = *self.usual.get_or_insert(count);
        if count > 1.5 * usual + 4.0 + 3.0 * usual.sqrt() {
            self.more += 1;
        } else {
            self.more = 0;
            self.usual = Some(usual + 0.1 * (count - usual));
        }
    }

    /// True if the gap has been silent for longer than missed firings explain.
    fn is_quiet(&self, now_s: f64) -> bool {
        let (firings, missed) = self.counts;
        let share = (missed + 0.5) / (firings + missed + 1.0);
        let by_chance = (QUIET_CHANCE.ln() / share.ln()).ceil();
        let periods = if share < 0.04 { QUIET.1 } else { QUIET.1.max(by_chance + 0.6) };
        now_s - self.last_s > QUIET.0.max(self.known.periods_s(periods))
    }
}
