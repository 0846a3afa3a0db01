//! What kind of quantity a text stands for, and the units in which it may be written.

/// Kind of quantity that a text is expected to hold.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Dimension {
    /// Voltage; SI value in V.
    Voltage,
    /// Current; A.
    Current,
    /// Resistance; Ω.
    Resistance,
    /// Capacitance; F.
    Capacitance,
    /// Inductance; H.
    Inductance,
    /// Time; s.
    Time,
    /// Frequency; Hz.
    Frequency,
    /// Temperature; K (text also in °C).
    Temperature,
    /// Pressure; Pa.
    Pressure,
    /// Length; m.
    Length,
    /// Fraction, written in percent; 1 % is 0.01.
    Fraction,
    /// Relative change with time, written in percent per second, minute or hour; 1/s.
    Drift,
    /// Amplitude ratio that needs its unit, dB or percent; −20 dB is 0.1.
    Level,
    /// Amplitude ratio, written bare, in dB or in percent.
    Ratio,
    /// Number without a unit.
    Number,
}

impl Dimension {
    /// The kind in words, with its article: "a voltage".
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Voltage => "a voltage",
            Self::Current => "a current",
            Self::Resistance => "a resistance",
            Self::Capacitance => "a capacitance",
            Self::Inductance => "an inductance",
            Self::Time => "a time",
            Self::Frequency => "a frequency",
            Self::Temperature => "a temperature",
            Self::Pressure => "a pressure",
            Self::Length => "a length",
            Self::Fraction => "a percentage",
            Self::Drift => "a drift",
            Self::Level => "a level",
            Self::Ratio => "an amplitude ratio",
            Self::Number => "a number without a unit",
        }
    }

    /// SI unit of the value; empty where there is none.
    #[must_use]
    pub fn symbol(self) -> &'static str {
        match self {
            Self::Voltage => "V",
            Self::Current => "A",
            Self::Resistance => "Ω",
            Self::Capacitance => "F",
            Self::Inductance => "H",
            Self::Time => "s",
            Self::Frequency => "Hz",
            Self::Temperature => "K",
            Self::Pressure => "Pa",
            Self::Length => "m",
            Self::Drift => "/s",
            Self::Fraction | Self::Level | Self::Ratio | Self::Number => "",
        }
    }

    /// Units in which it is usually written, the likeliest first.
    #[must_use]
    pub fn units(self) -> &'static [&'static str] {
        match self {
            Self::Voltage => &["kV", "V", "mV", "MV"],
            Self::Current => &["mA", "A", "µA", "nA", "uA"],
            Self::Resistance => &["MΩ", "kΩ", "Ω", "GΩ", "ohm", "Mohm", "kohm"],
            Self::Capacitance => &["nF", "pF", "µF", "uF", "F"],
            Self::Inductance => &["µH", "nH", "mH", "uH", "H"],
            Self::Time => &["ms", "s", "µs", "ns", "us"],
            Self::Frequency => &["Hz", "kHz", "MHz", "GHz", "mHz"],
            Self::Temperature => &["°C", "K", "degC", "C"],
            Self::Pressure => &["hPa", "kPa", "Pa", "mbar", "bar", "mmHg"],
            Self::Length => &["mm", "cm", "m", "µm", "in", "um"],
            Self::Fraction => &["%"],
            Self::Drift => &["%/min", "%/h", "%/s"],
            Self::Level => &["dB", "%"],
            Self::Ratio => &["dB", "%"],
            Self::Number => &[],
        }
    }

    /// A text that is right.
    #[must_use]
    pub fn example(self) -> &'static str {
        match self {
            Self::Voltage => "9.2 kV",
            Self::Current => "0.8 mA",
            Self::Resistance => "1.2 MΩ",
            Self::Capacitance => "6.8 nF",
            Self::Inductance => "1.1 µH",
            Self::Time => "8.2 ms",
            Self::Frequency => "100 Hz",
            Self::Temperature => "21 °C",
            Self::Pressure => "1002 hPa",
            Self::Length => "2.2 mm",
            Self::Fraction => "1.5 %",
            Self::Drift => "0.5 %/min",
            Self::Level => "-30 dB",
            Self::Ratio => "-3 dB",
            Self::Number => "12",
        }
    }
}
