//! The random numbers: portable integers, and distributions checked against published values.

use gaptone::model::random::{Random, gamma_probability, gamma_quantile, normal_probability, normal_quantile};

/// Digits to which the tables quoted here are printed.
const PRINTED: f64 = 1e-9;

#[test]
fn normal_quantiles_are_the_published_ones() {
    // M. J. Wichura, Applied Statistics 37 (1988) 477: the check values given with algorithm AS 241.
    assert!((normal_quantile(0.25) - -0.674_489_750_196_081_7).abs() < 1e-15);
    assert!((normal_quantile(0.001) - -3.090_232_306_167_814).abs() < 1e-14);
    assert!((normal_quantile(1e-20) - -9.262_340_089_798_408).abs() < 1e-13);
    assert_eq!(normal_quantile(0.5), 0.0);
    assert!(normal_quantile(1.5).is_nan());
}

#[test]
fn normal_probability_undoes_the_quantile() {
    for p in [1e-6, 0.003, 0.2, 0.5, 0.77, 0.999, 1.0 - 1e-6] {
        assert!((normal_probability(normal_quantile(p)) - p).abs() < 1e-14, "{p}");
    }
}

#[test]
fn gamma_of_shape_one_is_the_exponential_distribution() {
    for x in [0.01f64, 0.5, 1.0, 2.5, 9.0] {
        assert!((gamma_probability(1.0, x) - (1.0 - (-x).exp())).abs() < 1e-14);
    }
    for p in [0.001f64, 0.3, 0.99] {
        assert!((gamma_quantile(1.0, p) + (1.0 - p).ln()).abs() < 1e-12);
    }
}

#[test]
fn gamma_quantiles_are_half_the_tabulated_chi_square_ones() {
    // Chi-square table, Abramowitz and Stegun table 26.8: Q = 0.05 at 10 degrees of freedom 18.3070, Q = 0.995 at 2
    // degrees 0.0100251, Q = 0.01 at 40 degrees 63.6907.
    for (degrees, q, chi_square) in [(10.0, 0.05, 18.3070), (2.0, 0.995, 0.010_025_1), (40.0, 0.01, 63.6907)] {
        let found = 2.0 * gamma_quantile(0.5 * degrees, 1.0 - q);
        assert!((found - chi_square).abs() < 1e-5 * chi_square.max(1.0), "{degrees} {found}");
    }
}

#[test]
fn the_short_cut_for_large_shapes_meets_the_exact_law() {
    /// What the cube-root transform may miss, in standard deviations, at the shape where it takes over.
    const SHORT_CUT: f64 = 1e-3;
    for p in [1e-4f64, 0.05, 0.5, 0.95, 0.9999] {
        let shape = 2501.0;
        let x = gamma_quantile(shape, p);
        let exact = gamma_probability(shape, x);
        let z = (normal_quantile(exact) - normal_quantile(p)).abs();
        assert!(z < SHORT_CUT, "{p} {z}");
    }
}

#[test]
fn moments_of_the_draws_are_those_of_the_laws() {
    let n = 200_000;
    let mut random = Random::seeded(7);
    // Five standard errors of a variance estimated from n draws with kurtosis up to 9 (exponential).
    let tolerance = 5.0 * (8.0 / f64::from(n)).sqrt();
    let moments = |draw: &mut dyn FnMut() -> f64| {
        let (mut sum, mut square) = (0.0, 0.0);
        for _ in 0..n {
            let x = draw();
            sum += x;
            square += x * x;
        }
        let mean = sum / f64::from(n);
        (mean, square / f64::from(n) - mean * mean)
    };
    for (name, mean, variance, (got_mean, got_variance)) in [
        ("uniform", 0.5, 1.0 / 12.0, moments(&mut || random.uniform())),
        ("normal", 0.0, 1.0, moments(&mut || random.normal())),
        ("exponential", 1.0, 1.0, moments(&mut || random.exponential())),
        ("gamma", 1.0, 0.16, moments(&mut || random.gamma(6.25))),
    ] {
        assert!((got_mean - mean).abs() < tolerance, "{name} mean {got_mean}");
        assert!((got_variance - variance).abs() < tolerance, "{name} variance {got_variance}");
    }
}

#[test]
fn a_seed_gives_the_published_stream_of_the_generator() {
    // SplitMix64 of seed 0 starts e220a8397b1dcdaf, 6e789e6aa1b965f4, 06c45d188009454f, f88bb8a8724c81ec; the first
    // output of xoshiro256++ from there is rotl(s0 + s3, 23) + s0 (Blackman and Vigna 2018).
    let (s0, s3) = (0xe220_a839_7b1d_cdaf_u64, 0xf88b_b8a8_724c_81ec_u64);
    let first = s0.wrapping_add(s3).rotate_left(23).wrapping_add(s0);
    let expected = ((first >> 11) as f64 + 0.5) / 9_007_199_254_740_992.0;
    assert!((Random::seeded(0).uniform() - expected).abs() < PRINTED * PRINTED);
}

#[test]
fn streams_of_one_seed_differ_and_repeat() {
    let draw = |seed, number| Random::stream(seed, number).uniform();
    assert_ne!(draw(3, 0), draw(3, 1));
    assert_eq!(draw(3, 1), draw(3, 1));
    assert_ne!(draw(3, 1), draw(4, 1));
}

#[test]
fn neighbouring_seeds_and_streams_share_nothing() {
    // Firings of neighbouring seeds and of the streams of one seed: no value of one turns up in another, and they are
    // uncorrelated (400 values: standard error 0.05).
    const N: usize = 400;
    let draws: Vec<Vec<f64>> = (0..6u64)
        .flat_map(|seed| (0..5u64).map(move |number| (seed, number)))
        .map(|(seed, number)| {
            let mut random = Random::stream(seed, number);
            (0..N).map(|_| random.uniform()).collect()
        })
        .collect();
    for (i, a) in draws.iter().enumerate() {
        for b in &draws[..i] {
            assert!(!a.iter().any(|x| b.contains(x)));
            let product: f64 = a.iter().zip(b).map(|(x, y)| 12.0 * (x - 0.5) * (y - 0.5)).sum::<f64>() / N as f64;
            assert!(product.abs() < 0.22, "{product}");
        }
    }
}
