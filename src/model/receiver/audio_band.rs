//! The audio band: Butterworth low cut and high cut as digital sections at the internal rate.
//!
//! Section qualities Q_k = 1/(2·cos θ_k) of an n-pole Butterworth filter (textbook). The poles of a section are those of its
//! circuit, e^(p·step) (matched z-transform, textbook), so it rings as the circuit does. Its zeros are simple ones, and what is
//! left is smooth in frequency: [`AudioFilter::bend`] tells it, and the decimator gives it back.

use super::Complex;
use serde::{Deserialize, Serialize};
use std::f64::consts::{PI, TAU};

/// Corners and steepness of the audio band.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct AudioBand {
    /// Low corner (−3 dB), Hz; 0 lets everything through down to zero.
    pub low_hz: f64,
    /// Poles of the low cut, 1 or 2.
    pub low_poles: u8,
    /// High corner (−3 dB), Hz.
    pub high_hz: f64,
    /// Poles of the high cut, 1..=8.
    pub high_poles: u8,
}

/// One section of second order, transposed direct form II, and the circuit that it stands for.
#[derive(Debug, Clone, PartialEq)]
struct Section {
    circuit: Circuit,
    b: [f64; 3],
    a: [f64; 2],
    state: [f64; 2],
}

#[derive(Debug, Clone, Copy, PartialEq)]
enum Cut {
    Low,
    High,
}

/// A high cut or low cut of first or second order.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Circuit {
    cut: Cut,
    /// Corner in cycles per sample.
    corner: f64,
    /// 1/Q; none of first order.
    damping: Option<f64>,
}

impl Circuit {
    /// Gain at a frequency in cycles per sample.
    fn gain(self, cycles: f64) -> Complex {
        let s = Complex::new(0.0, cycles / self.corner);
        let passed = match (self.cut, self.damping) {
            (Cut::High, _) => Complex::from(1.0),
            (Cut::Low, None) => s,
            (Cut::Low, Some(_)) => s * s,
        };
        passed / (1.0 + s * self.damping.map_or(Complex::from(1.0), |damping| damping + s))
    }
}

impl Section {
    fn new(circuit: Circuit) -> Self {
        let Circuit { cut, corner, damping } = circuit;
        let w = TAU * corner;
        let a = match damping {
            None => [-(-w).exp(), 0.0],
            Some(damping) => {
                let (fall, turn) = (0.5 * damping * w, w * (1.0 - 0.25 * damping * damping).sqrt());
                [-2.0 * (-fall).exp() * turn.cos(), (-2.0 * fall).exp()]
            }
        };
        // Gain 1 at zero of a high cut, at half the rate of a low cut.
        let side = if cut == Cut::High { 1.0 } else { -1.0 };
        let b = match damping {
            None => [0.5, 0.5 * side, 0.0],
            Some(_) => [0.25, 0.5 * side, 0.25],
        };
        let whole = 1.0 + side * a[0] + a[1];
        Self { circuit, b: b.map(|b| b * whole), a, state: [0.0; 2] }
    }

    #[inline]
    fn step(&mut self, x: f64) -> f64 {
        let y = self.b[0] * x + self.state[0];
        self.state[0] = self.b[1] * x - self.a[0] * y + self.state[1];
        self.state[1] = self.b[2] * x - self.a[1] * y;
        y
    }

    fn gain(&self, z_inverse: Complex) -> Complex {
        let numerator = self.b[0] + z_inverse * (self.b[1] + z_inverse * self.b[2]);
        numerator / (1.0 + z_inverse * (self.a[0] + z_inverse * self.a[1]))
    }
}

/// Sections of an n-pole Butterworth filter with a corner in cycles per sample.
fn butterworth(cut: Cut, poles: u8, corner: f64) -> Vec<Section> {
    let n = f64::from(poles);
    let damping = |i: u8| 2.0 * (PI * (2.0 * f64::from(i) + 1.0) / (2.0 * n)).sin();
    let single = (poles % 2 == 1).then_some(None);
    let dampings = (0..poles / 2).map(|i| Some(damping(i))).chain(single);
    dampings.map(|damping| Section::new(Circuit { cut, corner, damping })).collect()
}

/// The audio filters at work.
#[derive(Debug, Clone, PartialEq)]
pub struct AudioFilter {
    sections: Vec<Section>,
}

impl AudioFilter {
    /// Filters at rest at an internal rate in Hz, which must be above twice the high corner.
    #[must_use]
    pub fn new(band: AudioBand, rate_hz: f64) -> Self {
        let mut sections = Vec::new();
        if band.low_hz > 0.0 {
            sections.extend(butterworth(Cut::Low, band.low_poles, band.low_hz / rate_hz));
        }
        sections.extend(butterworth(Cut::High, band.high_poles, band.high_hz / rate_hz));
        Self { sections }
    }

    /// The same with a de-emphasis behind it: one pole of the given time constant, s; 0 for none.
    #[must_use]
    pub fn with_de_emphasis(mut self, time_constant_s: f64, rate_hz: f64) -> Self {
        if time_constant_s > 0.0 {
            let corner = 1.0 / (TAU * time_constant_s * rate_hz);
            self.sections.push(Section::new(Circuit { cut: Cut::High, corner, damping: None }));
        }
        self
    }

    /// Next output.
    #[inline]
    pub fn step(&mut self, input: f64) -> f64 {
        self.sections.iter_mut().fold(input, |x, section| section.step(x))
    }

    /// Puts states that are far below anything audible to rest, where arithmetic on them would become slow.
    pub fn settle(&mut self) {
        for state in self.sections.iter_mut().flat_map(|section| &mut section.state) {
            if state.abs() < 1e-30 {
                *state = 0.0;
            }
        }
    }

    /// Complex gain of the circuits at a frequency, at the internal rate of the filter, both in Hz.
    #[must_use]
    pub fn gain(&self, frequency_hz: f64, rate_hz: f64) -> Complex {
        self.sections.iter().map(|section| section.circuit.gain(frequency_hz / rate_hz)).product()
    }

    /// Gain of the circuits over that of the sections at a frequency above 0, in cycles per sample.
    #[must_use]
    pub fn bend(&self, cycles: f64) -> Complex {
        let z_inverse = Complex::from_polar(1.0, -TAU * cycles);
        self.sections.iter().map(|section| section.circuit.gain(cycles) / section.gain(z_inverse)).product()
    }
}
