//! Results as text, JSON and CSV. Computes nothing.

mod measurement;

pub use measurement::{FORMAT, Measurement, Recording};
