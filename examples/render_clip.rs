//! From a bench file to a WAV file through the library:
//! `cargo run --release --example render_clip -- BENCH.toml OUT.wav [SECONDS] [SEED]`.

use gaptone::bench;
use gaptone::model::charging::Circuit;
use gaptone::model::clip::Clip;
use gaptone::model::firings::{Faults, GapLaw, Plan, Rhythm, Start, simulate};
use gaptone::model::receiver::ReceiverSettings;
use gaptone::model::render::RenderSettings;
use gaptone::model::truth::TrainTruth;
use std::error::Error;

fn main() -> Result<(), Box<dyn Error>> {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let [bench_file, wav_file, rest @ ..] = &arguments[..] else {
        return Err("usage: render_clip BENCH.toml OUT.wav [SECONDS] [SEED]".into());
    };
    let duration_s = rest.first().map_or(Ok(5.0), |text| text.parse())?;
    let seed = rest.get(1).map_or(Ok(1), |text| text.parse())?;

    // What the bench is.
    let described = bench::parse(&std::fs::read_to_string(bench_file)?, bench_file)?;
    let voltage = described.gap.voltage.ok_or("this example needs a stated gap.voltage")?;

    // When the gap fires.
    let rhythm = Rhythm::Bench {
        circuit: Circuit::from_bench(&described, None)?,
        gap: GapLaw::from_bench(&described, voltage.value),
    };
    let plan = Plan { rhythm, faults: Faults::none(), start: Start::Running, duration_s, seed };
    let train = TrainTruth::of_plan(simulate(&plan)?.firings, &plan);

    // What a receiver makes of it.
    let settings = RenderSettings::new(ReceiverSettings::from_bench(&described)?, duration_s, seed);
    let mut clip = Clip::new(settings, vec![train])?;

    let spec = hound::WavSpec {
        channels: 1,
        sample_rate: clip.truth.settings.sample_rate_hz,
        bits_per_sample: 16,
        sample_format: hound::SampleFormat::Int,
    };
    let mut writer = hound::WavWriter::create(wav_file, spec)?;
    let mut block = [0.0f32; 4096];
    loop {
        let count = clip.renderer.fill(&mut block);
        for sample in &block[..count] {
            writer.write_sample((sample * 32_767.0).round() as i16)?;
        }
        if count < block.len() {
            break;
        }
    }
    writer.finalize()?;

    let realised = &clip.truth.trains[0].realised;
    if let (Some(rate), Some(jitter), Some(volts)) =
        (realised.firing_rate_hz, realised.period_jitter_s, realised.gap_voltage_v)
    {
        println!("{} firings, {rate:.3} a second, jitter {:.1} µs, {volts:.0} V", realised.firings, 1e6 * jitter);
    }
    println!("a click peaks {:.1} µs after its firing", 1e6 * clip.truth.receiver_delay_s);
    Ok(())
}
