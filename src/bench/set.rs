//! Setting one key of a bench from text, for scales and changes that a series lays over a bench file.

use super::Bench;
use super::dimension::Dimension;
use super::error::BenchFault;
use super::keys::{self, Key, Kind, SECTIONS};
use super::quantity::Quantity;
use super::suggest::nearest;
use super::text::{parse_quantity, parse_range};

/// Finds the key of a path such as `gap.spread`.
fn find(path: &str) -> Result<&'static Key, BenchFault> {
    let (section, name) = path.split_once('.').unwrap_or(("", path));
    let found = (!section.is_empty()).then(|| keys::of_section(section).find(|key| key.name == name)).flatten();
    found.ok_or_else(|| {
        let all: Vec<String> =
            SECTIONS.iter().flat_map(|s| keys::of_section(s).map(move |key| format!("{s}.{}", key.name))).collect();
        BenchFault::UnknownKey {
            key: path.to_owned(),
            place: "of a bench".to_owned(),
            suggestion: nearest(path, all.iter().map(String::as_str)).map(|near| format!("`{near}`")),
            allowed: "section and key of a bench file with a dot between, such as supply.voltage".to_owned(),
        }
    })
}

fn quantity_kind(path: &str, key: &Key) -> Result<(Dimension, keys::Allowed, keys::Slot), BenchFault> {
    match key.kind {
        Kind::Quantity(dimension, allowed, slot) => Ok((dimension, allowed, slot)),
        _ => Err(BenchFault::WrongType {
            key: path.to_owned(),
            given: "no quantity",
            needed: "a key that holds one number, such as supply.voltage",
        }),
    }
}

/// A right value of a key, as it stands in a bench file; none for a key that does not exist.
#[must_use]
pub fn example_of(path: &str) -> Option<&'static str> {
    find(path).ok().map(|key| key.example)
}

/// What a key measures.
///
/// # Errors
/// If there is no such key or it holds no single quantity.
pub fn dimension_of(path: &str) -> Result<Dimension, BenchFault> {
    Ok(quantity_kind(path, find(path)?)?.0)
}

/// Sets the key of a path such as `gap.spread` from the text that would stand in a bench file, without its quotes.
///
/// # Errors
/// If there is no such key, or the text is not a value that it takes.
pub fn set(bench: &mut Bench, path: &str, text: &str) -> Result<(), BenchFault> {
    let key = find(path)?;
    let faulty = |cause| BenchFault::Quantity { key: path.to_owned(), cause };
    match key.kind {
        Kind::Word(words) => {
            let names = || words.iter().map(|(name, _)| *name);
            let (_, store) = words.iter().find(|(name, _)| *name == text.trim()).ok_or_else(|| BenchFault::Word {
                key: path.to_owned(),
                given: text.to_owned(),
                suggestion: nearest(text, names()).map(|near| format!("`{near}`")),
                allowed: names().collect::<Vec<_>>().join(", "),
            })?;
            store(bench);
        }
        Kind::Band => {
            bench.receiver.audio_band = Some(parse_range(text, Dimension::Frequency).map_err(faulty)?);
        }
        Kind::Quantity(dimension, ..) => {
            let quantity = parse_quantity(text, dimension).map_err(faulty)?;
            set_quantity(bench, path, quantity)?;
        }
        Kind::Title | Kind::Peaks => {
            quantity_kind(path, key)?;
        }
    }
    Ok(())
}

/// Sets the key of a path to a quantity.
///
/// # Errors
/// If there is no such key, it holds no single quantity, or the value makes no sense.
pub fn set_quantity(bench: &mut Bench, path: &str, quantity: Quantity) -> Result<(), BenchFault> {
    let (dimension, allowed, slot) = quantity_kind(path, find(path)?)?;
    if !allowed.holds(&quantity) {
        return Err(BenchFault::OutOfRange {
            key: path.to_owned(),
            given: super::quantity_text(&quantity, dimension),
            allowed: allowed.words(&quantity, dimension),
        });
    }
    *slot(bench) = Some(quantity);
    Ok(())
}
