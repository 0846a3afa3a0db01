//! From the complex envelope to the voltage that goes to the audio stage, by the kind of detector.

use super::Complex;
use super::detector::{Detector, DetectorKind, DetectorSettings};
use super::weighting::{Instrument, QuasiPeak};
use std::f64::consts::PI;

/// A detector of any kind at work.
#[derive(Debug, Clone)]
pub struct Demodulator {
    /// Diode and capacitor, if they have time constants.
    diode: Option<Detector>,
    stage: Stage,
}

#[derive(Debug, Clone)]
enum Stage {
    Envelope,
    SquareLaw,
    Synchronous,
    Frequency { before: Complex, per_radian: f64 },
    QuasiPeak(QuasiPeak, Instrument),
    Average(Instrument),
}

impl Demodulator {
    /// A detector at rest, stepped by `step_s`, behind a channel of the given 6 dB bandwidth.
    #[must_use]
    pub fn new(settings: DetectorSettings, bandwidth_hz: f64, step_s: f64) -> Self {
        let timed = settings.charge_s > 0.0 || settings.discharge_s > 0.0;
        let stage = match settings.kind {
            DetectorKind::Envelope => Stage::Envelope,
            DetectorKind::SquareLaw => Stage::SquareLaw,
            DetectorKind::Synchronous => Stage::Synchronous,
            DetectorKind::Frequency => {
                Stage::Frequency { before: Complex::default(), per_radian: 1.0 / (PI * step_s * bandwidth_hz) }
            }
            DetectorKind::QuasiPeak(band) => {
                Stage::QuasiPeak(QuasiPeak::new(band, step_s), Instrument::new(band, step_s))
            }
            DetectorKind::Average(band) => Stage::Average(Instrument::new(band, step_s)),
        };
        Self { diode: timed.then(|| Detector::new(settings, step_s)), stage }
    }

    /// Output for the complex envelope of this step; `reference` is the unit phasor of the carrier to which a synchronous
    /// detector is locked.
    #[inline]
    pub fn step(&mut self, envelope: Complex, reference: Complex) -> f64 {
        self.step_at_level(envelope, envelope.norm_sqr().sqrt(), reference)
    }

    /// The same where the length of the envelope is known already.
    #[inline]
    pub(crate) fn step_at_level(&mut self, envelope: Complex, level: f64, reference: Complex) -> f64 {
        let diode = |level: f64, diode: &mut Option<Detector>| diode.as_mut().map_or(level, |diode| diode.step(level));
        match &mut self.stage {
            Stage::Envelope => diode(level, &mut self.diode),
            Stage::SquareLaw => diode(level * level, &mut self.diode),
            Stage::Synchronous => (envelope * reference.conj()).re,
            Stage::Frequency { before, per_radian } => {
                let turned = (envelope * before.conj()).arg();
                *before = envelope;
                turned * *per_radian
            }
            Stage::QuasiPeak(detector, instrument) => instrument.step(detector.step(level)),
            Stage::Average(instrument) => instrument.step(level),
        }
    }
}
