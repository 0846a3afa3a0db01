//! A series of clips of one bench at several supply settings, each rendered, written and measured back:
//! `cargo run --release --example supply_sweep -- BENCH.toml FOLDER [SETTINGS] [SECONDS]`.
//!
//! The settings run from 15 % above the gap voltage to the supply voltage of the bench. In a class: which clip is which?

use gaptone::bench::{self, Bench, Quantity};
use gaptone::measure::{Measurer, Options};
use gaptone::model::charging::Circuit;
use gaptone::model::clip::Clip;
use gaptone::model::firings::{Faults, GapLaw, Plan, Rhythm, Start, simulate};
use gaptone::model::receiver::ReceiverSettings;
use gaptone::model::render::RenderSettings;
use gaptone::model::truth::TrainTruth;
use gaptone::voltage::VoltageMeter;
use std::error::Error;
use std::path::Path;

/// Lowest setting, in gap voltages.
const LOWEST: f64 = 1.15;

fn main() -> Result<(), Box<dyn Error>> {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let [bench_file, folder, rest @ ..] = &arguments[..] else {
        return Err("usage: supply_sweep BENCH.toml FOLDER [SETTINGS] [SECONDS]".into());
    };
    let settings: u32 = rest.first().map_or(Ok(5), |text| text.parse())?;
    let duration_s: f64 = rest.get(1).map_or(Ok(5.0), |text| text.parse())?;
    let bench = bench::parse(&std::fs::read_to_string(bench_file)?, bench_file)?;
    let highest = bench.supply.voltage.ok_or("this example needs supply.voltage")?;
    let gap_v = bench.gap.voltage.ok_or("this example needs a stated gap.voltage")?.value;

    std::fs::create_dir_all(folder)?;
    println!("clip          supply     rate true   rate measured   gap voltage measured");
    for k in 0..settings {
        let share = if settings > 1 { f64::from(k) / f64::from(settings - 1) } else { 1.0 };
        let supply = Quantity { value: LOWEST * gap_v + share * (highest.value - LOWEST * gap_v), ..highest };
        let clip = clip(&bench, supply, duration_s, u64::from(k) + 1)?;
        let name = format!("sweep-{}.wav", k + 1);
        println!("{name:<12} {:>7.0} V{}", supply.value, one(&bench, supply, clip, &Path::new(folder).join(&name))?);
    }
    Ok(())
}

fn clip(bench: &Bench, supply: Quantity, duration_s: f64, seed: u64) -> Result<Clip, Box<dyn Error>> {
    let gap_v = bench.gap.voltage.map_or(0.0, |voltage| voltage.value);
    let circuit = Circuit::from_bench(bench, Some(supply))?;
    let rhythm = Rhythm::Bench { circuit, gap: GapLaw::from_bench(bench, gap_v) };
    let plan = Plan { rhythm, faults: Faults::none(), start: Start::Running, duration_s, seed };
    let train = TrainTruth::of_plan(simulate(&plan)?.firings, &plan);
    Ok(Clip::new(RenderSettings::new(ReceiverSettings::from_bench(bench)?, duration_s, seed), vec![train])?)
}

/// Writes a clip, measures it, and says what came out beside what went in.
fn one(bench: &Bench, supply: Quantity, clip: Clip, path: &Path) -> Result<String, Box<dyn Error>> {
    let sample_rate_hz = clip.truth.settings.sample_rate_hz;
    let samples: Vec<f32> = clip.renderer.collect();
    let spec = hound::WavSpec {
        channels: 1,
        sample_rate: sample_rate_hz,
        bits_per_sample: 16,
        sample_format: hound::SampleFormat::Int,
    };
    let mut writer = hound::WavWriter::create(path, spec)?;
    for sample in &samples {
        writer.write_sample((sample * 32_767.0).round() as i16)?;
    }
    writer.finalize()?;

    let mut measurer = Measurer::new(sample_rate_hz, Options::default());
    measurer.push(&samples);
    let outcome = measurer.finish();
    let mut meter = VoltageMeter::new(bench, Some(supply))?;
    outcome.events.iter().for_each(|event| meter.push(event));
    let voltage = meter.finish(&outcome.reading).gap_voltage_v;

    let truth = clip.truth.trains[0].realised.firing_rate_hz.unwrap_or(f64::NAN);
    let said = match (outcome.reading.firing_rate_hz, voltage) {
        (Some(rate), Some(volts)) => {
            format!("{:>10.2} ± {:.2} Hz {:>8.0} ± {:.0} V", rate.value, rate.u, volts.value, volts.u)
        }
        (Some(rate), None) => format!("{:>10.2} ± {:.2} Hz", rate.value, rate.u),
        _ => format!("   {}", outcome.reading.reason),
    };
    Ok(format!("{truth:>11.2} Hz {said}"))
}
