//! The description of a bench: TOML text to a checked [`Bench`]. The only room that knows TOML and units of text.
//!
//! Every value inside is in SI units with its standard uncertainty.

mod amend;
mod check;
mod dimension;
mod error;
mod format;
mod keys;
mod quantity;
mod read;
mod series;
mod set;
mod suggest;
mod syntax;
mod text;
mod unit;

pub use amend::{Amendment, amended};
pub use dimension::Dimension;
pub use error::{BenchError, BenchFault};
pub use format::{quantity_text, si, signed, with_uncertainty};
pub use quantity::{Quantity, Tolerance};
pub use read::parse;
pub use series::{LayoutWord, Motion, Outage, RATE, SeriesDescription, SeriesEntry, SeriesFaults, parse_series};
pub use set::{dimension_of, example_of, set, set_quantity};
pub use text::{QuantityError, parse_quantity, parse_range};

/// A bench as described; a part that the text does not mention is absent.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Bench {
    /// Free title.
    pub title: Option<String>,
    /// The high-voltage supply.
    pub supply: Supply,
    /// The charging circuit.
    pub charging: Charging,
    /// The gap.
    pub gap: Gap,
    /// The air in it.
    pub air: Air,
    /// The tank that rings.
    pub tank: Tank,
    /// The receiver.
    pub receiver: Receiver,
}

/// The high-voltage supply.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Supply {
    /// Open-circuit voltage, V.
    pub voltage: Option<Quantity>,
    /// Ripple, peak, as a fraction of the voltage.
    pub ripple: Option<Quantity>,
    /// Ripple frequency, Hz.
    pub ripple_frequency: Option<Quantity>,
    /// Greatest current that it gives, A.
    pub current_limit: Option<Quantity>,
}

/// The charging circuit.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Charging {
    /// Charging resistance, Ω.
    pub resistance: Option<Quantity>,
    /// Charging current of a constant-current supply, A (instead of a resistance).
    pub current: Option<Quantity>,
    /// Time constant R·C, s (instead of a resistance).
    pub time_constant: Option<Quantity>,
    /// Capacitance, F.
    pub capacitance: Option<Quantity>,
    /// Resistance of anything across the capacitor, Ω.
    pub leakage: Option<Quantity>,
}

/// Shape of the electrodes.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize, serde::Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Electrodes {
    /// Uniform field.
    Plane,
    /// Two equal spheres.
    Spheres,
    /// Points.
    Points,
}

/// The gap.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Gap {
    /// Breakdown voltage as stated, V.
    pub voltage: Option<Quantity>,
    /// Electrode shape.
    pub electrodes: Option<Electrodes>,
    /// Diameter of the spheres or points, m.
    pub diameter: Option<Quantity>,
    /// Spacing, m.
    pub spacing: Option<Quantity>,
    /// Standard deviation of the breakdown voltage from firing to firing, as a fraction.
    pub spread: Option<Quantity>,
    /// First-order memory of the breakdown voltage from firing to firing, −1..1.
    pub memory: Option<Quantity>,
    /// Relative change of the breakdown voltage with time, 1/s.
    pub drift: Option<Quantity>,
    /// Voltage left on the capacitor after a spark, V (either sign).
    pub residual_voltage: Option<Quantity>,
    /// Time constant of recovery after a spark, s.
    pub recovery_time: Option<Quantity>,
    /// Share of its strength that the gap lacks right after a spark.
    pub recovery_depth: Option<Quantity>,
    /// Mean wait for the first electron after the breakdown voltage is reached, s.
    pub statistical_lag: Option<Quantity>,
    /// Resistance of the gap while it conducts, Ω.
    pub spark_resistance: Option<Quantity>,
    /// Voltage across the arc while the gap conducts, V.
    pub arc_drop: Option<Quantity>,
    /// Time for which the gap conducts, s.
    pub conduction_time: Option<Quantity>,
    /// Capacitance of the gap itself, F.
    pub stray_capacitance: Option<Quantity>,
}

/// The air.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Air {
    /// Temperature, K.
    pub temperature: Option<Quantity>,
    /// Pressure, Pa.
    pub pressure: Option<Quantity>,
    /// Relative humidity, as a fraction.
    pub humidity: Option<Quantity>,
}

/// The tank.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Tank {
    /// Frequency, Hz.
    pub frequency: Option<Quantity>,
    /// Quality factor.
    pub quality: Option<Quantity>,
    /// Inductance, H.
    pub inductance: Option<Quantity>,
    /// Capacitance, F.
    pub capacitance: Option<Quantity>,
    /// Loss resistance, Ω.
    pub resistance: Option<Quantity>,
    /// Lead inductance, H.
    pub lead_inductance: Option<Quantity>,
    /// Peaks read off a picture of the ring, V.
    pub peaks: Option<Vec<Quantity>>,
    /// Time between neighbouring peaks, s.
    pub peak_spacing: Option<Quantity>,
}

/// Circuits that select the channel.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum SelectivityWord {
    /// Critically coupled pairs.
    CoupledPairs,
    /// Butterworth.
    Butterworth,
    /// Equal single circuits.
    Synchronous,
    /// Nearly Gaussian.
    Gaussian,
    /// Flat with steep edges.
    Flat,
}

/// Kind of detector.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum DetectorWord {
    /// Envelope.
    Envelope,
    /// Square of the envelope.
    SquareLaw,
    /// In phase with the carrier.
    Synchronous,
    /// Frequency discriminator.
    Fm,
    /// Quasi-peak, CISPR 16-1-1 band A.
    QuasiPeakA,
    /// Quasi-peak, band B.
    QuasiPeakB,
    /// Average, band A.
    AverageA,
    /// Average, band B.
    AverageB,
}

/// Law of the automatic gain control.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum AgcWord {
    /// None.
    Off,
    /// A level detector ahead of the gain.
    Forward,
    /// A loop with fixed time constants.
    Feedback,
    /// A loop whose time constants depend on the level.
    LevelDependent,
}

/// Programme of the carrier.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ProgrammeWord {
    /// None.
    None,
    /// A tone.
    Tone,
    /// Something like speech.
    Speech,
}

/// Sign of a rise of the envelope in the audio.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum PolarityWord {
    /// Positive.
    Normal,
    /// Negative.
    Inverted,
}

/// The receiver and the recorder behind it.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Receiver {
    /// Tuned frequency, Hz.
    pub tuned: Option<Quantity>,
    /// 6 dB bandwidth of the channel, Hz.
    pub bandwidth: Option<Quantity>,
    /// Circuits of the channel.
    pub selectivity: Option<SelectivityWord>,
    /// Pairs, poles or circuits of the channel, by its kind.
    pub filter_order: Option<Quantity>,
    /// Width of the edges of a flat channel, as a fraction of the bandwidth.
    pub filter_edge: Option<Quantity>,
    /// Audio band, Hz: low and high corner.
    pub audio_band: Option<(Quantity, Quantity)>,
    /// Poles of the low cut of the audio.
    pub audio_low_poles: Option<Quantity>,
    /// Poles of the high cut of the audio.
    pub audio_high_poles: Option<Quantity>,
    /// Time constant of the de-emphasis, s.
    pub de_emphasis: Option<Quantity>,
    /// Rms noise in the channel against the peak of a click, as an amplitude ratio (text: dB).
    pub noise: Option<Quantity>,
    /// Co-channel carrier against the peak of a click, as an amplitude ratio (text: dB or a bare ratio).
    pub carrier: Option<Quantity>,
    /// Distance of that carrier from the tuned frequency, Hz.
    pub carrier_offset: Option<Quantity>,
    /// Its programme.
    pub programme: Option<ProgrammeWord>,
    /// Frequency of a programme that is a tone, Hz.
    pub programme_frequency: Option<Quantity>,
    /// Depth of modulation at the loudest, as a fraction.
    pub programme_depth: Option<Quantity>,
    /// Kind of detector.
    pub detector: Option<DetectorWord>,
    /// Charge time constant of the detector, s.
    pub detector_charge: Option<Quantity>,
    /// Discharge time constant of the detector, s.
    pub detector_discharge: Option<Quantity>,
    /// Law of the AGC.
    pub agc: Option<AgcWord>,
    /// Attack time constant of the AGC, s.
    pub agc_attack: Option<Quantity>,
    /// Decay time constant of the AGC, s.
    pub agc_decay: Option<Quantity>,
    /// Level to which the AGC regulates against the peak of a click, as an amplitude ratio.
    pub agc_threshold: Option<Quantity>,
    /// Level above that at which the attack sets in, against the peak of a click, as an amplitude ratio.
    pub agc_margin: Option<Quantity>,
    /// Greatest gain of the AGC, as an amplitude ratio.
    pub agc_gain: Option<Quantity>,
    /// Mains hum in the audio against the peak of a click, as an amplitude ratio.
    pub hum: Option<Quantity>,
    /// Frequency of the hum, Hz.
    pub hum_frequency: Option<Quantity>,
    /// Harmonics of the hum against its fundamental, as an amplitude ratio.
    pub hum_buzz: Option<Quantity>,
    /// Sign of the clicks.
    pub polarity: Option<PolarityWord>,
    /// Loudest peak of the recording in full scale, as an amplitude ratio.
    pub recorder_level: Option<Quantity>,
    /// One isolated click in full scale, as an amplitude ratio (instead of the loudest peak).
    pub click_level: Option<Quantity>,
    /// Rms noise of the recorder in full scale, as an amplitude ratio.
    pub recorder_noise: Option<Quantity>,
    /// Sample rate of the recorder, Hz.
    pub recorder_rate: Option<Quantity>,
    /// Bits of the recorder's converter.
    pub recorder_bits: Option<Quantity>,
    /// Drop-outs of the recorder per second, Hz.
    pub dropout_rate: Option<Quantity>,
    /// Length of a drop-out, s.
    pub dropout_time: Option<Quantity>,
}
