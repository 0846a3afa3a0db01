//! Pages that a person reads at a glance, mails, prints and keeps: one HTML file each, without network, fonts or files beside it.
//!
//! The answer comes first, in one line; then the figures, then the evidence in the order in which a doubter asks; then bench,
//! settings, notes; and the objects of the JSON, from which the page can be read back ([`extract`]). Everything that comes from
//! outside (names, titles, benches) goes through [`crate::plot::escaped`].

mod calibration;
mod document;
mod kept;
mod measurement;
mod prediction;
mod series;
mod trend;

pub use calibration::calibration;
pub use kept::{KeptRecording, KeptText, MeasurementReport, NoReport, REPORT_FORMAT, extract};
pub use measurement::{Sound, measurement};
pub use prediction::prediction;
pub use series::{SeriesClip, series};
pub use trend::trend;
