//! Bench files, right and broken. `tests/bench/valid` must be read; each file of `tests/bench/broken` holds one fault,
//! by which it is named, and must be refused with the line, the caret and the words that help.

use gaptone::bench::{
    Bench, BenchError, Dimension, Electrodes, Quantity, Tolerance, parse, parse_quantity, quantity_text, si,
    with_uncertainty,
};
use proptest::prelude::*;
use std::path::{Path, PathBuf};

fn folder(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join(name)
}

fn text(path: &Path) -> String {
    std::fs::read_to_string(path).unwrap_or_else(|error| panic!("{}: {error}", path.display()))
}

fn files(name: &str) -> Vec<PathBuf> {
    let entries = std::fs::read_dir(folder(name)).expect("folder of bench files");
    let mut paths: Vec<_> = entries.map(|entry| entry.expect("entry").path()).collect();
    paths.sort();
    paths
}

fn valid(name: &str) -> Bench {
    parse(&text(&folder("tests/bench/valid").join(name)), name).unwrap_or_else(|error| panic!("{error}"))
}

fn broken(name: &str) -> BenchError {
    let file_name = format!("{name}.toml");
    parse(&text(&folder("tests/bench/broken").join(&file_name)), &file_name).expect_err(name)
}

#[test]
fn every_valid_file_and_every_example_is_read() {
    for path in files("tests/bench/valid").into_iter().chain(files("examples/benches")) {
        if let Err(error) = parse(&text(&path), "file") {
            panic!("{}: {error}", path.display());
        }
    }
}

#[test]
fn every_example_bench_says_that_it_is_invented() {
    for path in files("examples/benches") {
        assert!(text(&path).starts_with("# Invented bench"), "{}", path.display());
    }
}

/// File, line, the marked part of that line, and what the message must hold.
const BROKEN: [(&str, usize, &str, &[&str]); 39] = [
    ("audio-band-reversed", 2, "\"3400 Hz .. 120 Hz\"", &["runs from high to low", "120 Hz .. 3400 Hz"]),
    ("audio-band-with-three-dots", 2, "\"120...3400 Hz\"", &["is not a range", "two dots"]),
    ("below-absolute-zero", 2, "\"-280 °C\"", &["air.temperature is -280 °C", "above 0 K (-273.15 °C)"]),
    ("current-and-resistance", 3, "\"1 MΩ\"", &["charging.resistance", "charging.current on line 2", "keep one"]),
    ("current-and-time-constant", 3, "\"1 mA\"", &["charging.current", "charging.time_constant on line 2"]),
    ("decimal-comma", 2, "\"9,2 kV\"", &["comma", "write `9.2 kV`"]),
    ("hexadecimal-number", 2, "0x1F", &["tank.quality", "hexadecimal", "a decimal number"]),
    ("humidity-above-100", 3, "\"145 %\"", &["air.humidity is 145 %", "0 % to 100 %"]),
    ("key-of-another-section", 3, "resistance", &["unknown key `resistance` in [gap]", "[charging] or [tank]"]),
    ("key-twice", 3, "voltage", &["given twice"]),
    ("key-without-its-section", 1, "voltage", &["at the top of the file", "[supply] or [gap]"]),
    ("memory-above-one", 2, "1.4", &["gap.memory is 1.4", "between -1 and 1"]),
    ("missing-unit", 3, "\"9200\"", &["`9200` has no unit", "voltage = \"9.2 kV ± 1 %\""]),
    ("negative-resistance", 2, "\"-1.2 MΩ\"", &["charging.resistance is -1.2 MΩ", "above 0 Ω"]),
    ("noise-level-without-unit", 2, "-30", &["`-30` has no unit", "noise = \"-30 dB\""]),
    ("not-a-number", 2, "nan", &["`nan` is not a finite number", "quality = 12"]),
    ("not-finite", 2, "\"1e999 kV\"", &["not a finite number"]),
    ("number-without-quotes-or-unit", 2, "9200", &["has no unit", "voltage = \"9.2 kV ± 1 %\""]),
    ("one-peak", 2, "[\"240 V\"]", &["fewer than two", "at least two"]),
    ("peaks-not-a-list", 2, "\"240 V\"", &["tank.peaks is a text", "a list"]),
    ("quantity-without-quotes", 2, "9.2 kV", &["stands in quotes", "voltage = \"9.2 kV\""]),
    ("quotes-not-closed", 2, "", &["not closed"]),
    ("residual-above-gap-voltage", 2, "\"8 kV\"", &["gap.residual_voltage", "gap.voltage on line 3", "below"]),
    ("resistance-and-time-constant", 4, "\"1 ms\"", &["charging.time_constant", "charging.resistance on line 2"]),
    ("ripple-of-100-percent", 2, "\"100 %\"", &["supply.ripple is 100 %", "below 100 %"]),
    ("section-not-closed", 1, "", &["expected `]`"]),
    ("section-that-is-no-table", 1, "gap", &["the section [gap]"]),
    ("standard-uncertainty-without-its-u", 2, "\"9.2 kV (1 %)\"", &["must begin with u", "(u 0.3 %)"]),
    ("title-not-a-text", 1, "7", &["title is a number", "a text in quotes"]),
    ("tolerance-beyond-zero", 2, "\"1 MΩ ± 120 %\"", &["above 0 Ω with all of its tolerance"]),
    ("tolerance-without-unit", 2, "\"1 MΩ ± 2\"", &["the tolerance `2`", "no unit", "± 1 %"]),
    ("true-as-a-quantity", 2, "true", &["gap.voltage is true or false", "a quantity in quotes"]),
    ("unknown-key", 2, "resistence", &["did you mean `resistance`?", "time_constant, capacitance, leakage"]),
    ("unknown-section", 2, "chargin", &["did you mean [charging]?", "[receiver]"]),
    ("unknown-unit", 2, "\"9.2 KV\"", &["unknown unit `KV`", "did you mean `kV`?"]),
    ("wrong-dimension", 2, "\"1.2 nF\"", &["is a capacitance, but a resistance is needed"]),
    ("wrong-electrodes-word", 2, "\"sphere\"", &["did you mean `spheres`?", "plane, spheres or points"]),
    ("wrong-peak-in-the-list", 2, "\"170 mA\"", &["is a current, but a voltage is needed"]),
    ("zero-capacitance", 2, "\"0 nF\"", &["charging.capacitance is 0 nF", "above 0 F"]),
];

#[test]
fn every_broken_file_is_refused_at_the_line_and_with_words_that_help() {
    for (name, line, marked, parts) in BROKEN {
        let error = broken(name);
        let said = error.to_string();
        assert_eq!(error.line, line, "{said}");
        assert!(said.starts_with(&format!("{name}.toml line {line}, column {}: ", error.column)), "{said}");
        let under: String = error.source_line.chars().skip(error.marked.start).take(error.marked.len()).collect();
        assert_eq!(under.trim(), marked, "{said}");
        for part in parts {
            assert!(said.contains(part), "{name} lacks {part:?}:\n{said}");
        }
    }
}

#[test]
fn every_broken_file_has_its_row_in_the_table() {
    let rows: Vec<_> = BROKEN.iter().map(|row| format!("{}.toml", row.0)).collect();
    for path in files("tests/bench/broken") {
        let name = path.file_name().expect("name").to_string_lossy().into_owned();
        assert!(rows.contains(&name), "{name} is not tested");
    }
}

#[test]
fn the_carets_stand_under_the_value() {
    let said = broken("negative-resistance").to_string();
    let lines: Vec<_> = said.lines().collect();
    assert_eq!(lines[2], " 2 | \tresistance = \"-1.2 MΩ\"");
    assert_eq!(lines[3], "   | \t             ^^^^^^^^^");
    assert_eq!(lines[4], "   = write for example resistance = \"1.2 MΩ ± 1 %\"");
}

#[test]
fn the_first_fault_in_the_file_is_reported_first() {
    let error = parse("[supply]\nvoltage = \"5\"\n[charging]\nzzz = 1\n", "two.toml").expect_err("two faults");
    assert_eq!(error.line, 2);
    let error = parse("[supply]\nzzz = 1\nvoltage = \"5\"\n", "two.toml").expect_err("two faults");
    assert_eq!(error.line, 2);
}

#[test]
fn the_bench_of_the_handbook_is_read_in_si_units() {
    let bench = valid("everything-of-the-handbook.toml");
    let value = |quantity: Option<Quantity>| quantity.expect("given").value;
    assert_eq!(bench.title.as_deref(), Some("North bench demonstration gap"));
    assert_eq!(bench.supply.voltage, Some(Quantity { value: 9200.0, tolerance: Tolerance::Limit(92.0) }));
    assert_eq!(value(bench.supply.ripple), 0.01);
    assert_eq!(value(bench.charging.capacitance), 6.8e-9);
    assert_eq!(bench.gap.electrodes, Some(Electrodes::Spheres));
    assert_eq!(value(bench.gap.diameter), 0.025);
    assert_eq!(value(bench.gap.conduction_time), 12e-6);
    assert_eq!(value(bench.air.temperature), 294.15);
    assert_eq!(value(bench.air.pressure), 100_200.0);
    assert_eq!(value(bench.air.humidity), 0.45);
    assert_eq!(value(bench.tank.quality), 12.0);
    let (low, high) = bench.receiver.audio_band.expect("given");
    assert_eq!((low.value, high.value), (120.0, 3400.0));
    // −30 dB of an amplitude is 10^(−30/20).
    assert!((value(bench.receiver.noise) - 0.031_622_776_6).abs() < 1e-10);
}

#[test]
fn a_file_with_a_byte_order_mark_and_foreign_signs_is_read() {
    let bench = valid("signs-of-other-keyboards.toml");
    let residual = bench.gap.residual_voltage.expect("given");
    assert_eq!(residual, Quantity { value: -150.0, tolerance: Tolerance::Limit(10.0) });
    assert_eq!(bench.charging.resistance.expect("given").value, 1.2e6);
}

#[test]
fn plain_numbers_are_taken_where_there_is_no_unit() {
    let bench = valid("levels-and-plain-numbers.toml");
    assert_eq!(bench.gap.memory, Some(Quantity::exact(-0.4)));
    assert_eq!(bench.receiver.carrier, Some(Quantity::exact(1.5)));
    assert_eq!(bench.receiver.hum, Some(Quantity::exact(0.3)));
    let quoted = valid("carrier-in-decibel.toml");
    assert_eq!(quoted.gap.memory, Some(Quantity::exact(0.4)));
    // −3 dB is 0.70795.
    assert!((quoted.receiver.carrier.expect("given").value - 0.70795).abs() < 1e-5);
}

#[test]
fn a_limit_becomes_a_standard_uncertainty_by_the_root_of_three() {
    // JCGM 100:2008, 4.3.7: a rectangular distribution of half-width a has the standard uncertainty a/√3.
    let limit = parse_quantity("9.2 kV ± 1 %", Dimension::Voltage).expect("right");
    assert!((limit.u() - 92.0 / 3f64.sqrt()).abs() < 1e-9);
    let standard = parse_quantity("9.2 kV (u 1 %)", Dimension::Voltage).expect("right");
    assert!((standard.u() - 92.0).abs() < 1e-9);
}

const DIMENSIONS: [Dimension; 15] = [
    Dimension::Voltage,
    Dimension::Current,
    Dimension::Resistance,
    Dimension::Capacitance,
    Dimension::Inductance,
    Dimension::Time,
    Dimension::Frequency,
    Dimension::Temperature,
    Dimension::Pressure,
    Dimension::Length,
    Dimension::Fraction,
    Dimension::Drift,
    Dimension::Level,
    Dimension::Ratio,
    Dimension::Number,
];

/// Percent and back costs at most two roundings of a double.
const LAST_BITS: f64 = 1e-15;

fn close(left: f64, right: f64) -> bool {
    (left - right).abs() <= LAST_BITS * left.abs().max(right.abs())
}

fn any_tolerance() -> impl Strategy<Value = Tolerance> {
    prop_oneof![
        Just(Tolerance::Exact),
        (0.0..1e6f64).prop_map(Tolerance::Limit),
        (0.0..1e6f64).prop_map(Tolerance::Standard),
    ]
}

proptest! {
    #[test]
    fn a_quantity_written_and_read_again_is_the_same(
        mantissa in -1.0..1.0f64, power in -14i32..12, tolerance in any_tolerance(), kind in 0usize..15,
    ) {
        let quantity = Quantity { value: mantissa * 10f64.powi(power), tolerance };
        let written = quantity_text(&quantity, DIMENSIONS[kind]);
        let read = parse_quantity(&written, DIMENSIONS[kind]).map_err(|error| TestCaseError::fail(error.to_string()))?;
        prop_assert!(close(read.value, quantity.value), "{written}");
        match (read.tolerance, quantity.tolerance) {
            (Tolerance::Exact, Tolerance::Exact) => {}
            (Tolerance::Limit(a), Tolerance::Limit(b)) | (Tolerance::Standard(a), Tolerance::Standard(b)) => {
                prop_assert!(close(a, b), "{written}");
            }
            other => prop_assert!(false, "{other:?}"),
        }
    }

    #[test]
    fn a_value_shown_to_some_digits_reads_as_that_value_to_those_digits(
        mantissa in 1.0..10.0f64, power in -14i32..14, digits in 1usize..10,
    ) {
        let value = mantissa * 10f64.powi(power);
        let shown = si(value, "V", digits);
        let read = parse_quantity(&shown, Dimension::Voltage).map_err(|error| TestCaseError::fail(error.to_string()))?;
        // Half a unit of the last digit, and the rounding of the conversion itself.
        let half_digit = 0.5 * 10f64.powi(1 - i32::try_from(digits).expect("small"));
        prop_assert!((read.value / value - 1.0).abs() <= half_digit + LAST_BITS * 4.0, "{value} shown as {shown}");
    }

    #[test]
    fn a_value_shown_with_its_uncertainty_stays_within_a_tenth_of_it(
        value in -1e4..1e4f64, u_power in -4.0..4.0f64,
    ) {
        let u = 10f64.powf(u_power);
        let shown = with_uncertainty(value, u, "/s");
        let (left, right) = shown.strip_suffix(" /s").and_then(|text| text.split_once(" ± ")).expect("two parts");
        // Two significant digits of u: the last place is at most u/10, or u/5 where its second digit is left out;
        // rounding costs at most half of it (and the rounding of u itself comes on top).
        prop_assert!((left.parse::<f64>().expect("number") - value).abs() <= 0.101 * u, "{value} {u} {shown}");
        prop_assert!((right.parse::<f64>().expect("number") / u - 1.0).abs() <= 0.0501, "{value} {u} {shown}");
    }

    #[test]
    fn no_text_makes_the_reader_panic(text in any::<String>(), cut in 0usize..900) {
        let _ = parse(&text, "noise.toml");
        let _ = parse_quantity(&text, Dimension::Voltage);
        let _ = gaptone::bench::parse_range(&text, Dimension::Voltage);
        // A right file cut anywhere, with the noise behind it.
        let right = include_str!("bench/valid/everything-of-the-handbook.toml");
        let end = (0..=cut).rev().find(|at| right.is_char_boundary(*at)).unwrap_or(0);
        if let Err(error) = parse(&format!("{}{text}", &right[..end.min(right.len())]), "cut.toml") {
            prop_assert!(error.to_string().contains("cut.toml line"));
        }
    }
}
