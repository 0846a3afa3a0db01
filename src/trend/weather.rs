//! The air: reduction of a gap voltage to standard air, the spacing that it implies, and what of a change the air explains.
//!
//! With electrodes stated the reduction goes through the breakdown law (spacing at the voltage and air of the day, then the
//! voltage at that spacing in standard air); without, the voltage is taken as proportional to the density (IEC 60060-1 for
//! densities near 1).

use super::entry::Entry;
use super::regression::fit;
use super::{ChangePoint, Charted, Point, Wear};
use crate::bench::Electrodes;
use crate::estimate::Estimate;
use crate::model::air::DENSITY_RANGE;
use crate::model::breakdown::GapGeometry;
use serde::{Deserialize, Serialize};

/// Least range of ln(density) over the log from which its exponent is worth telling.
const LEAST_RANGE: f64 = 0.005;
/// Fewest entries for it.
const FEWEST_FOR_EXPONENT: usize = 8;

/// A voltage brought to standard air.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Reduced {
    /// Voltage in standard air, V.
    pub standard_air_v: f64,
    /// Spacing, m; needs electrodes.
    pub spacing_m: Option<Estimate>,
}

/// Reduces voltages; keeps the table of the gap from entry to entry.
#[derive(Debug, Default)]
pub(super) struct Reducer {
    known: Option<(Electrodes, Option<f64>, Option<GapGeometry>)>,
}

impl Reducer {
    /// The voltage of an entry in standard air. None without a voltage, or in air beyond the correction.
    pub fn reduce(&mut self, entry: &Entry) -> Option<Reduced> {
        let voltage = entry.gap_voltage_v.filter(|voltage| voltage.value > 0.0)?;
        let air = entry.air.air();
        let bench = entry.bench.as_ref();
        let Some(electrodes) = bench.and_then(|bench| bench.electrodes) else {
            let density = air.relative_density();
            let inside = (DENSITY_RANGE.0..=DENSITY_RANGE.1).contains(&density);
            return inside.then(|| Reduced { standard_air_v: voltage.value / density, spacing_m: None });
        };
        let diameter_m = bench.and_then(|bench| bench.diameter_m);
        if !self.known.as_ref().is_some_and(|known| (known.0, known.1) == (electrodes, diameter_m)) {
            self.known = Some((electrodes, diameter_m, GapGeometry::new(electrodes, diameter_m)));
        }
        let implied = self.known.as_ref()?.2.as_ref()?.implied(voltage.value, &air)?;
        // The law is a limit, rectangular (JCGM 100, 4.3.7); d(spacing)/spacing is d(voltage)/voltage over the exponent.
        let law = implied.in_standard_air.band / 3f64.sqrt();
        let weather = entry.air.relative_u(electrodes == Electrodes::Spheres);
        let relative = (voltage.u / voltage.value).hypot(law).hypot(weather) / implied.exponent;
        Some(Reduced {
            standard_air_v: implied.in_standard_air.voltage_v,
            spacing_m: Some(Estimate::normal(implied.spacing_m, relative * implied.spacing_m)),
        })
    }
}

/// What is assumed of the air.
pub(super) fn notes(entries: &[&Entry], notes: &mut Vec<String>) {
    let without = entries.iter().filter(|entry| !entry.air.gives_density()).count();
    if without > 0 {
        notes.push(format!(
            "{without} of {} entries state no temperature or pressure and are taken as in standard air; 3 °C or 10 hPa are 1 % of \
             the gap voltage (write [air] into the bench file, or --temperature and --pressure)",
            entries.len()
        ));
    }
    if entries.iter().any(|entry| entry.bench.as_ref().is_some_and(|bench| bench.electrodes.is_none())) {
        notes.push(
            "no electrodes in the bench file: voltages are reduced in proportion to the density of the air, and no \
             spacing is implied"
                .to_owned(),
        );
    }
}

/// What of the voltage the air explains.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct AirPart {
    /// Entries with temperature and pressure.
    pub entries: usize,
    /// Least and greatest relative density.
    pub density: (f64, f64),
    /// Standard deviation of the voltage as measured, relative.
    pub scatter_as_measured: f64,
    /// Standard deviation of the voltage in standard air, relative.
    pub scatter_reduced: f64,
    /// Share of the variance that the reduction takes away; negative if it adds.
    pub explained: f64,
    /// d ln(voltage)/d ln(voltage by the law) beside a slope over the hours; 1 if the law holds.
    pub exponent: Option<Estimate>,
    /// Relative change of the voltage as measured at the change point.
    pub change_as_measured: Option<f64>,
    /// What of it the air explains.
    pub change_by_air: Option<f64>,
}

/// What of the voltage the air explains. None if something else is charted or no entry states its air.
pub(super) fn air_part(
    points: &[Point],
    entries: &[&Entry],
    charted: Charted,
    change: Option<&ChangePoint>,
) -> Option<AirPart> {
    if charted != Charted::GapVoltage {
        return None;
    }
    let rows: Vec<(usize, &Point)> =
        points.iter().enumerate().filter(|(index, _)| entries[*index].air.gives_density()).collect();
    if rows.len() < 2 {
        return None;
    }
    let column = |of: fn(&Point) -> Option<f64>| -> Vec<f64> {
        rows.iter().map(|(_, point)| of(point).unwrap_or(f64::NAN).ln()).collect()
    };
    let measured = column(|point| point.gap_voltage_v);
    let reduced = column(|point| point.standard_air_v);
    let by_air: Vec<f64> = measured.iter().zip(&reduced).map(|(measured, reduced)| measured - reduced).collect();
    let hours: Vec<f64> = rows.iter().map(|(_, point)| point.hours).collect();
    let density = rows
        .iter()
        .filter_map(|(_, point)| point.air_density)
        .fold((f64::INFINITY, 0.0_f64), |range, d| (range.0.min(d), range.1.max(d)));
    let (before, after) = (deviation(&measured), deviation(&reduced));
    let range = by_air.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |range, x| (range.0.min(*x), range.1.max(*x)));
    let exponent = (rows.len() >= FEWEST_FOR_EXPONENT && range.1 - range.0 > LEAST_RANGE)
        .then(|| fit(&[&by_air, &hours], &measured).or_else(|| fit(&[&by_air], &measured)))
        .flatten()
        .map(|fit| fit.slopes[0]);
    let jump = |values: &[f64]| {
        let change = change?;
        let at = rows.partition_point(|(index, _)| *index < change.index);
        (at > 0 && at < rows.len()).then(|| mean(&values[at..]) - mean(&values[..at]))
    };
    Some(AirPart {
        entries: rows.len(),
        density,
        scatter_as_measured: before,
        scatter_reduced: after,
        explained: if before > 0.0 { 1.0 - (after / before).powi(2) } else { 0.0 },
        exponent,
        change_as_measured: jump(&measured),
        change_by_air: jump(&by_air),
    })
}

fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}

fn deviation(values: &[f64]) -> f64 {
    let mean = mean(values);
    (values.iter().map(|value| (value - mean).powi(2)).sum::<f64>() / (values.len() as f64 - 1.0)).sqrt()
}

/// Spacing of the gap.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Spacing {
    /// By the last entry, m: the law, the bench and the weather go in fully.
    pub last_m: Estimate,
    /// Change at the change point, m: only the scatter from entry to entry goes in, what all entries share cancels.
    pub change_m: Option<Estimate>,
    /// Change with the hours of firing, m/h.
    pub per_hour_m: Option<Estimate>,
}

/// Spacing of the gap and how it changes. None if the gap voltage is not charted or the electrodes are not known.
pub(super) fn spacing(
    points: &[Point],
    entries: &[&Entry],
    change: Option<&ChangePoint>,
    wear: Option<&Wear>,
) -> Option<Spacing> {
    let last = points.last()?;
    let last_m = last.spacing_m?;
    let voltage_v = last.standard_air_v.filter(|voltage| *voltage == last.value)?;
    let bench = entries.last()?.bench.as_ref()?;
    let implied = GapGeometry::new(bench.electrodes?, bench.diameter_m)?
        .implied(voltage_v, &crate::model::air::Air::default())?;
    let per_volt = implied.spacing_m / (implied.exponent * voltage_v);
    Some(Spacing {
        last_m,
        change_m: change.map(|change| change.difference.scaled(per_volt)),
        per_hour_m: wear.map(|wear| wear.per_hour.scaled(per_volt)),
    })
}
