//! The description of a series of clips: TOML text to checked entries, scales spread out into one entry per value.
//!
//! `[defaults]` holds what all clips share, each `[[clip]]` what one clip (or one scale of clips) has of its own. Every value is
//! checked here, with its line, before anything is made; only whether a bench file exists and fires is seen later.

mod fields;
mod scale;

use super::Bench;
use super::error::{BenchError, BenchFault, Source};
use super::quantity::Quantity;
use super::suggest::nearest;
use super::syntax;
use fields::{CLIP_KEYS, Fields};
use std::collections::BTreeSet;
use toml::Spanned;
use toml::de::{DeString, DeTable, DeValue};

type Name<'i> = Spanned<DeString<'i>>;
type Value<'i> = Spanned<DeValue<'i>>;

/// What stands on the second channel.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub enum LayoutWord {
    /// No second channel.
    #[default]
    Mono,
    /// Gap left, a tick for each firing right.
    Marker,
}

/// A time without firing, s.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Outage {
    /// Start, s.
    pub from_s: f64,
    /// End, s.
    pub to_s: f64,
}

/// Faults of the firing.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct SeriesFaults {
    /// Share of the firings that are not heard.
    pub missed: f64,
    /// Share of the firings that an extra strike follows.
    pub extra: f64,
    /// Mean time to that strike, s; none for a fifth of the period.
    pub extra_delay_s: Option<f64>,
    /// Its voltage over that of the firing.
    pub extra_size: f64,
    /// Times without firing.
    pub outages: Vec<Outage>,
    /// Bursts of early firing per second (dust on the electrodes), Hz.
    pub dust_rate_hz: f64,
    /// Length of a burst, s.
    pub dust_time_s: f64,
    /// Greatest loss of strength in a burst, as a fraction.
    pub dust_depth: f64,
}

/// A key of the bench that moves during a clip.
#[derive(Debug, Clone, PartialEq)]
pub struct Motion {
    /// Its path, such as `supply.voltage`.
    pub key: String,
    /// Value at the start, SI.
    pub from: Quantity,
    /// Value at the end, SI.
    pub to: Quantity,
}

/// One clip to be made.
#[derive(Debug, Clone, PartialEq)]
pub struct SeriesEntry {
    /// Line of the series file at which its `[[clip]]` stands.
    pub line: usize,
    /// Name, which is also that of its files.
    pub name: String,
    /// What it shows.
    pub title: Option<String>,
    /// Bench file, as written.
    pub bench: String,
    /// Bench files of further, weaker gaps.
    pub further: Vec<String>,
    /// Sound file of the programme on the carrier, and its depth of modulation.
    pub under: Option<(String, f64)>,
    /// Length, s.
    pub duration_s: f64,
    /// Seed.
    pub seed: u64,
    /// Sample rate, Hz; none for that of the recorder of the bench.
    pub sample_rate_hz: Option<u32>,
    /// True if the supply is switched on at the start.
    pub switched_on: bool,
    /// Keys of the bench and the text of their values, laid over the bench file.
    pub changes: Vec<(String, String)>,
    /// The key that the scale runs over (`rate` for the firing rate) and its value here, SI.
    pub varied: Option<(String, Quantity)>,
    /// What moves during the clip.
    pub motion: Option<Motion>,
    /// Faults.
    pub faults: SeriesFaults,
    /// Loudness aimed at, LUFS; none leaves the level as the bench sets it.
    pub loudness_lufs: Option<f64>,
    /// Greatest true peak, dBTP.
    pub true_peak_dbtp: f64,
    /// Fade in and out, s.
    pub fade_s: f64,
    /// Second channel.
    pub layout: LayoutWord,
    /// Format of the samples: `wav 16`, `wav 24`, `wav float`, `flac 16` or `flac 24`.
    pub format: &'static str,
}

impl SeriesEntry {
    /// Lays the changes and the value of the scale over a bench. A scale over `rate` is left to the caller.
    ///
    /// # Errors
    /// A value that contradicts its key; those of a file that was read are right.
    pub fn lay_over(&self, bench: &mut Bench) -> Result<(), BenchFault> {
        for (key, text) in &self.changes {
            super::set(bench, key, text)?;
        }
        match &self.varied {
            Some((key, value)) if key != RATE => super::set_quantity(bench, key, *value),
            _ => Ok(()),
        }
    }
}

/// The key that stands for the firing rate in a scale.
pub const RATE: &str = "rate";

/// A series as described.
#[derive(Debug, Clone, PartialEq)]
pub struct SeriesDescription {
    /// Title.
    pub title: Option<String>,
    /// Its clips in the order of the file.
    pub entries: Vec<SeriesEntry>,
}

/// Reads a series file. `file_name` is only for messages.
///
/// # Errors
/// The first fault in the order of the text, with its line.
pub fn parse_series(text: &str, file_name: &str) -> Result<SeriesDescription, BenchError> {
    let source = Source { text, file_name };
    let document = DeTable::parse(text).map_err(|error| syntax::error(&source, &error))?;
    let reader = Reader { source };
    let mut title = None;
    let mut defaults = Fields::new();
    let mut clips = None;
    for (name, value) in reader.in_order(document.get_ref()) {
        match (name.get_ref().as_ref(), value.get_ref()) {
            ("title", _) => title = Some(reader.text(name, value)?),
            ("defaults", DeValue::Table(table)) => defaults = reader.fields(table, defaults)?,
            ("clip", DeValue::Array(items)) => clips = Some(items),
            ("clip" | "defaults", _) => {
                return Err(reader.wrong(
                    name,
                    value,
                    "a section: write [defaults] once and [[clip]] before each clip",
                ));
            }
            _ => return Err(reader.unknown(name, "at the top of a series file", &["title", "defaults", "clip"])),
        }
    }
    let Some(items) = clips else {
        let message = "a series needs at least one [[clip]]".to_owned();
        return Err(source.error(&(0..0), BenchFault::Syntax { message }, None));
    };
    let mut entries = Vec::new();
    for item in items.iter() {
        let DeValue::Table(table) = item.get_ref() else {
            return Err(source.error(&item.span(), BenchFault::Syntax { message: "a clip is a section".into() }, None));
        };
        let fields = reader.fields(table, defaults.for_clip(entries.len()))?;
        entries.extend(reader.entries(&item.span(), fields)?);
    }
    let mut seen = BTreeSet::new();
    for entry in &entries {
        if !seen.insert(entry.name.to_lowercase()) {
            let message = format!("two clips are named `{}`; each needs a name of its own", entry.name);
            let start = source.start_of_line(entry.line);
            return Err(source.error(&(start..start), BenchFault::Syntax { message }, None));
        }
    }
    Ok(SeriesDescription { title, entries })
}

/// Reads values and tells faults.
struct Reader<'a> {
    source: Source<'a>,
}

impl Reader<'_> {
    /// The entries of a table as they stand in the file.
    fn in_order<'t, 'i>(&self, table: &'t DeTable<'i>) -> Vec<(&'t Name<'i>, &'t Value<'i>)> {
        let mut entries: Vec<_> = table.iter().collect();
        entries.sort_by_key(|(name, _)| name.span().start);
        entries
    }

    fn text(&self, name: &Name<'_>, value: &Value<'_>) -> Result<String, BenchError> {
        let text = value.get_ref().as_str().map(str::to_owned);
        text.ok_or_else(|| self.wrong(name, value, "a text in quotes"))
    }

    fn wrong(&self, name: &Name<'_>, value: &Value<'_>, needed: &'static str) -> BenchError {
        let key = name.get_ref().to_string();
        let fault = BenchFault::WrongType { key, given: super::read::type_name(value.get_ref()), needed };
        self.source.error(&value.span(), fault, None)
    }

    fn unknown(&self, name: &Name<'_>, place: &str, allowed: &[&str]) -> BenchError {
        let key = name.get_ref().to_string();
        let suggestion = nearest(&key, allowed.iter().copied()).map(|near| format!("`{near}`"));
        let fault = BenchFault::UnknownKey { key, place: place.to_owned(), suggestion, allowed: allowed.join(", ") };
        self.source.error(&name.span(), fault, None)
    }

    fn at(&self, value: &Value<'_>, fault: BenchFault, help: Option<String>) -> BenchError {
        self.source.error(&value.span(), fault, help)
    }

    fn fields(&self, table: &DeTable<'_>, mut fields: Fields) -> Result<Fields, BenchError> {
        for (name, value) in self.in_order(table) {
            if !self.field(&mut fields, name, value)? {
                return Err(self.unknown(name, "of a clip", &CLIP_KEYS));
            }
        }
        Ok(fields)
    }
}
