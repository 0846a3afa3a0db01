//! An uncertainty budget as a table for people.

use super::{Figure, wrapped};
use crate::bench::si;
use crate::estimate::Estimate;
use crate::uncertainty::{Budget, Line, Method};
use std::fmt::Write;

/// Width of the first column.
const NAME: usize = 34;

/// Degrees of freedom from which their number tells nothing: the coverage factor is that of the normal law to four digits.
const MANY: f64 = 1e5;

/// The budget as lines, ending with a line break.
pub(super) fn budget_text(budget: &Budget) -> String {
    let shown = |estimate: Estimate| Figure::prefixed(estimate, &budget.unit);
    let result = shown(budget.result);
    let mut text = format!("  budget of the {}: {}, {}\n", name(budget), result.value_and_u(), result.interval());
    let _ = writeln!(text, "    {:NAME$} {:>12} {:>12} {:>7}  distribution", "input", "u", "brings", "share");
    for line in &budget.inputs {
        text.push_str(&line_text(line, &budget.unit));
    }
    let freedom = budget
        .effective_degrees_of_freedom
        .filter(|freedom| *freedom < MANY)
        .map_or("no limit to the degrees of freedom".to_owned(), |freedom| format!("{freedom:.0} degrees of freedom"));
    let factor = budget.coverage_factor;
    text.push_str(&wrapped(
        &format!(
            "law of propagation: {}, {} ({freedom}, coverage factor {factor:.2})",
            shown(budget.propagation).value_and_u(),
            shown(budget.propagation).interval()
        ),
        "    ",
        "      ",
    ));
    text.push_str(&wrapped(&monte_carlo(budget), "    ", "      "));
    if !budget.advice.is_empty() {
        text.push_str(&wrapped(&budget.advice, "    ", "      "));
    }
    text
}

/// The figure in words: its name in the measurement without the unit.
fn name(budget: &Budget) -> String {
    let words = budget.quantity.rsplit_once('_').map_or(budget.quantity.as_str(), |(words, _)| words);
    words.replace('_', " ")
}

fn line_text(line: &Line, unit: &str) -> String {
    let Line { name, u, contribution, share, distribution, .. } = line;
    // A fraction such as the band of a law reads best in percent.
    let own = if line.unit.is_empty() { format!("{:.2} %", 100.0 * u) } else { si(*u, &line.unit, 2) };
    let brings = si(*contribution, unit, 2);
    let percent = 100.0 * share;
    format!("    {name:NAME$} {own:>12} {brings:>12} {percent:>5.1} %  {distribution}\n")
}

fn monte_carlo(budget: &Budget) -> String {
    let Some(drawn) = budget.monte_carlo else {
        return "Monte Carlo: no result, because some draws of the inputs have no answer".to_owned();
    };
    let shown = Figure::prefixed(drawn, &budget.unit);
    let verdict = match budget.method {
        Method::Propagation => "the law of propagation agrees with it and is reported",
        Method::MonteCarlo => "the law of propagation does not agree with it, so this is reported",
    };
    format!("Monte Carlo, {} draws: {}, {}; {verdict}", budget.draws, shown.value_and_u(), shown.interval())
}
