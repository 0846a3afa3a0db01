//! Changing values in the text of a bench file without touching the rest: comments, order and spacing stay.

use super::error::BenchError;
use super::read::parse;
use toml_edit::{DocumentMut, Item, Value, table};

/// One change.
#[derive(Debug, Clone, PartialEq)]
pub struct Amendment {
    /// Section of the key, such as `charging`.
    pub section: &'static str,
    /// The key in it.
    pub key: &'static str,
    /// The new value, as it stands in a bench file without its quotes.
    pub text: String,
    /// Keys of the section that contradict the new one; they stay as comments.
    pub replaces: &'static [&'static str],
}

/// The text of a bench file with the changes made; `name` names the file in messages. An empty text gives a new file.
///
/// # Errors
/// If the text is no right bench, or would be none afterwards.
pub fn amended(text: &str, name: &str, amendments: &[Amendment]) -> Result<String, BenchError> {
    parse(text, name)?;
    let mut document = text.parse::<DocumentMut>().unwrap_or_default();
    for amendment in amendments {
        apply(&mut document, amendment);
    }
    let text = document.to_string();
    parse(&text, name)?;
    Ok(text)
}

fn apply(document: &mut DocumentMut, amendment: &Amendment) {
    let Some(section) = document.entry(amendment.section).or_insert_with(table).as_table_like_mut() else { return };
    let mut before = String::new();
    for &key in amendment.replaces {
        let prefix =
            section.key(key).and_then(|key| key.leaf_decor().prefix()?.as_str().map(str::to_owned)).unwrap_or_default();
        if let Some(old) = section.remove(key) {
            // What stood there is worth keeping: it is the value on the part.
            before.push_str(&format!("{prefix}# {key} = {} (before the calibration)\n", old.to_string().trim()));
        }
    }
    let mut value = Value::from(amendment.text.as_str());
    // A value that is there is changed in its place: inserting would drop the comments above its key.
    match section.get_mut(amendment.key).and_then(Item::as_value_mut) {
        Some(old) => {
            *value.decor_mut() = old.decor().clone();
            *old = value;
        }
        None => {
            section.insert(amendment.key, Item::Value(value));
        }
    }
    if !before.is_empty()
        && let Some(mut key) = section.key_mut(amendment.key)
    {
        key.leaf_decor_mut().set_prefix(before);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const BENCH: &str = "# My bench.\ntitle = \"Invented\"\n\n[supply]\nvoltage = \"9.2 kV ± 1 %\"  # the old meter\n\n\
                         [charging]\n# five in series\nresistance = \"1.2 MΩ ± 1 %\"  # brown\ncapacitance = \"6.8 nF\"\n\n\
                         [gap]\nvoltage = \"7 kV\"  # a guess\n";

    fn time_constant() -> Amendment {
        Amendment {
            section: "charging",
            key: "time_constant",
            text: "8.25 ms (u 0.4 %)".to_owned(),
            replaces: &["resistance", "current"],
        }
    }

    #[test]
    fn comments_stay_and_the_value_replaced_becomes_one() {
        let gap = Amendment { section: "gap", key: "voltage", text: "7.1 kV (u 20 V)".to_owned(), replaces: &[] };
        let text = amended(BENCH, "bench.toml", &[time_constant(), gap]).unwrap();
        for line in ["# My bench.", "# the old meter", "# five in series", "# brown", "# a guess"] {
            assert!(text.contains(line), "{line} is lost in\n{text}");
        }
        let bench = parse(&text, "bench.toml").unwrap();
        assert_eq!(bench.charging.time_constant.unwrap().value, 8.25e-3);
        assert!(bench.charging.resistance.is_none() && bench.charging.capacitance.is_some());
        assert!((bench.gap.voltage.unwrap().u() - 20.0).abs() < 1e-9);
        assert_eq!(bench.supply.voltage.unwrap().value, 9200.0);
        // Once more: the value changes in its place.
        let again = Amendment { text: "8.3 ms".to_owned(), ..time_constant() };
        let twice = amended(&text, "bench.toml", &[again]).unwrap();
        assert_eq!(twice.lines().count(), text.lines().count());
    }

    #[test]
    fn an_empty_text_gives_a_new_file_and_a_wrong_one_its_error() {
        let text = amended("", "new.toml", &[time_constant()]).unwrap();
        assert_eq!(text, "[charging]\ntime_constant = \"8.25 ms (u 0.4 %)\"\n");
        assert!(amended("[charging\n", "wrong.toml", &[time_constant()]).is_err());
    }

    #[test]
    fn dotted_keys_are_changed_too() {
        let text =
            amended("charging.resistance = \"1 MΩ\"\ncharging.capacitance = \"1 nF\"\n", "b", &[time_constant()]);
        let bench = parse(&text.unwrap(), "b").unwrap();
        assert!(bench.charging.time_constant.is_some() && bench.charging.resistance.is_none());
    }
}
