//! Text of a series of clips.
#![no_main]

use libfuzzer_sys::fuzz_target;

fuzz_target!(|text: &str| {
    match gaptone::bench::parse_series(text, "fuzz.toml") {
        Ok(_) => {}
        Err(error) => assert!(!error.to_string().is_empty()),
    }
});
