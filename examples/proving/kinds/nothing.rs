//! Recordings without a gap: nothing may come out of them.

use crate::case::{Answer, Draft, Source};
use crate::filters;
use crate::firings::{Plan, Scatter, Strike, strikes};
use crate::random::Dice;
use crate::receiver::Detector;
use crate::recorder::Recorder;
use crate::scene::{Carrier, PROGRAMME_RATE_HZ, Scene};
use crate::sounds::{RATE, machine, music, noise, speech, tones};

/// Length of a recording without a gap, s.
fn length(dice: &mut Dice) -> f64 {
    dice.uniform(5.0, 10.0)
}

/// A sound as a microphone or line input records it: some noise, often an audio band.
fn recorded(dice: &mut Dice, mut sound: Vec<f64>) -> Draft {
    let floor = 10f64.powf(-dice.uniform(20.0, 65.0) / 20.0);
    sound.iter_mut().for_each(|x| *x += floor * dice.normal());
    if dice.chance(0.6) {
        let (low_hz, high_hz) = (dice.log_uniform(50.0, 300.0), dice.log_uniform(2.4e3, 8e3));
        filters::run(&mut filters::high_pass(2, low_hz, RATE), &mut sound);
        filters::run(&mut filters::low_pass(3, high_hz, RATE), &mut sound);
    }
    let recorder = Recorder::draw(dice);
    let samples = recorder.record(dice, sound, PROGRAMME_RATE_HZ, 1.0);
    Draft { source: Source::Sound(samples, recorder.sample_rate_hz), answer: Answer::Nothing }
}

/// A scene without a gap.
fn received(dice: &mut Dice, strikes: Vec<Strike>, carrier: Option<Carrier>, answer: Answer) -> Draft {
    let duration_s = length(dice);
    let mut scene = Scene::ordinary(dice, duration_s, strikes);
    scene.carrier = carrier;
    Draft { source: Source::Scene(Box::new(scene)), answer }
}

/// Makes a builder of a recorded sound.
macro_rules! recorded_sound {
    ($($(#[$note:meta])* $name:ident = $make:path;)*) => {$(
        $(#[$note])*
        pub fn $name(dice: &mut Dice) -> Draft {
            let duration_s = length(dice);
            let sound = $make(dice, duration_s);
            recorded(dice, sound)
        }
    )*};
}

recorded_sound! {
    /// Heterodyne whistle.
    whistle = tones::whistle;
    /// Tone with swinging frequency.
    warble = tones::warble;
    /// Several steady tones.
    chord = tones::chord;
    /// Tone keyed by hand.
    keyed = tones::keyed;
    /// Two-tone data.
    data = tones::data;
    /// Sweeps.
    sweep = tones::sweep;
    /// Dialling tones.
    dial = tones::dial;
    /// Synthetic music.
    melody = music::music;
    /// Speech-like sound.
    voice = speech::speech;
    /// Engine.
    engine = machine::engine;
    /// Fan.
    fan = machine::fan;
    /// White noise.
    white = noise::white;
    /// Pink noise.
    pink = noise::pink;
    /// Brown noise.
    brown = noise::brown;
    /// Blue noise.
    blue = noise::blue;
}

/// Hum: one to three mains harmonics.
pub fn hum(dice: &mut Dice) -> Draft {
    let (duration_s, orders) = (length(dice), dice.whole(1, 3));
    let sound = tones::mains(dice, duration_s, orders);
    recorded(dice, sound)
}

/// Buzz: mains harmonics to 1.5 kHz.
pub fn buzz(dice: &mut Dice) -> Draft {
    let duration_s = length(dice);
    let sound = tones::mains(dice, duration_s, 25);
    recorded(dice, sound)
}

/// Digital silence, or a recorder with nothing on it.
pub fn silence(dice: &mut Dice) -> Draft {
    let count = (length(dice) * 48e3) as usize;
    let level = dice.pick(&[0.0, 0.3, 2.0, 20.0]) / 32768.0;
    let constant = dice.pick(&[0.0, 0.0, 0.01]);
    let sample = |x: f64| ((x * 32768.0).round() / 32768.0) as f32;
    let samples = (0..count).map(|_| sample(constant + level * dice.normal())).collect();
    Draft { source: Source::Sound(samples, 48_000), answer: Answer::Nothing }
}

/// A receiver with nothing but its own noise.
pub fn channel(dice: &mut Dice) -> Draft {
    received(dice, Vec::new(), None, Answer::Nothing)
}

/// A bare carrier in noise.
pub fn bare_carrier(dice: &mut Dice) -> Draft {
    let carrier = Carrier::bare(dice.log_uniform(0.05, 3.0), dice.uniform(-1e3, 1e3));
    received(dice, Vec::new(), Some(carrier), Answer::Nothing)
}

/// A carrier with an amplitude-modulated programme and nothing else.
pub fn programme(dice: &mut Dice) -> Draft {
    let carrier = station(dice, 1.0, 10.0);
    received(dice, Vec::new(), Some(carrier), Answer::Nothing)
}

/// A carrier of the given strength with speech or music on it.
fn station(dice: &mut Dice, ratio: f64, duration_s: f64) -> Carrier {
    let sound = if dice.chance(0.6) { speech::speech(dice, duration_s) } else { music::music(dice, duration_s) };
    modulated(dice, ratio, sound)
}

/// A carrier of the given strength with a sound on it.
pub fn modulated(dice: &mut Dice, ratio: f64, mut sound: Vec<f64>) -> Carrier {
    filters::run(&mut filters::low_pass(4, 4500.0, RATE), &mut sound);
    let depth = dice.uniform(0.3, 0.95);
    let offset_hz = dice.uniform(-300.0, 300.0);
    Carrier { programme: Some(sound), depth, ..Carrier::bare(ratio, offset_hz) }
}

/// A frequency-modulated programme through a discriminator.
pub fn frequency_programme(dice: &mut Dice) -> Draft {
    let duration_s = length(dice);
    let sound = if dice.chance(0.6) { speech::speech(dice, duration_s) } else { music::music(dice, duration_s) };
    let mut scene = Scene::ordinary(dice, duration_s, Vec::new());
    scene.receiver.bandwidth_hz = dice.log_uniform(8e3, 16e3);
    scene.receiver.detector = Detector::Discriminator(3e3);
    scene.click_over_noise_db = dice.uniform(12.0, 40.0);
    let deviation_hz = dice.uniform(1e3, 3e3);
    scene.carrier = Some(Carrier { programme: Some(sound), deviation_hz, ..Carrier::bare(1.0, 0.0) });
    Draft { source: Source::Scene(Box::new(scene)), answer: Answer::Nothing }
}

/// Crackle: clicks at independent moments, sizes widely spread, sometimes in bursts.
pub fn crackle(dice: &mut Dice) -> Draft {
    let (rate_hz, spread) = (dice.log_uniform(3.0, 400.0), dice.uniform(0.1, 1.0));
    let burst = if dice.chance(0.3) { dice.uniform(2.0, 6.0) } else { 1.0 };
    let (mut strikes, mut time_s) = (Vec::new(), 0.0);
    while time_s < 10.0 {
        time_s += dice.exponential() / rate_hz * burst;
        let mut at = time_s;
        while at < 10.0 {
            strikes.push(Strike { time_s: at, size: (spread * dice.normal()).exp() });
            at += dice.exponential() * 3e-3;
            if dice.chance(1.0 / burst) {
                break;
            }
        }
    }
    received(dice, strikes, None, Answer::NoRhythm)
}

/// A ticking clock: a rhythm, but no gap; a figure is no fault.
pub fn clock(dice: &mut Dice) -> Draft {
    let duration_s = length(dice) + 6.0;
    let sound = machine::clock(dice, duration_s);
    Draft { answer: Answer::OtherRhythm, ..recorded(dice, sound) }
}

/// A lamp dimmer: clicks on every half wave of the mains.
pub fn dimmer(dice: &mut Dice) -> Draft {
    let period_s = 0.5 / dice.pick(&[50.0, 60.0]);
    let plan = Plan { period_s, jitter: dice.log_uniform(2e-5, 1e-3), duration_s: 10.0 };
    let times = plan.times(dice, Scatter::Normal);
    let clicks = strikes(dice, &times, 1.0);
    received(dice, clicks, None, Answer::OtherRhythm)
}
