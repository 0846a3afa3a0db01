//! How a firing rate is heard: musical pitch, or clicks.

use crate::bench::{Dimension, parse_quantity, signed};
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// Tuning note: A4 in Hz (ISO 16:1975).
pub const A4_HZ: f64 = 440.0;

/// Below this rate clicks are heard one by one, Hz (common practice: the lower end of hearing as a tone).
const SEPARATE_BELOW_HZ: f64 = 20.0;
/// Below this rate a train of clicks flutters more than it sounds, Hz (published listening descriptions of click
/// trains: below about 40 Hz separate events, a clear pitch from 43 Hz).
const FLUTTER_BELOW_HZ: f64 = 40.0;

/// What the ear makes of a train of clicks.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Hearing {
    /// Below 20 /s.
    SeparateClicks,
    /// 20 to 40 /s.
    Flutter,
    /// Above.
    Pitch,
}

/// A rate as a musical pitch.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Pitch {
    /// Nearest note of the equal-tempered scale, C4 being middle C.
    pub note: String,
    /// Distance from it in cents, −50 to 50.
    pub cents: f64,
    /// MIDI note number with its fraction: 69 + 12·log2(f/440).
    pub midi: f64,
    /// What the ear makes of it.
    pub hearing: Hearing,
}

/// The pitch of a rate in Hz; none unless it is positive and finite.
#[must_use]
pub fn pitch(rate_hz: f64) -> Option<Pitch> {
    const NAMES: [&str; 12] = ["C", "C#", "D", "D#", "E", "F", "F#", "G", "G#", "A", "A#", "B"];
    if !(rate_hz.is_finite() && rate_hz > 0.0) {
        return None;
    }
    let midi = 69.0 + 12.0 * (rate_hz / A4_HZ).log2();
    let nearest = midi.round();
    let name = NAMES[nearest.rem_euclid(12.0) as usize % NAMES.len()];
    let octave = (nearest / 12.0).floor() - 1.0;
    let hearing = if rate_hz < SEPARATE_BELOW_HZ {
        Hearing::SeparateClicks
    } else if rate_hz < FLUTTER_BELOW_HZ {
        Hearing::Flutter
    } else {
        Hearing::Pitch
    };
    Some(Pitch { note: format!("{name}{octave}"), cents: 100.0 * (midi - nearest), midi, hearing })
}

/// A text that is neither a rate nor a note.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[error("`{text}` is neither a rate nor a note; write for example 440Hz, A4, C#5 or Bb3 (C-1 to B9, A4 = 440 Hz)")]
pub struct NotATarget {
    /// The text as given.
    pub text: String,
}

/// A firing rate in Hz from text: a frequency such as `440 Hz`, or a note of the equal-tempered scale such as `A4`, `C#5`,
/// `Bb3`.
///
/// # Errors
/// [`NotATarget`] shows what would be right.
pub fn parse_target(text: &str) -> Result<f64, NotATarget> {
    if let Some(rate) = note_hz(text.trim()) {
        return Ok(rate);
    }
    let rate = parse_quantity(text, Dimension::Frequency).ok().map(|rate| rate.value).filter(|rate| *rate > 0.0);
    rate.ok_or_else(|| NotATarget { text: text.trim().to_owned() })
}

/// Frequency of a note.
fn note_hz(text: &str) -> Option<f64> {
    let mut signs = text.chars();
    let step = match signs.next()?.to_ascii_uppercase() {
        'C' => 0,
        'D' => 2,
        'E' => 4,
        'F' => 5,
        'G' => 7,
        'A' => 9,
        'B' => 11,
        _ => return None,
    };
    let rest = signs.as_str();
    let (shift, octave) = match rest.strip_prefix(['#', '♯']) {
        Some(octave) => (1, octave),
        None => rest.strip_prefix(['b', '♭']).map_or((0, rest), |octave| (-1, octave)),
    };
    let octave: i32 = octave.parse().ok().filter(|octave| (-1..=9).contains(octave))?;
    let midi = 12 * (octave + 1) + step + shift;
    Some(A4_HZ * (f64::from(midi - 69) / 12.0).exp2())
}

impl Pitch {
    /// In words: `G2 +35 cents`, `flutter`, `separate clicks`.
    #[must_use]
    pub fn words(&self) -> String {
        let note = format!("{} {} cents", self.note, signed(self.cents, 0));
        match self.hearing {
            Hearing::SeparateClicks => "separate clicks, no pitch".to_owned(),
            Hearing::Flutter => format!("flutter, hardly a pitch yet (near {note})"),
            Hearing::Pitch => format!("{note} (MIDI {:.2}; A4 = 440 Hz)", self.midi),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn midi_numbers_follow_the_definition() {
        // 69 + 12·log2(f/440) worked out to the printed digits; 27.5 Hz is A0 exactly.
        let rows = [(100.0, 43.35), (120.0, 46.506), (50.0, 31.350), (60.0, 34.506), (27.5, 21.0), (1000.0, 83.213)];
        for (rate, midi) in rows {
            // Half a unit of the last printed digit.
            let digits = if rate == 100.0 { 0.005 } else { 0.0005 };
            assert!((pitch(rate).unwrap().midi - midi).abs() <= digits, "{rate}");
        }
    }

    #[test]
    fn published_notes_are_named() {
        // ISO 16:1975 A4 = 440 Hz; published: 453 Hz lies 50.4 cents above A4, 261.63 Hz is middle C, number 60; notes
        // 0 and 127 are 8.18 and 12543.85 Hz.
        assert!((100.0 * (pitch(453.0).unwrap().midi - 69.0) - 50.4).abs() < 0.05);
        let middle_c = pitch(261.63).unwrap();
        assert_eq!((middle_c.note.as_str(), middle_c.midi.round()), ("C4", 60.0));
        assert_eq!(pitch(12_543.85).unwrap().midi.round(), 127.0);
        assert_eq!(pitch(8.18).unwrap().note, "C-1");
        let hum = pitch(100.0).unwrap();
        assert_eq!(hum.words(), "G2 +35 cents (MIDI 43.35; A4 = 440 Hz)");
    }

    #[test]
    fn slow_trains_are_clicks_then_flutter_then_a_pitch() {
        assert_eq!(pitch(2.0).unwrap().words(), "separate clicks, no pitch");
        assert_eq!(pitch(19.9).unwrap().hearing, Hearing::SeparateClicks);
        assert!(pitch(25.0).unwrap().words().starts_with("flutter"));
        assert_eq!(pitch(40.0).unwrap().hearing, Hearing::Pitch);
    }

    #[test]
    fn a_target_is_a_rate_or_a_note() {
        let near = |text: &str, rate: f64| (parse_target(text).unwrap() / rate - 1.0).abs() < 1e-5;
        // Equal temperament about A4 = 440 Hz (ISO 16:1975): middle C is 261.6256 Hz.
        assert!(near("A4", 440.0) && near("440Hz", 440.0) && near("0.44 kHz", 440.0) && near("C4", 261.6256));
        assert!(near("c#5", 554.3653) && near("Bb3", 233.0819) && near("B♭3", 233.0819) && near("C-1", 8.175_799));
        for wrong in ["", "H4", "A", "A44", "440", "-440 Hz", "440 V", "A#b4", "A4 Hz"] {
            let error = parse_target(wrong).expect_err(wrong).to_string();
            assert!(error.contains("440Hz") && !error.contains('\n'), "{error}");
        }
    }

    #[test]
    fn no_rate_has_no_pitch() {
        for rate in [0.0, -1.0, f64::NAN, f64::INFINITY] {
            assert_eq!(pitch(rate), None);
        }
    }
}
