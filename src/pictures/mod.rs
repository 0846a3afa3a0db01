//! What is drawn of each result: from the objects of the JSON to pictures of the [plotting room](crate::plot).
//!
//! Each picture has one sentence that says what it shows, with its figures, and a note on how to read it. Nothing is computed
//! anew that the result holds; a picture for which there is no evidence is absent.

mod budget;
mod calibration;
mod click;
mod distribution;
mod excerpts;
mod growth;
mod mains;
mod periods;
mod prediction;
mod recording;
mod sizes;
mod spectrum;
mod trend;

pub use calibration::calibration;
pub use prediction::prediction;
pub use trend::trend;

use crate::bench::{Bench, si};
use crate::evidence::Evidence;
use crate::plot::Picture;
use crate::report::Measurement;
use crate::rhythm::{Reading, Verdict};

/// A measurement with what its pictures are drawn from.
#[derive(Debug, Clone, Copy)]
pub struct Measured<'a> {
    /// The figures.
    pub measurement: &'a Measurement,
    /// The evidence.
    pub evidence: &'a Evidence,
    /// The bench, if there is one: its receiver is shown in the spectrum.
    pub bench: Option<&'a Bench>,
}

/// Kinds of pictures of a measurement, in the order in which a doubter asks.
pub const KINDS: [&str; 9] =
    ["click", "excerpts", "recording", "periods", "distribution", "growth", "spectrum", "sizes", "budget"];

/// The picture of a kind; none if the measurement has no evidence for it, or if there is no such kind.
#[must_use]
pub fn of_kind(kind: &str, measured: Measured<'_>) -> Option<Picture> {
    match kind {
        "click" => click::picture(measured),
        "excerpts" => excerpts::picture(measured),
        "recording" => recording::picture(measured),
        "periods" => periods::picture(measured),
        "distribution" => distribution::picture(measured),
        "growth" => growth::picture(measured),
        "spectrum" => spectrum::picture(measured),
        "sizes" => sizes::picture(measured),
        "budget" => budget::picture(measured),
        _ => None,
    }
}

/// All pictures that the evidence allows.
#[must_use]
pub fn all(measured: Measured<'_>) -> Vec<Picture> {
    KINDS.iter().filter_map(|kind| of_kind(kind, measured)).collect()
}

/// True if the reading is of a rhythm.
fn has_rhythm(reading: &Reading) -> bool {
    matches!(reading.verdict, Verdict::Steady | Verdict::Unsteady)
}

/// Standard deviation of the periods as they are read, s: jitter of the gap, and timing noise at both ends.
fn scatter_as_read_s(reading: &Reading) -> Option<f64> {
    let jitter_s = reading.period_jitter_s?.value;
    let noise_s = reading.timing_noise_s.map_or(0.0, |noise| noise.value);
    Some((jitter_s * jitter_s + 2.0 * noise_s * noise_s).sqrt())
}

/// A text that begins with a capital letter.
pub(crate) fn capital(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or_else(String::new, |first| first.to_uppercase().chain(letters).collect())
}

fn seconds(value: f64) -> String {
    si(value, "s", 3)
}

/// `1 firing`, `3 firings`.
fn counted(count: u64, one: &str, many: &str) -> String {
    if count == 1 { format!("1 {one}") } else { format!("{count} {many}") }
}

/// `every firing`, `every 8th firing`.
fn every(n: u64, what: &str) -> String {
    match n {
        1 => format!("every {what}"),
        2 => format!("every 2nd {what}"),
        n => format!("every {n}th {what}"),
    }
}
