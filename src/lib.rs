//! Gaptone turns receiver audio back into the firing rate, the jitter and the gap voltage of a
//! relaxation-fired spark gap, and goes forward from bench settings to the audio a receiver would give.
//!
//! ```text
//!  bench ──► model ──► audio ──► file, sound card
//!              ▲          │
//!              │ firings  ▼
//!  report ◄── voltage ◄── rhythm ◄── clicks
//! ```
//!
//! The rooms, in the order the data takes: [`mod@bench`] reads the description of a bench; [`model`] holds the
//! laws (charging, breakdown, receiver) and goes forward; [`audio`] carries samples; [`clicks`] finds clicks;
//! [`rhythm`] finds the trains among them and their statistics; [`voltage`] inverts the charging law;
//! [`watch`] does all that with a gap as it runs; [`report`] says it to people and machines. [`evidence`] is what a measurement can be checked by, [`plot`] and [`pictures`] draw
//! it, [`page`] makes pages of it. [`cli`] is the only room that knows files, terminals and devices.
//!
//! Everything inside is in SI units; a name carries its unit (`period_s`, `gap_voltage_v`).

pub mod audio;
pub mod bench;
pub mod calibrate;
pub mod cli;
pub mod clicks;
pub mod estimate;
pub mod evidence;
pub mod firing;
pub mod measure;
pub mod model;
pub mod page;
pub mod pictures;
pub mod plot;
pub mod predict;
pub mod report;
pub mod rhythm;
pub mod trend;
pub mod uncertainty;
pub mod voltage;
pub mod watch;
