//! The kinds of recording, by name.

mod circuits;
mod faults;
mod nothing;
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
    Kind { name: "station", build: reception::station },
    Kind { name: "music", build: reception::station_music },
    Kind { name: "no-whistle", build: nothing::whistle },
    Kind { name: "no-warble", build: nothing::warble },
    Kind { name: "no-chord", build: nothing::chord },
    Kind { name: "no-keyed", build: nothing::keyed },
    Kind { name: "no-data", build: nothing::data },
    Kind { name: "no-sweep", build: nothing::sweep },
    Kind { name: "no-dial", build: nothing::dial },
    Kind { name: "no-music", build: nothing::melody },
    Kind { name: "no-speech", build: nothing::voice },
    Kind { name: "no-engine", build: nothing::engine },
    Kind { name: "no-fan", build: nothing::fan },
    Kind { name: "no-white", build: nothing::white },
    Kind { name: "no-pink", build: nothing::pink },
    Kind { name: "no-brown", build: nothing::brown },
    Kind { name: "no-blue", build: nothing::blue },
    Kind { name: "no-hum", build: nothing::hum },
    Kind { name: "no-buzz", build: nothing::buzz },
    Kind { name: "no-silence", build: nothing::silence },
    Kind { name: "no-channel", build: nothing::channel },
    Kind { name: "no-carrier", build: nothing::bare_carrier },
    Kind { name: "no-am", build: nothing::programme },
    Kind { name: "no-fm", build: nothing::frequency_programme },
    Kind { name: "no-static", build: nothing::crackle },
    Kind { name: "no-clock", build: nothing::clock },
    Kind { name: "no-dimmer", build: nothing::dimmer },
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
