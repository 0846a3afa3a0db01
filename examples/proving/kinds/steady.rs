//! One gap that fires with independent periods.

use crate::case::{Draft, Truth};
use crate::firings::{Plan, Scatter, strikes};
use crate::random::Dice;
use crate::recorder::Recorder;
use crate::scene::Scene;

/// Scene and truth of one train of a plan.
pub fn train(dice: &mut Dice, plan: Plan, scatter: Scatter) -> (Scene, Truth) {
    let times = plan.times(dice, scatter);
    let heard = strikes(dice, &times, 1.0);
    let truth = Truth::of_times(&times).with_process(plan.period_s, plan.jitter * plan.period_s);
    (Scene::ordinary(dice, plan.duration_s, heard), truth)
}

/// Steady firing, 4..1800 /s, jitter 0.2..8 %, any receiver.
pub fn clean(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 4.0, 1800.0);
    let (scene, truth) = train(dice, plan, Scatter::Normal);
    Draft::gap(scene, truth)
}

/// Click peak only 9..16 dB above the channel's rms noise.
pub fn noisy(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 4.0, 1000.0);
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    scene.click_over_noise_db = dice.uniform(9.0, 16.0);
    Draft::gap(scene, truth)
}

/// 1800..3200 /s in 5..9 kHz: clicks overlap.
pub fn fast(dice: &mut Dice) -> Draft {
    overlapping(dice, 1800.0, 3200.0)
}

/// 2600..3500 /s.
pub fn very_fast(dice: &mut Dice) -> Draft {
    overlapping(dice, 2600.0, 3500.0)
}

fn overlapping(dice: &mut Dice, slowest_hz: f64, fastest_hz: f64) -> Draft {
    let period_s = 1.0 / dice.uniform(slowest_hz, fastest_hz);
    let plan = Plan { period_s, jitter: dice.log_uniform(0.003, 0.03), duration_s: dice.uniform(4.0, 8.0) };
    let (mut scene, truth) = train(dice, plan, Scatter::Normal);
    scene.recorder = Recorder::common(dice);
    if scene.receiver.bandwidth_hz < 9e3 {
        scene.receiver.bandwidth_hz = dice.uniform(5e3, 9e3);
        scene.receiver.audio_high.1 = dice.uniform(3.2e3, 6e3);
    }
    Draft::gap(scene, truth)
}

/// 0.25..4 /s, up to a minute.
pub fn slow(dice: &mut Dice) -> Draft {
    let period_s = 1.0 / dice.log_uniform(0.25, 4.0);
    let duration_s = (dice.uniform(20.0, 60.0) * period_s).clamp(20.0, 60.0);
    let plan = Plan { period_s, jitter: dice.log_uniform(0.005, 0.08), duration_s };
    let (scene, truth) = train(dice, plan, Scatter::Normal);
    Draft::gap(scene, truth)
}

/// Jitter 15..40 %.
pub fn loose(dice: &mut Dice) -> Draft {
    let mut plan = Plan::draw(dice, 8.0, 500.0);
    plan.jitter = dice.uniform(0.15, 0.4);
    // Beyond 28 % a normal law would be cut at the short end: the gamma law is true to its variance.
    let scatter = if plan.jitter < 0.2 && dice.chance(0.5) { Scatter::Normal } else { Scatter::Gamma };
    let (scene, truth) = train(dice, plan, scatter);
    Draft::gap(scene, truth)
}
