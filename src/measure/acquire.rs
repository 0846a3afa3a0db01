//! From one conditioned window to a train or the reason why there is none.
//!
//! What the clicks look like, their period and the best way to time them are learnt on the most active few seconds; the train is then
//! followed through the whole window, and through later ones, with what was learnt. Only slow rhythms, of which a few seconds hold
//! too few firings, are learnt on the whole window.

use super::hypothesis::Reach;
use super::learn::{Learnt, Lesson, learn, learn_known};
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
        Ok(Part::TooLittle(model)) => Err(Hint { model: Some(model) }),
        Err(_) => Err(Hint::default()),
    }
}

/// What an earlier look has found: a train of which there was too little to follow it.
#[derive(Default)]
pub struct Hint {
    model: Option<Box<Model>>,
}

/// What the most active part teaches: a train that can be followed, or one of which there is too little.
enum Part {
    Known(Known),
    TooLittle(Box<Model>),
}

fn part(part: &Window, floor: f64, explanation: &mut Vec<String>) -> Result<Part, &'static str> {
    explanation.push(format!("learning on the most active {LEARN_S} s"));
    match learn(part, floor, Reach::ALL, explanation)? {
        Learnt::Clicks(lesson) if lesson.model.is_enough() => Ok(Part::Known(Known::Clicks(Box::new(lesson.model)))),
        Learnt::Line(line) => Ok(Part::Known(Known::Line(line.line.frequency_hz))),
        Learnt::Clicks(lesson) => Ok(Part::TooLittle(Box::new(lesson.model))),
    }
}

/// A train with the way to follow it further, or the reason in words why there is none.
type Found = Result<(Train, Known), &'static str>;

/// Looks for a train in a window; lines of the explanation are appended.
pub fn train(window: &Window, mut hint: Hint, explanation: &mut Vec<String>) -> Found {
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
        let hinted = hint.model.take().map(|model| Ok(Part::TooLittle(model)));
        match hinted.or_else(|| active.as_ref().map(|active| part(active, floor, explanation))) {
            None => {}
            Some(Ok(Part::Known(mut known))) => match known.follow(window, explanation) {
                Some(train) => return Ok((train, known)),
                None => explanation.push("the rhythm is lost in the rest: learning on the whole window".into()),
            },
            Some(Ok(Part::TooLittle(model))) => {
                let period_s = model.period_s();
                explanation
                    .push(format!("too few firings of {:.3} ms there: learning on the whole window", 1e3 * period_s));
                match whole_of(window, floor, &model, explanation) {
                    Ok(found) => return Ok(found),
                    Err(why) => explanation.push(format!("refused: {why}")),
                }
                reach = Reach { expected_s: Some(period_s), ..Reach::ALL };
            }
            Some(Err(why)) => {
                explanation.push(format!("refused: {why}; slow rhythms are looked for in the whole window"));
                reason = why;
                reach = Reach::slow(SLOW_S);
            }
        }
        match learn(window, floor, reach, explanation) {
            Ok(Learnt::Clicks(lesson)) => return Ok(taught(window, *lesson)),
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

/// Learns a slow train from the whole window, beginning with what a part of it has taught.
fn whole_of(window: &Window, floor: f64, model: &Model, explanation: &mut Vec<String>) -> Found {
    let h = model.hypothesis_in(window).ok_or("the rhythm is lost in the rest")?;
    learn_known(window, floor, h, explanation).map(|lesson| taught(window, lesson))
}

fn taught(window: &Window, lesson: Lesson) -> (Train, Known) {
    let train = lesson.model.train_of(window, &lesson.hypothesis, &lesson.others);
    (train, Known::Clicks(Box::new(lesson.model)))
}
