//! Where in time do the samples of a packet belong?
//!
//! A decoder that loses a packet says nothing; the time stamp of the next packet does. Samples are placed by it.

/// Longest loss that is believed when the length of the recording is not known, s. A damaged time stamp can claim
/// anything.
const LONGEST_LOSS_S: u64 = 60;

/// Places packets by their time stamps.
#[derive(Debug, Clone)]
pub(super) struct Placer {
    /// Frames per tick of the time stamps, as a fraction.
    frames_per_tick: (u64, u64),
    sample_rate_hz: u32,
    promised_frames: Option<u64>,
    /// Frame number that the next packet has if nothing is lost.
    next: u64,
    /// Time stamp, in frames, that stands for frame 0; known with the first packet.
    origin: Option<i64>,
    disordered_at: Option<u64>,
}

impl Placer {
    /// A placer for time stamps that count `tick` (numerator, denominator) seconds each.
    pub fn new(tick: (u32, u32), sample_rate_hz: u32, promised_frames: Option<u64>) -> Self {
        let frames_per_tick = (u64::from(tick.0) * u64::from(sample_rate_hz), u64::from(tick.1).max(1));
        Self { frames_per_tick, sample_rate_hz, promised_frames, next: 0, origin: None, disordered_at: None }
    }

    /// Frame number of the first of `frames` frames whose time stamp is `ticks`.
    pub fn place(&mut self, ticks: i64, frames: u64) -> u64 {
        let stamp = self.in_frames(ticks);
        let origin = *self.origin.get_or_insert_with(|| match self.promised_frames {
            // Frames missing at the very start of a recording whose length is known are a loss like any other.
            Some(promised) if stamp > 0 && (stamp as u64).saturating_add(frames) <= promised => 0,
            _ => stamp,
        });
        let stamped = stamp.saturating_sub(origin);
        let ahead = stamped.saturating_sub(i64::try_from(self.next).unwrap_or(i64::MAX));
        let position = if ahead.unsigned_abs() <= self.slack() {
            self.next
        } else if ahead > 0 && self.is_believable(ahead as u64, frames) {
            self.next + ahead as u64
        } else {
            // Time stamps that go back or leap: samples are joined as they come, from here on.
            self.origin = Some(stamp.saturating_sub(self.next as i64));
            self.disordered_at.get_or_insert(self.next);
            self.next
        };
        self.next = position + frames;
        position
    }

    /// A new stream follows without a break: its time stamps count from here.
    pub fn restart(&mut self) {
        self.origin = None;
        self.promised_frames = None;
    }

    /// Frames placed or lost so far.
    pub fn frames(&self) -> u64 {
        self.next
    }

    /// Frame number where time stamps first made no sense.
    pub fn disordered_at(&self) -> Option<u64> {
        self.disordered_at
    }

    fn in_frames(&self, ticks: i64) -> i64 {
        let (up, down) = (i128::from(self.frames_per_tick.0), i128::from(self.frames_per_tick.1));
        let frames = (i128::from(ticks) * up + down / 2).div_euclid(down);
        i64::try_from(frames).unwrap_or(if frames < 0 { i64::MIN } else { i64::MAX })
    }

    /// Time stamps coarser than a sample are rounded, so they may be off by one tick.
    fn slack(&self) -> u64 {
        let (up, down) = self.frames_per_tick;
        if up == down { 0 } else { up.div_ceil(down) }
    }

    fn is_believable(&self, lost: u64, frames: u64) -> bool {
        match self.promised_frames {
            Some(promised) => self.next.saturating_add(lost).saturating_add(frames) <= promised + self.slack(),
            None => lost <= LONGEST_LOSS_S * u64::from(self.sample_rate_hz),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn by_samples(promised: Option<u64>) -> Placer {
        Placer::new((1, 48_000), 48_000, promised)
    }

    #[test]
    fn packets_in_order_follow_each_other() {
        let mut placer = by_samples(None);
        assert_eq!([0, 4096, 8192].map(|stamp| placer.place(stamp, 4096)), [0, 4096, 8192]);
    }

    #[test]
    fn a_lost_packet_leaves_its_place_empty() {
        let mut placer = by_samples(Some(16_384));
        placer.place(0, 4096);
        assert_eq!(placer.place(8192, 4096), 8192);
        assert_eq!(placer.frames(), 12_288);
    }

    #[test]
    fn a_recording_cut_from_a_longer_one_starts_at_zero() {
        let mut placer = by_samples(None);
        assert_eq!([1_000_000, 1_001_024].map(|stamp| placer.place(stamp, 1024)), [0, 1024]);
    }

    #[test]
    fn a_first_packet_lost_from_a_recording_of_known_length_is_a_loss() {
        assert_eq!(by_samples(Some(48_000)).place(4096, 4096), 4096);
    }

    #[test]
    fn a_time_stamp_that_makes_no_sense_is_not_followed() {
        for (promised, stamp) in [(Some(48_000), 1 << 40), (None, 1 << 40), (None, -5000)] {
            let mut placer = by_samples(promised);
            placer.place(0, 1000);
            assert_eq!(placer.place(stamp, 1000), 1000);
            assert_eq!(placer.place(stamp + 1000, 1000), 2000);
            assert_eq!(placer.disordered_at(), Some(1000));
        }
    }

    #[test]
    fn time_stamps_in_milliseconds_do_not_make_gaps_by_rounding() {
        let mut placer = Placer::new((1, 1000), 44_100, None);
        // 1024 frames last 23.22 ms.
        let placed = [0, 23, 46, 70, 93].map(|stamp| placer.place(stamp, 1024));
        assert_eq!(placed, [0, 1024, 2048, 3072, 4096]);
    }
}
