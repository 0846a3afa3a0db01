//! From one conditioned window to a train or the reason why there is none.
//!
//! What the clicks look like, their period and the best way to time them are learnt on the most active few seconds; the train is then
//! followed through the whole window, and through later ones, with what was learnt. Only slow rhythms, of which a few seconds hold
//! too few firings, are learnt on the whole window.

use super::hypothesis::Reach;
use super::learn::{Learnt, learn};
use super::model::Model;
use super::overlap;
use super::train::Train;
use super::window::Window;

/// Floors of the whitening tried in turn: deep first, shallow if nothing is found.
const FLOORS: [f64; 2] = [2e-3, 0.1];
/// Least share of full scale that is worth a look.
const SILENCE: f32 = 1e-4;
/// Shortest window worth a look, s.
const SHORTEST_S: f64 = 0.5;
/// Length of the part that is learnt from, s.
const LEARN_S: f64 = 4.0;
/// Shortest period that the whole window is searched for when the part has none: the part holds 80 firings of it.
const SLOW_S: f64 = LEARN_S / 80.0;

/// A period learnt from too few firings may be a multiple up to this.
const NEARLY: f64 = 4.5;
/// The least that can be said.
const NOTHING: &str = "no clicks stand out";

/// A train that is known and can be followed.
pub enum Known {
    /// By its clicks.
    Clicks(Box<Model>),
    /// By its line, at this frequency in Hz.
    Line(f64),
}

impl Known {
    /// Follows the train through another window; none if it is lost there.
    pub fn follow(&mut self, window: &Window, explanation: &mut Vec<String>) -> Option<Train> {
        if peak(window) < SILENCE {
            return None;
        }
        match self {
            Self::Clicks(model) => model.follow(window, explanation),
            Self::Line(line_hz) => overlap::by_line(window, *line_hz, explanation).ok(),
        }
    }

    /// True if a few seconds hold enough firings to follow it through short windows.
    #[must_use]
    pub fn is_quick(&self) -> bool {
        match self {
            Self::Clicks(model) => model.period_s() < SLOW_S,
            Self::Line(_) => true,
        }
    }

    /// Periods in a time, s.
    #[must_use]
    pub fn periods_s(&self, count: f64) -> f64 {
        match self {
            Self::Clicks(model) => count * model.period_s(),
            Self::Line(line_hz) => count / line_hz,
        }
    }
}

fn peak(window: &Window) -> f32 {
    window.x.iter().fold(0.0f32, |m, v| m.max(v.abs()))
}

/// Looks in the most active part of a window for a train that can be followed; the error is what was found instead.
pub fn first(window: &Window, explanation: &mut Vec<String>) -> Result<Known, Hint> {
    if window.duration_s() <= 1.5 * LEARN_S || peak(window) < SILENCE {
        return Err(Hint::default());
    }
    match part(&window.most_active_part(LEARN_S), FLOORS[0], explanation) {
        Ok(Part::Known(known)) => Ok(known),
        Ok(Part::TooLittle(period_s)) => Err(Hint { period_s: Some(period_s) }),
        Err(_) => Err(Hint::default()),
    }
}

/// What an earlier look has found.
#[derive(Debug, Clone, Copy, Default)]
pub struct Hint {
    /// A period of which there was too little to follow, s.
    period_s: Option<f64>,
}

/// What the most active part teaches: a train that can be followed, or that there is one of this period (s) but too little of it.
enum Part {
    Known(Known),
    TooLittle(f64),
}

fn part(part: &Window, floor: f64, explanation: &mut Vec<String>) -> Result<Part, &'static str> {
    explanation.push(format!("learning on the most active {LEARN_S} s"));
    match learn(part, floor, Reach::ALL, explanation)? {
        Learnt::Clicks(lesson) if lesson.model.is_enough() => Ok(Part::Known(Known::Clicks(Box::new(lesson.model)))),
        Learnt::Line(line) => Ok(Part::Known(Known::Line(line.line.frequency_hz))),
        Learnt::Clicks(lesson) => Ok(Part::TooLittle(lesson.model.period_s())),
    }
}

/// Looks for a train, and for the way to follow it further; lines of the explanation are appended. The error is the reason in
/// words.
pub fn train(window: &Window, hint: Hint, explanation: &mut Vec<String>) -> Result<(Train, Known), &'static str> {
    if peak(window) < SILENCE {
        return Err("the recording is silent");
    }
    if window.duration_s() < SHORTEST_S {
        return Err("the recording is shorter than half a second");
    }
    let active = (window.duration_s() > 1.5 * LEARN_S).then(|| window.most_active_part(LEARN_S));
    let mut reason = NOTHING;
    for floor in FLOORS {
        let mut reach = Reach::ALL;
        let hinted = hint.period_s.filter(|_| floor == FLOORS[0]).map(|period_s| Ok(Part::TooLittle(period_s)));
        match hinted.or_else(|| active.as_ref().map(|active| part(active, floor, explanation))) {
            None => {}
            Some(Ok(Part::Known(mut known))) => match known.follow(window, explanation) {
                Some(train) => return Ok((train, known)),
                None => explanation.push("the rhythm is lost in the rest: learning on the whole window".into()),
            },
            Some(Ok(Part::TooLittle(period_s))) => {
                explanation
                    .push(format!("too few firings of {:.3} ms there: learning on the whole window", 1e3 * period_s));
                reach = Reach { expected_s: Some(period_s), ..Reach::slow(period_s / NEARLY) };
            }
            Some(Err(why)) => {
                explanation.push(format!("refused: {why}; slow rhythms are looked for in the whole window"));
                reason = why;
                reach = Reach::slow(SLOW_S);
            }
        }
        match learn(window, floor, reach, explanation) {
            Ok(Learnt::Clicks(lesson)) => {
                let train = lesson.model.train_of(window, &lesson.hypothesis, &lesson.others);
                return Ok((train, Known::Clicks(Box::new(lesson.model))));
            }
            Ok(Learnt::Line(line)) => {
                let line_hz = line.line.frequency_hz;
                return overlap::by_line(window, line_hz, explanation).map(|train| (train, Known::Line(line_hz)));
            }
            Err(why) => {
                explanation.push(format!("refused: {why}"));
                if active.is_none() || why != NOTHING {
                    reason = why;
                }
            }
        }
    }
    Err(reason)
}
