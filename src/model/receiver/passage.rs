//! The complex envelope on its way through one internal step, and the mean of its length.
//!
//! Where the envelope passes near zero its length bends sharply. Taken at the samples alone, such bends fold back into the audio
//! 50 to 70 dB below a click at sixteen bandwidths a second. The mean over each step holds next to nothing of what would fold
//! (the zeros of its frequency response lie where that comes from), and what it takes from the audio the decimator gives back.
//! Simpson's rule gives the mean; a piece that is long against its distance from zero is halved.

use super::Complex;

/// Parts of a step at whose ends the envelope can be asked for; a power of two.
pub(crate) const PARTS: usize = 64;

/// One step of the envelope.
#[derive(Debug, Clone)]
pub struct Passage<'a, F> {
    /// At its beginning, middle and end.
    pub(super) points: [Complex; 3],
    /// Lengths of these.
    pub(super) lengths: [f64; 3],
    /// Mean length.
    pub(super) mean_length: f64,
    /// False if the length has a bend inside the step.
    pub(super) smooth: bool,
    /// The envelope after so many of the [`PARTS`] of the step.
    pub(super) at: F,
    breaks: &'a [f64],
}

impl<'a, F: Fn(usize) -> Complex> Passage<'a, F> {
    /// A step of which beginning, middle and end are known. `breaks` are places, in parts of the step, at which the envelope
    /// jumps or turns.
    #[inline]
    pub(crate) fn new(points: [Complex; 3], breaks: &'a [f64], at: F) -> Self {
        let lengths = points.map(|z| z.norm_sqr().sqrt());
        let smooth = breaks.is_empty() && !near_zero(&points);
        let mut passage = Self { points, lengths, mean_length: 0.0, smooth, at, breaks };
        passage.mean_length = if smooth {
            simpson(lengths)
        } else {
            passage.halved([0, PARTS], points, &|_, z| z.norm_sqr().sqrt(), true)
        };
        passage
    }

    /// Mean of a smooth function of the part of the step and the envelope there.
    #[inline]
    pub(super) fn mean(&self, value: impl Fn(usize, Complex) -> f64) -> f64 {
        let [from, middle, to] = self.points;
        if self.breaks.is_empty() {
            return simpson([value(0, from), value(PARTS / 2, middle), value(PARTS, to)]);
        }
        self.halved([0, PARTS], self.points, &value, false)
    }

    /// The same step behind an amplifier whose gain goes from one value to another.
    #[inline]
    pub(crate) fn amplified(self, from: f64, to: f64) -> Passage<'a, impl Fn(usize) -> Complex> {
        let middle = 0.5 * (from + to);
        let (gains, at) = ([from, middle, to], self.at);
        let [first, _, last] = self.lengths;
        Passage {
            points: std::array::from_fn(|i| self.points[i] * gains[i]),
            lengths: std::array::from_fn(|i| self.lengths[i] * gains[i]),
            mean_length: self.mean_length * middle + (to - from) * (last - first) / 12.0,
            smooth: self.smooth,
            at: move |part| at(part) * (from + (to - from) * part as f64 / PARTS as f64),
            breaks: self.breaks,
        }
    }

    /// Mean of a value over the parts from one to another, halved around breaks and, if asked for, near zero.
    fn halved(
        &self,
        [first, last]: [usize; 2],
        points: [Complex; 3],
        value: &impl Fn(usize, Complex) -> f64,
        bends_at_zero: bool,
    ) -> f64 {
        let middle = (first + last) / 2;
        let broken = self.breaks.iter().any(|&place| place > first as f64 && place < last as f64);
        if last - first <= 2 || !(broken || bends_at_zero && near_zero(&points)) {
            return simpson([value(first, points[0]), value(middle, points[1]), value(last, points[2])]);
        }
        let half = |first: usize, last: usize, from: Complex, to: Complex| {
            self.halved([first, last], [from, (self.at)((first + last) / 2), to], value, bends_at_zero)
        };
        0.5 * (half(first, middle, points[0], points[1]) + half(middle, last, points[1], points[2]))
    }
}

/// Mean of what goes through three equidistant values.
#[inline]
pub(super) fn simpson([from, middle, to]: [f64; 3]) -> f64 {
    (from + 4.0 * middle + to) / 6.0
}

/// True if the envelope comes as near to zero as it moves in half the piece.
#[inline]
fn near_zero(points: &[Complex; 3]) -> bool {
    let [from, middle, to] = points;
    let nearest = from.norm_sqr().min(middle.norm_sqr()).min(to.norm_sqr());
    nearest < (middle - from).norm_sqr().max((to - middle).norm_sqr())
}

#[cfg(test)]
mod tests {
    use super::*;

    // ∫|x| = 1/2·(a² + b²) over a path through zero; ∫√(x² + h²) in closed form (textbook).
    #[test]
    fn the_mean_length_is_that_of_the_integral_through_and_beside_zero() {
        for (aside, from, to) in [(0.0, -0.3, 0.7), (0.01, -0.5, 0.5), (0.2, -0.9, 0.1), (3.0, 0.0, 1.0)] {
            let at = |part: usize| Complex::new(from + (to - from) * part as f64 / PARTS as f64, aside);
            let got = Passage::new([at(0), at(PARTS / 2), at(PARTS)], &[], at).mean_length;
            let h: f64 = aside;
            let under = |x: f64| 0.5 * (x * x.hypot(h) + if h > 0.0 { h * h * (x / h).asinh() } else { 0.0 });
            let expected = (under(to) - under(from)) / (to - from);
            assert!((got - expected).abs() < 1e-4, "{aside}: {got} against {expected}");
        }
    }

    #[test]
    fn a_step_through_an_amplifier_has_the_mean_of_the_product() {
        let at = |part: usize| Complex::new(1.0 + 0.2 * part as f64 / PARTS as f64, 0.0);
        let passage = Passage::new([at(0), at(PARTS / 2), at(PARTS)], &[], at).amplified(2.0, 3.0);
        // ∫(1 + 0.2 s)(2 + s) ds.
        assert!((passage.mean_length - (2.0 + 0.5 + 0.2 + 0.2 / 3.0)).abs() < 1e-12);
        assert!(((passage.at)(PARTS) - Complex::from(3.6)).norm() < 1e-12);
    }
}
