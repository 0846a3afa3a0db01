//! How long a long table of settings takes. Alone in its program, so that no other test runs beside it.

use gaptone::bench::parse;
use gaptone::predict::sweep;

#[test]
fn five_hundred_settings_with_ripple_take_less_than_half_a_second() {
    let text = "supply.voltage = \"8 kV\"\nsupply.ripple = \"2 %\"\nsupply.ripple_frequency = \"100 Hz\"\n\
                charging.resistance = \"10 MΩ\"\ncharging.capacitance = \"1 nF\"\ngap.voltage = \"5 kV\"\ngap.spread = \"1 %\"\n";
    let bench = parse(text, "test.toml").unwrap();
    // The best of five: other work on the machine is not what is timed.
    let timed = || {
        let start = std::time::Instant::now();
        let swept = sweep(&bench, 4.5e3, 20e3, 500).unwrap();
        (start.elapsed(), swept)
    };
    let (took, swept) = (0..5).map(|_| timed()).min_by_key(|run| run.0).unwrap();
    assert!(swept.settings.iter().filter(|one| one.ripple.is_some()).count() > 400);
    // Optimised builds only; a debug build is several times slower.
    if !cfg!(debug_assertions) {
        assert!(took.as_secs_f64() < 0.5, "{took:?}");
    }
}
