//! Clips of a bench: simulated firings through the model of the receiver.

use super::exit::Failure;
use crate::bench::{Bench, Quantity};
use crate::model::charging::Circuit;
use crate::model::clip::Clip;
use crate::model::firings::{Faults, GapLaw, Plan, Rhythm, Start, simulate};
use crate::model::receiver::ReceiverSettings;
use crate::model::render::RenderSettings;
use crate::model::truth::TrainTruth;

/// What to render.
pub(super) struct Order {
    pub supply: Option<Quantity>,
    pub start: Start,
    pub duration_s: f64,
    pub sample_rate_hz: u32,
    pub seed: u64,
}

/// A clip ready to be rendered, with its truth.
///
/// # Errors
/// Exit status 2 if the bench says too little or its gap does not fire.
pub(super) fn clip(bench: &Bench, order: &Order) -> Result<Clip, Failure> {
    let voltage = bench.gap.voltage.ok_or_else(|| {
        Failure::usage("the bench does not give gap.voltage: a clip needs the voltage at which the gap breaks down")
    })?;
    let circuit = Circuit::from_bench(bench, order.supply).map_err(Failure::usage)?;
    let rhythm = Rhythm::Bench { circuit, gap: GapLaw::from_bench(bench, voltage.value) };
    let plan =
        Plan { rhythm, faults: Faults::none(), start: order.start, duration_s: order.duration_s, seed: order.seed };
    let train = simulate(&plan).map_err(Failure::usage)?;
    let receiver = ReceiverSettings::from_bench(bench).map_err(Failure::usage)?;
    let mut settings = RenderSettings::new(receiver, order.duration_s, order.seed);
    settings.sample_rate_hz = order.sample_rate_hz;
    Clip::new(settings, vec![TrainTruth::of_plan(train.firings, &plan)]).map_err(Failure::usage)
}
