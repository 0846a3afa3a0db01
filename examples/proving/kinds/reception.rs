//! A steady gap, heard badly.

use super::nothing::modulated;
use super::steady::train;
use crate::case::Draft;
use crate::codec::Codec;
use crate::firings::{Plan, Scatter};
use crate::random::Dice;
use crate::receiver::{Detector, GainControl};
use crate::recorder::Recorder;
use crate::scene::{Carrier, Tone};
use crate::sounds::{music, speech};

/// An unmodulated carrier, 0.3..3 times the click, on tune or up to 3 kHz off.
pub fn carrier(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 4.0, 1000.0);
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    let offset_hz = if dice.chance(0.5) { dice.uniform(-20.0, 20.0) } else { dice.uniform(-3e3, 3e3) };
    scene.carrier = Some(Carrier::bare(dice.log_uniform(0.3, 3.0), offset_hz));
    Draft::gap(scene, truth)
}

/// 50 or 60 Hz hum in the audio, up to 60 % of the click.
pub fn hum(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 4.0, 1200.0);
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    let mains_hz = dice.pick(&[50.0, 60.0]) * (1.0 + 3e-4 * dice.normal());
    let amplitude = dice.uniform(0.1, 0.6);
    scene.tones = vec![
        Tone { frequency_hz: mains_hz, amplitude, phase: dice.phase() },
        Tone { frequency_hz: 2.0 * mains_hz, amplitude: amplitude * dice.uniform(0.0, 0.4), phase: dice.phase() },
    ];
    Draft::gap(scene, truth)
}

/// Mains harmonics to 1.5 kHz, together up to 60 % of the click.
pub fn buzz(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 4.0, 1000.0);
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    scene.tones = mains_harmonics(dice);
    Draft::gap(scene, truth)
}

/// Harmonics of the mains up to 1.5 kHz whose amplitudes fall with their order and add up to 20..60 % of the click.
fn mains_harmonics(dice: &mut Dice) -> Vec<Tone> {
    let mains_hz = dice.pick(&[50.0, 60.0]) * (1.0 + 3e-4 * dice.normal());
    let fall = dice.uniform(0.5, 1.5);
    let mut tones: Vec<Tone> = (1..=(1500.0 / mains_hz) as usize)
        .map(|order| Tone {
            frequency_hz: mains_hz * order as f64,
            amplitude: dice.uniform(0.2, 1.0) * (order as f64).powf(-fall),
            phase: dice.phase(),
        })
        .collect();
    let sum: f64 = tones.iter().map(|t| t.amplitude).sum();
    let wanted = dice.uniform(0.2, 0.6);
    tones.iter_mut().for_each(|t| t.amplitude *= wanted / sum);
    tones
}

/// Lossy storage: telephone, few bits, coarse transform coding.
pub fn codec(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 15.0, 400.0);
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    scene.click_over_noise_db = dice.uniform(20.0, 35.0);
    let coarse = Codec::Transform {
        frame: dice.pick(&[128, 256, 576, 1024]),
        top_hz: dice.uniform(4e3, 15e3),
        coarseness: dice.uniform(0.4, 1.5),
    };
    let (sample_rate_hz, codec) = match dice.whole(0, 4) {
        0 => (8_000, Codec::MuLaw),
        1 => (8_000, Codec::None),
        2 => (dice.pick(&[8_000, 11_025, 22_050, 44_100]), Codec::Linear(8)),
        _ => (dice.pick(&[44_100, 48_000]), coarse),
    };
    scene.recorder = Recorder { sample_rate_hz, codec, peak: dice.uniform(0.5, 1.0), ..Recorder::common(dice) };
    Draft::gap(scene, truth)
}

/// Clipped, and pumped by the gain control.
pub fn clipped(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 4.0, 800.0);
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    scene.receiver.gain_control = Some(GainControl::pumping(dice));
    scene.recorder.clip = Some(dice.uniform(0.25, 0.8));
    Draft::gap(scene, truth)
}

/// A gain control whose haste depends on the level.
pub fn level_dependent_gain(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 4.0, 1200.0);
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    scene.receiver.gain_control = Some(GainControl { level_dependent: true, ..GainControl::pumping(dice) });
    Draft::gap(scene, truth)
}

/// A frequency discriminator on a weak carrier that the clicks knock about.
pub fn discriminator(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 15.0, 500.0);
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    scene.receiver.bandwidth_hz = dice.log_uniform(6e3, 16e3);
    scene.receiver.detector = Detector::Discriminator(3e3);
    scene.receiver.gain_control = None;
    scene.click_over_noise_db = dice.uniform(25.0, 40.0);
    scene.carrier = Some(Carrier::bare(dice.log_uniform(0.4, 2.0), dice.uniform(-500.0, 500.0)));
    Draft::gap(scene, truth)
}

/// A station talking under the clicks, up to three times as strong.
pub fn station(dice: &mut Dice) -> Draft {
    under_programme(dice, speech::speech)
}

/// A station playing music under the clicks, up to three times as strong.
pub fn station_music(dice: &mut Dice) -> Draft {
    under_programme(dice, music::music)
}

fn under_programme(dice: &mut Dice, sound: fn(&mut Dice, f64) -> Vec<f64>) -> Draft {
    let plan = Plan::draw(dice, 15.0, 600.0);
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    let programme = sound(dice, plan.duration_s);
    let ratio = dice.log_uniform(0.3, 3.0);
    scene.carrier = Some(modulated(dice, ratio, programme));
    Draft::gap(scene, truth)
}
