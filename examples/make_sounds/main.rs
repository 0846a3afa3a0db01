//! Makes the clips in `sounds/` anew, with the truth of each: `cargo run --release --example make_sounds`.
//!
//! With a directory as argument the clips go there instead.

mod recipes;

use recipes::{RECIPES, Recipe};
use std::error::Error;
use std::path::{Path, PathBuf};

/// Full scale of 16 bit.
const FULL_SCALE: f32 = 32_767.0;

fn main() -> Result<(), Box<dyn Error>> {
    let directory = std::env::args_os().nth(1).map_or_else(recipes::directory, PathBuf::from);
    for recipe in &RECIPES {
        write(recipe, &directory)?;
        println!("{}", recipe.name);
    }
    Ok(())
}

fn write(recipe: &Recipe, directory: &Path) -> Result<(), Box<dyn Error>> {
    let clip = recipes::make(recipe)?;
    let path = directory.join(recipe.name);
    let spec = hound::WavSpec {
        channels: 1,
        sample_rate: recipe.sample_rate_hz,
        bits_per_sample: 16,
        sample_format: hound::SampleFormat::Int,
    };
    let mut writer = hound::WavWriter::create(path.with_extension("wav"), spec)?;
    for sample in clip.renderer {
        writer.write_sample((sample * FULL_SCALE).round() as i16)?;
    }
    writer.finalize()?;
    let mut truth = serde_json::to_string(&clip.truth)?;
    truth.push('\n');
    std::fs::write(path.with_extension("json"), truth)?;
    Ok(())
}
