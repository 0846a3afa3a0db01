//! The normal distribution and its inverse.

use super::gamma::gamma_probability;

/// Value of a polynomial with the lowest coefficient first.
fn polynomial(x: f64, coefficients: &[f64]) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, c| sum * x + c)
}

// Coefficients of algorithm AS 241, routine PPND16: M. J. Wichura, Applied Statistics 37 (1988) 477.
const A: [f64; 8] = [
    3.387_132_872_796_366_5,
    1.331_416_678_917_843_8e2,
    1.971_590_950_306_551_3e3,
    1.373_169_376_550_946e4,
    4.592_195_393_154_987e4,
    6.726_577_092_700_87e4,
    3.343_057_558_358_813e4,
    2.509_080_928_730_122_7e3,
];
const B: [f64; 8] = [
    1.0,
    4.231_333_070_160_091e1,
    6.871_870_074_920_579e2,
    5.394_196_021_424_751e3,
    2.121_379_430_158_659_7e4,
    3.930_789_580_009_271e4,
    2.872_908_573_572_194_3e4,
    5.226_495_278_852_854e3,
];
const C: [f64; 8] = [
    1.423_437_110_749_683_5,
    4.630_337_846_156_546,
    5.769_497_221_460_691,
    3.647_848_324_763_204_5,
    1.270_458_252_452_368_4,
    2.417_807_251_774_506e-1,
    2.272_384_498_926_918_4e-2,
    7.745_450_142_783_414e-4,
];
const D: [f64; 8] = [
    1.0,
    2.053_191_626_637_759,
    1.676_384_830_183_803_8,
    6.897_673_349_851e-1,
    1.481_039_764_274_800_8e-1,
    1.519_866_656_361_645_7e-2,
    5.475_938_084_995_345e-4,
    1.050_750_071_644_416_9e-9,
];
const E: [f64; 8] = [
    6.657_904_643_501_103,
    5.463_784_911_164_114,
    1.784_826_539_917_291_3,
    2.965_605_718_285_048_7e-1,
    2.653_218_952_657_612_4e-2,
    1.242_660_947_388_078_4e-3,
    2.711_555_568_743_487_6e-5,
    2.010_334_399_292_288_1e-7,
];
const F: [f64; 8] = [
    1.0,
    5.998_322_065_558_88e-1,
    1.369_298_809_227_358e-1,
    1.487_536_129_085_061_5e-2,
    7.868_691_311_456_133e-4,
    1.846_318_317_510_054_8e-5,
    1.421_511_758_316_446e-7,
    2.044_263_103_389_939_8e-15,
];

/// The value that a standard normal variable stays below with the given probability, by algorithm AS 241 (Wichura
/// 1988), good to about 1e-16 relative. A probability outside 0..1 gives NaN.
#[must_use]
pub fn normal_quantile(probability: f64) -> f64 {
    let q = probability - 0.5;
    if q.abs() <= 0.425 {
        let r = 0.180_625 - q * q;
        return q * polynomial(r, &A) / polynomial(r, &B);
    }
    let tail = if q < 0.0 { probability } else { 1.0 - probability };
    let r = (-tail.ln()).sqrt();
    let size = if r <= 5.0 {
        polynomial(r - 1.6, &C) / polynomial(r - 1.6, &D)
    } else {
        polynomial(r - 5.0, &E) / polynomial(r - 5.0, &F)
    };
    if q < 0.0 { -size } else { size }
}

/// Probability that a standard normal variable stays below `z`.
#[must_use]
pub fn normal_probability(z: f64) -> f64 {
    // z² / 2 follows the gamma distribution of shape ½ (Abramowitz and Stegun 6.5.16 and 7.1).
    let half = 0.5 * gamma_probability(0.5, 0.5 * z * z);
    if z < 0.0 { 0.5 - half } else { 0.5 + half }
}
