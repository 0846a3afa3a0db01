//! From TOML text to a checked [`Bench`].

use super::check;
use super::dimension::Dimension;
use super::error::{BenchError, BenchFault, Source};
use super::keys::{self, Allowed, Key, Kind, SECTIONS, Word};
use super::quantity::Quantity;
use super::suggest::nearest;
use super::text::{QuantityError, parse_quantity, parse_range};
use super::{Bench, syntax};
use std::collections::BTreeMap;
use std::ops::Range;
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// Where each value stands in the text, by section and key.
pub(super) type Places = BTreeMap<(&'static str, &'static str), Range<usize>>;

/// Reads a bench description. `file_name` is only for messages.
///
/// # Errors
/// The first fault in the order of the text: TOML syntax, an unknown key, a wrong or senseless value; then
/// contradictions between values.
pub fn parse(text: &str, file_name: &str) -> Result<Bench, BenchError> {
    let source = Source { text, file_name };
    let document = DeTable::parse(text).map_err(|error| syntax::error(&source, &error))?;
    let mut reader = Reader { source, bench: Bench::default(), places: Places::new() };
    for (name, value) in in_order(document.get_ref()) {
        match value.get_ref() {
            DeValue::Table(section) if name.get_ref() != "title" => reader.section(name, section)?,
            _ => reader.entry("", name, value)?,
        }
    }
    check::contradictions(&reader.bench, &reader.places, &source)?;
    Ok(reader.bench)
}

type Name<'i> = Spanned<toml::de::DeString<'i>>;
type Value<'i> = Spanned<DeValue<'i>>;

/// The entries of a table as they stand in the file, so that the first fault is reported first.
fn in_order<'t, 'i>(table: &'t DeTable<'i>) -> Vec<(&'t Name<'i>, &'t Value<'i>)> {
    let mut entries: Vec<_> = table.iter().collect();
    entries.sort_by_key(|(name, _)| name.span().start);
    entries
}

struct Reader<'a> {
    source: Source<'a>,
    bench: Bench,
    places: Places,
}

impl Reader<'_> {
    fn section(&mut self, name: &Name<'_>, table: &DeTable<'_>) -> Result<(), BenchError> {
        let Some(section) = SECTIONS.into_iter().find(|section| section == name.get_ref()) else {
            let fault = BenchFault::UnknownSection {
                section: name.get_ref().to_string(),
                suggestion: nearest(name.get_ref(), SECTIONS).map(|near| format!("[{near}]")),
                allowed: SECTIONS.map(|section| format!("[{section}]")).join(" "),
            };
            return Err(self.source.error(&name.span(), fault, None));
        };
        in_order(table).into_iter().try_for_each(|(key, value)| self.entry(section, key, value))
    }

    fn entry(&mut self, section: &'static str, name: &Name<'_>, value: &Value<'_>) -> Result<(), BenchError> {
        let Some(key) = keys::of_section(section).find(|key| key.name == name.get_ref()) else {
            return Err(self.unknown_key(section, name));
        };
        self.places.insert((section, key.name), value.span());
        match key.kind {
            Kind::Title => self.bench.title = Some(self.string(key, value, "a text in quotes")?.to_owned()),
            Kind::Word(words) => self.word(key, value, words)?(&mut self.bench),
            Kind::Peaks => self.bench.tank.peaks = Some(self.peaks(key, value)?),
            Kind::Band => self.bench.receiver.audio_band = Some(self.band(key, value)?),
            Kind::Quantity(dimension, allowed, slot) => {
                *slot(&mut self.bench) = Some(self.quantity(key, value, dimension, allowed)?);
            }
        }
        Ok(())
    }

    fn unknown_key(&self, section: &str, name: &Name<'_>) -> BenchError {
        let key = name.get_ref().as_ref();
        // At the top of the file sections are expected too.
        let own = || keys::of_section(section).map(|key| key.name);
        let elsewhere = keys::sections_with(key);
        let suggestion = if section.is_empty() && SECTIONS.contains(&key) {
            Some(format!("the section [{key}]"))
        } else if elsewhere.is_empty() {
            nearest(key, own()).map(|near| format!("`{near}`"))
        } else {
            let places: Vec<String> = elsewhere.iter().map(|section| format!("[{section}]")).collect();
            Some(format!("`{key}` of {}", places.join(" or ")))
        };
        let mut allowed = own().collect::<Vec<_>>().join(", ");
        let place = if section.is_empty() {
            allowed
                .push_str(&format!(" and the sections {}", SECTIONS.map(|section| format!("[{section}]")).join(" ")));
            "at the top of the file".to_owned()
        } else {
            format!("in [{section}]")
        };
        let fault = BenchFault::UnknownKey { key: key.to_owned(), place, suggestion, allowed };
        self.source.error(&name.span(), fault, None)
    }

    fn string<'v>(&self, key: &Key, value: &'v Value<'_>, needed: &'static str) -> Result<&'v str, BenchError> {
        value.get_ref().as_str().ok_or_else(|| {
            let fault = BenchFault::WrongType { key: full_name(key), given: type_name(value.get_ref()), needed };
            self.source.error(&value.span(), fault, help(key))
        })
    }

    fn word(&self, key: &Key, value: &Value<'_>, words: &'static [Word]) -> Result<fn(&mut Bench), BenchError> {
        let given = self.string(key, value, "a word in quotes")?.trim();
        let names = || words.iter().map(|(name, _)| *name);
        words.iter().find(|(name, _)| *name == given).map(|(_, store)| *store).ok_or_else(|| {
            let fault = BenchFault::Word {
                key: full_name(key),
                given: given.to_owned(),
                suggestion: nearest(given, names()).map(|near| format!("`{near}`")),
                allowed: listed(&names().collect::<Vec<_>>()),
            };
            self.source.error(&value.span(), fault, help(key))
        })
    }

    fn peaks(&self, key: &Key, value: &Value<'_>) -> Result<Vec<Quantity>, BenchError> {
        let needed = "a list of at least two voltages in quotes";
        let wrong = |given| BenchFault::WrongType { key: full_name(key), given, needed };
        let Some(items) = value.get_ref().as_array() else {
            return Err(self.source.error(&value.span(), wrong(type_name(value.get_ref())), help(key)));
        };
        if items.len() < 2 {
            return Err(self.source.error(&value.span(), wrong("a list of fewer than two"), help(key)));
        }
        items.iter().map(|item| self.quantity(key, item, Dimension::Voltage, Allowed::Positive)).collect()
    }

    fn band(&self, key: &Key, value: &Value<'_>) -> Result<(Quantity, Quantity), BenchError> {
        let text = self.string(key, value, "two frequencies in quotes with two dots between")?;
        let (low, high) = parse_range(text, Dimension::Frequency).map_err(|cause| {
            self.source.error(&value.span(), BenchFault::Quantity { key: full_name(key), cause }, help(key))
        })?;
        self.in_range(key, value, &low, Dimension::Frequency, Allowed::Positive)?;
        Ok((low, high))
    }

    fn quantity(
        &self,
        key: &Key,
        value: &Value<'_>,
        dimension: Dimension,
        allowed: Allowed,
    ) -> Result<Quantity, BenchError> {
        let fault = |cause| {
            let fault = BenchFault::Quantity { key: full_name(key), cause };
            self.source.error(&value.span(), fault, help(key))
        };
        let number = match value.get_ref() {
            DeValue::String(text) => {
                let quantity = parse_quantity(text, dimension).map_err(fault)?;
                self.in_range(key, value, &quantity, dimension, allowed)?;
                return Ok(quantity);
            }
            DeValue::Integer(number) if number.radix() == 10 => number.as_str().parse::<f64>(),
            DeValue::Float(number) => number.as_str().parse::<f64>(),
            other => {
                let given = type_name(other);
                let needed = if dimension == Dimension::Number { "a decimal number" } else { "a quantity in quotes" };
                let fault = BenchFault::WrongType { key: full_name(key), given, needed };
                return Err(self.source.error(&value.span(), fault, help(key)));
            }
        };
        let text = self.source.slice(&value.span()).to_owned();
        let quantity = match number {
            Ok(number) if !number.is_finite() => return Err(fault(QuantityError::NotFinite { text, dimension })),
            Ok(number) if matches!(dimension, Dimension::Number | Dimension::Ratio) => Quantity::exact(number),
            Ok(_) => return Err(fault(QuantityError::MissingUnit { text, dimension })),
            Err(_) => return Err(fault(QuantityError::NotANumber { text, dimension })),
        };
        self.in_range(key, value, &quantity, dimension, allowed)?;
        Ok(quantity)
    }

    fn in_range(
        &self,
        key: &Key,
        value: &Value<'_>,
        quantity: &Quantity,
        dimension: Dimension,
        allowed: Allowed,
    ) -> Result<(), BenchError> {
        if allowed.holds(quantity) {
            return Ok(());
        }
        let given = self.source.slice(&value.span()).trim_matches(['"', '\'']).to_owned();
        let fault = BenchFault::OutOfRange { key: full_name(key), given, allowed: allowed.words(quantity, dimension) };
        Err(self.source.error(&value.span(), fault, help(key)))
    }
}

fn full_name(key: &Key) -> String {
    if key.section.is_empty() { key.name.to_owned() } else { format!("{}.{}", key.section, key.name) }
}

/// `a, b or c`.
fn listed(words: &[&str]) -> String {
    match words {
        [first @ .., last] if !first.is_empty() => format!("{} or {last}", first.join(", ")),
        _ => words.concat(),
    }
}

fn help(key: &Key) -> Option<String> {
    Some(format!("{} = {}", key.name, key.example))
}

pub(super) fn type_name(value: &DeValue<'_>) -> &'static str {
    match value {
        DeValue::String(_) => "a text",
        DeValue::Integer(number) if number.radix() != 10 => "a number in hexadecimal, octal or binary digits",
        DeValue::Integer(_) | DeValue::Float(_) => "a number",
        DeValue::Boolean(_) => "true or false",
        DeValue::Datetime(_) => "a date",
        DeValue::Array(_) => "a list",
        DeValue::Table(_) => "a table",
    }
}
