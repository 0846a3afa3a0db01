//! The text of a quantity: `9.2 kV ± 1 %`, `8.2 ms (u 0.4 %)`, `21 °C`, `-30 dB`, and ranges `6kV..12kV`.
//!
//! A tolerance in the unit of the value is absolute; one in percent is relative to the value, except behind a
//! value that is itself in percent (`45 % ± 3 %` is 42 % to 48 %, as instruments for humidity state it).
//! A tolerance in dB behind a level becomes an amount of the ratio by the derivative, d(ratio) = ratio · ln 10/20 · dB.

use super::dimension::Dimension;
use super::quantity::{Quantity, Tolerance};
use super::suggest::nearest;
use super::unit::Unit;
use thiserror::Error;

/// Why a text is not the quantity that is expected; each message says what would be right.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum QuantityError {
    /// Nothing there.
    #[error("is empty; {}", right(*.0))]
    Empty(Dimension),
    /// No number at the beginning.
    #[error("`{text}` does not begin with a number; {}", right(*.dimension))]
    NotANumber {
        /// The text as given.
        text: String,
        /// What is expected.
        dimension: Dimension,
    },
    /// A decimal comma.
    #[error("`{text}` has a comma; a decimal point is needed: write `{better}`")]
    DecimalComma {
        /// The text as given.
        text: String,
        /// The same with a point.
        better: String,
    },
    /// Digits in groups.
    #[error("`{text}` has a gap between digits; write the number without one, or use a prefix such as k or M")]
    SplitNumber {
        /// The text as given.
        text: String,
    },
    /// Infinite, not a number, or too large.
    #[error("`{text}` is not a finite number; {}", right(*.dimension))]
    NotFinite {
        /// The text as given.
        text: String,
        /// What is expected.
        dimension: Dimension,
    },
    /// No unit behind the number.
    #[error("`{text}` has no unit; {}", right(*.dimension))]
    MissingUnit {
        /// The text as given.
        text: String,
        /// What is expected.
        dimension: Dimension,
    },
    /// A unit that is not known.
    #[error("unknown unit `{unit}`{}; {} is written {}", meant(.suggestion), .dimension.name(), units(*.dimension))]
    UnknownUnit {
        /// The unit as given.
        unit: String,
        /// The nearest unit of the expected kind.
        suggestion: Option<String>,
        /// What is expected.
        dimension: Dimension,
    },
    /// A unit of another kind.
    #[error("`{text}` is {measures}, but {} is needed, for example \"{}\"", .dimension.name(), .dimension.example())]
    WrongDimension {
        /// The text as given.
        text: String,
        /// What its unit measures.
        measures: &'static str,
        /// What is expected.
        dimension: Dimension,
    },
    /// The tolerance is not readable.
    #[error("the tolerance `{text}` is not readable ({why}); {RIGHT_TOLERANCE}")]
    BadTolerance {
        /// The tolerance as given.
        text: String,
        /// What is wrong with it.
        why: String,
    },
    /// Not two quantities with `..` between.
    #[error("`{text}` is not a range; two dots stand between its ends, for example \"{}\"", range_example(*.dimension))]
    NotARange {
        /// The text as given.
        text: String,
        /// What both ends are expected to be.
        dimension: Dimension,
    },
    /// The low end is not below the high end.
    #[error("`{text}` runs from high to low; the smaller value comes first")]
    ReversedRange {
        /// The text as given.
        text: String,
    },
}

const RIGHT_TOLERANCE: &str = "write \"± 1 %\" for a limit or \"(u 0.3 %)\" for a standard uncertainty";

/// A right text in words.
fn right(dimension: Dimension) -> String {
    format!("write {}, for example \"{}\"", dimension.name(), dimension.example())
}

fn meant(suggestion: &Option<String>) -> String {
    suggestion.as_ref().map_or_else(String::new, |unit| format!(" (did you mean `{unit}`?)"))
}

fn range_example(dimension: Dimension) -> String {
    let unit = dimension.units().first().copied().unwrap_or("");
    format!("6 {unit} .. 12 {unit}")
}

fn units(dimension: Dimension) -> String {
    match dimension.units() {
        [] => "without a unit".to_owned(),
        units => format!("in {}", units.join(", ")),
    }
}

/// Reads one quantity of the given dimension: number, unit and an optional tolerance.
///
/// # Errors
/// [`QuantityError`], which says what would be right.
pub fn parse_quantity(text: &str, dimension: Dimension) -> Result<Quantity, QuantityError> {
    let (body, tolerance) = split_tolerance(text);
    let (number, unit) = parse_value(body, dimension)?;
    let value = unit.si(number);
    if !value.is_finite() {
        return Err(QuantityError::NotFinite { text: body.trim().to_owned(), dimension });
    }
    let tolerance = match tolerance {
        None => Tolerance::Exact,
        Some(written) => parse_tolerance(&written, value, unit, dimension)?,
    };
    Ok(Quantity { value, tolerance })
}

/// Reads a range such as `6kV..12kV` or `120 .. 3400 Hz` (the first value may leave its unit to the second).
///
/// # Errors
/// [`QuantityError`]; also if the first value is not below the second.
pub fn parse_range(text: &str, dimension: Dimension) -> Result<(Quantity, Quantity), QuantityError> {
    let not_a_range = || QuantityError::NotARange { text: text.trim().to_owned(), dimension };
    let (first, second) = text.split_once("..").ok_or_else(not_a_range)?;
    // A third dot would silently become the point of ".5".
    if second.starts_with('.') || second.contains("..") || first.trim().is_empty() || second.trim().is_empty() {
        return Err(not_a_range());
    }
    let high = parse_quantity(second, dimension)?;
    let low = match parse_quantity(first, dimension) {
        Err(QuantityError::MissingUnit { .. }) => {
            let (_, unit) = split_number(split_tolerance(second).0, dimension)?;
            parse_quantity(&format!("{first} {unit}"), dimension)?
        }
        other => other?,
    };
    if low.value < high.value {
        Ok((low, high))
    } else {
        Err(QuantityError::ReversedRange { text: text.trim().to_owned() })
    }
}

/// A tolerance as written: its text, whether it is a standard uncertainty, and a fault of its brackets.
struct Written<'a> {
    amount: &'a str,
    standard: bool,
    fault: Option<&'static str>,
}

fn split_tolerance(text: &str) -> (&str, Option<Written<'_>>) {
    for sign in ["±", "+/-", "+-", "+/−"] {
        if let Some((body, amount)) = text.split_once(sign) {
            let fault = amount.contains(['(', '±']).then_some("only one tolerance may stand behind a value");
            return (body, Some(Written { amount, standard: false, fault }));
        }
    }
    let Some((body, inside)) = text.split_once('(') else { return (text, None) };
    let Some((amount, after)) = inside.split_once(')') else {
        return (body, Some(Written { amount: inside, standard: true, fault: Some("the bracket is not closed") }));
    };
    let named = amount.trim_start().strip_prefix('u').map(|rest| rest.trim_start().trim_start_matches('='));
    let fault = if !after.trim().is_empty() {
        Some("nothing may follow the bracket")
    } else if named.is_none() {
        Some("the bracket must begin with u")
    } else {
        None
    };
    (body, Some(Written { amount: named.unwrap_or(amount), standard: true, fault }))
}

/// Number and unit of a text without tolerance; the unit fits the dimension.
fn parse_value(text: &str, dimension: Dimension) -> Result<(f64, Unit), QuantityError> {
    let (number, symbol) = split_number(text, dimension)?;
    let unit = Unit::parse(symbol).ok_or_else(|| QuantityError::UnknownUnit {
        unit: symbol.to_owned(),
        suggestion: nearest_unit(symbol, dimension),
        dimension,
    })?;
    if unit.fits(dimension) {
        Ok((number, unit))
    } else if unit == Unit::Bare {
        Err(QuantityError::MissingUnit { text: text.trim().to_owned(), dimension })
    } else {
        Err(QuantityError::WrongDimension { text: text.trim().to_owned(), measures: unit.measures(), dimension })
    }
}

fn nearest_unit(symbol: &str, dimension: Dimension) -> Option<String> {
    let candidates = dimension.units().iter().copied();
    let same_letters = candidates.clone().find(|unit| unit.eq_ignore_ascii_case(symbol));
    same_letters.or_else(|| nearest(symbol, candidates)).map(str::to_owned)
}

/// Splits `6.8e-9 F` into the number and the text behind it.
fn split_number(text: &str, dimension: Dimension) -> Result<(f64, &str), QuantityError> {
    let text = text.trim();
    if text.is_empty() {
        return Err(QuantityError::Empty(dimension));
    }
    let end = number_length(text);
    let digits = text[..end].replace('\u{2212}', "-");
    let number: f64 = digits.parse().map_err(|_| no_number(text, dimension))?;
    if !number.is_finite() {
        return Err(QuantityError::NotFinite { text: text.to_owned(), dimension });
    }
    let rest = &text[end..];
    if let Some(after) = rest.strip_prefix(',')
        && after.starts_with(|sign: char| sign.is_ascii_digit())
    {
        return Err(QuantityError::DecimalComma { text: text.to_owned(), better: text.replacen(',', ".", 1) });
    }
    let symbol = rest.trim_start();
    if symbol.starts_with(|sign: char| sign.is_ascii_digit() || sign == '_') {
        return Err(QuantityError::SplitNumber { text: text.to_owned() });
    }
    Ok((number, symbol))
}

fn no_number(text: &str, dimension: Dimension) -> QuantityError {
    let word = text.trim_start_matches(['+', '-', '\u{2212}']).to_lowercase();
    let text = text.to_owned();
    if word.starts_with("inf") || word.starts_with("nan") || word.starts_with('∞') {
        QuantityError::NotFinite { text, dimension }
    } else {
        QuantityError::NotANumber { text, dimension }
    }
}

/// Length in bytes of the number at the beginning: sign, digits, point, digits, exponent.
fn number_length(text: &str) -> usize {
    let sign = |at: usize| match text[at..].chars().next() {
        Some(found @ ('+' | '-' | '\u{2212}')) => found.len_utf8(),
        _ => 0,
    };
    let digits = |at: usize| text[at..].bytes().take_while(u8::is_ascii_digit).count();
    let mut end = sign(0);
    end += digits(end);
    if text[end..].starts_with('.') {
        end += 1 + digits(end + 1);
    }
    if text[end..].starts_with(['e', 'E']) {
        let exponent = end + 1 + sign(end + 1);
        let count = digits(exponent);
        if count > 0 {
            end = exponent + count;
        }
    }
    end
}

fn parse_tolerance(
    written: &Written<'_>,
    value: f64,
    value_unit: Unit,
    dimension: Dimension,
) -> Result<Tolerance, QuantityError> {
    let bad = |why: String| QuantityError::BadTolerance { text: written.amount.trim().to_owned(), why };
    if let Some(fault) = written.fault {
        return Err(bad(fault.to_owned()));
    }
    let (number, symbol) = split_number(written.amount, dimension).map_err(|error| bad(error.to_string()))?;
    let unit = Unit::parse(symbol).ok_or_else(|| bad(format!("unknown unit `{symbol}`")))?;
    if number < 0.0 {
        return Err(bad("it is negative".to_owned()));
    }
    let amount = tolerance_si(number, unit, value, value_unit, dimension).map_err(|why| bad(why.to_owned()))?;
    if !amount.is_finite() {
        return Err(bad("it is not finite".to_owned()));
    }
    Ok(if written.standard { Tolerance::Standard(amount) } else { Tolerance::Limit(amount) })
}

/// The absolute amount in SI of a tolerance.
fn tolerance_si(
    number: f64,
    unit: Unit,
    value: f64,
    value_unit: Unit,
    dimension: Dimension,
) -> Result<f64, &'static str> {
    match (unit, value_unit) {
        (Unit::Percent, Unit::Celsius) => Err("a percentage of a Celsius temperature has no meaning"),
        (Unit::Percent, Unit::Decibel) => Err("behind a level in dB it must be in dB"),
        (Unit::Percent, Unit::Percent) => Ok(number / 100.0),
        (Unit::Percent, _) => Ok(value.abs() * number / 100.0),
        (Unit::Decibel, Unit::Decibel) => Ok(value * std::f64::consts::LN_10 / 20.0 * number),
        (Unit::Decibel, _) => Err("dB are for a value in dB"),
        (Unit::Bare, Unit::Bare) | (Unit::Celsius, Unit::Celsius | Unit::Linear { .. }) if unit.fits(dimension) => {
            Ok(number)
        }
        (Unit::Bare, _) => Err("it has no unit"),
        (Unit::Linear { .. }, _) if unit.fits(dimension) => Ok(unit.si(number)),
        _ => Err("its unit is of another kind than that of the value"),
    }
}

#[cfg(test)]
mod tests;
