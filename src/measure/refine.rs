//! The second pass: the shape from the clicks on the rhythm, the noise from what is left, and the rhythm fitted again.

use super::hypothesis::{DENSITY, Hypothesis, apart_s};
use super::trains;
use super::window::{FIND_HIGH_PASS_HZ, Window};
use crate::clicks::candidates;
use crate::clicks::filter::Kernel;
use crate::clicks::shape::{Shape, leading_vectors, median_shape, pieces};
use crate::clicks::snippet::{dot, normalise};
use crate::clicks::spectrum::Spectrum;
use crate::rhythm::fit::Start;
use crate::rhythm::search::fit_among;

/// Half width of the second shape, s and periods.
const HALF_S: f64 = 1.2e-3;
const HALF_PERIODS: f64 = 0.45;
/// Clicks that the shape is learnt from at most.
const LEARN_FROM: usize = 300;
/// High-pass and floor of the second whitening.
const HIGH_PASS_HZ: f64 = 180.0;
const FLOOR: f64 = 3e-3;

/// How clicks are found after refining: the whitening kernel, and the signal behind it.
pub struct Finder {
    /// Whitening.
    pub kernel: Kernel,
    /// The window whitened.
    pub whitened: Vec<f32>,
}

/// Refines a hypothesis in place, twice, starting from the whitening of floor `floor`. Clicks at the times `foreign_s` (sorted)
/// belong to other trains and are left to them.
pub fn refine(window: &Window, whitened: &[f32], floor: f64, h: &mut Hypothesis, foreign_s: &[f64]) -> Finder {
    let first = window.spectrum().whitening(FIND_HIGH_PASS_HZ, floor);
    let half = (HALF_S.min(HALF_PERIODS * h.fit.period_s) * window.rate_hz) as usize;
    let shape = learn(whitened, &strongest_on_rhythm(h, window.rate_hz), half, h.shape.signed);
    let rest = without_clicks(whitened, h, &shape, window.rate_hz);
    let noise = Spectrum::of_noise(&rest, window.rate_hz);
    let second = noise.whitening(HIGH_PASS_HZ, FLOOR);
    let kernel = window.kernel(|f| first(f) * second(f));
    let finder = Finder { whitened: window.through(&kernel), kernel };
    let before = h.shape.clone();
    if again(window, &finder.whitened, h, foreign_s) && !same(&before, &h.shape) {
        again(window, &finder.whitened, h, foreign_s);
    }
    finder
}

/// One round: shape, candidates and fit; false if the fit lost half of its clicks (the hypothesis then stays as it was).
fn again(window: &Window, whitened: &[f32], h: &mut Hypothesis, foreign_s: &[f64]) -> bool {
    let half = (HALF_S.min(HALF_PERIODS * h.fit.period_s) * window.rate_hz) as usize;
    let shape = learn(whitened, &strongest_on_rhythm(h, window.rate_hz), half, h.shape.signed);
    let mut output = Vec::new();
    candidates::matched_output(window.bank, whitened, &shape, &mut output);
    let found = candidates::find(&output, window.rate_hz, apart_s(&shape, window.rate_hz, h.fit.period_s, h.fast));
    let start = Start::again(&h.fit);
    let free = trains::free_of(&found, foreign_s);
    match fit_among(&found, &free, window.duration_s(), start, DENSITY) {
        Some(fit) if 2 * fit.chain.index.len() >= h.fit.chain.index.len() => {
            h.fit = fit;
            h.candidates = found;
            h.shape = shape;
            true
        }
        _ => false,
    }
}

/// Match from which two shapes are the same: what would be found with the second is what was found with the first.
const SAME: f32 = 0.98;

fn same(a: &Shape, b: &Shape) -> bool {
    let shorter = a.centre.min(b.centre);
    let part = |s: &Shape| {
        let mut v = s.vectors[0][s.centre - shorter..s.centre + shorter + 1].to_vec();
        normalise(&mut v);
        v
    };
    a.signed && b.signed && dot(&part(a), &part(b)) > SAME
}

fn strongest_on_rhythm(h: &Hypothesis, rate_hz: f64) -> Vec<f64> {
    let stride = h.fit.chain.index.len().div_ceil(LEARN_FROM);
    h.fit.chain.index.iter().step_by(stride.max(1)).map(|&i| h.candidates.time_s[i] * rate_hz).collect()
}

fn learn(x: &[f32], positions: &[f64], half: usize, signed: bool) -> Shape {
    let mut rows = pieces(x, positions, half);
    rows.iter_mut().for_each(|r| normalise(r));
    let vectors = if signed { vec![median_shape(&rows)] } else { leading_vectors(&rows, None, 2) };
    Shape { vectors, centre: half, signed }
}

/// The signal with the fitted clicks taken off (to the nearest sample: only the spectrum of the rest is used).
fn without_clicks(x: &[f32], h: &Hypothesis, shape: &Shape, rate_hz: f64) -> Vec<f32> {
    let mut rest = x.to_vec();
    let length = shape.vectors[0].len();
    for &i in &h.fit.chain.index {
        let first = (h.candidates.time_s[i] * rate_hz).round() as isize - shape.centre as isize;
        if first < 0 || first as usize + length > x.len() {
            continue;
        }
        let range = first as usize..first as usize + length;
        for vector in &shape.vectors {
            let size = dot(&x[range.clone()], vector);
            rest[range.clone()].iter_mut().zip(vector).for_each(|(r, v)| *r -= size * v);
        }
    }
    rest
}
