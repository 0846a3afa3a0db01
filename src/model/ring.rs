//! The ring after a spark: the modes of the linear network of capacitor, leads, spark, coil and tank capacitor, and what can
//! be read off a picture of it.
//!
//! While the gap conducts the charged capacitor C drives the coil through leads and spark; a capacitor across the coil rings
//! with it, and with the leads at tens of megahertz. After the gap has opened coil and tank capacitor ring alone. The spark
//! counts as a resistance and, where it is stated, as an arc of constant voltage, which makes the decay a line. Units: Hz, s, H, F,
//! Ω, V.

mod network;
mod readings;

pub use network::{Mode, Network};
pub use readings::{Arc, Readings, read_off};

use crate::bench::{Bench, Quantity};
use crate::model::receiver::{Burst, BurstError};

impl Network {
    /// The network of a bench: `tank.inductance` and `tank.resistance`, the capacitor that is charged
    /// (`charging.capacitance`, else `tank.capacitance` alone), `tank.capacitance` across the coil where it is another one,
    /// `tank.lead_inductance`, `gap.spark_resistance`. None if the bench describes no such parts.
    #[must_use]
    pub fn of_bench(bench: &Bench) -> Option<Self> {
        let value = |quantity: Option<Quantity>| quantity.map(|q| q.value);
        let charged = value(bench.charging.capacitance);
        let tank = value(bench.tank.capacitance);
        let capacitance_f = charged.or(tank)?;
        // The same part may stand in both sections.
        let parallel_f = tank.filter(|tank| *tank != capacitance_f).unwrap_or(0.0);
        Some(Self {
            capacitance_f,
            inductance_h: value(bench.tank.inductance)?,
            coil_ohm: value(bench.tank.resistance)?,
            lead_h: value(bench.tank.lead_inductance).unwrap_or(0.0),
            spark_ohm: value(bench.gap.spark_resistance).unwrap_or(0.0),
            parallel_f,
        })
    }
}

/// The damped wave of a bench as a receiver takes it: from `tank.frequency` and `tank.quality`, else from the parts (the mode
/// with most current in the coil), else from the readings. None if the bench describes none of these in full.
///
/// # Errors
/// If what is described does not ring.
pub fn burst(bench: &Bench) -> Result<Option<Burst>, BurstError> {
    let tank = &bench.tank;
    if let (Some(frequency), Some(quality)) = (tank.frequency, tank.quality) {
        return Burst::new(frequency.value, quality.value).map(Some);
    }
    if let Some(network) = Network::of_bench(bench) {
        let mode = network.closed().into_iter().next();
        let mode = mode.ok_or(BurstError::Quality(network.simple_quality()))?;
        return Burst::ringing(mode.ring_hz, mode.decay_per_s).map(Some);
    }
    readings(bench).transpose()?.map(|readings| readings.burst()).transpose()
}

/// What the peaks of a bench say; none if it holds none.
#[must_use]
pub fn readings(bench: &Bench) -> Option<Result<Readings, BurstError>> {
    let (peaks, spacing) = (bench.tank.peaks.as_ref()?, bench.tank.peak_spacing?);
    Some(read_off(peaks, spacing))
}
