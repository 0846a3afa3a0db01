//! From an entry of a series to its clip: bench, firing, faults, receiver and finish.
//!
//! Reading files is the caller's: benches and sounds come in as values.

use super::charging::{Circuit, MissingPart, NoFiring};
use super::clip::Clip;
use super::finish::{FinishError, FinishSettings, Finished, Layout};
use super::firings::{Dust, Faults, GapLaw, Moment, NoTrain, Outage, Plan, Rhythm, Start, simulate};
use super::receiver::{Programme, ReceiverError, Sound};
use super::render::RenderSettings;
use super::truth::{TrainTruth, Truth};
use crate::bench::{
    Bench, BenchFault, Gap, LayoutWord, Motion, Quantity, RATE, SeriesEntry, Tolerance, dimension_of, quantity_text,
    set_quantity,
};
use thiserror::Error;

/// Moments into which a motion is cut.
const MOMENTS: usize = 400;
/// Steps in which the charging circuit is brought to a wanted rate.
const RATE_STEPS: usize = 30;
/// Apart of the seeds of the gaps of one clip.
const FURTHER_SEED: u64 = 1000;
/// Delay of an extra strike in periods, where none is given.
const EXTRA_DELAY: f64 = 0.2;

/// A clip of a series that cannot be made.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum SeriesError {
    /// No gap voltage.
    #[error("the bench gives no gap.voltage: a clip needs the voltage at which the gap breaks down")]
    NoGapVoltage,
    /// The bench says too little.
    #[error("{0}")]
    Missing(#[from] MissingPart),
    /// A change that the bench does not take.
    #[error("{0}")]
    Change(#[from] BenchFault),
    /// The gap does not fire, or not so.
    #[error("{0}")]
    Train(#[from] NoTrain),
    /// The receiver cannot be built.
    #[error("{0}")]
    Receiver(#[from] ReceiverError),
    /// The clip cannot be finished.
    #[error("{0}")]
    Finish(#[from] FinishError),
    /// A programme without a carrier.
    #[error("under needs a carrier: set receiver.carrier, for example to \"2\"")]
    NoCarrier,
    /// The charging circuit cannot be brought to the rate.
    #[error("the bench cannot fire at {0} Hz, whatever its charging resistance or current")]
    Rate(f64),
}

impl From<NoFiring> for SeriesError {
    fn from(error: NoFiring) -> Self {
        Self::Train(error.into())
    }
}

/// What an entry needs beside itself.
#[derive(Debug, Clone, Default)]
pub struct Ingredients {
    /// The bench, as its file has it.
    pub bench: Bench,
    /// The text of that file, for the truth.
    pub bench_text: String,
    /// Benches of further gaps.
    pub further: Vec<Bench>,
    /// Sound of the programme.
    pub sound: Option<Sound>,
}

/// Makes the clip of an entry, ready to be written, with its truth.
///
/// # Errors
/// [`SeriesError`]: what is wrong and what would be right.
pub fn make(entry: &SeriesEntry, ingredients: &Ingredients) -> Result<(Finished, Truth), SeriesError> {
    let finish = FinishSettings {
        loudness_lufs: entry.loudness_lufs,
        true_peak_dbtp: entry.true_peak_dbtp,
        fade_s: entry.fade_s,
        layout: if entry.layout == LayoutWord::Marker { Layout::Marker } else { Layout::Mono },
    };
    Ok(Finished::new(clip(entry, ingredients)?, finish)?)
}

/// The clip of an entry before its finish: everything that can be wrong with an entry shows here, without rendering it.
///
/// # Errors
/// [`SeriesError`]: what is wrong and what would be right.
pub fn clip(entry: &SeriesEntry, ingredients: &Ingredients) -> Result<Clip, SeriesError> {
    let mut bench = ingredients.bench.clone();
    entry.lay_over(&mut bench)?;
    if let Some((key, rate)) = &entry.varied
        && key == RATE
    {
        bring_to_rate(&mut bench, rate.value)?;
    }
    let mut settings = RenderSettings::from_bench(&bench, entry.duration_s, entry.seed)?;
    settings.sample_rate_hz = entry.sample_rate_hz.unwrap_or(settings.sample_rate_hz);
    if let Some((_, depth)) = entry.under {
        let carrier = settings.receiver.carrier.as_mut().ok_or(SeriesError::NoCarrier)?;
        carrier.programme = Some(Programme::Sound { depth, sound: ingredients.sound.clone() });
    }
    let mut trains = Vec::new();
    // A bench without a gap is a receiver alone.
    if bench.gap != Gap::default() {
        trains.push(train(entry, &bench, entry.motion.as_ref(), entry.seed)?);
    }
    for (number, further) in (1u64..).zip(&ingredients.further) {
        trains.push(train(entry, further, None, entry.seed + FURTHER_SEED * number)?);
    }
    let mut clip = Clip::new(settings, trains)?;
    clip.truth.title = entry.title.clone().or(bench.title);
    clip.truth.bench = Some(ingredients.bench_text.clone());
    clip.truth.changes = changes(entry);
    Ok(clip)
}

/// What was laid over the bench, for the truth.
fn changes(entry: &SeriesEntry) -> Vec<(String, String)> {
    let written = |key: &str, value: &Quantity| match dimension_of(key) {
        Ok(dimension) => quantity_text(value, dimension),
        Err(_) => format!("{} Hz", value.value),
    };
    let mut all = entry.changes.clone();
    all.extend(entry.varied.iter().map(|(key, value)| (key.clone(), written(key, value))));
    all.extend(entry.motion.iter().map(|motion| {
        let (from, to) = (written(&motion.key, &motion.from), written(&motion.key, &motion.to));
        (motion.key.clone(), format!("from {from} to {to}"))
    }));
    all
}

fn voltage(bench: &Bench) -> Result<f64, SeriesError> {
    bench.gap.voltage.map(|voltage| voltage.value).ok_or(SeriesError::NoGapVoltage)
}

fn moment(bench: &Bench, from_s: f64) -> Result<Moment, SeriesError> {
    let gap = GapLaw::from_bench(bench, voltage(bench)?);
    Ok(Moment { from_s, circuit: Circuit::from_bench(bench, None)?, gap })
}

fn train(entry: &SeriesEntry, bench: &Bench, motion: Option<&Motion>, seed: u64) -> Result<TrainTruth, SeriesError> {
    let Moment { circuit, gap, .. } = moment(bench, 0.0)?;
    let period_s = circuit.period_s(gap.voltage_v).ok();
    let rhythm = match motion {
        Some(motion) => Rhythm::Moving(moments(bench, motion, entry.duration_s)?),
        None => Rhythm::Bench { circuit, gap },
    };
    let plan = Plan {
        rhythm,
        faults: faults(entry, period_s),
        start: if entry.switched_on { Start::SwitchedOn } else { Start::Running },
        duration_s: entry.duration_s,
        seed,
    };
    Ok(TrainTruth::of_plan(simulate(&plan)?.firings, &plan))
}

fn faults(entry: &SeriesEntry, period_s: Option<f64>) -> Faults {
    let described = &entry.faults;
    Faults {
        missed: described.missed,
        extra: described.extra,
        extra_delay_s: described.extra_delay_s.unwrap_or(EXTRA_DELAY * period_s.unwrap_or(5e-3)),
        extra_size: described.extra_size,
        outages: described.outages.iter().map(|o| Outage { from_s: o.from_s, to_s: o.to_s }).collect(),
        dust: (described.dust_rate_hz > 0.0).then_some(Dust {
            rate_hz: described.dust_rate_hz,
            length_s: described.dust_time_s,
            depth: described.dust_depth,
        }),
    }
}

/// The moments of a motion, each with the value of its middle.
fn moments(bench: &Bench, motion: &Motion, duration_s: f64) -> Result<Vec<Moment>, SeriesError> {
    (0..MOMENTS)
        .map(|k| {
            let part = (k as f64 + 0.5) / MOMENTS as f64;
            let value = motion.from.value + (motion.to.value - motion.from.value) * part;
            let mut now = bench.clone();
            set_quantity(&mut now, &motion.key, Quantity { value, tolerance: Tolerance::Exact })?;
            moment(&now, duration_s * k as f64 / MOMENTS as f64)
        })
        .collect()
}

/// Changes the charging resistance (or time constant, or current) until the mean gap fires at the rate.
fn bring_to_rate(bench: &mut Bench, rate_hz: f64) -> Result<(), SeriesError> {
    let voltage_v = voltage(bench)?;
    for _ in 0..RATE_STEPS {
        let circuit = Circuit::from_bench(bench, None)?;
        let period_s = circuit.period_s(voltage_v)?;
        let charging_s = period_s - circuit.conduction_s();
        let factor = (1.0 / rate_hz - circuit.conduction_s()) / charging_s;
        if !(factor > 0.0 && factor.is_finite()) {
            return Err(SeriesError::Rate(rate_hz));
        }
        let charging = &mut bench.charging;
        for slower in [&mut charging.resistance, &mut charging.time_constant].into_iter().flatten() {
            slower.value *= factor;
        }
        if let Some(current) = &mut charging.current {
            current.value /= factor;
        }
        if (factor - 1.0).abs() < 1e-12 {
            break;
        }
    }
    let reached_hz = 1.0 / Circuit::from_bench(bench, None)?.period_s(voltage_v)?;
    if (reached_hz / rate_hz - 1.0).abs() < 1e-6 { Ok(()) } else { Err(SeriesError::Rate(rate_hz)) }
}
