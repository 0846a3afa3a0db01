//! Lines of a log: read, and the trend over those that could be.
#![no_main]

use gaptone::trend::{Entry, Options, analyse};
use libfuzzer_sys::fuzz_target;

fuzz_target!(|bytes: &[u8]| {
    let entries: Vec<Entry> =
        bytes.split(|byte| *byte == b'\n').filter_map(|line| serde_json::from_slice(line).ok()).collect();
    let _ = analyse(&entries, &Options::default());
});
