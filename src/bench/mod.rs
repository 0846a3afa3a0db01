//! The description of a bench: TOML text to a checked [`Bench`]. The only room that knows TOML and units of text.
//!
//! Every value inside is in SI units with its standard uncertainty.

mod check;
mod dimension;
mod error;
mod format;
mod keys;
mod quantity;
mod read;
mod suggest;
mod syntax;
mod text;
mod unit;

pub use dimension::Dimension;
pub use error::{BenchError, BenchFault};
pub use format::{quantity_text, si, with_uncertainty};
pub use quantity::{Quantity, Tolerance};
pub use read::parse;
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
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
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

/// The receiver.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Receiver {
    /// Tuned frequency, Hz.
    pub tuned: Option<Quantity>,
    /// 6 dB bandwidth of the channel, Hz.
    pub bandwidth: Option<Quantity>,
    /// Audio band, Hz: low and high corner.
    pub audio_band: Option<(Quantity, Quantity)>,
    /// Rms noise in the channel against the peak of a click, as an amplitude ratio (text: dB).
    pub noise: Option<Quantity>,
    /// Co-channel carrier against the peak of a click, as an amplitude ratio (text: dB or a bare ratio).
    pub carrier: Option<Quantity>,
    /// Distance of that carrier from the tuned frequency, Hz.
    pub carrier_offset: Option<Quantity>,
    /// Mains hum in the audio against the peak of a click, as an amplitude ratio.
    pub hum: Option<Quantity>,
    /// Frequency of the hum, Hz.
    pub hum_frequency: Option<Quantity>,
}
