//! From audio to the firing rate through the library, in blocks as they would come from a sound card:
//! `cargo run --release --example read_rate -- RECORDING.wav`.

use gaptone::measure::{Measurer, Options};
use std::error::Error;

/// Samples of one block.
const BLOCK: usize = 4096;

fn main() -> Result<(), Box<dyn Error>> {
    let file = std::env::args().nth(1).ok_or("usage: read_rate RECORDING.wav")?;
    let mut reader = hound::WavReader::open(&file)?;
    let spec = reader.spec();
    if spec.sample_format != hound::SampleFormat::Int {
        return Err("this example reads WAV files of whole numbers".into());
    }
    let full_scale = (1u64 << (spec.bits_per_sample - 1)) as f32;
    let samples: Result<Vec<f32>, _> = reader.samples::<i32>().map(|s| s.map(|s| s as f32 / full_scale)).collect();
    // One channel: the first.
    let mono: Vec<f32> = samples?.iter().step_by(usize::from(spec.channels)).copied().collect();

    let mut measurer = Measurer::new(spec.sample_rate, Options::default());
    for block in mono.chunks(BLOCK) {
        measurer.push(block);
    }
    let outcome = measurer.finish();

    let reading = &outcome.reading;
    println!("{:?}: {}", reading.verdict, reading.reason);
    if let Some(rate) = reading.firing_rate_hz {
        println!("rate   {:.4} Hz, standard uncertainty {:.4} Hz", rate.value, rate.u);
    }
    if let Some(jitter) = reading.period_jitter_s {
        println!(
            "jitter {:.2} µs, between {:.2} and {:.2} µs",
            1e6 * jitter.value,
            1e6 * jitter.low,
            1e6 * jitter.high
        );
    }
    println!(
        "{} firings, {} missed, {} extra",
        reading.firings.on_rhythm, reading.firings.missed, reading.firings.extra
    );
    for note in &reading.notes {
        println!("note: {note}");
    }
    Ok(())
}
