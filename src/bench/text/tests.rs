//! Texts of quantities, right and wrong.

use super::*;

fn value(text: &str, dimension: Dimension) -> f64 {
    parse_quantity(text, dimension).unwrap_or_else(|error| panic!("{text}: {error}")).value
}

fn message(text: &str, dimension: Dimension) -> String {
    parse_quantity(text, dimension).expect_err(text).to_string()
}

#[test]
fn numbers_are_read_in_every_allowed_spelling() {
    let volts = [
        ("9.2 kV", 9200.0),
        ("9.2kV", 9200.0),
        ("  +9.2e0\u{a0}kV ", 9200.0),
        ("-36 V", -36.0),
        ("\u{2212}36 V", -36.0),
        ("6.8e\u{2212}3 V", 6.8e-3),
        ("6.8E3V", 6800.0),
        (".5 V", 0.5),
        ("5. V", 5.0),
        ("0 V", 0.0),
    ];
    for (text, expected) in volts {
        assert_eq!(value(text, Dimension::Voltage), expected, "{text}");
    }
    assert_eq!(value("6.8 nF", Dimension::Capacitance), 6.8e-9);
    assert_eq!(value("6.8e-9 F", Dimension::Capacitance), 6.8e-9);
}

#[test]
fn units_are_converted_to_si() {
    // Exact by definition: 0 °C = 273.15 K, 1 in = 25.4 mm. 760 mmHg = 101 325 Pa to the digits of the conventional
    // mmHg.
    const MMHG_ROUNDING_PA: f64 = 0.02;
    assert_eq!(value("21 °C", Dimension::Temperature), 294.15);
    assert_eq!(value("-40 degC", Dimension::Temperature), 273.15 - 40.0);
    assert_eq!(value("294.15 K", Dimension::Temperature), 294.15);
    assert_eq!(value("1 in", Dimension::Length), 0.0254);
    assert_eq!(value("1.01325 bar", Dimension::Pressure), 101_325.0);
    assert!((value("760 mmHg", Dimension::Pressure) - 101_325.0).abs() < MMHG_ROUNDING_PA);
    assert_eq!(value("45 %", Dimension::Fraction), 0.45);
    assert_eq!(value("-20 dB", Dimension::Level), 0.1);
    assert_eq!(value("-20 dB", Dimension::Ratio), 0.1);
    assert_eq!(value("1.5", Dimension::Ratio), 1.5);
    assert_eq!(value("30 %", Dimension::Level), 0.3);
}

#[test]
fn tolerances_are_absolute_amounts_in_si() {
    let read = |text, dimension| parse_quantity(text, dimension).unwrap().tolerance;
    for text in ["9.2 kV ± 1 %", "9.2 kV +/- 1 %", "9.2kV±1%", "9.2 kV ± 0.092 kV", "9.2 kV ± 92 V"] {
        let Tolerance::Limit(half_width) = read(text, Dimension::Voltage) else { panic!("{text} is a limit") };
        assert!((half_width - 92.0).abs() < 1e-10, "{text}");
    }
    assert_eq!(read("150 V (u 5 V)", Dimension::Voltage), Tolerance::Standard(5.0));
    assert_eq!(read("-200 V (u = 5 %)", Dimension::Voltage), Tolerance::Standard(10.0));
    assert_eq!(read("12 ± 10 %", Dimension::Number), Tolerance::Limit(12.0 * 10.0 / 100.0));
    assert_eq!(read("12 ± 2", Dimension::Number), Tolerance::Limit(2.0));
    assert_eq!(read("21 °C ± 1 °C", Dimension::Temperature), Tolerance::Limit(1.0));
    assert_eq!(read("21 °C ± 1 K", Dimension::Temperature), Tolerance::Limit(1.0));
    assert_eq!(read("45 % ± 3 %", Dimension::Fraction), Tolerance::Limit(0.03));
    assert_eq!(read("9.2 kV", Dimension::Voltage), Tolerance::Exact);
}

#[test]
fn a_tolerance_in_decibel_follows_the_derivative_of_the_ratio() {
    let read = parse_quantity("-20 dB ± 0.01 dB", Dimension::Level).unwrap();
    let by_difference = (10f64.powf(-19.99 / 20.0) - 10f64.powf(-20.01 / 20.0)) / 2.0;
    let Tolerance::Limit(half_width) = read.tolerance else { panic!("a limit") };
    // Second-order remainder of the derivative at 0.01 dB.
    assert!((half_width / by_difference - 1.0).abs() < 1e-6);
}

#[test]
fn a_wrong_text_is_told_what_would_be_right() {
    let cases = [
        ("", Dimension::Voltage, "is empty; write a voltage"),
        ("kV", Dimension::Voltage, "does not begin with a number"),
        ("9.2", Dimension::Voltage, "has no unit; write a voltage, for example \"9.2 kV\""),
        ("9,2 kV", Dimension::Voltage, "write `9.2 kV`"),
        ("10 000 V", Dimension::Voltage, "gap between digits"),
        ("10_000 V", Dimension::Voltage, "gap between digits"),
        ("9.2 KV", Dimension::Voltage, "(did you mean `kV`?)"),
        ("100 hz", Dimension::Frequency, "did you mean `Hz`?"),
        ("9.2 kvolt", Dimension::Voltage, "unknown unit `kvolt`"),
        ("9.2 nF", Dimension::Voltage, "`9.2 nF` is a capacitance, but a voltage is needed"),
        ("nan V", Dimension::Voltage, "not a finite number"),
        ("-inf V", Dimension::Voltage, "not a finite number"),
        ("1e999 V", Dimension::Voltage, "not a finite number"),
        ("1e300 GV", Dimension::Voltage, "not a finite number"),
        ("12 mm", Dimension::Number, "is a length, but a number without a unit is needed"),
        ("-30", Dimension::Level, "has no unit; write a level, for example \"-30 dB\""),
        ("9.2 kV ± 0.2", Dimension::Voltage, "it has no unit"),
        ("9.2 kV ± -1 %", Dimension::Voltage, "it is negative"),
        ("9.2 kV ± 1 mA", Dimension::Voltage, "another kind"),
        ("9.2 kV ±", Dimension::Voltage, "is empty"),
        ("9.2 kV ± 1 % (u 1 %)", Dimension::Voltage, "only one tolerance"),
        ("9.2 kV (u 1 %", Dimension::Voltage, "not closed"),
        ("9.2 kV (1 %)", Dimension::Voltage, "must begin with u"),
        ("9.2 kV (u 1 %) or so", Dimension::Voltage, "nothing may follow"),
        ("21 °C ± 1 %", Dimension::Temperature, "no meaning"),
        ("-30 dB ± 1 %", Dimension::Level, "must be in dB"),
    ];
    for (text, dimension, part) in cases {
        let said = message(text, dimension);
        assert!(said.contains(part), "{text:?} says {said:?}, not {part:?}");
        assert!(!said.contains('\n'));
    }
}

#[test]
fn a_range_has_two_ends_in_order() {
    let ends = |text| {
        let (low, high) = parse_range(text, Dimension::Voltage).unwrap();
        (low.value, high.value)
    };
    assert_eq!(ends("6kV..12kV"), (6000.0, 12_000.0));
    assert_eq!(ends("6 kV .. 12 kV"), (6000.0, 12_000.0));
    assert_eq!(ends("6..12 kV"), (6000.0, 12_000.0));
    assert_eq!(ends("1.5..2.5kV"), (1500.0, 2500.0));
    for (text, part) in [
        ("6kV", "not a range"),
        ("6kV...12kV", "not a range"),
        ("6kV..", "not a range"),
        ("6kV..8kV..9kV", "not a range"),
        ("12kV..6kV", "high to low"),
        ("6kV..6kV", "high to low"),
        ("6..12", "has no unit"),
        ("6kV..12mA", "is a current"),
    ] {
        let said = parse_range(text, Dimension::Voltage).expect_err(text).to_string();
        assert!(said.contains(part), "{text:?} says {said:?}");
    }
}
