//! The kinds of detector, and the envelope detector: a diode that charges a capacitor, which a resistor discharges.
//!
//! Without time constants it follows the envelope. A discharge that is slow against the modulation leaves the envelope on its
//! way down (diagonal clipping; a tone of depth m and angular frequency ω is followed while RC ≤ √(1 − m²)/(m·ω), common
//! practice). While the diode conducts, dU/dt = (A − U)/τ_charge; while it does not, dU/dt = −U/τ_discharge; where the envelope
//! A falls more slowly than the discharge, U slides along it. Each is solved exactly for an envelope that is a polynomial
//! through five values of one internal step; a step in which one gives way to another is taken in pieces.

use super::Complex;
use super::passage::{PARTS, POINTS, Passage};
use super::weighting::Band;
use serde::{Deserialize, Serialize};

/// What turns the channel into audio.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", tag = "kind", content = "band")]
pub enum DetectorKind {
    /// The modulus of the complex envelope.
    #[default]
    Envelope,
    /// Its square.
    SquareLaw,
    /// The part in phase with the carrier, to which the detector is locked; without a carrier, with the tuned frequency.
    Synchronous,
    /// Limiter and frequency discriminator: an offset of half the bandwidth gives 1.
    Frequency,
    /// Quasi-peak detector and indicating instrument of CISPR 16-1-1. Behind the audio band little of it is left: it is there
    /// to see levels, with an open low end.
    QuasiPeak(Band),
    /// Linear average and the same instrument.
    Average(Band),
}

/// Kind and time constants of the detector.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
pub struct DetectorSettings {
    /// Kind.
    #[serde(flatten)]
    pub kind: DetectorKind,
    /// Time constant of charging through the diode, s; 0 follows at once. Of the envelope and square-law detectors.
    pub charge_s: f64,
    /// Time constant of discharge, s; 0 follows at once. Of the envelope and square-law detectors.
    pub discharge_s: f64,
}

/// Pieces of a step in which the diode begins or ceases to conduct.
const PIECES: usize = 16;

/// Coefficients of 1, s, …, s⁴ of the polynomials that are 1 at one of 0, 1/4, 1/2, 3/4, 1 and 0 at the others (Lagrange).
const POLYNOMIALS: [[f64; POINTS]; POINTS] = [
    [1.0, -25.0 / 3.0, 70.0 / 3.0, -80.0 / 3.0, 32.0 / 3.0],
    [0.0, 16.0, -208.0 / 3.0, 96.0, -128.0 / 3.0],
    [0.0, -12.0, 76.0, -128.0, 64.0],
    [0.0, 16.0 / 3.0, -112.0 / 3.0, 224.0 / 3.0, -128.0 / 3.0],
    [0.0, -1.0, 22.0 / 3.0, -16.0, 32.0 / 3.0],
];
/// Weights of the five in the value after so many pieces.
const BETWEEN: [[f64; POINTS]; PIECES + 1] = between();

const fn between() -> [[f64; POINTS]; PIECES + 1] {
    let mut all = [[0.0; POINTS]; PIECES + 1];
    let mut piece = 0;
    while piece <= PIECES {
        let s = piece as f64 / PIECES as f64;
        let mut point = 0;
        while point < POINTS {
            let [a, b, c, d, e] = POLYNOMIALS[point];
            all[piece][point] = a + s * (b + s * (c + s * (d + s * e)));
            point += 1;
        }
        piece += 1;
    }
    all
}

/// What rounding may put between the envelope and the voltage that slides along it.
const ROUNDING: f64 = 1e-9;

/// A diode, capacitor and resistor at work.
#[derive(Debug, Clone, PartialEq)]
pub struct Detector {
    whole: Stretch,
    piece: Stretch,
    voltage: f64,
    before: f64,
}

impl Detector {
    /// A detector at rest, stepped by `step_s`.
    #[must_use]
    pub fn new(settings: DetectorSettings, step_s: f64) -> Self {
        Self {
            whole: Stretch::new(settings, step_s),
            piece: Stretch::new(settings, step_s / PIECES as f64),
            voltage: 0.0,
            before: 0.0,
        }
    }

    /// Output at the end of a step over which the envelope comes to `envelope` along a straight line.
    #[inline]
    pub fn step(&mut self, envelope: f64) -> f64 {
        self.voltage = self.whole.straight(self.voltage, self.before, envelope);
        self.before = envelope;
        self.voltage
    }

    /// Mean output over a step of the envelope, of which `measure` is what charges the capacitor (its length or the square).
    #[inline]
    pub(super) fn passage<F: Fn(usize) -> Complex>(
        &mut self,
        passage: &Passage<'_, F>,
        measure: impl Fn(f64) -> f64,
    ) -> f64 {
        let envelope = passage.lengths.map(&measure);
        if !passage.smooth {
            let at = |piece: usize| measure(passage.at(piece * PARTS / PIECES).norm_sqr().sqrt());
            return self.in_pieces(envelope[0], at);
        }
        if let Some((end, mean)) = self.whole.plain(self.voltage, envelope) {
            self.voltage = end;
            return mean;
        }
        let at = |piece: usize| envelope.iter().zip(&BETWEEN[piece]).map(|(a, w)| a * w).sum();
        self.in_pieces(envelope[0], at)
    }

    /// The same piece by piece; `at` tells what charges the capacitor at the end of a piece, counted from 1.
    fn in_pieces(&mut self, mut from: f64, at: impl Fn(usize) -> f64) -> f64 {
        let mut sum = 0.0;
        for piece in 1..=PIECES {
            let to = at(piece);
            let end = self.piece.straight(self.voltage, from, to);
            sum += self.voltage + end;
            (self.voltage, from) = (end, to);
        }
        sum * (0.5 / PIECES as f64)
    }
}

/// What a stretch of time does to the voltage.
#[derive(Debug, Clone, PartialEq)]
struct Stretch {
    /// Length of the stretch in charge time constants; infinite if the diode has no resistance.
    charges: f64,
    /// Reciprocal of that, and of the length in discharge time constants.
    per_charges: f64,
    per_discharges: f64,
    /// What remains of the voltage after discharge over the stretch, and over a quarter of it.
    remains: [f64; 2],
    /// What remains of the voltage after charging, and the weights of five equidistant values of the envelope in what comes.
    charged: (f64, [f64; POINTS]),
    /// The same for an envelope that goes along a straight line: what remains, and the weights of its beginning and its end.
    straight: [f64; 3],
}

impl Stretch {
    fn new(settings: DetectorSettings, length_s: f64) -> Self {
        let in_units =
            |time_constant_s: f64| if time_constant_s > 0.0 { length_s / time_constant_s } else { f64::INFINITY };
        let (charges, discharges) = (in_units(settings.charge_s), in_units(settings.discharge_s));
        Self {
            charges,
            per_charges: 1.0 / charges,
            per_discharges: 1.0 / discharges,
            remains: [(-discharges).exp(), (-0.25 * discharges).exp()],
            charged: charging(charges),
            straight: charged(charges),
        }
    }

    /// Voltage at the end and its mean if one and the same thing goes on all the time; the envelope is the polynomial through
    /// five equidistant values.
    #[inline(always)]
    fn plain(&self, voltage: f64, envelope: [f64; POINTS]) -> Option<(f64, f64)> {
        let [from, .., to] = envelope;
        let [whole, quarter] = self.remains;
        if voltage <= from && envelope.is_sorted() {
            let (own, weights) = &self.charged;
            let end = own * voltage + envelope.iter().zip(weights).map(|(a, w)| a * w).sum::<f64>();
            return Some((end, boole(envelope) - (end - voltage) * self.per_charges));
        }
        let mut falling = voltage;
        let above = |a: &f64| {
            let is_above = falling >= *a;
            falling *= quarter;
            is_above
        };
        if whole > 0.0 && envelope.iter().all(above) {
            return Some((voltage * whole, voltage * (1.0 - whole) * self.per_discharges));
        }
        let slides = |a: &f64, b: &f64| b <= a && *b >= a * quarter;
        let on_it = (voltage - from).abs() <= ROUNDING * from;
        (on_it && envelope.is_sorted_by(slides)).then(|| (to, boole(envelope)))
    }

    /// Voltage at the end of a stretch in which the envelope goes along a straight line.
    #[inline]
    fn straight(&self, voltage: f64, from: f64, to: f64) -> f64 {
        if voltage <= from {
            let [own, first, last] = self.straight;
            let charged = own * voltage + first * from + last * to;
            if to >= from || charged < to {
                return charged;
            }
            // On its way down the envelope comes to the voltage, which slides along it or is left above it.
            let (below, above) = (from - voltage, charged - to);
            let met = if below > 0.0 && self.charges.is_finite() { below / (below + above) } else { 0.0 };
            let remains = if met > 0.0 { self.remains[0].powf(1.0 - met) } else { self.remains[0] };
            return to.max((from + (to - from) * met) * remains);
        }
        let discharged = voltage * self.remains[0];
        if discharged >= to {
            return discharged;
        }
        if to <= from || self.charges.is_infinite() {
            return to;
        }
        // The envelope comes up to the falling voltage inside the stretch and charges for the rest of it.
        let met = (voltage - from) / (voltage - from + to - discharged);
        let at = from + (to - from) * met;
        let [own, first, last] = charged(self.charges * (1.0 - met));
        (own + first) * at + last * to
    }
}

/// After `x` charge time constants in which the envelope goes along a straight line: what remains of the voltage, and the
/// weights of beginning and end of the envelope.
fn charged(x: f64) -> [f64; 3] {
    // The share of a slope that is lost behind the diode: (1 − e^(−x))/x, by its series where x is small.
    let lag = if x > 1e-4 { -(-x).exp_m1() / x } else { 1.0 - 0.5 * x };
    [(-x).exp(), lag - (-x).exp(), 1.0 - lag]
}

/// Mean of the polynomial through five equidistant values (Boole's rule).
#[inline]
fn boole([a, b, c, d, e]: [f64; POINTS]) -> f64 {
    (7.0 * (a + e) + 32.0 * (b + d) + 12.0 * c) * (1.0 / 90.0)
}

/// What remains of the voltage after `x` charge time constants, and the weights of five equidistant values of the envelope in
/// what comes: U = U₀·e^(−x) + x·∫e^(−x(1−s))·A(s) ds over 0..1, A the polynomial through the five.
fn charging(x: f64) -> (f64, [f64; POINTS]) {
    if x.is_infinite() {
        return (0.0, [0.0, 0.0, 0.0, 0.0, 1.0]);
    }
    // ∫e^(−x(1−s))·s^k ds, by parts or, where that loses digits, by its series Σ (−x)^n·k!/(n + k + 1)!.
    let mut moments = [0.0; POINTS];
    for k in 0..POINTS {
        moments[k] = if x > 4.0 {
            if k == 0 { -(-x).exp_m1() / x } else { (1.0 - k as f64 * moments[k - 1]) / x }
        } else {
            let mut term = 1.0 / (k as f64 + 1.0);
            (1..40).fold(term, |sum, n| {
                term *= -x / (n + k + 1) as f64;
                sum + term
            })
        };
    }
    let weights = POLYNOMIALS.map(|polynomial| x * polynomial.iter().zip(&moments).map(|(c, m)| c * m).sum::<f64>());
    ((-x).exp(), weights)
}

/// e^(−step/τ), and 0 for τ = 0.
pub(super) fn remains(step_s: f64, time_constant_s: f64) -> f64 {
    if time_constant_s > 0.0 { (-step_s / time_constant_s).exp() } else { 0.0 }
}
