//! Values that contradict each other.

use super::Bench;
use super::error::{BenchError, BenchFault, Source};
use super::read::Places;

const CHARGED_TWICE: &str =
    "only one of resistance, current and time_constant describes how the capacitor is charged; keep one";
const RESIDUAL_TOO_HIGH: &str = "what is left on the capacitor must lie below the voltage at which the gap fires";
const TWO_LEVELS: &str = "the level is set either for the loudest peak or for one click; keep one";

/// The first pair of values that cannot both hold.
pub(super) fn contradictions(bench: &Bench, places: &Places, source: &Source<'_>) -> Result<(), BenchError> {
    let charging = [
        ("charging", "resistance", bench.charging.resistance.is_some()),
        ("charging", "current", bench.charging.current.is_some()),
        ("charging", "time_constant", bench.charging.time_constant.is_some()),
    ];
    let mut given: Vec<_> = charging.into_iter().filter(|(.., present)| *present).map(|(s, k, _)| (s, k)).collect();
    given.sort_by_key(|place| places.get(place).map_or(0, |span| span.start));
    if let [first, second, ..] = given[..] {
        return Err(contradiction(first, second, CHARGED_TWICE, places, source));
    }
    if let (Some(gap), Some(residual)) = (bench.gap.voltage, bench.gap.residual_voltage)
        && residual.value.abs() >= gap.value
    {
        let (gap, residual) = (("gap", "voltage"), ("gap", "residual_voltage"));
        return Err(contradiction(gap, residual, RESIDUAL_TOO_HIGH, places, source));
    }
    if bench.receiver.recorder_level.is_some() && bench.receiver.click_level.is_some() {
        let mut keys = [("receiver", "recorder_level"), ("receiver", "click_level")];
        keys.sort_by_key(|place| places.get(place).map_or(0, |span| span.start));
        return Err(contradiction(keys[0], keys[1], TWO_LEVELS, places, source));
    }
    Ok(())
}

type Place = (&'static str, &'static str);

fn contradiction(first: Place, second: Place, why: &'static str, places: &Places, source: &Source<'_>) -> BenchError {
    let start_of = |place: &Place| places.get(place).map_or(0, |span| span.start);
    let span = places.get(&second).cloned().unwrap_or(0..0);
    let fault = BenchFault::Contradiction {
        key: format!("{}.{}", second.0, second.1),
        other: format!("{}.{}", first.0, first.1),
        other_line: source.line(start_of(&first)),
        why,
    };
    source.error(&span, fault, None)
}
