//! The engine of the budgets against the printed examples of JCGM 100 (GUM) and JCGM 101.

use gaptone::uncertainty::{Distribution, Input, Interval, MonteCarlo, Problem};

fn normal(value: f64, u: f64) -> Input {
    Input::new("x", "", value, Distribution::Normal { u })
}

fn rectangular(value: f64, half_width: f64) -> Input {
    Input::new("x", "", value, Distribution::Rectangular { half_width })
}

fn sum(x: &[f64]) -> Option<f64> {
    Some(x.iter().sum())
}

fn near(what: &str, found: f64, expected: f64, within: f64) {
    assert!((found - expected).abs() <= within, "{what}: {found} for {expected} ± {within}");
}

const SHORTEST: MonteCarlo =
    MonteCarlo { probability: 0.95, digits: 2, interval: Interval::Shortest, most_draws: 4_000_000, seed: 101 };

#[test]
fn four_normal_inputs_add_up_to_a_normal_sum() {
    // JCGM 101, 9.2.2: u 2.0, 95 % interval ± 3.92.
    let problem = Problem::new(vec![normal(0.0, 1.0); 4], sum);
    let linear = problem.linear().unwrap();
    near("u", linear.u, 2.0, 1e-9);
    near("propagation", linear.interval(0.95).1, 3.92, 0.005);
    let drawn = problem.monte_carlo(&MonteCarlo::default()).unwrap();
    assert!(drawn.stands, "{drawn:?}");
    near("u", drawn.u, 2.0, 0.02);
    near("low", drawn.low, -3.92, 0.05);
    near("high", drawn.high, 3.92, 0.05);
}

#[test]
fn four_rectangular_inputs_have_a_narrower_interval_than_the_normal_one() {
    // JCGM 101, 9.2.3: u 2.0, Monte Carlo ± 3.88; exactly 2√3·(2 − (3/5)^¼) = 3.8794. The law of propagation stays 3.92.
    let problem = Problem::new(vec![rectangular(0.0, 3f64.sqrt()); 4], sum);
    near("propagation", problem.linear().unwrap().interval(0.95).1, 3.92, 0.005);
    let fine = MonteCarlo { digits: 3, ..MonteCarlo::default() };
    // An end from two million draws scatters by 0.004.
    let drawn = problem.monte_carlo(&fine).unwrap();
    near("high", drawn.high, 3.8794, 0.02);
    near("low", drawn.low, -3.8794, 0.02);
}

#[test]
fn one_large_rectangular_input_makes_the_law_of_propagation_fail() {
    // JCGM 101, 9.2.4: u 10.1, Monte Carlo ± 17.0, law of propagation ± 19.9.
    let mut inputs = vec![rectangular(0.0, 3f64.sqrt()); 3];
    inputs.push(rectangular(0.0, 10.0 * 3f64.sqrt()));
    let problem = Problem::new(inputs, sum);
    let linear = problem.linear().unwrap();
    near("u", linear.u, 10.1, 0.05);
    near("propagation", linear.interval(0.95).1, 19.9, 0.05);
    let drawn = problem.monte_carlo(&MonteCarlo { digits: 3, ..MonteCarlo::default() }).unwrap();
    near("high", drawn.high, 17.0, 0.1);
    let budget = problem.budget("y", "sum", "").unwrap();
    assert_eq!(budget.method, gaptone::uncertainty::Method::MonteCarlo);
    near("reported", budget.result.high, 17.0, 0.6);
}

#[test]
fn the_mass_calibration_has_a_larger_uncertainty_than_first_order_says() {
    // JCGM 101, 9.3: first order 1.2340, 0.0539, [1.1285, 1.3395]; Monte Carlo 1.2341, 0.0754, [1.0834, 1.3825] mg.
    let inputs = vec![
        normal(100_000.0, 0.050),
        normal(1.234, 0.020),
        rectangular(1.20, 0.10),
        rectangular(8000.0, 1000.0),
        rectangular(8000.0, 50.0),
    ];
    let problem =
        Problem::new(inputs, |x| Some((x[0] + x[1]) * (1.0 + (x[2] - 1.2) * (1.0 / x[3] - 1.0 / x[4])) - 100_000.0));
    let linear = problem.linear().unwrap();
    near("value", linear.value, 1.2340, 1e-4);
    near("u", linear.u, 0.0539, 1e-4);
    near("low", linear.interval(0.95).0, 1.1285, 2e-4);
    near("high", linear.interval(0.95).1, 1.3395, 2e-4);
    let drawn = problem.monte_carlo(&SHORTEST).unwrap();
    // The printed ends come from 0.7 million draws; two digits of u are half a unit of 0.001.
    near("value", drawn.value, 1.2341, 5e-4);
    near("u", drawn.u, 0.0754, 5e-4);
    near("low", drawn.low, 1.0834, 4e-3);
    near("high", drawn.high, 1.3825, 4e-3);
    assert_eq!(problem.budget("mass", "mass", "mg").unwrap().method, gaptone::uncertainty::Method::MonteCarlo);
}

#[test]
fn the_comparison_loss_has_its_exact_moments_and_printed_intervals() {
    // JCGM 101, 9.4, in 1e-6: r, x1, shortest 95 % interval, first-order u. Mean x1² + 2u², variance 4u⁴(1 + r²) + 4u²x1².
    let cases: [(f64, f64, f64, f64, f64); 6] = [
        (0.0, 0.0, 0.0, 150.0, 0.0),
        (0.0, 0.010, 0.0, 366.0, 100.0),
        (0.0, 0.050, 1595.0, 3551.0, 500.0),
        (0.9, 0.0, 0.0, 185.0, 0.0),
        (0.9, 0.010, 13.0, 398.0, 100.0),
        (0.9, 0.050, 1625.0, 3555.0, 500.0),
    ];
    let u = 0.005f64;
    for (r, x1, low, high, first_order) in cases {
        let problem = Problem::new(vec![normal(x1, u), normal(0.0, u)], |x| Some(1e6 * (x[0] * x[0] + x[1] * x[1])))
            .correlated(0, 1, r);
        near("first order", problem.linear().unwrap().u, first_order, 1e-6);
        let drawn = problem.monte_carlo(&SHORTEST).unwrap();
        let sd = 1e6 * (4.0 * u.powi(4) * (1.0 + r * r) + 4.0 * u * u * x1 * x1).sqrt();
        near("mean", drawn.value, 1e6 * (x1 * x1 + 2.0 * u * u), 0.01 * sd);
        near("s.d.", drawn.u, sd, 0.01 * sd);
        // The shortest interval has a flat minimum: its ends scatter by more than their distance does.
        near("low", drawn.low, low, 0.05 * sd);
        near("high", drawn.high, high, 0.05 * sd);
    }
}

#[test]
fn the_gauge_block_comes_out_with_both_printed_intervals() {
    // JCGM 101, 9.5 (inputs of table 10 from memory; GUM H.1): 838 nm; law of propagation 32 nm, [745, 931] at 99 % with 16
    // degrees of freedom; Monte Carlo 36 nm, [745, 932]. The exact standard deviation of the t variables and products
    // is 35.8 nm.
    let student = |value, scale, degrees_of_freedom| {
        Input::new("x", "nm", value, Distribution::Student { scale, degrees_of_freedom })
    };
    let inexact = |half_width, inexactness| {
        Input::new("x", "", 0.0, Distribution::InexactRectangular { half_width, inexactness })
    };
    let inputs = vec![
        student(50_000_623.0, 25.0, 18.0),
        student(215.0, 6.0, 24.0),
        student(0.0, 4.0, 5.0),
        student(0.0, 7.0, 8.0),
        rectangular(11.5e-6, 2e-6),
        normal(-0.1, 0.2),
        Input::new("x", "K", 0.0, Distribution::Arcsine { half_width: 0.5 }),
        inexact(1e-6, 0.1e-6),
        inexact(0.050, 0.025),
    ];
    let problem = Problem::new(inputs, |x| {
        let [ls, d, d1, d2, alpha, theta, delta, dalpha, dtheta] = x else { return None };
        Some(ls + d + d1 + d2 - ls * (dalpha * (theta + delta) + alpha * dtheta) - 50_000_000.0)
    });
    let linear = problem.linear().unwrap();
    near("value", linear.value, 838.0, 0.5);
    near("u", linear.u, 32.0, 0.5);
    near("degrees of freedom", linear.effective_degrees_of_freedom.unwrap(), 16.0, 0.5);
    near("coverage factor", linear.coverage_factor(0.99), 2.92, 0.01);
    near("low", linear.interval(0.99).0, 745.0, 1.5);
    near("high", linear.interval(0.99).1, 931.0, 1.5);
    let drawn = problem.monte_carlo(&MonteCarlo { probability: 0.99, ..SHORTEST }).unwrap();
    near("value", drawn.value, 838.0, 0.5);
    near("u", drawn.u, 35.8, 0.3);
    near("low", drawn.low, 745.0, 2.5);
    near("high", drawn.high, 932.0, 2.5);
}

#[test]
fn correlated_readings_of_one_experiment_keep_their_correlation() {
    // JCGM 100, H.2: resistance, reactance and impedance from V, I and φ observed together; table H.4: 127.732 ± 0.071,
    // 219.847 ± 0.295, 254.260 ± 0.236 Ω.
    let volts = [5.007, 4.994, 5.005, 4.990, 4.999];
    let amperes = [19.663e-3, 19.639e-3, 19.640e-3, 19.685e-3, 19.678e-3];
    let radians = [1.0456, 1.0438, 1.0468, 1.0428, 1.0433];
    let mean = |x: &[f64; 5]| x.iter().sum::<f64>() / 5.0;
    let covariance =
        |x: &[f64; 5], y: &[f64; 5]| x.iter().zip(y).map(|(a, b)| (a - mean(x)) * (b - mean(y))).sum::<f64>() / 20.0;
    let r = |x, y| covariance(x, y) / (covariance(x, x) * covariance(y, y)).sqrt();
    let inputs: Vec<Input> =
        [volts, amperes, radians].iter().map(|x| normal(mean(x), covariance(x, x).sqrt())).collect();
    let of = |model: fn(&[f64]) -> f64| {
        let independent = Problem::new(inputs.clone(), move |x| Some(model(x)));
        let alone = independent.linear().unwrap().u;
        let together = independent
            .correlated(0, 1, r(&volts, &amperes))
            .correlated(0, 2, r(&volts, &radians))
            .correlated(1, 2, r(&amperes, &radians))
            .linear()
            .unwrap();
        assert_eq!(together.effective_degrees_of_freedom, None);
        near("shares", together.shares.iter().sum(), 1.0, 1e-12);
        (together.value, together.u, alone)
    };
    let models: [fn(&[f64]) -> f64; 3] = [|x| x[0] / x[1] * x[2].cos(), |x| x[0] / x[1] * x[2].sin(), |x| x[0] / x[1]];
    let published = [(127.732, 0.071, 0.195), (219.847, 0.295, 0.201), (254.260, 0.236, 0.204)];
    for (model, (value, u, ignored)) in models.into_iter().zip(published) {
        let found = of(model);
        near("value", found.0, value, 0.001);
        near("u", found.1, u, 0.001);
        // What ignoring the correlation would give, computed for comparison, is another number.
        near("u of independent inputs", found.2, ignored, 0.001);
        assert!((found.2 - u).abs() > 0.03);
    }
}

#[test]
fn a_logarithm_has_the_printed_skew() {
    // ln X, X rectangular on [0.1, 1.1]: mean −0.665, s.d. 0.606, shortest 95 % [−1.895, 0.095]; first order −0.511.
    let problem = Problem::new(vec![rectangular(0.6, 0.5)], |x| Some(x[0].ln()));
    let drawn = problem.monte_carlo(&MonteCarlo { digits: 3, ..SHORTEST }).unwrap();
    near("mean", drawn.value, -0.665, 0.002);
    near("s.d.", drawn.u, 0.606, 0.002);
    near("low", drawn.low, -1.895, 0.01);
    near("high", drawn.high, 0.095, 0.01);
    near("first order", problem.linear().unwrap().value, -0.511, 0.001);
}

#[test]
fn a_model_without_an_answer_gives_no_result() {
    let half = Problem::new(vec![normal(0.0, 1.0)], |x| (x[0] > 0.0).then_some(x[0]));
    assert!(half.linear().is_none() && half.budget("y", "sum", "").is_none());
    let third = Problem::new(vec![normal(0.5, 1.0)], |x| (x[0] > 0.0).then_some(x[0]));
    assert!(third.monte_carlo(&MonteCarlo::default()).is_none());
    // One side is enough for a sensitivity.
    assert_eq!(third.linear().unwrap().sensitivities.len(), 1);
}
