//! From the words and quantities of a bench to the settings of each part of the receiver.

use super::{
    AgcLaw, AgcSettings, AudioBand, Band, Carrier, DetectorKind, DetectorSettings, Hum, Programme, Selectivity,
};
use crate::bench::{AgcWord, DetectorWord, PolarityWord, ProgrammeWord, Quantity, Receiver, SelectivityWord};

/// Buzz that goes with hum from a bench: some second and higher harmonics, as a poorly smoothed rectifier gives.
const DEFAULT_BUZZ: f64 = 0.5;
/// Mains frequency of hum from a bench that gives none, Hz.
const DEFAULT_HUM_HZ: f64 = 50.0;
/// Tone of a programme: a standard test modulation is 1 kHz at 30 %.
const DEFAULT_TONE_HZ: f64 = 1000.0;
const DEFAULT_TONE_DEPTH: f64 = 0.3;
/// Depth of speech at its loudest (common practice: a broadcast is kept near full modulation).
const DEFAULT_SPEECH_DEPTH: f64 = 0.8;

fn value(quantity: Option<Quantity>, default: f64) -> f64 {
    quantity.map_or(default, |q| q.value)
}

/// Edge of a flat filter, %: a ceramic filter of the better kind (common practice).
const DEFAULT_EDGE: f64 = 0.3;

/// A count that the reading of the bench has found to be a small whole number.
fn count(quantity: Option<Quantity>, default: u8) -> u8 {
    quantity.map_or(default, |q| q.value.round() as u8)
}

pub(super) fn selectivity(receiver: &Receiver) -> Selectivity {
    let order = |default| count(receiver.filter_order, default);
    match receiver.selectivity {
        None | Some(SelectivityWord::CoupledPairs) => Selectivity::CoupledPairs { pairs: order(2) },
        Some(SelectivityWord::Butterworth) => Selectivity::Butterworth { poles: order(4) },
        Some(SelectivityWord::Synchronous) => Selectivity::Synchronous { circuits: order(2) },
        Some(SelectivityWord::Flat) => {
            Selectivity::Flat { edge_percent: (100.0 * value(receiver.filter_edge, DEFAULT_EDGE)).round() as u8 }
        }
        Some(SelectivityWord::Gaussian) => match receiver.filter_order {
            None => Selectivity::gaussian(),
            Some(_) => Selectivity::Synchronous { circuits: order(5) },
        },
    }
}

pub(super) fn carrier(receiver: &Receiver) -> Option<Carrier> {
    let depth = |default| value(receiver.programme_depth, default);
    // A tone or a depth without a kind asks for a programme all the same.
    let asked = match (receiver.programme_frequency, receiver.programme_depth) {
        (Some(_), _) => ProgrammeWord::Tone,
        (None, Some(_)) => ProgrammeWord::Speech,
        (None, None) => ProgrammeWord::None,
    };
    let programme = match receiver.programme.unwrap_or(asked) {
        ProgrammeWord::None => None,
        ProgrammeWord::Tone => Some(Programme::Tone {
            frequency_hz: value(receiver.programme_frequency, DEFAULT_TONE_HZ),
            depth: depth(DEFAULT_TONE_DEPTH),
        }),
        ProgrammeWord::Speech => Some(Programme::Speech { depth: depth(DEFAULT_SPEECH_DEPTH) }),
    };
    receiver.carrier.map(|carrier| Carrier {
        amplitude: carrier.value,
        offset_hz: value(receiver.carrier_offset, 0.0),
        programme,
    })
}

pub(super) fn agc(receiver: &Receiver) -> Option<AgcSettings> {
    let described =
        [receiver.agc_attack, receiver.agc_decay, receiver.agc_threshold, receiver.agc_margin, receiver.agc_gain];
    let law = match receiver.agc {
        Some(AgcWord::Off) => return None,
        None if described.iter().all(Option::is_none) => return None,
        None | Some(AgcWord::Feedback) => AgcLaw::Feedback,
        Some(AgcWord::Forward) => AgcLaw::Forward,
        Some(AgcWord::LevelDependent) => AgcLaw::LevelDependent,
    };
    let default = AgcSettings::default();
    Some(AgcSettings {
        law,
        attack_s: value(receiver.agc_attack, default.attack_s),
        decay_s: value(receiver.agc_decay, default.decay_s),
        threshold: value(receiver.agc_threshold, default.threshold),
        margin: value(receiver.agc_margin, default.margin),
        greatest_gain: value(receiver.agc_gain, default.greatest_gain),
    })
}

pub(super) fn detector(receiver: &Receiver) -> DetectorSettings {
    let kind = match receiver.detector {
        None | Some(DetectorWord::Envelope) => DetectorKind::Envelope,
        Some(DetectorWord::SquareLaw) => DetectorKind::SquareLaw,
        Some(DetectorWord::Synchronous) => DetectorKind::Synchronous,
        Some(DetectorWord::Fm) => DetectorKind::Frequency,
        Some(DetectorWord::QuasiPeakA) => DetectorKind::QuasiPeak(Band::A),
        Some(DetectorWord::QuasiPeakB) => DetectorKind::QuasiPeak(Band::B),
        Some(DetectorWord::AverageA) => DetectorKind::Average(Band::A),
        Some(DetectorWord::AverageB) => DetectorKind::Average(Band::B),
    };
    DetectorSettings {
        kind,
        charge_s: value(receiver.detector_charge, 0.0),
        discharge_s: value(receiver.detector_discharge, 0.0),
    }
}

pub(super) fn audio_band(receiver: &Receiver, mut band: AudioBand) -> AudioBand {
    if let Some((low, high)) = receiver.audio_band {
        band.low_hz = low.value;
        band.high_hz = high.value;
    }
    band.low_poles = count(receiver.audio_low_poles, band.low_poles);
    band.high_poles = count(receiver.audio_high_poles, band.high_poles);
    band
}

pub(super) fn hum(receiver: &Receiver) -> Option<Hum> {
    receiver.hum.map(|hum| Hum {
        amplitude: hum.value,
        frequency_hz: value(receiver.hum_frequency, DEFAULT_HUM_HZ),
        buzz: value(receiver.hum_buzz, DEFAULT_BUZZ),
    })
}

pub(super) fn inverted(receiver: &Receiver) -> bool {
    receiver.polarity == Some(PolarityWord::Inverted)
}
