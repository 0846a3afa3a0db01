use super::super::{Block, Memory};
use super::*;

const SAMPLE_RATE_HZ: u32 = 1000;

fn hear(source: impl Source, choice: ChannelChoice, span: Span) -> (Vec<f32>, Heard) {
    let mut intake = Intake::new(source, choice, span).expect("a source that can be heard");
    let (mut all, mut mono) = (Vec::new(), Vec::new());
    while intake.next(&mut mono).expect("memory does not fail") {
        all.extend_from_slice(&mono);
    }
    (all, intake.finish())
}

fn ramp(frames: usize) -> Vec<f32> {
    (0..frames).map(|k| k as f32 / frames as f32).collect()
}

/// Hands out blocks of ones at given positions.
struct Islands(Vec<Block>);

impl Source for Islands {
    fn sample_rate_hz(&self) -> u32 {
        SAMPLE_RATE_HZ
    }
    fn channels(&self) -> u16 {
        1
    }
    fn next(&mut self, block: &mut Vec<f32>) -> Result<Option<Block>, AudioError> {
        block.clear();
        if self.0.is_empty() {
            return Ok(None);
        }
        let next = self.0.remove(0);
        block.resize(next.frames, 0.5);
        Ok(Some(next))
    }
}

#[test]
fn the_blocks_in_which_samples_arrive_do_not_matter() {
    let samples = ramp(1000);
    for block_frames in [1, 7, 1000, 5000] {
        let source = Memory::new(samples.clone(), 1, SAMPLE_RATE_HZ, block_frames);
        assert_eq!(hear(source, ChannelChoice::Clearest, Span::default()).0, samples);
    }
}

#[test]
fn from_and_to_cut_out_a_part_by_time() {
    let samples = ramp(1000);
    for block_frames in [1, 64, 1000] {
        let source = Memory::new(samples.clone(), 1, SAMPLE_RATE_HZ, block_frames);
        let (heard, _) = hear(source, ChannelChoice::Mix, Span { from_s: 0.25, to_s: Some(0.75) });
        assert_eq!(heard, samples[250..750]);
    }
}

#[test]
fn a_part_behind_the_end_is_empty() {
    let source = Memory::new(ramp(10), 1, SAMPLE_RATE_HZ, 4);
    let (heard, summary) = hear(source, ChannelChoice::Clearest, Span { from_s: 5.0, to_s: None });
    assert!(heard.is_empty());
    assert_eq!(summary.frames, 0);
}

#[test]
fn lost_frames_become_zeros_in_their_place_and_are_said() {
    let islands = vec![Block { frames: 3, position: 0 }, Block { frames: 2, position: 88 }];
    let (heard, summary) = hear(Islands(islands), ChannelChoice::Clearest, Span::default());
    assert_eq!(heard.len(), 90);
    assert_eq!(heard[..3], [0.5; 3]);
    assert!(heard[3..88].iter().all(|&sample| sample == 0.0));
    assert_eq!(heard[88..], [0.5; 2]);
    assert_eq!(summary.notes, ["a stretch of 85 ms at 0.00 s could not be decoded and was taken as silence"]);
}

#[test]
fn a_long_gap_is_filled_in_bounded_pieces() {
    let far = 5 * GAP_CHUNK + 1;
    let islands = vec![Block { frames: 1, position: 0 }, Block { frames: 1, position: far }];
    let mut intake = Intake::new(Islands(islands), ChannelChoice::Left, Span::default()).expect("mono");
    let (mut mono, mut total) = (Vec::new(), 0);
    while intake.next(&mut mono).expect("memory does not fail") {
        assert!(mono.len() as u64 <= GAP_CHUNK);
        total += mono.len() as u64;
    }
    assert_eq!(total, far + 1);
}

#[test]
fn many_gaps_are_summed_up() {
    let islands = (0..10).map(|k| Block { frames: 50, position: 100 * k }).collect();
    let (_, summary) = hear(Islands(islands), ChannelChoice::Clearest, Span::default());
    assert_eq!(summary.notes.len(), NAMED_GAPS + 1);
    assert_eq!(summary.notes[NAMED_GAPS], "4 more stretches could not be decoded; 0.45 s are lost altogether");
}

#[test]
fn a_gap_outside_the_part_asked_for_is_not_mentioned() {
    let islands = vec![Block { frames: 3, position: 0 }, Block { frames: 500, position: 88 }];
    let (_, summary) = hear(Islands(islands), ChannelChoice::Clearest, Span { from_s: 0.1, to_s: None });
    assert!(summary.notes.is_empty(), "{:?}", summary.notes);
}

#[test]
fn samples_that_are_not_numbers_become_zero_and_are_counted() {
    let samples = vec![0.1, f32::NAN, f32::INFINITY, f32::NEG_INFINITY, 1e30, 0.2];
    let (heard, summary) = hear(Memory::new(samples, 1, SAMPLE_RATE_HZ, 2), ChannelChoice::Left, Span::default());
    assert_eq!(heard, [0.1, 0.0, 0.0, 0.0, 0.0, 0.2]);
    assert_eq!(summary.not_numbers, 4);
    assert_eq!(summary.notes, ["4 samples were not numbers and were taken as 0"]);
}

#[test]
fn faults_in_a_channel_that_is_not_heard_do_not_count() {
    let samples = vec![0.1, f32::NAN, 0.2, 1.0, 0.3, 1.0];
    let (heard, summary) = hear(Memory::new(samples, 2, SAMPLE_RATE_HZ, 2), ChannelChoice::Left, Span::default());
    assert_eq!(heard, [0.1, 0.2, 0.3]);
    assert_eq!((summary.not_numbers, summary.clipped_frames), (0, 0));
}

#[test]
fn clipping_is_counted_before_channels_are_mixed() {
    let samples = vec![1.0, 0.0, 1.0, 0.0, 0.0, 0.0, 0.0, 0.0];
    let (heard, summary) = hear(Memory::new(samples, 2, SAMPLE_RATE_HZ, 2), ChannelChoice::Mix, Span::default());
    assert_eq!(heard, [0.5, 0.5, 0.0, 0.0]);
    assert_eq!(summary.clipped_frames, 2);
    assert_eq!(summary.notes, ["clipped 50.0 % of samples; turn the recording level down"]);
}

#[test]
fn the_clearest_channel_is_heard_from_its_first_sample_on() {
    let frames = 30 * SAMPLE_RATE_HZ as usize;
    let clicks: Vec<f32> = (0..frames).map(|k| if k % 100 == 0 { 0.8 } else { 0.0 }).collect();
    let hum = (0..frames).map(|k| (k as f32 * 0.3).sin());
    let interleaved = hum.zip(&clicks).flat_map(|(left, &right)| [left, right]).collect();
    let source = Memory::new(interleaved, 2, SAMPLE_RATE_HZ, 333);
    let (heard, summary) = hear(source, ChannelChoice::Clearest, Span::default());
    assert_eq!(heard, clicks);
    assert_eq!(summary.channel, "right");
    assert_eq!(summary.notes, ["of 2 channels, right was analysed: clicks are clearest there"]);
}

#[test]
fn a_source_without_channels_or_rate_is_refused() {
    assert!(Intake::new(Memory::new(vec![], 1, 0, 1), ChannelChoice::Clearest, Span::default()).is_err());
}
