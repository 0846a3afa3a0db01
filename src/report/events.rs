//! Every click as a line of CSV.

use crate::firing::{Event, EventKind};
use std::io::{self, Write};

/// The header line: times and periods in seconds, size in units of full scale, voltage in volts.
pub const EVENTS_HEADER: &str = "time_s,kind,size,timing_u_s,period_s,gap_voltage_v";

/// Writes one event as a line; `voltage_v` is the gap voltage that it implies, where that is known. What is not known,
/// or not finite, is an empty field.
///
/// # Errors
/// Those of the writer.
pub fn write_event(out: &mut impl Write, event: &Event, voltage_v: Option<f64>) -> io::Result<()> {
    let kind = match event.kind {
        EventKind::Firing => "firing",
        EventKind::Missed => "missed",
        EventKind::Extra => "extra",
    };
    // A nanosecond is far below any timing uncertainty; a tenth of a volt below any voltage's.
    writeln!(
        out,
        "{},{kind},{},{},{},{}",
        field(Some(event.time_s), 9),
        field(Some(event.size), 6),
        field(Some(event.timing_u_s), 9),
        field(event.period_s, 9),
        field(voltage_v, 1),
    )
}

fn field(value: Option<f64>, decimals: usize) -> String {
    match value {
        Some(value) if value.is_finite() => format!("{value:.decimals$}"),
        _ => String::new(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_event_is_a_line_and_what_is_not_known_is_empty() {
        let firing =
            Event { time_s: 1.25, kind: EventKind::Firing, size: 0.5, timing_u_s: 2e-6, period_s: Some(0.0025) };
        let missed = Event { time_s: 1.2525, kind: EventKind::Missed, size: 0.0, timing_u_s: f64::NAN, period_s: None };
        let mut out = Vec::new();
        write_event(&mut out, &firing, Some(7103.26)).expect("memory");
        write_event(&mut out, &missed, None).expect("memory");
        let text = String::from_utf8(out).expect("UTF-8");
        assert_eq!(
            text,
            "1.250000000,firing,0.500000,0.000002000,0.002500000,7103.3\n\
             1.252500000,missed,0.000000,,,\n"
        );
    }
}
