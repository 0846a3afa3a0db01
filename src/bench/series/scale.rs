//! From the values of a clip to its entries: a scale is spread out, a motion checked.

use super::fields::Fields;
use super::{Motion, Name, RATE, Reader, SeriesEntry, Value};
use crate::bench::dimension::Dimension;
use crate::bench::error::{BenchError, BenchFault};
use crate::bench::quantity::Quantity;
use crate::bench::text::{parse_quantity, parse_range};
use crate::bench::{Bench, dimension_of, example_of, set_quantity};
use std::ops::Range;

/// Sections whose keys may move during a clip: those that set the firing.
const MOVING: [&str; 3] = ["supply.", "charging.", "gap."];

/// Clips in one scale.
const STEPS: usize = 8;

impl Reader<'_> {
    /// The key that a scale or a motion runs over.
    pub(super) fn varied(&self, name: &Name<'_>, value: &Value<'_>) -> Result<String, BenchError> {
        let key = self.text(name, value)?;
        if key != RATE {
            dimension_of(&key).map_err(|fault| self.at(value, fault, Some("vary = \"supply.voltage\"".to_owned())))?;
        }
        Ok(key)
    }

    /// The clips of one `[[clip]]`.
    pub(super) fn entries(&self, at: &Range<usize>, fields: Fields) -> Result<Vec<SeriesEntry>, BenchError> {
        let line = self.source.line(at.start);
        let fault = |what: &str| {
            let message = format!("{what} (clip on line {line})");
            self.source.error(at, BenchFault::Syntax { message }, None)
        };
        let name = fields.name.clone().ok_or_else(|| fault("a clip needs a name"))?;
        let bench = fields.bench.clone().ok_or_else(|| fault("a clip needs a bench, here or in [defaults]"))?;
        let motion = match (&fields.vary, &fields.through, &fields.over) {
            (Some(_), Some(_), Some(_)) => return Err(fault("over makes several clips and through one; keep one")),
            (Some((key, span)), Some(values), None) => Some(self.motion(key, span, values)?),
            (None, None, None) | (Some(_), None, Some(_)) => None,
            (None, ..) => return Err(fault("vary must say what over or through runs along")),
            (Some(_), None, None) => {
                return Err(fault("vary needs over (a clip for each value) or through (one clip)"));
            }
        };
        let scale = match (&fields.vary, &fields.over) {
            (Some((key, _)), Some(over)) => self.scale(key, over, &fields)?.into_iter().map(Some).collect(),
            _ => vec![None],
        };
        let digits = scale.len().to_string().len().max(2);
        let single = scale.len() == 1;
        let key = fields.vary.as_ref().map(|(key, _)| key.clone()).unwrap_or_default();
        let entry = |(k, value): (usize, Option<Quantity>)| SeriesEntry {
            line,
            name: if single { name.clone() } else { format!("{name}-{:0digits$}", k + 1) },
            title: fields.title.clone(),
            bench: bench.clone(),
            further: fields.further.clone(),
            under: fields.under.clone().map(|file| (file, fields.under_depth)),
            duration_s: fields.duration_s,
            seed: fields.seed.wrapping_add(k as u64),
            sample_rate_hz: fields.sample_rate_hz,
            switched_on: fields.switched_on,
            changes: fields.changes.clone(),
            varied: value.map(|value| (key.clone(), value)),
            motion: motion.clone(),
            faults: fields.faults.clone(),
            loudness_lufs: fields.loudness_lufs,
            true_peak_dbtp: fields.true_peak_dbtp,
            fade_s: fields.fade_s,
            layout: fields.layout,
            format: fields.format,
        };
        Ok(scale.into_iter().enumerate().map(entry).collect())
    }

    fn dimension(&self, key: &str) -> Dimension {
        // Found when the key was read.
        if key == RATE { Dimension::Frequency } else { dimension_of(key).unwrap_or(Dimension::Number) }
    }

    fn value(&self, key: &str, text: &str, span: &Range<usize>) -> Result<Quantity, BenchError> {
        let dimension = self.dimension(key);
        let help = || example_of(key).map(|example| format!("{key} = {example}"));
        let quantity = parse_quantity(text, dimension)
            .map_err(|cause| self.source.error(span, BenchFault::Quantity { key: key.to_owned(), cause }, help()))?;
        self.makes_sense(key, quantity, span)?;
        Ok(quantity)
    }

    fn makes_sense(&self, key: &str, quantity: Quantity, span: &Range<usize>) -> Result<(), BenchError> {
        if key == RATE {
            if quantity.value > 0.0 {
                return Ok(());
            }
            let (given, allowed) = (format!("{} Hz", quantity.value), "above 0 Hz".to_owned());
            return Err(self.source.error(span, BenchFault::OutOfRange { key: key.to_owned(), given, allowed }, None));
        }
        set_quantity(&mut Bench::default(), key, quantity).map_err(|fault| self.source.error(span, fault, None))
    }

    fn motion(
        &self,
        key: &str,
        span: &Range<usize>,
        (texts, at): &(Vec<String>, Range<usize>),
    ) -> Result<Motion, BenchError> {
        if !MOVING.iter().any(|section| key.starts_with(section)) {
            let allowed = "a key of [supply], [charging] or [gap] to move during a clip".to_owned();
            let fault = BenchFault::OutOfRange { key: "vary".to_owned(), given: key.to_owned(), allowed };
            return Err(self.source.error(span, fault, None));
        }
        let [from, to] = &texts[..] else {
            let fault = BenchFault::WrongType {
                key: "through".to_owned(),
                given: "no list of two",
                needed: "a list of the value at the start and the one at the end",
            };
            return Err(self.source.error(at, fault, None));
        };
        Ok(Motion { key: key.to_owned(), from: self.value(key, from, at)?, to: self.value(key, to, at)? })
    }

    fn scale(
        &self,
        key: &str,
        (texts, span): &(Vec<String>, Range<usize>),
        fields: &Fields,
    ) -> Result<Vec<Quantity>, BenchError> {
        match &texts[..] {
            [range] if range.contains("..") => {
                let dimension = self.dimension(key);
                let (low, high) = parse_range(range, dimension).map_err(|cause| {
                    self.source.error(span, BenchFault::Quantity { key: key.to_owned(), cause }, None)
                })?;
                let ratio = matches!(dimension, Dimension::Level | Dimension::Ratio) && low.value > 0.0;
                let values =
                    spread(low.value, high.value, fields.steps.unwrap_or(STEPS), fields.by_ratio.unwrap_or(ratio));
                values.iter().try_for_each(|value| self.makes_sense(key, Quantity::exact(*value), span))?;
                Ok(values.into_iter().map(Quantity::exact).collect())
            }
            [] => {
                let fault = BenchFault::WrongType { key: "over".to_owned(), given: "an empty list", needed: "values" };
                Err(self.source.error(span, fault, None))
            }
            texts => texts.iter().map(|text| self.value(key, text, span)).collect(),
        }
    }
}

/// Equal steps from one end to the other, both included: of the value, or of its logarithm.
fn spread(low: f64, high: f64, steps: usize, by_ratio: bool) -> Vec<f64> {
    let part = |k: usize| k as f64 / (steps - 1) as f64;
    let by_ratio = by_ratio && low > 0.0;
    (0..steps).map(|k| if by_ratio { low * (high / low).powf(part(k)) } else { low + (high - low) * part(k) }).collect()
}
