//! The keys of a clip.

use super::{LayoutWord, Name, Outage, Reader, SeriesFaults, Value};
use crate::bench::dimension::Dimension;
use crate::bench::error::{BenchError, BenchFault};
use crate::bench::suggest::nearest;
use crate::bench::text::{parse_quantity, parse_range};
use crate::bench::{Bench, set};
use std::ops::Range;
use toml::de::{DeTable, DeValue};

/// Every key of `[defaults]` and `[[clip]]`.
pub(super) const CLIP_KEYS: [&str; 22] = [
    "name",
    "title",
    "bench",
    "further",
    "under",
    "under_depth",
    "seconds",
    "seed",
    "sample_rate",
    "switched_on",
    "set",
    "vary",
    "over",
    "steps",
    "spacing",
    "through",
    "faults",
    "loudness_lufs",
    "true_peak_dbtp",
    "fade",
    "layout",
    "format",
];

const FAULT_KEYS: [&str; 8] =
    ["missed", "extra", "extra_delay", "extra_size", "outages", "dust_rate", "dust_time", "dust_depth"];

/// Formats of the samples.
pub(super) const FORMATS: [&str; 5] = ["wav 16", "wav 24", "wav float", "flac 16", "flac 24"];

/// Values as they come in, defaults first.
#[derive(Debug, Clone)]
pub(super) struct Fields {
    pub(super) name: Option<String>,
    pub(super) title: Option<String>,
    pub(super) bench: Option<String>,
    pub(super) further: Vec<String>,
    pub(super) under: Option<String>,
    pub(super) under_depth: f64,
    pub(super) duration_s: f64,
    pub(super) seed: u64,
    pub(super) sample_rate_hz: Option<u32>,
    pub(super) switched_on: bool,
    pub(super) changes: Vec<(String, String)>,
    pub(super) vary: Option<(String, Range<usize>)>,
    pub(super) over: Option<(Vec<String>, Range<usize>)>,
    pub(super) steps: Option<usize>,
    pub(super) by_ratio: Option<bool>,
    pub(super) through: Option<(Vec<String>, Range<usize>)>,
    pub(super) faults: SeriesFaults,
    pub(super) loudness_lufs: Option<f64>,
    pub(super) true_peak_dbtp: f64,
    pub(super) fade_s: f64,
    pub(super) layout: LayoutWord,
    pub(super) format: &'static str,
}

impl Fields {
    /// What holds where neither the defaults of the series nor the clip say otherwise: the loudness of EBU R 128.
    pub(super) fn new() -> Self {
        Self {
            name: None,
            title: None,
            bench: None,
            further: Vec::new(),
            under: None,
            under_depth: 0.8,
            duration_s: 10.0,
            seed: 1,
            sample_rate_hz: None,
            switched_on: false,
            changes: Vec::new(),
            vary: None,
            over: None,
            steps: None,
            by_ratio: None,
            through: None,
            faults: SeriesFaults { extra_size: 0.7, dust_time_s: 0.1, dust_depth: 0.4, ..SeriesFaults::default() },
            loudness_lufs: Some(-23.0),
            true_peak_dbtp: -1.0,
            fade_s: 0.02,
            layout: LayoutWord::default(),
            format: FORMATS[0],
        }
    }

    /// The defaults for a clip before which that many others stand: each clip has draws of its own.
    pub(super) fn for_clip(&self, before: usize) -> Self {
        Self { seed: self.seed.wrapping_add(before as u64), ..self.clone() }
    }
}

impl Reader<'_> {
    /// Takes one key of a clip; false if there is none of this name.
    pub(super) fn field(&self, into: &mut Fields, name: &Name<'_>, value: &Value<'_>) -> Result<bool, BenchError> {
        match name.get_ref().as_ref() {
            "name" => into.name = Some(self.file_name(name, value)?),
            "title" => into.title = Some(self.text(name, value)?),
            "bench" => into.bench = Some(self.text(name, value)?),
            "further" => into.further = self.texts(name, value)?,
            "under" => into.under = Some(self.text(name, value)?),
            "under_depth" => into.under_depth = self.quantity(name, value, Dimension::Fraction, 0.0, 1.0)?,
            "seconds" => into.duration_s = self.duration(name, value)?,
            "seed" => into.seed = self.whole(name, value)?,
            "sample_rate" => {
                let rate_hz = self.quantity(name, value, Dimension::Frequency, 4000.0, 768_000.0)?;
                into.sample_rate_hz = Some(rate_hz.round() as u32);
            }
            "switched_on" => into.switched_on = self.yes(name, value)?,
            "set" => self.changes(into, name, value)?,
            "vary" => into.vary = Some((self.varied(name, value)?, value.span())),
            "over" => into.over = Some((self.texts(name, value)?, value.span())),
            "steps" => into.steps = Some(self.steps(name, value)?),
            "spacing" => into.by_ratio = Some(self.word(name, value, &["linear", "ratio"])? == "ratio"),
            "through" => into.through = Some((self.texts(name, value)?, value.span())),
            "faults" => self.faults(into, name, value)?,
            "loudness_lufs" => into.loudness_lufs = self.loudness(name, value)?,
            "true_peak_dbtp" => into.true_peak_dbtp = self.number(name, value, -60.0, 0.0)?,
            "fade" => into.fade_s = self.quantity(name, value, Dimension::Time, 0.0, 60.0)?,
            "layout" => {
                let word = self.word(name, value, &["mono", "marker"])?;
                into.layout = if word == "mono" { LayoutWord::Mono } else { LayoutWord::Marker };
            }
            "format" => into.format = self.word(name, value, &FORMATS)?,
            _ => return Ok(false),
        }
        Ok(true)
    }

    fn texts(&self, name: &Name<'_>, value: &Value<'_>) -> Result<Vec<String>, BenchError> {
        let needed = "a text in quotes or a list of such";
        let one = |value: &Value<'_>| match value.get_ref() {
            DeValue::String(text) => Ok(text.to_string()),
            DeValue::Integer(_) | DeValue::Float(_) => Ok(self.source.slice(&value.span()).to_owned()),
            _ => Err(self.wrong(name, value, needed)),
        };
        match value.get_ref() {
            DeValue::Array(items) => items.iter().map(one).collect(),
            _ => Ok(vec![one(value)?]),
        }
    }

    /// A name that is one on every file system.
    fn file_name(&self, name: &Name<'_>, value: &Value<'_>) -> Result<String, BenchError> {
        let text = self.text(name, value)?;
        let fits = |sign: char| sign.is_alphanumeric() || "-_ ".contains(sign);
        if text.is_empty() || text.len() > 100 || text.trim() != text || !text.chars().all(fits) {
            let allowed = "letters, digits, -, _ and single spaces, at most 100".to_owned();
            let fault = BenchFault::OutOfRange { key: "name".to_owned(), given: text, allowed };
            return Err(self.at(value, fault, None));
        }
        Ok(text)
    }

    fn quantity(
        &self,
        name: &Name<'_>,
        value: &Value<'_>,
        dimension: Dimension,
        low: f64,
        high: f64,
    ) -> Result<f64, BenchError> {
        let text = self.text(name, value)?;
        let key = name.get_ref().to_string();
        let quantity = parse_quantity(&text, dimension)
            .map_err(|cause| self.at(value, BenchFault::Quantity { key: key.clone(), cause }, None))?;
        if (low..=high).contains(&quantity.value) {
            return Ok(quantity.value);
        }
        let scale = if dimension == Dimension::Fraction { 100.0 } else { 1.0 };
        let unit = if dimension == Dimension::Fraction { "%" } else { dimension.symbol() };
        let allowed = format!("{} {unit} to {} {unit}", low * scale, high * scale);
        Err(self.at(value, BenchFault::OutOfRange { key, given: text, allowed }, None))
    }

    /// A length; one of 0 s holds nothing, and one of more than a day does not fit into memory.
    fn duration(&self, name: &Name<'_>, value: &Value<'_>) -> Result<f64, BenchError> {
        if let DeValue::Integer(_) | DeValue::Float(_) = value.get_ref() {
            return self.number(name, value, 0.001, 86_400.0);
        }
        self.quantity(name, value, Dimension::Time, 0.001, 86_400.0)
    }

    fn number(&self, name: &Name<'_>, value: &Value<'_>, low: f64, high: f64) -> Result<f64, BenchError> {
        let text = match value.get_ref() {
            DeValue::Integer(_) | DeValue::Float(_) => self.source.slice(&value.span()).replace('_', ""),
            _ => return Err(self.wrong(name, value, "a number")),
        };
        match text.parse::<f64>() {
            Ok(number) if number >= low && number <= high => Ok(number),
            _ => {
                let (key, allowed) = (name.get_ref().to_string(), format!("{low} to {high}"));
                Err(self.at(value, BenchFault::OutOfRange { key, given: text, allowed }, None))
            }
        }
    }

    fn whole(&self, name: &Name<'_>, value: &Value<'_>) -> Result<u64, BenchError> {
        let digits = self.source.slice(&value.span()).replace('_', "");
        digits.parse().map_err(|_| self.wrong(name, value, "a whole number, 0 or more"))
    }

    fn steps(&self, name: &Name<'_>, value: &Value<'_>) -> Result<usize, BenchError> {
        let steps = self.number(name, value, 2.0, 1000.0)?;
        if steps.fract() == 0.0 { Ok(steps as usize) } else { Err(self.wrong(name, value, "a whole number")) }
    }

    fn yes(&self, name: &Name<'_>, value: &Value<'_>) -> Result<bool, BenchError> {
        value.get_ref().as_bool().ok_or_else(|| self.wrong(name, value, "true or false"))
    }

    fn loudness(&self, name: &Name<'_>, value: &Value<'_>) -> Result<Option<f64>, BenchError> {
        match value.get_ref() {
            DeValue::String(text) if text == "off" => Ok(None),
            DeValue::String(_) => Err(self.wrong(name, value, "a number of LUFS such as -23, or \"off\"")),
            _ => self.number(name, value, -70.0, 0.0).map(Some),
        }
    }

    fn word(&self, name: &Name<'_>, value: &Value<'_>, words: &[&'static str]) -> Result<&'static str, BenchError> {
        let given = self.text(name, value)?;
        words.iter().find(|word| **word == given).copied().ok_or_else(|| {
            let suggestion = nearest(&given, words.iter().copied()).map(|near| format!("`{near}`"));
            let (key, allowed) = (name.get_ref().to_string(), words.join(", "));
            self.at(value, BenchFault::Word { key, given, suggestion, allowed }, None)
        })
    }

    /// The table `set`: keys of a bench with a dot, in quotes.
    fn changes(&self, into: &mut Fields, name: &Name<'_>, value: &Value<'_>) -> Result<(), BenchError> {
        let DeValue::Table(table) = value.get_ref() else {
            return Err(self.wrong(name, value, "a table such as { \"gap.spread\" = \"3 %\" }"));
        };
        for (path, value) in self.in_order(table) {
            let text = self.texts(path, value)?.concat();
            let key = path.get_ref().to_string();
            set(&mut Bench::default(), &key, &text).map_err(|fault| self.at(value, fault, None))?;
            into.changes.retain(|(old, _)| *old != key);
            into.changes.push((key, text));
        }
        Ok(())
    }

    fn faults(&self, into: &mut Fields, name: &Name<'_>, value: &Value<'_>) -> Result<(), BenchError> {
        let DeValue::Table(table) = value.get_ref() else {
            return Err(self.wrong(name, value, "a table such as { missed = \"5 %\" }"));
        };
        self.fault_table(&mut into.faults, table)
    }

    fn fault_table(&self, into: &mut SeriesFaults, table: &DeTable<'_>) -> Result<(), BenchError> {
        const BELOW_ONE: f64 = 0.99;
        for (name, value) in self.in_order(table) {
            let share = |high| self.quantity(name, value, Dimension::Fraction, 0.0, high);
            let time = || self.quantity(name, value, Dimension::Time, 1e-6, 3600.0);
            match name.get_ref().as_ref() {
                "missed" => into.missed = share(BELOW_ONE)?,
                "extra" => into.extra = share(BELOW_ONE)?,
                "extra_delay" => into.extra_delay_s = Some(time()?),
                "extra_size" => into.extra_size = share(10.0)?,
                "outages" => into.outages = self.outages(name, value)?,
                "dust_rate" => into.dust_rate_hz = self.quantity(name, value, Dimension::Frequency, 0.0, 1000.0)?,
                "dust_time" => into.dust_time_s = time()?,
                "dust_depth" => into.dust_depth = share(BELOW_ONE)?,
                _ => return Err(self.unknown(name, "of faults", &FAULT_KEYS)),
            }
        }
        Ok(())
    }

    fn outages(&self, name: &Name<'_>, value: &Value<'_>) -> Result<Vec<Outage>, BenchError> {
        let one = |text: String| {
            let (from, to) = parse_range(&text, Dimension::Time).map_err(|cause| {
                self.at(value, BenchFault::Quantity { key: name.get_ref().to_string(), cause }, None)
            })?;
            Ok(Outage { from_s: from.value, to_s: to.value })
        };
        self.texts(name, value)?.into_iter().map(one).collect()
    }
}
