//! The keys of a bench file: where each value goes, what it measures, which values make sense.

use super::dimension::Dimension;
use super::quantity::Quantity;
use super::{AgcWord, Bench, DetectorWord, Electrodes, PolarityWord, ProgrammeWord, SelectivityWord, format};

/// Which SI values a key allows.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Allowed {
    /// Any finite value.
    Any,
    /// Above zero.
    Positive,
    /// Zero or above.
    NotNegative,
    /// Zero or above and below one.
    BelowOne,
    /// Zero to one.
    UpToOne,
    /// A whole number from 1 to the given one.
    Count(u8),
    /// Between −1 and 1, both excluded: at ±1 the spread would never settle.
    Memory,
}

impl Allowed {
    /// True if the value and all of its tolerance lie in the allowed range.
    pub(super) fn holds(self, quantity: &Quantity) -> bool {
        let value = quantity.value;
        match self {
            Self::Any => true,
            // A resistance of 1 MΩ ± 120 % is as wrong as a negative one.
            Self::Positive => value > 0.0 && quantity.u() < value && quantity.limit() < value,
            Self::NotNegative => value >= 0.0,
            Self::BelowOne => (0.0..1.0).contains(&value),
            Self::UpToOne => (0.0..=1.0).contains(&value),
            Self::Count(most) => value.fract() == 0.0 && (1.0..=f64::from(most)).contains(&value),
            Self::Memory => value.abs() < 1.0,
        }
    }

    /// The allowed range in words, for a quantity outside of it.
    pub(super) fn words(self, quantity: &Quantity, dimension: Dimension) -> String {
        let zero = match dimension {
            Dimension::Temperature => "0 K (-273.15 °C)".to_owned(),
            Dimension::Fraction => "0 %".to_owned(),
            other => format::si(0.0, other.symbol(), 1),
        };
        match self {
            Self::Any => "any finite value".to_owned(),
            Self::Positive if quantity.value > 0.0 => format!("above {zero} with all of its tolerance"),
            Self::Positive => format!("above {zero}"),
            Self::NotNegative => format!("{zero} or above"),
            Self::BelowOne => "0 % or above and below 100 %".to_owned(),
            Self::UpToOne => "0 % to 100 %".to_owned(),
            Self::Count(most) => format!("a whole number from 1 to {most}"),
            Self::Memory => "between -1 and 1, both excluded".to_owned(),
        }
    }
}

/// Where a quantity is stored.
pub(super) type Slot = fn(&mut Bench) -> &mut Option<Quantity>;

/// A word that a key takes, and how it is stored.
pub(super) type Word = (&'static str, fn(&mut Bench));

/// What a key holds.
#[derive(Debug, Clone, Copy)]
pub(super) enum Kind {
    /// Free text.
    Title,
    /// One of some words.
    Word(&'static [Word]),
    /// A list of voltages.
    Peaks,
    /// Two frequencies with `..` between.
    Band,
    /// One quantity.
    Quantity(Dimension, Allowed, Slot),
}

/// One key of the file.
#[derive(Debug, Clone, Copy)]
pub(super) struct Key {
    /// Its section; empty at the top of the file.
    pub(super) section: &'static str,
    /// Its name.
    pub(super) name: &'static str,
    /// A right value, as it stands in the file.
    pub(super) example: &'static str,
    /// What it holds.
    pub(super) kind: Kind,
}

const fn key(section: &'static str, name: &'static str, example: &'static str, kind: Kind) -> Key {
    Key { section, name, example, kind }
}

/// The sections, in the order of the handbook.
pub(super) const SECTIONS: [&str; 6] = ["supply", "charging", "gap", "air", "tank", "receiver"];

use Allowed::{Any, BelowOne, Count, Memory, NotNegative, Positive, UpToOne};
use Dimension as D;
use Kind::Quantity as Q;

#[rustfmt::skip]
static ELECTRODES: [Word; 3] = [
    ("plane", |b| b.gap.electrodes = Some(Electrodes::Plane)),
    ("spheres", |b| b.gap.electrodes = Some(Electrodes::Spheres)),
    ("points", |b| b.gap.electrodes = Some(Electrodes::Points)),
];
#[rustfmt::skip]
static SELECTIVITIES: [Word; 5] = [
    ("coupled pairs", |b| b.receiver.selectivity = Some(SelectivityWord::CoupledPairs)),
    ("butterworth", |b| b.receiver.selectivity = Some(SelectivityWord::Butterworth)),
    ("synchronous", |b| b.receiver.selectivity = Some(SelectivityWord::Synchronous)),
    ("gaussian", |b| b.receiver.selectivity = Some(SelectivityWord::Gaussian)),
    ("flat", |b| b.receiver.selectivity = Some(SelectivityWord::Flat)),
];
#[rustfmt::skip]
static DETECTORS: [Word; 8] = [
    ("envelope", |b| b.receiver.detector = Some(DetectorWord::Envelope)),
    ("square law", |b| b.receiver.detector = Some(DetectorWord::SquareLaw)),
    ("synchronous", |b| b.receiver.detector = Some(DetectorWord::Synchronous)),
    ("fm", |b| b.receiver.detector = Some(DetectorWord::Fm)),
    ("quasi-peak A", |b| b.receiver.detector = Some(DetectorWord::QuasiPeakA)),
    ("quasi-peak B", |b| b.receiver.detector = Some(DetectorWord::QuasiPeakB)),
    ("average A", |b| b.receiver.detector = Some(DetectorWord::AverageA)),
    ("average B", |b| b.receiver.detector = Some(DetectorWord::AverageB)),
];
#[rustfmt::skip]
static AGC_LAWS: [Word; 4] = [
    ("off", |b| b.receiver.agc = Some(AgcWord::Off)),
    ("forward", |b| b.receiver.agc = Some(AgcWord::Forward)),
    ("feedback", |b| b.receiver.agc = Some(AgcWord::Feedback)),
    ("level dependent", |b| b.receiver.agc = Some(AgcWord::LevelDependent)),
];
#[rustfmt::skip]
static PROGRAMMES: [Word; 3] = [
    ("none", |b| b.receiver.programme = Some(ProgrammeWord::None)),
    ("tone", |b| b.receiver.programme = Some(ProgrammeWord::Tone)),
    ("speech", |b| b.receiver.programme = Some(ProgrammeWord::Speech)),
];
#[rustfmt::skip]
static POLARITIES: [Word; 2] = [
    ("normal", |b| b.receiver.polarity = Some(PolarityWord::Normal)),
    ("inverted", |b| b.receiver.polarity = Some(PolarityWord::Inverted)),
];

/// Every key that a bench file may hold.
#[rustfmt::skip]
static KEYS: [Key; 71] = [
    key("", "title", "\"North bench\"", Kind::Title),
    key("supply", "voltage", "\"9.2 kV ± 1 %\"", Q(D::Voltage, Positive, |b| &mut b.supply.voltage)),
    key("supply", "ripple", "\"1 %\"", Q(D::Fraction, BelowOne, |b| &mut b.supply.ripple)),
    key("supply", "ripple_frequency", "\"100 Hz\"", Q(D::Frequency, Positive, |b| &mut b.supply.ripple_frequency)),
    key("supply", "current_limit", "\"2 mA\"", Q(D::Current, Positive, |b| &mut b.supply.current_limit)),
    key("charging", "resistance", "\"1.2 MΩ ± 1 %\"", Q(D::Resistance, Positive, |b| &mut b.charging.resistance)),
    key("charging", "current", "\"0.8 mA\"", Q(D::Current, Positive, |b| &mut b.charging.current)),
    key("charging", "time_constant", "\"8.2 ms (u 0.4 %)\"", Q(D::Time, Positive, |b| &mut b.charging.time_constant)),
    key("charging", "capacitance", "\"6.8 nF ± 5 %\"", Q(D::Capacitance, Positive, |b| &mut b.charging.capacitance)),
    key("charging", "leakage", "\"100 MΩ\"", Q(D::Resistance, Positive, |b| &mut b.charging.leakage)),
    key("gap", "voltage", "\"7.1 kV\"", Q(D::Voltage, Positive, |b| &mut b.gap.voltage)),
    key("gap", "electrodes", "\"spheres\"", Kind::Word(&ELECTRODES)),
    key("gap", "diameter", "\"25 mm\"", Q(D::Length, Positive, |b| &mut b.gap.diameter)),
    key("gap", "spacing", "\"2.2 mm\"", Q(D::Length, Positive, |b| &mut b.gap.spacing)),
    key("gap", "spread", "\"1.5 %\"", Q(D::Fraction, BelowOne, |b| &mut b.gap.spread)),
    key("gap", "memory", "0.4", Q(D::Number, Memory, |b| &mut b.gap.memory)),
    key("gap", "drift", "\"0.5 %/min\"", Q(D::Drift, Any, |b| &mut b.gap.drift)),
    key("gap", "residual_voltage", "\"150 V\"", Q(D::Voltage, Any, |b| &mut b.gap.residual_voltage)),
    key("gap", "recovery_time", "\"1 ms\"", Q(D::Time, NotNegative, |b| &mut b.gap.recovery_time)),
    key("gap", "recovery_depth", "\"90 %\"", Q(D::Fraction, UpToOne, |b| &mut b.gap.recovery_depth)),
    key("gap", "statistical_lag", "\"0.2 ms\"", Q(D::Time, NotNegative, |b| &mut b.gap.statistical_lag)),
    key("gap", "spark_resistance", "\"0.3 ohm\"", Q(D::Resistance, NotNegative, |b| &mut b.gap.spark_resistance)),
    key("gap", "arc_drop", "\"40 V\"", Q(D::Voltage, NotNegative, |b| &mut b.gap.arc_drop)),
    key("gap", "conduction_time", "\"12 us\"", Q(D::Time, NotNegative, |b| &mut b.gap.conduction_time)),
    key("gap", "stray_capacitance", "\"2 pF\"", Q(D::Capacitance, NotNegative, |b| &mut b.gap.stray_capacitance)),
    key("air", "temperature", "\"21 °C\"", Q(D::Temperature, Positive, |b| &mut b.air.temperature)),
    key("air", "pressure", "\"1002 hPa\"", Q(D::Pressure, Positive, |b| &mut b.air.pressure)),
    key("air", "humidity", "\"45 %\"", Q(D::Fraction, UpToOne, |b| &mut b.air.humidity)),
    key("tank", "frequency", "\"1.8 MHz\"", Q(D::Frequency, Positive, |b| &mut b.tank.frequency)),
    key("tank", "quality", "12", Q(D::Number, Positive, |b| &mut b.tank.quality)),
    key("tank", "inductance", "\"1.1 uH\"", Q(D::Inductance, Positive, |b| &mut b.tank.inductance)),
    key("tank", "capacitance", "\"1.8 nF\"", Q(D::Capacitance, Positive, |b| &mut b.tank.capacitance)),
    key("tank", "resistance", "\"0.9 ohm\"", Q(D::Resistance, Positive, |b| &mut b.tank.resistance)),
    key("tank", "lead_inductance", "\"60 nH\"", Q(D::Inductance, NotNegative, |b| &mut b.tank.lead_inductance)),
    key("tank", "peaks", "[\"240 V\", \"170 V\", \"121 V\"]", Kind::Peaks),
    key("tank", "peak_spacing", "\"0.55 us\"", Q(D::Time, Positive, |b| &mut b.tank.peak_spacing)),
    key("receiver", "tuned", "\"1.8 MHz\"", Q(D::Frequency, Positive, |b| &mut b.receiver.tuned)),
    key("receiver", "bandwidth", "\"6 kHz\"", Q(D::Frequency, Positive, |b| &mut b.receiver.bandwidth)),
    key("receiver", "selectivity", "\"coupled pairs\"", Kind::Word(&SELECTIVITIES)),
    key("receiver", "filter_order", "2", Q(D::Number, Count(32), |b| &mut b.receiver.filter_order)),
    key("receiver", "filter_edge", "\"30 %\"", Q(D::Fraction, Positive, |b| &mut b.receiver.filter_edge)),
    key("receiver", "audio_band", "\"120 Hz .. 3400 Hz\"", Kind::Band),
    key("receiver", "audio_low_poles", "2", Q(D::Number, Count(2), |b| &mut b.receiver.audio_low_poles)),
    key("receiver", "audio_high_poles", "4", Q(D::Number, Count(8), |b| &mut b.receiver.audio_high_poles)),
    key("receiver", "de_emphasis", "\"75 us\"", Q(D::Time, NotNegative, |b| &mut b.receiver.de_emphasis)),
    key("receiver", "noise", "\"-30 dB\"", Q(D::Level, NotNegative, |b| &mut b.receiver.noise)),
    key("receiver", "carrier", "\"1.5\"", Q(D::Ratio, NotNegative, |b| &mut b.receiver.carrier)),
    key("receiver", "carrier_offset", "\"400 Hz\"", Q(D::Frequency, Any, |b| &mut b.receiver.carrier_offset)),
    key("receiver", "programme", "\"speech\"", Kind::Word(&PROGRAMMES)),
    key("receiver", "programme_frequency", "\"1 kHz\"", Q(D::Frequency, Positive, |b| &mut b.receiver.programme_frequency)),
    key("receiver", "programme_depth", "\"60 %\"", Q(D::Fraction, UpToOne, |b| &mut b.receiver.programme_depth)),
    key("receiver", "detector", "\"envelope\"", Kind::Word(&DETECTORS)),
    key("receiver", "detector_charge", "\"1 us\"", Q(D::Time, NotNegative, |b| &mut b.receiver.detector_charge)),
    key("receiver", "detector_discharge", "\"50 us\"", Q(D::Time, NotNegative, |b| &mut b.receiver.detector_discharge)),
    key("receiver", "agc", "\"feedback\"", Kind::Word(&AGC_LAWS)),
    key("receiver", "agc_attack", "\"3 ms\"", Q(D::Time, NotNegative, |b| &mut b.receiver.agc_attack)),
    key("receiver", "agc_decay", "\"300 ms\"", Q(D::Time, NotNegative, |b| &mut b.receiver.agc_decay)),
    key("receiver", "agc_threshold", "\"-10 dB\"", Q(D::Level, Positive, |b| &mut b.receiver.agc_threshold)),
    key("receiver", "agc_margin", "\"25 %\"", Q(D::Level, NotNegative, |b| &mut b.receiver.agc_margin)),
    key("receiver", "agc_gain", "\"20 dB\"", Q(D::Ratio, Positive, |b| &mut b.receiver.agc_gain)),
    key("receiver", "hum", "\"30 %\"", Q(D::Level, NotNegative, |b| &mut b.receiver.hum)),
    key("receiver", "hum_frequency", "\"50 Hz\"", Q(D::Frequency, Positive, |b| &mut b.receiver.hum_frequency)),
    key("receiver", "hum_buzz", "\"50 %\"", Q(D::Ratio, NotNegative, |b| &mut b.receiver.hum_buzz)),
    key("receiver", "polarity", "\"inverted\"", Kind::Word(&POLARITIES)),
    key("receiver", "recorder_level", "\"-6 dB\"", Q(D::Level, Positive, |b| &mut b.receiver.recorder_level)),
    key("receiver", "click_level", "\"120 %\"", Q(D::Level, Positive, |b| &mut b.receiver.click_level)),
    key("receiver", "recorder_noise", "\"-70 dB\"", Q(D::Level, NotNegative, |b| &mut b.receiver.recorder_noise)),
    key("receiver", "recorder_rate", "\"8 kHz\"", Q(D::Frequency, Positive, |b| &mut b.receiver.recorder_rate)),
    key("receiver", "recorder_bits", "8", Q(D::Number, Count(24), |b| &mut b.receiver.recorder_bits)),
    key("receiver", "dropout_rate", "\"0.5 Hz\"", Q(D::Frequency, NotNegative, |b| &mut b.receiver.dropout_rate)),
    key("receiver", "dropout_time", "\"50 ms\"", Q(D::Time, Positive, |b| &mut b.receiver.dropout_time)),
];

/// The keys of a section.
pub(super) fn of_section(section: &str) -> impl Iterator<Item = &'static Key> + '_ {
    KEYS.iter().filter(move |key| key.section == section)
}

/// Sections that have a key of this name.
pub(super) fn sections_with(name: &str) -> Vec<&'static str> {
    SECTIONS.into_iter().filter(|section| of_section(section).any(|key| key.name == name)).collect()
}
