//! Unit symbols: `kV`, `MΩ`, `ohm`, `µF`, `uF`, `°C`, `%`, `dB`.

use super::dimension::Dimension;

/// A unit as written.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Unit {
    /// SI value = number · `times` / `over`. Two numbers, because 6.8 / 10⁹ is nearer to 6.8e-9 than 6.8 · 10⁻⁹.
    Linear { dimension: Dimension, times: f64, over: f64 },
    /// Degrees Celsius.
    Celsius,
    /// Percent.
    Percent,
    /// Decibel of an amplitude: 20 dB is a factor of ten.
    Decibel,
    /// No unit at all.
    Bare,
}

/// Pascal per conventional millimetre of mercury (ISO 80000-4, conventional values).
const PASCAL_PER_MMHG: f64 = 133.322_387_415;
/// Metre per inch (exact by definition).
const METRE_PER_INCH: f64 = 0.0254;
/// 0 °C in kelvin (exact by definition).
pub(super) const ZERO_CELSIUS_K: f64 = 273.15;

const fn linear(dimension: Dimension, times: f64, over: f64) -> Unit {
    Unit::Linear { dimension, times, over }
}

/// Units that take a prefix.
const PREFIXED: [(&str, Dimension, f64); 10] = [
    ("V", Dimension::Voltage, 1.0),
    ("A", Dimension::Current, 1.0),
    ("Ω", Dimension::Resistance, 1.0),
    ("F", Dimension::Capacitance, 1.0),
    ("H", Dimension::Inductance, 1.0),
    ("s", Dimension::Time, 1.0),
    ("Hz", Dimension::Frequency, 1.0),
    ("Pa", Dimension::Pressure, 1.0),
    ("bar", Dimension::Pressure, 1e5),
    ("m", Dimension::Length, 1.0),
];

/// Units that stand alone.
const PLAIN: [(&str, Unit); 15] = [
    ("", Unit::Bare),
    ("%", Unit::Percent),
    ("%/s", linear(Dimension::Drift, 1.0, 100.0)),
    ("%/min", linear(Dimension::Drift, 1.0, 6000.0)),
    ("%/h", linear(Dimension::Drift, 1.0, 360_000.0)),
    ("dB", Unit::Decibel),
    ("°C", Unit::Celsius),
    ("℃", Unit::Celsius),
    ("degC", Unit::Celsius),
    ("C", Unit::Celsius),
    ("K", linear(Dimension::Temperature, 1.0, 1.0)),
    ("mmHg", linear(Dimension::Pressure, PASCAL_PER_MMHG, 1.0)),
    ("hPa", linear(Dimension::Pressure, 100.0, 1.0)),
    ("cm", linear(Dimension::Length, 1.0, 100.0)),
    ("in", linear(Dimension::Length, METRE_PER_INCH, 1.0)),
];

impl Unit {
    /// Reads a unit symbol; none if it is not known. Case matters (`mV` is not `MV`) except in `ohm`.
    pub(super) fn parse(text: &str) -> Option<Self> {
        let symbol = normalized(text);
        if let Some((_, unit)) = PLAIN.iter().find(|(name, _)| *name == symbol) {
            return Some(*unit);
        }
        PREFIXED.iter().find_map(|(name, dimension, base)| {
            let (times, over) = prefix_factor(symbol.strip_suffix(name)?)?;
            Some(Self::Linear { dimension: *dimension, times: base * times, over })
        })
    }

    /// True if a value of this dimension may carry the unit.
    pub(super) fn fits(self, dimension: Dimension) -> bool {
        match self {
            Self::Linear { dimension: own, .. } => own == dimension,
            Self::Celsius => dimension == Dimension::Temperature,
            Self::Percent => matches!(dimension, Dimension::Fraction | Dimension::Level | Dimension::Ratio),
            Self::Decibel => matches!(dimension, Dimension::Level | Dimension::Ratio),
            Self::Bare => matches!(dimension, Dimension::Number | Dimension::Ratio),
        }
    }

    /// What the unit measures, in words.
    pub(super) fn measures(self) -> &'static str {
        match self {
            Self::Linear { dimension, .. } => dimension.name(),
            Self::Celsius => Dimension::Temperature.name(),
            Self::Percent => Dimension::Fraction.name(),
            Self::Decibel => Dimension::Level.name(),
            Self::Bare => Dimension::Number.name(),
        }
    }

    /// The SI value of a number with this unit.
    pub(super) fn si(self, number: f64) -> f64 {
        match self {
            Self::Linear { times, over, .. } => number * times / over,
            Self::Celsius => number + ZERO_CELSIUS_K,
            Self::Percent => number / 100.0,
            Self::Decibel => 10f64.powf(number / 20.0),
            Self::Bare => number,
        }
    }
}

/// One spelling for the signs that have several: micro, ohm.
fn normalized(text: &str) -> String {
    let one_sign: String = text
        .chars()
        .map(|sign| match sign {
            '\u{3bc}' | '\u{b5}' => 'u',
            '\u{2126}' => 'Ω',
            other => other,
        })
        .collect();
    let small = one_sign.to_lowercase();
    for word in ["ohms", "ohm"] {
        if small.len() == one_sign.len() && small.ends_with(word) {
            return format!("{}Ω", &one_sign[..one_sign.len() - word.len()]);
        }
    }
    one_sign
}

/// Factor and divisor of a prefix.
fn prefix_factor(prefix: &str) -> Option<(f64, f64)> {
    Some(match prefix {
        "" => (1.0, 1.0),
        "p" => (1.0, 1e12),
        "n" => (1.0, 1e9),
        "u" => (1.0, 1e6),
        "m" => (1.0, 1e3),
        "k" => (1e3, 1.0),
        "M" => (1e6, 1.0),
        "G" => (1e9, 1.0),
        _ => return None,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_spelling_of_a_unit_gives_the_same_value() {
        let same: [(&[&str], f64); 6] = [
            (&["MΩ", "M\u{2126}", "Mohm", "Mohms", "MOhm"], 1e6),
            (&["µF", "\u{3bc}F", "uF"], 1e-6),
            (&["hPa", "mbar"], 100.0),
            (&["mm"], 1e-3),
            (&["cm"], 1e-2),
            (&["in"], 0.0254),
        ];
        for (spellings, si) in same {
            for spelling in spellings {
                assert_eq!(Unit::parse(spelling).expect(spelling).si(1.0), si, "{spelling}");
            }
        }
    }

    #[test]
    fn case_of_a_prefix_matters() {
        assert_eq!(Unit::parse("mV").unwrap().si(1.0), 1e-3);
        assert_eq!(Unit::parse("MV").unwrap().si(1.0), 1e6);
        assert_eq!(Unit::parse("KV"), None);
        assert_eq!(Unit::parse("hz"), None);
    }

    #[test]
    fn an_inch_and_a_percent_take_no_prefix() {
        for symbol in ["min", "k%", "m°C", "kdB", "°F"] {
            assert_eq!(Unit::parse(symbol), None, "{symbol}");
        }
    }
}
