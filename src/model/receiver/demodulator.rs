//! From the complex envelope to the voltage that goes to the audio stage, by the kind of detector.
//!
//! What comes out of a step is the mean over it.

use super::Complex;
use super::detector::{Detector, DetectorKind, DetectorSettings};
use super::passage::{PARTS, POINTS, Passage};
use super::weighting::{Instrument, QuasiPeak};
use std::f64::consts::PI;

/// Pieces of a step in which the phase of the envelope is followed where it comes near zero.
const PIECES: usize = 16;

/// A detector of any kind at work.
#[derive(Debug, Clone)]
pub struct Demodulator {
    /// Diode and capacitor, if they have time constants.
    diode: Option<Detector>,
    stage: Stage,
    before: Complex,
}

#[derive(Debug, Clone)]
enum Stage {
    Envelope,
    SquareLaw,
    Synchronous,
    Frequency { per_radian: f64 },
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
            DetectorKind::Frequency => Stage::Frequency { per_radian: 1.0 / (PI * step_s * bandwidth_hz) },
            DetectorKind::QuasiPeak(band) => {
                Stage::QuasiPeak(QuasiPeak::new(band, step_s), Instrument::new(band, step_s))
            }
            DetectorKind::Average(band) => Stage::Average(Instrument::new(band, step_s)),
        };
        Self { diode: timed.then(|| Detector::new(settings, step_s)), stage, before: Complex::default() }
    }

    /// Output for a step over which the complex envelope comes to `envelope` along a straight line; `reference` is the unit
    /// phasor of the carrier to which a synchronous detector is locked.
    pub fn step(&mut self, envelope: Complex, reference: Complex) -> f64 {
        let (from, way) = (self.before, envelope - self.before);
        self.before = envelope;
        let at = |part: usize| from + way * (part as f64 / PARTS as f64);
        let points = [from, at(PARTS / 4), at(PARTS / 2), at(PARTS * 3 / 4), envelope];
        self.passage(&Passage::new(points, &[], at), [reference; 3])
    }

    /// Output for a step of the envelope; the reference at its beginning, middle and end.
    #[inline]
    pub(crate) fn passage<F: Fn(usize) -> Complex>(
        &mut self,
        passage: &Passage<'_, F>,
        reference: [Complex; 3],
    ) -> f64 {
        match (&mut self.stage, &mut self.diode) {
            (Stage::Envelope, None) => passage.mean_length,
            (Stage::Envelope, Some(diode)) => diode.passage(passage, |length| length),
            (Stage::SquareLaw, None) => passage.mean(|_, z| z.norm_sqr()),
            (Stage::SquareLaw, Some(diode)) => diode.passage(passage, |length| length * length),
            (Stage::Synchronous, _) => {
                let [from, middle, to] = reference;
                // The reference turns by so little that the chord does between its three.
                let turned = |part: usize| match part * 2 / PARTS {
                    0 => from + (middle - from) * (2.0 * part as f64 / PARTS as f64),
                    _ => middle + (to - middle) * (2.0 * part as f64 / PARTS as f64 - 1.0),
                };
                passage.mean(|part, z| (z * turned(part).conj()).re)
            }
            (Stage::Frequency { per_radian }, _) => turned(passage) * *per_radian,
            (Stage::QuasiPeak(detector, instrument), _) => instrument.mean(detector.passage(passage)),
            (Stage::Average(instrument), _) => instrument.mean(passage.mean_length),
        }
    }
}

/// Angle by which the envelope turns in a step, rad.
fn turned<F: Fn(usize) -> Complex>(passage: &Passage<'_, F>) -> f64 {
    let angle = |from: Complex, to: Complex| (to * from.conj()).arg();
    if passage.smooth {
        return angle(passage.points[0], passage.points[POINTS - 1]);
    }
    let at = |piece: usize| passage.at(piece * PARTS / PIECES);
    (0..PIECES).map(|piece| angle(at(piece), at(piece + 1))).sum()
}
