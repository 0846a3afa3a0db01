//! The kinds of recording, by name.

mod circuits;
mod faults;
mod reception;
mod steady;

use crate::case::Draft;
use crate::random::Dice;

/// A kind of recording.
pub struct Kind {
    /// Name on the command line.
    pub name: &'static str,
    /// Draws one.
    pub build: fn(&mut Dice) -> Draft,
}

/// Every kind; those whose name begins with `no-` hold no gap.
pub const KINDS: &[Kind] = &[
    Kind { name: "clean", build: steady::clean },
    Kind { name: "noisy", build: steady::noisy },
    Kind { name: "fast", build: steady::fast },
    Kind { name: "vfast", build: steady::very_fast },
    Kind { name: "slow", build: steady::slow },
    Kind { name: "loose", build: steady::loose },
    Kind { name: "missing", build: faults::missing },
    Kind { name: "double", build: faults::double },
    Kind { name: "outage", build: faults::outage },
    Kind { name: "two", build: faults::two },
    Kind { name: "two-near", build: faults::two_near },
    Kind { name: "voltage", build: circuits::voltage },
    Kind { name: "memory", build: circuits::memory },
    Kind { name: "ripple", build: circuits::ripple },
    Kind { name: "drift", build: circuits::drift },
    Kind { name: "carrier", build: reception::carrier },
    Kind { name: "hum", build: reception::hum },
    Kind { name: "buzz", build: reception::buzz },
    Kind { name: "codec", build: reception::codec },
    Kind { name: "clipped", build: reception::clipped },
    Kind { name: "agclevel", build: reception::level_dependent_gain },
    Kind { name: "fm", build: reception::discriminator },
];

/// Kinds for a comma-separated list of names; `all`, `gap` and `no` stand for every kind, those with and without a gap.
pub fn select(list: &str) -> Result<Vec<&'static Kind>, String> {
    let mut chosen = Vec::new();
    for name in list.split(',') {
        let matches = |kind: &&Kind| match name {
            "all" => true,
            "gap" => !kind.name.starts_with("no-"),
            "no" => kind.name.starts_with("no-"),
            _ => kind.name == name,
        };
        let found: Vec<&Kind> = KINDS.iter().filter(matches).collect();
        if found.is_empty() {
            let known: Vec<&str> = KINDS.iter().map(|k| k.name).collect();
            return Err(format!("--kinds: no kind `{name}`; there are all, gap, no, {}", known.join(", ")));
        }
        chosen.extend(found);
    }
    Ok(chosen)
}
