//! The bench of a command: its file, and the settings that the command line puts in place of the file's.

use super::exit::Failure;
use super::files;
use crate::bench::{self, Bench, Dimension, Quantity, Tolerance};

/// Reads and checks a bench file.
///
/// # Errors
/// Exit status 1 if the file cannot be read, 2 if it is no right bench.
pub(super) fn load(name: &str) -> Result<Bench, Failure> {
    let text = files::read_text(name).map_err(|error| Failure::file(name, &error))?;
    bench::parse(&text, name).map_err(Failure::usage)
}

/// A quantity from the command line; `option` names the option in the message.
///
/// # Errors
/// Exit status 2.
pub(super) fn quantity(option: &str, text: &str, dimension: Dimension) -> Result<Quantity, Failure> {
    bench::parse_quantity(text, dimension).map_err(|error| Failure::usage(format!("{option}: {error}")))
}

/// A supply setting from the command line: without a tolerance of its own it keeps the relative one of the bench,
/// for it is read off the same meter.
///
/// # Errors
/// Exit status 2.
pub(super) fn supply(text: &str, bench: &Bench) -> Result<Quantity, Failure> {
    let given = quantity("--supply", text, Dimension::Voltage)?;
    let Some(stated) = bench.supply.voltage.filter(|stated| stated.value != 0.0) else { return Ok(given) };
    let scaled = |amount: f64| (amount * given.value / stated.value).abs();
    let tolerance = match (given.tolerance, stated.tolerance) {
        (Tolerance::Exact, Tolerance::Limit(half_width)) => Tolerance::Limit(scaled(half_width)),
        (Tolerance::Exact, Tolerance::Standard(u)) => Tolerance::Standard(scaled(u)),
        (own, _) => own,
    };
    Ok(Quantity { tolerance, ..given })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_setting_keeps_the_relative_tolerance_of_the_bench_unless_it_has_its_own() {
        let mut bench = Bench::default();
        bench.supply.voltage = Some(Quantity { value: 8000.0, tolerance: Tolerance::Limit(80.0) });
        let tolerance = |text: &str| supply(text, &bench).expect("a voltage").tolerance;
        assert_eq!(tolerance("4 kV"), Tolerance::Limit(40.0));
        let Tolerance::Limit(own) = tolerance("4 kV ± 2 %") else { panic!("a limit") };
        assert!((own - 80.0).abs() < 1e-9);
        assert!(supply("4 kΩ", &bench).is_err());
    }
}
