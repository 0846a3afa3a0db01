//! Counting samples that the recorder cut off.

/// Two equal samples in a row at full scale are called clipped; a single one may be the peak of a recording that
/// was brought up to full scale afterwards.
const SHORTEST_RUN: u64 = 2;

/// Counts clipped frames of one recording: frames in which a channel stays at full scale, unchanged, for two
/// samples or more. A lossy decoder overshoots full scale with samples that differ, which is not clipping.
#[derive(Debug, Clone)]
pub struct ClipCounter {
    full_scale: f32,
    runs: Vec<Run>,
    clipped: u64,
}

#[derive(Debug, Clone, Copy, Default)]
struct Run {
    value: f32,
    length: u64,
}

impl ClipCounter {
    /// A counter for `channels` channels whose largest sample is `full_scale`.
    #[must_use]
    pub fn new(channels: usize, full_scale: f32) -> Self {
        Self { full_scale, runs: vec![Run::default(); channels], clipped: 0 }
    }

    /// Takes in one frame; channels beyond those announced are ignored.
    pub fn push(&mut self, frame: &[f32]) {
        let mut newly_clipped = 0;
        for (run, &sample) in self.runs.iter_mut().zip(frame) {
            if sample.abs() < self.full_scale {
                run.length = 0;
                continue;
            }
            run.length = if run.length > 0 && sample == run.value { run.length + 1 } else { 1 };
            run.value = sample;
            // The sample that opened the run is counted when the run proves to be one.
            let counted = match run.length {
                SHORTEST_RUN => SHORTEST_RUN,
                length if length > SHORTEST_RUN => 1,
                _ => 0,
            };
            newly_clipped = newly_clipped.max(counted);
        }
        self.clipped += newly_clipped;
    }

    /// Clipped frames so far.
    #[must_use]
    pub fn clipped(&self) -> u64 {
        self.clipped
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn clipped(samples: &[f32], full_scale: f32) -> u64 {
        let mut counter = ClipCounter::new(1, full_scale);
        samples.iter().for_each(|&sample| counter.push(&[sample]));
        counter.clipped()
    }

    #[test]
    fn a_flat_top_at_full_scale_is_clipped() {
        assert_eq!(clipped(&[0.1, 1.0, 1.0, 1.0, 0.2, -1.0, -1.0, 0.0], 1.0), 5);
    }

    #[test]
    fn a_single_peak_at_full_scale_is_not_clipped() {
        assert_eq!(clipped(&[0.1, 1.0, 0.1, -1.0, 0.0], 1.0), 0);
    }

    #[test]
    fn the_overshoot_of_a_lossy_decoder_is_not_clipped() {
        assert_eq!(clipped(&[0.9, 1.1, 1.3, 1.2, 0.8], 1.0), 0);
    }

    #[test]
    fn full_scale_of_eight_bits_is_one_hundred_and_twenty_seven() {
        let top = 127.0 / 128.0;
        assert_eq!(clipped(&[0.0, top, top, 0.0], top), 2);
        assert_eq!(clipped(&[0.0, top, top, 0.0], 1.0), 0);
    }

    #[test]
    fn swinging_from_stop_to_stop_is_not_a_flat_top() {
        assert_eq!(clipped(&[1.0, -1.0, 1.0, -1.0], 1.0), 0);
    }
}
