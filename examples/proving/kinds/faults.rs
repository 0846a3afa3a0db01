//! Trains with something missing, something extra or company.

use super::steady::train;
use crate::case::{Draft, Truth};
use crate::firings::{Plan, Scatter, Strike, strikes};
use crate::random::Dice;
use crate::scene::Scene;

/// 4..15 % of the clicks not heard.
pub fn missing(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 4.0, 1200.0);
    let (mut scene, mut truth) = train(dice, plan, Scatter::Normal);
    let share = dice.uniform(0.04, 0.15);
    for strike in &mut scene.strikes {
        if dice.chance(share) {
            strike.size = 0.0;
            truth.unheard += 1;
        }
    }
    Draft::gap(scene, truth)
}

/// 3..12 % of the firings followed by an extra strike 0.1..0.6 of a period later.
pub fn double(dice: &mut Dice) -> Draft {
    let plan = Plan::draw(dice, 4.0, 600.0);
    let (mut scene, mut truth) = train(dice, plan, Scatter::Normal);
    let share = dice.uniform(0.03, 0.12);
    let size = dice.uniform(0.4, 1.0);
    for &time_s in &truth.times_s {
        if dice.chance(share) {
            let time_s = time_s + plan.period_s * dice.uniform(0.1, 0.6);
            scene.strikes.push(Strike { time_s, size: size * dice.uniform(0.8, 1.2) });
            truth.extra += 1;
        }
    }
    Draft::gap(scene, truth)
}

/// Firing in two to four stretches, noise before, between and after.
pub fn outage(dice: &mut Dice) -> Draft {
    let plan = Plan { duration_s: dice.uniform(10.0, 20.0), ..Plan::draw(dice, 15.0, 800.0) };
    let count = dice.whole(1, 3);
    // Cut the recording into alternating silence and firing.
    let mut shares: Vec<f64> = (0..=2 * count).map(|_| dice.uniform(0.3, 1.0)).collect();
    if dice.chance(0.4) {
        shares[0] = 0.0;
    }
    let total: f64 = shares.iter().sum();
    let mut edges = vec![0.0];
    for share in &shares {
        edges.push(edges[edges.len() - 1] + share / total * plan.duration_s);
    }
    let stretches: Vec<Vec<f64>> = (0..count)
        .map(|k| {
            let start = edges[2 * k + 1] + dice.uniform(0.0, 1.0) * plan.period_s;
            plan.times_between(dice, Scatter::Normal, start, edges[2 * k + 2])
        })
        .collect();
    let heard = strikes(dice, &stretches.concat(), 1.0);
    let truth = Truth::of(&stretches).with_process(plan.period_s, plan.jitter * plan.period_s);
    Draft::gap(Scene::ordinary(dice, plan.duration_s, heard), truth)
}

/// A second, weaker train of any rate.
pub fn two(dice: &mut Dice) -> Draft {
    let main = Plan::draw(dice, 15.0, 500.0);
    let second = Plan { duration_s: main.duration_s, ..Plan::draw(dice, 15.0, 500.0) };
    let size = dice.uniform(0.25, 0.6);
    pair(dice, main, second, size)
}

/// A second, weaker train whose rate is near 1:2, 2:3, 1:1, 3:2 or 2:1 of the first.
pub fn two_near(dice: &mut Dice) -> Draft {
    let main = Plan::draw(dice, 15.0, 400.0);
    let ratio = dice.pick(&[0.5, 2.0 / 3.0, 1.0, 1.5, 2.0]) * (1.0 + dice.sign() * dice.log_uniform(0.003, 0.03));
    let second =
        Plan { period_s: main.period_s / ratio, jitter: dice.log_uniform(0.002, 0.08), duration_s: main.duration_s };
    let size = dice.uniform(0.3, 0.7);
    pair(dice, main, second, size)
}

fn pair(dice: &mut Dice, main: Plan, second: Plan, size: f64) -> Draft {
    let (mut scene, mut truth) = train(dice, main, Scatter::Normal);
    let times = second.times(dice, Scatter::Normal);
    scene.strikes.extend(strikes(dice, &times, size));
    truth.second_rate_hz = Some(Truth::of_times(&times).rate_hz);
    Draft::gap(scene, truth)
}
