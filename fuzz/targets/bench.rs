//! Text of a bench: read, predicted, and shown with its error.
#![no_main]

use libfuzzer_sys::fuzz_target;

fuzz_target!(|text: &str| {
    match gaptone::bench::parse(text, "fuzz.toml") {
        Ok(bench) => {
            let _ = gaptone::model::render::RenderSettings::from_bench(&bench, 1.0, 1);
            let _ = gaptone::predict::predict(&bench, None);
        }
        Err(error) => assert!(!error.to_string().is_empty()),
    }
});
