//! Results as text, JSON and CSV. Computes nothing: it rounds, names units and leaves out what is not finite.

mod budget;
mod calibration;
mod comparison;
mod difference;
mod events;
mod figure;
mod json;
mod measurement;
mod sketch;
mod text;
mod trend;

pub use calibration::calibration_text;
pub use comparison::{COMPARISON_FORMAT, Compared, Comparison, compare, comparison_text};
pub use difference::{DIFFERENCE_FORMAT, Difference, Differences, differences, differences_text};
pub use events::{EVENTS_HEADER, write_event};
pub use figure::Figure;
pub use json::{Failure, Report, WithTruth, finite, to_json};
pub use measurement::{FORMAT, Measurement, Recording};
pub use sketch::sketch;
pub use text::{HIGH_VOLTAGE_CAUTION, figure_rows, measurement_text, recording_line, wrapped};
pub use trend::{TREND_HEADER, trend_rows, trend_text, write_trend_csv};
