//! What is expected of the timing noise before the clicks themselves are asked.

/// Log standard deviation of the prior below the range and above it.
const LN_SD: (f64, f64) = (0.7, 0.5);
/// Weight of a tail above the range, against the density in it: now and then (under music, a voice, another train) the times scatter
/// much more than the noise between the clicks foretells. It reaches this far, natural log.
const TAIL: f64 = 0.03;
const TAIL_REACH: f64 = 3.5;

/// The range in which the timing noise is expected, s: from what the noise of the audio alone must cause to what the misfit of single
/// clicks may.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct NoiseRange {
    /// Lower end, s.
    pub least_s: f64,
    /// Upper end, s.
    pub most_s: f64,
}

impl NoiseRange {
    /// The range that holds one value alone.
    #[must_use]
    pub fn of(noise_s: f64) -> Self {
        Self { least_s: noise_s, most_s: noise_s }
    }

    /// The range with neither end below a value, s.
    #[must_use]
    pub fn at_least(self, noise_s: f64) -> Self {
        Self { least_s: self.least_s.max(noise_s), most_s: self.most_s.max(noise_s) }
    }

    /// Logarithms of both ends.
    #[must_use]
    pub fn ln(self) -> LnRange {
        LnRange { least: self.least_s.ln(), most: self.most_s.ln() }
    }
}

/// The range on a logarithmic scale.
#[derive(Debug, Clone, Copy)]
pub struct LnRange {
    least: f64,
    most: f64,
}

impl LnRange {
    /// Log density of the prior at the logarithm of a timing noise, over that within the range: flat between the ends, normal below, normal
    /// with a tail above.
    #[must_use]
    pub fn ln_prior(&self, ln_noise: f64) -> f64 {
        let (below, above) = (self.least - ln_noise, ln_noise - self.most);
        if below > 0.0 {
            -0.5 * (below / LN_SD.0).powi(2)
        } else if above > 0.0 {
            let tail = if above < TAIL_REACH { TAIL } else { 0.0 };
            ((-0.5 * (above / LN_SD.1).powi(2)).exp() + tail).max(1e-30).ln()
        } else {
            0.0
        }
    }
}
