//! Bytes of a recording of any kind: opened, decoded and measured.
#![no_main]

use gaptone::audio::{ChannelChoice, Intake, Span};
use gaptone::cli::files::open;
use gaptone::measure::{Measurer, Options};
use libfuzzer_sys::fuzz_target;

/// A head of some bytes may stand for hours of silence; a few seconds of them are enough.
const MOST_SAMPLES: usize = 300_000;

fuzz_target!(|bytes: &[u8]| {
    let path = std::env::temp_dir().join(format!("gaptone-fuzz-{}", std::process::id()));
    std::fs::write(&path, bytes).expect("written");
    let Ok(source) = open(path.to_str().expect("UTF-8")) else { return };
    let Ok(mut intake) = Intake::new(source, ChannelChoice::default(), Span::default()) else { return };
    let mut measurer = Measurer::new(intake.sample_rate_hz(), Options::default());
    let (mut mono, mut count) = (Vec::new(), 0);
    while count < MOST_SAMPLES && intake.next(&mut mono).unwrap_or(false) {
        mono.truncate(MOST_SAMPLES);
        count += mono.len();
        measurer.push(&mono);
    }
    let _ = measurer.finish();
});
