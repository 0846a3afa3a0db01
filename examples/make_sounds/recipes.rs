//! The recipes of the clips in `sounds/`: a bench file each, and here what a bench file does not say.

use gaptone::bench;
use gaptone::model::charging::Circuit;
use gaptone::model::clip::Clip;
use gaptone::model::firings::{Faults, GapLaw, Plan, Rhythm, Start, simulate};
use gaptone::model::render::RenderSettings;
use gaptone::model::truth::TrainTruth;
use std::error::Error;
use std::path::{Path, PathBuf};

/// One clip.
pub struct Recipe {
    /// Name of the clip and of its bench file.
    pub name: &'static str,
    /// Bench files of further, weaker gaps.
    pub further: &'static [&'static str],
    /// False where the bench holds a receiver alone.
    pub fires: bool,
    /// Length, s.
    pub seconds: f64,
    /// Sample rate, Hz.
    pub sample_rate_hz: u32,
    /// Seed.
    pub seed: u64,
    /// Share of the firings that are not heard.
    pub missed: f64,
}

impl Recipe {
    const fn plain(name: &'static str, seed: u64) -> Self {
        Self { name, further: &[], fires: true, seconds: 5.0, sample_rate_hz: 24_000, seed, missed: 0.0 }
    }
}

/// All clips.
pub const RECIPES: [Recipe; 8] = [
    Recipe { sample_rate_hz: 48_000, ..Recipe::plain("steady", 101) },
    Recipe::plain("noisy", 102),
    Recipe::plain("carrier", 103),
    Recipe::plain("hum", 104),
    Recipe { missed: 1.0 / 12.0, ..Recipe::plain("missing", 105) },
    Recipe { further: &["two-trains-second"], ..Recipe::plain("two-trains", 106) },
    Recipe { seconds: 4.0, ..Recipe::plain("fast-overlapping", 107) },
    Recipe { fires: false, ..Recipe::plain("no-gap", 108) },
];

/// Directory of the clips.
pub fn directory() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("sounds")
}

/// Makes the clip of a recipe, ready to be rendered.
pub fn make(recipe: &Recipe) -> Result<Clip, Box<dyn Error>> {
    let text = read_bench(recipe.name)?;
    let described = bench::parse(&text, recipe.name)?;
    let mut settings = RenderSettings::from_bench(&described, recipe.seconds, recipe.seed)?;
    settings.sample_rate_hz = recipe.sample_rate_hz;
    let mut trains = Vec::new();
    if recipe.fires {
        trains.push(train(&described, recipe, recipe.seed)?);
    }
    for (number, name) in (1u64..).zip(recipe.further) {
        trains.push(train(&bench::parse(&read_bench(name)?, name)?, recipe, recipe.seed + 1000 * number)?);
    }
    let mut clip = Clip::new(settings, trains)?;
    clip.truth.title = described.title;
    clip.truth.bench = Some(text);
    Ok(clip)
}

fn read_bench(name: &str) -> Result<String, Box<dyn Error>> {
    let path = directory().join(name).with_extension("toml");
    std::fs::read_to_string(&path).map_err(|error| format!("{}: {error}", path.display()).into())
}

fn train(described: &bench::Bench, recipe: &Recipe, seed: u64) -> Result<TrainTruth, Box<dyn Error>> {
    let voltage = described.gap.voltage.ok_or("a recipe needs a stated gap voltage")?;
    let plan = Plan {
        rhythm: Rhythm::Bench {
            circuit: Circuit::from_bench(described, None)?,
            gap: GapLaw::from_bench(described, voltage.value),
        },
        faults: Faults { missed: recipe.missed, ..Faults::none() },
        start: Start::Running,
        duration_s: recipe.seconds,
        seed,
    };
    Ok(TrainTruth::of_plan(simulate(&plan)?.firings, &plan))
}
