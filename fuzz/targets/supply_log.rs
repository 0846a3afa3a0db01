//! CSV of a supply that is ramped.
#![no_main]

use libfuzzer_sys::fuzz_target;

fuzz_target!(|text: &str| {
    match gaptone::calibrate::SupplyLog::parse(text) {
        Ok(_) => {}
        Err(error) => assert!(!error.to_string().is_empty()),
    }
});
