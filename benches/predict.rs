//! A long table of settings with ripple: each needs the map of the firing phase.

use gaptone::bench::parse;
use gaptone::predict::sweep;

const BENCH: &str = "supply.voltage = \"8 kV\"\nsupply.ripple = \"2 %\"\nsupply.ripple_frequency = \"100 Hz\"\n\
    charging.resistance = \"10 MΩ\"\ncharging.capacitance = \"1 nF\"\ngap.voltage = \"5 kV\"\ngap.spread = \"1 %\"\n";

fn main() {
    divan::main();
}

/// Five hundred settings from 4.5 to 20 kV.
#[divan::bench(sample_count = 5)]
fn five_hundred_settings_with_ripple(bencher: divan::Bencher) {
    let bench = parse(BENCH, "bench.toml").expect("the bench above is right");
    bencher.bench(|| sweep(&bench, 4.5e3, 20e3, 500).map(|swept| swept.settings.len()));
}
