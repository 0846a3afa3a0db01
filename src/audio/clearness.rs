//! In which channel do clicks stand out most?
//!
//! The score of a channel is the mean over half-second frames of the logarithm of the kurtosis of its first
//! difference. The kurtosis E\[x⁴\]/E\[x²\]² is 3 for noise, 1.5 for a pure tone and about 1/duty for short clicks; the
//! first difference takes hum away. The logarithm keeps one plug pulled out during the recording from deciding.

/// Length of a frame, s: holds a click at any rate from 2 a second up.
const FRAME_S: f64 = 0.5;

/// Scores closer than this are a draw, and the louder channel is taken: two halves of one noise recording of 10 s
/// differ by less.
const DRAW: f64 = 0.05;

/// Listens to one channel.
#[derive(Debug, Clone)]
pub struct Clearness {
    frame_length: u64,
    before: Option<f64>,
    count: u64,
    second: f64,
    fourth: f64,
    log_kurtosis_sum: f64,
    power_sum: f64,
    frames: u64,
}

impl Clearness {
    /// A listener for a channel at this sample rate.
    #[must_use]
    pub fn new(sample_rate_hz: u32) -> Self {
        Self {
            frame_length: ((FRAME_S * f64::from(sample_rate_hz)) as u64).max(1),
            before: None,
            count: 0,
            second: 0.0,
            fourth: 0.0,
            log_kurtosis_sum: 0.0,
            power_sum: 0.0,
            frames: 0,
        }
    }

    /// Takes in one sample.
    pub fn push(&mut self, sample: f32) {
        let sample = f64::from(sample);
        let difference = sample - self.before.replace(sample).unwrap_or(sample);
        let square = difference * difference;
        self.second += square;
        self.fourth += square * square;
        self.count += 1;
        if self.count == self.frame_length {
            self.close_frame();
        }
    }

    fn close_frame(&mut self) {
        let count = self.count as f64;
        let power = self.second / count;
        let kurtosis = self.fourth / count / (power * power);
        self.frames += 1;
        self.power_sum += power;
        // A frame of digital silence has no kurtosis; it counts as one that shows no clicks.
        self.log_kurtosis_sum += if kurtosis.is_finite() { kurtosis.ln() } else { 0.0 };
        (self.count, self.second, self.fourth) = (0, 0.0, 0.0);
    }

    /// The score and the mean power of the first difference.
    fn score(mut self) -> (f64, f64) {
        if self.frames == 0 && self.count > 0 {
            self.close_frame();
        }
        let frames = self.frames.max(1) as f64;
        (self.log_kurtosis_sum / frames, self.power_sum / frames)
    }
}

/// The channel (counted from 0) in which clicks stand out most; the louder one of a draw, the first one of equals.
#[must_use]
pub fn clearest(channels: Vec<Clearness>) -> usize {
    let scores: Vec<(f64, f64)> = channels.into_iter().map(Clearness::score).collect();
    let best = scores.iter().map(|score| score.0).fold(f64::NEG_INFINITY, f64::max);
    let mut chosen = 0;
    let mut loudest = f64::NEG_INFINITY;
    for (channel, &(score, power)) in scores.iter().enumerate() {
        if score >= best - DRAW && power > loudest {
            (chosen, loudest) = (channel, power);
        }
    }
    chosen
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::rngs::Xoshiro256PlusPlus;
    use rand::{RngExt, SeedableRng};

    const SAMPLE_RATE_HZ: u32 = 48_000;

    fn listen(sample: impl Fn(usize) -> f32) -> Clearness {
        let mut clearness = Clearness::new(SAMPLE_RATE_HZ);
        (0..2 * SAMPLE_RATE_HZ as usize).for_each(|k| clearness.push(sample(k)));
        clearness
    }

    fn noise(seed: u64) -> Vec<f32> {
        let mut rng = Xoshiro256PlusPlus::seed_from_u64(seed);
        (0..2 * SAMPLE_RATE_HZ as usize).map(|_| 0.02 * (rng.random::<f32>() - 0.5)).collect()
    }

    #[test]
    fn clicks_in_noise_are_clearer_than_noise_alone() {
        let (a, b) = (noise(1), noise(2));
        let clicks = listen(|k| a[k] + if k % 110 < 4 { 0.2 } else { 0.0 });
        assert_eq!(clearest(vec![listen(|k| 10.0 * b[k]), clicks]), 1);
    }

    #[test]
    fn clicks_are_clearer_than_hum() {
        let a = noise(3);
        let hum = listen(|k| (k as f32 * 0.00654).sin());
        let clicks = listen(|k| a[k] + if k % 12_000 < 4 { 0.2 } else { 0.0 });
        assert_eq!(clearest(vec![hum, clicks]), 1);
    }

    #[test]
    fn of_equal_channels_the_first_is_taken_and_of_like_ones_the_louder() {
        let a = noise(4);
        assert_eq!(clearest(vec![listen(|k| a[k]), listen(|k| a[k])]), 0);
        assert_eq!(clearest(vec![listen(|k| 0.1 * a[k]), listen(|k| a[k])]), 1);
    }

    #[test]
    fn a_silent_channel_is_never_the_clearest() {
        let a = noise(5);
        assert_eq!(clearest(vec![listen(|_| 0.0), listen(|k| a[k])]), 1);
        assert_eq!(clearest(vec![listen(|k| a[k]), listen(|_| 0.3)]), 0);
    }
}
