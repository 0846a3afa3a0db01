//! Random draws of the receiver, one stream for each purpose so that switching one thing on leaves the others as they were.

use super::Complex;
use crate::model::random::{Random, mix};
use std::f64::consts::TAU;

/// What a stream of draws is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Stream {
    /// Carrier phase of each click.
    ClickPhase = 1,
    /// Noise in the channel.
    ChannelNoise = 2,
    /// The co-channel carrier and its programme.
    Carrier = 3,
    /// Noise of the recorder.
    Recorder = 4,
    /// Drop-outs of the recorder.
    DropOuts = 5,
}

/// A stream of draws.
#[derive(Debug, Clone)]
pub(crate) struct Draw {
    random: Random,
}

impl Draw {
    pub(crate) fn new(seed: u64, stream: Stream) -> Self {
        Self { random: Random::seeded(mix(seed ^ mix(stream as u64))) }
    }

    /// Uniform in (0, 1), neither end reached.
    #[inline]
    pub(crate) fn uniform(&mut self) -> f64 {
        self.random.uniform()
    }

    /// A point on the unit circle.
    pub(crate) fn phase(&mut self) -> Complex {
        Complex::from_polar(1.0, TAU * self.uniform())
    }

    /// Normal numbers from here on.
    pub(crate) fn normals(self) -> Normals {
        Normals { draw: self, block: Vec::new(), spare: None }
    }
}

/// Numbers drawn together: one after the other, each would wait for the logarithm of the last.
const BLOCK: usize = 64;

/// A stream of normal numbers, by the polar method (Marsaglia and Bray 1964). Whether a point is drawn again is decided by sums
/// and products alone, so every machine draws the same points.
#[derive(Debug, Clone)]
pub(crate) struct Normals {
    draw: Draw,
    /// Drawn ahead, the next one last.
    block: Vec<Complex>,
    /// The second of the last pair of real numbers.
    spare: Option<f64>,
}

impl Normals {
    /// Complex normal number of mean square 1: both parts normal with variance 1/2.
    #[inline]
    pub(crate) fn complex(&mut self) -> Complex {
        if self.block.is_empty() {
            self.draw_block();
        }
        self.block.pop().unwrap_or_default()
    }

    fn draw_block(&mut self) {
        let mut points = [Complex::default(); BLOCK];
        let mut count = 0;
        while count < BLOCK {
            let point = Complex::new(2.0 * self.draw.uniform() - 1.0, 2.0 * self.draw.uniform() - 1.0);
            points[count] = point;
            let square = point.norm_sqr();
            // Without a branch: a point outside the circle is written over.
            count += usize::from(square < 1.0 && square > 0.0);
        }
        let normal = |point: &Complex| {
            let square = point.norm_sqr();
            point * (-square.ln() / square).sqrt()
        };
        self.block.extend(points.iter().rev().map(normal));
    }

    /// Normal number of variance 1.
    #[inline]
    pub(crate) fn real(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        let pair = self.complex() * std::f64::consts::SQRT_2;
        self.spare = Some(pair.im);
        pair.re
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn complex_normal_numbers_have_the_moments_of_a_normal_distribution() {
        const N: usize = 200_000;
        let mut normals = Draw::new(7, Stream::ChannelNoise).normals();
        let values: Vec<Complex> = (0..N).map(|_| normals.complex()).collect();
        let mean = |f: &dyn Fn(&Complex) -> f64| values.iter().map(f).sum::<f64>() / N as f64;
        // Standard errors: 1/√n for the square, √(96/4)/√n for the fourth power of a part, 1/√(2n) for the products.
        let error = 1.0 / (N as f64).sqrt();
        assert!((mean(&|z| z.norm_sqr()) - 1.0).abs() < 4.0 * error);
        assert!((mean(&|z| z.re.powi(4)) - 0.75).abs() < 4.0 * 24f64.sqrt() * error);
        assert!(mean(&|z| z.re * z.im).abs() < 4.0 * error);
        assert!(mean(&|z| z.re).abs() < 4.0 * error && mean(&|z| z.im).abs() < 4.0 * error);
    }

    #[test]
    fn streams_and_neighbouring_seeds_are_unrelated() {
        let first = |seed, stream| Draw::new(seed, stream).uniform();
        let draws = [
            first(1, Stream::ClickPhase),
            first(2, Stream::ClickPhase),
            first(1, Stream::Carrier),
            first(3, Stream::Recorder),
        ];
        for (i, a) in draws.iter().enumerate() {
            assert!(draws[i + 1..].iter().all(|b| (a - b).abs() > 1e-3), "{draws:?}");
        }
    }
}
