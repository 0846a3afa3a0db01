//! Clips of a bench: simulated firings through the model of the receiver.

use super::exit::Failure;
use crate::bench::{Bench, Quantity};
use crate::model::charging::Circuit;
use crate::model::clip::Clip;
use crate::model::firings::{Faults, GapLaw, Plan, Rhythm, Start, simulate};
use crate::model::receiver::Programme;
use crate::model::render::RenderSettings;
use crate::model::series::SeriesError;
use crate::model::truth::TrainTruth;

/// What to render.
pub(super) struct Order {
    pub supply: Option<Quantity>,
    pub start: Start,
    pub duration_s: f64,
    /// Sample rate; none for that of the recorder of the bench.
    pub sample_rate_hz: Option<u32>,
    pub seed: u64,
    /// Programme on the carrier of the bench.
    pub programme: Option<Programme>,
}

/// A clip ready to be rendered, with its truth.
///
/// # Errors
/// Exit status 2 if the bench says too little or its gap does not fire.
pub(super) fn clip(bench: &Bench, order: &Order) -> Result<Clip, Failure> {
    let gap = GapLaw::of_bench(bench).map_err(Failure::usage)?;
    let circuit = Circuit::from_bench(bench, order.supply).map_err(Failure::usage)?;
    let rhythm = Rhythm::Bench { circuit, gap };
    let plan =
        Plan { rhythm, faults: Faults::none(), start: order.start, duration_s: order.duration_s, seed: order.seed };
    let train = simulate(&plan).map_err(Failure::usage)?;
    let mut settings = RenderSettings::from_bench(bench, order.duration_s, order.seed).map_err(Failure::usage)?;
    settings.sample_rate_hz = order.sample_rate_hz.unwrap_or(settings.sample_rate_hz);
    if let Some(programme) = &order.programme {
        let carrier = settings.receiver.carrier.as_mut();
        carrier.ok_or_else(|| Failure::usage(SeriesError::NoCarrier))?.programme = Some(programme.clone());
    }
    Clip::new(settings, vec![TrainTruth::of_plan(train.firings, &plan)]).map_err(Failure::usage)
}
