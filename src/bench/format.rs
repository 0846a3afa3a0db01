//! Quantities as text: for people with prefix and few digits, and without loss for files.

use super::dimension::Dimension;
use super::quantity::{Quantity, Tolerance};

const PREFIXES: [(&str, i32); 8] = [("G", 9), ("M", 6), ("k", 3), ("", 0), ("m", -3), ("µ", -6), ("n", -9), ("p", -12)];

/// An SI value with prefix and unit to `digits` significant digits: `si(9200.0, "V", 2)` is `9.2 kV`.
///
/// A unit that takes no prefix (`/s`, `%`, `°C`, none) gets none. Values beyond the prefixes are written with a power
/// of ten; a value that is not finite is written as such.
#[must_use]
pub fn si(value: f64, unit: &str, digits: usize) -> String {
    if !value.is_finite() {
        return joined(&format!("{value}"), unit, "");
    }
    let digits = digits.clamp(1, 17);
    // Rounding first: 999.96 to three digits is 1.00 k, not 1000.
    let rounded: f64 = format!("{value:.*e}", digits - 1).parse().unwrap_or(value);
    match prefix_for(rounded, unit) {
        Some((prefix, exponent)) => joined(&significant(value, exponent, digits), unit, prefix),
        None => joined(&format!("{value:.*e}", digits - 1), unit, ""),
    }
}

/// A value with its standard uncertainty, both to two significant digits of the uncertainty: `437.21 ± 0.19 /s`,
/// `7.10 ± 0.05 kV` (a second digit that is zero is left out from 5 on, where that costs the value less than u/10). An
/// exact value is shown to six digits at most.
#[must_use]
pub fn with_uncertainty(value: f64, u: f64, unit: &str) -> String {
    let u = u.abs();
    if !value.is_finite() || !u.is_finite() || u == 0.0 {
        return without_trailing_zeros(&si(value, unit, 6));
    }
    let Some((prefix, exponent)) = prefix_for(value.abs().max(u), unit) else {
        return joined(&format!("({value:.6e} ± {u:.1e})"), unit, "");
    };
    let u_text = format!("{u:.1e}");
    let (mantissa, power) = u_text.split_once('e').unwrap_or((&u_text, "0"));
    let one_digit_tells = mantissa.ends_with('0') && mantissa >= "5";
    let last_place = power.parse::<i32>().unwrap_or(0) - i32::from(!one_digit_tells);
    let value_text = to_place(value, last_place, exponent);
    joined(&format!("{value_text} ± {}", to_place(u, last_place, exponent)), unit, prefix)
}

/// A number with its sign and so many decimals; what rounds to zero is `+0.00`, never `-0.00`.
#[must_use]
pub fn signed(value: f64, decimals: usize) -> String {
    let text = format!("{value:+.decimals$}");
    let is_zero = value.is_finite() && !text.contains(|digit: char| ('1'..='9').contains(&digit));
    if is_zero { text.replacen('-', "+", 1) } else { text }
}

/// The quantity as text that [`super::parse_quantity`] reads back without loss (up to the last bit).
#[must_use]
pub fn quantity_text(quantity: &Quantity, dimension: Dimension) -> String {
    let (unit, factor) = match dimension {
        Dimension::Fraction | Dimension::Level | Dimension::Ratio => ("%", 100.0),
        Dimension::Drift => ("%/s", 100.0),
        other => (other.symbol(), 1.0),
    };
    let amount = |si: f64| joined(&plain_or_power(si * factor), unit, "");
    let value = amount(quantity.value);
    match quantity.tolerance {
        Tolerance::Exact => value,
        Tolerance::Limit(half_width) => format!("{value} ± {}", amount(half_width)),
        Tolerance::Standard(u) => format!("{value} (u {})", amount(u)),
    }
}

/// Shortest text of a double, with a power of ten where that is easier to read.
fn plain_or_power(value: f64) -> String {
    let size = value.abs();
    if size == 0.0 || (1e-3..1e6).contains(&size) { format!("{value}") } else { format!("{value:e}") }
}

fn joined(number: &str, unit: &str, prefix: &str) -> String {
    if unit.is_empty() { number.to_owned() } else { format!("{number} {prefix}{unit}") }
}

/// `7.10000 kV` as `7.1 kV`.
fn without_trailing_zeros(text: &str) -> String {
    let (number, unit) = text.split_once(' ').map_or((text, ""), |(number, unit)| (number, unit));
    if !number.contains('.') || number.contains('e') {
        return text.to_owned();
    }
    joined(number.trim_end_matches('0').trim_end_matches('.'), unit, "")
}

/// The prefix for a value; none if it lies beyond them all.
fn prefix_for(value: f64, unit: &str) -> Option<(&'static str, i32)> {
    const PREFIXED: [&str; 14] = ["V", "A", "Ω", "F", "H", "s", "Hz", "J", "W", "C", "m", "V/s", "A/s", "W/s"];
    if !PREFIXED.contains(&unit) || value == 0.0 {
        return Some(("", 0));
    }
    let power = decimal_power(value);
    if !(-12..12).contains(&power) {
        return None;
    }
    PREFIXES.into_iter().find(|(_, exponent)| power >= *exponent)
}

/// Power of ten of the first digit.
fn decimal_power(value: f64) -> i32 {
    // The text is exact where a logarithm may be off by one at powers of ten.
    format!("{value:e}").split_once('e').and_then(|(_, power)| power.parse().ok()).unwrap_or(0)
}

/// The value in units of 10^exponent, to that many significant digits.
fn significant(value: f64, exponent: i32, digits: usize) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    let rounded: f64 = format!("{value:.*e}", digits - 1).parse().unwrap_or(value);
    let last_place = decimal_power(rounded) + 1 - i32::try_from(digits).unwrap_or(17);
    to_place(value, last_place, exponent)
}

/// The value rounded to 10^last_place and written in units of 10^exponent.
fn to_place(value: f64, last_place: i32, exponent: i32) -> String {
    let decimals = exponent - last_place;
    let scaled = if exponent < 0 { value * 10f64.powi(-exponent) } else { value / 10f64.powi(exponent) };
    let Ok(decimals) = usize::try_from(decimals) else {
        let step = 10f64.powi(-decimals);
        return format!("{:.0}", (scaled / step).round() * step);
    };
    format!("{scaled:.decimals$}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_value_gets_the_prefix_that_leaves_one_to_three_digits_before_the_point() {
        assert_eq!(si(9200.0, "V", 2), "9.2 kV");
        assert_eq!(si(6.8e-9, "F", 2), "6.8 nF");
        assert_eq!(si(0.054, "J", 2), "54 mJ");
        assert_eq!(si(-150.0, "V", 3), "-150 V");
        assert_eq!(si(437.21, "/s", 4), "437.2 /s");
        assert_eq!(si(43721.0, "/s", 4), "43720 /s");
        assert_eq!(si(1.2e6, "Ω", 3), "1.20 MΩ");
        assert_eq!(si(0.0, "V", 3), "0 V");
    }

    #[test]
    fn rounding_up_to_a_thousand_changes_the_prefix() {
        assert_eq!(si(999.96, "V", 3), "1.00 kV");
        assert_eq!(si(999.96, "V", 5), "999.96 V");
        assert_eq!(si(9.9996e-4, "s", 3), "1.00 ms");
    }

    #[test]
    fn a_value_beyond_the_prefixes_gets_a_power_of_ten() {
        assert_eq!(si(1.5e-15, "F", 2), "1.5e-15 F");
        assert_eq!(si(2e12, "Ω", 1), "2e12 Ω");
        assert_eq!(si(f64::INFINITY, "V", 3), "inf V");
    }

    #[test]
    fn an_uncertainty_has_at_most_two_digits_and_the_value_ends_at_the_same_place() {
        assert_eq!(with_uncertainty(437.2134, 0.1934, "/s"), "437.21 ± 0.19 /s");
        assert_eq!(with_uncertainty(7102.0, 50.1, "V"), "7.10 ± 0.05 kV");
        assert_eq!(with_uncertainty(7102.0, 52.0, "V"), "7.102 ± 0.052 kV");
        assert_eq!(with_uncertainty(2612.0, 131.0, "/s"), "2610 ± 130 /s");
        assert_eq!(with_uncertainty(437.0, 0.0996, "/s"), "437.00 ± 0.10 /s");
        assert_eq!(with_uncertainty(9.81e-3, 1.0e-6, "s"), "9.8100 ± 0.0010 ms");
        assert_eq!(with_uncertainty(1.0, 50.0, "V"), "0 ± 50 V");
    }

    #[test]
    fn what_rounds_to_zero_has_no_minus() {
        assert_eq!([signed(-0.004, 2), signed(-0.0, 1), signed(0.0, 0)], ["+0.00", "+0.0", "+0"]);
        assert_eq!([signed(-0.006, 2), signed(12.0, 1)], ["-0.01", "+12.0"]);
        assert_eq!(signed(f64::NEG_INFINITY, 1), "-inf");
    }

    #[test]
    fn an_exact_value_is_shown_without_an_uncertainty() {
        assert_eq!(with_uncertainty(7100.0, 0.0, "V"), "7.1 kV");
    }
}
