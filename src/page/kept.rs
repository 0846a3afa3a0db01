//! What a page of measurements keeps of them, and how it is read back.

use crate::evidence::Evidence;
use crate::report::Measurement;
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// Name of the format.
pub const REPORT_FORMAT: &str = "gaptone.report/1";

/// Name of the place in the page that holds the JSON.
pub(super) const PLACE: &str = "gaptone-report";

/// A text file that a measurement rests on.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct KeptText {
    /// Its name as given.
    pub file: String,
    /// Its text.
    pub text: String,
}

/// One recording of a report.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct KeptRecording {
    /// Its name as given.
    pub file: String,
    /// Why it could not be read.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub error: Option<String>,
    /// Its figures.
    pub measurement: Option<Measurement>,
    /// Its evidence.
    pub evidence: Option<Evidence>,
}

/// A report of measurements: all that its page shows.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct MeasurementReport {
    /// Always [`REPORT_FORMAT`].
    pub format: String,
    /// Program and version that measured.
    pub program: String,
    /// When, RFC 3339.
    pub made: String,
    /// The bench.
    pub bench: Option<KeptText>,
    /// Options that bear on the figures, each with its value.
    pub options: Vec<(String, String)>,
    /// The recordings in the order given.
    pub recordings: Vec<KeptRecording>,
}

/// A text that holds no report of ours.
#[derive(Debug, Error)]
pub enum NoReport {
    /// No place for it.
    #[error("is no report of gaptone; a page written by `measure --report` was expected")]
    NotOurs,
    /// Its JSON cannot be read.
    #[error("its report cannot be read ({0}); the page was cut or changed, or comes from a later version")]
    Broken(#[from] serde_json::Error),
    /// A report of something else.
    #[error("holds a {0}; a page written by `measure --report` was expected")]
    Other(String),
}

/// Reads a page written by [`super::measurement()`] back.
///
/// # Errors
/// [`NoReport`] if the page is none of ours.
pub fn extract(page: &str) -> Result<MeasurementReport, NoReport> {
    let opening = format!("<script type=\"application/json\" id=\"{PLACE}\">");
    let start = page.rfind(&opening).ok_or(NoReport::NotOurs)? + opening.len();
    let rest = &page[start..];
    let json = &rest[..rest.find("</script>").ok_or(NoReport::NotOurs)?];
    let value: serde_json::Value = serde_json::from_str(json)?;
    match value.get("format").and_then(serde_json::Value::as_str) {
        Some(REPORT_FORMAT) => Ok(serde_json::from_value(value)?),
        Some(other) => Err(NoReport::Other(other.to_owned())),
        None => Err(NoReport::NotOurs),
    }
}
