//! The audio band: Butterworth low cut and high cut as digital sections at the internal rate.
//!
//! Bilinear transform with the corner pre-warped, so that each filter is exactly 3 dB down at its corner. Section qualities
//! Q_k = 1/(2·cos θ_k) of an n-pole Butterworth filter (textbook).

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

/// One second-order section, transposed direct form II.
#[derive(Debug, Clone, PartialEq)]
struct Section {
    b: [f64; 3],
    a: [f64; 2],
    state: [f64; 2],
}

#[derive(Debug, Clone, Copy, PartialEq)]
enum Cut {
    Low,
    High,
}

impl Section {
    /// Second order with quality `q`; `k` is tan(π·corner/rate).
    fn second_order(cut: Cut, k: f64, q: f64) -> Self {
        let norm = 1.0 / (1.0 + k / q + k * k);
        let b = match cut {
            Cut::High => [k * k * norm, 2.0 * k * k * norm, k * k * norm],
            Cut::Low => [norm, -2.0 * norm, norm],
        };
        Self { b, a: [2.0 * (k * k - 1.0) * norm, (1.0 - k / q + k * k) * norm], state: [0.0; 2] }
    }

    fn first_order(cut: Cut, k: f64) -> Self {
        let norm = 1.0 / (1.0 + k);
        let b = match cut {
            Cut::High => [k * norm, k * norm, 0.0],
            Cut::Low => [norm, -norm, 0.0],
        };
        Self { b, a: [(k - 1.0) * norm, 0.0], state: [0.0; 2] }
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

/// Sections of an n-pole Butterworth filter.
fn butterworth(cut: Cut, poles: u8, corner_hz: f64, rate_hz: f64) -> Vec<Section> {
    let k = (PI * corner_hz / rate_hz).tan();
    let n = f64::from(poles);
    let mut sections: Vec<Section> = (0..poles / 2)
        .map(|i| {
            let angle = PI * (2.0 * f64::from(i) + 1.0) / (2.0 * n);
            Section::second_order(cut, k, 1.0 / (2.0 * angle.sin()))
        })
        .collect();
    if poles % 2 == 1 {
        sections.push(Section::first_order(cut, k));
    }
    sections
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
            sections.extend(butterworth(Cut::Low, band.low_poles, band.low_hz, rate_hz));
        }
        sections.extend(butterworth(Cut::High, band.high_poles, band.high_hz, rate_hz));
        Self { sections }
    }

    /// The same with a de-emphasis behind it: one pole of the given time constant, s; 0 for none.
    #[must_use]
    pub fn with_de_emphasis(mut self, time_constant_s: f64, rate_hz: f64) -> Self {
        if time_constant_s > 0.0 {
            let k = (0.5 / (time_constant_s * rate_hz)).tan();
            self.sections.push(Section::first_order(Cut::High, k));
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

    /// Complex gain at a frequency, both in Hz.
    #[must_use]
    pub fn gain(&self, frequency_hz: f64, rate_hz: f64) -> Complex {
        let z_inverse = Complex::from_polar(1.0, -TAU * frequency_hz / rate_hz);
        self.sections.iter().map(|s| s.gain(z_inverse)).product()
    }
}
