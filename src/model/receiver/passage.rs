//! The complex envelope on its way through one internal step, and the mean of its length.
//!
//! Where the envelope passes near zero its length bends sharply. Taken at the samples alone, such bends fold back into the audio
//! 50 to 70 dB below a click at sixteen bandwidths a second. The mean over each step holds next to nothing of what would fold
//! (the zeros of its frequency response lie where that comes from), and what it takes from the audio the decimator gives back.
//! Simpson's rule gives the mean; a piece that is long against its distance from zero is halved.

use super::Complex;

/// Parts of a step at whose ends the envelope can be asked for; a power of two.
pub(crate) const PARTS: usize = 64;
/// Points of a step at which the envelope is always known: its beginning and its quarters.
pub(super) const POINTS: usize = 5;

/// One step of the envelope.
#[derive(Debug, Clone)]
pub struct Passage<'a, F> {
    /// At its beginning and after each quarter.
    pub(super) points: [Complex; POINTS],
    /// Lengths of these.
    pub(super) lengths: [f64; POINTS],
    /// Mean length.
    pub(super) mean_length: f64,
    /// False if the length has a bend inside the step.
    pub(super) smooth: bool,
    /// The envelope after so many of the [`PARTS`] of the step, ahead of the amplifier.
    at: F,
    /// Gain of the amplifier at the beginning, and how much it grows.
    gain: [f64; 2],
    breaks: &'a [f64],
}

impl<'a, F: Fn(usize) -> Complex> Passage<'a, F> {
    /// A step of which beginning and quarters are known. `breaks` are places, in parts of the step, at which the envelope jumps
    /// or turns.
    #[inline]
    pub(crate) fn new(points: [Complex; POINTS], breaks: &'a [f64], at: F) -> Self {
        let squares = points.map(|z| z.norm_sqr());
        let lengths = squares.map(f64::sqrt);
        let three = halves(&points);
        let smooth = breaks.is_empty() && !near_zero(&three, halves(&squares));
        let mean_length = if smooth {
            simpson(halves(&lengths))
        } else {
            let length = |_, z: Complex| z.norm_sqr().sqrt();
            halved([0, PARTS], three, &Value { at: &at, value: &length, breaks, bends_at_zero: true })
        };
        Self { points, lengths, mean_length, smooth, at, gain: [1.0, 0.0], breaks }
    }

    /// The envelope after so many of the [`PARTS`] of the step.
    #[inline]
    pub(super) fn at(&self, part: usize) -> Complex {
        let [from, growth] = self.gain;
        (self.at)(part) * (from + growth * (part as f64 / PARTS as f64))
    }

    /// Mean of a smooth function of the part of the step and the envelope there.
    #[inline]
    pub(super) fn mean(&self, value: impl Fn(usize, Complex) -> f64) -> f64 {
        let three @ [from, middle, to] = halves(&self.points);
        if self.breaks.is_empty() {
            return simpson([value(0, from), value(PARTS / 2, middle), value(PARTS, to)]);
        }
        let at = |part: usize| self.at(part);
        halved([0, PARTS], three, &Value { at: &at, value: &value, breaks: self.breaks, bends_at_zero: false })
    }

    /// Puts the step behind an amplifier whose gain goes from one value to another.
    #[inline]
    pub(crate) fn amplify(&mut self, from: f64, to: f64) {
        let growth = to - from;
        let [first, .., last] = self.lengths;
        self.mean_length = self.mean_length * (from + 0.5 * growth) + growth * (last - first) * (1.0 / 12.0);
        self.gain = [from, growth];
        for i in 0..POINTS {
            let gain = from + growth * (i as f64 / (POINTS - 1) as f64);
            self.lengths[i] *= gain;
            self.points[i] *= gain;
        }
    }
}

/// What a mean is taken of, and where it is bent.
struct Value<'a, A, V> {
    /// The envelope after so many parts.
    at: &'a A,
    /// The value of it there.
    value: &'a V,
    breaks: &'a [f64],
    bends_at_zero: bool,
}

/// Mean of a value over the parts from one to another, halved around breaks and, if asked for, near zero.
fn halved<A: Fn(usize) -> Complex, V: Fn(usize, Complex) -> f64>(
    [first, last]: [usize; 2],
    points: [Complex; 3],
    of: &Value<'_, A, V>,
) -> f64 {
    let middle = (first + last) / 2;
    let broken = of.breaks.iter().any(|&place| place > first as f64 && place < last as f64);
    let bent = || of.bends_at_zero && near_zero(&points, points.map(|z| z.norm_sqr()));
    if last - first <= 2 || !(broken || bent()) {
        return simpson([(of.value)(first, points[0]), (of.value)(middle, points[1]), (of.value)(last, points[2])]);
    }
    let half = |first: usize, last: usize, from: Complex, to: Complex| {
        halved([first, last], [from, (of.at)((first + last) / 2), to], of)
    };
    0.5 * (half(first, middle, points[0], points[1]) + half(middle, last, points[1], points[2]))
}

/// Of five equidistant points beginning, middle and end.
#[inline]
pub(super) fn halves<T: Copy>([from, _, middle, _, to]: &[T; POINTS]) -> [T; 3] {
    [*from, *middle, *to]
}

/// Mean of what goes through three equidistant values.
#[inline]
pub(super) fn simpson([from, middle, to]: [f64; 3]) -> f64 {
    (from + 4.0 * middle + to) * (1.0 / 6.0)
}

/// True if the envelope comes as near to zero as it moves in half the piece; the squares of its lengths are known.
#[inline]
fn near_zero([from, middle, to]: &[Complex; 3], squares: [f64; 3]) -> bool {
    let [first, second] = [(middle - from).norm_sqr(), (to - middle).norm_sqr()];
    squares.iter().any(|&square| square < first || square < second)
}

#[cfg(test)]
mod tests {
    use super::*;

    // ∫|x| = 1/2·(a² + b²) over a path through zero; ∫√(x² + h²) in closed form (textbook).
    #[test]
    fn the_mean_length_is_that_of_the_integral_through_and_beside_zero() {
        for (aside, from, to) in [(0.0, -0.3, 0.7), (0.01, -0.5, 0.5), (0.2, -0.9, 0.1), (3.0, 0.0, 1.0)] {
            let at = |part: usize| Complex::new(from + (to - from) * part as f64 / PARTS as f64, aside);
            let got = Passage::new([0, 16, 32, 48, 64].map(at), &[], at).mean_length;
            let h: f64 = aside;
            let under = |x: f64| 0.5 * (x * x.hypot(h) + if h > 0.0 { h * h * (x / h).asinh() } else { 0.0 });
            let expected = (under(to) - under(from)) / (to - from);
            assert!((got - expected).abs() < 1e-4, "{aside}: {got} against {expected}");
        }
    }

    #[test]
    fn a_step_through_an_amplifier_has_the_mean_of_the_product() {
        let at = |part: usize| Complex::new(1.0 + 0.2 * part as f64 / PARTS as f64, 0.0);
        let mut passage = Passage::new([0, 16, 32, 48, 64].map(at), &[], at);
        passage.amplify(2.0, 3.0);
        // ∫(1 + 0.2 s)(2 + s) ds.
        assert!((passage.mean_length - (2.0 + 0.5 + 0.2 + 0.2 / 3.0)).abs() < 1e-12);
        assert!((passage.at(PARTS) - Complex::from(3.6)).norm() < 1e-12);
    }
}
