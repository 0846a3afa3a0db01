//! The gap voltage of a reading, held against the circuit that made the firings.

use crate::case::CircuitTruth;
use gaptone::bench::{Bench, Quantity};
use gaptone::firing::Event;
use gaptone::rhythm::Reading;
use gaptone::voltage::VoltageMeter;

/// Errors of a gap voltage, relative.
#[derive(Clone, Copy)]
pub struct VoltageErrors {
    /// Mean voltage against the realised mean.
    pub mean: f64,
    /// The interval holds the realised mean.
    pub covered: bool,
    /// Spread against the realised spread, where one came out.
    pub spread: Option<f64>,
}

/// Turns a reading into a gap voltage by the circuit's exact values; none if no voltage comes out.
pub fn errors(truth: &CircuitTruth, events: &[Event], reading: &Reading) -> Option<VoltageErrors> {
    let mut bench = Bench::default();
    bench.supply.voltage = Some(Quantity::exact(truth.supply_v));
    bench.charging.resistance = Some(Quantity::exact(truth.resistance_ohm));
    bench.charging.capacitance = Some(Quantity::exact(truth.capacitance_f));
    bench.gap.residual_voltage = Some(Quantity::exact(truth.residual_v));
    let mut meter = VoltageMeter::new(&bench, None).ok()?;
    events.iter().for_each(|event| meter.push(event));
    let result = meter.finish(reading);
    let mean = result.gap_voltage_v?;
    Some(VoltageErrors {
        mean: mean.value / truth.gap_voltage_v - 1.0,
        covered: mean.low <= truth.gap_voltage_v && truth.gap_voltage_v <= mean.high,
        spread: result.gap_voltage_spread_v.map(|s| s.value / truth.gap_voltage_spread_v - 1.0),
    })
}
