//! Faults of the TOML itself, in words for people who do not know TOML.

use super::error::{BenchError, BenchFault, Source};

/// Turns the error of the TOML reader into ours.
pub(super) fn error(source: &Source<'_>, error: &toml::de::Error) -> BenchError {
    let span = error.span().unwrap_or(0..0);
    let line = source.line_text(span.start);
    let help = unquoted(line);
    let message = plain_words(error.message());
    let message = match help {
        Some(_) => format!("a quantity stands in quotes ({message})"),
        None => message,
    };
    source.error(&span, BenchFault::Syntax { message }, help)
}

/// The reader's words, with the commonest ones in ours.
fn plain_words(message: &str) -> String {
    match message {
        "duplicate key" => "this name is given twice; keep one".to_owned(),
        "invalid basic string, expected `\"`" => "the text in quotes is not closed".to_owned(),
        other => other.replace('\n', "; "),
    }
}

/// `voltage = 9.2 kV` with the quotes that it lacks; none if that is not the fault.
fn unquoted(line: &str) -> Option<String> {
    let (key, value) = line.split_once('=')?;
    let value = value.split('#').next().unwrap_or(value).trim();
    let begins_a_number = value.starts_with(|sign: char| sign.is_ascii_digit() || "+-.\u{2212}".contains(sign));
    if value.contains(['"', '\'']) || !begins_a_number {
        return None;
    }
    Some(format!("{} = \"{value}\"", key.trim()))
}
