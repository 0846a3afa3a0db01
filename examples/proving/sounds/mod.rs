//! Synthetic sounds that no gap makes. All at [`PROGRAMME_RATE_HZ`], scaled so that the highest sample is one.

pub mod machine;
pub mod music;
pub mod noise;
pub mod speech;
pub mod tones;

use crate::scene::PROGRAMME_RATE_HZ;

/// Sample rate of all sounds, Hz.
pub const RATE: f64 = PROGRAMME_RATE_HZ as f64;

/// Number of samples of a length of time.
pub fn count(duration_s: f64) -> usize {
    (duration_s * RATE) as usize
}

/// Scales to a peak of one.
pub fn normalised(mut sound: Vec<f64>) -> Vec<f64> {
    let peak = sound.iter().fold(1e-12_f64, |m, x| m.max(x.abs()));
    sound.iter_mut().for_each(|x| *x /= peak);
    sound
}
