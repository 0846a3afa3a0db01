//! The receiver, from the damped wave of a spark to the audio.
//!
//! ```text
//!  firing ─► burst ─► selectivity ─► AGC ─► detector ─► audio band ─► decimation ─► recorder
//!                         ▲
//!           noise, carrier with programme
//! ```
//!
//! Everything before the detector is complex baseband about the tuned frequency: the modulus of the complex number is the
//! envelope, its argument the phase against the tuned frequency. Amplitudes are relative to the envelope peak of one
//! isolated click of the reference voltage, which is 1.

mod agc;
mod audio_band;
mod burst;
mod carrier;
mod chain;
mod channel;
mod convolution;
mod decimator;
mod demodulator;
mod described;
mod detector;
mod draw;
mod hum;
mod linear_phase;
mod passage;
mod recorder;
mod selectivity;
mod settings;
mod turning;
mod weighting;

pub use agc::{Agc, AgcLaw, AgcSettings};
pub use audio_band::{AudioBand, AudioFilter};
pub use burst::{Burst, BurstError, decrement};
pub use carrier::{Carrier, CarrierSource, Programme, Sound};
pub(crate) use chain::{Chain, oversampling};
pub use channel::{Channel, ChannelState};
pub use decimator::Decimator;
pub use demodulator::Demodulator;
pub use detector::{Detector, DetectorKind, DetectorSettings};
pub(crate) use draw::{Draw, Normals, Stream};
pub use hum::{Hum, HumSource};
pub(crate) use recorder::Recorder;
pub use recorder::{DropOuts, RecorderSettings};
pub use selectivity::Selectivity;
pub(crate) use settings::within;
pub use settings::{
    DEFAULT_AUDIO_BAND_HZ, DEFAULT_BANDWIDTH_HZ, DEFAULT_CLICK_TO_NOISE, ReceiverError, ReceiverSettings,
};
pub use weighting::{Band, Instrument, QuasiPeak, Weighting, reading};

/// A complex number of the baseband.
pub type Complex = rustfft::num_complex::Complex<f64>;
